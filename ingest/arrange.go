package ingest

import (
	"bytes"
	"fmt"
	"math"
	"path/filepath"
	"slices"
	"strings"
)

// order is how the rows of the table are arranged in lots and wafers.
type order struct {
	lots []lotRange
	perm []int32 // row of the table by place; nil: as they are
	rank []int32 // by place: order of test for retests where it is not the place itself; nil otherwise
	n    int     // places
}

type lotRange struct {
	id     string
	lo, hi int
	wafers []Wafer // Lo, Hi relative to lo
	files  []bool
}

// rowKeys are the rows in runs of the same lot and wafer, in the order read.
type rowKeys struct {
	runs   []run
	groups []groupKey
	counts []int // measurements, by group
	rows   []int // rows of the files, by group
}

// run is neighbouring rows of one group; -1: they are not used.
type run struct{ group, lo, hi int32 }

type groupKey struct{ lot, wafer string }

// keys finds lot and wafer of every row.
func (t *readings) keys() rowKeys {
	k := rowKeys{}
	ids := map[groupKey]int32{}
	row := int32(0)
	unnamed, unnamedLot, summaries := 0, "", 0
	for _, c := range t.chunks {
		lots, wafers := &c.text[textLot], &c.text[textWafer]
		def := t.files[c.file].defaults()
		if code, ok := oneCode(lots.codes); ok && code >= 0 {
			def.lot = lots.dict[code] // of cells left empty in a file of one lot
		}
		for i := 0; i < c.n; {
			lc, wc := codeAt(lots.codes, i), codeAt(wafers.codes, i)
			end := i + sameCodes(lots.codes, i, c.n)
			end = i + sameCodes(wafers.codes, i, end)
			key := def
			if lc >= 0 {
				key.lot = lots.dict[lc]
			}
			if wc >= 0 {
				key.wafer = wafers.dict[wc]
			}
			group := int32(-1)
			summary := isSummary(key) && c.unplaced(i, end)
			if key.wafer != "" && !summary {
				id, ok := ids[key]
				if !ok {
					id = int32(len(k.groups))
					ids[key] = id
					k.groups = append(k.groups, key)
					k.counts, k.rows = append(k.counts, 0), append(k.rows, 0)
				}
				group = id
			}
			if lots.codes != nil && lc < 0 && group >= 0 {
				unnamed += end - i
				unnamedLot = key.lot
			}
			rows := end - i
			if c.weight != nil {
				rows = 0
				for _, w := range c.weight[i:end] {
					rows += int(w)
				}
			}
			if group >= 0 {
				k.counts[group] += end - i
				k.rows[group] += rows
			} else if summary {
				t.tally.Discarded["summary-row"] += rows
				summaries += rows
			} else {
				t.tally.Discarded["no-wafer"] += rows // of a Table; files were told by row
			}
			k.runs = append(k.runs, run{group, row, row + int32(end-i)})
			row += int32(end - i)
			i = end
		}
	}
	if summaries > 0 {
		t.note(all, Warning, "summary-row", fmt.Sprintf("%d %s a word for a sum or a mean where lot or wafer should stand, and no coordinates; not used", summaries, plural(summaries, "row has", "rows have")),
			"export the dice without rows of totals", summaries)
	}
	t.sameWafers(&k)
	if unnamed > 0 {
		t.note(all, Warning, "no-lot", fmt.Sprintf("%d %s an empty lot cell; taken for lot %s", unnamed, plural(unnamed, "row has", "rows have"), unnamedLot), "fill the lot column", unnamed)
	}
	return k
}

func codeAt(codes []int32, i int) int32 {
	if codes == nil {
		return -1
	}
	return codes[i]
}

// sameCodes counts the cells from i on, before end, that are as cell i.
func sameCodes(codes []int32, i, end int) int {
	if codes == nil {
		return end - i
	}
	c, j := codes[i:end], 0
	// Whole stretches first: they are all the same when moving them by one
	// changes nothing, and comparing bytes is fast.
	const stretch = 4096
	for len(c)-j > stretch && bytes.Equal(bytesOf(c[j:j+stretch]), bytesOf(c[j+1:j+1+stretch])) {
		j += stretch
	}
	for j < len(c) && c[j] == c[0] {
		j++
	}
	return j
}

