package ingest

import (
	"fmt"
	"math"
	"slices"

	"kneepoint/config"
)

// retests decides which measurement of each die counts. It returns for every
// measurement the place of the one that counts for its die: itself, another
// one, or duplicateRow for an exact copy. Nil says itself for all. Tests that the
// one that counts did not measure again are filled in, see fillPartial.
//
// Measurements belong to the same die when they have the same coordinates on
// the same wafer; without coordinates, the same part id. A measurement is valid
// when it has at least one value or a bin.
func (d *draft) retests(opt *Options) []int32 {
	s := &retesting{d: d, policy: opt.Retest, bins: config.Bins{}}
	if opt.Product != nil {
		s.bins = opt.Product.Bins
	}
	found := make([][][]int32, len(d.wafers))
	d.eachWafer(func(k int, w Wafer) { found[k] = d.sameDice(w.Lo, w.Hi) })
	for _, dice := range found {
		for _, rows := range dice {
			s.several(rows)
		}
	}
	s.settle()
	s.untested()
	s.report()
	return s.keep
}

// Marks of measurements that are neither counted nor earlier readings.
const (
	duplicateRow = -1 // repeats another exactly
	joinedRow    = -2 // its readings were joined to those of another
	untestedRow  = -3 // of a die that was not tested
)

type retesting struct {
	d       *draft
	keep    []int32
	policy  Retest
	bins    config.Bins
	groups  [][]int32 // measurements of dice that have several, copies left out
	dice    int       // measured more than once
	joined  int       // dice whose readings were spread over several rows
	extra   int       // measurements that do not count
	partial int       // dice whose last measurement lacks tests of earlier ones
	gone    int       // dice that were not tested
	empty   int       // of them without any value or bin
	better  int       // dice that policy best passes though their last measurement fails
}

// several takes a die that has several measurements, given in order of rows.
func (s *retesting) several(rows []int32) {
	d := s.d
	if s.keep == nil {
		s.keep = make([]int32, d.n)
		for i := range s.keep {
			s.keep[i] = int32(i)
		}
	}
	if d.rank != nil {
		slices.SortStableFunc(rows, func(a, b int32) int { return cmpInt32(d.rank[a], d.rank[b]) })
	}
	// Exact copies first: the earlier one stands for both.
	var own []int32
	for _, r := range rows {
		if slices.ContainsFunc(own, func(o int32) bool { return d.sameRow(r, o) }) {
			s.keep[r] = duplicateRow
			d.duplicates++
		} else {
			own = append(own, r)
		}
	}
	if len(own) > 1 {
		s.groups = append(s.groups, own)
	}
}

// settle decides about all dice together. Where no test of a die has readings
// in more than one of its rows, and it is so for nine in ten of them, the rows
// are parts of one measurement: one file has the currents and another the
// capacitances, or an export made a row of every reading.
func (s *retesting) settle() {
	var parts, again [][]int32
	for _, g := range s.groups {
		if s.d.disjoint(g) {
			parts = append(parts, g)
		} else {
			again = append(again, g)
		}
	}
	if 10*len(parts) < 9*len(s.groups) {
		parts, again = nil, s.groups
	}
	for _, g := range parts {
		s.join(g)
	}
	for _, g := range again {
		s.die(g)
	}
}

// disjoint says whether at least two of the rows have readings, and no test has
// one in two of them.
func (d *draft) disjoint(rows []int32) bool {
	with := map[int32]bool{}
	for _, v := range d.values {
		n := 0
		for _, r := range rows {
			if v[r] == v[r] {
				with[r] = true
				n++
			}
		}
		if n > 1 {
			return false
		}
	}
	return len(with) > 1
}

// join puts the readings of all rows into the last one. Bins and the like are
// those of the last row that has them.
func (s *retesting) join(rows []int32) {
	d, last := s.d, rows[len(rows)-1]
	for i := len(rows) - 2; i >= 0; i-- {
		r := rows[i]
		for t := range d.values {
			if !d.has(t, last) {
				d.copyReading(t, r, last)
			}
		}
		for slot, c := range d.ints {
			if c != nil && slot != intTouchdown && c[last] == Missing {
				c[last] = c[r]
			}
		}
		if d.pass != nil && d.pass[last] < 0 {
			d.pass[last] = d.pass[r]
		}
		for _, c := range d.text {
			if c != nil && c[last] < 0 {
				c[last] = c[r]
			}
		}
		s.keep[r] = joinedRow
		d.joined++
	}
	s.joined++
}

