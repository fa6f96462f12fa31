package build

import (
	"context"
	"fmt"
	"math"
	"strings"

	"golang.org/x/sync/errgroup"

	"kneepoint/config"
	"kneepoint/reports"
	"kneepoint/stats"
	"kneepoint/stats/junction"
)

// epiwork is what the inference of the epi layer goes through.
type epiwork struct {
	*lotwork
	d      *device
	l      *leveller
	levels [][]level // by wafer; nil: none
	post   []junction.Posterior
	lotPos junction.Posterior
	relate []waferShift
}

// inferEpi fills in what the electrical data say of the epi layer, by wafer and for
// the lot's typical wafer.
func (w *lotwork) inferEpi(ctx context.Context) error {
	fail := func(why string) error {
		w.rep.EpiWhy = why
		for i := range w.rep.Wafers {
			w.rep.Wafers[i].EpiWhy = why
		}
		return nil
	}
	d, why := w.device()
	if d == nil {
		return fail(why)
	}
	e := &epiwork{lotwork: w, d: d, l: newLeveller(d, w.lot)}
	n := len(w.rep.Wafers)
	e.levels, e.post = make([][]level, n), make([]junction.Posterior, n)
	if err := e.each(ctx, n, e.wafer); err != nil {
		return err
	}
	all := lotLevels(d, e.levels)
	if len(all) == 0 {
		w.rep.EpiWhy = "no wafer has a level to judge by"
		return nil
	}
	in := readings(d, all)
	if d.Own { // by definition at the baseline: nothing is known of the lot as a whole
		in = nil
	}
	e.lotPos = d.Invert(in, d.Prior)
	e.relate = e.compare(all)
	e.growOnLot()
	if err := e.zonesAndMaps(ctx); err != nil {
		return err
	}
	e.lotAccount(all)
	return nil
}

// device is the product's device model, built once.
func (w *lotwork) device() (*device, string) {
	if w.model == nil && w.modelWhy == "" {
		var own map[string]float64
		if p := w.in.Product; p != nil && !hasBaseline(p) {
			own = w.majority()
		}
		w.model, w.modelWhy = deviceModel(w.in.Product, own)
	}
	return w.model, w.modelWhy
}

// each runs a task for 0 to n-1 on the report's workers.
func (w *lotwork) each(ctx context.Context, n int, task func(i int)) error {
	group, ctx := errgroup.WithContext(ctx)
	group.SetLimit(w.workers())
	for i := range n {
		group.Go(func() error {
			if ctx.Err() == nil {
				task(i)
			}
			return ctx.Err()
		})
	}
	return group.Wait()
}

// wafer infers one wafer.
func (e *epiwork) wafer(i int) {
	wafer := e.lot.Wafers()[i]
	out := &e.rep.Wafers[i]
	levels, notes, why := e.l.wafer(wafer.Lo, wafer.Hi)
	if out.EpiWhy = why; why != "" {
		return
	}
	if text := e.l.blanks(levels); text != "" {
		notes = append(notes, text)
	}
	e.levels[i] = levels
	e.post[i] = e.d.Invert(readings(e.d, levels), e.d.Prior)
	if e.d.Own {
		relative(&e.post[i], e.d)
	}
	out.Epi = e.account(&e.post[i], levels, append(epiWords(e.d, &e.post[i]), notes...))
}

// relative turns a wafer's estimate against the lot's own majority into one of the
// layer itself: where the majority stands is known by the prior alone.
func relative(p *junction.Posterior, d *device) {
	widen := func(q *junction.Quantity, sigma float64) {
		i := &q.WithPrior
		by := func(bound float64) float64 { return math.Hypot(math.Log(bound/i.Estimate), z95*sigma) }
		i.Lower, i.Upper = i.Estimate*math.Exp(-by(i.Lower)), i.Estimate*math.Exp(by(i.Upper))
		nan := math.NaN()
		q.DataOnly, q.Sight, q.Share = junction.Interval{Estimate: nan, Lower: nan, Upper: nan}, junction.Blind, math.Max(q.Share, 1)
	}
	dev := &d.Device
	widen(&p.NetThickness, d.NetSigma(d.Prior))
	widen(&p.Thickness, d.NetSigma(d.Prior)*d.NetThickness()/dev.EpiThicknessUM)
	widen(&p.Doping, d.Prior.Sigma[junction.EpiDoping])
	widen(&p.Resistivity, d.Prior.Sigma[junction.EpiDoping])
}

