package control_test

import (
	"math"
	"math/rand/v2"
	"slices"
	"strings"
	"testing"

	"kneepoint/stats/control"
)

var nan = math.NaN()

// Printed tables (ASTM, Montgomery 2013, appendix VI; from memory), three or four
// digits; TestReference has all from 2 to 25 in full.
func TestConstantsAsPrinted(t *testing.T) {
	k := control.ConstantsFor(5)
	for _, c := range []struct{ got, want, digit float64 }{
		{k.C4, 0.9400, 1e-4}, {k.A3, 1.427, 1e-3}, {k.B3, 0, 0}, {k.B4, 2.089, 1e-3},
		{k.MeanRange, 2.326, 1e-3}, {k.RangeSD, 0.864, 1e-3}, {k.A2, 0.577, 1e-3}, {k.D3, 0, 0}, {k.D4, 2.114, 1e-3},
	} {
		if math.Abs(c.got-c.want) > c.digit/2*1.01 {
			t.Errorf("%v, printed %v", c.got, c.want)
		}
	}
	// The formula from n = 2 as from the integral of n = 3 and on; large subgroups.
	if k := control.ConstantsFor(2); math.Abs(k.D4-3.267) > 5e-4 {
		t.Errorf("D4(2) = %v", k.D4)
	}
	for _, n := range []int{300, 301} { // either side of the change of formula
		u := 1 / float64(n-1)
		if got := control.ConstantsFor(n).C4; math.Abs(got-(1-u/4+u*u/32)) > 5*u*u*u {
			t.Errorf("c4(%d) = %v", n, got)
		}
	}
	if k := control.ConstantsFor(1000); !(k.MeanRange > 6.4 && k.MeanRange < 6.5 && k.RangeSD > 0 && k.RangeSD < 0.7) {
		t.Errorf("%+v", k) // Tippett 1925: mean range of 1000 is 6.483 (from memory)
	}
}

func TestMissingPoints(t *testing.T) {
	x := []float64{1, 2, nan, 9, 10, 9, nan}
	keep := slices.Clone(x)
	i, mr := control.Individuals(x)
	if i.N != 5 || mr.N != 3 || mr.Center != 1 || !math.IsNaN(mr.Points[3]) || i.Center != 6.2 {
		t.Errorf("%+v\n%+v", i, mr)
	}
	if !slices.Equal(i.Signals, []int{0, 1, 3, 4, 5}) {
		t.Errorf("signals %v of limits %v to %v", i.Signals, i.Lower[0], i.Upper[0])
	}
	e := control.EWMA(x, 5, 1, control.EWMAOptions{Lambda: 0.5, L: 3})
	if !math.IsNaN(e.Points[2]) || e.Points[3] != 0.5*9+0.5*e.Points[1] {
		t.Errorf("%v", e.Points)
	}
	s := control.CUSUM(x, 5, 1, 3, 0)
	if !math.IsNaN(s.High[2]) || s.Low[1] != 5 || s.High[3] != 3 || !slices.Equal(s.SignalsHigh, []int{4, 5}) {
		t.Errorf("%+v", s)
	}
	p := control.P([]float64{1, 0, nan, 3}, []float64{10, 0, 10, 10})
	if p.N != 2 || p.Center != 0.2 || !math.IsNaN(p.Points[1]) || !math.IsNaN(p.Points[2]) {
		t.Errorf("%+v", p)
	}
	r := control.Nelson([]float64{1, 1, 1, nan, 1, 1, 1, 1, nan, 1, 1}, 0, 10)
	if !slices.Equal(r.Signals[1], []int{10}) {
		t.Errorf("rule 2 over missing points: %v", r.Signals[1])
	}
	if len(x) != len(keep) || !math.IsNaN(x[2]) || x[0] != 1 {
		t.Error("points were modified")
	}
	for _, c := range []control.Chart{
		control.P(nil, nil), control.C(nil), control.U([]float64{3}, []float64{0}),
		first(control.Individuals([]float64{3, nan, 4})), first(control.XbarS([][]float64{{1}, {}, {2}})),
	} {
		if c.Why == "" || len(c.Signals) != 0 {
			t.Errorf("%+v", c)
		}
	}
}

