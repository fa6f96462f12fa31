package junction

import (
	"errors"
	"fmt"
	"math"
)

// Device is a vertical epi transistor as its maker knows it. Lengths are in um,
// areas in um^2, densities in cm^-3, everything else SI unless the name says. Zero
// means not given: [NewModel] then assumes a usual value and says so in
// Model.Assumed.
type Device struct {
	Polarity     string  // "npn" or ""; "pnp" is declined
	TemperatureK float64 // of the test; 300 when zero

	EpiThicknessUM      float64 // as grown, surface to the substrate's plateau
	EpiDopingCM3        float64 // or:
	EpiResistivityOhmCM float64 // turned into doping by ASTM F723
	SiliconConsumedUM   float64 // of the epi by oxidation and etching before the base goes in
	UpDiffusionUM       float64 // length lam of the substrate's exponential tail
	SubstrateCM3        float64

	BaseDepthUM     float64 // base-collector junction
	BaseSurfaceCM3  float64 // base doping at the surface
	BaseAreaUM2     float64
	BasePerimeterUM float64

	EmitterDepthUM     float64
	EmitterAreaUM2     float64
	EmitterPerimeterUM float64
	EmitterGummel      float64 // s/cm^4: sets the gain; from the baseline's hFE when there is one

	CornerRadiusUM float64 // of the base mask
	EdgeFactor     float64 // lateral over vertical base depth, about 0.9
	FieldPlate     bool    // screens the oxide charge
	OxideChargeCM2 float64

	LifetimeS          float64 // generation and recombination lifetime
	SurfaceVelocityCMS float64

	StrayF      float64 // capacitance that is no junction's: pad and package
	FixedOhm    float64 // substrate, back and metal
	Modulation  float64 // part of the epi's resistance that is left in saturation
	ReverseGain float64
}

// Param is one process parameter of a device.
type Param int

// The process parameters. EpiThickness to EmitterGummel are those of the reference
// page's section 4; the rest are what its saturation model and a warm chuck add.
const (
	EpiThickness Param = iota
	EpiDoping
	BaseDose // surface concentration of the base
	BaseDepth
	EmitterDepth
	UpDiffusion
	EdgeRadius // of the base junction at the surface over its depth
	MaskRadius // of the mask's corners
	OxideCharge
	Lifetime
	SurfaceVelocity
	EmitterGummel
	SeriesResistance
	Modulation
	Temperature // absolute
	NumParams   = iota
)

var paramNames = [NumParams]string{"epi thickness", "epi doping", "base dose", "base depth", "emitter depth",
	"up-diffusion", "edge radius", "corner radius", "oxide charge", "lifetime", "surface velocity",
	"emitter Gummel number", "series resistance", "conductivity modulation", "temperature"}

// String returns the parameter in the trade's words.
func (p Param) String() string {
	if p < 0 || int(p) >= NumParams {
		return fmt.Sprintf("Param(%d)", int(p))
	}
	return paramNames[p]
}

// Process is where a die, wafer or lot stands: the natural log of each parameter
// over the device's nominal. The zero value is nominal.
type Process [NumParams]float64

// ErrPolarity is what NewModel returns for a pnp device.
var ErrPolarity = errors.New("junction: the device model has references for npn transistors only and declines pnp: " +
	"the other statistics do not need it; leave the device block out of the product file")

// usual are the values of the reference devices, for what a product does not say.
var usual = Device{
	TemperatureK: RoomTemperature, SubstrateCM3: 1e19,
	BaseSurfaceCM3: 1e18, BaseAreaUM2: 60000, BasePerimeterUM: 1000,
	EmitterDepthUM: 0.25, EmitterAreaUM2: 20000, EmitterPerimeterUM: 800, EmitterGummel: 4e13,
	CornerRadiusUM: 20, EdgeFactor: 0.9, OxideChargeCM2: 5e10,
	LifetimeS: 2e-6, SurfaceVelocityCMS: 20, StrayF: 0.3e-12, FixedOhm: 0.3, Modulation: 0.4, ReverseGain: 4,
}

