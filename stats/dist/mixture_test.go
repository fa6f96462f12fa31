package dist

import (
	"math"
	"math/rand/v2"
	"slices"
	"strings"
	"testing"
)

// The fits of R's mclust are checked by TestReference of package stats.

func drawParts(r *rand.Rand, n int, parts ...Part) []float64 {
	x := make([]float64, n)
	for i := range x {
		u := r.Float64()
		for _, p := range parts {
			if u -= p.Weight; u < 0 || p == parts[len(parts)-1] {
				x[i] = p.Mean + p.SD*r.NormFloat64()
				break
			}
		}
	}
	return x
}

// A large lot of known parts, gathered into cells, comes back; the same with a
// reading at 1e30 excluded by hand and with clamped readings.
func TestMixtureComesBack(t *testing.T) {
	r := rand.New(rand.NewPCG(3, 5))
	truth := []Part{{0.12, 36, 1.1}, {0.88, 42, 0.9}}
	for _, clamp := range []float64{math.Inf(1), 42.5} {
		x := drawParts(r, 60000, truth...)
		mark := make([]int8, len(x))
		for i := range x {
			if x[i] > clamp {
				x[i], mark[i] = clamp, 1
			}
		}
		m, err := FitMixtures(x, mark, 3)
		if err != nil {
			t.Fatal(err)
		}
		if m.Best != 2 {
			t.Errorf("clamp %v: best %d", clamp, m.Best)
		}
		for i, p := range m.ByParts[1].Parts {
			if math.Abs(p.Weight-truth[i].Weight) > 0.006 || math.Abs(p.Mean-truth[i].Mean) > 0.08 || math.Abs(p.SD-truth[i].SD) > 0.06 {
				t.Errorf("clamp %v: part %+v, want %+v", clamp, p, truth[i])
			}
		}
		pop := m.ByParts[1].Populations()
		if len(pop) != 2 || math.Abs(pop[0].To-38.9) > 0.4 || pop[0].To != pop[1].From || pop[0].Astray > 0.02 {
			t.Errorf("clamp %v: %+v", clamp, pop)
		}
		if one := m.ByParts[0]; len(one.Parts) != 1 || clamp > 100 && (math.Abs(one.Parts[0].Mean-mean(x)) > 1e-9) {
			t.Errorf("%+v", one)
		}
	}
}

func mean(x []float64) (m float64) {
	for _, v := range x {
		m += v / float64(len(x))
	}
	return m
}

// One part of clamped readings is the censored normal fit.
func TestMixtureOfOneIsNormal(t *testing.T) {
	r := rand.New(rand.NewPCG(3, 6))
	x, mark := drawParts(r, 300, Part{1, 42, 0.9}), make([]int8, 300)
	for i := range x {
		if x[i] > 42.6 {
			x[i], mark[i] = 42.6, 1
		} else if x[i] < 41 {
			x[i], mark[i] = 41, -1
		}
	}
	m, err := FitMixtures(x, mark, 1)
	d, _ := FitNormal(x, mark)
	if err != nil || !near(m.ByParts[0].LogLik, d.LogLik, 1e-7) || !near(m.ByParts[0].Parts[0].SD, d.Sigma, 1e-3) || m.ByParts[0].N != d.N {
		t.Errorf("%+v %v, want %+v", m, err, d)
	}
}

