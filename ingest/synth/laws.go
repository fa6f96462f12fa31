package synth

import "math"

// Laws holds the slopes that turn latents into ideal readings. The defaults
// ([DefaultLaws]) follow a numerical reference model; a rehearsal that must not
// lean on them draws others around these.
type Laws struct {
	// CriticalField is d ln Ec / d ln Nd of the field at breakdown: 0.1 makes
	// BVceo go as Nd^-0.8 where the epi is thick.
	CriticalField float64
	// Gain is d ln BVceo / d ln hFE.
	Gain float64
	// HFE, BVCBO and Pinch are log-log slopes on the latents.
	HFE, BVCBO, Pinch Process
	// BVEBODose is d ln BVebo / d ln base dose.
	BVEBODose float64
	// ChargeBVCBO is the fall of ln BVcbo for each nominal oxide charge added.
	ChargeBVCBO float64
	// PlaneRatio is the plane junction's BVcbo over the edge-limited one.
	PlaneRatio float64
	// Stray is the part of Cob that no junction explains.
	Stray float64
	// Modulation is the part of the ohmic collector resistance left in saturation.
	Modulation float64
	// CollectorW and CollectorN are the slopes of the collector resistance on
	// net thickness and doping (current spreading makes them less than 1).
	CollectorW, CollectorN float64
	// FixedResistance is metal and substrate, ohm.
	FixedResistance float64
	// Recombination is the recombination part of the base current at 10 uA, as
	// a share of the ideal part; it falls with the root of the current.
	Recombination float64
	// SurfaceShare of Recombination and SurfaceLeak of Icbo are at the surface.
	SurfaceShare, SurfaceLeak float64
	// GenerationWidth is d ln Icbo / d ln depletion width: below 1 because a
	// narrower layer at the same voltage has the higher field.
	GenerationWidth float64
	// LeakMiller is the exponent that multiplies Icbo close to BVcbo.
	LeakMiller float64
	// LeakDouble is the temperature step that doubles Icbo, K; GainTemperature
	// is d ln hFE / dT, 1/K. Both common practice, no source.
	LeakDouble, GainTemperature float64
}

// DefaultLaws returns the slopes of the reference model for a device.
//
// Source: the reference note on the physics of epi transistors, sections 2 to 5,
// whose Jacobians are of two devices: a narrow base that reaches through (0.5 um,
// about 20 V) and a wide one that does not (0.95 um, about 47 V). Slopes between
// are interpolated on the base width, those outside stay at the nearer device.
func DefaultLaws(d Device) Laws {
	wide := 0.0
	if d.EmitterDepthUM > 0 {
		wide = min(max((d.BaseDepthUM-d.EmitterDepthUM-0.5)/0.45, 0), 1)
	}
	between := func(narrow, wider float64) float64 { return narrow + wide*(wider-narrow) }
	l := Laws{
		CriticalField: 0.1, Gain: -0.18, BVEBODose: between(-0.16, -0.26),
		ChargeBVCBO: between(0.0121, 0.0200), PlaneRatio: between(1.58, 2.77),
		Stray: between(0.14, 0.20), Modulation: 0.4, CollectorW: between(0.92, 0.98),
		CollectorN: between(-0.56, -0.88), FixedResistance: 0.3,
		Recombination: between(0.073, 0.10), SurfaceShare: 0.0164, SurfaceLeak: 0.0076,
		GenerationWidth: 0.35, LeakMiller: 6, LeakDouble: 10, GainTemperature: 0.006,
	}
	l.HFE[EpiDoping] = between(-0.20, -0.14)
	l.HFE[BaseDose] = between(-0.70, -0.75)
	l.HFE[BaseDepth] = between(-2.85, -1.91)
	l.HFE[EmitterDepth] = between(1.79, 0.89)
	l.HFE[EmitterGummel] = 0.99
	l.BVCBO[EpiDoping] = between(-0.19, -0.15)
	l.BVCBO[BaseDepth] = between(0.45, 0.50)
	l.BVCBO[EdgeRadius] = between(0.45, 0.50)
	l.Pinch[EpiDoping] = between(-0.16, -0.12)
	l.Pinch[BaseDose] = between(-0.52, -0.57)
	l.Pinch[BaseDepth] = between(-2.62, -1.81)
	l.Pinch[EmitterDepth] = between(1.52, 0.77)
	return l
}

