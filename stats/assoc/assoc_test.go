package assoc_test

import (
	"math"
	"math/rand/v2"
	"os"
	"slices"
	"strings"
	"testing"

	"kneepoint/stats/assoc"
)

var nan = math.NaN()

// lot is a made lot: wafers that differ by themselves, dice that differ on them.
type lot struct {
	units            assoc.Units
	volts            []float64
	order, touchdown []float64
	site, tool       []int32
}

const (
	waferSigma = 0.5
	dieSigma   = 1.0
)

// makeLot has wafers of so many dice; shift gives what a die of a wafer, touched
// down at t of 0 to 1 by a site, has besides.
func makeLot(r *rand.Rand, wafers, dice int, shift func(wafer, site int, t float64) float64) (l lot) {
	for w := range wafers {
		own := 42 + waferSigma*r.NormFloat64()
		siteOwn := make([]float64, 4) // sites differ a little, anew on each wafer
		for s := range siteOwn {
			siteOwn[s] = 0.1 * r.NormFloat64()
		}
		drift := 0.3 * r.NormFloat64()
		for i := range dice {
			t := float64(i) / float64(dice)
			s := i % 4
			l.units.Wafer = append(l.units.Wafer, int32(w+1))
			l.order, l.touchdown = append(l.order, float64(w+1)), append(l.touchdown, float64(i/4))
			l.site, l.tool = append(l.site, int32(s)), append(l.tool, int32(w%3))
			l.volts = append(l.volts, own+siteOwn[s]+drift*(t-0.5)+shift(w, s, t)+dieSigma*r.NormFloat64())
		}
	}
	return l
}

func (l lot) factors() []assoc.Factor {
	return []assoc.Factor{
		{Name: "wafer order", Values: l.order},
		{Name: "tool", Codes: l.tool, Labels: []string{"A", "B", "C"}},
		{Name: "site", Codes: l.site, Labels: []string{"1", "2", "3", "4"}},
		{Name: "test order", Values: l.touchdown, Order: true},
	}
}

func (l lot) scan(f ...assoc.Factor) []assoc.Finding {
	return assoc.Scan([]assoc.Response{{Name: "BVCBO", Values: l.volts, Unit: "V"}}, f, l.units)
}

func none(int, int, float64) float64 { return 0 }

// Lots in which nothing depends on anything, but wafers differ, sites differ from
// wafer to wafer, and wafers drift this way and that: p is at or below 0.05 in
// about 5 % of lots or less, whatever the number of dice.
func TestFalseFindings(t *testing.T) {
	lots := 250
	if os.Getenv("KNEEPOINT_LONG") != "" {
		lots = 2000
	}
	for _, wafers := range []int{2, 3, 6, 12, 25} {
		r := rand.New(rand.NewPCG(uint64(wafers), 3))
		found := map[string]int{}
		judged := map[string]int{}
		for range lots {
			l := makeLot(r, wafers, 60, none)
			for _, f := range l.scan(l.factors()...) {
				if f.P == f.P {
					judged[f.With]++
					if f.P <= 0.05 {
						found[f.With]++
					}
				}
			}
		}
		for _, name := range []string{"wafer order", "tool", "site", "test order"} {
			n := float64(judged[name])
			if n == 0 {
				continue
			}
			rate := float64(found[name]) / n
			t.Logf("%d wafers, %s: p at or below 0.05 in %.3f", wafers, name, rate)
			if rate > 0.065+3*math.Sqrt(0.05*0.95/n) {
				t.Errorf("%d wafers, %s: p at or below 0.05 in %.3f of lots without any dependence", wafers, name, rate)
			}
		}
	}
}

