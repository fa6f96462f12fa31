package junction

import "math"

// emitterTop is the emitter's doping at its junction for the built-in potential
// of the emitter-base diode, cm^-3.
const emitterTop = 1e20

// value is what a test reads on a die, SI. It is NaN where the model has no
// solution, +Inf for a leakage at or above breakdown.
func (x *die) value(t *Test) float64 {
	switch t.Measures {
	case BVcbo, BVces:
		return x.bvcbo()
	case BVceo:
		return math.Min(x.planeBreakdown(1/(1+x.gain(5, t.Current))), x.bvcbo())
	case PlaneBV:
		return x.planeBreakdown(1)
	case BVebo:
		return x.bvebo()
	case Icbo:
		return x.leakage(t.Voltage, true)
	case AreaLeakage:
		return x.leakage(t.Voltage, false)
	case Iceo:
		return x.iceo(t.Voltage)
	case Iebo:
		width := math.Sqrt(2 * permittivity * (t.Voltage + 0.9) / (charge * x.prof.acceptors(x.xje)))
		return charge * intrinsic(x.kelvin) * width / 2 * (x.areaE/x.lifetime + x.s0*x.rimE)
	case HFE:
		return x.gain(t.Voltage, t.Current)
	case Multiplication:
		return x.multiplied(t.Voltage) - 1
	case EarlyVoltage:
		l, atoms, _, _ := x.gummel(t.Voltage)
		return charge * atoms * l.width() / permittivity
	case Rpinch:
		_, _, _, sheet := x.gummel(t.Voltage)
		return 1 / sheet
	case Cob:
		return x.cob(t.Voltage)
	case Rc:
		return x.fixed + x.epiResistance()
	case Vcesat:
		return x.vcesat(t)
	}
	return x.proxy(t)
}

// bvcbo is the lowest of plane, edge and corner.
func (x *die) bvcbo() float64 {
	lowest := x.nat.rim * math.Min(x.edge.breakdown(&x.law, x.kelvin), x.notch.breakdown(&x.law, x.kelvin))
	if plane := x.planeBreakdown(1); plane < lowest { // a NaN plane is beyond what the base can hold
		return plane
	}
	return lowest
}

// bvebo is the breakdown of an abrupt junction at the base's surface doping, with
// 1.2 V for the dead space: a proxy, since below 20 V local ionisation is not enough.
func (x *die) bvebo() float64 {
	a := Abrupt{Doping: x.prof.ns}
	law := overstraeten(x.kelvin, 1)
	b := a.solve(func(peak float64) float64 {
		m := multiplier{law: &law}
		a.walk(peak, m.start, m.panel)
		return math.Log(m.sum)
	})
	ni := intrinsic(x.kelvin)
	return b.Potential + 1.2 - thermal(x.kelvin)*math.Log(x.prof.ns/ni*(emitterTop/ni))
}

// leakage is Icbo: generation in the depletion layer under the area, raised by the
// field and multiplied; with the rim, the same along the straight edge and round
// the four corners, and at the surface.
func (x *die) leakage(volts float64, withRim bool) float64 {
	l, ok := x.layerAt(volts)
	if !ok {
		return math.NaN()
	}
	qni := charge * intrinsic(x.kelvin) / 2
	total := qni / x.lifetime * x.areaC * x.prof.generation(&l, x.fg) * gainOf(x.prof.multiplication(&l, &x.law))
	if !withRim {
		return total
	}
	x.rims()
	one := func(float64) float64 { return 1 }
	side := func(r float64) float64 { return r }
	re := x.edge.seek(volts+x.edgeVbi, x.edge.potential)
	total += qni * x.rimGain(&x.edge, volts, x.edgeVbi) * x.rimC *
		(math.Pi/2/x.lifetime*x.edge.generation(re, x.fg, side) + x.s0*x.edge.generation(re, x.fg, one))
	rc := x.notch.seek(volts+x.notchVbi, x.notch.potential)
	arc := func(r float64) float64 { return x.mask + r }
	return total + qni*x.rimGain(&x.notch, volts, x.notchVbi)*2*math.Pi*
		(math.Pi/2/x.lifetime*x.notch.generation(rc, x.fg, x.notch.area)+x.s0*x.notch.generation(rc, x.fg, arc))
}

