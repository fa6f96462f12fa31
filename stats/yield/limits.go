package yield

import (
	"math"
	"slices"
)

// LimitPoint is the lot's yield with one limit moved and all else as it is.
type LimitPoint struct {
	Upper bool    // which limit
	Shift float64 // in parts of the limit's size, positive upwards
	Value float64 // the moved limit
	Yield float64 // NaN where it cannot be known
}

// AgainstLimit gives the yield with a limit of test t moved by each of shifts
// times its size: first for the lower limit, then for the upper one, each in the
// order of shifts; limits that do not exist give no points.
//
// A tighter limit fails the passing dice beyond it. A looser one rescues the
// failing dice that fail this test alone, are beyond this limit and would be
// within the moved one; a failing die without a failing test stays failed,
// whatever failed it. Passing dice that are beyond the limit as it is (their bin
// says otherwise) stay passing, so that a shift of 0 gives the lot's yield.
//
// The yield is NaN where it cannot be known: a looser limit on a stop-on-fail
// program, since nobody measured what else those dice would fail, and a moved
// limit at which some censored reading cannot be judged ("at least 80 V" against
// 82 V). Without dice it is NaN.
//
// It panics when lengths differ, t is no test or a shift is NaN or infinite.
func AgainstLimit(tests []TestData, t int, pass []bool, shifts []float64, stopOnFail bool) []LimitPoint {
	if t < 0 || t >= len(tests) {
		panic("stats/yield: no such test")
	}
	return findFails(tests, pass).against(t, shifts, stopOnFail)
}

// AllAgainstLimits is [AgainstLimit] for every test, at the price of little more
// than one.
func AllAgainstLimits(tests []TestData, pass []bool, shifts []float64, stopOnFail bool) [][]LimitPoint {
	f := findFails(tests, pass)
	out := make([][]LimitPoint, len(tests))
	for t := range tests {
		out[t] = f.against(t, shifts, stopOnFail)
	}
	return out
}

func (f *fails) against(t int, shifts []float64, stopOnFail bool) []LimitPoint {
	out := []LimitPoint{}
	test := &f.tests[t]
	if test.Lower == test.Lower {
		out = append(out, f.move(t, -1, shifts, stopOnFail)...)
	}
	if test.Upper == test.Upper {
		out = append(out, f.move(t, +1, shifts, stopOnFail)...)
	}
	return out
}

// move shifts one limit. Everything is seen from the upper limit: for the lower
// one (side -1) values, limits and censoring change their sign.
func (f *fails) move(t int, side float64, shifts []float64, stopOnFail bool) []LimitPoint {
	test := &f.tests[t]
	limit := test.Upper
	if side < 0 {
		limit = test.Lower
	}
	points := make([]LimitPoint, len(shifts))
	order := make([]int, len(shifts))
	for i, s := range shifts {
		if !(math.Abs(s) <= math.MaxFloat64) {
			panic("stats/yield: shift not a number")
		}
		points[i] = LimitPoint{Upper: side > 0, Shift: s, Value: limit + s*math.Abs(limit)}
		order[i] = i
	}
	slices.SortStableFunc(order, func(a, b int) int {
		switch va, vb := side*points[a].Value, side*points[b].Value; {
		case va < vb:
			return -1
		case va > vb:
			return 1
		}
		return 0
	})
	moved := make([]float64, len(order)) // ascending: tighter to looser
	for i, o := range order {
		moved[i] = side * points[o].Value
	}
	c := mover{limit: side * limit, moved: moved,
		lost: make([]int, len(moved)+1), saved: make([]int, len(moved)+1), open: make([]int, len(moved)+1)}
	c.tabulate()
	c.passing(test, f.pass, side)
	if !stopOnFail {
		c.failing(f, t, side)
	}
	passing, n := len(f.pass)-len(f.dice), len(f.pass)
	for i, o := range order {
		switch {
		case n == 0, c.open[i] > 0, stopOnFail && moved[i] > c.limit:
			points[o].Yield = math.NaN()
		default:
			points[o].Yield = float64(passing-c.lost[i]+c.saved[i]) / float64(n)
		}
	}
	return points
}

