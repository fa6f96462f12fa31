package yield_test

import (
	"math"
	"math/rand/v2"
	"os"
	"testing"

	"gonum.org/v1/gonum/stat/distuv"
	"kneepoint/stats"
	"kneepoint/stats/yield"
)

// negbin draws a count with mean m and clustering parameter a.
func negbin(r *rand.Rand, m, a float64) float64 {
	if !math.IsInf(a, 1) {
		m = distuv.Gamma{Alpha: a, Beta: a / m, Src: r}.Rand()
	}
	return distuv.Poisson{Lambda: m, Src: r}.Rand()
}

// 95 % intervals of density, and of alpha, hold the truth in 93 to 97 % of 2,000
// draws with KNEEPOINT_LONG=1; by default 100 draws and three standard errors.
func TestDensityCovers(t *testing.T) {
	draws := 100
	if os.Getenv("KNEEPOINT_LONG") != "" {
		draws = 2000
	}
	for _, c := range []struct {
		n       int
		mean, a float64
		areas   bool
	}{
		{25, 6, 2, false}, {60, 1.5, 0.7, false}, {25, 20, 0.5, false}, {15, 6, 2, false}, {40, 4, 1, true}, {25, 6, math.Inf(1), false},
	} {
		r := rand.New(rand.NewPCG(uint64(c.n), 5))
		held, heldIndependent, heldAlpha := 0, 0, 0
		for range draws {
			x := make([]float64, c.n)
			var area []float64
			for i := range x {
				a := 1.0
				if c.areas {
					a = 0.5 + float64(i%4)/2
					area = append(area, a)
				}
				x[i] = negbin(r, c.mean*a, c.a)
			}
			d := yield.FitDefects(x, area, 0.95)
			in := func(iv stats.Interval, v float64) int {
				if iv.Lower <= v && v <= iv.Upper {
					return 1
				}
				return 0
			}
			held += in(d.Density, c.mean)
			heldIndependent += in(d.Independent, c.mean)
			heldAlpha += in(d.Alpha, c.a)
		}
		share := float64(held) / float64(draws)
		t.Logf("%d counts of %v, alpha %v: density covers %.3f (as if independent %.3f), alpha %.3f", c.n, c.mean, c.a, share,
			float64(heldIndependent)/float64(draws), float64(heldAlpha)/float64(draws))
		slack := 0.0
		if draws < 2000 {
			slack = 3 * math.Sqrt(0.05*0.95/float64(draws))
		}
		if share < 0.93-slack || share > 0.97+slack {
			t.Errorf("%d counts of %v, alpha %v: density covers %.3f", c.n, c.mean, c.a, share)
		}
	}
}

func TestDefectsEdges(t *testing.T) {
	inf := math.Inf(1)
	d := yield.FitDefects([]float64{nan, 3, 0}, []float64{1, 2, 0}, 0.95)
	if d.N != 1 || d.Missing != 2 || d.Density.Estimate != 1.5 || d.Density.Why == "" || d.Alpha.Why != "one count has no spread" {
		t.Errorf("%+v", d)
	}
	// Garwood's table: 3 events, 0.6187 to 8.7673 (from memory).
	if math.Abs(2*d.Density.Lower-0.6187) > 5e-5 || math.Abs(2*d.Density.Upper-8.7673) > 5e-5 {
		t.Errorf("%+v", d.Density)
	}
	d = yield.FitDefects([]float64{0, 0, 0, 0}, nil, 0.95)
	if d.Density.Estimate != 0 || d.Density.Lower != 0 || math.Abs(d.Density.Upper-3.6889/4) > 1e-4 || d.Alpha.Why != "no defects" || d.Model() != yield.Poisson {
		t.Errorf("%+v", d)
	}
	d = yield.FitDefects([]float64{2, 2, 2, 2, 2, 2, 2, 2, 2, 2}, nil, 0.95)
	if d.Alpha.Estimate != inf || d.Alpha.Why == "" || d.P != 1 || d.LR != 0 || !math.IsNaN(d.AlphaSE) || d.Model() != yield.NegativeBinomial(inf) {
		t.Errorf("%+v", d)
	}
	if d.Model().Yield(2) != yield.Poisson.Yield(2) {
		t.Error("an infinite alpha is not Poisson")
	}
	if d = yield.FitDefects(nil, nil, 0.95); d.Why != "no counts" || !math.IsNaN(d.Density.Estimate) {
		t.Errorf("%+v", d)
	}
	// Ten thousand defects on one of ten dice, and the same per unit of another area.
	x := []float64{0, 1, 0, 10000, 2, 0, 3, 0, 1, 0}
	area := make([]float64, len(x))
	for i := range area {
		area[i] = 0.0025
	}
	a, b := yield.FitDefects(x, nil, 0.95), yield.FitDefects(x, area, 0.95)
	if !(a.Alpha.Estimate > 0.05 && a.Alpha.Estimate < 0.2) || math.Abs(b.Density.Upper*0.0025/a.Density.Upper-1) > 1e-8 || math.Abs(b.Alpha.Estimate/a.Alpha.Estimate-1) > 1e-8 {
		t.Errorf("%+v\n%+v", a, b)
	}
	for _, f := range []func(){
		func() { yield.FitDefects([]float64{1}, []float64{1, 2}, 0.95) },
		func() { yield.FitDefects([]float64{1.5}, nil, 0.95) },
		func() { yield.FitDefects([]float64{-1}, nil, 0.95) },
		func() { yield.FitDefects(nil, nil, 1) },
		func() { yield.DensityFromYield(stats.Interval{}, 0, yield.Poisson) },
		func() { yield.NegativeBinomial(0) },
		func() { yield.BoseEinstein(nan) },
	} {
		mustPanic(t, f)
	}
}

