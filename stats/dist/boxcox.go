package dist

import (
	"math"

	"kneepoint/stats"
	"kneepoint/stats/internal/tail"
)

// Transform is the Box-Cox transformation that makes readings most normal,
//
//	(x^lambda - 1)/lambda,  ln x at lambda = 0
type Transform struct {
	// Lambda is the maximum-likelihood estimate with its likelihood-ratio interval.
	Lambda stats.Interval
	// Log and Linear are the log-likelihoods at lambda 0 and 1 less the maximum:
	// above -1.92 that simpler transformation is not contradicted at 95 %.
	Log, Linear float64
	N           int
	Why         string
}

// BoxCox finds the transformation by profile likelihood,
//
//	L(lambda) = -n/2 ln RSS of (x^lambda - 1)/(lambda g^(lambda-1))
//
// with g the geometric mean. Lambda is sought within -20 and 20: readings that
// spread by a few percent say little about it, and its interval is then wide.
//
// NaNs are skipped. Fewer than three readings, equal ones, or one that is not
// positive or infinite leave no lambda, and Why says so. Above 2,048 different
// values the readings are gathered into cells of neighbours, which moves lambda
// in the sixth digit. Source: Box and Cox 1964, J. R. Statist. Soc. B 26, 211-252.
func BoxCox(x []float64, confidence float64) Transform {
	checkConfidence(confidence)
	logs := make([]float64, 0, len(x))
	t := Transform{Log: math.NaN(), Linear: math.NaN()}
	for _, v := range x {
		switch {
		case v != v:
		case v <= 0:
			t.Why = ErrNotPositive.Error()
		case math.IsInf(v, 1):
			t.Why = ErrInfinite.Error()
		default:
			logs = append(logs, math.Log(v))
		}
	}
	t.N = len(logs)
	cs := cells(logs)
	switch {
	case t.Why != "":
	case t.N < 3:
		t.Why = "fewer than three readings"
	case len(cs) < 2:
		t.Why = "all readings are equal"
	}
	if t.Why != "" {
		t.Lambda = stats.NoInterval(t.Why)
		return t
	}
	n, centre, sd := momentsOf(cs)
	// With y = ln x - ln g the scaled transform is g (exp(lambda y) - 1)/lambda.
	profile := func(lambda float64) float64 {
		var sum, square float64
		for _, c := range cs {
			y := c.mean - centre
			z := y
			if lambda*y != 0 {
				z = math.Expm1(lambda*y) / lambda
			}
			slope := math.Exp(lambda * y)
			sum += c.n * z
			square += c.n * (z*z + c.spread*slope*slope)
		}
		return -n / 2 * math.Log((square-sum*sum/n)/n)
	}
	lambda := top(profile, -20, 20, math.Max(1, 2/sd/20))
	best := profile(lambda)
	t.Log, t.Linear = profile(0)-best, profile(1)-best
	z := tail.NormalQuantile(0.5 + confidence/2)
	drop := z * z / 2
	end := func(sign float64) float64 {
		near, far := 0.0, 0.1
		for best-profile(lambda+sign*far) < drop {
			near = far
			if far *= 1.6; far > 1e3 {
				return math.Inf(int(sign))
			}
		}
		for range 60 {
			mid := near + (far-near)/2
			if best-profile(lambda+sign*mid) < drop {
				near = mid
			} else {
				far = mid
			}
		}
		return lambda + sign*far
	}
	t.Lambda = stats.Interval{Estimate: lambda, Lower: end(-1), Upper: end(1), Method: "likelihood ratio"}
	if math.Abs(lambda) > 19.999 {
		t.Lambda.Why = "at the end of the range that is searched"
	}
	return t
}

// top finds the maximum of a function with one, on a grid first and then by
// golden section.
func top(f func(float64) float64, lo, hi, step float64) float64 {
	at, best := lo, math.Inf(-1)
	for x := lo; x <= hi; x += step {
		if v := f(x); v > best {
			at, best = x, v
		}
	}
	const g = 0.6180339887498949
	a, b := math.Max(lo, at-step), math.Min(hi, at+step)
	x, y := b-g*(b-a), a+g*(b-a)
	fx, fy := f(x), f(y)
	for range 80 {
		if fx > fy {
			b, y, fy = y, x, fx
			x = b - g*(b-a)
			fx = f(x)
		} else {
			a, x, fx = x, y, fy
			y = a + g*(b-a)
			fy = f(y)
		}
	}
	return a + (b-a)/2
}
