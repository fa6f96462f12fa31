package dist

import (
	"math"

	"kneepoint/stats"
	"kneepoint/stats/internal/tail"
)

// Goodness is the outcome of a test of fit.
type Goodness struct {
	Statistic float64
	// P is the probability of a statistic this large when the readings do come
	// from the distribution. NaN with a Why where it is not known.
	P   float64
	N   int
	Why string
}

func noGoodness(n int, why string) Goodness {
	return Goodness{Statistic: math.NaN(), P: math.NaN(), N: n, Why: why}
}

// GoodnessOfFit holds the tests of the normal distribution with mean and standard
// deviation (divisor n-1) from the readings.
type GoodnessOfFit struct {
	// AndersonDarling weighs the tails most, and is the one to look at.
	AndersonDarling Goodness
	// CramerVonMises and Lilliefors (Kolmogorov-Smirnov with the parameters
	// estimated) weigh the middle.
	CramerVonMises, Lilliefors Goodness
	// ShapiroWilk is the most powerful for few readings; up to 5,000.
	ShapiroWilk Goodness
}

// TestNormal tests whether readings are normal. Statistics:
//
//	A2 = -n - sum (2i-1)/n (ln u_i + ln(1-u_(n+1-i)))
//	W2 = 1/(12n) + sum (u_i - (2i-1)/2n)^2
//	D  = max |i/n - u_i|, |u_i - (i-1)/n|
//
// with u_i the fitted normal probabilities of the sorted readings.
//
// NaNs are skipped; values must be exact: a test of clamped readings would find
// the clamp. Below eight readings (five for Lilliefors, three for Shapiro-Wilk),
// with an infinite one or with all equal there is no test, and Why says so. With
// thousands of readings every p is small: see [SizeOfMisfit].
//
// Sources: Stephens 1986 in D'Agostino and Stephens, Goodness-of-Fit Techniques,
// tables 4.7 and 4.9 (A2, W2); Lilliefors 1967, J. Amer. Statist. Assoc. 62,
// 399-402, with the p of Dallal and Wilkinson 1986, Amer. Statist. 40, 294-296,
// and above 0.1 of Stephens 1974; Royston 1995, Applied Statistics 44, 547-551
// (algorithm AS R94). The p of A2 and of W2 are good to the second digit.
func TestNormal(x []float64) GoodnessOfFit {
	v := stats.Sorted(x)
	n := len(v)
	none := func(why string) GoodnessOfFit {
		g := noGoodness(n, why)
		return GoodnessOfFit{g, g, g, g}
	}
	m := stats.MomentsOf(v)
	switch {
	case n < 3:
		return none("fewer than three readings")
	case math.IsInf(v[0], 0) || math.IsInf(v[n-1], 0):
		return none("an infinite reading")
	case v[0] == v[n-1]:
		return none("all readings are equal")
	}
	sd := m.SD()
	z := make([]float64, n)
	for i := range v {
		z[i] = (v[i] - m.Mean) / sd
	}
	g := GoodnessOfFit{ShapiroWilk: shapiroWilk(v)}
	below := func(i int) float64 { return tail.Normal(-z[i]) }
	above := func(i int) float64 { return tail.Normal(z[i]) }
	g.AndersonDarling = atLeast(8, n, andersonDarling(n, below, above), andersonDarlingP)
	g.CramerVonMises = atLeast(8, n, cramerVonMises(n, below), cramerVonMisesP)
	g.Lilliefors = atLeast(5, n, kolmogorov(n, below), lillieforsP)
	return g
}

func atLeast(least, n int, statistic float64, p func(statistic, n float64) float64) Goodness {
	if n < least {
		return noGoodness(n, "too few readings for this test")
	}
	return Goodness{Statistic: statistic, P: p(statistic, float64(n)), N: n}
}

// andersonDarling takes the probabilities below and above the sorted readings,
// each with its digits where it is small.
func andersonDarling(n int, below, above func(i int) float64) float64 {
	sum := 0.0
	for i := range n {
		sum += float64(2*i+1) * (math.Log(below(i)) + math.Log(above(n-1-i)))
	}
	return -float64(n) - sum/float64(n)
}

func cramerVonMises(n int, below func(i int) float64) float64 {
	sum := 1 / (12 * float64(n))
	for i := range n {
		d := below(i) - float64(2*i+1)/(2*float64(n))
		sum += d * d
	}
	return sum
}

