package stats

import "math"

// Summary describes a set of readings. All but N and Missing are in the
// readings' unit, or without one (Skewness, Kurtosis).
type Summary struct {
	N       int // readings
	Missing int // NaNs
	Mean    float64
	SD      float64 // divisor n-1; NaN below two values
	Min     float64
	Max     float64
	Median  float64
	// MADSigma is 1.4826 times the median absolute deviation, see [MADSigma].
	MADSigma float64
	// Skewness is the bias-corrected G1, see [Moments.Skewness].
	Skewness float64
	// Kurtosis is the bias-corrected excess G2, see [Moments.Kurtosis].
	Kurtosis float64
	// Quantiles are at the probabilities asked for, Hyndman-Fan 8.
	Quantiles []float64
}

// Describe computes a [Summary] of x with quantiles at probs.
//
// NaNs are skipped and counted; x is not modified. An empty x gives a Summary of
// NaNs. A constant x has SD and MADSigma 0 and neither skewness nor kurtosis.
// It panics on a probability outside [0, 1].
func Describe(x []float64, probs []float64) Summary {
	var s Selector
	return s.Describe(x, probs)
}

// Describe is as the function [Describe].
func (s *Selector) Describe(x []float64, probs []float64) Summary {
	m := MomentsOf(x)
	d := Summary{
		N: m.N, Missing: m.Missing,
		Mean: m.Mean, SD: m.SD(), Min: m.Min, Max: m.Max,
		Skewness: m.Skewness(), Kurtosis: m.Kurtosis(),
	}
	// The median joins the quantiles, so that one selection serves both. Types 7
	// and 8 agree with the usual median at p = 0.5.
	all := append(append(make([]float64, 0, len(probs)+1), probs...), 0.5)
	q := make([]float64, len(all))
	s.quantiles(s.load(x), all, HyndmanFan8, q)
	d.Median = math.NaN()
	if m.N > 0 {
		r, w := HyndmanFan8.position(0.5, m.N)
		d.Median = s.medianFrom(r, w, q[len(probs)])
	}
	d.Quantiles = q[:len(probs):len(probs)]
	d.MADSigma = s.madSigma(x, d.Median)
	return d
}

// medianFrom makes the 0.5 quantile bit-equal to [Median]: the weights of the
// former carry rounding.
func (s *Selector) medianFrom(rank int, weight, quantile float64) float64 {
	if weight == 0 {
		return quantile
	}
	for i, r := range s.ranks {
		if r == rank {
			return middle(s.found[i], s.found[i+1])
		}
	}
	return quantile
}
