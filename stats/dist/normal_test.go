package dist

import (
	"encoding/json"
	"math"
	"math/rand/v2"
	"os"
	"slices"
	"strings"
	"testing"
)

// The reference fits of R's survreg are checked by TestReference of package
// stats. testdata/normal.json holds further values from R, made by normal.R
// beside it; null is an infinite limit.
type reference struct {
	Z       []float64 `json:"z"`
	LogPhi  []float64 `json:"log_phi"`
	Hazard  []float64 `json:"hazard"`
	Lower   []*float64
	Upper   []*float64
	Between struct {
		Mu, Sigma, LogLik, Cov float64
		SEMu                   float64 `json:"se_mu"`
		SELogSigma             float64 `json:"se_log_sigma"`
	}
	X      []float64
	Censor []int8
	Group  []int32
	Groups struct {
		Mu         []float64
		SigmaML    float64 `json:"sigma_ml"`
		SELogSigma float64 `json:"se_log_sigma"`
	}
}

func load(t *testing.T) (r reference) {
	t.Helper()
	raw, err := os.ReadFile("testdata/normal.json")
	if err == nil {
		err = json.Unmarshal(raw, &r)
	}
	if err != nil {
		t.Fatal(err)
	}
	return r
}

func near(got, want, tolerance float64) bool {
	return math.Abs(got-want) <= tolerance*math.Max(math.Abs(want), 1e-12)
}

func TestTails(t *testing.T) {
	r := load(t)
	for i, z := range r.Z {
		if got := logPhi(z); !near(got, r.LogPhi[i], 1e-13) {
			t.Errorf("log Phi(%v) = %.17g, want %.17g", z, got, r.LogPhi[i])
		}
		if got := hazard(z); z > -100 && !near(got, r.Hazard[i], 2e-12) { // R's by difference of logarithms
			t.Errorf("phi/Phi(%v) = %.17g, want %.17g", z, got, r.Hazard[i])
		}
	}
	// Between two points: by difference where that is accurate, by symmetry, and
	// for a narrow gap by the density at its middle.
	for _, c := range [][2]float64{{-1, 1}, {-3, -2.5}, {0.5, 4}, {-0.2, 8}} {
		l, ha, hb := logBetween(c[0], c[1])
		d := 0.5*math.Erfc(-c[1]/math.Sqrt2) - 0.5*math.Erfc(-c[0]/math.Sqrt2)
		if !near(l, math.Log(d), 1e-12) || !near(ha, phi(c[0])/d, 1e-12) || !near(hb, phi(c[1])/d, 1e-12) {
			t.Errorf("between %v: %v %v %v, want %v", c, l, ha, hb, math.Log(d))
		}
		m, _, _ := logBetween(-c[1], -c[0])
		if !near(m, l, 1e-13) {
			t.Errorf("between %v: not symmetric", c)
		}
	}
	for _, a := range []float64{-40, -5, 0, 3, 40} {
		for _, w := range []float64{1e-12, 1e-6, 9e-5, 1.1e-4} {
			l, _, _ := logBetween(a, a+w)
			w := a + w - a // as it is in binary
			m := a + w/2
			want := -m*m/2 - 0.5*math.Log(2*math.Pi) + math.Log(w) + math.Log1p((m*m-1)*w*w/24)
			if !near(l, want, 1e-9) {
				t.Errorf("from %v, width %v: %v, want %v", a, w, l, want)
			}
		}
	}
}

func TestFitNormalBetween(t *testing.T) {
	r := load(t)
	lo, hi := make([]float64, len(r.Lower)), make([]float64, len(r.Lower))
	for i := range lo {
		lo[i], hi[i] = math.Inf(-1), math.Inf(1)
		if r.Lower[i] != nil {
			lo[i] = *r.Lower[i]
		}
		if r.Upper[i] != nil {
			hi[i] = *r.Upper[i]
		}
	}
	d, err := FitNormalBetween(lo, hi)
	w := r.Between
	if err != nil || !near(d.Mu, w.Mu, 1e-8) || !near(d.Sigma, w.Sigma, 1e-6) || !near(d.LogLik, w.LogLik, 1e-10) ||
		!near(d.SEMu, w.SEMu, 1e-4) || !near(d.SELogSigma, w.SELogSigma, 1e-4) || math.Abs(d.Cov-w.Cov) > 1e-6 {
		t.Errorf("got %+v %v\nwant %+v", d, err, w)
	}
	if d.N != 60 || d.Left != 5 || d.Right != 4 || d.Between != 40 {
		t.Errorf("counts %+v", d)
	}
	// The same data with marks instead of limits, where that can be said.
	x := []float64{1, 2, 3, 4, 5, 5}
	marked, _ := FitNormal(x, []int8{-1, 0, 0, 0, 1, 1})
	open, _ := FitNormalBetween([]float64{math.Inf(-1), 2, 3, 4, 5, 5}, []float64{1, 2, 3, 4, math.Inf(1), math.Inf(1)})
	if marked != open {
		t.Errorf("marks: %+v\nlimits: %+v", marked, open)
	}
	mustPanic(t, func() { FitNormalBetween([]float64{2}, []float64{1}) })
	mustPanic(t, func() { FitNormalBetween([]float64{2}, nil) })
	mustPanic(t, func() { FitNormal(x, []int8{0}) })
}