func kolmogorov(n int, below func(i int) float64) float64 {
	d := 0.0
	for i := range n {
		u := below(i)
		d = math.Max(d, math.Max(float64(i+1)/float64(n)-u, u-float64(i)/float64(n)))
	}
	return d
}

// andersonDarlingP is by Stephens' modified statistic and fitted exponents.
func andersonDarlingP(a, n float64) float64 {
	a *= 1 + 0.75/n + 2.25/(n*n)
	switch {
	case a < 0.2:
		return 1 - math.Exp(-13.436+101.14*a-223.73*a*a)
	case a < 0.34:
		return 1 - math.Exp(-8.318+42.796*a-59.938*a*a)
	case a < 0.6:
		return math.Exp(0.9177 - 4.279*a - 1.38*a*a)
	case a < 10:
		return math.Exp(1.2937 - 5.709*a + 0.0186*a*a)
	}
	return 3.7e-24 // as small as the fit goes
}

func cramerVonMisesP(w, n float64) float64 {
	w *= 1 + 0.5/n
	switch {
	case w < 0.0275:
		return 1 - math.Exp(-13.953+775.5*w-12542.61*w*w)
	case w < 0.051:
		return 1 - math.Exp(-5.903+179.546*w-1515.29*w*w)
	case w < 0.092:
		return math.Exp(0.886 - 31.62*w + 10.897*w*w)
	case w < 1.1:
		return math.Exp(1.111 - 34.242*w + 12.832*w*w)
	}
	return 7.37e-10 // as small as the fit goes
}

func lillieforsP(d, n float64) float64 {
	k, m := d, n
	if n > 100 {
		k, m = d*math.Pow(n/100, 0.49), 100
	}
	p := math.Exp(-7.01256*k*k*(m+2.78019) + 2.99587*k*math.Sqrt(m+2.78019) - 0.122119 + 0.974598/math.Sqrt(m) + 1.67997/m)
	if p <= 0.1 {
		return p
	}
	k = (math.Sqrt(n) - 0.01 + 0.85/math.Sqrt(n)) * d
	switch {
	case k <= 0.302:
		return 1
	case k <= 0.5:
		return 2.76773 - 19.828315*k + 80.709644*k*k - 138.55152*k*k*k + 81.218052*k*k*k*k
	case k <= 0.9:
		return -4.901232 + 40.662806*k - 97.490286*k*k + 94.029866*k*k*k - 32.355711*k*k*k*k
	case k <= 1.31:
		return 6.198765 - 19.558097*k + 23.186922*k*k - 12.234627*k*k*k + 2.423045*k*k*k*k
	}
	return 0
}

// TestWeibull is Anderson and Darling's test of a Weibull distribution with both
// parameters by maximum likelihood. The p is
//
//	1/(1 + exp(-0.10 + 1.24 ln A* + 4.48 A*)),  A* = (1 + 0.2/sqrt(n)) A2
//
// which agrees with the table of Stephens 1977, Biometrika 64, 583-588 (0.757 at
// 5 %, 1.038 at 1 %); the formula is that of MIL-HDBK-17-1 (from memory). NaNs are
// skipped; below eight readings, with one that is not positive or with all equal
// there is no test, and Why says so.
func TestWeibull(x []float64) Goodness {
	v := stats.Sorted(x)
	if len(v) < 8 {
		return noGoodness(len(v), "too few readings for this test")
	}
	d, err := FitWeibull(v, nil)
	if err != nil {
		return noGoodness(len(v), err.Error())
	}
	g := Goodness{N: len(v), Statistic: againstAD(v, d)}
	a := (1 + 0.2/math.Sqrt(float64(len(v)))) * g.Statistic
	g.P = 1 / (1 + math.Exp(-0.10+1.24*math.Log(a)+4.48*a))
	return g
}

// TestLognormal is [TestNormal] of the logarithms. With a reading that is not
// positive there is no test.
func TestLognormal(x []float64) GoodnessOfFit {
	logs := make([]float64, len(x))
	for i, v := range x {
		if v <= 0 {
			g := noGoodness(len(x), ErrNotPositive.Error())
			return GoodnessOfFit{g, g, g, g}
		}
		logs[i] = math.Log(v)
	}
	return TestNormal(logs)
}
