package build

import (
	"errors"
	"fmt"
	"math"
	"sort"
	"strings"
	"sync"

	"kneepoint/config"
	"kneepoint/stats/junction"
)

// device is a product as the device model takes it.
type device struct {
	*junction.Model
	Prior junction.Prior
	// Own says that the product file has no baseline and the levels are those of the
	// lot's own majority: such a lot cannot be off as a whole, only its wafers from
	// one another.
	Own      bool
	Monitors []int    // model tests that the product does not have: candidates for the next measurement
	Notes    []string // what was left out, assumed or found odd, in sentences
	index    map[string]int
}

// Test is the model's test of a test of the lot, -1 when it has none. Only tests
// with a baseline level are in the model: the model's own levels are good to 10 to
// 20 %, which is more than an epi layer is ever off.
func (d *device) Test(name string) int {
	if i, ok := d.index[strings.ToLower(name)]; ok {
		return i
	}
	return -1
}

// modelTests is the most tests of a product that go into its model: what one
// die's inversion takes.
const modelTests = 15

// deviceModel builds the device model of a product. The levels that it is anchored
// to are the product's baseline; a product without one takes own, the medians of
// the lot's majority by test name, SI (nil: none).
//
// Why says why there is no model: no device block, a polarity or geometry that the
// model declines, or no test that it knows.
func deviceModel(p *config.Product, own map[string]float64) (d *device, why string) {
	switch {
	case p == nil:
		return nil, "there is no product file to describe the device"
	case p.Device == nil:
		return nil, "the product file has no device block"
	}
	dev := junctionDevice(p)
	switch {
	case p.Device.Polarity == "pnp": // before what else may be missing
		return nil, plainError(junction.ErrPolarity)
	case dev.EpiThicknessUM == 0:
		return nil, "the product file gives no target for the epi thickness (device.epi.thickness_um)"
	case dev.EpiResistivityOhmCM == 0:
		return nil, "the product file gives no target for the epi resistivity (device.epi.resistivity_ohm_cm)"
	case dev.BaseDepthUM == 0:
		return nil, "the product file gives no base depth (device.base.junction_depth_um)"
	}
	d = &device{Prior: specPrior(p), index: map[string]int{}, Own: !hasBaseline(p)}
	if d.Own {
		d.Notes = append(d.Notes, "the product file has no baseline: levels are against the lot's own majority, which is taken to be on target, so a lot that is off as a whole does not show")
	}
	tests := d.choose(p, own)
	if len(tests) == 0 {
		return nil, "no test of the product file is both known to the device model (measures) and has a baseline level"
	}
	var err error
	if d.Model, err = d.build(dev, tests, monitors(tests)); err != nil {
		return nil, plainError(err)
	}
	for i, t := range d.Model.Tests {
		if i < len(d.Model.Tests)-len(d.Monitors) {
			d.index[strings.ToLower(t.Name)] = i
		}
	}
	d.Notes = append(d.Notes, d.Assumed...)
	if off := math.Abs(math.Log(d.FieldScale)); off > math.Log(1.15) {
		d.Notes = append(d.Notes, fmt.Sprintf("ionisation fields had to be moved by %.0f %% to have the baseline's BVceo: device block and baseline may not describe the same transistor", 100*math.Expm1(off)))
	}
	return d, ""
}

// build builds the model, leaving out tests that have no solution on the device.
func (d *device) build(dev junction.Device, tests, extra []junction.Test) (*junction.Model, error) {
	all := append(append([]junction.Test(nil), tests...), extra...)
	m, err := d.newModel(dev, all...)
	kept := len(extra)
	if err != nil {
		if _, bare := d.newModel(dev); bare != nil {
			return nil, bare
		}
		all, kept = nil, 0
		for i, t := range append(append([]junction.Test(nil), tests...), extra...) {
			_, err := d.newModel(dev, t)
			switch {
			case err == nil:
				all = append(all, t)
				if i >= len(tests) {
					kept++
				}
			case i < len(tests):
				d.Notes = append(d.Notes, "left out of the device model: "+plainError(err))
			}
		}
		if len(all) == kept {
			return nil, errors.New("no test of the product has a solution on the device of the product file")
		}
		if m, err = d.newModel(dev, all...); err != nil {
			return nil, err
		}
	}
	for i := len(all) - kept; i < len(all); i++ {
		d.Monitors = append(d.Monitors, i)
	}
	return m, nil
}

// models are the device models built by this process, latest last: building one
// takes most of a second, and a week has many lots of a product.
var models struct {
	sync.Mutex
	list   []builtModel
	folder string // see KeepModels
}

type builtModel struct {
	key   string
	model *junction.Model
	err   error
}

// mostModels is how many models are kept.
const mostModels = 8

