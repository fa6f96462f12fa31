package synth

import (
	"fmt"
	"math"
	"slices"

	"kneepoint/config"
)

// FromProduct describes healthy lots of a product: its device, wafer, tests,
// limits and bins, the levels of its baseline, and the background every line
// has. Lot, Wafers, Causes and the tester's habits are then the caller's to set.
//
// What the file does not say is filled in. A level without a baseline lies
// where a healthy one would against its limits (a fifth above a lower breakdown
// limit, the geometric middle of two limits, a twentieth of a leakage limit).
// Spreads are those of a well-kept line, scaled so that epi thickness and
// resistivity keep their spec at three sigma and each test its baseline sigma
// as nearly as one latent of its own allows. Noise and resolution are usual
// ones. All of that is common practice, no source.
//
// The error names the key that is missing or that no law covers.
func FromProduct(p *config.Product) (Spec, error) {
	s := Spec{Product: p.Name, Lot: "MADE-UP-1", Wafers: 25, Spread: typicalSpread()}
	d := p.Device
	missing := func(key string) (Spec, error) {
		return Spec{}, fmt.Errorf("%s: made-up lots need %s", p.File, key)
	}
	switch {
	case d == nil:
		return missing("a device block")
	case d.Polarity != "" && d.Polarity != "npn":
		return Spec{}, fmt.Errorf("%s: device.polarity: no laws for %s yet, only for npn", p.File, d.Polarity)
	case !(d.Epi.ThicknessUM.Target > 0):
		return missing("device.epi.thickness_um.target")
	case !(d.Epi.ResistivityOhmCM.Target > 0):
		return missing("device.epi.resistivity_ohm_cm.target")
	case !(d.Base.JunctionDepthUM.Value > 0):
		return missing("device.base.junction_depth_um")
	case !(p.Wafer.DiameterMM > 0):
		return missing("wafer.diameter_mm")
	case !(p.Wafer.DieWidthMM > 0 && p.Wafer.DieHeightMM > 0):
		return missing("wafer.die_width_mm and die_height_mm")
	case len(p.Tests) == 0:
		return missing("tests")
	}
	s.Device = Device{
		EpiThicknessUM:      d.Epi.ThicknessUM.Target,
		SiliconConsumedUM:   or(d.Epi.SiliconConsumedUM.Value, 0),
		EpiResistivityOhmCM: d.Epi.ResistivityOhmCM.Target,
		BaseDepthUM:         d.Base.JunctionDepthUM.Value,
		UpDiffusionUM:       or(d.Epi.UpDiffusionUM.Value, 0),
		SubstrateCM3:        or(d.Epi.SubstrateCM3.Value, 1e19),
		EmitterDepthUM:      or(d.Emitter.DepthUM.Value, 0),
		EmitterAreaUM2:      or(d.Emitter.AreaUM2.Value, 20000),
	}
	s.Laws = DefaultLaws(s.Device)
	if net := newModel(&s).w0; net <= minNet {
		return Spec{}, fmt.Errorf("%s: device: no epi is left under the base (thickness %g um, base %g um)",
			p.File, s.Device.EpiThicknessUM, s.Device.BaseDepthUM)
	}
	s.Grid = Grid{DiameterMM: p.Wafer.DiameterMM, DieWidthMM: p.Wafer.DieWidthMM, DieHeightMM: p.Wafer.DieHeightMM,
		EdgeExclusionMM: p.Wafer.EdgeExclusionMM, SiteColumns: 1, SiteRows: 1,
		ShotColumns: p.Wafer.ShotColumns, ShotRows: p.Wafer.ShotRows}
	for i := range p.Tests {
		s.Tests = append(s.Tests, testOf(p, &p.Tests[i]))
	}
	s.setBins(p)
	s.scaleSpread(p)
	s.Causes = background()
	return s, nil
}

// or is v, or what stands in for a value that is not given.
func or(v, instead float64) float64 {
	if v > 0 {
		return v
	}
	return instead
}

