package junction

import (
	"math"
	"testing"
)

// TestAnchor gives the reference devices baselines that are off the model's levels
// as another fab's would be, and wants the model at them.
func TestAnchor(t *testing.T) {
	for _, name := range []string{"A", "B"} {
		free, r := referenceModel(t, name)
		off := map[string]float64{"BVceo": 1.08, "BVcbo": 0.93, "hFE": 1.2, "hFE_low": 1.1, "Cob": 1.05, "Icbo": 3, "Vcesat": 1.1}
		var tests []Test
		for _, n := range sortedKeys(off) {
			x, _ := r.test(n)
			x.Baseline.Median = off[n] * math.Exp(free.levels[free.Find(n)])
			tests = append(tests, x)
		}
		m, err := NewModel(r.device(), tests...)
		if err != nil {
			t.Fatal(err)
		}
		for i, x := range m.Tests {
			if got := math.Exp(m.levels[i]); math.Abs(got/x.Baseline.Median-1) > 0.004 {
				t.Errorf("%s %s: model %.4g, baseline %.4g", name, x.Name, got, x.Baseline.Median)
			}
		}
		if !(m.FieldScale > 1 && m.FieldScale < 1.15) {
			t.Errorf("%s: field scale %.3f for a BVceo 8 %% above the model's", name, m.FieldScale)
		}
		if len(m.Assumed) != 0 {
			t.Errorf("%s: assumed %q", name, m.Assumed)
		}
	}
}

// TestAnchorDemo is the invented product of the design: made from the reference
// model's structure, with baseline levels to agree with.
func TestAnchorDemo(t *testing.T) {
	m, err := NewModel(demoDevice(), demoTests()...)
	if err != nil {
		t.Fatal(err)
	}
	for i, x := range m.Tests {
		t.Logf("%-8s %.4g, baseline %.4g", x.Name, math.Exp(m.levels[i]), x.Baseline.Median)
	}
	t.Logf("field scale %.3f; %q; %+v", m.FieldScale, m.Assumed, m.Device)
}

func demoDevice() Device {
	return Device{EpiThicknessUM: 3.3, EpiResistivityOhmCM: 1.72, UpDiffusionUM: 0.05, BaseDepthUM: 0.75, BaseSurfaceCM3: 1.2e18,
		BaseAreaUM2: 60000, BasePerimeterUM: 1000, EmitterDepthUM: 0.25, EmitterAreaUM2: 20000, EmitterPerimeterUM: 800, CornerRadiusUM: 20, TemperatureK: 298.15}
}

func demoTests() []Test {
	return []Test{
		{Name: "BVCBO", Measures: BVcbo, Baseline: Level{Median: 41.9}}, {Name: "BVCEO", Measures: BVceo, Current: 1e-3, Baseline: Level{Median: 24.8}},
		{Name: "BVEBO", Measures: BVebo, Baseline: Level{Median: 6.74}}, {Name: "ICBO", Measures: Icbo, Voltage: 20, Baseline: Level{Median: 0.17e-9}},
		{Name: "HFE1", Measures: HFE, Current: 1e-5, Baseline: Level{Median: 116}}, {Name: "HFE2", Measures: HFE, Current: 2e-3, Baseline: Level{Median: 125}},
		{Name: "VCESAT", Measures: Vcesat, Baseline: Level{Median: 0.09}}, {Name: "COB", Measures: Cob, Voltage: 10, Baseline: Level{Median: 3.2e-12}},
		{Name: "COB30", Measures: Cob, Voltage: 30, Baseline: Level{Median: 2.7e-12}},
	}
}

func TestPolarity(t *testing.T) {
	d := demoDevice()
	d.Polarity = "pnp"
	if _, err := NewModel(d); err != ErrPolarity {
		t.Errorf("pnp: error %v", err)
	}
}
