package synth

import (
	"fmt"
	"math"
	"testing"

	"gonum.org/v1/gonum/stat"
)

// The two devices of the numerical reference model (reference/physics,
// jacobian.json: process and nominal): A does not reach through at BVceo, B does.
func referenceDevice(name string) Spec {
	s := Spec{Product: name, Lot: "R1", Wafers: 1, Grid: Grid{DiameterMM: 100, DieWidthMM: 4, DieHeightMM: 4}}
	type levels struct{ bvcbo, bvceo, bvebo, icbo, hfe, low, vcesat, cob, cobHigh, rc, pinch, vIcbo, vCob, vHigh float64 }
	var l levels
	switch name {
	case "A":
		s.Device = Device{EpiThicknessUM: 9, EpiResistivityOhmCM: 3.042, BaseDepthUM: 1.2, UpDiffusionUM: 0.1}
		l = levels{58.36, 47.15, 7.79, 0.2718, 119.9, 108.8, 0.2310, 2.379, 1.292, 9.278, 2091, 30, 10, 50}
	case "B":
		s.Device = Device{EpiThicknessUM: 2.9, EpiResistivityOhmCM: 1.2085, BaseDepthUM: 0.75, UpDiffusionUM: 0.05}
		l = levels{39.21, 20.25, 6.736, 0.1225, 124.7, 116.2, 0.0674, 4.755, 3.177, 1.103, 3448, 15, 5, 30}
	}
	s.Device.SubstrateCM3, s.Device.EmitterDepthUM, s.Device.EmitterAreaUM2 = 1e19, 0.25, 20000
	s.Laws = DefaultLaws(s.Device)
	test := func(name, measures string, typical, bias float64) {
		s.Tests = append(s.Tests, Test{Name: name, Measures: measures, Typical: typical, Bias: bias,
			Lower: none, Upper: none, Clamp: none, Floor: none, HardBin: 9})
	}
	test("BVcbo", "bvcbo", l.bvcbo, 10e-6)
	test("BVceo", "bvceo", l.bvceo, 2e-3)
	test("BVebo", "bvebo", l.bvebo, 10e-6)
	test("Icbo", "icbo", l.icbo, l.vIcbo)
	test("hFE", "hfe", l.hfe, 2e-3)
	test("hFE_low", "hfe", l.low, 10e-6)
	test("Vcesat", "vcesat", l.vcesat, 50e-3)
	test("Cob", "cob", l.cob, l.vCob)
	test("Cob_hiV", "cob", l.cobHigh, l.vHigh)
	test("Rc", "rc", l.rc, 50e-3)
	test("Rpinch", "rpinch", l.pinch, 10e-6)
	return s
}

// TestDoping: resistivity of n-type silicon at 23 C and the density that the
// ASTM F723-99 equations give back (reference/physics,
// resistivity_n_type_phosphorus.json: rho_f723_23C, N_back_from_f723).
func TestDoping(t *testing.T) {
	for _, c := range []struct{ rho, n float64 }{
		{425.047, 9866690000000.0}, {42.8713, 100956000000000.0}, {8.78676, 507369000000000.0},
		{4.48188, 1012370000000000.0}, {2.30687, 2013690000000000.0}, {0.978459, 4979280000000000.0},
	} {
		if got := DopingFromResistivity(c.rho); math.Abs(got/c.n-1) > 1e-3 {
			t.Errorf("%g ohm cm: %.5g, want %.5g", c.rho, got, c.n)
		}
	}
}

// TestThicknessLaw: in generated data the slope of ln BVceo on ln net thickness
// follows 2(1-x)/(2-x), and is 0 for x >= 1. The numbers are those of the
// numerical reference model (PHYSICS.md section 3: 0.81 at x 0.3 ... 0 at 1),
// which agree with the law to 0.02.
func TestThicknessLaw(t *testing.T) {
	for _, c := range []struct{ x, slope float64 }{
		{0.3, 0.81}, {0.5, 0.67}, {0.7, 0.46}, {0.8, 0.33}, {0.9, 0.18}, {1.05, 0}, {1.5, 0},
	} {
		s := referenceDevice("B")
		s.Tests = s.Tests[1:2]     // BVceo alone: without BVcbo to cap it
		s.Device.UpDiffusionUM = 0 // the law is of an abrupt substrate
		m := newModel(&s)
		k := charge * m.n0 / epsilon
		s.Tests[0].Typical = breakdown(m.w0, m.n0, k*m.w0/c.x)/epiShare - builtIn // the level at which x is c.x
		s.Spread[EpiThickness].Die = 0.002
		s.KeepProcess = true
		l := s.Generate(3)
		w := &l.Wafers[0]
		var lnW, lnBV []float64
		for i := range w.Dice {
			lnW = append(lnW, math.Log(m.net(&Process{EpiThickness: w.Process[EpiThickness][i]})))
			lnBV = append(lnBV, math.Log(w.Values[0][i]+builtIn))
		}
		_, slope := stat.LinearRegression(lnW, lnBV, nil, false)
		if math.Abs(slope-c.slope) > 0.02 {
			t.Errorf("x = %g: slope %.3f, want %.2f", c.x, slope, c.slope)
		}
	}
}

