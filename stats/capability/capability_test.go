package capability

import (
	"math"
	"math/rand/v2"
	"os"
	"slices"
	"strings"
	"testing"

	"kneepoint/stats"
)

// The reference values of this package are checked by TestReference of package
// stats.

var nan = math.NaN()

// draw makes readings of wafers whose means spread by between and whose readings
// spread by within.
func draw(r *rand.Rand, wafers, each int, mean, between, within float64) (x []float64, group []int32) {
	for w := range wafers {
		m := mean + between*r.NormFloat64()
		for range each {
			x = append(x, m+within*r.NormFloat64())
			group = append(group, int32(w))
		}
	}
	return x, group
}

// Intervals of 95 % must hold the true index in 93 to 97 % of the draws: 2,000
// with KNEEPOINT_LONG=1; else 400, with three standard errors of slack. With
// subgroups that differ the overall intervals may be up to the rest too wide, and
// lose a little when there are few.
func TestIntervalsCover(t *testing.T) {
	draws := 400
	if os.Getenv("KNEEPOINT_LONG") != "" {
		draws = 2000
	}
	slack := 3 * math.Sqrt(0.95*0.05/float64(draws))
	const lower, upper = 75.0, 93.0
	for _, c := range []struct {
		name                  string
		wafers, each          int
		mean, between, within float64
		clamp                 float64
		least                 float64 // coverage of the overall indices
	}{
		{"no subgroups", 1, 60, 84.5, 0, 2.2, nan, 0.93},
		{"alike subgroups", 25, 40, 83, 0, 2.2, nan, 0.93},
		{"subgroups differ", 25, 40, 83, 1.5, 2.0, nan, 0.92},
		{"subgroups differ a lot", 12, 100, 83, 3, 1.5, nan, 0.90},
		{"clamped", 1, 120, 84, 0, 2.2, 86, 0.93},
		{"clamped, subgroups differ", 25, 40, 83, 1.5, 2.0, 86, 0.91},
	} {
		r := rand.New(rand.NewPCG(31, uint64(c.wafers)))
		overall := math.Hypot(c.between, c.within)
		hits := map[string]int{}
		for range draws {
			x, group := draw(r, c.wafers, c.each, c.mean, c.between, c.within)
			in := Input{Values: x, Group: group, Lower: lower, Upper: upper, MinimumN: 30, Confidence: 0.95}
			if c.clamp == c.clamp {
				in.Censor = make([]int8, len(x))
				for i := range x {
					if x[i] > c.clamp {
						x[i], in.Censor[i] = c.clamp, 1
					}
				}
			}
			res := Compute(in)
			if res.Why != "" {
				t.Fatal(res.Why)
			}
			all, within := Indices(c.mean, overall, lower, upper), Indices(c.mean, c.within, lower, upper)
			for name, pair := range map[string]struct {
				iv   stats.Interval
				true float64
			}{"Cp": {res.Cp, within.Cp}, "Cpk": {res.Cpk, within.Cpk}, "Pp": {res.Pp, all.Cp}, "Ppk": {res.Ppk, all.Cpk}} {
				if pair.iv.Lower <= pair.true && pair.true <= pair.iv.Upper {
					hits[name]++
				}
			}
		}
		for _, name := range []string{"Cp", "Cpk", "Pp", "Ppk"} {
			share := float64(hits[name]) / float64(draws)
			least := 0.93
			if name[0] == 'P' {
				least = c.least
			}
			if name == "Cpk" && c.between > 0 {
				least = c.least
			}
			if share < least-slack {
				t.Errorf("%s: the interval of %s covers %.3f", c.name, name, share)
			}
			if draws >= 2000 {
				t.Logf("%s: the interval of %s covers %.3f", c.name, name, share)
			}
		}
	}
}

