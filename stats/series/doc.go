// Package series looks at values in their order: lot after lot, wafer after
// wafer, touchdown after touchdown. Has the level changed, and where; does it
// drift, how fast, and when will it meet a limit; and do the values follow each
// other, so that other statistics are too sure of themselves?
//
//   - Steps: [Changes] finds any number of them and is the usual choice;
//     [SingleSplit] and [Pettitt] ask for one, and say how sure.
//   - Drift: [FitLine] gives slope, intervals and predictions, [Line.Reaches] the
//     time to a limit; [EWMADrift] watches against a baseline.
//   - Curves: [FitPolynomial], exact to the last digit whatever the scale of x.
//   - Dependence: [Autocorrelation], [LjungBox], [Runs], and
//     [Line.DurbinWatson].
//
// A step looks like a drift to a line, and a drift like steps to a search for
// changes: look at both. An engineer asks "what was done on that day" of a step, and
// "what wears or fills up" of a drift.
//
// A NaN is a missing value: it keeps its place in the order, and is skipped.
// Indexes are from 0. Nothing is modified. Slices of different length panic.
package series

import "math"

// present lists the values that are not NaN, and their places.
func present(y []float64) (v []float64, place []int) {
	for i, x := range y {
		if x == x {
			v = append(v, x)
			place = append(place, i)
		}
	}
	return v, place
}

// costs gives the sum of squares about their mean of any stretch of values.
type costs struct{ sum, squares []float64 }

// newCosts keeps running sums of the values less their mean, which keeps the
// digits that large means would eat.
func newCosts(v []float64) costs {
	mean := 0.0
	for i, x := range v {
		mean += (x - mean) / float64(i+1)
	}
	c := costs{make([]float64, len(v)+1), make([]float64, len(v)+1)}
	for i, x := range v {
		d := x - mean
		c.sum[i+1] = c.sum[i] + d
		c.squares[i+1] = c.squares[i] + float64(d*d)
	}
	return c
}

// of is the cost of values from up to, not including, to.
func (c costs) of(from, to int) float64 {
	if to <= from {
		return 0
	}
	s := c.sum[to] - c.sum[from]
	return math.Max(0, c.squares[to]-c.squares[from]-s*s/float64(to-from))
}
