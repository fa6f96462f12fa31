package control

import (
	"math"

	"kneepoint/stats"
)

// subgroup is what a chart needs of one.
type subgroup struct{ n, mean, sd, span float64 }

func summarise(groups [][]float64) []subgroup {
	out := make([]subgroup, len(groups))
	for i, g := range groups {
		m := stats.MomentsOf(g)
		out[i] = subgroup{float64(m.N), m.Mean, m.SD(), m.Max - m.Min}
		if m.N < 2 {
			out[i].sd, out[i].span = math.NaN(), math.NaN()
		}
	}
	return out
}

// XbarS charts the means and the standard deviations of subgroups. With s_i over
// c4(n_i) an unbiased sigma of subgroup i,
//
//	sigma = weighted mean of s_i / c4(n_i), weights c4^2/(1 - c4^2)
//	means   grand mean -+ 3 sigma/sqrt(n_i)
//	spreads c4 sigma -+ 3 sigma sqrt(1 - c4^2), not below 0
//
// which for equal sizes is the mean s over c4, and the limits of A3, B3 and B4.
// The grand mean is over all readings. NaNs in subgroups are skipped; a subgroup
// of one reading has a mean only; an empty one is a missing point.
//
// Sources: ISO 7870-2; Burr 1969, J. Quality Technology 1, 163-167, for unequal
// sizes.
func XbarS(groups [][]float64) (means, spreads Chart) {
	g := summarise(groups)
	return charts(g,
		func(s subgroup) float64 { return s.sd },
		func(n int) (float64, float64) {
			c4 := ConstantsFor(n).C4
			return c4, math.Sqrt(1 - c4*c4)
		})
}

// XbarR charts the means and the ranges of subgroups, as [XbarS] with ranges, d2
// and d3 in the place of standard deviations and c4: for two to ten readings a
// subgroup. Source: ISO 7870-2.
func XbarR(groups [][]float64) (means, ranges Chart) {
	g := summarise(groups)
	return charts(g,
		func(s subgroup) float64 { return s.span },
		func(n int) (float64, float64) {
			k := ConstantsFor(n)
			return k.MeanRange, k.RangeSD
		})
}

// charts does the common part; factor gives mean and standard deviation of the
// measure of spread, in sigmas.
func charts(g []subgroup, spread func(subgroup) float64, factor func(n int) (mean, sd float64)) (means, spreads Chart) {
	mean, of := make([]float64, len(g)), make([]float64, len(g))
	var total, sum, weights, sigma float64
	for i, s := range g {
		mean[i], of[i] = s.mean, spread(s)
		total += s.n
		if s.n > 0 {
			sum += s.n * s.mean
		}
		if s.n >= 2 {
			m, sd := factor(int(s.n))
			w := m * m / (sd * sd)
			weights += w
			sigma += w * of[i] / m
		}
	}
	if weights == 0 {
		return empty(mean, "no subgroup of two readings"), empty(of, "no subgroup of two readings")
	}
	sigma /= weights
	center := sum / total
	means = newChart(mean, center, sigma, func(i int) (float64, float64) {
		half := 3 * sigma / math.Sqrt(g[i].n)
		return center - half, center + half
	})
	middle := math.NaN()
	spreads = newChart(of, middle, sigma, func(i int) (float64, float64) {
		if g[i].n < 2 {
			return math.NaN(), math.NaN()
		}
		m, sd := factor(int(g[i].n))
		return math.Max(0, sigma*(m-3*sd)), sigma * (m + 3*sd)
	})
	if v := stats.Mean(of); v == v {
		spreads.Center = v
	}
	return means, spreads
}
