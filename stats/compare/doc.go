// Package compare asks whether groups of readings, or counts in a table, differ
// by more than chance, and by how much.
//
// A p alone is half an answer: two million dice make any difference significant.
// So every result carries the size of the effect beside its p, in a form that
// does not grow with n: the share of variance explained, the probability that a
// reading of one group exceeds one of the other, an odds ratio.
//
// # Which test
//
//   - Groups of readings, shape unknown or outliers present, which is the usual
//     case: [KruskalWallis], for two groups [MannWhitney]. They ask whether the
//     readings of some groups tend to be larger.
//   - Means of groups with about normal readings: [WelchANOVA], for two groups
//     [WelchT], which do not ask that the spreads be alike. [OneWay] and
//     [PooledT], the classical ones, do.
//   - Spreads: [BrownForsythe] stands outliers and skewness; [Levene] less;
//     [Bartlett] and [VarianceRatio] are for normal readings only and answer to
//     any other shape as if it were a difference in spread.
//   - Any difference of two distributions: [KolmogorovSmirnov].
//   - Counts, such as fails and passes by site: [ChiSquare]; two by two, or with
//     small counts, [Fisher].
//   - Many such questions asked of one lot: [Adjust] the p values.
//
// All of them take the readings as independent. Dice of one wafer are not: a
// test of two lots on dice finds any two lots different. Compare the wafers'
// medians instead.
//
// NaNs are skipped. What cannot be computed is NaN, and Why says so. Slices of
// different length panic.
package compare

import "math"

// Result is the outcome of a test.
type Result struct {
	// Statistic is the test's own: F, H, K2, as its function says.
	Statistic float64
	// DF1 and DF2 are the degrees of freedom of its reference distribution, NaN
	// where it has none.
	DF1, DF2 float64
	P        float64
	// Effect is a size of the effect that does not grow with n; its function says
	// which. NaN where there is none.
	Effect float64
	N      int // readings used
	Groups int // groups used
	Why    string
}

func no(why string) Result {
	nan := math.NaN()
	return Result{Statistic: nan, DF1: nan, DF2: nan, P: nan, Effect: nan, Why: why}
}
