package build

import (
	"fmt"
	"math"
	"math/rand/v2"

	"kneepoint/config"
	"kneepoint/ingest"
	"kneepoint/stats/junction"
)

// fab makes lots of a product by another belief of the physics than the analysis
// has: ionisation fields, narrowing, recombination, base profile and everything that a
// product file does not know are drawn anew, and the product's baseline is what this
// fab's typical wafer reads.
type fab struct {
	r     *rand.Rand
	world *junction.Model
	dev   junction.Device // this fab's typical device
	tests []ingest.Test
	sens  [][junction.NumParams]float64
}

func draw(r *rand.Rand, sigma float64) float64 {
	return sigma * math.Max(-3.5, math.Min(3.5, r.NormFloat64()))
}

// newFab sets the product's baseline. Without other the fab's physics are those of the
// analysis.
func newFab(p *config.Product, seed uint64, other bool) *fab {
	r := rand.New(rand.NewPCG(seed, 4))
	f := &fab{r: r, dev: junctionDevice(p)}
	var v junction.Variation
	if other {
		by := func(sigma float64) float64 { return math.Exp(draw(r, sigma)) }
		v = junction.Variation{FieldScale: by(0.05), Narrowing: by(0.1), Tunnelling: by(0.15), Recombination: by(0.5), OxideDepth: by(0.3),
			Spreading: 0.6 + 0.6*r.Float64(), ExponentialBase: r.Float64() < 0.3}
		f.dev.EpiThicknessUM *= by(0.01)
		f.dev.EpiResistivityOhmCM *= by(0.015)
		f.dev.BaseSurfaceCM3 *= by(0.15)
		f.dev.UpDiffusionUM *= by(0.1)
		f.dev.StrayF, f.dev.FixedOhm, f.dev.Modulation = 0.3e-12*by(0.3), 0.3*by(0.3), 0.4*by(0.25)
		f.dev.LifetimeS, f.dev.OxideChargeCM2 = 2e-6*by(0.7), 5e10*by(0.5)
	}
	var tests []junction.Test
	for i := range p.Tests {
		tests = append(tests, junctionTest(&p.Tests[i]))
	}
	var err error
	if f.world, err = junction.NewVariant(f.dev, v, tests...); err != nil {
		panic(err)
	}
	f.dev = f.world.Device
	p.Baseline = &config.Baseline{Yield: math.NaN(), Tests: map[string]config.BaselineTest{}}
	for i, t := range p.Tests {
		level := f.world.Exact(i, junction.Process{})
		p.Baseline.Tests[t.Name] = config.BaselineTest{Median: level, Sigma: 0.02 * level, WithinLotSigma: math.NaN(), LotSigma: math.NaN()}
		f.tests = append(f.tests, ingest.Test{Name: t.Name, Measures: t.Measures, Unit: t.Unit, Lower: math.NaN(), Upper: math.NaN(), Clamp: t.Clamp, Floor: t.Floor})
		f.sens = append(f.sens, f.world.Sensitivity(i))
	}
	return f
}

var fabs = map[string]struct {
	f *fab
	p *config.Product
}{}

// fabOf is a fab and its product, made once a test run, with draws of its own.
func fabOf(device string, seed uint64, tests ...string) (*fab, *config.Product) {
	key := fmt.Sprint(device, tests)
	if _, ok := fabs[key]; !ok {
		p := madeProduct(device, tests...)
		fabs[key] = struct {
			f *fab
			p *config.Product
		}{newFab(p, 7, true), p}
	}
	f, p := *fabs[key].f, *fabs[key].p
	f.r = rand.New(rand.NewPCG(seed, 5))
	return &f, &p
}

// net is the net epi at a process point over that of this fab's typical device.
func (f *fab) net(at *junction.Process) float64 {
	of := func(at *junction.Process) float64 {
		e := func(k junction.Param) float64 { return math.Exp(at[k]) }
		return f.dev.EpiThicknessUM*e(junction.EpiThickness) - f.dev.SiliconConsumedUM - f.dev.BaseDepthUM*e(junction.BaseDepth) -
			f.dev.UpDiffusionUM*e(junction.UpDiffusion)*math.Log(f.dev.SubstrateCM3/(f.dev.EpiDopingCM3*e(junction.EpiDoping)))
	}
	return of(at) / of(&junction.Process{})
}

// truth draws a process from a prior; with pull, thickness and doping are that many
// sigmas off, either way.
func (f *fab) truth(prior junction.Prior, pull float64) junction.Process {
	var at junction.Process
	for i := range at {
		at[i] = draw(f.r, prior.Sigma[i])
	}
	if pull != 0 {
		for _, k := range []junction.Param{junction.EpiThickness, junction.EpiDoping} {
			at[k] = pull * prior.Sigma[k] * float64(1-2*f.r.IntN(2))
		}
	}
	return at
}

// madeWafer is a wafer to be: its truth and what each test reads on its typical die.
type madeWafer struct {
	truth  junction.Process
	levels []float64
	opens  float64 // share of dice without contact
}

