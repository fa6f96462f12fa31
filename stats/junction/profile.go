package junction

import "math"

// profile is the doping along a line from the surface through the base into the
// epi and the substrate: a Gaussian base, uniform epi, and the substrate's
// up-diffusion as an exponential tail of length lam,
//
//	Na(x) = ns exp(-x^2/L^2),  L = xjc / sqrt(ln(ns/nd)),  so that Na(xjc) = nd
//	Nd(x) = nd + nsub exp(-(t-x)/lam)  up to t, nd + nsub beyond.
//
// Lengths are in cm from the surface, densities in cm^-3.
type profile struct {
	nd, ns, xjc float64
	t           float64 // epi, surface to the substrate's plateau
	lam, nsub   float64
	l           float64 // L
	shape       baseShape
}

// baseShape is the law of the base profile. The reference and the product use the
// Gaussian; the others let tests ask what a wrong guess costs.
type baseShape int

const (
	gaussianBase baseShape = iota
	exponentialBase
)

func newProfile(nd, ns, xjc, t, lam, nsub float64, shape baseShape) profile {
	p := profile{nd: nd, ns: ns, xjc: xjc, t: t, lam: lam, nsub: nsub, shape: shape}
	if shape == exponentialBase {
		p.l = xjc / math.Log(ns/nd)
	} else {
		p.l = xjc / math.Sqrt(math.Log(ns/nd))
	}
	return p
}

// acceptors is the base doping at x.
func (p *profile) acceptors(x float64) float64 {
	if p.shape == exponentialBase {
		return p.ns * math.Exp(-x/p.l)
	}
	u := x / p.l
	return p.ns * math.Exp(-u*u)
}

// acceptorsTo is the integral of acceptors from the surface to x, cm^-2.
func (p *profile) acceptorsTo(x float64) float64 {
	if p.shape == exponentialBase {
		return -p.ns * p.l * math.Expm1(-x/p.l)
	}
	return p.ns * p.l * (math.SqrtPi / 2) * math.Erf(x/p.l)
}

// donors is the doping of epi and substrate at x.
func (p *profile) donors(x float64) float64 {
	switch {
	case x >= p.t:
		return p.nd + p.nsub
	case p.lam <= 0:
		return p.nd
	}
	return p.nd + p.nsub*math.Exp((x-p.t)/p.lam)
}

// tailTo is the integral of the substrate's part of donors up to x, cm^-2.
func (p *profile) tailTo(x float64) float64 {
	s := 0.0
	if p.lam > 0 {
		s = p.nsub * p.lam * math.Exp(math.Min(x-p.t, 0)/p.lam)
	}
	if x > p.t {
		s += p.nsub * (x - p.t)
	}
	return s
}

// net is the epi left after base and up-diffused tail, cm:
// t - xjc - lam ln(nsub/nd), where the tail crosses nd.
func (p *profile) net() float64 {
	return p.t - p.xjc - p.lam*math.Log(p.nsub/p.nd)
}

// layer is a depletion layer of the plane base-collector junction. It is
// described by the charge on either side, cm^-2.
type layer struct {
	charge float64
	xp, xn float64 // its edges in base and collector, cm
	ap, an float64 // base less tail doping up to either edge, cm^-2
}

func (l *layer) width() float64 { return l.xn - l.xp }

// deplete finds the edges of the layer of a charge. ok is false when the base
// holds less.
func (p *profile) deplete(charge float64) (l layer, ok bool) {
	l.charge = charge
	// Base: integral of Na - nd from xp to xjc. Newton from the junction, where the
	// net doping is linear; the integrand grows inwards, so it closes from one side.
	top := p.acceptorsTo(p.xjc)
	tail := p.tailTo(p.xjc)
	held := func(x float64) float64 {
		return top - p.acceptorsTo(x) - p.nd*(p.xjc-x) - (tail - p.tailTo(x))
	}
	if held(0) <= charge {
		return l, false
	}
	grade := p.nd * 2 * p.xjc / (p.l * p.l)
	x := math.Max(0, p.xjc-math.Sqrt(2*charge/grade))
	for range 40 {
		slope := p.acceptors(x) - p.donors(x)
		if slope <= 0 {
			x -= 0.05 * p.xjc
			continue
		}
		dx := (held(x) - charge) / slope
		x = math.Max(0, x+dx)
		if math.Abs(dx) < 1e-10*p.xjc {
			break
		}
	}
	l.xp = x
	// Collector: integral of net donors from xjc to xn, Newton on a convex function
	// started beyond the end.
	need := func(x float64) float64 {
		return p.nd*(x-p.xjc) + p.tailTo(x) - tail - (p.acceptorsTo(x) - top)
	}
	x = p.xjc + charge/p.nd + 3*p.l
	if p.lam > 0 {
		x = math.Min(x, p.t+p.lam)
	} else if x > p.t {
		x = p.t + charge/p.nsub
	}
	for range 200 {
		slope := p.donors(x) - p.acceptors(x)
		dx := (need(x) - charge) / slope
		if x-dx <= p.xjc {
			dx = (x - p.xjc) / 2
		}
		x -= dx
		if math.Abs(dx) < 1e-10*p.xjc {
			break
		}
	}
	l.xn = x
	l.ap, l.an = p.acceptorsTo(l.xp)-p.tailTo(l.xp), p.acceptorsTo(l.xn)-p.tailTo(l.xn)
	return l, true
}

// field is the field at x inside a layer, V/cm.
func (p *profile) field(l *layer, x float64) float64 {
	// From the nearer edge: from the far one, a tail's large numbers cancel.
	q := p.acceptorsTo(x) - p.tailTo(x)
	if x < p.xjc {
		q -= l.ap + p.nd*(x-l.xp)
	} else {
		q += p.nd*(l.xn-x) - l.an
	}
	return math.Max(0, charge/permittivity*q)
}