func TestFitNormalGroups(t *testing.T) {
	r := load(t)
	g, err := FitNormalGroups(r.X, r.Censor, r.Group)
	if err != nil {
		t.Fatal(err)
	}
	n, k := float64(len(r.X)), 4.0
	correction := math.Sqrt(n / (n - k))
	if !near(g.Sigma, r.Groups.SigmaML*correction, 1e-7) || !near(g.SELogSigma, r.Groups.SELogSigma*correction, 1e-4) {
		t.Errorf("sigma %v se %v, want %v %v", g.Sigma, g.SELogSigma, r.Groups.SigmaML*correction, r.Groups.SELogSigma*correction)
	}
	for i, mu := range r.Groups.Mu {
		if !near(g.Mu[i], mu, 1e-7) || g.Groups[i] != int32(i+1) {
			t.Errorf("group %d: %v, want %v", g.Groups[i], g.Mu[i], mu)
		}
	}
	// Without bounds it is the pooled standard deviation: here by hand, deviations
	// (-1,0,1) and (-2,2), ss = 10, 5 readings less 2 groups.
	g, err = FitNormalGroups([]float64{9, 1, 2, math.NaN(), 3, 5}, nil, []int32{7, 2, 2, 2, 2, 7})
	if err != nil || !near(g.Sigma, math.Sqrt(10.0/3), 1e-14) || !near(g.SELogSigma, math.Sqrt(1.0/6), 1e-12) ||
		!slices.Equal(g.Groups, []int32{2, 7}) || !near(g.Mu[1], 7, 1e-14) || g.N != 5 {
		t.Errorf("%+v %v", g, err)
	}
	// A wafer of nothing but clamped readings is left out, and counted.
	g, err = FitNormalGroups([]float64{1, 2, 80, 80}, []int8{0, 0, 1, 1}, []int32{1, 1, 2, 2})
	if err != nil || g.Dropped != 2 || g.N != 2 {
		t.Errorf("%+v %v", g, err)
	}
	for _, x := range [][]float64{nil, {5, 5, 6, 6}, {math.NaN(), math.NaN(), 1, 2}} {
		if _, err := FitNormalGroups(x, nil, []int32{1, 1, 2, 3}[:len(x)]); err == nil {
			t.Errorf("%v: fitted", x)
		}
	}
}

func TestFitFailures(t *testing.T) {
	nan, inf := math.NaN(), math.Inf(1)
	for _, c := range []struct {
		name   string
		x      []float64
		censor []int8
		want   error
	}{
		{"empty", nil, nil, ErrNoValues},
		{"only missing", []float64{nan, nan}, []int8{0, 1}, ErrNoValues},
		{"one value", []float64{3}, nil, ErrTooFew},
		{"constant", []float64{3, 3, 3}, nil, ErrTooFew},
		{"all clamped", []float64{80, 80, 80}, []int8{1, 1, 1}, ErrTooFew},
		{"one exact", []float64{70, 80, 80}, []int8{0, 1, 1}, ErrTooFew},
		{"infinite", []float64{1, 2, inf}, nil, ErrInfinite},
		{"at least infinity", []float64{1, 2, inf}, []int8{0, 0, 1}, ErrInfinite},
	} {
		d, err := FitNormal(c.x, c.censor)
		if err != c.want || !math.IsNaN(d.Mu) || !math.IsNaN(d.Sigma) || !math.IsNaN(d.LogLik) {
			t.Errorf("%s: %+v, %v", c.name, d, err)
		}
	}
	// "At least minus infinity" says nothing and is no reading.
	if d, err := FitNormal([]float64{1, 2, 3, -inf}, []int8{0, 0, 0, 1}); err != nil || d.N != 3 || d.Mu != 2 {
		t.Errorf("%+v %v", d, err)
	}
	// Readings between limits that a spread of nothing explains.
	if _, err := FitNormalBetween([]float64{1, 1, 1}, []float64{2, 2, 2}); err != ErrNoFit {
		t.Errorf("all in one step: %v", err)
	}
	if _, err := FitLognormal([]float64{1, 0}, nil); err != ErrNotPositive {
		t.Errorf("lognormal of 0: %v", err)
	}
}