const (
	charge    = 1.602177e-19        // C
	epsilon   = 11.7 * 8.854188e-14 // F/cm
	builtIn   = 0.7                 // V: breakdown and depletion see the applied voltage and this
	tail      = 4.0                 // up-diffusion lengths of the substrate's tail that are depleted at high bias
	baseGives = 1.0 / 3             // of the base depth is depleted at high bias
	epiShare  = 0.88                // of the junction's potential falls in the epi, the rest in the graded base
	minNet    = 0.02e-4             // cm: where base and substrate touch
)

// DopingFromResistivity returns the phosphorus density in cm^-3 of silicon of
// rho ohm cm at 23 C.
//
// Source: ASTM F723-99, resistivity to dopant density, phosphorus; coefficients
// from memory, checked against reference values.
func DopingFromResistivity(rho float64) float64 {
	x := math.Log10(rho)
	z := (-3.1083 + x*(-3.2626+x*(-1.2196-x*0.13923))) / (1 + x*(1.0265+x*(0.38755+x*0.041833)))
	return 6.242e18 / rho * math.Pow(10, z)
}

// breakdown is the potential at which the field peaks at ec: a parabola in the
// net epi w, and no more of w once the layer is not depleted to its end.
func breakdown(w, n, ec float64) float64 {
	k := charge * n / epsilon // slope of the field, V/cm^2
	if w < ec/k {
		return ec*w - k*w*w/2
	}
	return ec * ec / (2 * k)
}

// fieldFor is the peak field at which breakdown returns psi.
func fieldFor(w, n, psi float64) float64 {
	k := charge * n / epsilon
	if ec := psi/w + k*w/2; ec > k*w {
		return ec
	}
	return math.Sqrt(2 * k * psi)
}

// model is the laws made ready for one device and program.
type model struct {
	laws           Laws
	dev            Device
	tests          []Test
	n0, w0         float64 // cm^-3, cm
	ecCEO, ecCBO   float64 // V/cm at target
	hasCBO, hasCEO bool
	bvcbo, bvceo   float64 // typical, V
	satShare       float64 // collector resistance's part of Vcesat
	fixShare       float64
	width          []float64 // of the depletion layer at target and each test's bias, cm
}

func newModel(s *Spec) *model {
	m := &model{laws: s.Laws, dev: s.Device, tests: s.Tests}
	m.n0 = DopingFromResistivity(m.dev.EpiResistivityOhmCM)
	m.w0 = m.net(&Process{})
	for i := range s.Tests {
		m.width = append(m.width, m.depletion(m.w0, m.n0, s.Tests[i].Bias))
	}
	for _, t := range s.Tests {
		switch t.Measures {
		case "bvceo":
			m.bvceo, m.hasCEO = t.Typical, true
			m.ecCEO = fieldFor(m.reach(m.w0), m.n0, epiShare*(t.Typical+builtIn))
		case "bvcbo":
			m.bvcbo, m.hasCBO = t.Typical, true
			m.ecCBO = fieldFor(m.reach(m.w0), m.n0, epiShare*(t.Typical*m.laws.PlaneRatio+builtIn))
		case "vcesat":
			ohm := m.dev.EpiResistivityOhmCM * m.w0 / (m.dev.EmitterAreaUM2 * 1e-8)
			m.satShare = min(m.laws.Modulation*ohm*t.Bias/t.Typical, 0.8)
			m.fixShare = min(m.laws.FixedResistance*t.Bias/t.Typical, 0.95-m.satShare)
		}
	}
	return m
}

// net is the net epi under the base, cm.
func (m *model) net(p *Process) float64 {
	lam := m.dev.UpDiffusionUM * math.Exp(p[UpDiffusion])
	w := m.dev.EpiThicknessUM*math.Exp(p[EpiThickness]) - m.dev.SiliconConsumedUM - m.dev.BaseDepthUM*math.Exp(p[BaseDepth])
	if lam > 0 {
		w -= lam * (math.Log(m.dev.SubstrateCM3/m.n0) - p[EpiDoping])
	}
	return max(w*1e-4, minNet)
}

// reach is how far from the base the field can go: the net epi and what high
// bias depletes of the substrate's tail, cm. With it and epiShare the laws give
// the reference model's depletion widths at BVceo (6.1 um in its thick device,
// 1.9 um in its thin one) and its slopes.
func (m *model) reach(w float64) float64 { return w + tail*m.dev.UpDiffusionUM*1e-4 }

