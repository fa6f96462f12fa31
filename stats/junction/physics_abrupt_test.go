package junction

import (
	"fmt"
	"math"
	"regexp"
	"strconv"
	"strings"
)

// same checks a column when the row has it.
func (c *tally) same(where string, row map[string]any, column string, got, tol float64, abs bool) bool {
	want := number(row, column)
	if math.IsNaN(want) {
		return true
	}
	return c.near(where, column, got, want, tol, abs)
}

func all(ok ...bool) bool {
	for _, o := range ok {
		if !o {
			return false
		}
	}
	return true
}

func checkIonisation(c *tally, tab *physicsTable) {
	law := overstraeten(RoomTemperature, 1)
	for _, r := range tab.Rows {
		c.row(func() bool {
			e := number(r, "E_V_per_cm")
			n, p := law.rates(e)
			w := fmt.Sprintf("E %g", e)
			return all(c.same(w, r, "alpha_n_per_cm", n, 1e-5, false), c.same(w, r, "alpha_p_per_cm", p, 1e-5, false),
				c.same(w, r, "alpha_fulop_per_cm", fulopRate(e), 1e-5, false))
		})
	}
}

func (c *tally) solved(where string, a Abrupt, hfe float64) (AbruptBreakdown, bool) {
	b, err := a.Breakdown()
	if hfe > 0 {
		b, err = a.OpenBase(hfe)
	}
	if err != nil {
		c.t.Errorf("%s: %v", where, err)
	}
	return b, err == nil
}

func checkPlane(c *tally, tab *physicsTable) {
	for _, r := range tab.Rows {
		c.row(func() bool {
			n := number(r, "N")
			w := fmt.Sprintf("N %g", n)
			b, ok := c.solved(w, Abrupt{Doping: n}, 0)
			return all(ok, c.same(w, r, "psi_BV", b.Potential, 0.005, false), c.same(w, r, "E_max", b.Field, 0.005, false),
				c.same(w, r, "depletion_um", b.Depletion/um, 0.005, false),
				c.same(w, r, "psi_BV_fulop", fulopBreakdown(n, math.Inf(1)), 1e-3, false),
				c.same(w, r, "baliga_BV", baligaBreakdown(n), 1e-3, false), c.same(w, r, "baliga_Wc_um", baligaWidth(n)/um, 1e-3, false),
				c.same(w, r, "baliga_Ec", baligaField(n), 1e-3, false), c.same(w, r, "sze_gibbons_BV", szeGibbonsBreakdown(n), 1e-3, false))
		})
	}
}

func checkPunchThrough(c *tally, tab *physicsTable) {
	for _, r := range tab.Rows {
		c.row(func() bool {
			n, wd := number(r, "N"), number(r, "W_um")*um
			w := fmt.Sprintf("N %g W %g um", n, wd/um)
			b, ok := c.solved(w, Abrupt{Doping: n, Width: wd}, 0)
			free, ok2 := c.solved(w, Abrupt{Doping: n}, 0)
			if pt, has := r["punch_through"].(bool); has && pt != b.ReachThrough {
				c.t.Errorf("%s: reach-through %v, the table says %v", w, b.ReachThrough, pt)
				ok = false
			}
			return all(ok, ok2, c.same(w, r, "psi_BV", b.Potential, 0.005, false), c.same(w, r, "E_max", b.Field, 0.005, false),
				c.same(w, r, "W_over_Wd", wd/free.Depletion, 0.005, false),
				c.same(w, r, "psi_BV_fulop", fulopBreakdown(n, wd), 1e-3, false), c.same(w, r, "baliga_PT", baligaReachThrough(n, wd), 1e-3, false))
		})
	}
}

func checkCurvature(c *tally, tab *physicsTable) {
	for _, r := range tab.Rows {
		c.row(func() bool {
			n, rj := number(r, "N"), number(r, "rj_um")*um
			w := fmt.Sprintf("%s N %g rj %g um", r["geometry"], n, rj/um)
			shape, bg, sg := Cylinder, baligaGhandhiCylinder, SzeGibbonsCylinder
			if r["geometry"] == "sph" {
				shape, bg, sg = Sphere, baligaGhandhiSphere, SzeGibbonsSphere
			} else if r["geometry"] != "cyl" {
				c.t.Errorf("%s: unknown geometry", w)
				return false
			}
			a := Abrupt{Doping: n, Shape: shape, Radius: rj}
			b, ok := c.solved(w, a, 0)
			plane, ok2 := c.solved(w, Abrupt{Doping: n}, 0)
			eta := rj / baligaWidth(n)
			return all(ok, ok2, c.same(w, r, "eta_rj_over_baliga_Wc", eta, 1e-3, false), c.same(w, r, "psi_BV", b.Potential, 0.005, false),
				c.same(w, r, "ratio_to_plane", b.Potential/plane.Potential, 0.005, false),
				c.same(w, r, "ratio_fulop", a.fulop().Potential/fulopBreakdown(n, math.Inf(1)), 0.005, false),
				c.same(w, r, "baliga_ghandhi", bg(eta), 1e-3, false), c.same(w, r, "sze_gibbons", sg(eta), 1e-3, false))
		})
	}
}