func first(a, _ control.Chart) control.Chart { return a }

// Subgroups of unequal size: each has the limits of its own size, sigma is
// unbiased.
func TestUnequalSubgroups(t *testing.T) {
	r := rand.New(rand.NewPCG(4, 4))
	var groups [][]float64
	for i := range 4000 {
		g := make([]float64, 2+i%7)
		for j := range g {
			g[j] = 50 + 3*r.NormFloat64()
		}
		groups = append(groups, append(g, nan))
	}
	for _, f := range []func([][]float64) (a, b control.Chart){control.XbarS, control.XbarR} {
		m, s := f(groups)
		if math.Abs(m.Sigma-3) > 0.05 {
			t.Errorf("sigma %v, true 3", m.Sigma)
		}
		if half := m.Upper[2] - m.Center; math.Abs(half-3*m.Sigma/2) > 1e-12 {
			t.Errorf("limits of four readings %v wide, sigma %v", half, m.Sigma)
		}
		if share := float64(len(m.Signals)) / 4000; share > 0.006 {
			t.Errorf("%.4f of means beyond", share)
		}
		if s.N != 4000 {
			t.Errorf("%d spreads", s.N)
		}
	}
}

// Rules at their edges: on a line is not beyond it, ties are no trend, and without
// sigma only the tests that need none.
func TestNelsonEdges(t *testing.T) {
	for _, c := range []struct {
		rule int
		x    []float64
		want []int
	}{
		{1, []float64{3, math.Nextafter(3, 4), -3}, []int{1}},
		{2, []float64{1, 1, 1, 1, 0, 1, 1, 1, 1, 1, 1, 1, 1}, []int{}},
		{2, []float64{1, 1, 1, 1, 0, 1, 1, 1, 1, 1, 1, 1, 1, 1}, []int{13}},
		{3, []float64{1, 2, 3, 3, 4, 5, 6, 7}, []int{}},
		{3, []float64{6, 5, 4, 3, 2, 1}, []int{5}},
		{4, []float64{0, 1, 0, 1, 0, 1, 0, 1, 0, 1, 0, 1, 0}, []int{}},
		{4, []float64{0, 1, 0, 1, 0, 1, 0, 1, 0, 1, 0, 1, 0, 1}, []int{13}},
		{4, []float64{0, 1, 0, 1, 0, 1, 0, 0, 1, 0, 1, 0, 1, 0}, []int{}},
		{5, []float64{2.5, 2.5}, []int{}}, // a window has three points
		{5, []float64{0, 2.5, 2.5}, []int{2}},
		{5, []float64{0, 2, 2.5}, []int{}},
		{7, slices.Repeat([]float64{0.5}, 15), []int{14}},
		{7, append(slices.Repeat([]float64{0.5}, 14), 1), []int{}},
		{8, []float64{2, 2, 2, 2, 2, 2, 2, -2}, []int{7}},
		{8, []float64{2, 2, 2, 2, 2, 2, 2, 2}, []int{}},
	} {
		r := control.Nelson(c.x, 0, 1)
		if !slices.Equal(r.Signals[c.rule-1], c.want) {
			t.Errorf("rule %d of %v: %v, want %v", c.rule, c.x, r.Signals[c.rule-1], c.want)
		}
	}
	r := control.Nelson(slices.Repeat([]float64{7}, 20), 5, 0)
	if len(r.Signals[1]) != 12 || len(r.Signals[0])+len(r.Signals[6])+len(r.Signals[7]) != 0 {
		t.Errorf("sigma 0: %+v", r)
	}
}

