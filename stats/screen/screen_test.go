package screen

import (
	"math"
	"math/rand/v2"
	"slices"
	"strings"
	"testing"

	"kneepoint/stats"
)

// The reference cases (R, scikit-learn, NIST handbook) are checked by
// TestReference of package stats.

var nan, inf = math.NaN(), math.Inf(1)

func near(got, want, tolerance float64) bool {
	return math.Abs(got-want) <= tolerance*math.Max(math.Abs(want), 1e-300)
}

// NIST/SEMATECH e-Handbook 1.3.5.17.3, Rosner's data (from memory; its printed
// results come out): three outliers, R 3.118, 2.942, 3.179 against lambda 3.158,
// 3.151, 3.143.
func TestRosner(t *testing.T) {
	x := []float64{-0.25, 0.68, 0.94, 1.15, 1.20, 1.26, 1.26, 1.34, 1.38, 1.43, 1.49, 1.49, 1.55, 1.56, 1.58, 1.65, 1.69, 1.70,
		1.76, 1.77, 1.81, 1.91, 1.94, 1.96, 1.99, 2.06, 2.09, 2.10, 2.14, 2.15, 2.23, 2.24, 2.26, 2.35, 2.37, 2.40,
		2.47, 2.54, 2.62, 2.64, 2.90, 2.92, 2.92, 2.93, 3.21, 3.26, 3.30, 3.59, 3.68, 4.30, 4.64, 5.34, 5.42, 6.01}
	e := GESD(x, 10, 0.05)
	if e.Outliers != 3 || !slices.Equal(e.Removed[:3], []int{53, 52, 51}) || len(e.R) != 10 {
		t.Errorf("%+v", e)
	}
	for i, want := range [][2]float64{{3.118, 3.158}, {2.942, 3.151}, {3.179, 3.143}} {
		if math.Abs(e.R[i]-want[0]) > 1e-3 || math.Abs(e.Lambda[i]-want[1]) > 1e-3 {
			t.Errorf("step %d: %v %v, want %v", i+1, e.R[i], e.Lambda[i], want)
		}
	}
	if g := Grubbs(x, 0.05); g.Index != 53 || g.P < 0.05 || !(g.G < g.Critical) { // masked by the other two
		t.Errorf("%+v", g)
	}
}

func TestOutlierEnds(t *testing.T) {
	for _, c := range []struct {
		x    []float64
		want string
	}{{nil, "fewer than three"}, {[]float64{1, nan, 2}, "fewer than three"}, {[]float64{1, 2, inf}, "infinite"}, {[]float64{4, 4, 4}, "equal"}} {
		if g := Grubbs(c.x, 0.05); !strings.Contains(g.Why, c.want) || g.Index != -1 || !math.IsNaN(g.P) {
			t.Errorf("%v: %+v", c.x, g)
		}
		if e := GESD(c.x, 3, 0.05); !strings.Contains(e.Why, c.want) || e.Outliers != 0 {
			t.Errorf("%v: %+v", c.x, e)
		}
	}
	// Three readings: G is at most 2/sqrt(3), the limit 1.1543 (Grubbs 1969, table I:
	// 1.153 for 5 % one-sided).
	g := Grubbs([]float64{0, nan, 0, 10}, 0.05)
	if g.Index != 3 || !near(g.G, 2/math.Sqrt(3), 1e-12) || math.Abs(g.CriticalOneSided-1.153) > 1e-3 || g.P > 1e-6 {
		t.Errorf("%+v", g)
	}
	// A lot: the limit grows slowly.
	x := make([]float64, 2_200_000)
	r := rand.New(rand.NewPCG(1, 1))
	for i := range x {
		x[i] = r.NormFloat64()
	}
	if g = Grubbs(x, 0.05); !(g.Critical > 5.5 && g.Critical < 6) || g.P < 0.001 {
		t.Errorf("%+v", g)
	}
	// Ties at both ends: the first in the list goes first, until nothing is left to
	// measure by.
	e := GESD([]float64{5, 0, 10, 5, 0, 10, 5}, 99, 0.05)
	if !slices.Equal(e.Removed, []int{1, 4, 2, 5}) {
		t.Errorf("%+v", e)
	}
	for _, f := range []func(){func() { Grubbs(nil, 0) }, func() { GESD(nil, 0, 0.05) }} {
		mustPanic(t, f)
	}
}

