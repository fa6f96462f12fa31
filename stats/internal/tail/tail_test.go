package tail

import (
	"math"
	"testing"
)

// Values by R 4.2.2 (pt, qt, pf, pchisq with lower.tail = FALSE, qnorm).
func TestAgainstR(t *testing.T) {
	inf := math.Inf(1)
	for _, c := range []struct {
		name      string
		got, want float64
		tolerance float64
	}{
		{"t", T(2.5, 7), 0.020496109292876437, 1e-13},
		{"t below 0", T(-2.5, 7), 0.97950389070712356, 1e-13},
		{"t, a small tail of many", T(6.3, 60), 1.9273981535744e-08, 1e-12},
		{"t far out", T(40, 12), 1.9256147903860184e-14, 1e-12},
		{"t two-sided", T2(-5.5, 2.2e6), 3.7983332064300604e-08, 1e-12},
		{"t normal limit", T(3, inf), Normal(3), 1e-15},
		{"qt", TQuantile(0.025, 26), 2.0555294386428731, 1e-13},
		{"t at the seam", T(4.5, 3001), 3.5268377191689631e-06, 1e-12},
		{"t at the seam, far out", T(30, 3001), 1.812756219302544e-173, 1e-10},
		{"qt one df", TQuantile(1e-8, 1), 31830988.618379056, 1e-12},
		{"qt of a lot", TQuantile(1e-8, 2e6), 5.6120240391921454, 1e-12},
		{"f", F(2.5, 3, 44), 0.071828212398335879, 1e-13},
		{"f far out", F(40, 3, 44), 1.2472231327918537e-12, 1e-12},
		{"f of a lot", F(1.3, 24, 2.2e6), 0.14810112833248221, 1e-8},
		{"f below 1", F(0.01, 3, 44), 0.99860805253354767, 1e-12},
		{"chi2", ChiSquared(60, 3), 5.8782307279069134e-13, 1e-12},
		{"chi2 of a lot", ChiSquared(2.008e6, 2e6), 3.234544731347762e-05, 1e-10},
		{"qnorm", NormalQuantile(1e-20), -9.2623400897984052, 1e-15},
		{"kolmogorov", Kolmogorov(1.3580986393225505), 0.05, 1e-12},
		{"kolmogorov middle", Kolmogorov(0.82757355518990761), 0.5, 1e-12},
	} {
		if !(math.Abs(c.got-c.want) <= c.tolerance*c.want*sign(c.want)) {
			t.Errorf("%s: %.17g, want %.17g", c.name, c.got, c.want)
		}
	}
	for _, v := range []float64{T(math.NaN(), 3), F(math.NaN(), 1, 1), ChiSquared(math.NaN(), 1), Kolmogorov(math.NaN()),
		NormalQuantile(1.5), TQuantile(0.7, 3), TQuantile(0.1, math.NaN())} {
		if !math.IsNaN(v) {
			t.Errorf("%v, want NaN", v)
		}
	}
	if !math.IsInf(NormalQuantile(0), -1) || !math.IsInf(NormalQuantile(1), 1) || F(inf, 2, 2) != 0 || T(inf, 2) != 0 {
		t.Error("the ends")
	}
}

func sign(v float64) float64 { return math.Copysign(1, v) }

// The quantile gives back the tail that it was asked for.
func TestTQuantileInverts(t *testing.T) {
	for _, df := range []float64{0.5, 1, 2, 5, 30, 1e3, 1e5, 2.2e6} {
		for _, p := range []float64{0.49, 0.2, 0.025, 1e-3, 1e-6, 1e-10, 1e-20} {
			q := TQuantile(p, df)
			if got := T2(q, df) / 2; math.Abs(got/p-1) > 1e-10 {
				t.Errorf("df %v, p %v: quantile %v has tail %v", df, p, q, got)
			}
		}
	}
}

// The two forms of the Kolmogorov limit meet.
func TestKolmogorovForms(t *testing.T) {
	for _, x := range []float64{0.9, 0.99999, 1} {
		sum, sign := 0.0, 1.0
		for k := 1; k < 60; k++ {
			sum += sign * math.Exp(-2*float64(k*k)*x*x)
			sign = -sign
		}
		if got := Kolmogorov(x); math.Abs(got-2*sum) > 1e-13 {
			t.Errorf("at %v: %v and %v", x, got, 2*sum)
		}
	}
}
