package junction

import (
	"math"
	"testing"
)

// TestClosedRanges: a closed form says nothing outside the range where it holds.
// The formulas themselves are checked by TestPhysicsTables.
func TestClosedRanges(t *testing.T) {
	inf := math.Inf(1)
	for _, c := range []struct {
		name         string
		in, low, out float64
	}{
		{"Baliga breakdown", BaligaBreakdown(1e15), BaligaBreakdown(9.9e13), BaligaBreakdown(5.1e16)},
		{"Baliga width", BaligaWidth(1e15), BaligaWidth(0), BaligaWidth(math.NaN())},
		{"Baliga field", BaligaField(1e15), BaligaField(-1), BaligaField(1e18)},
		{"Sze-Gibbons breakdown", SzeGibbonsBreakdown(1e15), SzeGibbonsBreakdown(1e13), SzeGibbonsBreakdown(1e17)},
		{"Fulop breakdown", FulopBreakdown(1e15, 5*um), FulopBreakdown(1e13, inf), FulopBreakdown(1e15, 0)},
		{"Baliga reach-through", BaligaReachThrough(1e15, 12*um), BaligaReachThrough(1e15, 5*um), BaligaReachThrough(1e18, inf)},
		{"Baliga-Ghandhi cylinder", BaligaGhandhiCylinder(0.3), BaligaGhandhiCylinder(0), BaligaGhandhiCylinder(0.51)},
		{"Baliga-Ghandhi sphere", BaligaGhandhiSphere(0.3), BaligaGhandhiSphere(-1), BaligaGhandhiSphere(4.05)},
		{"Sze-Gibbons cylinder", SzeGibbonsCylinder(3), SzeGibbonsCylinder(0), SzeGibbonsCylinder(math.NaN())},
		{"Sze-Gibbons sphere", SzeGibbonsSphere(3), SzeGibbonsSphere(0), SzeGibbonsSphere(-1)},
		{"Miller", MillerBVceo(60, 120, 3), MillerBVceo(60, 120, 1.9), MillerBVceo(60, 120, 6.1)},
		{"Miller exponent", MillerExponent(60, 20, 120), MillerExponent(60, 61, 120), MillerExponent(60, 20, 0)},
		{"F723 resistivity", ResistivityF723(1e15), ResistivityF723(1e12), ResistivityF723(1e18)},
		{"F723 doping", DopingF723(4.5), DopingF723(0), DopingF723(1e4)},
		{"Thurber", ResistivityThurber(1e15), ResistivityThurber(0), ResistivityThurber(1e21)},
		{"mobility", MobilityElectrons(1e15, 300), MobilityElectrons(1e15, 100), MobilityElectrons(0, 300)},
		{"Caughey-Thomas", MobilityCaugheyThomas(1e15), MobilityCaugheyThomas(0), MobilityCaugheyThomas(math.NaN())},
	} {
		if !(c.in > 0) || !math.IsNaN(c.low) || !math.IsNaN(c.out) {
			t.Errorf("%s: %g inside, %g and %g outside; want a value and two NaN", c.name, c.in, c.low, c.out)
		}
	}
	if n, p := IonisationRates(1.7e5); !math.IsNaN(n) || !math.IsNaN(p) {
		t.Errorf("ionisation below the fitted field: %g, %g", n, p)
	}
	for _, a := range []Abrupt{{Doping: 1e12}, {Doping: 1e15, Shape: Sphere}, {Doping: 1e15, Width: -1}, {Doping: math.NaN()}} {
		if _, err := a.Breakdown(); err == nil {
			t.Errorf("%+v: no error", a)
		}
	}
}

// TestKneeLaw is the page's law of section 3, d ln BVceo / d ln W = 2(1-x)/(2-x)
// below x = 1 and 0 above, which numerics keep within 0.02 from x = 0.3 up (1e15 to
// 1e16). The width is moved; the charge that holds the breakdown is not.
func TestKneeLaw(t *testing.T) {
	for _, n := range []float64{1e15, 3e15, 1e16} {
		free, err := Abrupt{Doping: n}.OpenBase(120)
		if err != nil {
			t.Fatal(err)
		}
		for _, x := range []float64{0.3, 0.5, 0.7, 0.8, 0.9, 0.95, 1.05} {
			at := func(f float64) float64 {
				b, err := Abrupt{Doping: n, Width: x * f * free.Depletion}.OpenBase(120)
				if err != nil {
					t.Fatal(err)
				}
				return math.Log(b.Potential)
			}
			got := (at(1.01) - at(0.99)) / (math.Log(1.01) - math.Log(0.99))
			want := 2 * (1 - x) / (2 - x)
			if x > 1 {
				want = 0
			}
			if math.Abs(got-want) > 0.025 {
				t.Errorf("N %g, x %.2f: slope %.3f, the law says %.3f", n, x, got, want)
			}
		}
	}
}

// TestTemperature: Icbo about doubles per 10 K, hFE rises by half a per cent per
// kelvin, BVcbo by a tenth (common practice, no source).
func TestTemperature(t *testing.T) {
	b, _ := referenceModel(t, "B")
	warm := Process{Temperature: math.Log(310.0 / 300)}
	for _, c := range []struct {
		test   string
		lo, hi float64
	}{{"Icbo", 1.8, 2.3}, {"hFE", 1.02, 1.09}, {"BVcbo", 1.002, 1.015}, {"BVceo", 0.99, 1.015}, {"Cob", 0.995, 1.01}, {"Rc", 1.03, 1.12}} {
		i := b.Find(c.test)
		exact := b.Exact(i, warm) / b.Exact(i, Process{})
		if !(exact > c.lo && exact < c.hi) {
			t.Errorf("10 K warmer: %s times %.4f, want %g to %g", c.test, exact, c.lo, c.hi)
		}
		if fast := b.Ratio(i, warm); math.Abs(fast/exact-1) > 0.01 {
			t.Errorf("10 K warmer: %s times %.4f by the tables, %.4f exactly", c.test, fast, exact)
		}
	}
}

func TestNewModelErrors(t *testing.T) {
	good := demoDevice()
	for name, spoil := range map[string]func(*Device){
		"no epi left":       func(d *Device) { d.EpiThicknessUM = 1 },
		"no doping":         func(d *Device) { d.EpiResistivityOhmCM = 0 },
		"metal":             func(d *Device) { d.EpiResistivityOhmCM = 1e-3 },
		"emitter too deep":  func(d *Device) { d.EmitterDepthUM = 0.75 },
		"base too light":    func(d *Device) { d.BaseSurfaceCM3 = 4e15 },
		"base punched":      func(d *Device) { d.BaseSurfaceCM3 = 2e16 },
		"cold":              func(d *Device) { d.TemperatureK = 77 },
		"polarity":          func(d *Device) { d.Polarity = "mos" },
		"not a number":      func(d *Device) { d.EpiThicknessUM = math.NaN() },
		"huge up-diffusion": func(d *Device) { d.UpDiffusionUM = 1 },
	} {
		d := good
		spoil(&d)
		if _, err := NewModel(d, demoTests()...); err == nil {
			t.Errorf("%s: no error", name)
		} else {
			t.Logf("%s: %v", name, err)
		}
	}
	for _, x := range []Test{{Name: "X", Measures: "gm"}, {Name: "Y", Measures: Cob, Voltage: -1}, {Name: "Z", Measures: Cob, Voltage: math.NaN()}, {Name: "V", Measures: Vcesat, Current: 1, BaseCurrent: 1e-5}} {
		if _, err := NewModel(good, x); err == nil {
			t.Errorf("test %+v: no error", x)
		} else {
			t.Log(err)
		}
	}
}
