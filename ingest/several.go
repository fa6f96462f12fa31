package ingest

import (
	"errors"
	"fmt"
	"path/filepath"
	"slices"
	"strings"
)

// What belongs to reading several files as one: their order, the lots they are
// of, and what they say differently of the same lot.

// skipped notes a file that could not be read; false when it is the only one.
func (t *readings) skipped(err error, files int) bool {
	var e *Error
	if files < 2 || !errors.As(err, &e) {
		return false
	}
	t.note(all, Severe, "file-not-read", fmt.Sprintf("%s: %s; the file was left out", e.File, e.What), e.Remedy, 0)
	return true
}

// byTime orders the files by the time at which their test began, where all of
// them say it: the same die in two files was then retested in the later one.
func (t *readings) byTime() {
	for _, f := range t.files {
		if f.start == 0 {
			return
		}
	}
	before := slices.Clone(t.files)
	slices.SortStableFunc(t.files, func(a, b *fileData) int {
		switch {
		case a.start < b.start:
			return -1
		case a.start > b.start:
			return 1
		}
		return 0
	})
	for i, f := range t.files {
		f.data.file = i
		if len(t.files) > 1 && f != before[i] {
			t.timed = true
		}
	}
}

// lotIDs are the lots that the rows of a file name, in order of first use.
func (f *fileData) lotIDs() []string {
	ids := f.data.text[textLot].dict
	if f.data.text[textLot].codes == nil {
		ids = nil
	}
	if len(ids) == 0 && f.lot != "" {
		ids = []string{f.lot}
	}
	return ids
}

// identify gives a file without lot id the lot of the others, when they are all
// of one. Files of a folder, pattern or archive none of which has a lot id are
// one lot, named after it; a file that was named itself is a lot named after the
// file.
func (t *readings) identify() {
	var known, without []string
	for _, f := range t.files {
		ids := f.lotIDs()
		if len(ids) == 0 {
			without = append(without, f.input.File)
		}
		for _, id := range ids {
			if !slices.Contains(known, id) {
				known = append(known, id)
			}
		}
	}
	if len(without) == 0 || len(t.files) == 1 && t.files[0].container == "" {
		return
	}
	if len(known) > 1 {
		t.note(all, Warning, "lot-unknown", fmt.Sprintf("%d %s no lot id, and the others are of %d lots; each is taken as a lot named after the file: %s", len(without),
			plural(len(without), "file has", "files have"), len(known), list(without, 8)), "add the lot id to these files", 0)
		return
	}
	for _, f := range t.files {
		if len(f.lotIDs()) > 0 {
			continue
		}
		if len(known) == 1 {
			f.lot = known[0]
		} else if f.container != "" {
			f.lot = containerName(f.container)
		}
	}
	if len(known) == 1 {
		t.note(all, Info, "lot-of-other-files", fmt.Sprintf("%d %s no lot id and %s taken to be of lot %s, as the others are: %s", len(without), plural(len(without), "file has", "files have"),
			plural(len(without), "is", "are"), known[0], list(without, 8)), "add the lot id to these files if that is wrong", 0)
	}
}

// containerName names a lot after the folder, pattern or archive it lies in.
func containerName(c string) string {
	name := strings.Trim(strings.Map(func(r rune) rune {
		if strings.ContainsRune("*?[]", r) {
			return -1
		}
		return r
	}, stemOf(absolute(c))), " -_.")
	if name == "" || name == "/" {
		return "lot"
	}
	return name
}

// spread turns attributes that files of one batch say differently into columns,
// so that they become attributes of wafers or dice.
func (t *readings) spread() {
	if len(t.files) < 2 {
		return
	}
	values := map[string]map[string]bool{}
	var order []string
	for _, f := range t.files {
		for _, kv := range f.attributes {
			key := strings.ToLower(kv[0])
			if isRole(kv[0], "lot") || isRole(kv[0], "wafer") {
				continue
			}
			if values[key] == nil {
				values[key] = map[string]bool{}
				order = append(order, kv[0])
			}
			values[key][kv[1]] = true
		}
	}
	for _, name := range order {
		if len(values[strings.ToLower(name)]) < 2 {
			continue
		}
		slot := textProduct
		if !isRole(name, roleProduct) {
			slot = t.sch.attribute(name)
		}
		var g globalText
		code := make([]int32, len(t.files))
		for i, f := range t.files {
			code[i] = -1
			var rest [][2]string
			for _, kv := range f.attributes {
				if strings.EqualFold(kv[0], name) {
					code[i] = g.code(kv[1])
				} else {
					rest = append(rest, kv)
				}
			}
			f.attributes = rest
		}
		for _, c := range t.chunks {
			for len(c.text) <= slot {
				c.text = append(c.text, textColumn{})
			}
			c.spread(slot, code, g.dict)
		}
	}
}

// spread fills a text column of a chunk with the value of each row's file, where
// the file has no such column of its own.
func (c *chunk) spread(slot int, code []int32, dict []string) {
	col := &c.text[slot]
	if col.codes != nil {
		return
	}
	col.dict, col.codes = dict, make([]int32, c.n)
	for i := range col.codes {
		file := c.file
		if c.files != nil {
			file = int(c.files[i])
		}
		col.codes[i] = code[file]
	}
}

// overlap notes wafers that several files have rows of, and in which order
// measurements of the same die are taken.
func (t *readings) overlap(k *rowKeys) {
	if len(t.files) < 2 {
		return
	}
	files := make([]map[int32]bool, len(k.groups))
	chunk, end := 0, int32(t.chunks[0].n)
	for _, r := range k.runs {
		for r.lo >= end {
			chunk++
			end += int32(t.chunks[chunk].n)
		}
		if r.group < 0 {
			continue
		}
		if files[r.group] == nil {
			files[r.group] = map[int32]bool{}
		}
		c := t.chunks[chunk]
		if c.files == nil {
			files[r.group][int32(c.file)] = true
			continue
		}
		at := end - int32(c.n)
		for _, f := range c.files[r.lo-at : r.hi-at] {
			files[r.group][f] = true
		}
	}
	n, first := 0, ""
	for g, f := range files {
		if len(f) > 1 {
			if n++; n == 1 {
				first = k.groups[g].wafer
			}
		}
	}
	if n == 0 {
		return
	}
	order := "the order in which the files are named, those of a folder or archive by name"
	if t.timed || slices.IndexFunc(t.files, func(f *fileData) bool { return f.start == 0 }) < 0 {
		order = "the order of the files' start times"
	}
	t.note(all, Info, "wafer-in-several-files", fmt.Sprintf("%d %s rows in more than one file, wafer %s first; a die in two of them was retested in the later one, by %s",
		n, plural(n, "wafer has", "wafers have"), quote(first), order), "", 0)
}

// absolute resolves "." and "..", which name nothing.
func absolute(path string) string {
	if a, err := filepath.Abs(path); err == nil {
		return a
	}
	return path
}
