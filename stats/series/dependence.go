package series

import (
	"math"

	"gonum.org/v1/gonum/mathext"
	"kneepoint/stats"
)

// Autocorrelation gives the autocorrelations at lags 1 to lags,
//
//	r_k = sum_t (y_t - m)(y_t+k - m) / sum_t (y_t - m)^2
//
// A missing value drops the products that it belongs to. NaN for lags beyond the
// series, and for constant values. Source: Box and Jenkins 1976, Time Series
// Analysis, section 2.1.5.
func Autocorrelation(y []float64, lags int) []float64 {
	if lags < 0 {
		panic("stats/series: negative lag")
	}
	mean := stats.Mean(y)
	squares := 0.0
	for _, v := range y {
		if v == v {
			squares += (v - mean) * (v - mean)
		}
	}
	r := make([]float64, lags)
	for k := range r {
		sum := 0.0
		for t := 0; t+k+1 < len(y); t++ {
			if p := (y[t] - mean) * (y[t+k+1] - mean); p == p {
				sum += p
			}
		}
		r[k] = sum / squares
		if k+1 >= len(y) || !(squares > 0) {
			r[k] = math.NaN()
		}
	}
	return r
}

// Portmanteau is a test for any autocorrelation up to a lag.
type Portmanteau struct {
	Q, P float64
	Lags int
}

// LjungBox tests whether the first autocorrelations are zero together,
//
//	Q = n(n+2) sum_k r_k^2/(n-k)
//
// against chi-square with as many degrees of freedom as lags. Source: Ljung and
// Box 1978, Biometrika 65, 297-303.
func LjungBox(y []float64, lags int) Portmanteau {
	v, _ := present(y)
	n := float64(len(v))
	q := 0.0
	for k, r := range Autocorrelation(y, lags) {
		q += r * r / (n - float64(k+1))
	}
	q *= n * (n + 2)
	p := math.NaN()
	if lags > 0 && q == q {
		p = mathext.GammaIncRegComp(float64(lags)/2, q/2)
	}
	return Portmanteau{Q: q, P: p, Lags: lags}
}

// RunsTest counts stretches on one side of the median.
type RunsTest struct {
	Runs, Above, Below int
	Expected, SD       float64 // of the number of runs, for values in random order
	Z, P               float64 // P two-sided, normal
}

// Runs tests for order by the number of stretches above or below the median: too
// few say drift or neighbours alike, too many say alternation. Values equal to the
// median are left out. With n1 above and n0 below,
//
//	E = 1 + 2 n1 n0/n, Var = 2 n1 n0 (2 n1 n0 - n)/(n^2 (n-1))
//
// without continuity correction. Source: Wald and Wolfowitz 1940, Ann. Math.
// Statist. 11, 147-162; NIST/SEMATECH e-Handbook 1.3.5.13.
func Runs(y []float64) RunsTest {
	median := stats.Median(y)
	var t RunsTest
	before := 0
	for _, v := range y {
		side := 0
		switch {
		case v > median:
			side = 1
			t.Above++
		case v < median:
			side = -1
			t.Below++
		default:
			continue
		}
		if side != before {
			t.Runs++
		}
		before = side
	}
	a, b := float64(t.Above), float64(t.Below)
	n := a + b
	t.Expected = 1 + 2*a*b/n
	t.SD = math.Sqrt(2 * a * b * (2*a*b - n) / (n * n * (n - 1)))
	t.Z, t.P = math.NaN(), math.NaN()
	if t.SD > 0 {
		t.Z = (float64(t.Runs) - t.Expected) / t.SD
		t.P = math.Erfc(math.Abs(t.Z) / math.Sqrt2)
	}
	return t
}