const z95 = 1.959964

// account is the report's form of a posterior.
func (e *epiwork) account(p *junction.Posterior, levels []level, words []string) *reports.Epi {
	spec := e.in.Product.Device.Epi
	r := &reports.Epi{
		NetThicknessUM: epiInterval(p.NetThickness.WithPrior), DopingCM3: epiInterval(p.Doping.WithPrior),
		ThicknessUM:      specInterval(p.Thickness, spec.ThicknessUM),
		ResistivityOhmCM: specInterval(p.Resistivity, spec.ResistivityOhmCM),
		Regime:           string(p.Regime), DepletionRatio: epiInterval(p.X),
		ThicknessObservable: p.NetThickness.Sight == junction.Seen, DopingObservable: p.Doping.Sight == junction.Seen,
		ThicknessShare: num(p.NetThickness.Share), DopingShare: num(p.Doping.Share), Separable: p.Separate.ThicknessFromDoping,
		DataOnly: reports.EpiData{NetThicknessUM: sightInterval(p.NetThickness), ThicknessUM: sightInterval(p.Thickness),
			DopingCM3: sightInterval(p.Doping), ResistivityOhmCM: sightInterval(p.Resistivity)},
		Note: paragraph(words),
	}
	r.NetThicknessUM.Method, r.DataOnly.NetThicknessUM.Method = "device model on a grid, nuisances integrated out", "profile likelihood"
	for _, v := range levels {
		sigma := math.Hypot(junction.UsualSigma(e.d.Tests[v.Test].Measures), v.SE)
		r.Readings = append(r.Readings, reports.EpiReading{Test: e.d.Tests[v.Test].Name, Ratio: num(math.Exp(v.Log)), Sigma: num(sigma),
			Bound: [...]string{"at most", "", "at least"}[v.Censor+1], Dice: v.N, Misses: v.Misses})
	}
	return r
}

func epiInterval(i junction.Interval) reports.Interval {
	return reports.Interval{Estimate: num(i.Estimate), Lower: num(i.Lower), Upper: num(i.Upper)}
}

func sightInterval(q junction.Quantity) reports.SightInterval {
	out := reports.SightInterval{Interval: epiInterval(q.DataOnly), Sight: q.Sight.String()}
	switch q.Sight {
	case junction.Blind:
		out.Why = "these tests do not see it"
	case junction.AtLeast, junction.AtMost:
		out.Why = "bounded from one side only"
	}
	return out
}

// specInterval judges a quantity against its spec. A verdict needs data: in spec
// when the interval is inside and the data alone put the estimate inside too; out
// when either interval is wholly outside.
func specInterval(q junction.Quantity, spec config.Spec) reports.SpecInterval {
	out := reports.SpecInterval{Interval: epiInterval(q.WithPrior), SpecLower: num(spec.Lower), SpecUpper: num(spec.Upper)}
	if math.IsNaN(spec.Lower) && math.IsNaN(spec.Upper) {
		return out
	}
	outside := func(i junction.Interval) bool { return i.Upper < spec.Lower || i.Lower > spec.Upper } // NaN: no
	inside := func(lo, hi float64) bool { return !(lo < spec.Lower) && !(hi > spec.Upper) }
	verdict := func(v bool) { out.InSpec = &v }
	a, b := q.WithPrior, q.DataOnly
	switch {
	case q.Sight == junction.Blind:
	case outside(a) || outside(b):
		verdict(false)
	case q.Sight == junction.Seen && inside(a.Lower, a.Upper) && inside(b.Estimate, b.Estimate):
		verdict(true)
	}
	return out
}

