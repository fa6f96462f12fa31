package junction

import (
	"encoding/json"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"regexp"
	"sort"
	"strconv"
	"strings"
)

// reference is one device of the table of Jacobians.
type reference struct {
	Process  map[string]float64
	Nominal  map[string]float64
	Reaches  *bool `json:"punch_through_at_BVceo"`
	Params   []string
	Jacobian map[string][]float64
}

// tableParams are the tables' names of parameters.
var tableParams = map[string]Param{"t_epi": EpiThickness, "Nd": EpiDoping, "Ns": BaseDose, "xjc": BaseDepth, "xje": EmitterDepth,
	"lam": UpDiffusion, "k_edge": EdgeRadius, "R_mask": MaskRadius, "Qf": OxideCharge, "tau": Lifetime, "s0": SurfaceVelocity,
	"GE": EmitterGummel, "R_fix": SeriesResistance, "f_mod": Modulation}

// device is the reference's process as a Device.
func (r *reference) device() Device {
	p := r.Process
	return Device{
		EpiThicknessUM: p["t_epi"] / um, EpiDopingCM3: p["Nd"], UpDiffusionUM: p["lam"] / um, SubstrateCM3: p["Nsub"],
		BaseDepthUM: p["xjc"] / um, BaseSurfaceCM3: p["Ns"], BaseAreaUM2: p["A_C"] / (um * um), BasePerimeterUM: p["P_C"] / um,
		EmitterDepthUM: p["xje"] / um, EmitterAreaUM2: p["A_E"] / (um * um), EmitterPerimeterUM: p["P_E"] / um, EmitterGummel: p["GE"],
		CornerRadiusUM: p["R_mask"] / um, EdgeFactor: p["k_edge"], OxideChargeCM2: p["Qf"], LifetimeS: p["tau"],
		SurfaceVelocityCMS: p["s0"], StrayF: p["C_par"], FixedOhm: p["R_fix"], Modulation: p["f_mod"], ReverseGain: p["beta_R"],
		TemperatureK: RoomTemperature,
	}
}

// test is one of the tables' tests at the reference's biases.
func (r *reference) test(name string) (Test, bool) {
	p := r.Process
	tests := map[string]Test{
		"BVcbo": {Measures: BVcbo}, "BVceo": {Measures: BVceo, Current: p["I_hfe"]}, "BVebo": {Measures: BVebo},
		"Icbo": {Measures: Icbo, Voltage: p["V_icbo"]}, "Icbo_lowV": {Measures: Icbo, Voltage: p["V_icbo"] / 4},
		"Icbo_area": {Measures: AreaLeakage, Voltage: p["V_icbo"]},
		"hFE":       {Measures: HFE, Current: p["I_hfe"], Voltage: p["V_ce"]}, "hFE_low": {Measures: HFE, Current: p["I_low"], Voltage: p["V_ce"]},
		"Vcesat": {Measures: Vcesat, Current: p["I_sat"]}, "Vcesat_lowI": {Measures: Vcesat, Current: p["I_sat"] / 10},
		"Cob": {Measures: Cob, Voltage: p["V_cob"]}, "Cob_1V": {Measures: Cob, Voltage: 1}, "Cob_hiV": {Measures: Cob, Voltage: p["V_hi"]},
		"Rc": {Measures: Rc}, "VA": {Measures: EarlyVoltage, Voltage: p["V_ce"]}, "Rpinch": {Measures: Rpinch, Voltage: p["V_ce"]},
		"Mm1_hi": {Measures: Multiplication, Voltage: p["V_hi"]}, "BV_plane": {Measures: PlaneBV},
	}
	t, ok := tests[name]
	t.Name = name
	return t.biased(), ok
}

// references reads the devices of a folder's table of Jacobians; other tables name
// them. The project's own copy serves where the folder has none.
func references(folder string) (map[string]*reference, error) {
	var lastErr error
	for _, dir := range []string{folder, "../../testdata/physics"} {
		raw, err := os.ReadFile(filepath.Join(dir, "jacobian.json"))
		if err != nil {
			lastErr = err
			continue
		}
		var tab struct{ Devices map[string]*reference }
		if err := json.Unmarshal(raw, &tab); err != nil {
			return nil, err
		}
		return tab.Devices, nil
	}
	return nil, lastErr
}

func (c *tally) references(folder string) map[string]*reference {
	refs, err := references(folder)
	if err != nil {
		c.t.Fatal(err)
	}
	return refs
}

