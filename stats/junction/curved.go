package junction

import "math"

// rim is the base-collector junction where it curves up to the surface: the
// Gaussian base spreads under the mask from its edge, with the junction at rj,
// into epi of nd plus what oxide charge adds. Along the worst field line the flux
// spreads with an area that grows as r (straight edge) or r (R + r) (corner of
// mask radius R), r from the mask edge.
//
// A proxy in geometry: no fringing, no substrate. Only the order, sharper is
// lower, is physics; levels are anchored.
type rim struct {
	nd, ns, rj float64
	corner     bool
	mask       float64 // R, cm, for a corner
	l          float64
}

func newRim(nd, ns, rj float64, corner bool, mask float64) rim {
	return rim{nd: nd, ns: ns, rj: rj, corner: corner, mask: mask, l: rj / math.Sqrt(math.Log(ns/nd))}
}

// area is the spreading weight at r.
func (c *rim) area(r float64) float64 {
	if c.corner {
		return r * (c.mask + r)
	}
	return r
}

// flux is an antiderivative of net doping times area, in closed form.
func (c *rim) flux(r float64) float64 {
	u := r / c.l
	g := c.ns * math.Exp(-u*u) * c.l * c.l / 2 // antiderivative of -Na r
	if !c.corner {
		return c.nd*r*r/2 + g
	}
	return c.nd*r*r*(c.mask/2+r/3) + g*(c.mask+r) - c.ns*c.l*c.l*c.l*(math.SqrtPi/4)*math.Erf(u)
}

// outer is where the field that starts at ri ends.
func (c *rim) outer(ri float64) float64 {
	f0 := c.flux(ri)
	f := func(r float64) float64 { return c.flux(r) - f0 }
	hi := 2 * c.rj
	for f(hi) < 0 {
		hi *= 2
	}
	// Newton from above: flux is convex beyond the junction.
	r := hi
	for range 80 {
		u := r / c.l
		slope := (c.nd - c.ns*math.Exp(-u*u)) * c.area(r)
		dr := f(r) / slope
		if r-dr <= c.rj {
			dr = (r - c.rj) / 2
		}
		r -= dr
		if math.Abs(dr) < 1e-12*r {
			break
		}
	}
	return r
}

const rimInner, rimOuter = 20, 40

// walk passes the field as [profile.walk] does, with the position of each panel's
// middle and end for integrals that need it.
func (c *rim) walk(ri float64, panel func(h, rm, r, middle, end float64)) {
	f0, ro := c.flux(ri), c.outer(ri)
	field := func(r float64) float64 {
		return math.Max(0, charge/permittivity*(f0-c.flux(r))/c.area(r))
	}
	r0 := ri
	step := func(r float64) {
		m := (r + r0) / 2
		panel(r-r0, m, r, field(m), field(r))
		r0 = r
	}
	for i := 1; i <= rimInner; i++ {
		s := 1 - float64(i)/rimInner
		step(c.rj - (c.rj-ri)*s*s)
	}
	for i := 1; i <= rimOuter; i++ {
		s := float64(i) / rimOuter
		step(c.rj + (ro-c.rj)*s*s)
	}
}

func (c *rim) potential(ri float64) float64 {
	v, e0 := 0.0, 0.0
	c.walk(ri, func(h, _, _, middle, end float64) {
		v += h / 6 * (e0 + 4*middle + end)
		e0 = end
	})
	return v
}

func (c *rim) multiplication(ri float64, law *ionisation) float64 {
	m := multiplier{law: law}
	c.walk(ri, func(h, _, _, middle, end float64) { m.panel(h, middle, end) })
	return m.sum
}

// generation is the integral of (1 + Gamma) weight(r) along the field line.
func (c *rim) generation(ri, fg float64, weight func(r float64) float64) float64 {
	s, g0 := 0.0, weight(ri)
	c.walk(ri, func(h, rm, r, middle, end float64) {
		g2 := enhancement(end, fg) * weight(r)
		s += h / 6 * (g0 + 4*enhancement(middle, fg)*weight(rm) + g2)
		g0 = g2
	})
	return s
}

// seek finds the inner edge at which a quantity that rises as the layer widens
// has a value.
func (c *rim) seek(value float64, quantity func(ri float64) float64) float64 {
	f := func(x float64) float64 {
		v := quantity(c.rj * (1 - math.Exp(x)))
		if v <= 0 {
			return -50
		}
		return math.Log(v / value)
	}
	x := bracketed(f, math.Log(0.3), 0.25, math.Log(1e-4), math.Log(0.999))
	return c.rj * (1 - math.Exp(x))
}

// builtIn is as [profile.builtIn], with this junction's own edges.
func (c *rim) builtIn(kelvin float64) float64 {
	return fixedBuiltIn(kelvin, c.nd, func(psi float64) (float64, bool) {
		ri := c.seek(psi, c.potential)
		u := ri / c.l
		return c.ns*math.Exp(-u*u) - c.nd, !math.IsNaN(ri)
	})
}

// breakdown is the applied reverse voltage at which the integral reaches 1, or at
// which the base under the mask edge is used up before that.
func (c *rim) breakdown(law *ionisation, kelvin float64) float64 {
	ri := c.seek(1, func(r float64) float64 { return c.multiplication(r, law) })
	if math.IsNaN(ri) {
		ri = 2e-3 * c.rj
	}
	return c.potential(ri) - c.builtIn(kelvin)
}