// A skewed population of many readings takes several parts by BIC, which are one
// population; a failed group far away is one of its own.
func TestPopulations(t *testing.T) {
	r := rand.New(rand.NewPCG(3, 7))
	x := make([]float64, 20000)
	for i := range x {
		x[i] = math.Exp(0.55 * r.NormFloat64())
	}
	m, err := FitMixtures(x, nil, 4)
	if err != nil || m.Best < 3 || len(m.ByParts[m.Best-1].Populations()) != 1 {
		t.Errorf("skewed: best %d %v, %+v", m.Best, err, m.ByParts[m.Best-1].Populations())
	}
	x = append(drawParts(r, 5000, Part{1, 42, 0.9}), drawParts(r, 100, Part{1, 0.02, 0.001})...)
	m, err = FitMixtures(x, nil, 4)
	if err != nil {
		t.Fatal(err)
	}
	pop := m.ByParts[m.Best-1].Populations()
	if len(pop) != 2 || !near(pop[0].Weight, 100./5100, 0.05) {
		t.Errorf("shorted dice: %+v", pop)
	}
	split := Split([]float64{0.02, 42, math.NaN(), math.Inf(1), -5}, pop)
	if !slices.Equal(split, []int8{0, 1, -1, 1, 0}) {
		t.Errorf("split %v", split)
	}
	// By hand: equal parts of SD 1 are two populations from 3.4 apart, their border
	// is in the middle, and what goes astray is the tail beyond it.
	for _, c := range []struct {
		apart float64
		want  int
	}{{1, 1}, {3.2, 1}, {3.6, 2}, {8, 2}} {
		pop := Mixture{Parts: []Part{{0.5, 0, 1}, {0.5, c.apart, 1}}}.Populations()
		if len(pop) != c.want {
			t.Errorf("%v apart: %+v", c.apart, pop)
		}
		if len(pop) == 2 && (math.Abs(pop[1].From-c.apart/2) > 1e-9 || !near(pop[0].Astray, Normal{Sigma: 1}.Survival(c.apart/2), 1e-9)) {
			t.Errorf("%v apart: %+v", c.apart, pop)
		}
	}
}

func TestMixtureFailures(t *testing.T) {
	nan, inf := math.NaN(), math.Inf(1)
	for _, c := range []struct {
		x    []float64
		mark []int8
		want error
	}{{nil, nil, ErrNoValues}, {[]float64{nan}, nil, ErrNoValues}, {[]float64{2, 2}, nil, ErrTooFew}, {[]float64{2, 3, inf}, nil, ErrInfinite}, {[]float64{2, 3}, nil, ErrFewForParts}} {
		if _, err := FitMixtures(c.x, c.mark, 4); err != c.want {
			t.Errorf("%v: %v, want %v", c.x, err, c.want)
		}
	}
	if m, err := FitMixtures([]float64{1, 2, 3, 4}, nil, 4); err != nil || len(m.ByParts) != 1 {
		t.Errorf("%+v %v", m, err)
	}
	mustPanic(t, func() { FitMixtures([]float64{1, 2}, nil, 5) })
	mustPanic(t, func() { FitMixtures([]float64{1, 2}, []int8{0}, 2) })
}

func TestChoose(t *testing.T) {
	r := rand.New(rand.NewPCG(3, 8))
	draw := func(n int, f func() float64) []float64 {
		x := make([]float64, n)
		for i := range x {
			x[i] = f()
		}
		return x
	}
	normal := func() float64 { return 42 + 0.9*r.NormFloat64() }
	for _, c := range []struct {
		name      string
		x         []float64
		want      Family
		empirical bool
		words     string
	}{
		{"breakdown", draw(4000, normal), NormalFamily, false, "normal"},
		{"leakage", draw(4000, func() float64 { return 1.8 * math.Exp(0.55*r.NormFloat64()) }), LognormalFamily, false, "skewed to the right"},
		{"weakest spot", draw(4000, func() float64 { return 96 * math.Pow(r.ExpFloat64(), 1.0/6) }), WeibullFamily, false, "skewed to the left"},
		{"waiting", draw(4000, func() float64 { return r.ExpFloat64() + r.ExpFloat64() }), GammaFamily, false, "gamma"},
		{"shorted dice", append(draw(4000, normal), draw(40, func() float64 { return 0.1 * r.Float64() })...), NormalFamily, false, "40 gross outliers were set aside (40 low, 0 high)"},
		{"two", append(draw(3000, normal), draw(1500, func() float64 { return normal() - 6 })...), 0, true, "2 populations (33."},
		{"below 0", draw(500, func() float64 { return 5e-12 * r.NormFloat64() }), NormalFamily, false, "only one that can be fitted"},
	} {
		got := Choose(c.x, nil)
		if got.Best == nil || c.want != 0 && got.Best.Family() != c.want || got.Empirical != c.empirical || !strings.Contains(got.Reason, c.words) || len(got.Candidates) != 4 {
			t.Errorf("%s: %+v", c.name, got)
		}
		if strings.Contains(got.Reason, "NaN") {
			t.Errorf("%s: %s", c.name, got.Reason)
		}
	}
	// Clamped readings are used as bounds, not set aside.
	x, mark := draw(3000, normal), make([]int8, 3000)
	for i := range x {
		if x[i] > 43 {
			x[i], mark[i] = 43, 1
		}
	}
	if c := Choose(x, mark); c.Best.Family() != NormalFamily || c.AsideHigh != 0 || math.Abs(c.Best.Quantile(0.5)-42) > 0.1 {
		t.Errorf("clamped: %+v", c)
	}
	if c := Choose([]float64{3, 3, 3}, nil); c.Best != nil || !strings.Contains(c.Reason, "two different") {
		t.Errorf("constant: %+v", c)
	}
	if c := Choose(nil, nil); c.Best != nil || c.Reason == "" {
		t.Errorf("nothing: %+v", c)
	}
}

