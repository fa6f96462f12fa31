package variance

import (
	"math"
)

// search finds profile limits about a fit.
type search struct {
	m     *model
	free  []int
	tau   []float64 // the fit
	least float64   // its twice negative log-likelihood
	cut   float64
	fixed float64 // variance of the pattern
	df    []float64
}

// component gives the limits of variance k.
func (s *search) component(k int) (lower, upper float64) {
	others := s.others(k)
	return s.limits(s.tau[k], math.Inf(1), func(c float64) line {
		return holding(len(s.tau), s.free, k, c, 0)
	}, others, s.stride(s.df[k]))
}

// share gives the limits of variance k's share of the total: a share p is held by
// keeping the variance at p/(1-p) times the sum of the others.
func (s *search) share(k int) (lower, upper float64) {
	rest := s.fixed
	for i, t := range s.tau {
		if i != k {
			rest += t
		}
	}
	lo, hi := s.limits(s.tau[k]/rest, math.Inf(1), func(odds float64) line {
		return holding(len(s.tau), s.free, k, odds*s.fixed, odds)
	}, s.others(k), s.stride(s.df...))
	if math.IsInf(hi, 1) {
		return lo / (1 + lo), 1
	}
	return lo / (1 + lo), hi / (1 + hi)
}

// stride is the factor from an estimate to about its limit, for a variance worth
// the least of df degrees of freedom.
func (s *search) stride(df ...float64) float64 {
	least := math.Inf(1)
	for _, n := range df {
		if n > 0 {
			least = math.Min(least, n)
		}
	}
	return math.Max(1.0001, math.Min(2, math.Exp(math.Sqrt(2*s.cut/least))))
}

func (s *search) others(k int) []float64 {
	var u []float64
	for _, i := range s.free {
		if i != k {
			u = append(u, s.tau[i])
		}
	}
	return u
}

// limits finds where the profile of the likelihood is cut below and above the
// estimate. The root of its fall is nearly straight in the logarithm of a
// variance, so regula falsi (Illinois) on that root needs few steps.
func (s *search) limits(estimate, end float64, hold func(float64) line, start []float64, stride float64) (lower, upper float64) {
	fall := func(c float64, u []float64) float64 {
		return math.Sqrt(math.Max(0, s.m.minimise(hold(c), u)-s.least)) - math.Sqrt(s.cut)
	}
	fresh := func() []float64 { return append([]float64{}, start...) }

	// Upper: go out until it is beyond.
	in := math.Max(estimate, 1e-6)
	u := fresh()
	out, at := in, -math.Sqrt(s.cut)
	inAt := at
	for step := stride; ; step *= 1.5 {
		in, inAt = out, at
		out *= step
		if !(out <= 1e12) {
			upper = math.Inf(1)
			break
		}
		if at = fall(out, u); at > 0 {
			upper = falsi(in, inAt, out, at, func(c float64) float64 { return fall(c, u) })
			break
		}
	}
	// Lower: zero, unless zero is beyond.
	u = fresh()
	if !(estimate > 0) || fall(0, fresh()) <= 0 {
		return 0, upper
	}
	in, inAt = estimate, -math.Sqrt(s.cut)
	out, at = in, inAt
	for step := stride; ; step *= 1.5 {
		in, inAt = out, at
		out /= step
		if !(out >= 1e-15) {
			return 0, upper
		}
		if at = fall(out, u); at > 0 {
			return falsi(in, inAt, out, at, func(c float64) float64 { return fall(c, u) }), upper
		}
	}
}

// falsi finds a zero between a and b, both positive, on the logarithmic scale.
func falsi(a, fa, b, fb float64, f func(float64) float64) float64 {
	la, lb := math.Log(a), math.Log(b)
	side := 0
	for range 60 {
		lc := (fa*lb - fb*la) / (fa - fb)
		fc := f(math.Exp(lc))
		if math.Abs(fc) < 1e-6 || math.Abs(lb-la) < 1e-9 {
			return math.Exp(lc)
		}
		if (fc > 0) == (fb > 0) {
			lb, fb = lc, fc
			if side == 1 {
				fa /= 2
			}
			side = 1
		} else {
			la, fa = lc, fc
			if side == -1 {
				fb /= 2
			}
			side = -1
		}
	}
	return math.Exp((la + lb) / 2)
}