// parameters are what else the inversion gives, the base's combinations first.
func (e *epiwork) parameters(p *junction.Posterior) []reports.EpiParameter {
	var out []reports.EpiParameter
	add := func(name string, q junction.Quantity, sigma float64) {
		r := reports.EpiParameter{Name: name, Interval: epiInterval(q.WithPrior), DataOnly: epiInterval(q.DataOnly), Seen: q.Sight == junction.Seen}
		r.Prior = reports.Interval{Estimate: 1, Lower: num(math.Exp(-z95 * sigma)), Upper: num(math.Exp(z95 * sigma))}
		if !r.Seen {
			r.DataOnly.Why = "these tests do not see it"
		}
		out = append(out, r)
	}
	// The prior of a combination is what its posterior's share says it is.
	implied := func(q junction.Quantity) float64 {
		if !(q.Share > 0) {
			return math.NaN()
		}
		return math.Log(q.WithPrior.Upper/q.WithPrior.Lower) / (2 * z95 * q.Share)
	}
	add("base Gummel number", p.BaseGummel, implied(p.BaseGummel))
	add("base width", p.BaseWidth, implied(p.BaseWidth))
	for _, k := range []junction.Param{junction.EmitterGummel, junction.EdgeRadius, junction.Lifetime, junction.SurfaceVelocity,
		junction.SeriesResistance, junction.Modulation} {
		if sigma := e.d.Prior.Sigma[k]; sigma > 0 {
			add(k.String(), p.Params[k], sigma)
		}
	}
	return out
}

// drawnSigmas is how many prior sigmas from target data alone must be for the reader
// to be told that the prior draws the value.
const drawnSigmas = 2

// epiWords are the sentences of one posterior, without those that are the same for
// every wafer, and with what the data alone say where the prior draws it away.
func epiWords(d *device, p *junction.Posterior) []string {
	var out []string
	if d.Own {
		net, dope := p.NetThickness.WithPrior.Estimate/d.NetThickness(), p.Doping.WithPrior.Estimate/d.Device.EpiDopingCM3
		return append(out, fmt.Sprintf("against the lot's own majority: net thickness %+.1f %%, doping %+.1f %%; where the majority stands is known by the prior alone", 100*(net-1), 100*(dope-1)))
	}
	same := map[string]bool{}
	for _, s := range p.Separate.Sentences {
		same[s] = true
	}
	for _, s := range p.Notes {
		if !same[s] {
			out = append(out, s)
		}
	}
	for _, x := range []struct {
		name, unit string
		q          junction.Quantity
		nominal    float64
		sigma      float64
	}{{"net thickness", "um", p.NetThickness, d.NetThickness(), d.NetSigma(d.Prior)},
		{"doping", "cm^-3", p.Doping, d.Device.EpiDopingCM3, d.Prior.Sigma[junction.EpiDoping]}} {
		if z := math.Log(x.q.DataOnly.Estimate/x.nominal) / x.sigma; math.Abs(z) > drawnSigmas {
			out = append(out, fmt.Sprintf("data alone put %s at %.3g %s, %.1f sigmas of the spec's spread from target: believe them rather than the value with the prior, which is drawn to target",
				x.name, x.q.DataOnly.Estimate, x.unit, math.Abs(z)))
		}
	}
	return out
}

// paragraph joins sentences. A first word that is a name or a symbol keeps its case.
func paragraph(words []string) string {
	var out []string
	for _, s := range words {
		if s = strings.TrimSpace(s); s == "" {
			continue
		}
		if first, _, _ := strings.Cut(s, " "); first == strings.ToLower(first) {
			s = strings.ToUpper(s[:1]) + s[1:]
		}
		out = append(out, s+".")
	}
	return strings.Join(out, " ")
}

// fewestForGrown is the fewest wafers that make a typical one.
const fewestForGrown = 5

