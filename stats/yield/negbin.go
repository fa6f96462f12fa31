package yield

import (
	"math"

	"gonum.org/v1/gonum/mathext"
)

// The likelihood of a negative binomial law. Differences of gamma functions
// between x + a and a are sums over the x steps between them, which keep their
// digits for large a, where the law is nearly Poisson's; x is a count of defects,
// so the sums are short, and beyond a thousand terms the functions themselves do.

const manySteps = 1000

// rise is log Gamma(x+a) - log Gamma(a) - x log a.
func rise(x, a float64) float64 {
	if x > manySteps {
		p, _ := math.Lgamma(x + a)
		q, _ := math.Lgamma(a)
		return p - q - x*math.Log(a)
	}
	s := 0.0
	for j := 1.0; j < x; j++ {
		s += math.Log1p(j / a)
	}
	return s
}

// risePrime is digamma(x+a) - digamma(a).
func risePrime(x, a float64) float64 {
	if x > manySteps {
		return mathext.Digamma(x+a) - mathext.Digamma(a)
	}
	s := 0.0
	for j := 0.0; j < x; j++ {
		s += 1 / (a + j)
	}
	return s
}

// riseSecond is trigamma(a) - trigamma(x+a).
func riseSecond(x, a float64) float64 {
	if x > manySteps {
		return mathext.Zeta(2, a) - mathext.Zeta(2, x+a)
	}
	s := 0.0
	for j := 0.0; j < x; j++ {
		s += 1 / ((a + j) * (a + j))
	}
	return s
}

// logLik is the log-likelihood; an infinite a is Poisson's.
func (f *tally) logLik(a, density float64) float64 {
	ll := 0.0
	for _, p := range f.items {
		m := density * p.area
		fact, _ := math.Lgamma(p.x + 1)
		one := -fact
		if p.x > 0 {
			one += p.x * math.Log(m)
		}
		if math.IsInf(a, 1) {
			one -= m
		} else {
			one += rise(p.x, a) - (p.x+a)*math.Log1p(m/a)
		}
		ll += p.n * one
	}
	return ll
}

// slope is the derivative of the log-likelihood by a.
func (f *tally) slope(a, density float64) float64 {
	s := 0.0
	for _, p := range f.items {
		m := density * p.area
		s += p.n * (risePrime(p.x, a) - math.Log1p(m/a) - (p.x-m)/(a+m))
	}
	return s
}

// information is the negative second derivative by a.
func (f *tally) information(a, density float64) float64 {
	s := 0.0
	for _, p := range f.items {
		m := density * p.area
		s += p.n * (riseSecond(p.x, a) - 1/a + 2/(m+a) - (p.x+a)/((m+a)*(m+a)))
	}
	return s
}

// overdispersed says whether the likelihood rises from Poisson's end: its
// derivative by 1/a there is half of sum (x-m)^2 - x.
func (f *tally) overdispersed(density float64) bool {
	s := 0.0
	for _, p := range f.items {
		m := density * p.area
		s += p.n * ((p.x-m)*(p.x-m) - p.x)
	}
	return s > 0
}

// density is the most likely one at a: the root of a falling function of its
// logarithm, by Newton's method kept between bounds.
func (f *tally) density(a float64) float64 {
	start := 0.0
	for _, p := range f.items {
		start += p.n * p.x
	}
	start /= f.area
	equal := true
	for _, p := range f.items {
		equal = equal && p.area == f.items[0].area
	}
	if equal || math.IsInf(a, 1) {
		return start
	}
	t, lo, hi := math.Log(start), math.Log(start)-50, math.Log(start)+50
	for range 200 {
		d := math.Exp(t)
		s, h := 0.0, 0.0
		for _, p := range f.items {
			m := d * p.area
			s += p.n * a * (p.x - m) / (a + m)
			h += p.n * a * m * (a + p.x) / ((a + m) * (a + m))
		}
		if s > 0 {
			lo = t
		} else {
			hi = t
		}
		step := s / h
		if t += step; !(t > lo && t < hi) {
			t = (lo + hi) / 2
		}
		if math.Abs(step) < 1e-14 {
			break
		}
	}
	return math.Exp(t)
}

// The range of a that is searched: beyond the upper end the law cannot be told
// from Poisson's.
const smallestAlpha, largestAlpha = 1e-6, 1e7

// best is the most likely a with its density; infinite when it is out of range.
func (f *tally) best() (a, density float64) {
	profile := func(a float64) float64 { return f.slope(a, f.density(a)) }
	a = rootOf(profile)
	return a, f.density(a)
}

// rootOf finds where a falling slope changes sign, by bisection on the logarithm;
// +Inf when it is positive throughout.
func rootOf(slope func(a float64) float64) float64 {
	lo, hi := math.Log(smallestAlpha), math.Log(largestAlpha)
	if slope(largestAlpha) >= 0 {
		return math.Inf(1)
	}
	for range 100 {
		mid := (lo + hi) / 2
		if slope(math.Exp(mid)) > 0 {
			lo = mid
		} else {
			hi = mid
		}
		if hi-lo < 1e-13 {
			break
		}
	}
	return math.Exp((lo + hi) / 2)
}

// alphaLimits are where the profile of the likelihood has fallen by cut.
func (f *tally) alphaLimits(a, best, cut float64) (lower, upper float64) {
	fall := func(a float64) float64 { return best - f.logLik(a, f.density(a)) - cut }
	start := math.Min(a, largestAlpha)
	lower = crossing(start, smallestAlpha, fall)
	upper = math.Inf(1)
	if a < largestAlpha && fall(math.Inf(1)) > 0 {
		upper = crossing(start, largestAlpha, fall)
	}
	return lower, upper
}

// crossing bisects, on the logarithm, between a point inside and an end; the end
// when that is inside too.
func crossing(inside, end float64, fall func(float64) float64) float64 {
	if fall(end) <= 0 {
		return end
	}
	in, out := math.Log(inside), math.Log(end)
	for range 60 {
		mid := (in + out) / 2
		if fall(math.Exp(mid)) > 0 {
			out = mid
		} else {
			in = mid
		}
		if math.Abs(in-out) < 1e-12 {
			break
		}
	}
	return math.Exp((in + out) / 2)
}

// densityLimits are where the likelihood, with the best a for each density, has
// fallen by cut.
func (f *tally) densityLimits(density, best, cut float64) (lower, upper float64) {
	fall := func(d float64) float64 {
		a := rootOf(func(a float64) float64 { return f.slope(a, d) })
		ll := f.logLik(a, d)
		return best - math.Max(ll, f.logLik(math.Inf(1), d)) - cut
	}
	lo, hi := density, density
	for range 200 {
		if lo /= 2; fall(lo) > 0 {
			break
		}
	}
	for range 200 {
		if hi *= 2; fall(hi) > 0 {
			break
		}
	}
	return crossing(density, lo, fall), crossing(density, hi, fall)
}