// What was put in comes out, with its size and its words.
func TestFindsWhatIsThere(t *testing.T) {
	r := rand.New(rand.NewPCG(9, 2))
	find := func(shift func(wafer, site int, t float64) float64, with string, wafers int) assoc.Finding {
		l := makeLot(r, wafers, 400, shift)
		for _, f := range l.scan(l.factors()...) {
			if f.With == with {
				t.Log(f.Text)
				return f
			}
		}
		panic(with)
	}
	f := find(func(w, _ int, _ float64) float64 { return 1.5 * float64(w%3/2) }, "tool", 24)
	if !f.Dependent() || f.Groups[f.Furthest].Label != "C" || f.Groups[2].Units != 8 || f.Groups[2].Dice != 3200 || math.Abs(f.Effect.Estimate-1.5) > 0.6 ||
		!(f.Effect.Lower < 1.5 && 1.5 < f.Effect.Upper) || f.Cases != "wafers" || f.N != 24 || f.Strength < 0.3 || math.Abs(f.InSigmas-f.Effect.Estimate) > 0.2 {
		t.Errorf("%+v", f)
	}
	f = find(func(w, _ int, _ float64) float64 { return -0.1 * float64(w) }, "wafer order", 25)
	if !f.Dependent() || f.Bend || math.Abs(f.Slope.Estimate+0.1) > 0.04 || math.Abs(f.Effect.Estimate+2.4) > 1 || !strings.Contains(f.Text, "falls with wafer order") {
		t.Errorf("%+v", f)
	}
	// Both ends of the boat low, the middle high.
	f = find(func(w, _ int, _ float64) float64 { return 2 * math.Sin(math.Pi*float64(w)/24) }, "wafer order", 25)
	if !f.Dependent() || !f.Bend || len(f.Groups) != 4 || !strings.Contains(f.Text, "neither rising nor falling") {
		t.Errorf("%+v", f)
	}
	f = find(func(_, s int, _ float64) float64 { return -0.5 * float64(s/3) }, "site", 10)
	if !f.Dependent() || !f.Within || f.Groups[f.Furthest].Label != "4" || math.Abs(f.Effect.Estimate+0.5) > 0.25 || f.N != 10 {
		t.Errorf("%+v", f)
	}
	f = find(func(_, _ int, t float64) float64 { return 0.8 * t }, "test order", 12)
	if !f.Dependent() || !f.Within || math.Abs(f.Effect.Estimate-0.6) > 0.25 || !strings.Contains(f.Text, "follows the place on the wafer") {
		t.Errorf("%+v", f)
	}
	f = find(none, "tool", 24)
	if f.Dependent() || !strings.HasPrefix(f.Text, "No sign that BVCBO goes with tool (24 wafers; p 0.") {
		t.Errorf("%+v", f)
	}
}

// A yield, with one dead wafer: points of percent, and lots as cases.
func TestYieldByLot(t *testing.T) {
	r := rand.New(rand.NewPCG(2, 8))
	var u assoc.Units
	var pass []float64
	var supplier []int32
	for l := range 8 {
		for w := range 6 {
			for range 200 {
				u.Lot, u.Wafer = append(u.Lot, int32(l)), append(u.Wafer, int32(w))
				supplier = append(supplier, int32(l%2))
				rate := 0.9 - 0.2*float64(l%2) + 0.02*math.Sin(float64(l))
				if l == 0 && w == 3 {
					rate = 0
				}
				p := 0.0
				if r.Float64() < rate {
					p = 1
				}
				pass = append(pass, p)
			}
		}
	}
	f := assoc.Scan([]assoc.Response{{Name: "yield", Values: pass, Yield: true}},
		[]assoc.Factor{{Name: "supplier", Codes: supplier, Labels: []string{"P", "Q"}}}, u)[0]
	t.Log(f.Text)
	// 8 lots in two kinds of 4: two of 70 ways to deal them are as far apart.
	if f.Cases != "lots" || f.N != 8 || math.Abs(f.P-2.0/70) > 1e-12 || !math.IsNaN(f.InSigmas) || math.Abs(math.Abs(f.Effect.Estimate)-0.2) > 0.06 {
		t.Errorf("%+v", f)
	}
	if !strings.Contains(f.Text, "points") || !strings.Contains(f.Text, "The yield differs by supplier") {
		t.Error(f.Text)
	}
}

// A tool that serves half of the wafers of each of three lots that differ a lot:
// lots are taken out.
func TestWafersInLots(t *testing.T) {
	r := rand.New(rand.NewPCG(4, 8))
	var u assoc.Units
	var y []float64
	var tool []int32
	for l := range 3 {
		for w := range 8 {
			own := 40 + 5*float64(l) + 0.2*r.NormFloat64() + 0.5*float64(w%2)
			for range 30 {
				u.Lot, u.Wafer = append(u.Lot, int32(l)), append(u.Wafer, int32(w))
				tool = append(tool, int32(w%2))
				y = append(y, own+0.3*r.NormFloat64())
			}
		}
	}
	f := assoc.Scan([]assoc.Response{{Name: "BVCEO", Values: y, Unit: "V"}}, []assoc.Factor{{Name: "tool", Codes: tool, Labels: []string{"A", "B"}}}, u)[0]
	if f.Cases != "wafers" || f.N != 24 || f.P > 0.001 || math.Abs(math.Abs(f.Effect.Estimate)-0.5) > 0.2 {
		t.Errorf("%+v", f)
	}
}

