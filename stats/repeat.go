package stats

import "math"

// RepeatPairs is the fewest pairs from which a repeatability is given.
const RepeatPairs = 10

// Repeatability is the gauge repeatability seen in pairs of readings of the same
// part: the standard deviation of one reading under repetition,
//
//	sigma = 1.4826 median |d| / sqrt(2),  d = second - first
//
// robust against parts that changed between the readings (a contact mended, a
// part damaged), which a mean of squares would take for the gauge. Shift is the
// median of d. Both are in the readings' unit. Pairs with a NaN are skipped; N is
// the number of others. Below RepeatPairs pairs both are NaN, and Why says so.
// It panics when the lengths differ.
//
// Source: the difference of two like readings has sqrt(2) times their sigma; the
// factor makes the median of absolute values consistent for a normal law
// (Rousseeuw and Croux 1993).
type Repeatability struct {
	N            int
	Sigma, Shift float64
	Why          string
}

// RepeatabilityOf computes the repeatability of pairs of readings.
func RepeatabilityOf(first, second []float64) Repeatability {
	if len(first) != len(second) {
		panic("stats: slice length mismatch")
	}
	var d, abs []float64
	for i := range first {
		if v := second[i] - first[i]; !math.IsNaN(v) && !math.IsInf(v, 0) {
			d, abs = append(d, v), append(abs, math.Abs(v))
		}
	}
	r := Repeatability{N: len(d), Sigma: math.NaN(), Shift: math.NaN()}
	if len(d) < RepeatPairs {
		r.Why = "too few parts were read twice"
		return r
	}
	r.Sigma, r.Shift = 1.4826*Median(abs)/math.Sqrt2, Median(d)
	return r
}