func (d *device) newModel(dev junction.Device, tests ...junction.Test) (*junction.Model, error) {
	models.Lock()
	defer models.Unlock()
	key := fmt.Sprintf("%+v %+v", dev, tests)
	for _, b := range models.list {
		if b.key == key {
			return b.model, b.err
		}
	}
	b := builtModel{key: key}
	if models.folder != "" && !d.Own { // else each lot would leave a model behind
		b.model, b.err = junction.NewKeptModel(modelFolder(models.folder), dev, tests...)
	} else {
		b.model, b.err = junction.NewModel(dev, tests...)
	}
	models.list = append(models.list, b)
	if len(models.list) > mostModels {
		models.list = append([]builtModel(nil), models.list[1:]...)
	}
	return b.model, b.err
}

func plainError(err error) string { return strings.TrimPrefix(err.Error(), "junction: ") }

func hasBaseline(p *config.Product) bool {
	if p.Baseline == nil {
		return false
	}
	for _, t := range p.Tests {
		if t.Measures != "" && p.Baseline.Tests[t.Name].Median > 0 {
			return true
		}
	}
	return false
}

// junctionDevice is the product's device block; what is not given stays zero, for
// the model to assume and say.
func junctionDevice(p *config.Product) junction.Device {
	d := p.Device
	return junction.Device{
		Polarity: d.Polarity, TemperatureK: 273.15 + p.TestTemperatureC,
		EpiThicknessUM: given(d.Epi.ThicknessUM.Target), EpiResistivityOhmCM: given(d.Epi.ResistivityOhmCM.Target),
		SiliconConsumedUM: given(d.Epi.SiliconConsumedUM.Value), UpDiffusionUM: given(d.Epi.UpDiffusionUM.Value),
		SubstrateCM3: given(d.Epi.SubstrateCM3.Value),
		BaseDepthUM:  given(d.Base.JunctionDepthUM.Value), BaseSurfaceCM3: given(d.Base.SurfaceConcentrationCM3.Value),
		BaseAreaUM2: given(d.Base.AreaUM2.Value), BasePerimeterUM: given(d.Base.PerimeterUM.Value),
		EmitterDepthUM: given(d.Emitter.DepthUM.Value), EmitterAreaUM2: given(d.Emitter.AreaUM2.Value),
		EmitterPerimeterUM: given(d.Emitter.PerimeterUM.Value),
		CornerRadiusUM:     given(d.Edge.CornerRadiusUM.Value), FieldPlate: d.Edge.FieldPlate,
	}
}

// given is v, or 0 when the file does not give it.
func given(v float64) float64 {
	if v > 0 {
		return v
	}
	return 0
}

// choose picks the product's tests for the model, with their baseline levels. When
// there are too many, those that tell most of the epi stay.
func (d *device) choose(p *config.Product, own map[string]float64) []junction.Test {
	var tests []junction.Test
	var without []string
	for i := range p.Tests {
		t := junctionTest(&p.Tests[i])
		if t.Measures == "" {
			continue
		}
		if !d.Own {
			b := p.Baseline.Tests[t.Name]
			t.Baseline = junction.Level{Median: given(b.Median), Sigma: b.Sigma, WithinLot: b.WithinLotSigma, Lot: b.LotSigma}
		} else if own != nil {
			t.Baseline = junction.Level{Median: given(own[t.Name])}
		}
		if t.Baseline.Median == 0 {
			without = append(without, t.Name)
			continue
		}
		tests = append(tests, t)
	}
	if len(without) > 0 && !d.Own {
		d.Notes = append(d.Notes, "no baseline level for "+strings.Join(without, ", ")+": not used for the epi layer, since the model's own levels are good to 10 to 20 % only")
	}
	if len(tests) > modelTests {
		sort.SliceStable(tests, func(a, b int) bool { return telling(tests[a].Measures) < telling(tests[b].Measures) })
		d.Notes = append(d.Notes, fmt.Sprintf("of %d tests that the device model knows, the %d that tell most of the epi layer are used", len(tests), modelTests))
		tests = tests[:modelTests]
	}
	return tests
}

// telling ranks measures by what they tell of the epi layer (reference page,
// sections 4 and 6).
func telling(measures string) int {
	for i, m := range []string{junction.BVceo, junction.Cob, junction.Rc, junction.Vcesat, junction.HFE, junction.Rpinch,
		junction.BVcbo, junction.BVebo, junction.Icbo} {
		if measures == m {
			return i
		}
	}
	return 99
}