// complete fills in what is not given and says what it assumed, in order of the
// fields.
func (d Device) complete() (Device, []string, error) {
	switch d.Polarity {
	case "", "npn":
	case "pnp":
		return d, nil, ErrPolarity
	default:
		return d, nil, fmt.Errorf("junction: polarity %q, want npn", d.Polarity)
	}
	var said []string
	if d.EpiDopingCM3 == 0 && d.EpiResistivityOhmCM > 0 {
		if d.EpiDopingCM3 = DopingF723(d.EpiResistivityOhmCM); math.IsNaN(d.EpiDopingCM3) {
			return d, nil, fmt.Errorf("junction: epi of %g ohm cm, want %g to %g", d.EpiResistivityOhmCM, F723MinResistivity, F723MaxResistivity)
		}
	}
	fill := func(dst *float64, value float64, text string) {
		if *dst == 0 {
			*dst = value
			if text != "" {
				said = append(said, fmt.Sprintf("%s not given, %g assumed", text, value))
			}
		}
	}
	fill(&d.TemperatureK, usual.TemperatureK, "")
	fill(&d.SubstrateCM3, usual.SubstrateCM3, "substrate doping (cm^-3)")
	fill(&d.BaseSurfaceCM3, usual.BaseSurfaceCM3, "base surface concentration (cm^-3)")
	fill(&d.BaseAreaUM2, usual.BaseAreaUM2, "base area (um^2)")
	fill(&d.BasePerimeterUM, 4*math.Sqrt(d.BaseAreaUM2), "base perimeter (um)")
	fill(&d.EmitterDepthUM, math.Min(usual.EmitterDepthUM, d.BaseDepthUM/3), "emitter depth (um)")
	fill(&d.EmitterAreaUM2, d.BaseAreaUM2/3, "emitter area (um^2)")
	fill(&d.EmitterPerimeterUM, 0.8*d.BasePerimeterUM, "emitter perimeter (um)")
	fill(&d.CornerRadiusUM, usual.CornerRadiusUM, "corner radius (um)")
	fill(&d.EmitterGummel, usual.EmitterGummel, "")
	fill(&d.EdgeFactor, usual.EdgeFactor, "")
	fill(&d.OxideChargeCM2, usual.OxideChargeCM2, "")
	fill(&d.LifetimeS, usual.LifetimeS, "")
	fill(&d.SurfaceVelocityCMS, usual.SurfaceVelocityCMS, "")
	fill(&d.StrayF, usual.StrayF, "")
	fill(&d.FixedOhm, usual.FixedOhm, "")
	fill(&d.Modulation, usual.Modulation, "")
	fill(&d.ReverseGain, usual.ReverseGain, "")
	return d, said, d.check()
}

// check refuses what has no solution, one clear line each.
func (d *Device) check() error {
	for _, c := range []struct {
		name      string
		v, lo, hi float64
	}{
		{"epi thickness (um)", d.EpiThicknessUM, 0.3, 300},
		{"epi doping (cm^-3)", d.EpiDopingCM3, F723MinDoping, F723MaxDoping},
		{"base depth (um)", d.BaseDepthUM, 0.05, 50},
		{"base surface concentration (cm^-3)", d.BaseSurfaceCM3, 2 * d.EpiDopingCM3, 1e21},
		{"emitter depth (um)", d.EmitterDepthUM, 0.005, 0.98 * d.BaseDepthUM},
		{"substrate doping (cm^-3)", d.SubstrateCM3, 10 * d.EpiDopingCM3, 1e21},
		{"temperature (K)", d.TemperatureK, 210, 480},
		{"up-diffusion (um)", d.UpDiffusionUM, 0, d.EpiThicknessUM},
		{"silicon consumed (um)", d.SiliconConsumedUM, 0, d.EpiThicknessUM},
		{"corner radius (um)", d.CornerRadiusUM, 1e-6, 1e5},
		{"base area (um^2)", d.BaseAreaUM2, 1, 1e10}, {"base perimeter (um)", d.BasePerimeterUM, 1, 1e7},
		{"emitter area (um^2)", d.EmitterAreaUM2, 1, 1e10}, {"emitter perimeter (um)", d.EmitterPerimeterUM, 1, 1e7},
	} {
		if !(c.v >= c.lo && c.v <= c.hi) {
			return fmt.Errorf("junction: %s is %g, want %.3g to %.3g", c.name, c.v, c.lo, c.hi)
		}
	}
	if w := d.netUM(); !(w >= 0.1) {
		return fmt.Errorf("junction: base, up-diffusion and consumed silicon leave %.2f um of an epi layer of %g um, want at least 0.1",
			w, d.EpiThicknessUM)
	}
	return nil
}

// netUM is the net epi of the nominal device, um.
func (d *Device) netUM() float64 {
	return d.EpiThicknessUM - d.SiliconConsumedUM - d.BaseDepthUM - d.UpDiffusionUM*math.Log(d.SubstrateCM3/d.EpiDopingCM3)
}