// testOf makes a test of the program from one of the product file.
func testOf(p *config.Product, t *config.Test) Test {
	out := Test{Name: t.Name, Measures: t.Measures, Unit: t.Unit.Text, At: t.AtText,
		Lower: t.Unit.FromSI(t.Lower), Upper: t.Unit.FromSI(t.Upper),
		Clamp: t.Unit.FromSI(t.Clamp), Floor: t.Unit.FromSI(t.Floor)}
	out.Bias = bias(t)
	kind := kindOf(t.Measures)
	out.Typical = kind.level(out.Lower, out.Upper)
	if p.Baseline != nil {
		if b, ok := p.Baseline.Tests[t.Name]; ok && !math.IsNaN(b.Median) {
			out.Typical = t.Unit.FromSI(b.Median)
		}
	}
	scale := math.Abs(out.Typical)
	out.Gauge, out.SiteOffset = kind.gauge, kind.gauge/2
	out.Noise = scale * kind.gauge / 2
	out.Resolution = math.Pow10(int(math.Floor(math.Log10(scale * kind.gauge))))
	if math.IsNaN(out.Clamp) {
		out.Clamp = math.Pow10(int(math.Ceil(math.Log10(scale * kind.reach))))
	}
	if math.IsNaN(out.Floor) {
		out.Floor = 0
		if kind.bin == 6 {
			out.Floor = out.Resolution
		}
	}
	return out
}

// kind is what tests of one family have in common.
type kind struct {
	bin         int     // usual hard bin of a fail
	gauge       float64 // repeatability of one reading
	reach       float64 // the tester's end, at least, in typical values
	fromLower   float64 // level over a lone lower limit
	belowUpper  float64 // level over a lone upper limit
	defaultBias float64 // A or V
}

func kindOf(measures string) kind {
	switch measures {
	case "bvceo", "bvcbo", "bvces", "bvebo":
		return kind{5, 0.001, 1.5, 1.2, 0.8, 1e-3}
	case "icbo", "iceo", "iebo":
		return kind{6, 0.02, 1000, 10, 0.05, 10}
	case "hfe":
		return kind{7, 0.002, 4, 1.5, 0.65, 1e-3}
	case "vcesat", "vbesat", "rb", "rc", "rpinch":
		return kind{8, 0.002, 5, 1.3, 0.7, 10e-3}
	case "cob", "ft":
		return kind{9, 0.001, 10, 1.2, 0.85, 5}
	}
	return kind{10, 0.002, 10, 1.2, 0.8, 1}
}

// level is where a healthy reading lies against the limits.
func (k kind) level(lower, upper float64) float64 {
	switch {
	case lower > 0 && upper > lower:
		return math.Sqrt(lower * upper)
	case upper > lower: // lower is zero or negative
		return (lower + upper) / 2
	case lower > 0:
		return lower * k.fromLower
	case upper > 0:
		return upper * k.belowUpper
	}
	return 1
}

// bias picks the condition the laws need: the voltage of a leakage or
// capacitance test, else the collector (or only) current.
func bias(t *config.Test) float64 {
	base := "A"
	if k := kindOf(t.Measures); k.bin == 6 || t.Measures == "cob" {
		base = "V"
	}
	found := math.NaN()
	for _, c := range t.At {
		if c.Unit.Base == base && c.Value > 0 && (math.IsNaN(found) || c.Name == "IC") {
			found = c.Value
		}
	}
	return or(found, kindOf(t.Measures).defaultBias)
}

