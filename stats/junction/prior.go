package junction

import "math"

// Prior is what is believed of a lot or wafer before its data: for each parameter
// the sigma of the log of its ratio to nominal (0: known exactly), and how far the
// model's own responses are trusted.
//
// Thickness, base depth and up-diffusion act through the net thickness;
// [Model.NetSigma] is the sigma that follows. SeriesResistance and Modulation are
// nuisances of the saturation model: give Modulation a small sigma only where
// conductivity modulation has been calibrated, since it decides whether Vcesat
// measures thickness.
type Prior struct {
	Sigma Process
	// Knee is the sigma of the log of W/wd of the nominal device: how well the
	// product file's thickness and doping and the ionisation law place the knee.
	Knee float64
	// GainSlope is the relative sigma of d ln BVceo / d ln hFE.
	GainSlope float64
	// Response multiplies the usual relative error of each test's response to
	// thickness and doping (see responseError); 1 is usual, 0 trusts the model.
	Response float64
}

// UsualPrior is the spread between lots of a process in control (common practice,
// no source): 5 % of thickness, 8 % of doping, 30 % of up-diffusion, and the
// nuisances of the reference page.
func UsualPrior() Prior {
	return Prior{
		Sigma: Process{EpiThickness: 0.05, EpiDoping: 0.08, BaseDose: 0.08, BaseDepth: 0.05, EmitterDepth: 0.08,
			UpDiffusion: 0.3, EdgeRadius: 0.1, OxideCharge: 0.7, Lifetime: 0.7, SurfaceVelocity: 0.7,
			EmitterGummel: 0.12, SeriesResistance: 0.3, Modulation: 0.25},
		Knee: 0.03, GainSlope: 0.15, Response: 1,
	}
}

// SpecSigma is the sigma of a log ratio that a spec's limits stand for when a third
// of their half-width is one sigma: a supplier who just meets it.
func SpecSigma(lower, upper float64) float64 {
	if !(lower > 0 && upper > lower) {
		return math.NaN()
	}
	return math.Log(upper/lower) / 6
}

// NetSigma is the prior sigma of the log of net thickness: thickness, base depth
// and up-diffusion added in squares over what they leave.
func (m *Model) NetSigma(p Prior) float64 {
	d := &m.Device
	t := d.EpiThicknessUM * p.Sigma[EpiThickness]
	return math.Hypot(t, m.offsetSigma(p)) / d.netUM()
}

// offsetSigma is the sigma of base depth and up-diffused tail together, um.
func (m *Model) offsetSigma(p Prior) float64 {
	d := &m.Device
	tail := d.UpDiffusionUM * math.Log(d.SubstrateCM3/d.EpiDopingCM3)
	return math.Hypot(d.BaseDepthUM*p.Sigma[BaseDepth], tail*p.Sigma[UpDiffusion])
}

// UsualSigma is the sigma of the log of a wafer's or lot's level that measurement
// leaves: tester and contact, not the dice's own spread (common practice, no
// source).
func UsualSigma(measures string) float64 {
	switch measures {
	case BVceo, BVcbo, BVces, BVebo, PlaneBV, Cob:
		return 0.01
	case Vcesat, Rc:
		return 0.02
	case HFE, Rb, FT, Rpinch:
		return 0.03
	case EarlyVoltage:
		return 0.05
	case Icbo, Iceo, Iebo, AreaLeakage, Multiplication:
		return 0.1
	}
	return 0.01
}

// responseError is the usual relative error of a test's response to thickness and
// doping: what reputable models differ by when their levels are anchored alike.
func responseError(measures string) float64 {
	switch measures {
	case Cob:
		return 0.03
	case BVceo, BVcbo, BVces, PlaneBV, Rc, Vcesat:
		return 0.05
	case Multiplication, Icbo, Iceo, AreaLeakage:
		return 0.15
	}
	return 0.10
}

// sharedError is the part of a response's relative error that all tests of the
// collector's depletion layer have in common: how much of the junction's voltage
// falls in the base. A Gaussian and an exponential base part by 10 % there.
func sharedError(measures string) float64 {
	switch measures {
	case Cob, BVceo, PlaneBV, Icbo, Iceo, AreaLeakage, Multiplication:
		return 0.06
	}
	return 0
}

// nuisances are the parameters that are integrated out around net thickness and
// doping. Up-diffusion is there for the shape of the tail at a given net
// thickness; a corner acts like the edge.
var nuisances = [...]Param{BaseDose, BaseDepth, EmitterDepth, UpDiffusion, EdgeRadius, OxideCharge, Lifetime, SurfaceVelocity,
	EmitterGummel, SeriesResistance, Modulation, Temperature}

const numNuisances = len(nuisances)
