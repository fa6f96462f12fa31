package synth

import (
	"fmt"
	"math"

	"kneepoint/config"
	"kneepoint/stats/junction"
)

// forward turns a die's latents into what each of a program's tests would ideally
// read, in the test's unit: [Laws] or [Physics], made ready for the program.
type forward interface {
	values(dst []float64, p *Process)
}

// Physics is the device model in place of [Laws]: a variant of it that believes
// something else of silicon and of the base than the model that analyses lots. It
// supplies ratios; levels stay the tests' Typical values. It is safe for
// concurrent use.
type Physics struct {
	model  *junction.Model
	tests  map[string]int // by name, index in the model
	kelvin float64
}

// params are the device model's names for the latents; Temperature is apart.
var params = [NumLatents]junction.Param{
	EpiThickness: junction.EpiThickness, EpiDoping: junction.EpiDoping, BaseDose: junction.BaseDose,
	BaseDepth: junction.BaseDepth, EmitterDepth: junction.EmitterDepth, UpDiffusion: junction.UpDiffusion,
	EdgeRadius: junction.EdgeRadius, OxideCharge: junction.OxideCharge, Lifetime: junction.Lifetime,
	SurfaceVelocity: junction.SurfaceVelocity, EmitterGummel: junction.EmitterGummel,
	SeriesResistance: junction.SeriesResistance, Temperature: junction.Temperature,
}

// NewPhysics builds variant number n of a product's device model; 0 is the model
// as it is, the others have base profile, band-gap narrowing, field-enhanced
// generation, recombination, current spreading, base dose, oxide charge and
// conductivity modulation drawn around it, and are then anchored to the product's
// baseline: what is left is what nobody can know of a product beforehand. It takes
// some tenths of a second.
//
// The error says what the product lacks, or is junction.ErrPolarity.
func NewPhysics(p *config.Product, n int) (*Physics, error) {
	if p.Device == nil {
		return nil, fmt.Errorf("%s: the device model needs a device block", p.File)
	}
	dev := deviceOf(p)
	var v junction.Variation
	if n > 0 {
		d := newDraws(root(uint64(n)).at(branchPhysics))
		v = junction.Variation{Narrowing: d.factor(0.1), Tunnelling: d.factor(0.15),
			OxideDepth: d.factor(0.3), Spreading: d.between(0.6, 1.2), ExponentialBase: d.chance(0.3)}
		dev.BaseSurfaceCM3 *= d.factor(0.15)
		dev.OxideChargeCM2 = 5e10 * d.factor(0.5)
		dev.SurfaceVelocityCMS = 20 * d.factor(0.35)
		dev.Modulation = min(0.4*d.factor(0.25), 0.9)
		dev.StrayF = 0.3e-12 * d.factor(0.3)
		dev.ReverseGain = 4 * d.factor(0.3)
	}
	var tests []junction.Test
	gains := 0
	for i := range p.Tests {
		if t := &p.Tests[i]; t.Measures != "" {
			tests = append(tests, junctionTest(p, t))
			if t.Measures == junction.HFE {
				gains++
			}
		}
	}
	if n > 0 && gains < 2 { // two gains tell the recombination between them
		v.Recombination = newDraws(root(uint64(n)).at(branchPhysics)).under(1).factor(0.5)
	}
	m, err := junction.NewVariant(dev, v, tests...)
	if err != nil {
		return nil, fmt.Errorf("%s: %w", p.File, err)
	}
	f := &Physics{model: m, tests: map[string]int{}, kelvin: m.Device.TemperatureK}
	for i, t := range m.Tests {
		f.tests[t.Name] = i
	}
	return f, nil
}

// deviceOf is the product's device as the model takes it; what is not given stays
// zero, but for the base doping, which a variant multiplies.
func deviceOf(p *config.Product) junction.Device {
	d := p.Device
	return junction.Device{
		Polarity: d.Polarity, TemperatureK: 273.15 + p.TestTemperatureC,
		EpiThicknessUM: or(d.Epi.ThicknessUM.Target, 0), EpiResistivityOhmCM: or(d.Epi.ResistivityOhmCM.Target, 0),
		SiliconConsumedUM: or(d.Epi.SiliconConsumedUM.Value, 0), UpDiffusionUM: or(d.Epi.UpDiffusionUM.Value, 0),
		SubstrateCM3: or(d.Epi.SubstrateCM3.Value, 0),
		BaseDepthUM:  or(d.Base.JunctionDepthUM.Value, 0), BaseSurfaceCM3: or(d.Base.SurfaceConcentrationCM3.Value, 1e18),
		BaseAreaUM2: or(d.Base.AreaUM2.Value, 0), BasePerimeterUM: or(d.Base.PerimeterUM.Value, 0),
		EmitterDepthUM: or(d.Emitter.DepthUM.Value, 0), EmitterAreaUM2: or(d.Emitter.AreaUM2.Value, 0),
		EmitterPerimeterUM: or(d.Emitter.PerimeterUM.Value, 0),
		CornerRadiusUM:     or(d.Edge.CornerRadiusUM.Value, 0), FieldPlate: d.Edge.FieldPlate,
	}
}

// junctionTest is a test of the product file with its bias by name: voltages VCB,
// VCE or VEB, collector and base current.
func junctionTest(p *config.Product, t *config.Test) junction.Test {
	out := junction.Test{Name: t.Name, Measures: t.Measures}
	for _, c := range t.At {
		switch {
		case c.Unit.Base == "V":
			out.Voltage = math.Abs(c.Value)
		case c.Unit.Base == "A" && c.Name == "IB":
			out.BaseCurrent = math.Abs(c.Value)
		case c.Unit.Base == "A":
			out.Current = math.Abs(c.Value)
		}
	}
	if p.Baseline != nil {
		if b, ok := p.Baseline.Tests[t.Name]; ok && b.Median > 0 {
			out.Baseline.Median = b.Median
		}
	}
	return out
}

// bound is a Physics for one program of tests.
type bound struct {
	*Physics
	tests []Test
	index []int // in the model, by test; -1: no test that it knows
}

func (f *Physics) bind(tests []Test) *bound {
	b := &bound{Physics: f, tests: tests}
	for _, t := range tests {
		i, ok := f.tests[t.Name]
		if !ok {
			i = -1
		}
		b.index = append(b.index, i)
	}
	return b
}

// values writes what each test would ideally read. Where the model has no
// solution the transistor does not work: it does not saturate, or has no base
// left to hold a voltage.
func (b *bound) values(dst []float64, p *Process) {
	var q junction.Process
	for l, x := range p {
		q[params[l]] = x
	}
	q[junction.Temperature] = math.Log1p(p[Temperature] / b.kelvin)
	var buf [32]float64
	var logs []float64
	if n := len(b.model.Tests); n <= len(buf) {
		logs = buf[:n]
	} else {
		logs = make([]float64, n)
	}
	b.model.LogRatios(logs, &q)
	for t := range b.tests {
		r := 1.0
		if i := b.index[t]; i >= 0 {
			r = math.Exp(logs[i])
		}
		if math.IsNaN(r) {
			if r = 0; kindOf(b.tests[t].Measures).bin == 8 {
				r = math.Inf(1)
			}
		}
		dst[t] = b.tests[t].Typical * r
	}
	capByBVCBO(dst, b.tests)
}