func mustPanic(t *testing.T, f func()) {
	t.Helper()
	defer func() {
		t.Helper()
		if s, ok := recover().(string); !ok || !strings.HasPrefix(s, "stats/screen: ") {
			t.Errorf("recovered %q", s)
		}
	}()
	f()
}

func draw(n int, f func() float64) []float64 {
	x := make([]float64, n)
	for i := range x {
		x[i] = f()
	}
	return x
}

func TestPartAverage(t *testing.T) {
	r := rand.New(rand.NewPCG(2, 1))
	normal := draw(5000, func() float64 { return 42 + 0.9*r.NormFloat64() })
	leak := draw(5000, func() float64 { return 1.8e-9 * math.Exp(0.55*r.NormFloat64()) })
	left := draw(5000, func() float64 { return 96 * math.Pow(r.ExpFloat64(), 1.0/4) })

	l := PartAverage(normal, nil, Standard())
	if math.Abs(l.Lower-36.6) > 0.3 || math.Abs(l.Upper-47.4) > 0.3 || l.N != 5000 || l.Why != "" || !strings.Contains(l.Method, "6 sigma") {
		t.Errorf("%+v", l)
	}
	// The shape decides: leakage on logarithms flags nobody, where a linear scale
	// would scrap good dice.
	for _, c := range []struct {
		name       string
		x          []float64
		scale      Scale
		asymmetric bool
	}{{"normal", normal, Linear, false}, {"leakage", leak, Log, false}, {"left", left, Linear, false}} {
		o, why := Standard().Fitting(c.x, nil)
		if o.Scale != c.scale || o.Asymmetric != c.asymmetric || why == "" {
			t.Errorf("%s: %+v %s", c.name, o, why)
		}
		if c.name != "left" {
			for i, f := range PartAverage(c.x, nil, o).Outside(c.x, nil) {
				if f {
					t.Errorf("%s: %v flagged", c.name, c.x[i])
				}
			}
		}
	}
	scrapped := 0
	for _, f := range PartAverage(leak, nil, Standard()).Outside(leak, nil) {
		if f {
			scrapped++
		}
	}
	if scrapped == 0 {
		t.Error("a linear scale flags nobody of a lognormal test")
	}
	if o, _ := Standard().Fitting(draw(3000, func() float64 { return r.ExpFloat64() - 0.5 }), nil); !o.Asymmetric || o.Scale != Linear {
		t.Errorf("exponential about 0: %+v", o)
	}
	o := Standard()
	o.Asymmetric, o.Kind = true, stats.HyndmanFan7
	o.MinimumN = 2
	// By hand: quartiles of 0 1 2 6 14 are 1, 2, 6.
	l = PartAverage([]float64{14, 0, nan, 1, 6, 2}, nil, o)
	if l.Centre != 2 || !near(l.Lower, 2-6/0.675, 1e-12) || !near(l.Upper, 2+24/0.675, 1e-12) {
		t.Errorf("%+v", l)
	}
	// Bounds count as beyond: a clamp on a tenth of the readings changes nothing.
	mark, clamped := make([]int8, len(normal)), slices.Clone(normal)
	for i := range clamped {
		if clamped[i] > 43.2 {
			clamped[i], mark[i] = 43.2, 1
		}
	}
	if a, b := PartAverage(clamped, mark, Standard()), PartAverage(normal, nil, Standard()); a != b {
		t.Errorf("%+v, want %+v", a, b)
	}
	// What is only a bound is flagged where that is enough.
	if f := (Limits{Lower: 30, Upper: 50}).Outside([]float64{51, 51, 29, 29, 40, nan}, []int8{1, -1, -1, 1, 1, 0}); !slices.Equal(f, []bool{true, false, true, false, false, false}) {
		t.Errorf("%v", f)
	}
	if w := (Limits{Lower: 30, Upper: 50}).Within(35, nan); w.Lower != 35 || w.Upper != 50 {
		t.Errorf("%+v", w)
	}
}

