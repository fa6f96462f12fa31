// Package stats holds the numbers of a report: what a set of readings looks
// like, how sure an estimate is, and how to draw it. It works on plain slices
// and knows nothing of files, lots or pages. Sub-packages have one noun each
// (yield, dist, capability ...).
//
// # Rules that hold everywhere in stats
//
//   - A NaN is a missing reading. It is skipped and, where a result says so,
//     counted. Infinities are values: they have a rank, so medians and quantiles
//     respect them, while a mean over them is what IEEE arithmetic makes of it.
//   - No argument is ever modified. Functions that must reorder work on a copy;
//     a [Selector] keeps that copy's memory for the next call.
//   - What is not defined is NaN, never a convenient zero: the mean of nothing,
//     the standard deviation of one value, the skewness of a constant. Where the
//     reader needs to know, a Why says so.
//   - Programmer errors (slices of different length, a probability above 1)
//     panic with a text that starts with the package's name. Data never panic.
//   - The same input gives the same bits, whatever the number of cores: sums run
//     in a fixed order, maps are walked in the order of their keys, nothing is
//     drawn at random.
//
// # Level, spread and shape
//
// [Describe] gives mean, standard deviation, median, MAD sigma, quantiles,
// skewness and kurtosis in one call. For test data look at the median and the
// MAD sigma first: a single shorted die moves a mean, a thousand of them hardly
// move a median. Mean and standard deviation agree with the NIST StRD certified
// values to the limit that the binary representation of the data sets.
//
// [Quantiles] names its definition, because there are nine in use and they
// differ visibly below a few hundred values.
//
// Between the mean and the median stand the estimators that keep most of the
// mean's precision and most of the median's robustness: [HodgesLehmann],
// [Huber], [HuberProposal2], [TrimmedMean].
//
// # Pictures
//
// [FreedmanDiaconis] chooses histogram bins that show the data and not the
// resolution of the tester.
package stats

import "math"

// Interval is an estimate with an interval that should hold the true value with
// the confidence asked for.
//
// Method names how it was computed. Why says what is missing when a number is
// NaN, or what the reader must know about an interval that is wider or narrower
// than it looks.
type Interval struct {
	Estimate, Lower, Upper float64
	Method, Why            string
}

// NoInterval is an Interval of which nothing is known, and why.
func NoInterval(why string) Interval {
	return Interval{Estimate: math.NaN(), Lower: math.NaN(), Upper: math.NaN(), Why: why}
}
