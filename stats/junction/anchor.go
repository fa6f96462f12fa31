package junction

import (
	"fmt"
	"math"
)

// anchor moves what nobody knows beforehand (emitter Gummel number, ionisation
// fields, stray capacitance, fixed resistance, lifetime) until the model's levels
// are the baseline's. Thickness, doping and junction depths stay as the product
// says: they are what is to be found later, as ratios to this device.
//
// Order matters: gain before BVceo, which depends on it, and that before the rim.
func (m *Model) anchor() error {
	d := &m.Device
	x := d.make(&Process{}, &m.nat)
	if g := x.gain(5, 2e-3); math.IsNaN(g) {
		return fmt.Errorf("junction: at VCE 5 V the collector's depletion layer reaches the emitter: the base (%g to %g um, %g cm^-3 at the surface) is too thin or too lightly doped",
			d.EmitterDepthUM, d.BaseDepthUM, d.BaseSurfaceCM3)
	}
	m.anchorGain()
	m.anchorBreakdown()
	m.anchorRim()
	m.anchorSaturation()
	m.anchorCapacitance()
	m.anchorLeakage()
	return nil
}

func (m *Model) say(format string, args ...any) {
	m.Assumed = append(m.Assumed, fmt.Sprintf(format, args...))
}

// at is the anchored device at nominal, as it stands.
func (m *Model) at() *die { return m.Device.make(&Process{}, &m.nat) }

// pick returns the test of a kind with a baseline for which better is largest, nil
// when there is none.
func (m *Model) pick(measures string, better func(*Test) float64) *Test {
	var best *Test
	for i := range m.Tests {
		t := &m.Tests[i]
		if t.Measures == measures && t.Baseline.Median > 0 && (best == nil || better(t) > better(best)) {
			best = t
		}
	}
	return best
}

func byCurrent(t *Test) float64    { return t.Current }
func byVoltage(t *Test) float64    { return t.Voltage }
func byLowVoltage(t *Test) float64 { return -t.Voltage }
func byLowest(t *Test) float64     { return -t.Current }

// anchorGain sets the emitter Gummel number by the hFE at high current, and
// emitter-base recombination by how hFE falls to a current at least ten times
// smaller.
func (m *Model) anchorGain() {
	high, low := m.pick(HFE, byCurrent), m.pick(HFE, byLowest)
	if high == nil {
		return
	}
	x := m.at()
	_, _, gb, _ := x.gummel(high.Voltage)
	ni := intrinsic(x.kelvin)
	is := charge * x.areaE * ni / gb * ni
	part := func(t *Test) float64 { return x.recombination() / math.Sqrt(is*t.Current) }
	if low.Current*10 <= high.Current && low.Voltage == high.Voltage {
		scale := (1/low.Baseline.Median - 1/high.Baseline.Median) / (part(low) - part(high))
		m.nat.recombine *= math.Min(math.Max(scale, 0.02), 50) // part has the present one in it
		if scale < 0.02 || scale > 50 {
			m.say("hFE of %.4g at %.3g A against %.4g at %.3g A is no usual fall towards low current; recombination is taken at its limit",
				low.Baseline.Median, low.Current, high.Baseline.Median, high.Current)
		}
		x = m.at()
	}
	ideal := 1/high.Baseline.Median - part(high)
	if ideal < 0.05/high.Baseline.Median { // the measured gain is nearly all recombination
		ideal = 0.5 / high.Baseline.Median
		m.nat.recombine *= ideal / part(high)
	}
	m.Device.EmitterGummel = gb / ideal
	if x.kelvin != RoomTemperature {
		m.Device.EmitterGummel *= math.Exp(emitterNarrowing * (1/thermal(x.kelvin) - 1/thermal(RoomTemperature)))
	}
}

// The field scale is kept within what separates reputable models: 20 % in BV.
const minFieldScale, maxFieldScale = 0.75, 1.3