func TestPartAverageWhy(t *testing.T) {
	all := make([]int8, 40)
	for i := range all {
		all[i] = 1
	}
	ramp := draw(40, func() float64 { return 1 })
	for i := range ramp {
		ramp[i] = float64(i)
	}
	log := Standard()
	log.Scale = Log
	sd := Standard()
	sd.Estimator = MeanSD
	for _, c := range []struct {
		x    []float64
		mark []int8
		o    Options
		want string
	}{
		{ramp[:29], nil, Standard(), "29 readings"}, {nil, nil, Options{K: 6, Kind: 8}, "0 readings"}, {ramp, nil, log, "not positive"},
		{make([]float64, 40), nil, Standard(), "equal"}, {ramp, all, Standard(), "bounds"}, {ramp, all, sd, "take no bounds"},
		{append(slices.Clone(ramp), inf), nil, sd, "bounds"},
	} {
		l := PartAverage(c.x, c.mark, c.o)
		if !strings.Contains(l.Why, c.want) || !math.IsNaN(l.Lower) || slices.Contains(l.Outside(c.x, c.mark), true) {
			t.Errorf("%+v, want %q", l, c.want)
		}
	}
	for _, f := range []func(){
		func() { PartAverage(ramp, all[:3], Standard()) },
		func() { PartAverage(ramp, nil, Options{Kind: 8}) },
		func() { PartAverage(ramp, nil, Options{K: 6, Estimator: MedianMAD, Asymmetric: true}) },
		func() { PartAverage(ramp, nil, Options{K: 6, Estimator: 9}) },
		func() { (Limits{}).Outside(ramp, all[:3]) },
		func() { Static(nil, 0) },
	} {
		mustPanic(t, f)
	}
}

func TestStatic(t *testing.T) {
	lot := func(c float64) Limits { return Limits{Centre: c, SigmaLow: 3, SigmaHigh: 4, N: 100} }
	lots := []Limits{lot(10), lot(12), lot(11), lot(13), lot(9), {Why: "few"}, lot(11)}
	// By hand: centres 9 10 11 11 12 13, median 11, deviations 0 0 1 1 2 2: MAD 1.
	l := Static(lots, 6)
	b := 1.4826 * 1.4826
	if l.Centre != 11 || !near(l.Lower, 11-6*math.Sqrt(9+b), 1e-12) || !near(l.Upper, 11+6*math.Sqrt(16+b), 1e-12) || l.N != 600 || l.Why != "" {
		t.Errorf("%+v", l)
	}
	if l = Static(lots[:5], 6); !strings.Contains(l.Why, "need six") || !math.IsNaN(l.Upper) {
		t.Errorf("%+v", l)
	}
	lots[0].Scale = Log
	if l = Static(lots, 6); !strings.Contains(l.Why, "scales") {
		t.Errorf("%+v", l)
	}
	for i := range lots {
		lots[i].Scale = Log
		lots[i].Centre = 1e-9
		lots[i].SigmaLow, lots[i].SigmaHigh = 0.5, 0.5
	}
	if l = Static(lots, 6); !near(l.Lower, 1e-9*math.Exp(-3), 1e-12) || !near(l.Upper, 1e-9*math.Exp(3), 1e-12) {
		t.Errorf("%+v", l)
	}
}

func TestCosts(t *testing.T) {
	pass := []bool{true, true, true, true, false, false}
	got := Costs([]Screen{
		{"a", []bool{true, false, false, false, true, false}},
		{"b", []bool{true, true, false, false, false, false}},
	}, pass, 0.95)
	for i, want := range []Cost{{Name: "a", Good: 4, Screened: 1, Extra: 1, Failing: 1}, {Name: "b", Good: 4, Screened: 2, Extra: 1}, {Name: "all screens", Good: 4, Screened: 2, Extra: 2, Failing: 1}} {
		want.Share = got[i].Share
		if got[i] != want || got[i].Share.Estimate != float64(want.Screened)/4 || got[i].Share.Upper <= got[i].Share.Estimate {
			t.Errorf("%+v, want %+v", got[i], want)
		}
	}
	if c := CostOf(Screen{"a", nil}, nil, 0.95); c.Good != 0 || c.Share.Why == "" {
		t.Errorf("%+v", c)
	}
	mustPanic(t, func() { CostOf(Screen{"a", nil}, pass, 0.95) })
}