func sortedKeys[V any](m map[string]V) []string {
	var keys []string
	for k := range m {
		keys = append(keys, k)
	}
	sort.Strings(keys)
	return keys
}

// levelTolerance is for nominal levels of the same formulas; the page itself asks
// for no level closer than 10 %.
const levelTolerance = 0.002

func checkJacobian(c *tally, tab *physicsTable) {
	refs := c.references(tab.folder)
	for _, name := range sortedKeys(refs) {
		r := refs[name]
		dev := r.device()
		nat := natural
		x := dev.make(&Process{}, &nat)
		c.nominal(name, r, x)
		for _, test := range sortedKeys(r.Jacobian) {
			t, ok := r.test(test)
			c.row(func() bool {
				if !ok {
					c.t.Errorf("%s: no model of test %s", name, test)
					return false
				}
				good := true
				for i, param := range r.Params {
					p, known := tableParams[param]
					if !known {
						c.t.Errorf("%s: no parameter %s", name, param)
						return false
					}
					var up, down Process
					up[p], down[p] = math.Log(1.01), math.Log(0.99)
					j := math.Log(dev.make(&up, &nat).value(&t)/dev.make(&down, &nat).value(&t)) / (up[p] - down[p])
					good = c.near(name+" "+test+" on "+param, "derivative", j, r.Jacobian[test][i], 0.02, true) && good
				}
				return good
			})
		}
	}
}

func (c *tally) nominal(name string, r *reference, x *die) {
	plane := x.planeBreakdown(1)
	got := map[string]float64{
		"BV_cyl": x.edge.breakdown(&x.law, x.kelvin), "BV_corner": x.notch.breakdown(&x.law, x.kelvin),
		"W": x.prof.t - x.prof.xjc, "vbi": x.vbi, "rho": 1 / (charge * x.prof.nd * MobilityElectrons(x.prof.nd, x.kelvin)),
	}
	bvceo, _ := r.test("BVceo")
	v := x.value(&bvceo)
	l, _ := x.layerAt(v)
	got["wd_bvceo"] = l.xn - x.prof.xjc
	got["n_miller"] = MillerExponent(plane+x.vbi, v+x.vbi, x.gain(5, bvceo.Current))
	_, got["QB"], _, _ = x.gummel(5)
	for _, q := range sortedKeys(r.Nominal) {
		c.row(func() bool {
			g, ok := got[q]
			if t, is := r.test(q); is {
				g, ok = x.value(&t), true
			}
			if !ok {
				c.t.Errorf("%s: no model of %s", name, q)
				return false
			}
			return c.near(name, q, g, r.Nominal[q], levelTolerance, false)
		})
	}
	if r.Reaches != nil {
		c.row(func() bool {
			// Reach-through as the reference counts it: the endless epi's layer is wider
			// than base to substrate less the tail.
			if got := x.endlessWidth(x.gain(5, bvceo.Current)) > x.prof.net(); got != *r.Reaches {
				c.t.Errorf("%s: reach-through at BVceo %v, the table says %v", name, got, *r.Reaches)
				return false
			}
			return true
		})
	}
}

func checkSignatures(c *tally, tab *physicsTable) {
	refs := c.references(tab.folder)
	var values map[string]map[string]map[string]float64
	if err := json.Unmarshal(tab.Devices, &values); err != nil {
		c.t.Fatal(err)
	}
	for _, name := range sortedKeys(values) {
		r := refs[name]
		if r == nil {
			c.t.Errorf("device %s is in no table of Jacobians", name)
			continue
		}
		dev, nat := r.device(), natural
		nominal := dev.make(&Process{}, &nat)
		for _, cause := range sortedKeys(values[name]) {
			var p Process
			change, ok := tab.Causes[cause]
			if !ok {
				c.t.Errorf("cause %q is not described", cause)
				continue
			}
			for param, v := range change {
				q, known := tableParams[param]
				if !known {
					c.t.Errorf("cause %q: no parameter %s", cause, param)
				}
				p[q] = math.Log(v)
			}
			x := dev.make(&p, &nat)
			for _, test := range sortedKeys(values[name][cause]) {
				c.row(func() bool {
					t, ok := r.test(test)
					if !ok {
						c.t.Errorf("%s: no model of test %s", name, test)
						return false
					}
					want := values[name][cause][test]
					got := math.Log(x.value(&t) / nominal.value(&t))
					// Printed to three decimals. The same formulas: 2 % or 0.005.
					return c.near(name+" "+cause+" "+test, "log ratio", got, want, math.Max(0.005, 0.02*math.Abs(want)), true)
				})
			}
		}
	}
}