func TestNoNumber(t *testing.T) {
	many := make([]float64, 40)
	for i := range many {
		many[i] = float64(i % 7)
	}
	clamped := make([]int8, 40)
	for i := range clamped {
		clamped[i] = 1
	}
	infinite := append(slices.Clone(many), math.Inf(1))
	for _, c := range []struct {
		name string
		in   Input
		why  string
	}{
		{"empty", Input{Lower: 0, Upper: 1}, "no readings"},
		{"only missing", Input{Values: []float64{nan, nan}, Lower: 0, Upper: 1}, "no readings"},
		{"no limit", Input{Values: many, Lower: nan, Upper: nan}, "no limit"},
		{"limits cross", Input{Values: many, Lower: 2, Upper: 1}, "not below"},
		{"limits meet", Input{Values: many, Lower: 2, Upper: 2}, "not below"},
		{"few", Input{Values: many[:29], Lower: 0, Upper: 9, MinimumN: 30}, "29 readings; an index needs 30"},
		{"one", Input{Values: many[:1], Lower: 0, Upper: 9}, "1 readings; an index needs 2"},
		{"constant", Input{Values: make([]float64, 50), Lower: -1, Upper: 1, MinimumN: 30}, "all readings are equal"},
		{"clamped", Input{Values: many, Censor: clamped, Lower: 0, Upper: 9, MinimumN: 30}, "0 exact readings (40 more are only bounds)"},
		{"infinite", Input{Values: infinite, Lower: 0, Upper: 9}, "infinite"},
	} {
		c.in.Confidence = 0.95
		r := Compute(c.in)
		if !strings.Contains(r.Why, c.why) || r.Notes == nil {
			t.Errorf("%s: %q", c.name, r.Why)
		}
		for _, iv := range []stats.Interval{r.Cp, r.Cpk, r.Pp, r.Ppk} {
			if !math.IsNaN(iv.Estimate) || !math.IsNaN(iv.Lower) || !math.IsNaN(iv.Upper) || iv.Why == "" {
				t.Errorf("%s: %+v", c.name, iv)
			}
		}
		if !math.IsNaN(r.Within) || !math.IsNaN(r.Overall) {
			t.Errorf("%s: sigma %v %v", c.name, r.Within, r.Overall)
		}
	}
	// Just enough.
	if r := Compute(Input{Values: many[:30], Lower: 0, Upper: 9, MinimumN: 30, Confidence: 0.95}); r.Why != "" || r.N != 30 {
		t.Errorf("30 readings: %+v", r)
	}
	for _, f := range []func(){
		func() { Compute(Input{Values: many, Group: []int32{1}, Lower: 0, Upper: 9, Confidence: 0.95}) },
		func() { Compute(Input{Values: many, Censor: []int8{1}, Lower: 0, Upper: 9, Confidence: 0.95}) },
		func() { Compute(Input{Values: many, Lower: 0, Upper: 9}) },
		func() { CpInterval(1, 5, 1) },
	} {
		mustPanic(t, f)
	}
}

// What cannot be told with one limit, or without subgroups, is left out alone.
func TestPartialResults(t *testing.T) {
	x, group := draw(rand.New(rand.NewPCG(1, 1)), 5, 20, 42, 0.2, 0.9)
	r := Compute(Input{Values: x, Lower: 38, Upper: nan, MinimumN: 30, Confidence: 0.95})
	if r.Why != "" || r.Pp.Why == "" || r.Cp.Why == "" || r.Cpk.Why == "" || math.IsNaN(r.Ppk.Estimate) || !math.IsNaN(r.Within) {
		t.Errorf("lower limit only, no subgroups: %+v", r)
	}
	low := Compute(Input{Values: x, Group: group, Lower: 38, Upper: nan, MinimumN: 30, Confidence: 0.95})
	if low.Cp.Why == "" || math.IsNaN(low.Cpk.Estimate) || low.Ppk.Estimate != r.Ppk.Estimate {
		t.Errorf("lower limit only: %+v", low)
	}
	// Mirrored, the upper limit is the lower one.
	y := make([]float64, len(x))
	for i := range x {
		y[i] = -x[i]
	}
	up := Compute(Input{Values: y, Group: group, Lower: nan, Upper: -38, MinimumN: 30, Confidence: 0.95})
	for _, pair := range [][2]stats.Interval{{low.Cpk, up.Cpk}, {low.Ppk, up.Ppk}} {
		if math.Abs(pair[0].Estimate-pair[1].Estimate) > 1e-12 || math.Abs(pair[0].Lower-pair[1].Lower) > 1e-12 {
			t.Errorf("mirrored: %+v and %+v", pair[0], pair[1])
		}
	}
	// Each wafer of one reading: nothing within.
	single := make([]int32, len(x))
	for i := range single {
		single[i] = int32(i)
	}
	one := Compute(Input{Values: x, Group: single, Lower: 38, Upper: 46, MinimumN: 30, Confidence: 0.95})
	if one.Cpk.Why == "" || math.IsNaN(one.Ppk.Estimate) {
		t.Errorf("a reading a subgroup: %+v", one)
	}
}

