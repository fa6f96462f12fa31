// Package tail holds tail probabilities and quantiles of the distributions that
// tests refer to, computed as tails: a p of 1e-40 keeps its digits, which
// 1 - CDF would not.
//
// The incomplete gamma and beta functions are gonum's; what is here chooses the
// arguments that lose nothing.
package tail

import (
	"math"

	"gonum.org/v1/gonum/mathext"
)

// Normal is P(Z > z) of a standard normal Z.
func Normal(z float64) float64 { return 0.5 * math.Erfc(z/math.Sqrt2) }

// NormalQuantile is the z with P(Z < z) = p: infinite at 0 and 1, NaN outside.
func NormalQuantile(p float64) float64 {
	switch {
	case p == 0:
		return math.Inf(-1)
	case p == 1:
		return math.Inf(1)
	case !(p > 0 && p < 1):
		return math.NaN()
	}
	return mathext.NormalQuantile(p)
}

// T is P(T > t) of Student's t with df degrees of freedom.
func T(t, df float64) float64 {
	if t < 0 {
		return 1 - T2(t, df)/2
	}
	return T2(t, df) / 2
}

// T2 is P(|T| > |t|), the two-sided p of Student's t.
func T2(t, df float64) float64 {
	t = math.Abs(t)
	switch u := t * t; {
	case t != t || df != df:
		return math.NaN()
	case math.IsInf(t, 1):
		return 0
	case math.IsInf(df, 1):
		return 2 * Normal(t)
	case df > manyDF:
		return 2 * Normal(hill(t, df))
	case math.IsInf(u, 1): // beyond squares
		return 0
	default:
		// Of the two arguments that add up to one, pass the smaller, which holds the
		// digits; but a small p by itself, not as what is left of 1.
		if u < df {
			if p := 1 - mathext.RegIncBeta(0.5, df/2, u/(df+u)); p > 0.1 {
				return p
			}
		}
		return mathext.RegIncBeta(df/2, 0.5, df/(df+u))
	}
}

// manyDF is where the incomplete beta function begins to lose digits and Hill's
// expansion is good to the last.
const manyDF = 3000

// hill is the standard normal deviate with the tail that Student's t has.
// Source: Hill 1970, Communications of the ACM 13, 617-619 (algorithm 395).
func hill(t, df float64) float64 {
	a := df - 0.5
	b := 48 * a * a
	w2 := a * math.Log1p(t*t/df)
	w := math.Sqrt(w2)
	return w * (1 + ((w2+3)-(((4*w2+33)*w2+240)*w2+855)/(10*(b+0.8*w2*w2+100)))/b)
}

// TQuantile is the t > 0 with P(T > t) = upper, for 0 < upper < 1/2.
//
// Newton's method on the tail itself: the inverse of the incomplete beta
// function, which works on 1 - upper, is off by a factor of 60 at upper = 1e-8
// and two million degrees of freedom, where Grubbs' limit for a lot lies.
func TQuantile(upper, df float64) float64 {
	if !(upper > 0 && upper < 0.5) || !(df > 0) {
		return math.NaN()
	}
	if math.IsInf(df, 1) {
		return -NormalQuantile(upper)
	}
	// Work on ln tail as a function of ln t, which is nearly a line far out and
	// concave everywhere.
	u := math.Log(-NormalQuantile(upper))
	lo, hi := math.Inf(-1), math.Inf(1)
	want := math.Log(upper)
	for range 100 {
		t := math.Exp(u)
		p := T2(t, df) / 2
		if p > upper {
			lo = u
		} else {
			hi = u
		}
		slope := -math.Exp(logDensityT(t, df)) * t / p
		next := u - (math.Log(p)-want)/slope
		if p == 0 || !(next > lo && next < hi) {
			switch {
			case math.IsInf(hi, 1):
				next = u + 2
			case math.IsInf(lo, -1):
				next = u - 2
			default:
				next = lo + (hi-lo)/2
			}
		}
		if math.Abs(next-u) <= 1e-15*math.Max(1, math.Abs(u)) {
			return math.Exp(next)
		}
		u = next
	}
	return math.Exp(u)
}

func logDensityT(t, df float64) float64 {
	return logGammaRatio(df/2) - 0.5*math.Log(df*math.Pi) - (df+1)/2*math.Log1p(t*t/df)
}

// logGammaRatio is ln Gamma(a+1/2) - ln Gamma(a).
func logGammaRatio(a float64) float64 {
	if a > 1e4 { // the difference of two large logarithms keeps few digits
		return 0.5*math.Log(a) - 1/(8*a) + 1/(192*a*a*a)
	}
	g, _ := math.Lgamma(a + 0.5)
	h, _ := math.Lgamma(a)
	return g - h
}

// F is P(F > f) of Fisher's F with df1 and df2 degrees of freedom.
func F(f, df1, df2 float64) float64 {
	switch {
	case f != f || df1 != df1 || df2 != df2:
		return math.NaN()
	case f <= 0:
		return 1
	case math.IsInf(f, 1):
		return 0
	}
	a := df1 * f
	if a < df2 {
		x := a / (df2 + a)
		if q := mathext.RegIncBeta(df1/2, df2/2, x); q < 0.5 {
			return 1 - q
		}
	}
	return mathext.RegIncBeta(df2/2, df1/2, df2/(df2+a))
}

// ChiSquared is P(X > x) of chi-square with df degrees of freedom.
func ChiSquared(x, df float64) float64 {
	switch {
	case x != x || df != df:
		return math.NaN()
	case x <= 0:
		return 1
	case math.IsInf(x, 1):
		return 0
	}
	return mathext.GammaIncRegComp(df/2, x/2)
}

// Kolmogorov is the limit of P(sqrt(n) D > x) for the Kolmogorov-Smirnov
// distance D. Source: Kolmogorov 1933, Smirnov 1948.
func Kolmogorov(x float64) float64 {
	switch {
	case x != x:
		return math.NaN()
	case x <= 0:
		return 1
	case x < 1: // the other form of the theta function converges here
		sum := 0.0
		for k := 1; k < 40; k += 2 {
			sum += math.Exp(-float64(k*k) * math.Pi * math.Pi / (8 * x * x))
		}
		return 1 - math.Sqrt(2*math.Pi)/x*sum
	}
	sum, sign := 0.0, 1.0
	for k := 1; k < 40; k++ {
		term := math.Exp(-2 * float64(k*k) * x * x)
		sum += sign * term
		if term < 1e-18*sum {
			break
		}
		sign = -sign
	}
	return 2 * sum
}

// BinomialAtLeast is P(K >= k) of a binomial count of n trials at p.
func BinomialAtLeast(k, n int, p float64) float64 {
	switch {
	case k <= 0:
		return 1
	case k > n:
		return 0
	}
	return mathext.RegIncBeta(float64(k), float64(n-k+1), p)
}