// panels are how many Simpson panels cover the base side, the epi and the tail.
const basePanels, epiPanels, tailPanels = 16, 32, 12

// walk passes the field along the layer: at its start, then of each panel its
// length, middle position and fields at middle and end, from base to collector.
// Panels crowd at the junction, where ionisation happens.
func (p *profile) walk(l *layer, start func(field float64), panel func(h, middle, end float64)) {
	start(0)
	x0 := l.xp
	step := func(x float64) {
		panel(x-x0, p.field(l, (x+x0)/2), p.field(l, x))
		x0 = x
	}
	side := p.xjc - l.xp
	for i := 1; i <= basePanels; i++ {
		s := 1 - float64(i)/basePanels
		step(p.xjc - side*s*s)
	}
	// The tail's last lengths need panels of their own.
	bend := math.Max(p.xjc, math.Min(l.xn, p.t-14*p.lam))
	if side = bend - p.xjc; side > 0 {
		for i := 1; i <= epiPanels; i++ {
			s := float64(i) / epiPanels
			step(p.xjc + side*s*s)
		}
	}
	if side = l.xn - bend; side > 1e-9*p.xjc {
		for i := 1; i <= tailPanels; i++ {
			step(bend + side*float64(i)/tailPanels)
		}
	}
}

// potential is the voltage across a layer, V: the first moment of its charge, in
// closed form.
func (p *profile) potential(l *layer) float64 {
	return charge / permittivity * (p.momentTo(l.xn) - p.momentTo(l.xp))
}

// momentTo is an antiderivative of (x - xjc) times the net doping.
func (p *profile) momentTo(x float64) float64 {
	d := x - p.xjc
	m := p.nd * d * d / 2
	if p.lam > 0 {
		y := math.Min(x, p.t)
		m += p.nsub * p.lam * math.Exp((y-p.t)/p.lam) * (y - p.xjc - p.lam)
	}
	if x > p.t {
		m += p.nsub * (x - p.t) * ((x+p.t)/2 - p.xjc)
	}
	na := p.acceptors(x)
	if p.shape == exponentialBase {
		return m + na*p.l*(d+p.l)
	}
	return m + na*p.l*p.l/2 + p.xjc*p.acceptorsTo(x)
}

// multiplication is the ionisation integral of electrons over a layer.
func (p *profile) multiplication(l *layer, law *ionisation) float64 {
	m := multiplier{law: law}
	p.walk(l, m.start, m.panel)
	return m.sum
}

// generation is the integral of 1 + Gamma over a layer, cm.
func (p *profile) generation(l *layer, fg float64) float64 {
	s, g0 := 0.0, 1.0
	p.walk(l, func(float64) {}, func(h, middle, end float64) {
		g2 := enhancement(end, fg)
		s += h / 6 * (g0 + 4*enhancement(middle, fg) + g2)
		g0 = g2
	})
	return s
}

// at finds the layer under a total potential.
func (p *profile) at(psi float64) (layer, bool) {
	// Endless epi alone would hold this charge.
	return p.seek(psi, math.Sqrt(2*permittivity*p.nd*math.Max(psi, 1e-3)/charge), 0.2, p.potential)
}

// atLevel finds the layer whose ionisation integral has a value, starting near the
// charge of another or, where near is nil, of a usual field.
func (p *profile) atLevel(level float64, law *ionisation, near *layer) (layer, bool) {
	guess, step := permittivity/charge*1.8e5, 0.2
	if near != nil && near.charge > 0 {
		guess, step = near.charge, 0.06
	}
	return p.seek(level, guess, step, func(l *layer) float64 { return p.multiplication(l, law) })
}

// seek finds the layer at which a quantity that rises with charge has a value,
// starting near a charge; step is how far from it in logs to look first.
func (p *profile) seek(value, guess, step float64, quantity func(*layer) float64) (layer, bool) {
	full := p.acceptorsTo(p.xjc) - p.nd*p.xjc - (p.tailTo(p.xjc) - p.tailTo(0))
	f := func(lnq float64) float64 {
		l, ok := p.deplete(math.Exp(lnq))
		if !ok {
			return math.NaN()
		}
		v := quantity(&l)
		if v <= 0 {
			return -50 // below every field that ionises
		}
		return math.Log(v / value)
	}
	lo, hi := math.Log(1e9), math.Log(full*(1-1e-9))
	if !(full > 1e9) {
		return layer{}, false
	}
	x := bracketed(f, math.Log(guess), step, lo, hi)
	l, ok := p.deplete(math.Exp(x))
	return l, ok
}

// builtIn is the junction's built-in potential: that between the dopings at the
// edges of its own layer at zero bias,
//
//	vbi = kT/q ln(net base doping at xp * nd / ni^2),
//
// solved as a fixed point, V.
func (p *profile) builtIn(kelvin float64) float64 {
	return fixedBuiltIn(kelvin, p.nd, func(psi float64) (float64, bool) {
		l, ok := p.at(psi)
		return p.acceptors(l.xp) - p.donors(l.xp), ok
	})
}

func fixedBuiltIn(kelvin, nd float64, edge func(psi float64) (float64, bool)) float64 {
	vt, ni := thermal(kelvin), intrinsic(kelvin)
	v := 0.7
	for range 12 {
		n, ok := edge(v)
		if !ok || !(n > 0) {
			return math.NaN()
		}
		next := math.Max(0.1, vt*math.Log(n/ni*(nd/ni)))
		if math.Abs(next-v) < 1e-5 {
			return next
		}
		v = next
	}
	return v
}
