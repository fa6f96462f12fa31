// Package sketch summarises readings so that summaries can be merged: a lot's of
// its wafers, a week's of its lots, without keeping the dice.
//
// [Moments] holds count, extremes and the first four moments; merging is exact but
// for rounding. [Quantiles] holds counts in buckets so narrow that any
// quantile comes back with a known relative error, [Quantiles.ErrorBound], whatever the
// distribution and however often it was merged; merging is exact, in any order.
//
// # Why buckets
//
// There are sketches with fewer numbers for the same error in rank. But an error in rank
// of 0.1 % is, in the tail where limits and outliers are, any error in volts; several of
// them draw random numbers; and most depend on the order of merging, so that
// a report would change with the order of its files. Buckets by the leading bits of the
// value have none of that: the same readings give the same bytes.
//
// [Quantiler] is what the rest of the program needs of a sketch, so that another can take
// its place.
//
// Sources: Pebay 2008, Sandia Report SAND2008-6212 (moments); Masson, Rim and Lee
// 2019, Proc. VLDB Endowment 12, 2195-2205 (buckets with a relative error, merged
// exactly; the buckets here divide each octave evenly, which bounds the error as
// well and needs no logarithm).
package sketch

// Quantiler is a summary that answers for quantiles within a bound.
type Quantiler interface {
	// Add takes a reading; NaNs are counted as missing.
	Add(x float64)
	// Count is the number of readings that are not missing.
	Count() int
	// Quantile is the p-quantile; NaN with no reading.
	Quantile(p float64) float64
	// ErrorBound is the largest relative error of the order statistics that quantiles
	// are made of.
	ErrorBound() float64
}

var _ Quantiler = (*Quantiles)(nil)

// Summary is all that a test of a lot is remembered by.
type Summary struct {
	Moments   Moments
	Quantiles *Quantiles
}

// Of summarises readings with buckets of the given bits, see [New].
func Of(x []float64, bits int) Summary {
	q := New(bits)
	q.AddAll(x)
	return Summary{MomentsOf(x), q}
}

// Merge adds the readings of another summary, which is left as it is.
func (s *Summary) Merge(o Summary) {
	s.Moments = s.Moments.Merge(o.Moments)
	s.Quantiles.Merge(o.Quantiles)
}
