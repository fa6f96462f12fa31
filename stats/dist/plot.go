package dist

import (
	"math"

	"gonum.org/v1/gonum/stat/distuv"
	"kneepoint/stats/internal/tail"
)

// PlotPoint is a point of a probability plot.
type PlotPoint struct {
	X float64 // the reading
	// Share is its plotting position: the middle of the step that the empirical
	// distribution function takes there.
	Share float64
	// Z is the deviate of Share on the family's paper, on which the fitted
	// distribution is a straight line against X (normal), against ln X (lognormal,
	// Weibull), or, for a gamma distribution, the fitted quantile against X.
	Z float64
	// Fitted is the fitted quantile at Share. Lower and Upper are where a reading
	// of this rank lies in 95 % of the samples of the fitted distribution.
	Fitted, Lower, Upper float64
}

// ProbabilityPlot gives the points of a probability plot of readings marked as
// in [FitNormal] against a distribution fitted to them, at most so many of them:
// where there are more different values, those nearest to equal distances in Z,
// the outermost ones included, so that tails keep their points. Bounds have no
// point of their own but move the others (see [Empirical]).
//
// The band is that of order statistics (beta distribution), point by point: of
// many points a few lie outside. With bounds it is approximate. It panics on
// slices of different length and on most < 2.
//
// Source: Hazen 1914 for the positions; Meeker and Escobar 1998, Statistical
// Methods for Reliability Data, section 6.4, with bounds.
func ProbabilityPlot(x []float64, censor []int8, d Distribution, most int) []PlotPoint {
	if most < 2 {
		panic("stats/dist: fewer than two points to plot")
	}
	s := Empirical(x, censor)
	k := len(s.X)
	share := func(i int) float64 {
		before := s.Below
		if i > 0 {
			before = s.P[i-1]
		}
		return (before + s.P[i]) / 2
	}
	var picked []int
	if k <= most {
		for i := range k {
			picked = append(picked, i)
		}
	} else {
		lo, hi := tail.NormalQuantile(share(0)), tail.NormalQuantile(share(k-1))
		next := 0
		for j := range most {
			want := tail.Normal(-(lo + (hi-lo)*float64(j)/float64(most-1)))
			for j > 0 && next < k-1 && share(next) < want {
				next++
			}
			if j == most-1 {
				next = k - 1
			}
			if len(picked) == 0 || picked[len(picked)-1] != next {
				picked = append(picked, next)
			}
		}
	}
	n := float64(s.N)
	out := make([]PlotPoint, 0, len(picked))
	for _, i := range picked {
		p := share(i)
		if !(p > 0 && p < 1) {
			continue
		}
		q := PlotPoint{X: s.X[i], Share: p, Fitted: d.Quantile(p)}
		switch d.Family() {
		case WeibullFamily:
			q.Z = math.Log(-math.Log1p(-p))
		case GammaFamily:
			q.Z = q.Fitted
		default:
			q.Z = tail.NormalQuantile(p)
		}
		rank := p*n + 0.5 // of the middle of equal readings
		b := distuv.Beta{Alpha: math.Max(rank, 0.5), Beta: math.Max(n-rank+1, 0.5)}
		q.Lower, q.Upper = d.Quantile(b.Quantile(0.025)), d.Quantile(b.Quantile(0.975))
		out = append(out, q)
	}
	return out
}
