package build

import (
	"bytes"
	"math"
	"os"
	"path/filepath"
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

// TestModelsAreKept wants a model's tables to be found again in their folder, and a product
// without a baseline, whose model is the lot's own, to leave nothing there.
func TestModelsAreKept(t *testing.T) {
	forget := func(folder string) {
		KeepModels(folder)
		models.Lock()
		defer models.Unlock()
		models.list = nil
	}
	defer forget("")
	dir := filepath.Join(t.TempDir(), "cache")
	files := func() []string {
		found, err := filepath.Glob(filepath.Join(dir, "*"))
		if err != nil {
			t.Fatal(err)
		}
		return found
	}
	product := func() *config.Product {
		p, err := config.LoadProduct("testdata/small.yaml")
		if err != nil {
			t.Fatal(err)
		}
		return p
	}
	own := map[string]float64{}
	without := product()
	for name, b := range without.Baseline.Tests {
		own[name] = b.Median
	}
	without.Baseline = nil
	forget(dir)
	if d, why := deviceModel(without, own); d == nil || len(files()) != 0 {
		t.Errorf("without a baseline: %s, %v kept", why, files())
	}
	forget(dir)
	first, why := deviceModel(product(), nil)
	if first == nil {
		t.Fatal(why)
	}
	kept := files()
	if len(kept) != 1 || !strings.HasSuffix(kept[0], ".tables") {
		t.Fatalf("kept %v", kept)
	}
	shift := junction.Process{junction.EpiThickness: -0.03, junction.EpiDoping: 0.02}
	check := func(how string) {
		t.Helper()
		forget(dir)
		again, why := deviceModel(product(), nil)
		if again == nil {
			t.Fatal(how, why)
		}
		for i := range first.Tests {
			if a, b := first.Ratio(i, shift), again.Ratio(i, shift); a != b {
				t.Errorf("%s: %s at %g, was %g", how, first.Tests[i].Name, b, a)
			}
		}
	}
	check("kept")
	whole, err := os.ReadFile(kept[0])
	if err != nil {
		t.Fatal(err)
	}
	if err := os.WriteFile(kept[0], whole[:1000], 0o666); err != nil {
		t.Fatal(err)
	}
	check("cut")
	if mended, err := os.ReadFile(kept[0]); err != nil || !bytes.Equal(mended, whole) {
		t.Error("a damaged file was not written again", err)
	}
	if err := os.RemoveAll(dir); err != nil {
		t.Fatal(err)
	}
	if err := os.WriteFile(dir, nil, 0o666); err != nil { // no folder
		t.Fatal(err)
	}
	check("not kept")
}