func checkBVceo(c *tally, tab *physicsTable) {
	for _, r := range tab.Rows {
		c.row(func() bool {
			hfe := number(r, "hFE")
			switch r["kind"] {
			case "miller":
				bv := number(r, "BVcbo_plane")
				got := MillerBVceo(bv, hfe, number(r, "n"))
				return all(c.same("miller", r, "BVceo", got, 1e-4, false), c.same("miller", r, "ratio", got/bv, 1e-4, false))
			case "numerical":
				a := Abrupt{Doping: number(r, "N")}
				if wd := number(r, "W_um"); wd > 0 {
					a.Width = wd * um
				}
				w := fmt.Sprintf("N %g W %g hFE %g", a.Doping, a.Width, hfe)
				plane, ok := c.solved(w, a, 0)
				b, ok2 := c.solved(w, a, hfe)
				return all(ok, ok2, c.same(w, r, "psi_BVcbo_plane", plane.Potential, 0.005, false), c.same(w, r, "psi_BVceo", b.Potential, 0.005, false),
					c.same(w, r, "ratio", b.Potential/plane.Potential, 0.01, false),
					c.same(w, r, "n_effective", MillerExponent(plane.Potential, b.Potential, hfe), 0.03, true))
			}
			c.t.Errorf("unknown kind %v", r["kind"])
			return false
		})
	}
}

func checkResistivity(c *tally, tab *physicsTable) {
	for _, r := range tab.Rows {
		c.row(func() bool {
			n := number(r, "N")
			w := fmt.Sprintf("N %g", n)
			rho, mu := resistivityF723(n), MobilityElectrons(n, 300)
			return all(c.same(w, r, "rho_f723_23C", rho, 1e-3, false), c.same(w, r, "rho_thurber_300K", ResistivityThurber(n), 1e-3, false),
				c.same(w, r, "mu_n_arora_300K", mu, 1e-3, false), c.same(w, r, "rho_arora_300K", 1/(charge*n*mu), 1e-3, false),
				c.same(w, r, "mu_n_caughey_thomas", MobilityCaugheyThomas(n), 1e-3, false), c.same(w, r, "N_back_from_f723", dopingF723(rho), 1e-3, false))
		})
	}
}

var (
	reField  = regexp.MustCompile(`eps\*Ec\^2/\(2qN\), N ([0-9.e+]+), Ec ([0-9.e+]+)`)
	reMiller = regexp.MustCompile(`BVcbo ([0-9.e+]+) V, hFE ([0-9.e+]+), n ([0-9.e+]+)`)
	reMu     = regexp.MustCompile(`mu_(n|p) at ([0-9.e+]+), ([0-9.]+) C`)
	rePct    = regexp.MustCompile(`([0-9.]+) ?%`)
)

// checkPublished reads the quantity out of the row's words: published exercises
// come one by one.
func checkPublished(c *tally, tab *physicsTable) {
	f := func(s string) float64 { v, _ := strconv.ParseFloat(s, 64); return v }
	for _, r := range tab.Rows {
		c.row(func() bool {
			what, _ := r["what"].(string)
			tol, ref := 0.05, math.NaN()
			if m := rePct.FindStringSubmatch(fmt.Sprint(r["tolerance"])); m != nil {
				tol = f(m[1]) / 100
			}
			want := number(r, "value")
			if math.IsNaN(want) {
				want = number(r, "value_V")
			}
			var got float64
			if m := reField.FindStringSubmatch(what); m != nil {
				n, e := f(m[1]), f(m[2])
				got = permittivity * e * e / (2 * charge * n)
				if b, ok := c.solved(what, Abrupt{Doping: n}, 0); ok && !c.same(what, r, "reference_model_psi", b.Potential, 0.005, false) {
					return false
				}
			} else if m := reMiller.FindStringSubmatch(what); m != nil {
				bv, hfe, n := f(m[1]), f(m[2]), f(m[3])
				ref = MillerBVceo(bv, hfe, n)
				got = ref
				if strings.Contains(what, "hFE^(1/n)") { // the exercise leaves out the 1 of 1+hFE
					got = MillerBVceo(bv, hfe-1, n)
				}
			} else if m := reMu.FindStringSubmatch(what); m != nil {
				mobility := MobilityElectrons
				if m[1] == "p" {
					mobility = MobilityHoles
				}
				got = mobility(f(m[2]), f(m[3])+273.15)
				ref = got
			} else {
				c.t.Errorf("published check %q: no computation for it", what)
				return false
			}
			if !math.IsNaN(ref) && !c.same(what, r, "reference_model", ref, 1e-3, false) {
				return false
			}
			return c.near(what, "published", got, want, tol, false)
		})
	}
}