// growOnLot gives wafers the thickness as grown that follows from the typical
// wafer's and from how their net thickness differs from it. Base depth and
// up-diffused tail come from steps that the wafers of a lot go through together, so a
// quarter of their spread is left between wafers (common practice, no source); epi
// is grown wafer by wafer or reactor load by load. Without this, a few thin wafers
// would be put down to a tail that their neighbours do not have.
func (e *epiwork) growOnLot() {
	lot := &e.lotPos
	if e.d.Own || e.waferCount() < fewestForGrown || lot.NetThickness.Sight != junction.Seen {
		return
	}
	dev, net := &e.d.Device, e.d.NetThickness()
	grown := dev.EpiThicknessUM * e.d.Prior.Sigma[junction.EpiThickness]
	offset := math.Sqrt(math.Max(0, math.Pow(net*e.d.NetSigma(e.d.Prior), 2)-grown*grown))
	for i, s := range e.relate {
		p := &e.post[i]
		if e.levels[i] == nil || p.NetThickness.Sight != junction.Seen || !finite(s.thickness) {
			continue
		}
		w := lot.NetThickness.WithPrior.Estimate
		own := z95 * math.Hypot(w*s.thicknessSigma, offset/4)
		at := lot.Thickness.WithPrior.Estimate + w*math.Expm1(s.thickness)
		l := lot.Thickness.WithPrior
		p.Thickness.WithPrior = junction.Interval{Estimate: at, Lower: at - math.Hypot(l.Estimate-l.Lower, own), Upper: at + math.Hypot(l.Upper-l.Estimate, own)}
		out := &e.rep.Wafers[i].Epi.ThicknessUM
		*out = specInterval(p.Thickness, e.in.Product.Device.Epi.ThicknessUM)
		out.Method = "the lot's typical wafer, and this wafer's net thickness against it"
	}
}

// lotAccount fills in the lot's own account: the typical wafer, how wafers differ,
// and what to measure next.
func (e *epiwork) lotAccount(all []level) {
	words := epiWords(e.d, &e.lotPos)
	if e.d.Own {
		words = nil
	}
	words = append(words, e.lotPos.Separate.Sentences...)
	words = append(words, e.d.Notes...)
	if text := e.l.blanks(sumMisses(all, e.levels)); text != "" {
		words = append(words, text)
	}
	r := e.account(&e.lotPos, all, nil)
	r.Parameters = e.parameters(&e.lotPos)
	r.BetweenWafers = e.between()
	r.Note = paragraph(append([]string{r.BetweenWafers.Text}, words...))
	r.Next = e.next(all)
	e.rep.Epi = r
}

// sumMisses counts the lot's blanks for what is said of them.
func sumMisses(all []level, wafers [][]level) []level {
	out := append([]level(nil), all...)
	for k := range out {
		out[k].N, out[k].Misses = 0, 0
		for _, w := range wafers {
			for _, v := range w {
				if v.Test == out[k].Test {
					out[k].N += v.N
					out[k].Misses += v.Misses
				}
			}
		}
	}
	return out
}

// Fewer bits than worthwhile are not worth a measurement.
const worthwhile, mostNext = 0.1, 5

// next ranks the measurements that would tell more of thickness and doping.
func (e *epiwork) next(all []level) []reports.Next {
	if len(e.d.Monitors) == 0 || e.d.Own {
		return nil
	}
	var candidates []junction.Reading
	for _, i := range e.d.Monitors {
		candidates = append(candidates, junction.Reading{Test: i})
	}
	var out []reports.Next
	for _, c := range e.d.NextTest(readings(e.d, all), e.d.Prior, candidates) {
		if c.Bits < worthwhile || len(out) == mostNext {
			break
		}
		out = append(out, reports.Next{InformationBits: num(c.Bits), Text: fmt.Sprintf(
			"%s: leaves the net thickness known to %.0f %% of the prior's width, now %.0f %%", e.d.Tests[c.Test].Name,
			100*c.ThicknessShareOfPrior, 100*math.Min(1, e.lotPos.NetThickness.Share))})
	}
	return out
}

// median of what is finite.
func finiteMedian(x []float64) float64 {
	var y []float64
	for _, v := range x {
		if finite(v) {
			y = append(y, v)
		}
	}
	return stats.Median(y)
}
