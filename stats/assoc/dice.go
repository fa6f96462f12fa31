package assoc

import (
	"cmp"
	"math"
	"slices"

	"kneepoint/stats"
)

// dice is the lot's rows by wafer.
type dice struct {
	n      int
	rows   []int32 // by wafer, wafers in order of lot and number
	wafers []span
	lots   int
}

// span is a wafer's rows, from and to an index of dice.rows, and its lot's index.
type span struct {
	from, to int
	lot      int32
}

func newDice(u Units) *dice {
	if u.Lot != nil && len(u.Lot) != len(u.Wafer) {
		panic("stats/assoc: slice length mismatch")
	}
	d := &dice{n: len(u.Wafer), rows: make([]int32, len(u.Wafer))}
	lot := func(i int32) int32 {
		if u.Lot == nil {
			return 0
		}
		return u.Lot[i]
	}
	sorted := true
	for i := range d.rows {
		d.rows[i] = int32(i)
		if i > 0 && (lot(int32(i)) < lot(int32(i-1)) || lot(int32(i)) == lot(int32(i-1)) && u.Wafer[i] < u.Wafer[i-1]) {
			sorted = false
		}
	}
	if !sorted {
		slices.SortStableFunc(d.rows, func(a, b int32) int {
			return cmp.Or(cmp.Compare(lot(a), lot(b)), cmp.Compare(u.Wafer[a], u.Wafer[b]))
		})
	}
	for k, i := range d.rows {
		fresh := k == 0 || lot(i) != lot(d.rows[k-1])
		if fresh {
			d.lots++
		}
		if fresh || u.Wafer[i] != u.Wafer[d.rows[k-1]] {
			d.wafers = append(d.wafers, span{from: k, to: k, lot: int32(d.lots - 1)})
		}
		d.wafers[len(d.wafers)-1].to = k + 1
	}
	return d
}

// lot lists the lot of each wafer.
func (d *dice) lot() []int32 {
	out := make([]int32, len(d.wafers))
	for i, w := range d.wafers {
		out[i] = w.lot
	}
	return out
}

func (d *dice) check(f Factor) {
	if f.Codes == nil {
		if len(f.Values) != d.n {
			panic("stats/assoc: slice length mismatch")
		}
		return
	}
	if len(f.Codes) != d.n {
		panic("stats/assoc: slice length mismatch")
	}
	for _, c := range f.Codes {
		if int(c) >= len(f.Labels) {
			panic("stats/assoc: a code beyond the labels")
		}
	}
}

// measured is a response with its level on each wafer.
type measured struct {
	Response
	level []float64 // median, of the yield mean; NaN without readings
	count []int
	total int
	sigma float64 // of dice within a wafer: the middle of the wafers' MAD sigmas
}

// fewestDice is how many readings a level needs.
const fewestDice = 3

func (d *dice) measure(r Response) *measured {
	m := &measured{Response: r, sigma: math.NaN()}
	if m.Scale == 0 {
		m.Scale = 1
	}
	var s stats.Selector
	var spread, buffer []float64
	for _, w := range d.wafers {
		buffer = buffer[:0]
		for _, i := range d.rows[w.from:w.to] {
			if v := r.Values[i]; v == v {
				buffer = append(buffer, v)
			}
		}
		level := math.NaN()
		switch {
		case len(buffer) < fewestDice:
		case r.Yield:
			level = stats.Mean(buffer)
		default:
			var mad float64
			level, mad = s.MedianMADSigma(buffer)
			spread = append(spread, mad)
		}
		m.level = append(m.level, level)
		m.count = append(m.count, len(buffer))
		m.total += len(buffer)
	}
	if !r.Yield {
		m.sigma = stats.Median(spread)
	}
	return m
}

// levelOf is the median of values, of a yield their mean.
func (m *measured) levelOf(s *stats.Selector, values []float64) float64 {
	if m.Yield {
		return stats.Mean(values)
	}
	return s.Median(values)
}

// view is a factor as it lies over wafers and lots.
type view struct {
	Factor
	numeric bool
	within  bool
	byLot   bool
	value   []float64 // of each wafer, when it does not vary within
	code    []int32
	why     string
}

// nearlyAll is the share of a wafer's dice that makes a factor the same for it:
// a few rows typed wrongly do not make it vary.
const nearlyAll = 0.98

func (d *dice) view(f Factor) *view {
	v := &view{Factor: f, numeric: f.Codes == nil}
	varying, known := 0, 0
	for _, w := range d.wafers {
		rows := d.rows[w.from:w.to]
		value, code, n, same := math.NaN(), int32(-1), 0, 0
		if v.numeric {
			value, n, same = commonValue(f.Values, rows)
		} else {
			code, n, same = commonCode(f.Codes, len(f.Labels), rows)
		}
		v.value, v.code = append(v.value, value), append(v.code, code)
		if n > 0 {
			known++
			if float64(same) < nearlyAll*float64(n) {
				varying++
			}
		}
	}
	switch {
	case known == 0:
		v.why = "nothing is known of it"
	case 2*varying >= known:
		v.within = true
	case d.same(v):
		v.why = "it is the same for all"
	default:
		v.byLot = d.lots > 1 && d.constantInLots(v)
	}
	return v
}

// commonValue is the median of rows, how many are known and how many equal it.
func commonValue(x []float64, rows []int32) (value float64, n, same int) {
	first, all := math.NaN(), true
	var known []float64
	for _, i := range rows {
		if v := x[i]; v == v {
			if n == 0 {
				first = v
			}
			n++
			all = all && v == first
		}
	}
	if n == 0 || all {
		return first, n, n
	}
	for _, i := range rows {
		if v := x[i]; v == v {
			known = append(known, v)
		}
	}
	slices.Sort(known)
	value = known[(n-1)/2]
	for _, v := range known {
		if v == value {
			same++
		}
	}
	return value, n, same
}

func commonCode(codes []int32, labels int, rows []int32) (code int32, n, same int) {
	count := make([]int, labels)
	for _, i := range rows {
		if c := codes[i]; c >= 0 {
			count[c]++
			n++
		}
	}
	code = -1
	for c, k := range count {
		if k > same {
			code, same = int32(c), k
		}
	}
	return code, n, same
}

// same says whether all wafers have one value.
func (d *dice) same(v *view) bool {
	first := -1
	for i := range d.wafers {
		if v.unknown(i) {
			continue
		}
		if first < 0 {
			first = i
		}
		if !v.alike(i, first) {
			return false
		}
	}
	return true
}

func (v *view) unknown(i int) bool {
	if v.numeric {
		return v.value[i] != v.value[i]
	}
	return v.code[i] < 0
}

func (v *view) alike(i, j int) bool {
	if v.numeric {
		return v.value[i] == v.value[j]
	}
	return v.code[i] == v.code[j]
}

func (d *dice) constantInLots(v *view) bool {
	before := -1
	for i, w := range d.wafers {
		if v.unknown(i) {
			continue
		}
		if before >= 0 && d.wafers[before].lot == w.lot && !v.alike(i, before) {
			return false
		}
		before = i
	}
	return true
}