// TestJacobian holds the laws to the reference Jacobians (jacobian.json), within
// its tolerance for an independent model of the same structure: sign and order
// where |J| > 0.2, 0.2 absolute; entries under 0.05 only as small.
func TestJacobian(t *testing.T) {
	// Columns: t_epi, Nd, Ns, xjc, xje, lam, edge, tau, s0, GE.
	columns := []Latent{EpiThickness, EpiDoping, BaseDose, BaseDepth, EmitterDepth, UpDiffusion, EdgeRadius, Lifetime, SurfaceVelocity, EmitterGummel}
	want := map[string]map[string][]float64{
		"A": {
			"BVcbo":   {0, -0.155, -0.003, 0.500, 0, 0, 0.500, 0, 0, 0},
			"BVceo":   {0, -0.734, 0.129, 0.414, -0.167, 0, 0, -0.001, 0, -0.185},
			"Icbo":    {0, -0.211, 0.002, 0.023, 0, 0, 0.016, -0.993, 0.007, 0},
			"hFE":     {0, -0.139, -0.753, -1.915, 0.895, 0, 0, 0.008, 0, 0.992},
			"hFE_low": {0, -0.130, -0.674, -1.803, 0.830, 0, 0, 0.098, -0.002, 0.901},
			"Vcesat":  {1.023, -0.708, 0.007, -0.112, -0.009, -0.099, 0, 0, 0, -0.010},
			"Cob":     {0, 0.402, 0.008, -0.002, 0, 0, 0.026, 0, 0, 0},
			"Cob_hiV": {-0.001, 0.356, 0.008, 0.018, 0, 0, 0.030, 0, 0, 0},
			"Rpinch":  {0, -0.119, -0.567, -1.809, 0.768, 0, 0, 0, 0, 0},
		},
		"B": {
			"BVcbo":   {0, -0.193, -0.006, 0.451, 0, 0, 0.451, 0, 0, 0},
			"BVceo":   {0.536, -0.390, 0.099, 0.432, -0.301, -0.068, 0, -0.001, 0, -0.167},
			"BVebo":   {0, 0, -0.157, 0, 0, 0, 0, 0, 0, 0},
			"Icbo":    {0.436, -0.009, -0.004, -0.072, 0, -0.054, 0.016, -0.992, 0.008, 0},
			"hFE":     {0, -0.198, -0.698, -2.854, 1.789, 0, 0, 0.006, 0, 0.994},
			"hFE_low": {0, -0.187, -0.644, -2.714, 1.685, 0, 0, 0.072, -0.001, 0.927},
			"Vcesat":  {0.498, -0.177, 0.023, -0.030, -0.060, -0.066, 0, 0, 0, -0.033},
			"Cob":     {0, 0.427, 0.010, -0.027, 0, 0, 0.016, 0, 0, 0},
			"Cob_hiV": {-1.066, 0.026, 0.019, 0.211, 0, 0.102, 0.014, 0, 0, 0},
			"Rpinch":  {0, -0.159, -0.521, -2.616, 1.519, 0, 0, 0, 0, 0},
		},
	}
	for device, rows := range want {
		s := referenceDevice(device)
		for i, test := range s.Tests {
			row, ok := rows[test.Name]
			if !ok {
				continue
			}
			for j, q := range columns {
				got := s.slope(i, q)
				if off := math.Abs(got - row[j]); off > 0.2 || math.Abs(row[j]) > 0.2 && got*row[j] <= 0 {
					t.Errorf("device %s: d ln %s / d ln (latent %d) = %.3f, want %.3f", device, test.Name, q, got, row[j])
				}
			}
		}
	}
}

