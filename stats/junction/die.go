package junction

import "math"

// nature is what the model believes of silicon and geometry beyond the device's
// own numbers. Tests change it to ask what a wrong belief costs; a product's
// field scale is calibrated to its baseline.
type nature struct {
	fieldScale float64 // multiplies the fields of the ionisation law
	base       baseShape
	spread     float64 // tangent of the angle at which collector current spreads
	narrowing  float64 // multiplies the base's band-gap narrowing
	tunnel     float64 // multiplies the field of field-enhanced generation
	overlay    float64 // depth of epi over which oxide charge counts, cm
	recombine  float64 // multiplies emitter-base recombination
	rim        float64 // multiplies the curved junction's breakdown
}

var natural = nature{fieldScale: 1, spread: 1, narrowing: 1, tunnel: 1, overlay: 2 * um, recombine: 1, rim: 1}

// junctionVBE is what is taken off VCE to have VCB, V.
const junctionVBE = 0.7

// die is a device at a process point, all lengths in cm, with what several tests
// share computed once.
type die struct {
	kelvin         float64
	prof           profile
	xje            float64
	rj, mask       float64 // edge radius, mask corner radius
	surface        float64 // epi doping under the oxide charge
	areaE, areaC   float64
	rimE, rimC     float64
	lifetime, s0   float64
	gummelE        float64
	stray          float64
	fixed, modular float64
	reverse        float64
	law            ionisation
	fg             float64
	nat            *nature

	vbi         float64
	edge, notch rim // straight edge and corner
	edgeVbi     float64
	notchVbi    float64
}

// emitterNarrowing is the apparent narrowing of the emitter's gap, eV: with the
// base's it makes hFE rise by about half a per cent per kelvin (common practice, no
// source).
const emitterNarrowing = 0.085

// make lays out a device at a process point.
func (d *Device) make(p *Process, nat *nature) *die {
	f := func(i Param) float64 { return math.Exp(p[i]) }
	kelvin := d.TemperatureK * f(Temperature)
	x := &die{
		kelvin: kelvin, xje: d.EmitterDepthUM * um * f(EmitterDepth),
		mask:  d.CornerRadiusUM * um * f(MaskRadius),
		areaE: d.EmitterAreaUM2 * um * um, areaC: d.BaseAreaUM2 * um * um,
		rimE: d.EmitterPerimeterUM * um, rimC: d.BasePerimeterUM * um,
		lifetime: d.LifetimeS * f(Lifetime), s0: d.SurfaceVelocityCMS * f(SurfaceVelocity),
		gummelE: d.EmitterGummel * f(EmitterGummel), stray: d.StrayF,
		fixed: d.FixedOhm * f(SeriesResistance), modular: d.Modulation * f(Modulation), reverse: d.ReverseGain,
		law: overstraeten(kelvin, nat.fieldScale), fg: enhancementField(kelvin) * nat.tunnel, nat: nat,
	}
	x.gummelE *= math.Exp(-emitterNarrowing * (1/thermal(kelvin) - 1/thermal(RoomTemperature)))
	nd := d.EpiDopingCM3 * f(EpiDoping)
	ns := d.BaseSurfaceCM3 * f(BaseDose)
	xjc := d.BaseDepthUM * um * f(BaseDepth)
	t := (d.EpiThicknessUM*f(EpiThickness) - d.SiliconConsumedUM) * um
	x.prof = newProfile(nd, ns, xjc, t, d.UpDiffusionUM*um*f(UpDiffusion), d.SubstrateCM3, nat.base)
	x.rj = xjc * d.EdgeFactor * f(EdgeRadius)
	x.surface = nd
	if !d.FieldPlate {
		x.surface += d.OxideChargeCM2 * f(OxideCharge) / nat.overlay
	}
	x.vbi = x.prof.builtIn(kelvin)
	x.edge = newRim(x.surface, ns, x.rj, false, 0)
	x.notch = newRim(x.surface, ns, x.rj, true, x.mask)
	return x
}

// rims computes the curved junctions' own built-in potentials, once.
func (x *die) rims() {
	if x.edgeVbi == 0 {
		x.edgeVbi, x.notchVbi = x.edge.builtIn(x.kelvin), x.notch.builtIn(x.kelvin)
	}
}

// layerAt is the plane junction's depletion layer under an applied reverse voltage.
func (x *die) layerAt(volts float64) (layer, bool) { return x.prof.at(volts + x.vbi) }

// planeBreakdown is the applied voltage at which the plane junction's integral
// reaches a level: 1 for BVcbo, 1/(1+hFE) for BVceo.
func (x *die) planeBreakdown(level float64) float64 {
	v, _ := x.planeBreakdownNear(level, nil)
	return v
}

