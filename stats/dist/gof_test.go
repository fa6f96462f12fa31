package dist

import (
	"math"
	"math/rand/v2"
	"testing"

	"kneepoint/stats/internal/tail"
)

// The reference cases of R's nortest, goftest and shapiro.test are checked by
// TestReference of package stats.

var sample25 = []float64{0.61, 0.29, 0.06, 0.59, -1.73, -0.74, 0.51, -0.56, 0.39, 1.64, 0.05, -0.06, 0.64, -0.82, 0.37, 1.77, 1.09, -1.28, 2.36, 1.31, 1.05, -0.32, -0.40, 1.06, -2.47}

// Values by R 4.2.2 (shapiro.test, ks.test) and goftest 1.2-3 (ad.test).
func TestGoodnessAgainstR(t *testing.T) {
	for _, c := range []struct {
		n    int
		w, p float64
	}{{3, 0.991153342070774, 0.820099063184119}, {5, 0.746664412793545, 0.0277118245254155}, {9, 0.836138666368792, 0.0523069228868568}} {
		if g := TestNormal(sample25[:c.n]).ShapiroWilk; !near(g.Statistic, c.w, 1e-10) || !near(g.P, c.p, 1e-6) {
			t.Errorf("n %d: %+v, want %v %v", c.n, g, c.w, c.p)
		}
	}
	standard := Normal{Sigma: 1}
	a, k := AgainstKnown(sample25, standard)
	if !near(a.Statistic, 0.982714985923117, 1e-10) || !near(a.P, 0.365582660957846, 1e-5) ||
		!near(k.Statistic, 0.174091881198877, 1e-10) || !near(k.P, 0.389741171867919, 1e-10) {
		t.Errorf("%+v %+v", a, k)
	}
	if _, k = AgainstKnown(sample25[:5], standard); !near(k.Statistic, 0.323922182654107, 1e-10) || !near(k.P, 0.569552721649906, 1e-10) {
		t.Errorf("%+v", k)
	}
	var even []float64
	for i := range 20 {
		even = append(even, tail.NormalQuantile((float64(i)+0.5)/20))
	}
	if a, _ = AgainstKnown(even, standard); a.P < 0.99999 || a.P > 1 {
		t.Errorf("%+v", a)
	}
	// The exact distribution and its limit meet.
	for _, d := range []float64{0.05, 0.08, 0.11} {
		n := 140
		root := math.Sqrt(float64(n))
		if e, l := exactKolmogorov(d, n), tail.Kolmogorov(d*(root+0.12+0.11/root)); math.Abs(e-l) > 0.012 {
			t.Errorf("at %v: exact %v, limit %v", d, e, l)
		}
	}
}

func TestGoodnessWhy(t *testing.T) {
	inf := math.Inf(1)
	long := make([]float64, 5001)
	for i := range long {
		long[i] = float64(i)
	}
	for name, g := range map[string]Goodness{
		"few": TestNormal([]float64{1, 2}).AndersonDarling, "equal": TestNormal([]float64{2, 2, 2, 2}).ShapiroWilk,
		"infinite": TestNormal([]float64{2, 3, 4, inf}).Lilliefors, "seven": TestNormal([]float64{1, 2, 3, 4, 5, 6, 8}).CramerVonMises,
		"many": TestNormal(long).ShapiroWilk, "weibull few": TestWeibull([]float64{1, 2}), "weibull negative": TestWeibull([]float64{1, 2, 3, 4, 5, 6, 7, -8}),
		"lognormal": TestLognormal([]float64{1, 2, 3, 0}).AndersonDarling,
	} {
		if g.Why == "" || !math.IsNaN(g.P) {
			t.Errorf("%s: %+v", name, g)
		}
	}
	if a, k := AgainstKnown(nil, Normal{Sigma: 1}); a.Why == "" || k.Why == "" {
		t.Error("of nothing")
	}
}

// Each test rejects what is true in about 5 %, and a lognormal sample as normal
// in most.
func TestGoodnessLevels(t *testing.T) {
	r := rand.New(rand.NewPCG(9, 9))
	const draws, n = 1000, 60
	x := make([]float64, n)
	found := map[string]int{}
	count := func(name string, p float64) {
		if p <= 0.05 {
			found[name]++
		}
	}
	for range draws {
		for i := range x {
			x[i] = 42 + 0.9*r.NormFloat64()
		}
		g := TestNormal(x)
		count("AD", g.AndersonDarling.P)
		count("CvM", g.CramerVonMises.P)
		count("Lilliefors", g.Lilliefors.P)
		count("SW", g.ShapiroWilk.P)
		a, k := AgainstKnown(x, Normal{Mu: 42, Sigma: 0.9})
		count("AD known", a.P)
		count("KS known", k.P)
		for i := range x {
			x[i] = 96 * math.Pow(r.ExpFloat64(), 1.0/14)
		}
		count("Weibull", TestWeibull(x).P)
		for i := range x {
			x[i] = math.Exp(0.55 * r.NormFloat64())
		}
		count("power", TestNormal(x).AndersonDarling.P)
		count("lognormal", TestLognormal(x).AndersonDarling.P)
	}
	for name, k := range found {
		share := float64(k) / draws
		if name == "power" {
			if share < 0.9 {
				t.Errorf("a lognormal sample is rejected in %.3f only", share)
			}
		} else if math.Abs(share-0.05) > 0.022 {
			t.Errorf("%s: %.3f", name, share)
		}
	}
	if len(found) != 9 {
		t.Errorf("%v", found)
	}
}