// depletion is the width of the depletion layer at v volts, cm: what the
// doping gives, ended by the substrate. The end is soft, because the substrate's
// tail and the base give way a little; 12 reproduces the slopes -0.14 on
// thickness and 0.32 on doping of a one-dimensional field solution of the demo
// device at 10 V, where the layer is just short of its end.
func (m *model) depletion(w, n, v float64) float64 {
	open := math.Sqrt(2 * epsilon * (v + builtIn) / (charge * n))
	end := m.reach(w) + baseGives*m.dev.BaseDepthUM*1e-4
	r := open / end
	if r < 0.5 {
		return open
	}
	r *= r * r
	r *= r
	return open * math.Pow(1+r*r, -1.0/12)
}

func dot(a, b *Process) float64 {
	s := 0.0
	for i := range a {
		s += a[i] * b[i]
	}
	return s
}

// values writes what each test would ideally read.
func (m *model) values(dst []float64, p *Process) {
	l := &m.laws
	n := m.n0 * math.Exp(p[EpiDoping])
	w := m.net(p)
	tau := math.Exp(p[Lifetime])
	surface := math.Exp(p[SurfaceVelocity])
	recombine := (1-l.SurfaceShare)/tau + l.SurfaceShare*surface
	ideal := math.Exp(dot(&l.HFE, p) + l.GainTemperature*p[Temperature])
	pinch := math.Exp(dot(&l.Pinch, p))

	gain := func(current float64) float64 {
		rho := l.Recombination * math.Sqrt(10e-6/current)
		return ideal * (1 + rho) / (1 + rho*recombine)
	}
	collector := math.Exp(l.CollectorW*math.Log(w/m.w0) + l.CollectorN*p[EpiDoping])
	resistance := math.Exp(p[SeriesResistance])

	bvcbo := math.Inf(1)
	if m.hasCBO {
		edge := m.bvcbo * math.Exp(dot(&l.BVCBO, p)-l.ChargeBVCBO*(math.Exp(p[OxideCharge])-1))
		plane := breakdown(m.reach(w), n, m.ecCBO*math.Exp(l.CriticalField*p[EpiDoping]))/epiShare - builtIn
		bvcbo = min(edge, plane)
	}
	leak := func(test int) float64 {
		v := m.tests[test].Bias
		width := math.Pow(m.depletion(w, n, v)/m.width[test], l.GenerationWidth)
		r := ((1-l.SurfaceLeak)*width/tau + l.SurfaceLeak*surface) * math.Exp2(p[Temperature]/l.LeakDouble)
		if m.hasCBO {
			if v >= bvcbo {
				return math.Inf(1)
			}
			r *= (1 - math.Pow(v/m.bvcbo, l.LeakMiller)) / (1 - math.Pow(v/bvcbo, l.LeakMiller))
		}
		return r
	}

	for i := range m.tests {
		t := &m.tests[i]
		r := 1.0
		switch t.Measures {
		case "bvcbo":
			dst[i] = bvcbo
			continue
		case "bvces":
			if m.hasCBO {
				r = bvcbo / m.bvcbo
			}
		case "bvceo":
			psi := breakdown(m.reach(w), n, m.ecCEO*math.Exp(l.CriticalField*p[EpiDoping])) / epiShare
			dst[i] = min(psi*math.Pow(gain(t.Bias), l.Gain)-builtIn, bvcbo)
			continue
		case "bvebo":
			r = math.Exp(l.BVEBODose * p[BaseDose])
		case "icbo":
			r = leak(i)
		case "iceo":
			r = leak(i) * gain(10e-6)
		case "iebo":
			r = recombine * math.Exp2(p[Temperature]/l.LeakDouble)
		case "hfe":
			r = gain(t.Bias)
		case "vcesat":
			r = 1 + m.satShare*(collector-1) + m.fixShare*(resistance-1)
		case "vbesat":
			r = 1 + 0.02*(resistance-1) // some 20 mV of 0.8 V falls on metal
		case "rc":
			r = collector + l.FixedResistance*(resistance-1)/max(l.FixedResistance, t.Typical)
		case "rpinch":
			r = pinch
		case "rb":
			r = math.Sqrt(pinch) // half under the emitter, half outside it
		case "cob":
			r = l.Stray + (1-l.Stray)*m.width[i]/m.depletion(w, n, t.Bias)
		case "ft":
			r = math.Exp(-(p[BaseDepth] - p[EmitterDepth])) // transit time goes with base width
		}
		dst[i] = t.Typical * r
	}
}
