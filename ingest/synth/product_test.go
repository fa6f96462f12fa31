package synth

import (
	"math"
	"slices"
	"strings"
	"testing"

	"kneepoint/config"
)

// TestDemoProduct: the product file says what the demo's spec says.
func TestDemoProduct(t *testing.T) {
	p, s := demoProduct(t), DemoSpec()
	fromFile, err := FromProduct(p)
	if err != nil {
		t.Fatal(err)
	}
	if fromFile.Device != s.Device || p.Name != s.Product || p.Wafer.ShotColumns != s.Grid.ShotColumns ||
		p.Wafer.DieWidthMM != s.Grid.DieWidthMM || p.Wafer.EdgeExclusionMM != s.Grid.EdgeExclusionMM {
		t.Errorf("device %+v and wafer %+v in the file", fromFile.Device, p.Wafer)
	}
	if len(p.Tests) != len(s.Tests) {
		t.Fatalf("%d tests in the file, %d in the spec", len(p.Tests), len(s.Tests))
	}
	same := func(a, b float64) bool { return a == b || math.IsNaN(a) && math.IsNaN(b) }
	for i, got := range fromFile.Tests {
		want := s.Tests[i]
		if got.Name != want.Name || got.Measures != want.Measures || got.Unit != want.Unit || got.At != want.At ||
			!same(got.Lower, want.Lower) || !same(got.Upper, want.Upper) || math.Abs(got.Bias/want.Bias-1) > 1e-12 ||
			!math.IsNaN(p.Tests[i].Clamp) && got.Clamp != want.Clamp {
			t.Errorf("test %d in the file %+v, in the spec %+v", i, got, want)
		}
		if p.Bins.Names[want.HardBin] == "" || p.Bins.PassBin(want.HardBin) {
			t.Errorf("%s fails into bin %d, which the file does not name or passes", want.Name, want.HardBin)
		}
	}
	for _, g := range s.Grades {
		if !p.Bins.PassBin(g.Bin) {
			t.Errorf("grade bin %d does not pass in the file", g.Bin)
		}
	}
}

// TestFromProduct: lots made from a product file keep its baseline: levels to a
// quarter sigma, spreads to 40 %, and a believable healthy yield.
func TestFromProduct(t *testing.T) {
	p := demoProduct(t)
	s, err := FromProduct(p)
	if err != nil {
		t.Fatal(err)
	}
	s.Wafers = 8
	pooled := make([][]float64, len(s.Tests))
	yield := 0.0
	const lots = 30
	for seed := range uint64(lots) {
		l := s.Generate(seed)
		yield += l.Yield() / lots
		for i := range l.Wafers {
			for test, column := range l.Wafers[i].Values {
				for row := 0; row < len(column); row += 40 {
					pooled[test] = append(pooled[test], column[row])
				}
			}
		}
	}
	if yield < 0.9 || yield > 0.99 {
		t.Errorf("healthy yield %.3f", yield)
	}
	for i, test := range p.Tests {
		b := p.Baseline.Tests[test.Name]
		want := test.Unit.FromSI(b.Sigma)
		median, sigma := robust(pooled[i])
		if math.Abs(median-test.Unit.FromSI(b.Median)) > 0.25*want || off(sigma, want) > 0.4 {
			t.Errorf("%s: median %.4g, sigma %.3g; the file says %.4g, %.3g", test.Name, median, sigma, test.Unit.FromSI(b.Median), want)
		}
	}
}

// TestFromBareProduct: a file with little in it still makes lots, and what it
// lacks is named.
func TestFromBareProduct(t *testing.T) {
	const bare = `
product: X
device:
  polarity: npn
  epi: {thickness_um: {target: 9}, resistivity_ohm_cm: {target: 3.1}, up_diffusion_um: 0.1}
  base: {junction_depth_um: 1.2}
wafer: {diameter_mm: 150, die_width_mm: 4, die_height_mm: 4}
tests:
  - {name: "gain, low", measures: hfe, lower: 60, upper: 300, at: "IC=10uA"}
  - {name: BV, measures: bvceo, unit: V, lower: 40, at: "IC=1mA"}
  - {name: leak, measures: iceo, unit: uA, upper: 1, at: "VCE=20V"}
  - {name: odd, lower: -1, upper: 1}
`
	p, err := config.ParseProduct("x.yaml", []byte(bare))
	if err != nil {
		t.Fatal(err)
	}
	s, err := FromProduct(p)
	if err != nil {
		t.Fatal(err)
	}
	s.Wafers = 3
	l := s.Generate(1)
	if y := l.Yield(); y < 0.85 || y > 1 {
		t.Errorf("yield %.3f", y)
	}
	var b strings.Builder
	if err := l.WriteWide(&b, Format{UnitRow: true}); err != nil || !strings.Contains(b.String(), `,"gain, low",BV,`) {
		t.Errorf("%v; header %.80s", err, b.String())
	}
	for _, c := range []struct{ from, to, want string }{
		{"polarity: npn", "polarity: pnp", "device.polarity"},
		{"thickness_um: {target: 9}, ", "", "thickness"},
		{"wafer: {diameter_mm: 150, die_width_mm: 4, die_height_mm: 4}", "", "wafer"},
		{"target: 9}", "target: 1.6}", "no epi is left"},
	} {
		p, err := config.ParseProduct("x.yaml", []byte(strings.Replace(bare, c.from, c.to, 1)))
		if err == nil {
			_, err = FromProduct(p)
		}
		if err == nil || !strings.Contains(err.Error(), c.want) || !strings.Contains(err.Error(), "x.yaml") {
			t.Errorf("without %q: %v, want a word on %s", c.from, err, c.want)
		}
	}
}