// wafer reads a process by this fab's full model, with the tester's error.
func (f *fab) wafer(at junction.Process, error bool) madeWafer {
	w := madeWafer{truth: at, opens: 0.02}
	for i := range f.tests {
		v := f.world.Exact(i, at)
		if error {
			v *= math.Exp(draw(f.r, junction.UsualSigma(f.tests[i].Measures)))
		}
		w.levels = append(w.levels, v)
	}
	return w
}

// lot spreads wafers over dice on a disc of a radius in dice: a bowl and a tilt in
// thickness and doping, noise of dice and gauge, and some dice without contact, which
// pass breakdown at the clamp and have no gain.
func (f *fab) lot(id string, radius int, p *config.Product, wafers ...madeWafer) *ingest.Lot {
	t := ingest.NewTable(id, f.tests...)
	for w, made := range wafers {
		tilt := f.r.Float64() * 2 * math.Pi
		for y := -radius; y <= radius; y++ {
			for x := -radius; x <= radius; x++ {
				u, v := float64(x)/float64(radius), float64(y)/float64(radius)
				rr := u*u + v*v
				if rr > 1 {
					continue
				}
				thick := 0.01*(1-2*rr) + 0.01*(u*math.Cos(tilt)+v*math.Sin(tilt))
				dope := draw(f.r, 0.005)
				open := f.r.Float64() < made.opens
				values := make([]float64, len(f.tests))
				for i := range values {
					noise := 0.3 * junction.UsualSigma(f.tests[i].Measures)
					s := &f.sens[i]
					values[i] = made.levels[i] * math.Exp(s[junction.EpiThickness]*thick+s[junction.EpiDoping]*dope+draw(f.r, noise))
					if open {
						values[i] = openReads(f.tests[i].Measures, made.levels[i])
					}
				}
				bin := int32(1)
				if open {
					bin = 7
				}
				t.Add(ingest.Die{Wafer: fmt.Sprintf("%02d", w+1), X: int32(x), Y: int32(y), HardBin: bin, Values: values})
			}
		}
	}
	lot, err := ingest.Build(t, ingest.Options{Product: p})
	if err != nil {
		panic(err)
	}
	return lot
}

// openReads is what a tester without contact returns.
func openReads(measures string, level float64) float64 {
	switch measures {
	case junction.BVceo, junction.BVcbo, junction.BVebo:
		return 2 * level // its clamp
	case junction.Vcesat, junction.Rc, junction.Rpinch:
		return 50 * level
	case junction.HFE:
		return 0.01 * level
	}
	return 0.02 * level
}

// madeProduct is one of the reference page's devices as a product file would have it,
// with specs that stand for the usual spread, and the named tests.
func madeProduct(device string, measures ...string) *config.Product {
	nan := math.NaN()
	p := &config.Product{Name: device, Device: &config.Device{Polarity: "npn"}, TestTemperatureC: 27}
	d := p.Device
	known := func(v float64) config.Quantity { return config.Quantity{Value: v, Sigma: nan} }
	t, n, ns, xjc, lam, cob, high, leak := 2.9, 4e15, 1.2e18, 0.75, 0.05, 5.0, 30.0, 15.0
	switch device {
	case "A":
		t, n, ns, xjc, lam, cob, high, leak = 9.0, 1.5e15, 6e17, 1.2, 0.1, 10, 50, 30
	case "knee":
		t = 3.05
	}
	spec := func(v, sigma float64) config.Spec {
		return config.Spec{Target: v, Lower: v * math.Exp(-3*sigma), Upper: v * math.Exp(3*sigma)}
	}
	d.Epi.ThicknessUM, d.Epi.ResistivityOhmCM = spec(t, 0.05), spec(junction.ResistivityF723(n), 0.077)
	d.Epi.UpDiffusionUM, d.Epi.SubstrateCM3, d.Epi.SiliconConsumedUM = known(lam), known(1e19), known(nan)
	d.Base.JunctionDepthUM, d.Base.SurfaceConcentrationCM3 = known(xjc), known(ns)
	d.Base.AreaUM2, d.Base.PerimeterUM = known(60000), known(1000)
	d.Emitter.DepthUM, d.Emitter.AreaUM2, d.Emitter.PerimeterUM = known(0.25), known(20000), known(800)
	d.Edge.CornerRadiusUM = known(20)
	for _, m := range measures {
		at := func(name string, v float64) []config.Condition { return []config.Condition{{Name: name, Value: v}} }
		test := config.Test{Name: m, Measures: m, Lower: nan, Upper: nan, Clamp: nan, Floor: nan}
		switch m {
		case junction.BVceo:
			test.At = at("IC", 2e-3)
		case junction.Icbo:
			test.At = at("VCB", leak)
		case junction.Cob:
			test.At = at("VCB", cob)
		case "cob-high":
			test.Measures, test.At = junction.Cob, at("VCB", high)
		}
		p.Tests = append(p.Tests, test)
	}
	return p
}

var sevenTests = []string{junction.BVcbo, junction.BVceo, junction.BVebo, junction.Icbo, junction.HFE, junction.Vcesat, junction.Cob}

// with is the standard seven and more.
func with(more ...string) []string { return append(append([]string(nil), sevenTests...), more...) }
