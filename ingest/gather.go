package ingest

import (
	"context"
	"math"
	"runtime"
	"slices"
	"strconv"

	"golang.org/x/sync/errgroup"

	"kneepoint/config"
)

// draft is one lot on its way: every measurement of every die, sorted by wafer
// and touchdown, values in SI. Cleaning makes a Lot of it.
type draft struct {
	id        string
	n         int
	wafers    []Wafer
	ints      [intNumber][]int32 // by slot; nil: absent
	pass      []int8
	text      [][]int32 // by text slot, codes of dict; nil: absent
	dict      [][]string
	textNames []string
	values    [][]float64 // by test of tests
	tests     []testInfo
	slots     []int   // of the tests in the schema
	rank      []int32 // order of test where it is not the row's place
	inputs    []Input
	findings  []Finding // the first of them, shared in number, are about the files
	shared    int
	files     []bool    // the lot has rows of
	from      *readings // for places in files
	comments  [][2]string
	product   *config.Product
	siteIsDie bool
	ownOrder  bool // the file has touchdown numbers
	workers   int  // goroutines that may work on it

	about   lotFacts
	carried []Finding // still to be placed among the findings
	after   []bool    // by measurement of Earlier: it came after the one that counts

	measurements, duplicates, joined int

	weight       []int32 // rows of the files in each measurement; nil: one
	untested     int     // measurements of dice that were not tested
	untestedRows int     // rows of the files in these

	seen      []extremes // by test
	marks     [][]int8   // by test: readings that the file gives as bounds, see overRange; nil: none
	compacted bool       // measurements that do not count are out of the columns
}

// flatInts joins a whole-number column over all chunks; nil when none has it.
// With release the chunks let go of theirs. A single chunk, the usual case of
// one file, is not copied.
func (t *readings) flatInts(slot int, release bool) []int32 {
	n, have := 0, false
	for _, c := range t.chunks {
		n += c.n
		have = have || c.ints[slot] != nil
	}
	if !have {
		return nil
	}
	if len(t.chunks) == 1 {
		out := t.chunks[0].ints[slot]
		if release {
			t.chunks[0].ints[slot] = nil
		}
		return snug(out)
	}
	out := make([]int32, 0, n)
	for _, c := range t.chunks {
		if c.ints[slot] == nil {
			for range c.n {
				out = append(out, Missing)
			}
			continue
		}
		out = append(out, c.ints[slot]...)
		if release {
			c.ints[slot] = nil
		}
	}
	return out
}

// flatWeight joins the rows of the files in each measurement; nil when each is
// one row.
func (t *readings) flatWeight() []int32 {
	if !slices.ContainsFunc(t.chunks, func(c *chunk) bool { return c.weight != nil }) {
		return nil
	}
	var out []int32
	for _, c := range t.chunks {
		if c.weight != nil {
			out = append(out, c.weight...)
			continue
		}
		for range c.n {
			out = append(out, 1)
		}
	}
	return out
}

func (t *readings) flatPass() []int8 {
	n, have := 0, false
	for _, c := range t.chunks {
		n += c.n
		have = have || c.pass != nil
	}
	if !have {
		return nil
	}
	if len(t.chunks) == 1 {
		return snug(t.chunks[0].pass)
	}
	out := make([]int8, 0, n)
	for _, c := range t.chunks {
		if c.pass == nil {
			for range c.n {
				out = append(out, -1)
			}
			continue
		}
		out = append(out, c.pass...)
		c.pass = nil
	}
	return out
}

// flatText joins a text column under one dictionary.
func (t *readings) flatText(slot int) ([]int32, []string) {
	n, have := 0, false
	for _, c := range t.chunks {
		n += c.n
		have = have || slot < len(c.text) && c.text[slot].codes != nil
	}
	if !have {
		return nil, nil
	}
	if len(t.chunks) == 1 {
		return snug(t.chunks[0].text[slot].codes), t.chunks[0].text[slot].dict
	}
	var g globalText
	out := make([]int32, 0, n)
	for _, c := range t.chunks {
		if slot >= len(c.text) || c.text[slot].codes == nil {
			for range c.n {
				out = append(out, -1)
			}
			continue
		}
		m := g.remap(&c.text[slot])
		for _, code := range c.text[slot].codes {
			if code >= 0 {
				code = m[code]
			}
			out = append(out, code)
		}
		c.text[slot] = textColumn{}
	}
	return out, g.dict
}