// defaults are lot and wafer of rows that do not say: from a comment, else the
// lot is named after the file.
func (f *fileData) defaults() groupKey {
	k := groupKey{lot: f.lot, wafer: f.wafer}
	if k.lot == "" {
		k.lot = filepath.Base(f.input.File)
		for _, ext := range []string{".gz", ".zst", ".csv", ".txt", ".tsv", ".dat"} {
			if n := len(k.lot) - len(ext); n > 0 && strings.EqualFold(k.lot[n:], ext) {
				k.lot = k.lot[:n]
			}
		}
	}
	return k
}

// arrange sorts rows by lot, wafer and touchdown.
func (t *readings) arrange(opt *Options) (*order, error) {
	k := t.keys()
	t.overlap(&k)
	by := make([]int32, len(k.groups))
	for i := range by {
		by[i] = int32(i)
	}
	slices.SortStableFunc(by, func(a, b int32) int {
		ga, gb := k.groups[a], k.groups[b]
		if c := natural(ga.lot, gb.lot); c != 0 {
			return c
		}
		return natural(ga.wafer, gb.wafer)
	})
	o := &order{}
	var have []string
	start := make([]int32, len(k.groups)) // next place of each group; -1: not wanted
	for _, g := range by {
		key := k.groups[g]
		if len(have) == 0 || have[len(have)-1] != key.lot {
			have = append(have, key.lot)
		}
		if opt.Lot != "" && key.lot != opt.Lot {
			start[g] = -1
			t.tally.Discarded["other-lot"] += k.rows[g]
			continue
		}
		t.tally.Used += k.rows[g]
		if len(o.lots) == 0 || o.lots[len(o.lots)-1].id != key.lot {
			o.lots = append(o.lots, lotRange{id: key.lot, lo: o.n, files: make([]bool, len(t.files))})
		}
		l := &o.lots[len(o.lots)-1]
		start[g] = int32(o.n)
		l.wafers = append(l.wafers, Wafer{ID: key.wafer, Lo: o.n - l.lo, Hi: o.n - l.lo + k.counts[g]})
		o.n += k.counts[g]
		l.hi = o.n
	}
	switch {
	case len(have) == 0:
		return nil, &Error{File: t.files[0].input.File, What: "no row could be used: " + t.reasons(), Remedy: "look at the rows named, and at the separator and decimal sign"}
	case len(o.lots) == 0:
		return nil, &Error{File: t.files[0].input.File, What: "there is no lot " + quote(opt.Lot) + "; the lots here are " + list(have, 20), Remedy: "choose one of them with --lot"}
	}
	t.permute(o, &k, start)
	return o, nil
}

// reasons lists why rows were not used.
func (t *readings) reasons() string {
	var texts []string
	for _, r := range sortedKeys(t.tally.Discarded) {
		if n := t.tally.Discarded[r]; n > 0 {
			texts = append(texts, fmt.Sprintf("%d %s", n, r))
		}
	}
	return list(texts, 8)
}

// permute fills the order of rows: stable by group, then by touchdown. The
// usual file is in that order already, and nothing is made.
func (t *readings) permute(o *order, k *rowKeys, start []int32) {
	lotOf := make([]int, len(k.groups))
	for li := range o.lots {
		for g, s := range start {
			if s >= int32(o.lots[li].lo) && s < int32(o.lots[li].hi) {
				lotOf[g] = li
			}
		}
	}
	fileEnd, file := make([]int32, len(t.chunks)), 0
	for i, c := range t.chunks {
		fileEnd[i] = int32(c.n)
		if i > 0 {
			fileEnd[i] += fileEnd[i-1]
		}
	}
	next := slices.Clone(start)
	total, same := int32(0), true
	for _, r := range k.runs {
		for r.lo >= fileEnd[file] {
			file++
		}
		if r.group >= 0 && start[r.group] >= 0 {
			l, c := &o.lots[lotOf[r.group]], t.chunks[file]
			l.files[c.file] = l.files[c.file] || c.files == nil
			if c.files != nil {
				at := fileEnd[file] - int32(c.n)
				for _, f := range c.files[r.lo-at : r.hi-at] {
					l.files[f] = true
				}
			}
			same = same && next[r.group] == r.lo
			next[r.group] += r.hi - r.lo
		}
		total = r.hi
	}
	same = same && int(total) == o.n
	touchdown := t.flatInts(intTouchdown, false)
	if same && (touchdown == nil || rising(o, touchdown)) {
		return
	}
	o.perm = make([]int32, o.n)
	copy(next, start)
	for _, r := range k.runs {
		if r.group < 0 || start[r.group] < 0 {
			continue
		}
		for row := r.lo; row < r.hi; row++ {
			o.perm[next[r.group]] = row
			next[r.group]++
		}
	}
	if touchdown == nil {
		return
	}
	for li := range o.lots {
		l := &o.lots[li]
		for _, w := range l.wafers {
			byTouchdown(o.perm[l.lo+w.Lo:l.lo+w.Hi], touchdown, o, l.lo+w.Lo)
		}
	}
}