func checkCorners(c *tally, tab *physicsTable) {
	refs := c.references(tab.folder)
	var rows map[string][]map[string]any
	if err := json.Unmarshal(tab.Devices, &rows); err != nil {
		c.t.Fatal(err)
	}
	for _, name := range sortedKeys(rows) {
		r := refs[name]
		if r == nil {
			c.t.Errorf("device %s is in no table of Jacobians", name)
			continue
		}
		last, lastR := 0.0, 0.0
		for _, row := range rows[name] {
			c.row(func() bool {
				dev, nat := r.device(), natural
				dev.CornerRadiusUM = number(row, "R_mask_um")
				x := dev.make(&Process{}, &nat)
				got := x.notch.breakdown(&x.law, x.kelvin)
				ok := c.near(fmt.Sprintf("%s R %g um", name, dev.CornerRadiusUM), "corner", got, number(row, "BV_corner_applied"), 0.02, false)
				if dev.CornerRadiusUM > lastR && got <= last {
					c.t.Errorf("%s: a sharper corner is not lower at R %g um", name, dev.CornerRadiusUM)
					ok = false
				}
				last, lastR = got, dev.CornerRadiusUM
				return ok
			})
		}
	}
	for _, name := range sortedKeys(tab.Limit) {
		c.row(func() bool {
			dev, nat := refs[name].device(), natural
			x := dev.make(&Process{}, &nat)
			return c.near(name+" cylinder", "cylinder limit", x.edge.breakdown(&x.law, x.kelvin), tab.Limit[name], 0.02, false)
		})
	}
}

var reDevice = regexp.MustCompile(`device ([A-Z]): t_epi ([0-9.]+) um, base-to-substrate ([0-9.]+) um, BVceo ([0-9.]+) V`)

// checkTrade holds the model to facts of the trade (common practice, no source).
func checkTrade(c *tally, tab *physicsTable) {
	refs := c.references(tab.folder)
	f := func(s string) float64 { v, _ := strconv.ParseFloat(s, 64); return v }
	for _, r := range tab.Rows {
		c.row(func() bool {
			fact, _ := r["fact"].(string)
			check, _ := r["check"].(string)
			ok := true
			for _, name := range sortedKeys(refs) {
				ref := refs[name]
				dev, nat := ref.device(), natural
				x := dev.make(&Process{}, &nat)
				switch {
				case strings.Contains(fact, "few um of epi"):
					if m := reDevice.FindStringSubmatch(check); m != nil && m[1] == name {
						t, _ := ref.test("BVceo")
						ok = all(ok, c.near(fact, "t_epi", dev.EpiThicknessUM, f(m[2]), 1e-6, false),
							c.near(fact, "base to substrate", (x.prof.t-x.prof.xjc)/um, f(m[3]), 1e-3, false),
							c.near(fact, "BVceo", x.value(&t), f(m[4]), 0.005, false))
					}
				case strings.Contains(fact, "emitter is a couple of hundred nm"):
					ok = ok && dev.EmitterDepthUM >= 0.1 && dev.EmitterDepthUM <= 0.5
				case strings.Contains(fact, "emitter+base stack is under 2 um"):
					ok = ok && dev.BaseDepthUM < 2
				case strings.Contains(fact, "wafer is about 0.5 mm thick"):
					ok = ok && dev.EpiThicknessUM < 0.02*500
				case strings.Contains(fact, "sharp mask corners"):
					dull := newRim(x.surface, x.prof.ns, x.rj, true, 4*x.mask)
					sharp := newRim(x.surface, x.prof.ns, x.rj, true, x.mask/100)
					at := 0.97 * sharp.breakdown(&x.law, x.kelvin)
					gain := func(q rim) float64 {
						return gainOf(q.multiplication(q.seek(at+q.builtIn(x.kelvin), q.potential), &x.law))
					}
					ok = ok && dull.breakdown(&x.law, x.kelvin) > sharp.breakdown(&x.law, x.kelvin) && gain(sharp) > 1.5*gain(dull)
				default:
					c.t.Errorf("fact %q: no check for it", fact)
					return false
				}
			}
			if !ok {
				c.t.Errorf("the model contradicts %q", fact)
			}
			return ok
		})
	}
}