// anchorBreakdown scales the ionisation fields to the baseline's BVceo.
func (m *Model) anchorBreakdown() {
	t := m.pick(BVceo, byCurrent)
	if t == nil {
		return
	}
	level := 1 / (1 + m.at().gain(5, t.Current))
	miss := func(scale float64) float64 {
		m.nat.fieldScale = scale
		return math.Log(m.at().planeBreakdown(level) / t.Baseline.Median)
	}
	lo, hi := miss(minFieldScale), miss(maxFieldScale)
	switch {
	case lo > 0:
		m.nat.fieldScale = minFieldScale
	case hi < 0:
		m.nat.fieldScale = maxFieldScale
	case math.IsNaN(lo) || math.IsNaN(hi):
		m.nat.fieldScale = 1
	default:
		m.nat.fieldScale = root(miss, minFieldScale, maxFieldScale, 1e-6)
	}
	if off := miss(m.nat.fieldScale); !(math.Abs(off) < 0.02) {
		m.say("baseline BVceo of %.4g V is %.0f %% from what this epi and gain can have at any reasonable ionisation law: check epi thickness, resistivity and base depth in the product file",
			t.Baseline.Median, 100*math.Abs(math.Expm1(off)))
	}
}

// anchorRim scales the curved junction to the baseline's BVcbo, when that is below
// the plane junction's.
func (m *Model) anchorRim() {
	t := m.pick(BVcbo, byVoltage)
	if t == nil {
		return
	}
	x := m.at()
	lowest := math.Min(x.edge.breakdown(&x.law, x.kelvin), x.notch.breakdown(&x.law, x.kelvin))
	plane := x.planeBreakdown(1)
	want := t.Baseline.Median
	if want > 0.98*plane {
		m.say("baseline BVcbo of %.4g V is at the plane junction's limit (%.4g V by the model): it is taken as limited by the epi, not by the edge", want, plane)
		want = 1.1 * plane
	}
	m.nat.rim = want / lowest
}

// anchorSaturation splits the baseline's Vcesat (or collector resistance) into the
// epi's part and a fixed one. The epi's part is the ohmic resistance under the
// usual modulation, as far as the level leaves room for it.
func (m *Model) anchorSaturation() {
	x := m.at()
	epi := x.epiResistance()
	if t := m.pick(Rc, byCurrent); t != nil {
		m.Device.FixedOhm = math.Max(t.Baseline.Median-epi, 0.05*t.Baseline.Median)
		if epi > t.Baseline.Median {
			m.say("baseline collector resistance of %.3g ohm is below the epi's %.3g ohm by the model: the emitter is wider or current spreads more than the product file says", t.Baseline.Median, epi)
		}
	}
	t := m.pick(Vcesat, byCurrent)
	if t == nil {
		return
	}
	ohm := (t.Baseline.Median - x.saturation(t)) / t.Current
	switch part := m.Device.Modulation * epi; {
	case !(ohm > 0):
		m.say("baseline Vcesat of %.3g V is below what two junctions leave (%.3g V): it is taken as all junction", t.Baseline.Median, x.saturation(t))
		m.Device.FixedOhm, m.Device.Modulation = 1e-3, 1e-3
	case m.pick(Rc, byCurrent) != nil: // the fixed part is known
		m.Device.Modulation = math.Min(math.Max((ohm-m.Device.FixedOhm)/epi, 0.05), 1)
	case part < 0.95*ohm:
		m.Device.FixedOhm = ohm - part
	default:
		m.Device.Modulation, m.Device.FixedOhm = 0.8*ohm/epi, 0.2*ohm
	}
}

// anchorCapacitance takes as stray what the junction does not explain of Cob at
// the lowest bias, where the layer is far from the substrate.
func (m *Model) anchorCapacitance() {
	t := m.pick(Cob, byLowVoltage)
	if t == nil {
		return
	}
	m.Device.StrayF = 0
	own := m.at().cob(t.Voltage)
	want := t.Baseline.Median
	if rest := want - own; rest >= 0 && rest <= 0.5*want {
		m.Device.StrayF = rest
		return
	}
	// The area is not what the product file says: scale it, stray a tenth.
	m.Device.StrayF = 0.1 * want
	f := 0.9 * want / own
	m.Device.BaseAreaUM2 *= f
	m.Device.BasePerimeterUM *= f
	m.say("baseline Cob of %.3g pF would need a base area %.2f times that of the product file; it is scaled", want*1e12, f)
}

// anchorLeakage sets the lifetime, and with it surface generation, by Icbo.
func (m *Model) anchorLeakage() {
	t := m.pick(Icbo, byLowVoltage)
	if t == nil {
		return
	}
	own := m.at().value(t)
	if math.IsNaN(own) || math.IsInf(own, 0) {
		return
	}
	f := t.Baseline.Median / own
	m.Device.LifetimeS /= f
	m.Device.SurfaceVelocityCMS *= f
	m.nat.recombine /= f // gain keeps its own anchor
}