// rising says whether touchdown numbers, in the order of the rows, never fall
// within a wafer.
func rising(o *order, touchdown []int32) bool {
	for li := range o.lots {
		l := &o.lots[li]
		for _, w := range l.wafers {
			last := int32(math.MinInt32)
			for _, v := range touchdown[l.lo+w.Lo : l.lo+w.Hi] {
				if v == Missing {
					continue
				}
				if v < last {
					return false
				}
				last = v
			}
		}
	}
	return true
}

// byTouchdown sorts the rows of one wafer by the file's touchdown numbers.
//
// The numbers may start again when dice are tested a second time. Then few of
// them are smaller than the one before, and the order of retests is that of the
// rows; where many are, the file is sorted otherwise and the numbers tell.
// Rows without a number stay behind the row before them.
func byTouchdown(rows []int32, touchdown []int32, o *order, at int) {
	keys := make([]int32, len(rows))
	last, descents := int32(math.MinInt32), 0
	for i, r := range rows {
		if v := touchdown[r]; v != Missing {
			if v < last {
				descents++
			}
			last = v
		}
		keys[i] = last
	}
	if descents == 0 {
		return
	}
	place := make([]int32, len(rows))
	for i := range place {
		place[i] = int32(i)
	}
	slices.SortStableFunc(place, func(a, b int32) int { return cmpInt32(keys[a], keys[b]) })
	old := slices.Clone(rows)
	for i, p := range place {
		rows[i] = old[p]
	}
	if descents <= 1+len(rows)/50 {
		if o.rank == nil {
			o.rank = make([]int32, o.n)
			for i := range o.rank {
				o.rank[i] = int32(i)
			}
		}
		for i, p := range place {
			o.rank[at+i] = int32(at) + p
		}
	}
}

func cmpInt32(a, b int32) int {
	switch {
	case a < b:
		return -1
	case a > b:
		return 1
	}
	return 0
}

func plural(n int, one, many string) string {
	if n == 1 {
		return one
	}
	return many
}

func sortedKeys[V any](m map[string]V) []string {
	keys := make([]string, 0, len(m))
	for k := range m {
		keys = append(keys, k)
	}
	slices.Sort(keys)
	return keys
}

// natural compares texts with the numbers in them by value: 2 before 10, and
// 02 after 2 where nothing else differs.
func natural(a, b string) int {
	for i, j := 0, 0; ; {
		if i == len(a) || j == len(b) {
			if i == len(a) && j == len(b) {
				return strings.Compare(a, b)
			}
			return cmpInt32(int32(len(a)-i), int32(len(b)-j))
		}
		da, db := digits(a[i:]), digits(b[j:])
		if da > 0 && db > 0 {
			na, nb := strings.TrimLeft(a[i:i+da], "0"), strings.TrimLeft(b[j:j+db], "0")
			if len(na) != len(nb) {
				return cmpInt32(int32(len(na)), int32(len(nb)))
			}
			if c := strings.Compare(na, nb); c != 0 {
				return c
			}
			i, j = i+da, j+db
			continue
		}
		if a[i] != b[j] {
			return cmpInt32(int32(a[i]), int32(b[j]))
		}
		i, j = i+1, j+1
	}
}

func digits(s string) int {
	n := 0
	for n < len(s) && s[n]-'0' <= 9 {
		n++
	}
	return n
}
