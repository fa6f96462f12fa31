package ingest

import (
	"context"
	"fmt"
	"math"
	"path/filepath"
	"slices"
	"strings"

	"kneepoint/config"
)

// readings are the measurements of all files in columns, before cleaning: one row
// a measurement of one die, in the order of the files.
type readings struct {
	sch       *schema
	files     []*fileData
	chunks    []*chunk // wide ones
	tests     []testInfo
	findings  []Finding
	tally     Tally
	siteIsDie bool // a long table without coordinates or parts: the site tells dice apart
}

// testInfo is what files and product say of one test of the schema.
type testInfo struct {
	name         string
	used         bool
	product      int           // index in the product file, -1
	units        []config.Unit // by file: unit of the values in its chunks
	unit         config.Unit   // for showing
	lower, upper float64       // SI
	limitsFrom   string
	condition    string
	measures     string
	clamp, floor float64
	number       int
	declared     bool // a file gives it a unit or limits, or the product names it
}

func (t *readings) note(s Severity, code, text, remedy string, dice int) {
	t.findings = append(t.findings, Finding{Code: code, Severity: s, Text: text, Remedy: remedy, Dice: dice})
}

// lots turns the table into a batch.
func (t *readings) lots(ctx context.Context, opt *Options) (*Batch, error) {
	t.tally.Discarded = map[string]int{}
	for _, f := range t.files {
		t.fileFindings(f)
	}
	t.pivot()
	t.describeTests(opt.Product)
	t.cellFindings()
	o, err := t.arrange(opt)
	if err != nil {
		return nil, err
	}
	b := &Batch{Findings: t.findings}
	for _, f := range t.files {
		b.Inputs = append(b.Inputs, f.input)
	}
	drafts, err := t.gather(ctx, o, opt)
	if err != nil {
		return nil, err
	}
	t.constants(drafts)
	for _, d := range drafts {
		l := d.lot(opt)
		b.Lots = append(b.Lots, l)
		t.tally.Measurements += d.measurements
		t.tally.Dice += l.Len()
		t.tally.Earlier += len(l.earlier.Of)
		t.tally.Duplicates += d.duplicates
	}
	b.Tally = t.tally
	b.Tally.check(t)
	return b, nil
}

// check holds the account of rows; a wrong one is a defect of this package.
func (y *Tally) check(t *readings) {
	sum := y.Used
	for _, n := range y.Discarded {
		sum += n
	}
	wide := true
	for _, f := range t.files {
		wide = wide && (f.layout == nil || !f.layout.long)
	}
	if sum != y.Rows || y.Measurements != y.Dice+y.Earlier+y.Duplicates || wide && y.Used != y.Measurements {
		panic(fmt.Sprintf("ingest: rows are not accounted for: %+v", *y))
	}
}

// order is how the rows of the table are arranged in lots and wafers.
type order struct {
	lots   []lotRange
	perm   []int32 // row of the table by place; nil: as they are
	rank   []int32 // by place: order of test for retests where it is not the place itself; nil otherwise
	n      int     // places
	lotIDs []string
}

type lotRange struct {
	id     string
	lo, hi int
	wafers []Wafer // Lo, Hi relative to lo
	files  []bool
}

// rowKeys gives every row its group, -1 for rows that are not used.
type rowKeys struct {
	group  []int32
	groups []groupKey
	counts []int // measurements
	rows   []int // rows of the files
}

type groupKey struct{ lot, wafer string }

// keys finds lot and wafer of every row.
func (t *readings) keys(opt *Options) rowKeys {
	total := 0
	for _, c := range t.chunks {
		total += c.n
	}
	k := rowKeys{group: make([]int32, 0, total)}
	ids := map[groupKey]int32{}
	for _, c := range t.chunks {
		lots, wafers := &c.text[textLot], &c.text[textWafer]
		def := t.files[c.file].defaults()
		lastLot, lastWafer, last := int32(-2), int32(-2), int32(-1)
		for i := range c.n {
			lc, wc := int32(-1), int32(-1)
			if lots.codes != nil {
				lc = lots.codes[i]
			}
			if wafers.codes != nil {
				wc = wafers.codes[i]
			}
			if lc != lastLot || wc != lastWafer {
				lastLot, lastWafer = lc, wc
				key := def
				if lc >= 0 {
					key.lot = lots.dict[lc]
				}
				if wc >= 0 {
					key.wafer = wafers.dict[wc]
				}
				if key.wafer == "" {
					last = -1
				} else if id, ok := ids[key]; ok {
					last = id
				} else {
					last = int32(len(k.groups))
					ids[key] = last
					k.groups = append(k.groups, key)
					k.counts, k.rows = append(k.counts, 0), append(k.rows, 0)
				}
			}
			k.group = append(k.group, last)
			rows := 1
			if c.weight != nil {
				rows = int(c.weight[i])
			}
			if last >= 0 {
				k.counts[last]++
				k.rows[last] += rows
			} else {
				t.tally.Discarded["no-wafer"] += rows
			}
		}
	}
	return k
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
	k := t.keys(opt)
	if n := t.tally.Discarded["no-wafer"]; n > 0 {
		t.note(Warning, "no-wafer", fmt.Sprintf("%d %s no wafer id and cannot be placed; not used", n, plural(n, "row has", "rows have")),
			"fill the wafer column, also where a spreadsheet left it out below the first row", n)
	}
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

// permute fills the order of rows: stable by group, then by touchdown.
func (t *readings) permute(o *order, k *rowKeys, start []int32) {
	perm := make([]int32, o.n)
	next := slices.Clone(start)
	file := 0
	row := 0
	same := o.n == len(k.group)
	lotOf := make([]int, len(k.groups))
	for li := range o.lots {
		for g, s := range start {
			if s >= int32(o.lots[li].lo) && s < int32(o.lots[li].hi) {
				lotOf[g] = li
			}
		}
	}
	for _, c := range t.chunks {
		file = c.file
		last := int32(-1)
		for range c.n {
			g := k.group[row]
			if g >= 0 && start[g] >= 0 {
				p := next[g]
				perm[p] = int32(row)
				same = same && p == int32(row)
				next[g]++
				if g != last {
					o.lots[lotOf[g]].files[file] = true
					last = g
				}
			}
			row++
		}
	}
	if touchdown := t.flatInts(intTouchdown, false); touchdown != nil {
		for li := range o.lots {
			l := &o.lots[li]
			for _, w := range l.wafers {
				if byTouchdown(perm[l.lo+w.Lo:l.lo+w.Hi], touchdown, o, l.lo+w.Lo) {
					same = false
				}
			}
		}
	}
	if !same {
		o.perm = perm
	}
}

// byTouchdown sorts the rows of one wafer by the file's touchdown numbers and
// says whether it had to.
//
// The numbers may start again when dice are tested a second time. Then few of
// them are smaller than the one before, and the order of retests is that of the
// rows; where many are, the file is sorted otherwise and the numbers tell.
// Rows without a number stay behind the row before them.
func byTouchdown(rows []int32, touchdown []int32, o *order, at int) bool {
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
		return false
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
	return true
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
