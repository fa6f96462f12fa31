package dist

import (
	"math"
	"math/rand/v2"
	"slices"
	"testing"
)

// R 4.2.2, survival 3.5: survfit(Surv(x, k == 0) ~ 1) of the readings without
// "at most", of the mirrored ones without "at least", and survfit of type
// interval2 (Turnbull) of all.
func TestEmpirical(t *testing.T) {
	x := []float64{3, 5, 5, 7, 2, 9, 4, 6, 6, 8, 1.5, 5.5}
	k := []int8{0, 0, 1, 0, -1, 1, 0, 0, 1, 0, 0, -1}
	pick := func(keep func(int8) bool) (v []float64, m []int8) {
		for i := range x {
			if keep(k[i]) {
				v, m = append(v, x[i]), append(m, k[i])
			}
		}
		return v, m
	}
	v, m := pick(func(k int8) bool { return k >= 0 })
	s := Empirical(append(v, math.NaN()), append(m, 0))
	if want := []float64{0.1, 0.2, 0.3, 0.4, 0.52, 0.68, 0.84}; !closeTo(s.P, want, 1e-12) || s.Below != 0 || s.N != 10 || !slices.Equal(s.X, []float64{1.5, 3, 4, 5, 6, 7, 8}) {
		t.Errorf("at least: %+v", s)
	}
	v, m = pick(func(k int8) bool { return k <= 0 })
	s = Empirical(v, m)
	for i := range v {
		v[i], m[i] = -v[i], -m[i]
	}
	mirror := Empirical(v, m)
	for i := range s.X {
		j := len(s.X) - 1 - i
		before := mirror.Below
		if j > 0 {
			before = mirror.P[j-1]
		}
		if s.X[i] != -mirror.X[j] || math.Abs(s.P[i]-(1-before)) > 1e-12 {
			t.Errorf("mirrored: %+v and %+v", s, mirror)
		}
	}
	if s = Empirical(x, k); !closeTo(s.P, turnbullByR, 2e-3) || s.N != 12 {
		t.Errorf("both: %+v, want %v", s, turnbullByR)
	}
	// A floor below and a clamp above everything: plain counts.
	s = Empirical([]float64{1, 2, 3, 4, 4, 4}, []int8{-1, 0, 0, 0, 1, 1})
	if !closeTo(s.P, []float64{2. / 6, 3. / 6, 4. / 6}, 1e-9) || math.Abs(s.Below-1./6) > 1e-9 {
		t.Errorf("%+v", s)
	}
	if s = Empirical([]float64{1, 2}, []int8{-1, 1}); len(s.X) != 0 || !math.IsNaN(s.Below) {
		t.Errorf("%+v", s)
	}
	mustPanic(t, func() { Empirical(x, k[:3]) })
}

var turnbullByR = []float64{0.2, 0.3, 0.4, 0.5, 0.6, 0.7333333, 0.8666667}

func closeTo(got, want []float64, tolerance float64) bool {
	if len(got) != len(want) {
		return false
	}
	for i := range got {
		if math.Abs(got[i]-want[i]) > tolerance {
			return false
		}
	}
	return true
}

// Points of a sample of the distribution itself lie near the line, most of them
// in the band, and many readings give few points with the tails kept.
func TestProbabilityPlot(t *testing.T) {
	r := rand.New(rand.NewPCG(4, 9))
	x, mark := make([]float64, 20000), make([]int8, 20000)
	for i := range x {
		x[i] = 96 * math.Pow(r.ExpFloat64(), 1.0/14)
		if x[i] > 100 {
			x[i], mark[i] = 100, 1
		}
	}
	for _, f := range []Family{WeibullFamily, NormalFamily, LognormalFamily, GammaFamily} {
		d, err := Fit(f, Readings{Values: x, Censor: mark})
		if err != nil {
			t.Fatal(err)
		}
		points := ProbabilityPlot(x, mark, d, 100)
		if len(points) > 100 || len(points) < 60 || points[0].X != slices.Min(x) {
			t.Fatalf("%v: %d points from %v", f, len(points), points[0])
		}
		outside := 0
		for i, p := range points {
			if i > 0 && !(p.Z > points[i-1].Z && p.X > points[i-1].X) {
				t.Errorf("%v: points not in order", f)
			}
			if p.X < p.Lower || p.X > p.Upper {
				outside++
			}
			if !near(d.CDF(p.Fitted), p.Share, 1e-6) {
				t.Errorf("%v: %+v", f, p)
			}
		}
		if f == WeibullFamily != (outside <= 15) {
			t.Errorf("%v: %d of %d points outside the band", f, outside, len(points))
		}
	}
	if p := ProbabilityPlot([]float64{3, 1, 2, 2}, nil, Normal{Mu: 2, Sigma: 1}, 10); len(p) != 3 || p[0].Share != 0.125 || p[1].Share != 0.5 || p[1].Z != 0 {
		t.Errorf("%+v", p)
	}
	mustPanic(t, func() { ProbabilityPlot(nil, nil, Normal{}, 1) })
}

func TestSizeOfMisfit(t *testing.T) {
	r := rand.New(rand.NewPCG(5, 9))
	draw := func(n int, f func() float64) []float64 {
		x := make([]float64, n)
		for i := range x {
			x[i] = f()
		}
		return x
	}
	normal := func() float64 { return 42 + 0.9*r.NormFloat64() }
	slight := func() float64 { return 42 * math.Exp(0.0215*r.NormFloat64()) }
	skewed := func() float64 { return math.Exp(0.55 * r.NormFloat64()) }
	two := func() float64 {
		if r.Float64() < 0.3 {
			return normal() - 6
		}
		return normal()
	}
	for _, c := range []struct {
		name string
		x    []float64
		want Verdict
	}{
		{"normal", draw(50000, normal), Close},
		{"normal, few", draw(40, normal), Close},
		{"slightly skewed", draw(50000, slight), Close}, // though every test rejects it
		{"skewed", draw(50000, skewed), Poor},
		{"two populations", draw(2000, two), Poor},
	} {
		d, err := FitNormal(c.x, nil)
		if err != nil {
			t.Fatal(err)
		}
		if m := SizeOfMisfit(c.x, nil, d); m.Verdict != c.want || m.Text == "" || m.N != len(c.x) {
			t.Errorf("%s: %+v, want %v", c.name, m, c.want)
		}
		if c.name == "slightly skewed" {
			if p := TestNormal(c.x).AndersonDarling.P; p > 1e-4 {
				t.Errorf("%s: p %v", c.name, p)
			}
		}
	}
	// By hand: at 0 and 1 against a standard normal, the gap is 0.5 just below 0 and
	// at 0; nothing to say of the tails.
	m := SizeOfMisfit([]float64{0, 1}, nil, Normal{Sigma: 1})
	if math.Abs(m.Gap-0.5) > 1e-12 || m.At != 0 || !math.IsNaN(m.Low) {
		t.Errorf("%+v", m)
	}
	if m = SizeOfMisfit([]float64{80}, []int8{1}, Normal{Mu: 80, Sigma: 1}); m.Verdict != Unknown || m.Text == "" {
		t.Errorf("%+v", m)
	}
}