// Order of rows does not matter, nothing is modified, and scale is for words only.
func TestLaws(t *testing.T) {
	r := rand.New(rand.NewPCG(3, 3))
	l := makeLot(r, 14, 80, func(w, s int, t float64) float64 { return 0.6 * float64(w%3) })
	l.volts[5], l.order[300] = nan, nan
	keep := slices.Clone(l.volts)
	a := l.scan(l.factors()...)
	var m lot
	for _, i := range r.Perm(len(l.volts)) {
		m.units.Wafer = append(m.units.Wafer, l.units.Wafer[i])
		m.volts, m.order, m.touchdown = append(m.volts, l.volts[i]), append(m.order, l.order[i]), append(m.touchdown, l.touchdown[i])
		m.site, m.tool = append(m.site, l.site[i]), append(m.tool, l.tool[i])
	}
	b := m.scan(m.factors()...)
	for i := range a {
		if math.Abs(a[i].P-b[i].P) > 1e-12 || math.Abs(a[i].Effect.Estimate-b[i].Effect.Estimate) > 1e-12 || a[i].Text != b[i].Text {
			t.Errorf("%s\n%s", a[i].Text, b[i].Text)
		}
	}
	for i := range keep {
		if keep[i] != l.volts[i] && keep[i] == keep[i] {
			t.Fatal("values were modified")
		}
	}
	c := assoc.Scan([]assoc.Response{{Name: "ICBO", Values: l.volts, Unit: "nA", Scale: 1e9}}, l.factors(), l.units)
	if c[1].Effect != a[1].Effect || !strings.Contains(c[1].Text, "e+") && !strings.Contains(c[1].Text, "0000") && c[1].Dependent() {
		t.Errorf("%+v\n%s", c[1].Effect, c[1].Text)
	}
}

// What cannot be judged is no look, and says why.
func TestNotJudged(t *testing.T) {
	r := rand.New(rand.NewPCG(5, 5))
	l := makeLot(r, 4, 50, none)
	n := len(l.volts)
	constant, unknown, own, unknownNumbers := make([]int32, n), make([]int32, n), make([]int32, n), make([]float64, n)
	for i := range unknown {
		unknown[i] = -1
		own[i] = l.units.Wafer[i] - 1
		unknownNumbers[i] = nan
	}
	f := l.scan(
		assoc.Factor{Name: "supplier", Codes: constant, Labels: []string{"P"}},
		assoc.Factor{Name: "reactor", Codes: unknown, Labels: []string{"R"}},
		assoc.Factor{Name: "wafer", Codes: own, Labels: []string{"1", "2", "3", "4"}},
		assoc.Factor{Name: "wafer order", Values: l.order},
		assoc.Factor{Name: "time", Values: unknownNumbers},
		assoc.Factor{Name: "site", Codes: l.site, Labels: []string{"1", "2", "3", "4"}},
	)
	for i, why := range []string{"it is the same for all", "nothing is known of it", "4 wafers of 4 kinds: too few to tell kinds from wafers", "4 wafers; 5 are needed", "nothing is known of it"} {
		if f[i].Why != why || !math.IsNaN(f[i].P) || !math.IsNaN(f[i].Adjusted) || !strings.Contains(f[i].Text, "not judged, "+why) || f[i].Dependent() {
			t.Errorf("%+v", f[i])
		}
	}
	if f[5].Looks != 1 || f[5].P != f[5].Adjusted || strings.Contains(f[5].Text, "adjusted") {
		t.Errorf("%+v", f[5])
	}
	empty := slices.Repeat([]float64{nan}, n)
	equal := slices.Repeat([]float64{3}, n)
	for _, g := range assoc.Scan([]assoc.Response{{Name: "HFE", Values: empty}, {Name: "COB", Values: equal}}, l.factors(), l.units) {
		if g.P == g.P || g.Why == "" {
			t.Errorf("%+v", g)
		}
	}
	// One wafer: by dice, with a caution.
	one := makeLot(r, 1, 400, func(_, s int, _ float64) float64 { return 2 * float64(s/3) })
	for _, g := range one.scan(one.factors()[2:]...) {
		if g.Cases != "dice" || g.N != 400 || !strings.Contains(g.Text, "less than its p") {
			t.Errorf("%+v", g)
		}
	}
	if g := assoc.Scan(nil, nil, assoc.Units{}); len(g) != 0 {
		t.Error(g)
	}
	for _, bad := range []func(){
		func() { l.scan(assoc.Factor{Name: "x", Values: []float64{1}}) },
		func() { l.scan(assoc.Factor{Name: "x", Codes: []int32{1}}) },
		func() { l.scan(assoc.Factor{Name: "x", Codes: make([]int32, n)}) },
		func() { assoc.Scan([]assoc.Response{{Values: []float64{1}}}, nil, l.units) },
		func() { assoc.Scan(nil, nil, assoc.Units{Wafer: []int32{1}, Lot: []int32{}}) },
	} {
		func() {
			defer func() {
				if s, ok := recover().(string); !ok || !strings.HasPrefix(s, "stats/assoc: ") {
					t.Errorf("recovered %v", s)
				}
			}()
			bad()
		}()
	}
}

// A lot of 25 wafers of 88,000 dice, eight tests against four columns.
func BenchmarkScan(b *testing.B) {
	r := rand.New(rand.NewPCG(1, 1))
	l := makeLot(r, 25, 88000, none)
	responses := make([]assoc.Response, 8)
	for i := range responses {
		responses[i] = assoc.Response{Name: "T", Values: l.volts}
	}
	b.ResetTimer()
	for b.Loop() {
		assoc.Scan(responses, l.factors(), l.units)
	}
}
