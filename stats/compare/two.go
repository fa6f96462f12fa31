package compare

import (
	"math"

	"kneepoint/stats"
	"kneepoint/stats/internal/tail"
)

// Means is the comparison of two means by Student's t.
type Means struct {
	// Difference is mean(x) - mean(y) with its interval, in the readings' unit.
	Difference stats.Interval
	T, DF, P   float64 // P is two-sided
	// Standardised is the difference in standard deviations (Cohen's d, by the
	// pooled standard deviation): 0.2 is small, 0.8 large.
	Standardised float64
	NX, NY       int
	Why          string
}

// WelchT compares the means of two samples whose spreads may differ, with the
// degrees of freedom of Welch and Satterthwaite. NaNs are skipped. There is no
// t, and Why says so, with fewer than two readings on a side, an infinite
// reading, or no spread on both. Source: Welch 1947, Biometrika 34, 28-35.
func WelchT(x, y []float64, confidence float64) Means {
	return means(x, y, confidence, func(a, b stats.Moments) (se, df float64) {
		u, v := a.Variance()/float64(a.N), b.Variance()/float64(b.N)
		se = math.Sqrt(u + v)
		return se, (u + v) * (u + v) / (u*u/float64(a.N-1) + v*v/float64(b.N-1))
	}, "Welch's t")
}

// PooledT compares the means of two samples with one spread, the classical
// two-sample t. NaNs and Why as for [WelchT]. Source: Student 1908, Biometrika 6,
// 1-25; Fisher 1925.
func PooledT(x, y []float64, confidence float64) Means {
	return means(x, y, confidence, func(a, b stats.Moments) (se, df float64) {
		s := pooledSD(a, b)
		return s * math.Sqrt(1/float64(a.N)+1/float64(b.N)), float64(a.N + b.N - 2)
	}, "pooled t")
}

func pooledSD(a, b stats.Moments) float64 {
	n, m := float64(a.N-1), float64(b.N-1)
	return math.Sqrt((n*a.Variance() + m*b.Variance()) / (n + m))
}

func means(x, y []float64, confidence float64, spread func(a, b stats.Moments) (se, df float64), method string) Means {
	checkConfidence(confidence)
	nan := math.NaN()
	a, b := stats.MomentsOf(x), stats.MomentsOf(y)
	c := Means{NX: a.N, NY: b.N, T: nan, DF: nan, P: nan, Standardised: nan}
	switch {
	case a.N < 2 || b.N < 2:
		c.Why = "fewer than two readings on a side"
	case math.IsInf(a.Mean, 0) || math.IsInf(b.Mean, 0) || a.Mean != a.Mean || b.Mean != b.Mean:
		c.Why = "an infinite reading"
	case !(a.Variance() > 0) && !(b.Variance() > 0):
		c.Why = "no spread on either side"
	}
	if c.Why != "" {
		c.Difference = stats.NoInterval(c.Why)
		return c
	}
	se, df := spread(a, b)
	d := a.Mean - b.Mean
	half := tail.TQuantile((1-confidence)/2, df) * se
	c.Difference = stats.Interval{Estimate: d, Lower: d - half, Upper: d + half, Method: method}
	c.T, c.DF = d/se, df
	c.P = tail.T2(c.T, df)
	c.Standardised = d / pooledSD(a, b)
	return c
}

// VarianceRatio compares the variances of two normal samples: Statistic is
// var(x)/var(y) on DF1 = n_x-1 and DF2 = n_y-1, P two-sided, Effect the ratio of
// the standard deviations. It takes any departure from the normal shape for a
// difference: see [BrownForsythe]. NaNs are skipped; Why as for [WelchT].
func VarianceRatio(x, y []float64) Result {
	a, b := stats.MomentsOf(x), stats.MomentsOf(y)
	v, w := a.Variance(), b.Variance()
	switch {
	case a.N < 2 || b.N < 2:
		return no("fewer than two readings on a side")
	case v != v || w != w:
		return no("an infinite reading")
	case !(v > 0) || !(w > 0):
		return no("a side without spread")
	}
	r := Result{Statistic: v / w, DF1: float64(a.N - 1), DF2: float64(b.N - 1), N: a.N + b.N, Groups: 2}
	above := tail.F(r.Statistic, r.DF1, r.DF2)
	below := tail.F(1/r.Statistic, r.DF2, r.DF1)
	r.P = math.Min(1, 2*math.Min(above, below))
	r.Effect = math.Sqrt(r.Statistic)
	return r
}

// KolmogorovSmirnov asks whether x and y come from one distribution, whatever
// differs. Statistic, which is the Effect too, is the largest distance between
// their distribution functions, 0 to 1.
//
// The p is from the limit distribution; with ties, or fewer than about 25
// readings a side, it is too large, on the safe side. NaNs are skipped;
// infinities have their rank. Source: Smirnov 1939; Kolmogorov 1933.
func KolmogorovSmirnov(x, y []float64) Result {
	a, b := stats.Sorted(x), stats.Sorted(y)
	if len(a) == 0 || len(b) == 0 {
		return no("no readings on a side")
	}
	n, m := float64(len(a)), float64(len(b))
	d := 0.0
	for i, j := 0, 0; i < len(a) && j < len(b); {
		v := math.Min(a[i], b[j])
		for i < len(a) && a[i] == v {
			i++
		}
		for j < len(b) && b[j] == v {
			j++
		}
		d = math.Max(d, math.Abs(float64(i)/n-float64(j)/m))
	}
	return Result{Statistic: d, DF1: math.NaN(), DF2: math.NaN(), P: tail.Kolmogorov(d * math.Sqrt(n*m/(n+m))), Effect: d,
		N: len(a) + len(b), Groups: 2}
}