// die settles one die that was measured several times.
func (s *retesting) die(own []int32) {
	d := s.d
	s.dice++
	s.extra += len(own) - 1
	var valid []int32
	for _, r := range own {
		if d.valid(r) {
			valid = append(valid, r)
		}
	}
	s.empty += len(own) - len(valid)
	if len(valid) == 0 {
		valid = own
	}
	chosen := valid[len(valid)-1]
	switch s.policy {
	case RetestFirst:
		chosen = valid[0]
	case RetestBest:
		for i := len(valid) - 1; i >= 0; i-- {
			if s.passes(valid[i]) {
				if i < len(valid)-1 {
					s.better++
				}
				chosen = valid[i]
				break
			}
		}
	}
	for _, r := range own {
		s.keep[r] = chosen
	}
	s.fillPartial(own, chosen)
}

// valid says whether a measurement has a value or a bin.
func (d *draft) valid(r int32) bool {
	if b := d.ints[intHardBin]; b != nil && b[r] != Missing {
		return true
	}
	if b := d.ints[intSoftBin]; b != nil && b[r] != Missing {
		return true
	}
	if d.pass != nil && d.pass[r] >= 0 {
		return true
	}
	for _, v := range d.values {
		if v[r] == v[r] {
			return true
		}
	}
	return false
}

// passes judges a measurement: by bin, else by the file's flag, else by the
// limits that it has readings for.
func (s *retesting) passes(r int32) bool {
	d := s.d
	if v := s.verdict(r); v != 0 {
		return v > 0
	}
	some := false
	for i, v := range d.values {
		if v[r] != v[r] {
			continue
		}
		some = true
		if v[r] < d.tests[i].lower || v[r] > d.tests[i].upper {
			return false
		}
	}
	return some
}

// sameRow says whether all fields of two rows are the same.
func (d *draft) sameRow(a, b int32) bool {
	for s := range d.ints {
		if s == intTouchdown && !d.ownOrder {
			continue
		}
		c := d.ints[s]
		if s == intMeasurement && c != nil && (c[a] == Missing || c[b] == Missing) {
			continue
		}
		if c != nil && c[a] != c[b] {
			return false
		}
	}
	if d.pass != nil && d.pass[a] != d.pass[b] {
		return false
	}
	for _, c := range d.text {
		if c != nil && c[a] != c[b] {
			return false
		}
	}
	for _, v := range d.values {
		if math.Float64bits(v[a]) != math.Float64bits(v[b]) {
			return false
		}
	}
	return true
}

func (s *retesting) report() {
	d := s.d
	d.findings = append(d.findings, d.takeCarried(func(f Finding) bool { return d.carriedLater(f) && !cellCodes[f.Code] })...)
	if d.duplicates > 0 {
		d.note(Warning, "duplicate-row", fmt.Sprintf("%d %s another one in every field; counted once", d.duplicates, plural(d.duplicates, "row repeats", "rows repeat")),
			"check whether the data were exported twice", d.duplicates)
	}
	if s.joined > 0 {
		d.note(Info, "joined-rows", fmt.Sprintf("the readings of %d %s stand in several rows without a test in common; %d rows were joined to others", s.joined, plural(s.joined, "die", "dice"), d.joined), "", s.joined)
		d.compacted = true // the columns changed
	}
	s.reportPartial()
	s.reportUntested()
	if s.dice > 0 {
		d.note(Info, "retest", fmt.Sprintf("%d %s measured more than once, with %d further measurements; the %s valid one counts", s.dice, plural(s.dice, "die was", "dice were"), s.extra, s.policy), "", s.dice)
	}
	if s.empty > 0 {
		d.note(Info, "retest-empty", fmt.Sprintf("%d %s of retested dice %s neither a value nor a bin and %s not count", s.empty, plural(s.empty, "measurement", "measurements"),
			plural(s.empty, "has", "have"), plural(s.empty, "does", "do")), "", s.empty)
	}
	if s.policy == RetestBest && s.dice > 0 {
		d.note(Warning, "retest-best", fmt.Sprintf("retest policy best: %d %s by an earlier measurement though the last one fails", s.better, plural(s.better, "die passes", "dice pass")),
			"this policy ships marginal parts; use last before releasing anything", s.better)
	}
}

// sameDice gives the rows of each die that has several in [lo, hi).
func (d *draft) sameDice(lo, hi int) [][]int32 {
	x, y := d.ints[intX], d.ints[intY]
	if x == nil || y == nil {
		return d.sameKeys(lo, hi, nil, nil)
	}
	// A table over the bounding box tells the usual wafer without hashing.
	minX, maxX, minY, maxY := int64(math.MaxInt64), int64(math.MinInt64), int64(math.MaxInt64), int64(math.MinInt64)
	for i := lo; i < hi; i++ {
		if x[i] != Missing && y[i] != Missing {
			minX, maxX = min(minX, int64(x[i])), max(maxX, int64(x[i]))
			minY, maxY = min(minY, int64(y[i])), max(maxY, int64(y[i]))
		}
	}
	if maxX >= minX {
		width, height := maxX-minX+1, maxY-minY+1
		if width <= 1<<15 && height <= 1<<15 && width*height <= max(16*int64(hi-lo), 1<<12) {
			seen := make([]uint64, (width*height+63)/64)
			again := false
			for i := lo; i < hi; i++ {
				if x[i] == Missing || y[i] == Missing {
					again = true
					continue
				}
				at := (int64(y[i])-minY)*width + int64(x[i]) - minX
				if seen[at>>6]&(1<<(at&63)) != 0 {
					again = true
				}
				seen[at>>6] |= 1 << (at & 63)
			}
			if !again {
				return nil
			}
		}
	}
	return d.sameKeys(lo, hi, x, y)
}

