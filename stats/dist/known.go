package dist

import (
	"math"

	"kneepoint/stats"
	"kneepoint/stats/internal/tail"
)

// Continuous is a distribution known beforehand: a [Distribution], or one of a
// library.
type Continuous interface {
	CDF(x float64) float64
	Survival(x float64) float64
}

// AgainstKnown tests whether readings come from a distribution that was fully
// known before they were taken, such as the fit to the baseline. With parameters
// taken from the same readings both p are far too large: see [TestNormal].
//
// NaNs are skipped; without a reading there is no test. The p of A2 is good to
// five digits (Marsaglia and Marsaglia 2004, J. Statist. Software 9(2)); that of
// D exact to 140 readings without ties (Marsaglia, Tsang and Wang 2003, ibid.
// 8(18)), beyond by the limit with Stephens' correction for n.
func AgainstKnown(x []float64, d Continuous) (andersonDarling, kolmogorovSmirnov Goodness) {
	v := stats.Sorted(x)
	n := len(v)
	if n == 0 {
		return noGoodness(0, "no readings"), noGoodness(0, "no readings")
	}
	a := Goodness{Statistic: againstAD(v, d), N: n}
	a.P = knownAD(a.Statistic, n)
	k := Goodness{Statistic: kolmogorov(n, func(i int) float64 { return d.CDF(v[i]) }), N: n}
	if n <= 140 {
		k.P = exactKolmogorov(k.Statistic, n)
	} else {
		root := math.Sqrt(float64(n))
		k.P = tail.Kolmogorov(k.Statistic * (root + 0.12 + 0.11/root))
	}
	return a, k
}

func againstAD(v []float64, d Continuous) float64 {
	return andersonDarling(len(v), func(i int) float64 { return d.CDF(v[i]) }, func(i int) float64 { return d.Survival(v[i]) })
}

// knownAD is P(A2 > a) for n readings: the limit for many, and the fitted
// difference from it.
func knownAD(a float64, n int) float64 {
	switch {
	case a != a:
		return a
	case a <= 0:
		return 1
	}
	x := limitAD(a)
	m := float64(n)
	return math.Max(0, math.Min(1, 1-x-errorAD(x, m)))
}

// limitAD is the distribution function of A2 for many readings.
func limitAD(z float64) float64 {
	if z < 2 {
		return math.Exp(-1.2337141/z) / math.Sqrt(z) *
			(2.00012 + (.247105-(.0649821-(.0347962-(.011672-.00168691*z)*z)*z)*z)*z)
	}
	return math.Exp(-math.Exp(1.0776 - (2.30695-(.43424-(.082433-(.008056-.0003146*z)*z)*z)*z)*z))
}

func errorAD(x, n float64) float64 {
	if x > 0.8 {
		return (-130.2137 + (745.2337-(1705.091-(1950.646-(1116.360-255.7844*x)*x)*x)*x)*x) / n
	}
	c := .01265 + .1757/n
	if x < c {
		v := x / c
		v = math.Sqrt(v) * (1 - v) * (49*v - 102)
		return v * (.0037/(n*n) + .00078/n + .00006) / n
	}
	v := (x - c) / (.8 - c)
	v = -.00022633 + (6.54034-(14.6538-(14.458-(8.259-1.91864*v)*v)*v)*v)*v
	return v * (.04213 + .01365/n) / n
}

// exactKolmogorov is P(D > d): one element of the n-th power of a band matrix.
func exactKolmogorov(d float64, n int) float64 {
	k := int(float64(n)*d) + 1
	m := 2*k - 1
	h := float64(k) - float64(n)*d
	a := make([]float64, m*m)
	for i := range m {
		for j := range m {
			if i-j+1 >= 0 {
				a[i*m+j] = 1
			}
		}
	}
	for i := range m {
		a[i*m] -= math.Pow(h, float64(i+1))
		a[(m-1)*m+i] -= math.Pow(h, float64(m-i))
	}
	if 2*h > 1 {
		a[(m-1)*m] += math.Pow(2*h-1, float64(m))
	}
	for i := range m {
		for j := range m {
			for g := 2; g <= i-j+1; g++ {
				a[i*m+j] /= float64(g)
			}
		}
	}
	q, exponent := matrixPower(a, m, n)
	s := q[(k-1)*m+k-1]
	for i := 1; i <= n; i++ {
		if s = s * float64(i) / float64(n); s < 1e-140 {
			s *= 1e140
			exponent -= 140
		}
	}
	return math.Max(0, math.Min(1, 1-s*math.Pow(10, float64(exponent))))
}

// matrixPower returns a^n, and the power of ten that it was divided by.
func matrixPower(a []float64, m, n int) (v []float64, exponent int) {
	if n == 1 {
		return a, 0
	}
	half, e := matrixPower(a, m, n/2)
	v, exponent = product(half, half, m), 2*e
	if n%2 == 1 {
		v = product(v, a, m)
	}
	if v[m/2*m+m/2] > 1e140 {
		for i := range v {
			v[i] *= 1e-140
		}
		exponent += 140
	}
	return v, exponent
}

func product(a, b []float64, m int) []float64 {
	out := make([]float64, m*m)
	for i := range m {
		for j := range m {
			s := 0.0
			for k := range m {
				s += float64(a[i*m+k] * b[k*m+j])
			}
			out[i*m+j] = s
		}
	}
	return out
}