// TestCatalogue: every cause moves the tests its row of the catalogue names, in
// its direction, and leaves alone those it says stand still. Directions agree
// with the reference model (PHYSICS.md section 5); the dice-level ones are
// common practice, no source.
func TestCatalogue(t *testing.T) {
	// Expected shift of the test's level on the dice hit, in baseline sigmas: up,
	// down or still.
	want := map[string]string{
		"epi-thickness low":       "BVCEO- COB30+ VCESAT- BVCBO= HFE2=",
		"epi-thickness high":      "BVCEO+ COB30- VCESAT+ BVCBO= HFE2=",
		"epi-doping high":         "COB+ BVCEO- BVCBO- VCESAT-",
		"epi-doping low":          "COB- BVCEO+ BVCBO+ VCESAT+",
		"base-profile low":        "HFE1+ HFE2+ BVEBO+ BVCEO- COB= VCESAT=",
		"base-profile high":       "HFE1- HFE2- BVEBO- BVCEO+ COB= VCESAT=",
		"emitter-depth deep":      "HFE1+ HFE2+ BVCEO- BVEBO= COB=",
		"emitter-depth shallow":   "HFE1- HFE2- BVCEO+ BVEBO= COB=",
		"emitter-efficiency low":  "HFE1- HFE2- BVCEO+ BVEBO= COB= BVCBO=",
		"emitter-efficiency high": "HFE1+ HFE2+ BVCEO- BVEBO= COB= BVCBO=",
		"edge-field ":             "BVCBO- BVCEO= HFE2= COB=",
		"surface-charge ":         "BVCBO- ICBO+ HFE2= COB=",
		"lifetime ":               "ICBO+ HFE1- BVCBO= COB=",
		"emitter-collector-pipe ": "BVCEO- BVCBO= ICBO=",
		"series-resistance ":      "VCESAT+ BVCEO= BVCBO= COB= ICBO= HFE1=",
		"shot-repeat ":            "BVCBO- ICBO+ BVEBO=",
		"probe-contact ":          "BVCBO+ BVCEO+ ICBO- HFE1- HFE2- VCESAT+",
		"test-setup hot":          "ICBO+ HFE2+ BVCBO= COB=",
		"test-setup cold":         "ICBO- HFE2- BVCBO= COB=",
		"handling-damage ":        "HFE1- HFE2-",
		"edge-dice ":              "HFE1- HFE2-",
		"random-defects ":         "HFE1- BVCBO- ICBO+",
	}
	p := demoProduct(t)
	made := 0
	for _, e := range Catalogue() {
		for _, direction := range append(slices.Clone(e.Directions), "")[:max(len(e.Directions), 1)] {
			c, err := NewCause(e.ID, direction, 0)
			if err != nil {
				t.Fatal(err)
			}
			made++
			s := DemoSpec()
			s.Wafers, s.Retest, s.Missing, s.Causes = 4, 0, 0, []Cause{c}
			with, without := s.Generate(1), s.without(func(*Cause) bool { return true }).Generate(1)
			for _, sign := range strings.Fields(want[e.ID+" "+direction]) {
				name, way := sign[:len(sign)-1], sign[len(sign)-1]
				test := slices.IndexFunc(s.Tests, func(x Test) bool { return x.Name == name })
				sigma := p.Tests[test].Unit.FromSI(p.Baseline.Tests[name].Sigma)
				// The mean over dice whose readings changed most: those in place.
				shift, n := 0.0, 0
				for i := range with.Wafers {
					for row := range with.Wafers[i].Dice {
						changed := false
						for q := range s.Tests {
							changed = changed || with.Wafers[i].Values[q][row] != without.Wafers[i].Values[q][row]
						}
						if changed {
							shift += (with.Wafers[i].Values[test][row] - without.Wafers[i].Values[test][row]) / sigma
							n++
						}
					}
				}
				shift /= float64(n)
				if ok := map[byte]bool{'+': shift > 0.5, '-': shift < -0.5, '=': math.Abs(shift) < 0.5}[way]; !ok || n == 0 {
					t.Errorf("%s %s: %s shifts by %.2f sigma over %d dice, want %c", e.ID, direction, name, shift, n, way)
				}
			}
		}
	}
	if made != len(want) {
		t.Errorf("%d causes made, %d described", made, len(want))
	}
	for _, c := range [][2]string{{"epi-thikness", ""}, {"epi-thickness", "deep"}} {
		if _, err := NewCause(c[0], c[1], 0); err == nil || !strings.Contains(err.Error(), "has") && !strings.Contains(err.Error(), "there are") {
			t.Errorf("%v: %v", c, err)
		}
	}
	if _, err := NewCause("lifetime", "", math.NaN()); err == nil {
		t.Error("a size of NaN passes")
	}
}
