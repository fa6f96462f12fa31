package build

import (
	"context"
	"fmt"
	"image/color"
	"math"
	"strings"

	"kneepoint/ingest"
	"kneepoint/reports"
	"kneepoint/stats"
	"kneepoint/stats/junction"
	"kneepoint/wafermap"
)

// waferShift is how a wafer stands against the lot's typical one, as logs with
// their sigmas. What is common to all wafers (tester, baseline, process) drops out;
// of the device model's error a share of the shift itself is left.
type waferShift struct {
	thickness, doping           float64
	thicknessSigma, dopingSigma float64
}

// betweenGauge is the part of a test's usual measurement error that may change from
// one wafer of a lot to the next (common practice, no source).
const betweenGauge = 0.2

// responseShare is the relative error of a shift by the model's response: of thickness
// and doping together some tests' responses are off by 5 to 10 %.
const responseShare = 0.08

// compare takes every wafer's shift against the typical wafer: the difference of the
// estimates, with the sigma that the levels' own repeatability leaves.
func (e *epiwork) compare(all []level) []waferShift {
	var tests []int
	var sigmas []float64
	for _, v := range all {
		tests = append(tests, v.Test)
		var se []float64
		for _, w := range e.levels {
			for _, one := range w {
				if one.Test == v.Test {
					se = append(se, one.SE)
				}
			}
		}
		sigmas = append(sigmas, math.Hypot(betweenGauge*junction.UsualSigma(e.d.Tests[v.Test].Measures), stats.Median(se)))
	}
	n := len(e.levels)
	columns, marks := make([][]float64, len(all)), make([][]int8, len(all))
	for k := range columns {
		columns[k], marks[k] = make([]float64, n), make([]int8, n)
		put := func(row int, v level) {
			columns[k][row], marks[k][row] = e.d.Level(v.Test)*math.Exp(v.Log), int8(v.Censor)
		}
		for i, w := range e.levels {
			columns[k][i] = math.NaN()
			for _, v := range w {
				if v.Test == all[k].Test {
					put(i, v)
				}
			}
		}
	}
	got := e.d.Dice(tests, sigmas, e.d.Prior, e.centre(&e.lotPos)).Invert(columns, marks)
	out := make([]waferShift, n)
	for i := range out {
		s := &out[i]
		if s.thickness, s.doping = math.NaN(), math.NaN(); e.levels[i] == nil {
			continue
		}
		s.thickness = math.Log(e.post[i].NetThickness.WithPrior.Estimate / e.lotPos.NetThickness.WithPrior.Estimate)
		s.doping = math.Log(e.post[i].Doping.WithPrior.Estimate / e.lotPos.Doping.WithPrior.Estimate)
		s.thicknessSigma = math.Hypot(got.ThicknessSigma[i], responseShare*s.thickness)
		s.dopingSigma = math.Hypot(got.DopingSigma[i], responseShare*s.doping)
	}
	return out
}

// centre is a posterior as the logs that Dice is centred on.
func (e *epiwork) centre(p *junction.Posterior) [2]float64 {
	return [2]float64{math.Log(p.NetThickness.WithPrior.Estimate / e.d.NetThickness()),
		math.Log(p.Doping.WithPrior.Estimate / e.d.Device.EpiDopingCM3)}
}

// Wafers stand apart when their shift is this many of its sigmas and no less than
// apartShare: a smaller difference is of no account to a spec.
const apartSigmas, apartShare = 4, 0.02

// thicknessTold says whether thickness differences between wafers mean anything:
// the tests see it, or would if there were a baseline.
func (e *epiwork) thicknessTold() bool {
	if !e.d.Own {
		return e.lotPos.NetThickness.Share < 0.9
	}
	return finiteMedian(sharesOf(e.relate)) < 0.5*e.d.NetSigma(e.d.Prior)
}

func sharesOf(shifts []waferShift) []float64 {
	var x []float64
	for _, s := range shifts {
		x = append(x, s.thicknessSigma)
	}
	return x
}