// Fits follow the unit: volts or picoamperes, the same picture.
func TestFitFollowsScale(t *testing.T) {
	r := rand.New(rand.NewPCG(2, 3))
	x, mark := make([]float64, 400), make([]int8, 400)
	for i := range x {
		x[i] = 42 + 0.9*r.NormFloat64()
		if x[i] > 43 {
			x[i], mark[i] = 43, 1
		} else if x[i] < 41 {
			x[i], mark[i] = 41, -1
		}
	}
	d, err := FitNormal(x, mark)
	if err != nil {
		t.Fatal(err)
	}
	exact := float64(d.N - d.Censored())
	for _, c := range []struct{ scale, shift float64 }{{1e-12, 0}, {1e12, 0}, {1, 1e5}, {-1, 0}} {
		y, m := make([]float64, len(x)), make([]int8, len(x))
		for i := range x {
			y[i], m[i] = c.scale*x[i]+c.shift, mark[i]
			if c.scale < 0 {
				m[i] = -mark[i]
			}
		}
		e, err := FitNormal(y, m)
		if err != nil || !near(e.Mu, c.scale*d.Mu+c.shift, 1e-9) || !near(e.Sigma, math.Abs(c.scale)*d.Sigma, 1e-8) ||
			!near(e.SEMu, math.Abs(c.scale)*d.SEMu, 1e-6) || !near(e.LogLik, d.LogLik-exact*math.Log(math.Abs(c.scale)), 1e-9) {
			t.Errorf("scale %v shift %v: %+v %v, from %+v", c.scale, c.shift, e, err, d)
		}
		if c.scale < 0 && (e.Left != d.Right || !near(e.Cov, -d.Cov, 1e-6)) {
			t.Errorf("mirrored: %+v, from %+v", e, d)
		}
	}
}

// Heavy censoring, 95 % of the readings at the clamp, still finds its way.
func TestHeavyCensoring(t *testing.T) {
	r := rand.New(rand.NewPCG(4, 3))
	x, mark := make([]float64, 20000), make([]int8, 20000)
	for i := range x {
		x[i] = 90 + 3*r.NormFloat64()
		if x[i] > 85.1 {
			x[i], mark[i] = 85.1, 1
		}
	}
	d, err := FitNormal(x, mark)
	if err != nil || math.Abs(d.Mu-90) > 4*d.SEMu || math.Abs(math.Log(d.Sigma/3)) > 4*d.SELogSigma {
		t.Errorf("%+v %v", d, err)
	}
}

// 95 % intervals by the standard errors hold the truth in 93 to 97 % of 2,000
// draws, a quarter of the readings clamped.
func TestStandardErrorsCover(t *testing.T) {
	r := rand.New(rand.NewPCG(6, 3))
	const draws, n = 2000, 120
	mu, sigma := 0, 0
	x, mark := make([]float64, n), make([]int8, n)
	for range draws {
		for i := range x {
			x[i], mark[i] = 97+3.5*r.NormFloat64(), 0
			if x[i] > 99.4 {
				x[i], mark[i] = 99.4, 1
			}
		}
		d, err := FitNormal(x, mark)
		if err != nil {
			t.Fatal(err)
		}
		if math.Abs(d.Mu-97) <= 1.96*d.SEMu {
			mu++
		}
		if math.Abs(math.Log(d.Sigma/3.5)) <= 1.96*d.SELogSigma {
			sigma++
		}
	}
	for name, c := range map[string]int{"mu": mu, "ln sigma": sigma} {
		if share := float64(c) / draws; share < 0.93 || share > 0.97 {
			t.Errorf("the interval of %s covers %.3f", name, share)
		}
	}
}

func mustPanic(t *testing.T, f func()) {
	t.Helper()
	defer func() {
		t.Helper()
		if s, ok := recover().(string); !ok || !strings.HasPrefix(s, "stats/dist: ") {
			t.Errorf("recovered %q", s)
		}
	}()
	f()
}

func BenchmarkFitLognormalClamped(b *testing.B) {
	r := rand.New(rand.NewPCG(1, 1))
	const n = 25 * 88_000
	x, mark := make([]float64, n), make([]int8, n)
	for i := range x {
		x[i] = 1.8e-9 * math.Exp(0.55*r.NormFloat64())
		if x[i] < 1e-9 {
			x[i], mark[i] = 1e-9, -1
		}
	}
	for b.Loop() {
		if _, err := FitLognormal(x, mark); err != nil {
			b.Fatal(err)
		}
	}
}
