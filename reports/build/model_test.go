package build

import (
	"math"
	"strings"
	"testing"

	"kneepoint/config"
	"kneepoint/stats/junction"
)

// TestDeviceModel reads the demo's product file: biases by name, baseline levels,
// and the prior that its spec limits stand for (a third of the half-width is a sigma).
func TestDeviceModel(t *testing.T) {
	p, err := config.LoadProduct("testdata/small.yaml")
	if err != nil {
		t.Fatal(err)
	}
	d, why := deviceModel(p, nil)
	if d == nil {
		t.Fatal(why)
	}
	for _, c := range []struct {
		name            string
		voltage, ic, ib float64
		level           float64
	}{{"BVCEO", 0, 1e-3, 0, 24.78}, {"ICBO", 20, 0, 0, 0.149e-9}, {"HFE1", 5, 10e-6, 0, 121.3}, {"vcesat", 0, 50e-3, 5e-3, 0.0841}, {"COB30", 30, 0, 0, 2.684e-12}} {
		i := d.Test(c.name)
		if i < 0 {
			t.Fatalf("%s is not in the model", c.name)
		}
		if x := d.Tests[i]; x.Voltage != c.voltage || x.Current != c.ic || x.BaseCurrent != c.ib || math.Abs(d.Level(i)/c.level-1) > 1e-9 {
			t.Errorf("%s: %+v at level %g, want %+v", c.name, x, d.Level(i), c)
		}
	}
	if d.Test("NONE") >= 0 || d.Test(d.Tests[d.Monitors[0]].Name) >= 0 {
		t.Error("a test that the product does not have was found")
	}
	if s := d.Prior.Sigma[junction.EpiThickness]; math.Abs(s-math.Log(3.5/3.1)/6) > 1e-12 {
		t.Errorf("prior of thickness %g", s)
	}
	if s := d.Prior.Sigma[junction.EpiDoping]; s < math.Log(1.90/1.55)/6 || s > 1.15*math.Log(1.90/1.55)/6 {
		t.Errorf("prior of doping %g: doping goes a little faster than resistivity falls", s)
	}
	for _, m := range d.Monitors {
		if d.Tests[m].Measures == junction.Cob {
			t.Error("Cob next to breakdown is a candidate though COB30 is there")
		}
	}
}

// TestDeviceModelDeclines wants one clear reason for each product without a model.
func TestDeviceModelDeclines(t *testing.T) {
	made := func(change func(*config.Product)) *config.Product {
		p := madeProduct("B", sevenTests...)
		p.Baseline = &config.Baseline{Tests: map[string]config.BaselineTest{junction.BVceo: {Median: 20}}}
		change(p)
		return p
	}
	for _, c := range []struct {
		name, want string
		p          *config.Product
	}{
		{"no product", "no product file", nil},
		{"no device", "no device block", made(func(p *config.Product) { p.Device = nil })},
		{"pnp", "declines pnp", made(func(p *config.Product) { p.Device.Polarity = "pnp" })},
		{"no thickness", "thickness_um", made(func(p *config.Product) { p.Device.Epi.ThicknessUM.Target = math.NaN() })},
		{"no resistivity", "resistivity_ohm_cm", made(func(p *config.Product) { p.Device.Epi.ResistivityOhmCM.Target = math.NaN() })},
		{"no base", "junction_depth_um", made(func(p *config.Product) { p.Device.Base.JunctionDepthUM.Value = math.NaN() })},
		{"no epi left", "leave", made(func(p *config.Product) { p.Device.Epi.ThicknessUM.Target = 0.9 })},
		{"no tests", "no test of the product file", made(func(p *config.Product) { p.Tests = nil })},
	} {
		if d, why := deviceModel(c.p, nil); d != nil || !strings.Contains(why, c.want) || strings.Contains(why, "\n") {
			t.Errorf("%s: %q, want a line with %q", c.name, why, c.want)
		}
	}
	// Tests without a baseline level are left out, and said.
	d, why := deviceModel(made(func(*config.Product) {}), nil)
	if d == nil || len(d.Tests)-len(d.Monitors) != 1 || !strings.Contains(strings.Join(d.Notes, "; "), "no baseline level for bvcbo") {
		t.Errorf("one baseline level: %v %s", d, why)
	}
}
