package build

import (
	"fmt"
	"math"

	"kneepoint/stats"
	"kneepoint/stats/dist"
)

// summary is a description of readings of which some may be bounds.
type summary struct {
	stats.Summary
	Why string // what the bounds cost, "" without any
}

// describe describes readings with their censoring marks (nil: none; +1 at least
// the value, -1 at most).
//
// Bounds keep their place in the order: a reading 'at least' counts as above
// every other, one 'at most' as below, which is right for a clamp or a floor at
// the end of the range. A quantile or spread that falls among the bounds is not
// known (NaN). Mean and sd come from the maximum-likelihood normal fit that
// takes the bounds as bounds, without those that are far off the others (an open
// contact at the clamp is no tail of the junctions' distribution); shape (skewness, kurtosis) is not known. Min and max
// are of the readings as they stand, bounds included.
func describe(x []float64, marks []int8, probs []float64) summary {
	bounds := 0
	for i, m := range marks {
		if m != 0 && !math.IsNaN(x[i]) {
			bounds++
		}
	}
	if bounds == 0 {
		s := summary{Summary: stats.Describe(x, probs)}
		switch {
		case s.N == 0:
			s.Why = "no readings"
		case s.N == 1:
			s.Why = "one reading has no spread"
		}
		return s
	}
	ordered := make([]float64, len(x))
	low, high := math.Inf(1), math.Inf(-1)
	for i, v := range x {
		ordered[i] = v
		if math.IsNaN(v) {
			continue
		}
		low, high = min(low, v), max(high, v)
		if marks[i] != 0 {
			ordered[i] = math.Inf(int(marks[i]))
		}
	}
	s := summary{Summary: stats.Describe(ordered, probs)}
	s.Min, s.Max = low, high
	s.Mean, s.SD, s.Skewness, s.Kurtosis = math.NaN(), math.NaN(), math.NaN(), math.NaN()
	s.Median, s.MADSigma = known(s.Median), known(s.MADSigma)
	for i := range s.Quantiles {
		s.Quantiles[i] = known(s.Quantiles[i])
	}
	s.Why = fmt.Sprintf("%d readings are bounds: quantiles among them and the shape are not known", bounds)
	if bounds == 1 {
		s.Why = "1 reading is a bound: the shape is not known"
	}
	near, farLow, farHigh := setAsideBounds(x, marks)
	if fit, err := dist.FitNormal(near, marks); err == nil {
		s.Mean, s.SD = fit.Mu, fit.Sigma
		switch far := farLow + farHigh; {
		case far == bounds:
			s.Why += "; mean and sd are without them, as they are far off the others"
		case far > 0:
			s.Why += fmt.Sprintf("; mean and sd are from a normal fit that takes them as bounds, but for %d far off the others, which are left out", far)
		default:
			s.Why += "; mean and sd are from a normal fit that takes them as bounds"
		}
	}
	return s
}

func known(v float64) float64 {
	if math.IsInf(v, 0) {
		return math.NaN()
	}
	return v
}
