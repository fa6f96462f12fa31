package junction

import "math"

// spot is a process point as the tables see it, with what several tests share.
type spot struct {
	p                    *Process
	where                point2
	shift                [len(weak)]float64
	base                 [5]float64 // doping, dose, depth, width, temperature
	kelvin, vt, ni       float64
	recombine            float64 // prefactor, A
	rimN, rimR, rimS     float64
	mask, lifetime, skin float64
	rimLog               float64
	rimKnown             bool
}

// locate lays out a process point for the tables.
func (m *Model) locate(s *spot, p *Process) {
	d := &m.Device
	depth := d.BaseDepthUM * math.Exp(p[BaseDepth])
	lam := d.UpDiffusionUM * math.Exp(p[UpDiffusion])
	net := d.EpiThicknessUM*math.Exp(p[EpiThickness]) - d.SiliconConsumedUM - depth -
		lam*(math.Log(d.SubstrateCM3/d.EpiDopingCM3)-p[EpiDoping])
	nominal := d.netUM()
	m.locateAt(s, math.Log(math.Max(net, 0.02*nominal)/nominal), p)
}

// locateAt is locate with the net thickness given, as the log of its ratio to
// nominal; the grown thickness of p is not read.
func (m *Model) locateAt(s *spot, u float64, p *Process) {
	d := &m.Device
	s.p = p
	s.where = m.grid.point(u, p[EpiDoping])
	for i, w := range weak {
		s.shift[i] = p[w]
	}
	s.kelvin = d.TemperatureK * math.Exp(p[Temperature])
	s.vt, s.ni = thermal(s.kelvin), intrinsic(s.kelvin)

	emitter := d.EmitterDepthUM * math.Exp(p[EmitterDepth])
	depth := d.BaseDepthUM * math.Exp(p[BaseDepth])
	width := (depth - emitter) / (d.BaseDepthUM - d.EmitterDepthUM)
	s.base = [5]float64{p[EpiDoping], p[BaseDose], p[BaseDepth], math.Log(width), p[Temperature]}
	if width <= 0 {
		s.base[3] = math.NaN()
	}

	s.lifetime, s.skin = d.LifetimeS*math.Exp(p[Lifetime]), d.SurfaceVelocityCMS*math.Exp(p[SurfaceVelocity])
	// Base doping at the emitter, which sets the emitter-base layer's width.
	x := emitter / depth
	ratio := math.Log(d.BaseSurfaceCM3/d.EpiDopingCM3) + p[BaseDose] - p[EpiDoping]
	if m.nat.base == exponentialBase {
		ratio *= x
	} else {
		ratio *= x * x
	}
	na := d.BaseSurfaceCM3 * math.Exp(p[BaseDose]-ratio)
	layer := math.Sqrt(2 * permittivity * baseLayerPotential / (charge * na))
	s.recombine = m.nat.recombine * charge * s.ni * layer / 2 * (m.nominal.areaE/s.lifetime + s.skin*m.nominal.rimE)

	under := d.EpiDopingCM3 * math.Exp(p[EpiDoping])
	if !d.FieldPlate {
		under += d.OxideChargeCM2 * math.Exp(p[OxideCharge]) / m.nat.overlay
	}
	s.mask = d.CornerRadiusUM * um * math.Exp(p[MaskRadius])
	s.rimR = p[BaseDepth] + p[EdgeRadius]
	s.rimN = math.Log(under / m.nominal.surface)
	s.rimS = s.mask / (s.mask + m.nominal.rj*math.Exp(s.rimR))
	s.rimKnown = false
}

// plane is a plane quantity's log at a spot.
func (m *Model) plane(table int, s *spot) float64 {
	t := &m.tables[table]
	v := t.f.value(m.grid, &s.where)
	for w, x := range s.shift {
		if x != 0 {
			v += x * t.weak[w].value(m.grid, &s.where)
		}
	}
	return v
}

// rim is ln of the edge's and corners' breakdown, calibrated.
func (m *Model) rim(s *spot) float64 {
	if !s.rimKnown {
		t := m.rims
		s.rimLog = math.Log(m.nat.rim) + t.log(s.rimN, s.rimR, s.rimS) + t.dose*s.p[BaseDose] + t.heat*s.p[Temperature]
		s.rimKnown = true
	}
	return s.rimLog
}

// gain is hFE by the tables.
func (m *Model) gain(gummel int, current float64, s *spot) float64 {
	gb := math.Exp(m.base.at[gummel].number.value(&s.base))
	ge := m.Device.EmitterGummel * math.Exp(s.p[EmitterGummel])
	if s.kelvin != RoomTemperature {
		ge *= math.Exp(-emitterNarrowing * (1/s.vt - 1/thermal(RoomTemperature)))
	}
	is := charge * m.nominal.areaE * s.ni / gb * s.ni
	return 1 / (gb/ge + s.recombine/math.Sqrt(is*current))
}

