package junction

import "math"

// Range of field in which the ionisation coefficients were fitted, V/cm. At
// BVceo of an epi transistor the peak field is 1.2e5 to 2.2e5, mostly below it:
// one reason why levels are anchored to a baseline and the model gives ratios.
const (
	FittedFieldMin = 1.75e5
	FittedFieldMax = 6e5
)

// ionisation holds the impact ionisation law of one temperature: Chynoweth's
// a exp(-b/E) for electrons and for holes below and above a field.
type ionisation struct {
	an, bn             float64
	apLow, bpLow       float64
	apHigh, bpHigh, at float64
}

// overstraeten returns the ionisation law of van Overstraeten and de Man at a
// temperature, with b multiplied by a field scale (1 as published; a product's
// own scale makes its BVceo come out at the baseline).
//
// Source: van Overstraeten and de Man, Solid-State Electron. 13 (1970) 583; the
// switch at 4e5 V/cm from memory. Temperature by the factor
// tanh(Eph/2kT0)/tanh(Eph/2kT) on a and b, Eph = 0.063 eV: from memory, it gives
// the known rise of breakdown with temperature (about +0.1 %/K).
func overstraeten(kelvin, scale float64) ionisation {
	g := 1.0
	if kelvin != RoomTemperature {
		g = math.Tanh(0.063/(2*thermal(RoomTemperature))) / math.Tanh(0.063/(2*thermal(kelvin)))
	}
	b := g * scale
	return ionisation{
		an: 7.03e5 * g, bn: 1.231e6 * b,
		apLow: 1.582e6 * g, bpLow: 2.036e6 * b,
		apHigh: 6.71e5 * g, bpHigh: 1.693e6 * b, at: 4e5 * b,
	}
}

// negligible is the field below which ionisation is left out, V/cm: at 5e4 the
// electrons' coefficient is 1e-5 per cm.
const negligible = 5e4

// rates returns the coefficients of electrons and holes at a field, 1/cm.
func (s *ionisation) rates(field float64) (electrons, holes float64) {
	if field < negligible {
		return 0, 0
	}
	electrons = s.an * math.Exp(-s.bn/field)
	if field < s.at {
		return electrons, s.apLow * math.Exp(-s.bpLow/field)
	}
	return electrons, s.apHigh * math.Exp(-s.bpHigh/field)
}

// IonisationRates returns the ionisation coefficients of electrons and holes in
// silicon at 300 K and a field in V/cm, per cm. They are NaN below
// FittedFieldMin and above FittedFieldMax; the integrals of this package use the
// same law beyond that range and say so where it matters.
//
// Source: van Overstraeten and de Man, Solid-State Electron. 13 (1970) 583.
func IonisationRates(field float64) (electrons, holes float64) {
	if !(field >= FittedFieldMin && field <= FittedFieldMax) {
		return math.NaN(), math.NaN()
	}
	s := overstraeten(RoomTemperature, 1)
	return s.rates(field)
}

// fulopRate is Fulop's effective coefficient for both carriers, per cm.
//
// Source: Fulop, Solid-State Electron. 10 (1967) 39; 1.8e-35 from memory.
func fulopRate(field float64) float64 {
	e2 := field * field
	return 1.8e-35 * e2 * e2 * e2 * field
}

// multiplier walks along a field line from the base to the collector and sums the
// ionisation integral of electrons that enter from the base,
//
//	I = integral of an exp(-integral of (an - ap)),   multiplication = 1/(1 - I).
//
// I = 1 is avalanche breakdown (for either carrier), I = 1/(1+hFE) is that of an
// open-base transistor. Panels are walked in order, each with its field at the
// middle and the end; both integrals are of fourth order in the panel.
type multiplier struct {
	law    *ionisation
	sum    float64 // I so far
	inner  float64 // integral of an - ap so far
	f0, d0 float64 // an exp(-inner) and an - ap at the panel's start
}

func (m *multiplier) start(field float64) {
	a, b := m.law.rates(field)
	m.f0, m.d0 = a*math.Exp(-m.inner), a-b
}

func (m *multiplier) panel(h, middle, end float64) {
	a1, b1 := m.law.rates(middle)
	a2, b2 := m.law.rates(end)
	if a1 == 0 && a2 == 0 && m.f0 == 0 {
		m.d0 = 0
		return
	}
	d1, d2 := a1-b1, a2-b2
	mid := m.inner + h/24*(5*m.d0+8*d1-d2)
	m.inner += h / 6 * (m.d0 + 4*d1 + d2)
	f1, f2 := 0.0, 0.0
	if a1 > 0 {
		f1 = a1 * math.Exp(-mid)
	}
	if a2 > 0 {
		f2 = a2 * math.Exp(-m.inner)
	}
	m.sum += h / 6 * (m.f0 + 4*f1 + f2)
	m.f0, m.d0 = f2, d2
}

// enhancement is 1 + Gamma, by which a field raises generation through traps by
// tunnelling; fg is [enhancementField].
//
// Source: Hurkx, Klaassen and Knuvers, IEEE Trans. Electron Devices 39 (1992) 331,
// Gamma = 2 sqrt(3 pi) u exp(u^2), u = E/fg; from memory.
func enhancement(field, fg float64) float64 {
	u := field / fg
	return 1 + 6.139960247678931*u*math.Exp(u*u)
}

// enhancementField is sqrt(24 m (kT)^3)/(q hbar) for a tunnelling mass of a
// quarter of the electron's, V/cm: 3.688e5 at 300 K.
func enhancementField(kelvin float64) float64 {
	const hbar, mass = 1.054571817e-34, 9.1093837015e-31
	kt := boltzmann * kelvin
	return math.Sqrt(24*0.25*mass*kt*kt*kt) / (charge * hbar) / 100
}