// Unequal areas: the likelihood is the greatest, by moving either parameter. The
// law is written out with gamma functions here.
func TestUnequalAreasAreMostLikely(t *testing.T) {
	r := rand.New(rand.NewPCG(8, 8))
	var x, area []float64
	for i := range 80 {
		area = append(area, 0.3+float64(i%5))
		x = append(x, negbin(r, 2*area[i], 1.2))
	}
	ll := func(a, d float64) float64 {
		s := 0.0
		for i, k := range x {
			m := d * area[i]
			p, _ := math.Lgamma(k + a)
			q, _ := math.Lgamma(a)
			f, _ := math.Lgamma(k + 1)
			s += p - q - f + k*math.Log(m/(a+m)) + a*math.Log(a/(a+m))
		}
		return s
	}
	d := yield.FitDefects(x, area, 0.95)
	a, density := d.Alpha.Estimate, d.Density.Estimate
	best := ll(a, density)
	if math.Abs(best-d.LogLik) > 1e-9*math.Abs(best) {
		t.Errorf("log-likelihood %v, by definition %v", d.LogLik, best)
	}
	for _, f := range []float64{0.999, 1.001} {
		if ll(a*f, density) > best || ll(a, density*f) > best {
			t.Errorf("alpha %v, density %v are not the most likely", a, density)
		}
	}
}

// Models and their inverses undo each other over the whole range, and density
// from yield keeps the order of limits.
func TestModelsInvert(t *testing.T) {
	models := []yield.Model{yield.Poisson, yield.Murphy, yield.Exponential, yield.SeedsRoot, yield.BoseEinstein(4),
		yield.NegativeBinomial(0.3), yield.NegativeBinomial(math.Inf(1))}
	for _, m := range models {
		for _, ad := range []float64{1e-12, 1e-6, 0.001, 0.0101, 0.3, 1, 7, 100} {
			y := m.Yield(ad)
			if got := m.Defects(y); math.Abs(got/ad-1) > 1e-9+2e-16/math.Min(ad, 1)/ad*math.Max(1, 1/math.Abs(math.Log(y))) && ad >= 1e-3 {
				t.Errorf("%v: %v from the yield of %v", m, got, ad)
			}
		}
		if m.Yield(0) != 1 || m.Yield(math.Inf(1)) != 0 || m.Defects(1) != 0 || !math.IsInf(m.Defects(0), 1) ||
			!math.IsNaN(m.Yield(-1)) || !math.IsNaN(m.Defects(1.1)) || !math.IsNaN(m.Defects(nan)) || m.String() == "" {
			t.Errorf("%v at its ends", m)
		}
	}
	d := yield.DensityFromYield(yield.Wilson(90, 100, 0.95), 0.002, yield.Poisson)
	if !(d.Lower < d.Estimate && d.Estimate < d.Upper) || math.Abs(d.Estimate+math.Log(0.9)/0.002) > 1e-9 {
		t.Errorf("%+v", d)
	}
}
