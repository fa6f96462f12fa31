package compare

import (
	"math"

	"kneepoint/stats"
)

// Adjustment names a way to adjust p values for their number.
type Adjustment int

const (
	// Bonferroni multiplies by the number of tests. Holm is as safe and always
	// sharper.
	Bonferroni Adjustment = iota
	// Holm keeps the chance of even one false finding below alpha, whatever the
	// tests have to do with each other. Source: Holm 1979, Scand. J. Statist. 6,
	// 65-70.
	Holm
	// BenjaminiHochberg keeps the expected share of false findings among the
	// findings below alpha, for tests that are independent or pull the same way.
	// Source: Benjamini and Hochberg 1995, J. R. Statist. Soc. B 57, 289-300.
	BenjaminiHochberg
	// BenjaminiYekutieli does so whatever the dependence, at the price of a factor
	// of about ln n. Source: Benjamini and Yekutieli 2001, Ann. Statist. 29,
	// 1165-1188.
	BenjaminiYekutieli
)

// Adjust returns adjusted p values in the order of p: those up to alpha are the
// findings at alpha. NaNs (tests that gave no p) stay NaN and do not count. It
// panics on a p outside [0, 1].
func Adjust(p []float64, how Adjustment) []float64 {
	out := make([]float64, len(p))
	for i, v := range p {
		if v < 0 || v > 1 {
			panic("stats/compare: p outside [0, 1]")
		}
		out[i] = math.NaN()
	}
	order := stats.Order(p)
	n := float64(len(order))
	factor := 1.0
	if how == BenjaminiYekutieli {
		factor = 0
		for i := range order {
			factor += 1 / float64(i+1)
		}
	}
	switch how {
	case Bonferroni:
		for _, at := range order {
			out[at] = math.Min(1, n*p[at])
		}
	case Holm: // no smaller than those before it
		top := 0.0
		for i, at := range order {
			top = math.Max(top, math.Min(1, (n-float64(i))*p[at]))
			out[at] = top
		}
	case BenjaminiHochberg, BenjaminiYekutieli: // no larger than those after it
		low := 1.0
		for i := len(order) - 1; i >= 0; i-- {
			at := order[i]
			low = math.Min(low, factor*n/float64(i+1)*p[at])
			out[at] = low
		}
	default:
		panic("stats/compare: unknown adjustment")
	}
	return out
}