// Indices have no unit: they do not change when readings and limits are scaled
// and shifted together; and subgroup numbers are only names.
func TestComputeLaws(t *testing.T) {
	x, group := draw(rand.New(rand.NewPCG(7, 1)), 8, 30, 42, 0.5, 0.9)
	x[5], x[77] = nan, nan
	in := Input{Values: x, Group: group, Lower: 38, Upper: 47, MinimumN: 30, Confidence: 0.95}
	before := slices.Clone(x)
	a := Compute(in)
	for i := range x {
		if math.Float64bits(x[i]) != math.Float64bits(before[i]) {
			t.Fatal("Compute modified its argument")
		}
	}
	if a.N != 238 {
		t.Errorf("N %d, want 238", a.N)
	}
	y, names := make([]float64, len(x)), make([]int32, len(x))
	for i := range x {
		y[i], names[i] = 1e-9*x[i]+3e-8, 1000-7*group[i]
	}
	b := Compute(Input{Values: y, Group: names, Lower: 1e-9*38 + 3e-8, Upper: 1e-9*47 + 3e-8, MinimumN: 30, Confidence: 0.95})
	for _, pair := range [][2]stats.Interval{{a.Cp, b.Cp}, {a.Cpk, b.Cpk}, {a.Pp, b.Pp}, {a.Ppk, b.Ppk}} {
		for _, d := range []float64{pair[0].Estimate - pair[1].Estimate, pair[0].Lower - pair[1].Lower, pair[0].Upper - pair[1].Upper} {
			if math.Abs(d) > 1e-9 {
				t.Errorf("%+v and %+v", pair[0], pair[1])
			}
		}
	}
	if a.Cp.Estimate < a.Pp.Estimate || a.Cpk.Estimate > a.Cp.Estimate || a.Ppk.Estimate > a.Pp.Estimate {
		t.Errorf("order of the indices: %+v", a)
	}
}

func TestNotes(t *testing.T) {
	r := rand.New(rand.NewPCG(9, 1))
	skewed := make([]float64, 500)
	for i := range skewed {
		skewed[i] = math.Exp(0.8 * r.NormFloat64())
	}
	res := Compute(Input{Values: skewed, Lower: nan, Upper: 30, MinimumN: 30, Confidence: 0.95})
	if len(res.Notes) != 1 || !strings.Contains(res.Notes[0], "skewness") {
		t.Errorf("skewed: %q", res.Notes)
	}
	x, group := draw(r, 3, 50, 42, 2, 0.5)
	res = Compute(Input{Values: x, Group: group, Lower: 30, Upper: 55, MinimumN: 30, Confidence: 0.95})
	if len(res.Notes) != 1 || !strings.Contains(res.Notes[0], "3 subgroups") || !strings.Contains(res.Ppk.Method, "by subgroup") {
		t.Errorf("few subgroups: %q, %s", res.Notes, res.Ppk.Method)
	}
	mark := make([]int8, len(x))
	for i := range x {
		if x[i] > 41 {
			x[i], mark[i] = 41, 1
		}
	}
	res = Compute(Input{Values: x, Censor: mark, Lower: 30, Upper: 55, MinimumN: 30, Confidence: 0.95})
	if len(res.Notes) != 1 || !strings.Contains(res.Notes[0], "only bounds") {
		t.Errorf("clamped: %q", res.Notes)
	}
}

// The exact bound exceeds nothing it should not: with the true index at the
// bound, an estimate as large has probability 5 %.
func TestOneSidedLowerBound(t *testing.T) {
	for _, n := range []int{2, 5, 30, 1000, 50000} {
		for _, index := range []float64{-0.5, 0, 0.3, 1, 2} {
			b := OneSidedLowerBound(index, n, 0.95)
			if !(b < index) {
				t.Errorf("n %d, index %v: bound %v", n, index, b)
			}
			if n >= 1000 { // Bissell's bound is its large-sample form
				if near := CpkLowerBound(index, float64(n), float64(n-1), 0.95); math.Abs(b-near) > 0.003 {
					t.Errorf("n %d, index %v: exact %v, approximate %v", n, index, b, near)
				}
			}
		}
	}
	r := rand.New(rand.NewPCG(5, 5))
	x := make([]float64, 10)
	below := 0
	const draws = 4000
	for range draws {
		for i := range x {
			x[i] = 3 + r.NormFloat64() // lower limit 0: index 1
		}
		m := stats.MomentsOf(x)
		if OneSidedLowerBound(m.Mean/(3*m.SD()), 10, 0.95) <= 1 {
			below++
		}
	}
	if share := float64(below) / draws; math.Abs(share-0.95) > 3*math.Sqrt(0.95*0.05/draws) {
		t.Errorf("the bound holds in %.3f", share)
	}
	if !math.IsNaN(OneSidedLowerBound(1, 1, 0.95)) || !math.IsNaN(OneSidedLowerBound(nan, 10, 0.95)) {
		t.Error("a bound from one reading")
	}
}

func mustPanic(t *testing.T, f func()) {
	t.Helper()
	defer func() {
		t.Helper()
		if s, ok := recover().(string); !ok || !strings.HasPrefix(s, "stats/capability: ") {
			t.Errorf("recovered %q", s)
		}
	}()
	f()
}

func BenchmarkCompute(b *testing.B) {
	x, group := draw(rand.New(rand.NewPCG(1, 1)), 25, 88_000, 42, 0.3, 0.9)
	for b.Loop() {
		Compute(Input{Values: x, Group: group, Lower: 38, Upper: 46, MinimumN: 30, Confidence: 0.95})
	}
}