// Three bad points among thirty do not set the limits, and are named.
func TestPhaseOne(t *testing.T) {
	r := rand.New(rand.NewPCG(12, 3))
	sum, bad := 0.0, 0
	for range 300 {
		x := make([]float64, 30)
		for i := range x {
			x[i] = 42 + 0.5*r.NormFloat64()
		}
		x[4], x[17], x[18] = 47, 38, 37
		b := control.PhaseOne(x)
		for _, i := range []int{4, 17, 18} {
			if !slices.Contains(b.Excluded, i) {
				t.Fatalf("point %d not excluded: %+v", i, b)
			}
		}
		bad += len(b.Excluded) - 3
		sum += b.Sigma
		if b.N != 30-len(b.Excluded) {
			t.Fatalf("%+v", b)
		}
	}
	if mean := sum / 300; math.Abs(mean/0.5-1) > 0.03 {
		t.Errorf("sigma %v on average, true 0.5", mean)
	}
	if bad > 90 {
		t.Errorf("%d of 8100 good points excluded", bad)
	}
	// Two processes are said to be two.
	x := make([]float64, 40)
	for i := range x {
		x[i] = 42 + 0.1*r.NormFloat64() + 5*float64(i/25)
	}
	if b := control.PhaseOne(x); b.Why == "" || len(b.Excluded) != 15 {
		t.Errorf("%+v", b)
	}
	if b := control.PhaseOne([]float64{1, 2, 3, nan, 4, 5, 6, 7}); !math.IsNaN(b.Sigma) || !strings.Contains(b.Why, "need 8") {
		t.Errorf("%+v", b)
	}
	if b := control.PhaseOne(make([]float64, 20)); b.Why != "points do not differ" {
		t.Errorf("%+v", b)
	}
}

func TestStatLimits(t *testing.T) {
	y := []float64{0.90, 0.91, 0.89, 0.92, 0.88, 0.90, nan}
	l := control.YieldLimits(y, false)
	// Mean 0.9, standard deviation sqrt(0.001/5) by hand.
	sd := math.Sqrt(0.001 / 5)
	if l.N != 6 || math.Abs(l.First-(0.9-3*sd)) > 1e-12 || math.Abs(l.Second-(0.9-4*sd)) > 1e-12 || math.Abs(l.FirstRisk-0.0195) > 5e-4 {
		t.Errorf("%+v", l)
	}
	for _, c := range []struct {
		y    float64
		want int
	}{{0.9, 0}, {l.First, 0}, {math.Nextafter(l.First, 0), 1}, {0.5, 2}, {nan, 0}, {1, 0}} {
		if got := l.Judge(c.y); got != c.want {
			t.Errorf("yield %v: %d, want %d", c.y, got, c.want)
		}
	}
	b := control.BinLimits([]float64{0.01, 0.02, 0.015, 0.01, 0.02, 0.015, 0.5}, true)
	if b.Center != 0.015 || b.Judge(0.5) != 2 || b.Judge(0.03) != 0 || !b.Robust {
		t.Errorf("%+v", b)
	}
	if got := control.YieldLimits(y[:5], false); got.Why == "" || got.Judge(0) != 0 {
		t.Errorf("%+v", got)
	}
	if wide := control.BinLimits([]float64{0.9, 0.1, 0.5, 0.7, 0.2, 0.6}, false); wide.First != 1 || wide.Judge(1) != 0 || !math.IsNaN(wide.FirstRisk) {
		t.Errorf("%+v", wide)
	}
}

func TestPanics(t *testing.T) {
	for _, f := range []func(){
		func() { control.ConstantsFor(1) },
		func() { control.P([]float64{1}, []float64{1, 2}) },
		func() { control.P([]float64{3}, []float64{2}) },
		func() { control.U([]float64{-1}, []float64{2}) },
		func() { control.EWMA(nil, 0, 1, control.EWMAOptions{Lambda: 0}) },
		func() { control.CUSUM(nil, 0, -1, 1, 0) },
	} {
		func() {
			defer func() {
				if s, ok := recover().(string); !ok || !strings.HasPrefix(s, "stats/control: ") {
					t.Errorf("recovered %v", s)
				}
			}()
			f()
		}()
	}
}