// junctionTest is a test of the product file with its bias, magnitudes. A collector
// voltage against the base counts as VCE less a diode's drop for a gain.
func junctionTest(t *config.Test) junction.Test {
	out := junction.Test{Name: t.Name, Measures: t.Measures}
	at := map[string]float64{}
	for _, c := range t.At {
		at[strings.ToUpper(c.Name)] = math.Abs(c.Value)
	}
	first := func(names ...string) float64 {
		for _, n := range names {
			if v := at[n]; v > 0 && !math.IsInf(v, 0) {
				return v
			}
		}
		return 0
	}
	const diode = 0.7
	switch t.Measures {
	case junction.Icbo, junction.Cob:
		out.Voltage = first("VCB", "VR", "V", "VCBO", "VBC")
	case junction.Iebo:
		out.Voltage = first("VEB", "VR", "V", "VEBO", "VBE")
	case junction.Iceo:
		out.Voltage = first("VCE", "VR", "V", "VCEO")
	default:
		out.Voltage = first("VCE", "VC", "V")
		if v, ok := at["VCB"]; ok && out.Voltage == 0 {
			out.Voltage = v + diode
		}
	}
	out.Current = first("IC", "ICE", "ICEO", "I", "IE")
	out.BaseCurrent = first("IB")
	if r := first("IC/IB", "BETA"); r > 0 && out.BaseCurrent == 0 {
		out.BaseCurrent = out.Current / r
	}
	return out
}

// monitors are measurements that a fab could add and that tell of the epi layer or
// of what hides it; those that the product has already are left out.
func monitors(tests []junction.Test) []junction.Test {
	bvcbo, cob, lowest, leak := 0.0, 0.0, math.Inf(1), 10.0
	has := map[string]bool{}
	for _, t := range tests {
		has[t.Measures] = true
		switch t.Measures {
		case junction.BVcbo:
			bvcbo = t.Baseline.Median
		case junction.BVceo:
			bvcbo = math.Max(bvcbo, t.Baseline.Median)
		case junction.Cob:
			cob = math.Max(cob, t.Voltage)
		case junction.HFE:
			lowest = math.Min(lowest, orUsual(t.Current, 2e-3))
		case junction.Icbo:
			leak = orUsual(t.Voltage, 10)
		}
	}
	var out []junction.Test
	add := func(t junction.Test) {
		if !has[t.Measures] {
			out = append(out, t)
		}
	}
	add(junction.Test{Name: "collector resistance in the active region", Measures: junction.Rc})
	high := math.Round(0.8 * bvcbo)
	if high > 1.3*cob && high > 0 {
		out = append(out, junction.Test{Name: fmt.Sprintf("Cob at VCB %.0f V, next to breakdown", high), Measures: junction.Cob, Voltage: high})
	}
	add(junction.Test{Name: "base pinch resistance", Measures: junction.Rpinch})
	if lowest > 20e-6 {
		out = append(out, junction.Test{Name: "hFE at IC 10 uA", Measures: junction.HFE, Current: 10e-6})
	}
	add(junction.Test{Name: fmt.Sprintf("leakage of an area monitor at %.3g V", leak), Measures: junction.AreaLeakage, Voltage: leak})
	add(junction.Test{Name: "breakdown of a plane (guarded) base-collector diode", Measures: junction.PlaneBV})
	if high > 0 {
		add(junction.Test{Name: fmt.Sprintf("multiplication M-1 at VCB %.0f V", high), Measures: junction.Multiplication, Voltage: high})
	}
	return out
}

func orUsual(v, usual float64) float64 {
	if v > 0 {
		return v
	}
	return usual
}

// responseTrust multiplies the usual error of the device model's responses. Of truths
// three prior sigmas off on a reach-through device, intervals of net thickness from
// data alone cover 0.90 at 1 and 0.92 here (TestEpiCoverage, 12 and 24 made-up fabs).
const responseTrust = 1.3

// specPrior is the usual prior with what the product file says of its own spread:
// the spec limits of thickness and resistivity, and quantities with a sigma.
func specPrior(p *config.Product) junction.Prior {
	prior := junction.UsualPrior()
	prior.Response = responseTrust
	d := p.Device
	set := func(param junction.Param, sigma float64) {
		if sigma > 0 {
			prior.Sigma[param] = math.Min(math.Max(sigma, smallestPrior), largestPrior)
		}
	}
	set(junction.EpiThickness, junction.SpecSigma(d.Epi.ThicknessUM.Lower, d.Epi.ThicknessUM.Upper))
	set(junction.EpiDoping, junction.SpecSigma(junction.DopingF723(d.Epi.ResistivityOhmCM.Upper), junction.DopingF723(d.Epi.ResistivityOhmCM.Lower)))
	for _, q := range []struct {
		param junction.Param
		of    config.Quantity
	}{{junction.UpDiffusion, d.Epi.UpDiffusionUM}, {junction.BaseDepth, d.Base.JunctionDepthUM},
		{junction.BaseDose, d.Base.SurfaceConcentrationCM3}, {junction.EmitterDepth, d.Emitter.DepthUM}, {junction.MaskRadius, d.Edge.CornerRadiusUM}} {
		set(q.param, q.of.Sigma/q.of.Value)
	}
	return prior
}

// Bounds of a prior's sigma of a log: a spec of next to nothing would leave the
// data no say, and one of a factor two is none.
const smallestPrior, largestPrior = 0.005, 0.3