// log is the natural log of a test's reading at a spot, SI.
func (m *Model) log(test int, s *spot) float64 {
	t, r := &m.Tests[test], &m.recipes[test]
	switch t.Measures {
	case BVcbo, BVces:
		return math.Min(m.plane(r.second, s), m.rim(s))
	case BVceo:
		h := math.Log1p(m.gain(0, t.Current, s)) - math.Log1p(m.base.gain)
		v := m.plane(r.first, s) + h*(m.plane(r.first+1, s)+h*m.plane(r.first+2, s))
		return math.Min(v, math.Min(m.plane(r.second, s), m.rim(s)))
	case PlaneBV:
		return m.plane(r.second, s)
	case BVebo:
		return r.bvebo.value(&[4]float64{s.p[BaseDose], s.p[Temperature]})
	case HFE:
		return math.Log(m.gain(r.gummel, t.Current, s))
	case Rpinch:
		return -m.base.at[r.gummel].sheet.value(&s.base)
	case EarlyVoltage:
		return math.Log(charge/permittivity) + m.base.at[r.gummel].atoms.value(&s.base) + m.plane(r.first, s)
	case Multiplication:
		return m.plane(r.first, s)
	case AreaLeakage:
		return m.plane(r.first, s) + math.Log(charge*s.ni/2/s.lifetime*m.nominal.areaC)
	case Icbo:
		return math.Log(m.leak(r, s))
	case Iceo:
		return math.Log(m.openLeak(t, r, s))
	case Iebo:
		// The layer widens from the forward to the reverse voltage.
		return math.Log(s.recombine / m.nat.recombine * math.Sqrt((t.Voltage+0.9)/baseLayerPotential))
	case Cob:
		k := r.leak
		rim := k.cap[0] + k.cap[1]*s.rimN + k.cap[2]*s.rimR + k.cap[3]*s.p[BaseDose]
		return math.Log(permittivity*m.nominal.areaC*math.Exp(-m.plane(r.first, s)) + m.nominal.rimC*math.Exp(rim) + m.Device.StrayF)
	case Rc:
		return math.Log(m.fixed(s) + math.Exp(m.plane(r.first, s)))
	case Vcesat:
		forced := t.Current / t.BaseCurrent
		drive := 1 - forced/m.gain(0, t.Current, s)
		if !(drive > 0) {
			return math.NaN()
		}
		mod := m.Device.Modulation * math.Exp(s.p[Modulation])
		return math.Log(s.vt*math.Log((1+(forced+1)/m.Device.ReverseGain)/drive) + t.Current*(m.fixed(s)+mod*math.Exp(m.plane(r.first, s))))
	}
	return r.line.value(s.p)
}

func (m *Model) fixed(s *spot) float64 {
	return m.Device.FixedOhm * math.Exp(s.p[SeriesResistance])
}

// leak is Icbo by the tables: +Inf at and above breakdown.
func (m *Model) leak(r *recipe, s *spot) float64 {
	k := r.leak
	if math.Log(k.volts) >= math.Min(m.plane(r.second, s), m.rim(s)) {
		return math.Inf(1)
	}
	qni := charge * s.ni / 2
	total := qni / s.lifetime * m.nominal.areaC * math.Exp(m.plane(r.first, s))
	slopes := func(c *[4]float64) float64 {
		return math.Exp(c[0] + c[1]*s.rimN + c[2]*s.rimR + c[3]*s.p[BaseDose])
	}
	bulk, skin := slopes(&k.bulk), slopes(&k.skin)
	// The straight edge breaks down above the corner.
	edge := k.gain(k.volts / (math.Exp(m.rims.log(s.rimN, s.rimR, 1)) * m.nat.rim))
	corner := k.gain(k.volts / math.Exp(m.rim(s)))
	total += qni * edge * m.nominal.rimC * (bulk/s.lifetime + skin*s.skin)
	grow := bulk / math.Exp(k.bulk[0])
	return total + qni*corner*grow*((k.bend[0]+k.bend[1]*s.mask)/s.lifetime+(k.bendSkin[0]+k.bendSkin[1]*s.mask)*s.skin)
}

// openLeak is Iceo by the tables: +Inf at and above BVceo.
func (m *Model) openLeak(t *Test, r *recipe, s *spot) float64 {
	base := m.leak(r, s)
	mult := 1 + math.Exp(m.plane(r.third, s))
	current := base * 10
	for range 40 {
		h := m.gain(0, current, s)
		left := 1 - mult*h/(1+h)
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