func TestBoxCox(t *testing.T) {
	r := rand.New(rand.NewPCG(3, 9))
	x := make([]float64, 30000) // above the number of cells
	for i := range x {
		x[i] = math.Pow(13.5+0.9*r.NormFloat64(), 2)
	}
	b := BoxCox(x, 0.95)
	if b.Lambda.Lower > 0.5 || b.Lambda.Upper < 0.5 || b.Log > -1.92 || b.N != 30000 {
		t.Errorf("%+v", b)
	}
	// Gathered into cells or not, lambda is the same.
	few := BoxCox(x[:4000], 0.95)
	for i := range x[:8000] {
		x[i] = x[i%4000] * (1 + 1e-13*float64(i/4000)) // twice the readings, all different
	}
	many := BoxCox(x[:8000], 0.95)
	if !near(few.Lambda.Estimate, many.Lambda.Estimate, 1e-5) {
		t.Errorf("%v and %v", few.Lambda, many.Lambda)
	}
	for _, c := range [][]float64{{1, 2}, {1, 2, 0}, {1, 2, math.Inf(1)}, {3, 3, 3}} {
		if b := BoxCox(c, 0.9); b.Why == "" || b.Lambda.Why == "" {
			t.Errorf("%v: %+v", c, b)
		}
	}
}

func lotOf(n int, f func(r *rand.Rand) float64) []float64 {
	r := rand.New(rand.NewPCG(1, 1))
	x := make([]float64, n)
	for i := range x {
		x[i] = f(r)
	}
	return x
}

const lot = 25 * 88_000

func BenchmarkFitWeibull(b *testing.B) {
	x := lotOf(lot, func(r *rand.Rand) float64 { return math.Round(9600*math.Pow(r.ExpFloat64(), 1.0/14)) / 100 })
	for b.Loop() {
		if _, err := FitWeibull(x, nil); err != nil {
			b.Fatal(err)
		}
	}
}

func BenchmarkFitGamma(b *testing.B) {
	x := lotOf(lot, func(r *rand.Rand) float64 { return 42 + 0.9*r.NormFloat64() })
	for b.Loop() {
		if _, err := FitGamma(x, nil); err != nil {
			b.Fatal(err)
		}
	}
}

func BenchmarkFitMixtures(b *testing.B) {
	x := lotOf(lot, func(r *rand.Rand) float64 {
		if r.Float64() < 0.12 {
			return 36 + 1.1*r.NormFloat64()
		}
		return 42 + 0.9*r.NormFloat64()
	})
	for b.Loop() {
		if _, err := FitMixtures(x, nil, 4); err != nil {
			b.Fatal(err)
		}
	}
}

func BenchmarkChoose(b *testing.B) {
	x := lotOf(lot, func(r *rand.Rand) float64 { return math.Round(100*(42+0.9*r.NormFloat64())) / 100 })
	for b.Loop() {
		Choose(x, nil)
	}
}
