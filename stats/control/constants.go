package control

import (
	"math"
	"sync"

	"gonum.org/v1/gonum/integrate/quad"
)

// Constants turn spreads of subgroups of N readings into limits, for normal
// readings.
type Constants struct {
	N int
	// C4 is the mean standard deviation of a subgroup in sigmas.
	C4 float64
	// A3, B3 and B4 times the mean standard deviation are the half-width of the
	// limits of means, and the limits of standard deviations.
	A3, B3, B4 float64
	// MeanRange (d2) and RangeSD (d3) are mean and standard deviation of a
	// subgroup's range in sigmas.
	MeanRange, RangeSD float64
	// A2, D3 and D4 times the mean range are the half-width of the limits of means,
	// and the limits of ranges.
	A2, D3, D4 float64
}

var constants sync.Map // of the constants found so far, by N

// ConstantsFor gives the chart constants of subgroups of n readings,
//
//	c4 = sqrt(2/(n-1)) Gamma(n/2) / Gamma((n-1)/2)
//	A3 = 3/(c4 sqrt n)   B3, B4 = 1 -+ 3 sqrt(1-c4^2)/c4
//	A2 = 3/(d2 sqrt n)   D3, D4 = 1 -+ 3 d3/d2
//
// with d2 and d3 the mean and standard deviation of the range of n normal
// readings, by integrating its density. B3 and D3 are 0 where the formula is
// negative. Printed tables carry three or four of these digits. It panics on
// n < 2.
//
// Sources: ISO 7870-2; Tippett 1925, Biometrika 17, 364-387 (range).
func ConstantsFor(n int) Constants {
	if n < 2 {
		panic("stats/control: subgroup of fewer than two readings")
	}
	if k, ok := constants.Load(n); ok {
		return k.(Constants)
	}
	k := Constants{N: n}
	N := float64(n)
	a, _ := math.Lgamma(N / 2)
	b, _ := math.Lgamma((N - 1) / 2)
	k.C4 = math.Sqrt(2/(N-1)) * math.Exp(a-b)
	if n > 300 { // the difference of logarithms loses digits; asymptotic series
		u := 1 / (N - 1)
		k.C4 = 1 - u/4 + u*u/32 + 5*u*u*u/128
	}
	spread := math.Sqrt(1-k.C4*k.C4) / k.C4
	k.A3 = 3 / (k.C4 * math.Sqrt(N))
	k.B3, k.B4 = math.Max(0, 1-3*spread), 1+3*spread
	k.MeanRange, k.RangeSD = rangeMoments(n)
	k.A2 = 3 / (k.MeanRange * math.Sqrt(N))
	k.D3, k.D4 = math.Max(0, 1-3*k.RangeSD/k.MeanRange), 1+3*k.RangeSD/k.MeanRange
	constants.Store(n, k)
	return k
}

// rangeMoments integrates the density of the range of n standard normal values,
//
//	f(r) = n(n-1) int phi(x) phi(x+r) (Phi(x+r) - Phi(x))^(n-2) dx
//
// The trapezoidal rule is exact to rounding for such a smooth integrand over the
// whole line; by symmetry the line is centred at -r/2.
func rangeMoments(n int) (mean, sd float64) {
	if n == 2 {
		return 2 / math.Sqrt(math.Pi), math.Sqrt(2 - 4/math.Pi)
	}
	const panels, nodes, step = 16, 16, 0.05
	var m1, m2 float64
	x, w := make([]float64, nodes), make([]float64, nodes)
	for p := range panels {
		quad.Legendre{}.FixedLocations(x, w, float64(p), float64(p+1))
		for i, r := range x {
			f := 0.0
			for u := -8.0; u <= 8+step/2; u += step {
				a, b := u-r/2, u+r/2
				inside := 0.5 * (math.Erf(b/math.Sqrt2) - math.Erf(a/math.Sqrt2))
				f += math.Exp(-0.5*(a*a+b*b)) / (2 * math.Pi) * math.Pow(inside, float64(n-2))
			}
			f *= step * float64(n) * float64(n-1) * w[i]
			m1 += r * f
			m2 += r * r * f
		}
	}
	return m1, math.Sqrt(m2 - m1*m1)
}