// setBins numbers the fails around the file's passing bins, and shares the
// range of the first gain test with both limits among several passing bins.
func (s *Spec) setBins(p *config.Product) {
	pass := p.Bins.Pass
	if len(pass) == 0 {
		pass = []int{1}
	}
	for i := range s.Tests {
		t := &s.Tests[i]
		t.HardBin = kindOf(t.Measures).bin
		for slices.Contains(pass, t.HardBin) {
			t.HardBin += 10
		}
		t.SoftBin = 1000 + 10*(i+1)
	}
	for _, b := range pass {
		s.Grades = append(s.Grades, Grade{Bin: b, Lower: math.Inf(-1), Upper: math.Inf(1)})
	}
	s.GradeTest = s.Tests[0].Name
	for _, t := range s.Tests {
		if n := len(pass); n > 1 && t.Measures == "hfe" && t.Lower > 0 && t.Upper > t.Lower {
			s.GradeTest = t.Name
			step := math.Log(t.Upper/t.Lower) / float64(n)
			for i := 1; i < n; i++ {
				edge := t.Lower * math.Exp(float64(i)*step)
				s.Grades[i-1].Upper, s.Grades[i].Lower = edge, edge
			}
			return
		}
	}
	s.Grades = s.Grades[:1] // nothing to grade by
}

// variance of a latent over a wafer's area and a lot's wafers.
func (s Spread) within() float64 {
	// r^2 is uniform over the disc: its variance is 1/12; that of u is 1/4.
	return s.Wafer*s.Wafer + s.Die*s.Die + (s.Bowl*s.Bowl+s.MeanBowl*s.MeanBowl)/12 + s.Tilt*s.Tilt/2
}

func (s Spread) times(f float64) Spread {
	return Spread{s.Lot * f, s.Wafer * f, s.Die * f, s.Bowl * f, s.Tilt * f, s.MeanBowl * f}
}

func (s Spread) sigma() float64 { return math.Sqrt(s.Lot*s.Lot + s.within()) }

// scaleSpread fits the spreads to what the product file says of them.
func (s *Spec) scaleSpread(p *config.Product) {
	fit := func(q Latent, spec config.Spec) {
		if half := (spec.Upper - spec.Lower) / 2 / spec.Target; half > 0 {
			s.Spread[q] = s.Spread[q].times(clampFactor(half / 3 / s.Spread[q].sigma()))
		}
	}
	fit(EpiThickness, p.Device.Epi.ThicknessUM)
	fit(EpiDoping, p.Device.Epi.ResistivityOhmCM)
	if p.Baseline == nil {
		return
	}
	// The latents that a test has much to itself.
	owners := map[string][]Latent{"hfe": {BaseDose, BaseDepth, EmitterDepth, EmitterGummel}, "bvcbo": {EdgeRadius},
		"icbo": {Lifetime}, "vcesat": {SeriesResistance}}
	for _, measures := range []string{"hfe", "bvcbo", "icbo", "vcesat"} { // gain first: it spreads the others
		i := slices.IndexFunc(s.Tests, func(t Test) bool { return t.Measures == measures })
		if i < 0 {
			continue
		}
		t := &s.Tests[i]
		b, ok := p.Baseline.Tests[t.Name]
		if !ok || !(b.Sigma > 0) || !(t.Typical > 0) {
			continue
		}
		want := math.Pow(b.Sigma/b.Median, 2)
		var own, rest float64
		for q := range NumLatents {
			slope := s.slope(i, q)
			if v := math.Pow(slope*s.Spread[q].sigma(), 2); slices.Contains(owners[measures], q) {
				own += v
			} else {
				rest += v
			}
		}
		if own > 0 {
			f := clampFactor(math.Sqrt(max(want-rest, 0) / own))
			for _, q := range owners[measures] {
				s.Spread[q] = s.Spread[q].times(f)
			}
		}
	}
}

// clampFactor keeps a fitted spread believable.
func clampFactor(f float64) float64 { return min(max(f, 0.2), 5) }

// slope is d ln test / d latent at target, by a small step either way.
func (s *Spec) slope(test int, q Latent) float64 {
	m := newModel(s)
	const step = 1e-4
	at := func(d float64) float64 {
		dst := make([]float64, len(s.Tests))
		p := Process{}
		p[q] = d
		m.values(dst, &p)
		return math.Log(dst[test])
	}
	return (at(step) - at(-step)) / (2 * step)
}