// between says how wafers differ.
func (e *epiwork) between() *reports.EpiSpread {
	none := reports.Range{Lower: reports.NaN, Upper: reports.NaN}
	out := &reports.EpiSpread{NetThicknessUM: none, DopingCM3: none}
	told := e.thicknessTold()
	wide := func(of func(waferShift) (float64, float64)) bool {
		lo, hi, sigma := math.Inf(1), math.Inf(-1), 0.0
		for _, s := range e.relate {
			if v, sv := of(s); finite(v) && finite(sv) {
				lo, hi, sigma = math.Min(lo, v), math.Max(hi, v), math.Max(sigma, sv)
			}
		}
		return hi-lo > math.Max(apartSigmas*math.Sqrt2*sigma, 1.5*apartShare)
	}
	thick := func(s waferShift) (float64, float64) { return s.thickness, s.thicknessSigma }
	dope := func(s waferShift) (float64, float64) { return s.doping, s.dopingSigma }
	differThick, differDope := told && wide(thick), wide(dope)
	out.Differ = differThick || differDope
	apart := func(v, sigma float64) bool { return math.Abs(v) > math.Max(apartSigmas*sigma, apartShare) }
	for i, s := range e.relate {
		if e.levels[i] != nil && (told && differThick && apart(thick(s)) || differDope && apart(dope(s))) {
			out.Apart = append(out.Apart, e.rep.Wafers[i].ID)
		}
	}
	if told {
		out.NetThicknessUM = e.rangeOf(func(r *reports.Epi) reports.Number { return r.NetThicknessUM.Estimate })
	}
	out.DopingCM3 = e.rangeOf(func(r *reports.Epi) reports.Number { return r.DopingCM3.Estimate })
	switch {
	case e.waferCount() < 2:
		out.Text = "one wafer: nothing to compare with"
	case !out.Differ:
		out.Text = "wafers are alike in what these tests see of the epi layer"
	default:
		text := "wafers differ: the lot's values are those of its typical wafer"
		if differThick {
			text += fmt.Sprintf("; net thickness %.3g um (wafer %s) to %.3g um (wafer %s)", float64(out.NetThicknessUM.Lower), out.NetThicknessUM.LowerOf, float64(out.NetThicknessUM.Upper), out.NetThicknessUM.UpperOf)
		}
		if differDope {
			text += fmt.Sprintf("; doping %.3g cm^-3 (wafer %s) to %.3g cm^-3 (wafer %s)", float64(out.DopingCM3.Lower), out.DopingCM3.LowerOf, float64(out.DopingCM3.Upper), out.DopingCM3.UpperOf)
		}
		if n := len(out.Apart); n > 0 && n <= e.waferCount()/2 {
			text += "; apart from the typical one: " + strings.Join(out.Apart, ", ")
		}
		out.Text = text
	}
	return out
}

func (e *epiwork) waferCount() int {
	n := 0
	for _, l := range e.levels {
		if l != nil {
			n++
		}
	}
	return n
}

func (e *epiwork) rangeOf(of func(*reports.Epi) reports.Number) reports.Range {
	r := reports.Range{Lower: reports.NaN, Upper: reports.NaN}
	for i := range e.rep.Wafers {
		one := &e.rep.Wafers[i]
		if one.Epi == nil {
			continue
		}
		v := of(one.Epi)
		if !(v >= r.Lower) { // the first, too
			r.Lower, r.LowerOf = v, one.ID
		}
		if !(v <= r.Upper) {
			r.Upper, r.UpperOf = v, one.ID
		}
	}
	return r
}

// dieColumns are a wafer's whole dice, as points for zones and maps.
type dieColumns struct {
	rows              []int
	thickness, doping []float64
}

// mostMapped is how many dice of a wafer are inverted for its zones.
const mostMapped = 2000

// dice inverts a wafer's dice around the wafer's own estimate, and puts their
// median on it; at most about most of them.
func (e *epiwork) dice(i int, most int) dieColumns {
	wafer := e.lot.Wafers()[i]
	var tests []int
	for _, v := range e.levels[i] {
		tests = append(tests, v.Test)
	}
	set := ^uint16(0) // tests that were set aside do not count as wrecked
	for _, t := range tests {
		set &^= 1 << t
	}
	var out dieColumns
	every := max(1, (wafer.Hi-wafer.Lo+most-1)/most)
	for row := wafer.Lo; row < wafer.Hi; row += every {
		if e.l.wrecked[row]&^set == 0 {
			out.rows = append(out.rows, row)
		}
	}
	columns, marks := make([][]float64, len(tests)), make([][]int8, len(tests))
	for k, t := range tests {
		columns[k] = make([]float64, len(out.rows))
		if e.l.marks[t] != nil {
			marks[k] = make([]int8, len(out.rows))
		}
		for j, row := range out.rows {
			columns[k][j] = e.l.values[t][row]
			if marks[k] != nil {
				marks[k][j] = e.l.marks[t][row]
			}
		}
	}
	at := e.centre(&e.post[i])
	got := e.d.Dice(tests, make([]float64, len(tests)), e.d.Prior, at).Invert(columns, marks)
	put := func(x []float64, on float64) []float64 {
		f := on / finiteMedian(x)
		for k := range x {
			x[k] *= f
		}
		return x
	}
	out.thickness = put(got.Thickness, e.post[i].NetThickness.WithPrior.Estimate)
	out.doping = put(got.Doping, e.post[i].Doping.WithPrior.Estimate)
	return out
}

// epiZones are the parts of a wafer that its layer is given on, by radius squared
// over the wafer's: three of equal area.
var epiZones = []string{"centre", "middle", "edge"}