// flatValues joins a test's column and converts it to SI.
func (t *readings) flatValues(slot int) []float64 {
	n, have := 0, false
	for _, c := range t.chunks {
		n += c.n
		have = have || slot < len(c.values) && c.values[slot] != nil
	}
	if !have {
		return nil
	}
	if len(t.chunks) == 1 {
		c := t.chunks[0]
		out := snug(c.values[slot])
		c.values[slot] = nil
		toSI(out, out, t.unitFor(slot, c.file))
		return out
	}
	out := make([]float64, n)
	at := 0
	for _, c := range t.chunks {
		to := out[at : at+c.n]
		at += c.n
		if slot >= len(c.values) || c.values[slot] == nil {
			for i := range to {
				to[i] = math.NaN()
			}
			continue
		}
		toSI(to, c.values[slot], t.unitFor(slot, c.file))
		c.values[slot] = nil
	}
	return out
}

// unitFor is the unit of a test's values in a file's chunk.
func (t *readings) unitFor(slot, file int) config.Unit {
	if t.files[file].layout == nil {
		return config.Unit{} // a Table has them in SI
	}
	if t.si[[2]int{slot, file}] {
		return config.Unit{}
	}
	return t.units[slot][file]
}

// toSI converts values into dst, which may be v itself.
func toSI(dst, v []float64, u config.Unit) {
	if u.Exp == 0 {
		if &dst[0] != &v[0] {
			copy(dst, v)
		}
		return
	}
	for i, x := range v {
		if x == x { // a NaN keeps its bits, see oddNaN
			x = u.ToSI(x)
		} else if b, sign, ok := asBound(x); ok {
			x = boundOf(u.ToSI(b), sign)
		}
		dst[i] = x
	}
}

// snug copies a column that has much room left over.
func snug[T any](s []T) []T {
	if cap(s)-len(s) > len(s)/8+1024 {
		return slices.Clone(s)
	}
	return s
}

// pick takes a lot's part of a flat column in the lot's order.
func pick[T any](flat []T, o *order, l *lotRange) []T {
	if flat == nil {
		return nil
	}
	if o.perm == nil {
		return flat[l.lo:l.hi:l.hi]
	}
	out := make([]T, l.hi-l.lo)
	for i, r := range o.perm[l.lo:l.hi] {
		out[i] = flat[r]
	}
	return out
}

// gather fills the lots column by column; the chunks' columns are let go of one
// by one, so that the table is never in memory twice.
func (t *readings) gather(ctx context.Context, o *order, opt *Options) ([]*draft, error) {
	drafts := make([]*draft, len(o.lots))
	for i := range o.lots {
		l := &o.lots[i]
		d := &draft{id: l.id, n: l.hi - l.lo, wafers: l.wafers, product: opt.Product, siteIsDie: t.siteIsDie, measurements: l.hi - l.lo}
		if o.rank != nil {
			d.rank = make([]int32, d.n)
			for k := range d.rank {
				d.rank[k] = o.rank[l.lo+k] - int32(l.lo)
			}
		}
		for fi, f := range t.files {
			if l.files[fi] {
				d.inputs = append(d.inputs, f.input)
				d.comments = append(d.comments, f.attributes...)
				d.carried = append(d.carried, f.carried...)
				d.about.add(&f.about)
			}
		}
		for _, f := range t.findings {
			if f.file == all || l.files[f.file] {
				d.findings = append(d.findings, f.Finding)
			}
		}
		d.shared = len(d.findings)
		d.files, d.from = l.files, t
		d.findings = append(d.findings, d.takeCarried(func(f Finding) bool { return !d.carriedLater(f) })...)
		d.tests, d.slots = t.describe(opt.Product, l.files, d.note)
		drafts[i] = d
	}
	for i := range t.chunks {
		t.chunks[i].text[textLot], t.chunks[i].text[textWafer] = textColumn{}, textColumn{}
	}
	for slot := range intNumber {
		flat := t.flatInts(slot, true)
		for i, d := range drafts {
			d.ints[slot] = pick(flat, o, &o.lots[i])
		}
	}
	weight := t.flatWeight()
	for i, d := range drafts {
		d.weight = pick(weight, o, &o.lots[i])
	}
	pass := t.flatPass()
	for i, d := range drafts {
		d.pass = pick(pass, o, &o.lots[i])
	}
	t.gatherText(drafts, o)
	if err := t.gatherValues(ctx, drafts, o, opt); err != nil {
		return nil, err
	}
	t.chunks = nil
	return drafts, nil
}