// rimGain is 1/(1-I) of a curved junction, at the voltage that is as far from the
// model's breakdown as the applied one is from the calibrated.
func (x *die) rimGain(c *rim, volts, vbi float64) float64 {
	return gainOf(c.multiplication(c.seek(volts/x.nat.rim+vbi, c.potential), &x.law))
}

// cob is the plane junction, the quarter-cylinder along the edge, and the stray
// capacitance, at an applied collector-base voltage.
func (x *die) cob(volts float64) float64 {
	l, ok := x.layerAt(volts)
	if !ok {
		return math.NaN()
	}
	x.rims()
	ri := x.edge.seek(volts+x.edgeVbi, x.edge.potential)
	rim := permittivity * x.rimC * (math.Pi / 2) / math.Log(x.edge.outer(ri)/ri)
	return permittivity*x.areaC/l.width() + rim + x.stray
}

// saturation is the voltage left of two forward junctions at a forced gain:
// kT/q ln((1 + (forced+1)/reverse gain) / (1 - forced/hFE)). NaN when the device
// is not saturated.
func (x *die) saturation(t *Test) float64 {
	forced := t.Current / t.BaseCurrent
	drive := 1 - forced/x.gain(5, t.Current)
	if !(drive > 0) {
		return math.NaN()
	}
	return thermal(x.kelvin) * math.Log((1+(forced+1)/x.reverse)/drive)
}

func (x *die) vcesat(t *Test) float64 {
	return x.saturation(t) + t.Current*(x.fixed+x.modular*x.epiResistance())
}

// iceo is the leakage that the open base amplifies, with the gain at that very
// current; +Inf at and above BVceo.
func (x *die) iceo(volts float64) float64 {
	base := x.leakage(volts, true)
	m := x.multiplied(volts)
	current := base * 10
	for range 40 {
		h := x.gain(5, current)
		left := 1 - m*h/(1+h)
		if !(left > 0) {
			return math.Inf(1)
		}
		next := base / left
		if math.Abs(next-current) < 1e-9*current {
			break
		}
		current = math.Sqrt(current * next)
	}
	return current
}

// proxy holds the tests of which only direction and order are modelled: the
// reference has no values for them.
func (x *die) proxy(t *Test) float64 {
	switch t.Measures {
	case Vbesat:
		// The emitter's third of the fixed resistance carries both currents.
		_, _, gb, _ := x.gummel(5)
		ni := intrinsic(x.kelvin)
		return thermal(x.kelvin)*math.Log(t.Current*gb/(charge*x.areaE*ni*ni)) + (t.Current+t.BaseCurrent)*x.fixed/3
	case Rb:
		// A stripe emitter: a twelfth of the pinched sheet under it and, on both
		// sides, a gap half as wide of the full base.
		width, length := 2*x.areaE/x.rimE, x.rimE/2
		_, _, _, pinched := x.gummel(t.Voltage)
		open := simpson(func(pos float64) float64 {
			na := x.prof.acceptors(pos)
			return charge * MobilityHoles(na, x.kelvin) * (na - x.prof.nd)
		}, 0, x.prof.xjc*(1-1e-9), 40)
		return width / length * (1/(12*pinched) + 1/(4*open))
	case FT:
		// Base transit (a graded base halves it), collector transit at 1e7 cm/s, and
		// the charging of both junctions.
		l, _, _, _ := x.gummel(t.Voltage)
		wb := l.xp - x.xje
		mid := x.prof.acceptors((l.xp + x.xje) / 2)
		transit := wb * wb / (4 * thermal(x.kelvin) * MobilityElectrons(mid, x.kelvin))
		transit += l.width() / 2e7
		cje := x.areaE * math.Sqrt(permittivity*charge*x.prof.acceptors(x.xje)/(2*baseLayerPotential))
		transit += (cje + permittivity*x.areaC/l.width()) * thermal(x.kelvin) / t.Current
		return 1 / (2 * math.Pi * transit)
	}
	return math.NaN()
}

// endlessWidth is how far the depletion layer would reach into epi without end at
// the open-base breakdown of a gain, cm from the base junction: the wd of
// x = W/wd.
func (x *die) endlessWidth(gain float64) float64 {
	free := x.prof
	free.t, free.lam = x.prof.xjc+1, 0 // a centimetre
	l, ok := free.atLevel(1/(1+gain), &x.law, nil)
	if !ok {
		return math.NaN()
	}
	return l.xn - free.xjc
}