// mover counts dice by moved limit: at moved limit i, lost passing dice fail,
// saved failing ones are rescued, and open ones cannot be judged.
type mover struct {
	limit             float64
	moved             []float64
	lost, saved, open []int

	start  [256]int32 // where the search for a value's place begins
	lo     float64
	cells  float64 // per unit of value
	search bool
}

// tabulate cuts the range of the moved limits into cells, since millions of
// readings ask for their place among a few limits.
func (c *mover) tabulate() {
	n := len(c.moved)
	if n < 2 {
		return
	}
	c.lo = c.moved[0]
	c.cells = float64(len(c.start)) / (c.moved[n-1] - c.lo)
	if c.search = c.cells > 0 && !math.IsInf(c.cells, 0); !c.search {
		return
	}
	for i := range c.start {
		at, _ := slices.BinarySearch(c.moved, c.lo+float64(i)/c.cells)
		c.start[i] = int32(at)
	}
}

// above is the number of moved limits below v, which are the ones v is beyond.
func (c *mover) above(v float64) int {
	if !c.search {
		i, _ := slices.BinarySearch(c.moved, v)
		return i
	}
	cell := (v - c.lo) * c.cells
	if !(cell > 0) {
		cell = 0
	}
	at := int(c.start[int(min(cell, float64(len(c.start)-1)))])
	for at < len(c.moved) && c.moved[at] < v {
		at++
	}
	for at > 0 && c.moved[at-1] >= v {
		at--
	}
	return at
}

func (c *mover) passing(test *TestData, pass []bool, side float64) {
	if len(c.moved) == 0 || !(c.moved[0] < c.limit) {
		return // nothing is tightened
	}
	tight := c.above(c.limit) // moved limits tighter than the limit
	lost := make([]int, tight+1)
	open := make([]int, tight+1)
	least := c.moved[0]
	for i, value := range test.Values {
		v := side * value
		mark := 0.0
		if test.Censor != nil {
			mark = side * float64(test.Censor[i])
		}
		if !(v > least) && mark == 0 || !pass[i] || v != v {
			continue
		}
		switch at := min(c.above(v), tight); {
		case v > c.limit && mark >= 0: // its bin knows better
		case mark == 0: // beyond the limits before at
			lost[at]++
		case mark > 0: // at least v: beyond those, and nobody knows of the others
			lost[at]++
			open[at]++
			open[tight]--
		default: // at most v: within all from at on, and nobody knows of those before
			open[0]++
			open[at]--
		}
	}
	unknown := 0
	for i := range tight {
		unknown += open[i]
		c.open[i] += unknown
	}
	beyond := 0
	for i := tight - 1; i >= 0; i-- {
		beyond += lost[i+1]
		c.lost[i] = beyond
	}
}

func (c *mover) failing(f *fails, t int, side float64) {
	loose := len(c.moved)
	if loose == 0 || !(c.moved[loose-1] > c.limit) {
		return // nothing is loosened
	}
	test := &f.tests[t]
	saved := make([]int, loose+1)
	open := make([]int, loose+1)
	for k, die := range f.dice {
		if int(f.first[k]) != t || f.several[k] {
			continue
		}
		low, high := test.fails(int(die))
		if low && high || (side > 0) != high {
			continue
		}
		at := c.above(side * test.Values[die])
		if test.Censor != nil && test.Censor[die] != 0 {
			open[at]++ // at least this bad: within none for certain
		} else {
			saved[at]++
		}
	}
	s, o := 0, 0
	for i := range loose {
		s += saved[i]
		o += open[i]
		c.saved[i] += s
		c.open[i] += o
	}
}