func (t *readings) gatherText(drafts []*draft, o *order) {
	names := make([]string, textAttributes)
	for role, slot := range textRoles {
		for _, f := range t.files {
			if f.layout == nil {
				continue
			}
			for i, fd := range f.layout.fields {
				if fd.role == role && names[slot] == "" {
					names[slot] = f.layout.names[i]
				}
			}
		}
	}
	names = append(names, t.sch.attributes...)
	for _, d := range drafts {
		d.textNames = names
		d.text, d.dict = make([][]int32, len(names)), make([][]string, len(names))
	}
	for slot := range names {
		switch slot {
		case textLot, textWafer, textTest, textUnit, textAt:
			continue
		}
		flat, dict := t.flatText(slot)
		for i, d := range drafts {
			d.text[slot], d.dict[slot] = pick(flat, o, &o.lots[i]), dict
		}
	}
}

// gatherValues does the tests in parallel; each is worked on by one goroutine
// alone, so that the result does not depend on their number.
func (t *readings) gatherValues(ctx context.Context, drafts []*draft, o *order, opt *Options) error {
	columns := make([][][]float64, len(t.sch.tests)) // [test][lot]
	g, ctx := errgroup.WithContext(ctx)
	g.SetLimit(opt.Workers)
	for slot := range columns {
		if !slices.ContainsFunc(drafts, func(d *draft) bool { return slices.Contains(d.slots, slot) }) {
			continue
		}
		g.Go(func() error {
			if err := ctx.Err(); err != nil {
				return err
			}
			flat := t.flatValues(slot)
			columns[slot] = make([][]float64, len(drafts))
			for i, d := range drafts {
				if columns[slot][i] = pick(flat, o, &o.lots[i]); flat == nil {
					columns[slot][i] = nanColumn(d.n)
				}
			}
			if len(t.chunks) > 1 && len(flat) > 1<<18 {
				runtime.GC() // the chunks' columns are garbage now; a large table must not stand in memory twice
			}
			return nil
		})
	}
	if err := g.Wait(); err != nil {
		return err
	}
	for i, d := range drafts {
		for _, slot := range d.slots {
			d.values = append(d.values, columns[slot][i])
		}
	}
	return nil
}

// constants turns columns of whole numbers that never differ within a wafer
// into attributes: a boat position, a temperature. A test that the product
// file or a unit or limits declare stays a test. All lots that have a column
// decide together.
func (t *readings) constants(drafts []*draft) {
	for slot := range t.sch.tests {
		var with []*draft
		constant, some, n, wafers := true, false, 0, 0
		for _, d := range drafts {
			if k := slices.Index(d.slots, slot); k >= 0 {
				with = append(with, d)
				n += d.n
				wafers += len(d.wafers)
				constant = constant && !d.tests[k].declared && d.constantWithin(k)
				some = some || slices.ContainsFunc(d.values[k], func(v float64) bool { return v == v })
			}
		}
		const rows = 5 // per wafer on the average, for "never differs" to mean something
		if !constant || !some || n < rows*wafers {
			continue
		}
		for _, d := range with {
			k := slices.Index(d.slots, slot)
			d.numberAttribute(d.tests[k].name, d.values[k])
			d.tests, d.values, d.slots = slices.Delete(d.tests, k, k+1), slices.Delete(d.values, k, k+1), slices.Delete(d.slots, k, k+1)
		}
	}
}

func (d *draft) constantWithin(test int) bool {
	for _, w := range d.wafers {
		first := math.NaN()
		for _, v := range d.values[test][w.Lo:w.Hi] {
			if v != v {
				if st := nanStatus(v); st == cellOver || st == cellUnder || st == cellBound {
					return false // readings, of a test
				}
				continue
			}
			if first != first {
				first = v
			}
			if v != first || v != math.Trunc(v) || math.Abs(v) >= 1e9 {
				return false
			}
		}
	}
	return true
}

// numberAttribute adds a text column with the numbers of v.
func (d *draft) numberAttribute(name string, v []float64) {
	var g globalText
	codes := make([]int32, len(v))
	last, code := math.NaN(), int32(-1)
	for i, x := range v {
		if x != x {
			codes[i] = -1
			continue
		}
		if x != last {
			last, code = x, g.code(strconv.FormatFloat(x, 'f', -1, 64))
		}
		codes[i] = code
	}
	d.textNames = append(d.textNames[:len(d.textNames):len(d.textNames)], name)
	d.text, d.dict = append(d.text, codes), append(d.dict, g.dict)
}