// TestSignatures holds finite changes to the reference model (signatures.json,
// device B): sign where it is more than nothing, 20 % of the value (or 0.03)
// where it is more than a tenth.
func TestSignatures(t *testing.T) {
	ln := math.Log
	for _, c := range []struct {
		name  string
		shift Process
		want  map[string]float64
	}{
		{"epi 15 % thin", Process{EpiThickness: ln(0.85)}, map[string]float64{"BVcbo": 0, "BVceo": -0.114, "hFE": 0, "Vcesat": -0.078, "Cob": 0.003, "Cob_hiV": 0.178}},
		{"epi 15 % thick", Process{EpiThickness: ln(1.15)}, map[string]float64{"BVcbo": 0, "BVceo": 0.053, "hFE": 0, "Vcesat": 0.072, "Cob": 0, "Cob_hiV": -0.144}},
		{"epi doping +25 %", Process{EpiDoping: ln(1.25)}, map[string]float64{"BVcbo": -0.044, "BVceo": -0.103, "hFE": -0.044, "Vcesat": -0.037, "Cob": 0.095, "Cob_hiV": 0.007}},
		{"base surface +25 %", Process{BaseDose: ln(1.25)}, map[string]float64{"BVcbo": 0, "BVceo": 0.022, "BVebo": -0.031, "hFE": -0.155, "Vcesat": 0.005, "Cob": 0, "Rpinch": -0.115}},
		{"emitter 15 % deep", Process{EmitterDepth: ln(1.15)}, map[string]float64{"BVcbo": 0, "BVceo": -0.047, "BVebo": 0, "hFE": 0.283, "Cob": 0, "Rpinch": 0.242}},
		{"emitter Gummel -30 %", Process{EmitterGummel: ln(0.7)}, map[string]float64{"BVcbo": 0, "BVceo": 0.060, "BVebo": 0, "hFE": -0.355, "Cob": 0, "Rpinch": 0}},
		{"edge radius -30 %", Process{EdgeRadius: ln(0.7)}, map[string]float64{"BVcbo": -0.165, "BVceo": 0, "hFE": 0, "Vcesat": 0}},
		{"oxide charge x10", Process{OxideCharge: ln(10)}, map[string]float64{"BVcbo": -0.091, "BVceo": 0, "hFE": 0}},
		{"lifetime /20", Process{Lifetime: ln(0.05)}, map[string]float64{"BVcbo": 0, "BVceo": 0.017, "Icbo": 2.988, "hFE": -0.099, "hFE_low": -0.864}},
		{"surface velocity x300", Process{SurfaceVelocity: ln(300)}, map[string]float64{"BVcbo": 0, "Icbo": 1.187, "hFE": -0.026, "hFE_low": -0.297}},
	} {
		s := referenceDevice("B")
		m := newModel(&s)
		at, moved := make([]float64, len(s.Tests)), make([]float64, len(s.Tests))
		m.values(at, &Process{})
		m.values(moved, &c.shift)
		for i, test := range s.Tests {
			want, ok := c.want[test.Name]
			if !ok {
				continue
			}
			got := ln(moved[i] / at[i])
			if math.Abs(got-want) > max(0.03, 0.2*math.Abs(want)) || math.Abs(want) > 0.02 && got*want <= 0 {
				t.Errorf("%s: ln %s moves by %.3f, want %.3f", c.name, test.Name, got, want)
			}
		}
	}
}

// TestTypicalAtTarget: a die on target reads the typical value in every test.
func TestTypicalAtTarget(t *testing.T) {
	for _, s := range []Spec{referenceDevice("A"), referenceDevice("B"), DemoSpec()} {
		dst := make([]float64, len(s.Tests))
		newModel(&s).values(dst, &Process{})
		for i, v := range dst {
			if math.Abs(v/s.Tests[i].Typical-1) > 1e-9 {
				t.Errorf("%s %s: %v, want %v", s.Product, s.Tests[i].Name, v, s.Tests[i].Typical)
			}
		}
	}
}

// TestSharpCorner: where the edge breaks down first it caps BVceo, and BVceo =
// BVcbo is the sign (PHYSICS.md section 5, device A: sharp mask corner takes
// BVcbo down by 0.40 and BVceo by 0.19 in the logarithm).
func TestSharpCorner(t *testing.T) {
	s := referenceDevice("A")
	dst := make([]float64, len(s.Tests))
	newModel(&s).values(dst, &Process{EdgeRadius: -0.4 / 0.5})
	if dst[0] != dst[1] || math.Abs(math.Log(dst[1]/s.Tests[1].Typical)+0.187) > 0.04 {
		t.Errorf("BVcbo %.1f, BVceo %.1f: want both 0.19 below %.1f", dst[0], dst[1], s.Tests[1].Typical)
	}
}

func ExampleDopingFromResistivity() {
	fmt.Printf("%.2g\n", DopingFromResistivity(4.48188)) // about 1e15 cm^-3 by ASTM F723
	// Output: 1e+15
}

// TestDepletionAtBVceo: the depletion width at BVceo of the reference devices
// (jacobian.json, nominal.wd_bvceo), whose levels alone the laws are given.
func TestDepletionAtBVceo(t *testing.T) {
	for device, want := range map[string]float64{"A": 6.07e-4, "B": 1.88e-4} {
		s := referenceDevice(device)
		m := newModel(&s)
		got := min(m.ecCEO*epsilon/(charge*m.n0), m.reach(m.w0))
		if math.Abs(got/want-1) > 0.05 {
			t.Errorf("device %s: %.2f um, want %.2f", device, got*1e4, want*1e4)
		}
	}
}