// zonesAndMaps fills in the layer by zone of every wafer, and the pictures of the
// one that is farthest from the baseline.
func (e *epiwork) zonesAndMaps(ctx context.Context) error {
	if !e.lot.HasCoordinates() || e.geo.Unit == "" {
		return nil
	}
	far := e.farthest()
	columns := make([]dieColumns, len(e.levels))
	err := e.each(ctx, len(e.levels), func(i int) {
		if e.levels[i] == nil {
			return
		}
		most := mostMapped
		if i == far {
			most = e.lot.Len()
		}
		c := e.dice(i, most)
		e.zonesOf(i, &c)
		if i == far {
			columns[i] = c
		}
	})
	if err != nil || far < 0 {
		return err
	}
	return e.draw(far, &columns[far])
}

func (e *epiwork) zonesOf(i int, c *dieColumns) {
	x, y := e.lot.X(), e.lot.Y()
	var thick, dope [3][]float64
	for k, row := range c.rows {
		if x[row] == ingest.Missing || y[row] == ingest.Missing || !finite(c.doping[k]) {
			continue
		}
		z := e.geo.Ring(x[row], y[row], len(epiZones))
		if z < 0 {
			continue
		}
		thick[z], dope[z] = append(thick[z], c.thickness[k]), append(dope[z], c.doping[k])
	}
	r := e.rep.Wafers[i].Epi
	for z, name := range epiZones {
		zone := reports.EpiZone{Name: name, Dice: len(dope[z]), NetThicknessUM: reports.NaN, DopingCM3: reports.NaN}
		if len(dope[z]) >= fewestDice {
			if e.thicknessTold() {
				zone.NetThicknessUM = num(stats.TrimmedMean(thick[z], 0.1))
			}
			zone.DopingCM3 = num(stats.TrimmedMean(dope[z], 0.1))
		}
		r.Zones = append(r.Zones, zone)
	}
}

// farthest is the wafer farthest from the baseline in prior sigmas, -1 for none.
func (e *epiwork) farthest() int {
	far, most := -1, -1.0
	for i := range e.levels {
		if e.levels[i] == nil {
			continue
		}
		at := e.centre(&e.post[i])
		if v := math.Hypot(at[0]/e.d.NetSigma(e.d.Prior), at[1]/e.d.Prior.Sigma[junction.EpiDoping]); v > most {
			far, most = i, v
		}
	}
	return far
}

// epiRamp goes from low to high through near white, dark at both ends, so that grey
// print shows how far and colour which way; blue and brown are apart for all eyes.
var epiRamp = []color.RGBA{{}, {12, 60, 110, 255}, {66, 133, 180, 255}, {158, 198, 220, 255}, {240, 238, 232, 255},
	{231, 190, 130, 255}, {190, 122, 50, 255}, {110, 60, 10, 255}}

// draw paints the dice of a wafer by how far they are from its own estimate.
func (e *epiwork) draw(i int, c *dieColumns) error {
	box := e.geo.Box(e.lot.X(), e.lot.Y())
	for _, q := range []struct {
		name, unit string
		values     []float64
		on         float64
		seen       bool
	}{{"net thickness", "um", c.thickness, e.post[i].NetThickness.WithPrior.Estimate, e.thicknessTold()},
		{"doping", "cm^-3", c.doping, e.post[i].Doping.WithPrior.Estimate, true}} {
		if !q.seen {
			continue
		}
		step := rampStep(q.values, q.on)
		var x, y []int32
		var state []uint8
		for k, row := range c.rows {
			if !finite(q.values[k]) {
				continue
			}
			class := math.Round(math.Log(q.values[k]/q.on)/step) + 4
			x, y = append(x, e.lot.X()[row]), append(y, e.lot.Y()[row])
			state = append(state, uint8(math.Min(math.Max(class, 1), 7)))
		}
		picture, err := wafermap.PaintStates(x, y, state, epiRamp, box)
		if err != nil {
			return err
		}
		r := e.raster(e.rep.Wafers[i].ID+", "+q.name+", "+q.unit, picture)
		for s := 1; s < len(epiRamp); s++ {
			at := func(class float64) string { return fmt.Sprintf("%.3g", q.on*math.Exp((class-4)*step)) }
			label := at(float64(s)-0.5) + " to " + at(float64(s)+0.5)
			switch s {
			case 1:
				label = "below " + at(1.5)
			case 7:
				label = "above " + at(6.5)
			}
			r.Legend = append(r.Legend, reports.Swatch{R: epiRamp[s].R, G: epiRamp[s].G, B: epiRamp[s].B, Label: label, Dice: picture.Counts[s]})
		}
		e.rep.Pictures.Epi = append(e.rep.Pictures.Epi, r)
	}
	return nil
}

// rampStep is the log width of a class: the middle 90 % of the dice fill five, and
// none is narrower than what a die's own error would paint as a pattern.
func rampStep(values []float64, on float64) float64 {
	var x []float64
	for _, v := range values {
		if finite(v) {
			x = append(x, math.Abs(math.Log(v/on)))
		}
	}
	wide := stats.Quantiles(x, []float64{0.9}, stats.HyndmanFan8)[0] / 2.5
	for _, nice := range []float64{0.005, 0.01, 0.02, 0.05, 0.1} {
		if wide <= nice {
			return nice
		}
	}
	return 0.2
}
