// Package relate asks how one column of numbers moves with another, or with
// time, and by how much.
//
//   - [Pearson]: along a straight line; one outlier can make or hide it.
//   - [Spearman] and [Kendall]: in one direction, along whatever curve; outliers
//     count by rank only. Kendall's tau reads as odds: of two dice, how much more
//     often the one with more of x has more of y than less.
//   - [TheilSen]: the slope that goes with Kendall, in units of y per unit of x,
//     with an interval that stands outliers.
//   - [MannKendall]: is there a trend in a series.
//
// All take the pairs as independent of each other. Readings in test order are
// not when neighbours on a wafer are alike; a series with drift within it gives
// p values that are too small.
//
// A pair with a NaN is skipped; infinities have their rank, but no slope. What
// cannot be computed is NaN, and Why says so. Slices of different length panic.
package relate

import (
	"math"

	"kneepoint/stats"
)

// Correlation is a coefficient of correlation, -1 to 1.
type Correlation struct {
	// Estimate has an interval with [Pearson] only.
	Estimate stats.Interval
	P        float64 // two-sided, by the approximation that the function names
	// PExact is the p of the permutation distribution, NaN where that is not
	// worked out: with ties, or with many pairs.
	PExact float64
	N      int
	Why    string
}

func none(n int, why string) Correlation {
	return Correlation{Estimate: stats.NoInterval(why), P: math.NaN(), PExact: math.NaN(), N: n, Why: why}
}

// pairs returns the pairs without a NaN.
func pairs(x, y []float64) (a, b []float64) {
	if len(x) != len(y) {
		panic("stats/relate: slice length mismatch")
	}
	for i := range x {
		if x[i] == x[i] && y[i] == y[i] {
			a, b = append(a, x[i]), append(b, y[i])
		}
	}
	return a, b
}

func checkConfidence(c float64) {
	if !(c > 0 && c < 1) {
		panic("stats/relate: confidence outside (0, 1)")
	}
}