// planeBreakdownNear starts at the layer of a similar level; it returns its own.
func (x *die) planeBreakdownNear(level float64, near *layer) (float64, layer) {
	l, ok := x.prof.atLevel(level, &x.law, near)
	if !ok {
		return math.NaN(), l
	}
	return x.prof.potential(&l) - x.vbi, l
}

// multiplied is 1/(1-I) of the plane junction; +Inf at and above breakdown.
func (x *die) multiplied(volts float64) float64 {
	l, ok := x.layerAt(volts)
	if !ok {
		return math.NaN()
	}
	return gainOf(x.prof.multiplication(&l, &x.law))
}

func gainOf(integral float64) float64 {
	if integral >= 1 {
		return math.Inf(1)
	}
	return 1 / (1 - integral)
}

// gummel is what hFE, pinch resistance and Early voltage need of the base at a
// collector-emitter voltage: atoms per cm^2 left neutral, the Gummel number in
// s/cm^4, and the sheet conductance in S.
func (x *die) gummel(vce float64) (l layer, atoms, number, sheet float64) {
	l, ok := x.layerAt(math.Max(0, vce-junctionVBE))
	if !ok || l.xp <= x.xje {
		return l, math.NaN(), math.NaN(), math.NaN()
	}
	vt := thermal(x.kelvin)
	const panels = 16
	h := (l.xp - x.xje) / panels
	for i := range 2*panels + 1 {
		w := 2.0
		switch {
		case i == 0 || i == 2*panels:
			w = 1
		case i%2 == 1:
			w = 4
		}
		pos := x.xje + h/2*float64(i)
		na := x.prof.acceptors(pos)
		net := (na - x.prof.nd) * w * h / 6
		atoms += net
		number += net / (vt * MobilityElectrons(na, x.kelvin)) * math.Exp(-x.nat.narrowing*narrowing(na)/vt)
		sheet += net * charge * MobilityHoles(na, x.kelvin)
	}
	return l, atoms, number, sheet
}

// baseLayerPotential is the voltage taken for the emitter-base depletion layer's
// width under forward bias, V.
const baseLayerPotential = 0.35

// recombination is the prefactor of the space-charge recombination current, A:
// I = q ni We/2 (area/lifetime + s0 perimeter) exp(V/2kT).
func (x *die) recombination() float64 {
	width := math.Sqrt(2 * permittivity * baseLayerPotential / (charge * x.prof.acceptors(x.xje)))
	return x.nat.recombine * charge * intrinsic(x.kelvin) * width / 2 * (x.areaE/x.lifetime + x.s0*x.rimE)
}

// gain is hFE at a collector current: emitter efficiency and space-charge
// recombination, whose share falls with the root of the current,
//
//	1/hFE = GB/GE + Irec/sqrt(Is Ic),  Is = q A ni^2/GB.
//
// There is no fall at high current (no Kirk effect): ratios near the peak hold.
func (x *die) gain(vce, current float64) float64 {
	_, _, gb, _ := x.gummel(vce)
	ni := intrinsic(x.kelvin)
	is := charge * x.areaE * ni / gb * ni
	return 1 / (gb/x.gummelE + x.recombination()/math.Sqrt(is*current))
}

// epiResistance is the ohmic resistance from the edge of the depletion layer at
// zero bias to the substrate, current spreading from a square emitter, ohm.
func (x *die) epiResistance() float64 {
	l, ok := x.layerAt(0)
	if !ok {
		return math.NaN()
	}
	if l.xn >= x.prof.t {
		return 0
	}
	side := math.Sqrt(x.areaE)
	r := func(pos float64) float64 {
		n := x.prof.donors(pos)
		w := side + 2*x.nat.spread*(pos-x.prof.xjc)
		return 1 / (charge * n * MobilityElectrons(n, x.kelvin) * w * w)
	}
	// Two stretches: the flat epi, and the tail with panels of its own.
	bend := math.Min(math.Max(l.xn, x.prof.t-14*x.prof.lam), x.prof.t)
	return simpson(r, l.xn, bend, 16) + simpson(r, bend, x.prof.t*(1-1e-15), 40)
}

func simpson(f func(float64) float64, a, b float64, panels int) float64 {
	if b <= a {
		return 0
	}
	h := (b - a) / float64(panels)
	s := 0.0
	for i := range panels {
		lo := a + h*float64(i)
		s += h / 6 * (f(lo) + 4*f(lo+h/2) + f(lo+h))
	}
	return s
}
