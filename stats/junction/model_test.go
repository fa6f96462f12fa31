package junction

import (
	"fmt"
	"math"
	"math/rand/v2"
	"reflect"
	"runtime"
	"testing"
)

// TestManyDevices builds models of devices from a few volts to some hundred, with
// and without up-diffusion, and asks for finite ratios and sane posteriors.
func TestManyDevices(t *testing.T) {
	devices := []Device{
		{EpiThicknessUM: 2, EpiDopingCM3: 1.2e16, BaseDepthUM: 0.6, BaseSurfaceCM3: 3e18, UpDiffusionUM: 0.04, EmitterDepthUM: 0.2},
		{EpiThicknessUM: 3.3, EpiResistivityOhmCM: 1.72, BaseDepthUM: 0.75, BaseSurfaceCM3: 1.2e18},
		{EpiThicknessUM: 16, EpiResistivityOhmCM: 6, BaseDepthUM: 2, UpDiffusionUM: 0.15, EmitterDepthUM: 1, BaseSurfaceCM3: 4e17, SiliconConsumedUM: 0.3},
		{EpiThicknessUM: 60, EpiResistivityOhmCM: 35, BaseDepthUM: 6, UpDiffusionUM: 0.4, EmitterDepthUM: 3, FieldPlate: true, CornerRadiusUM: 100, TemperatureK: 298.15},
	}
	rng := rand.New(rand.NewPCG(9, 9))
	for i, d := range devices {
		tests := []Test{{Name: "1", Measures: BVceo}, {Name: "2", Measures: BVcbo}, {Name: "3", Measures: BVebo}, {Name: "4", Measures: Icbo, Voltage: 5},
			{Name: "5", Measures: HFE}, {Name: "6", Measures: HFE, Current: 1e-5}, {Name: "7", Measures: Vcesat}, {Name: "8", Measures: Cob},
			{Name: "9", Measures: Rb}, {Name: "10", Measures: FT}, {Name: "11", Measures: Vbesat}, {Name: "12", Measures: Iebo}, {Name: "13", Measures: BVces}, {Name: "14", Measures: Iceo, Voltage: 3}}
		m, err := NewModel(d, tests...)
		if err != nil {
			t.Errorf("device %d: %v", i, err)
			continue
		}
		line := ""
		for k := range m.Tests {
			line += fmt.Sprintf(" %s %.3g", m.Tests[k].Measures, m.Level(k))
		}
		t.Logf("device %d:%s; %q", i, line, m.Assumed)
		for range 200 {
			var p Process
			for k := range p {
				p[k] = 2 * normal(rng, usualSpread[k])
			}
			for k := range m.Tests {
				if r := m.Ratio(k, p); !(r > 0) {
					t.Fatalf("device %d: ratio of %s is %g at %.3f", i, m.Tests[k].Measures, r, p)
				}
			}
		}
		var r []Reading
		for k := range m.Tests {
			r = append(r, Reading{Test: k, LogRatio: 0.01})
		}
		p := m.Invert(r, UsualPrior())
		w := p.NetThickness.WithPrior
		if !(w.Lower < w.Estimate && w.Estimate < w.Upper) || math.Abs(math.Log(w.Estimate/m.NetThickness())) > 0.3 {
			t.Errorf("device %d: net thickness %v of nominal %.3f", i, w, m.NetThickness())
		}
	}
}

// TestDeterminism: the same on one core as on all.
func TestDeterminism(t *testing.T) {
	build := func(cores int) (*Model, Posterior) {
		defer runtime.GOMAXPROCS(runtime.GOMAXPROCS(cores))
		m := demoModel(t)
		var r []Reading
		for k := range m.Tests {
			r = append(r, Reading{Test: k, LogRatio: 0.02})
		}
		return m, m.Invert(r, UsualPrior())
	}
	m1, p1 := build(1)
	m2, p2 := build(max(2, runtime.NumCPU()))
	for k := range m1.tables {
		for i := range m1.tables[k].f {
			if math.Float64bits(m1.tables[k].f[i]) != math.Float64bits(m2.tables[k].f[i]) {
				t.Fatalf("table %d differs at %d", k, i)
			}
		}
	}
	// NaN bounds do not compare: print.
	if a, b := fmt.Sprintf("%+v", p1), fmt.Sprintf("%+v", p2); a != b {
		t.Error("posteriors differ with the number of cores")
	}
}

// TestArguments: nothing that is passed in is changed.
func TestArguments(t *testing.T) {
	m := demoModel(t)
	r := []Reading{{Test: 1, LogRatio: 0.03}, {Test: 7, LogRatio: 0.01, Censor: 1}}
	keep := append([]Reading(nil), r...)
	m.Invert(r, UsualPrior())
	m.NextTest(r, UsualPrior(), []Reading{{Test: 8}})
	if !reflect.DeepEqual(r, keep) {
		t.Errorf("readings changed to %v", r)
	}
	tests := demoTests()
	if _, err := NewModel(demoDevice(), tests...); err != nil || !reflect.DeepEqual(tests, demoTests()) {
		t.Errorf("tests changed, or %v", err)
	}
}

// TestVariant: another belief changes the ratios, but not by what models of one
// structure never differ.
func TestVariant(t *testing.T) {
	var tests []Test
	for _, x := range demoTests() {
		x.Baseline = Level{}
		tests = append(tests, x)
	}
	a, err := NewModel(demoDevice(), tests...)
	if err != nil {
		t.Fatal(err)
	}
	b, err := NewVariant(demoDevice(), Variation{FieldScale: 1.05, Spreading: 0.7, ExponentialBase: true, Recombination: 1.5}, tests...)
	if err != nil {
		t.Fatal(err)
	}
	moved := false
	for i := range tests {
		p := Process{EpiThickness: -0.1, EpiDoping: 0.1}
		x, y := math.Log(a.Ratio(i, p)), math.Log(b.Ratio(i, p))
		moved = moved || math.Abs(x-y) > 0.003
		if math.Abs(x-y) > 0.06 {
			t.Errorf("%s: ln ratio %.3f and %.3f", tests[i].Name, x, y)
		}
	}
	if !moved {
		t.Error("the variant is the model")
	}
}
