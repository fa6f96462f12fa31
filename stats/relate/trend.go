package relate

import (
	"math"

	"kneepoint/stats"
	"kneepoint/stats/internal/tail"
)

// Trend is the outcome of [MannKendall].
type Trend struct {
	// S is the number of later values that are larger less those that are smaller,
	// over all pairs; Variance its variance without a trend, corrected for ties.
	S, Variance float64
	Z           float64        // S less one towards 0, over its standard deviation
	P           float64        // two-sided
	Slope       stats.Interval // Sen's, per step of the series
	N           int
	Why         string
}

// MannKendall asks whether a series, one value a step, rises or falls. A NaN
// keeps its place in time and is skipped. With fewer than three values or equal
// ones there is no test. The values must not depend on their neighbours by more
// than the trend itself; drift and autocorrelation make the p too small.
//
// Sources: Mann 1945, Econometrica 13, 245-259; Kendall 1975; the slope: Sen 1968.
func MannKendall(y []float64, confidence float64) Trend {
	checkConfidence(confidence)
	step := make([]float64, len(y))
	for i := range step {
		step[i] = float64(i)
	}
	a, b := pairs(step, y)
	nan := math.NaN()
	t := Trend{S: nan, Variance: nan, Z: nan, P: nan, N: len(a), Slope: stats.NoInterval("")}
	k := concordance(a, b)
	switch {
	case len(a) < 3:
		t.Why = "fewer than three values"
	case k.why() != "":
		t.Why = "all values are equal"
	}
	if t.Why != "" {
		t.Slope.Why = t.Why
		return t
	}
	t.S, t.Variance = k.s, k.variance
	t.Z = math.Copysign(math.Max(math.Abs(k.s)-1, 0), k.s) / math.Sqrt(k.variance)
	t.P = math.Min(1, 2*tail.Normal(math.Abs(t.Z)))
	t.Slope = TheilSen(a, b, confidence).Slope
	return t
}