// sameKeys does it with a map, dice in the order of their first row.
func (d *draft) sameKeys(lo, hi int, x, y []int32) (groups [][]int32) {
	part, site := d.text[textPart], []int32(nil)
	if d.siteIsDie {
		site = d.ints[intSite]
	}
	type key struct{ x, y, part, site int32 }
	first := make(map[key]int32, hi-lo)
	of := map[int32]int{}
	for i := lo; i < hi; i++ {
		k := key{Missing, Missing, -1, Missing}
		switch {
		case x != nil && x[i] != Missing && y[i] != Missing:
			k.x, k.y = x[i], y[i]
		case part != nil && part[i] >= 0:
			k.part = part[i]
		case site != nil && site[i] != Missing:
			k.site = site[i]
		default:
			continue
		}
		f, ok := first[k]
		if !ok {
			first[k] = int32(i)
			continue
		}
		g, ok := of[f]
		if !ok {
			g = len(groups)
			of[f] = g
			groups = append(groups, []int32{f})
		}
		groups[g] = append(groups[g], int32(i))
	}
	return groups
}

// split takes the measurements that do not count out of the columns.
func (d *draft) split(keep []int32) (Earlier, FirstPass) {
	e := Earlier{Values: make([][]float64, len(d.tests))}
	removed, several := 0, false
	for i, k := range keep {
		if k != int32(i) {
			removed++
			several = several || k >= 0
		}
	}
	if removed == 0 {
		return e, FirstPass{}
	}
	place := make([]int32, d.n) // new place of each row that stays
	n := int32(0)
	for i, k := range keep {
		if k == int32(i) {
			place[i] = n
			n++
		}
	}
	var rows []int32 // that go to Earlier, by die and then order of test
	for i, k := range keep {
		if k != int32(i) && k >= 0 {
			rows = append(rows, int32(i))
		}
	}
	rank := func(r int32) int32 {
		if d.rank != nil {
			return d.rank[r]
		}
		return r
	}
	slices.SortStableFunc(rows, func(a, b int32) int {
		if c := cmpInt32(keep[a], keep[b]); c != 0 {
			return c
		}
		return cmpInt32(rank(a), rank(b))
	})
	first := FirstPass{}
	if several {
		first.Index = make([]int32, n)
		for i := range first.Index {
			first.Index[i] = -1
		}
	}
	for i, r := range rows {
		of := place[keep[r]]
		d.after = append(d.after, rank(r) > rank(keep[r]))
		e.Of = append(e.Of, of)
		e.HardBin = append(e.HardBin, intOr(d.ints[intHardBin], r))
		e.SoftBin = append(e.SoftBin, intOr(d.ints[intSoftBin], r))
		p := int8(-1)
		if d.pass != nil {
			p = d.pass[r]
		}
		e.Pass = append(e.Pass, p)
		if first.Index[of] < 0 && rank(r) < rank(keep[r]) && d.valid(r) {
			first.Index[of] = int32(i)
		}
		for t := range d.values {
			e.Values[t] = append(e.Values[t], d.values[t][r])
		}
	}
	d.compact(keep, int(n))
	return e, first
}

func intOr(c []int32, r int32) int32 {
	if c == nil {
		return Missing
	}
	return c[r]
}

// compact closes the gaps.
func (d *draft) compact(keep []int32, n int) {
	at := 0
	for w := range d.wafers {
		lo := at
		for i := d.wafers[w].Lo; i < d.wafers[w].Hi; i++ {
			if keep[i] == int32(i) {
				at++
			}
		}
		d.wafers[w].Lo, d.wafers[w].Hi = lo, at
	}
	for s := range d.ints {
		d.ints[s] = kept(d.ints[s], keep, n)
	}
	d.pass = kept(d.pass, keep, n)
	for s := range d.text {
		d.text[s] = kept(d.text[s], keep, n)
	}
	for t := range d.values {
		d.values[t] = kept(d.values[t], keep, n)
		d.marks[t] = kept(d.marks[t], keep, n)
	}
	d.n, d.compacted = n, true
}

// kept copies the rows that stay into a column of their own.
func kept[T any](c []T, keep []int32, n int) []T {
	if c == nil {
		return nil
	}
	out := make([]T, 0, n)
	for i, k := range keep {
		if k == int32(i) {
			out = append(out, c[i])
		}
	}
	return out
}
