package ingest

import (
	"bytes"
	"fmt"
	"math"
	"strconv"
)

// Readings that a file gives as bounds only: ">1000", "OL", an infinite number.
//
// An over-range reading is beyond what the tester could show. It counts as at
// least the test's clamp where that is known, else as at least the largest
// finite reading of the lot; and where the test has an upper limit and no clamp,
// as beyond that limit: a leakage that overflows the range is no missing one.
// Under-range is the same at the other end.

// Kinds of cells beyond those of number.go.
const (
	cellUnder status = cellInvalid + 1 // a word for "under range", or -inf
	cellBound status = cellInvalid + 2 // a number with a comparison sign
	// cellThousands is a number such as "2,500" in a file whose columns commas part.
	cellThousands status = cellInvalid + 3
)

// A bound is kept as a NaN until cleaning: bits that no other NaN here has,
// the direction, and the number with as much of its mantissa as has room. That
// is eleven decimal digits, to which it is rounded when it is taken out.
const (
	boundNaN      = 0x7ffc_0000_0000_0000
	boundUp       = 1 << 49
	boundSign     = 1 << 63
	boundMantissa = 52 - 38 // bits of the mantissa that are dropped
)

func boundOf(v float64, sign int8) float64 {
	bits := math.Float64bits(v)
	b := boundNaN | bits&boundSign | bits&^boundSign>>boundMantissa
	if sign > 0 {
		b |= boundUp
	}
	return math.Float64frombits(b)
}

// asBound takes a bound out of its NaN; ok is false for every other number.
func asBound(x float64) (v float64, sign int8, ok bool) {
	bits := math.Float64bits(x)
	if bits&boundNaN != boundNaN {
		return 0, 0, false
	}
	sign = -1
	if bits&boundUp != 0 {
		sign = 1
	}
	v = math.Float64frombits(bits&boundSign | bits&(boundUp-1)<<boundMantissa)
	if v-v != 0 {
		return 0, 0, false // some other program's NaN
	}
	v, err := strconv.ParseFloat(strconv.FormatFloat(v, 'e', 10, 64), 64)
	return v, sign, err == nil
}

// cutComparison takes a comparison sign off the front of a cell: 1 for > and >=,
// -1 for < and <=, 0 for none.
func cutComparison(t []byte) (sign int8, rest []byte) {
	for _, c := range []struct {
		text string
		sign int8
	}{{">=", 1}, {"<=", -1}, {">", 1}, {"<", -1}, {"≥", 1}, {"≤", -1}} {
		if rest, ok := bytes.CutPrefix(t, []byte(c.text)); ok {
			return c.sign, bytes.TrimSpace(rest)
		}
	}
	return 0, t
}

// parseBound reads ">1000", "<= 0.01".
func parseBound(t []byte, decimal byte) (float64, bool) {
	sign, rest := cutComparison(t)
	if sign == 0 || !isDecimal(rest, decimal) {
		return 0, false
	}
	v, st := convert(rest, decimal)
	if st != cellNumber {
		return 0, false
	}
	return boundOf(v, sign), true
}

// overRange turns the bounds of one test's column into their numbers, with marks,
// and tells of them.
func (d *draft) overRange(test int, counts map[status]int) []Finding {
	if counts[cellOver]+counts[cellUnder]+counts[cellBound] == 0 {
		return nil
	}
	v, e, info := d.values[test], d.seen[test], &d.tests[test]
	up, upWhy := rangeEnd(v, e, 1, info.clamp, info.upper, "clamp", "largest")
	down, downWhy := rangeEnd(v, e, -1, info.floor, info.lower, "floor", "smallest")
	marks := make([]int8, len(v))
	for i, x := range v {
		if x == x {
			continue
		}
		switch nanStatus(x) {
		case cellOver:
			v[i], marks[i] = up, 1
		case cellUnder:
			v[i], marks[i] = down, -1
		case cellBound:
			v[i], marks[i], _ = asBound(x)
		}
		if v[i] != v[i] {
			v[i], marks[i] = math.NaN(), 0
		}
	}
	d.marks[test] = marks
	d.seen[test] = survey(v, nil)
	var findings []Finding
	tell := func(kind status, severity Severity, what, as, remedy string) {
		n := counts[kind]
		if n == 0 {
			return
		}
		at, text := d.from.firstOdd(d.slots[test], kind, d.files)
		if text != "" {
			what += ", first " + quote(text)
		}
		findings = append(findings, Finding{Code: "over-range", Severity: severity, Dice: n, Remedy: remedy,
			Text: fmt.Sprintf("%stest %s: %d %s %s; %s", at, info.name, n, plural(n, "reading is", "readings are"), what, as)})
	}
	end := func(bound float64, why, than string) string {
		if bound != bound {
			return "as there is no reading and no limit to go by, taken as missing"
		}
		return fmt.Sprintf("taken as at %s %s, %s", than, show(bound, info.unit), why)
	}
	const remedy = "export the tester's largest value instead, or give the clamp of the test in the product file"
	tell(cellOver, Warning, "over the tester's range", end(up, upWhy, "least"), remedy)
	tell(cellUnder, Warning, "under the tester's range", end(down, downWhy, "most"), "export the tester's smallest value instead, or give the floor of the test in the product file")
	tell(cellBound, Info, "given with a comparison sign", "taken as bounds", "")
	return findings
}

// rangeEnd is what a reading beyond the tester's range is at least (sign 1) or
// at most, and why; NaN when nothing tells.
func rangeEnd(v []float64, e extremes, sign, known, limit float64, what, which string) (bound float64, why string) {
	extreme := e.most
	if sign < 0 {
		extreme = e.least
	}
	if known == known && !(sign > 0 && known == 0) && !(e.n > 0 && sign*(extreme-known) > 0.01*math.Abs(known)) {
		return known, "the " + what + " of the product file"
	}
	if p, ok := findPile(v, e, sign); ok {
		return p.value, "where readings pile up"
	}
	beyond := math.Nextafter(limit, math.Inf(int(sign)))
	switch {
	case limit == limit && (e.n == 0 || sign*(beyond-extreme) > 0):
		return beyond, "just beyond the limit"
	case e.n > 0:
		return extreme, "the " + which + " reading of the lot"
	}
	return math.NaN(), ""
}

// copyReading takes a reading over to another measurement.
func (d *draft) copyReading(test int, from, to int32) {
	d.values[test][to] = d.values[test][from]
	if m := d.marks[test]; m != nil {
		m[to] = m[from]
	}
}
