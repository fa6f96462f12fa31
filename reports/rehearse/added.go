package rehearse

import (
	"context"
	"fmt"
	"maps"
	"math"
	"slices"
	"sort"

	"kneepoint/config"
	"kneepoint/ingest/synth"
	"kneepoint/reports/causes"
)

// Added is what one more test would bring, tried on made-up lots that have it.
type Added struct {
	Test     string `json:"test"`
	Measures string `json:"measures"`
	At       string `json:"at,omitempty"`
	// Bits is the mean gain in log2 of the probability of what is there, over lots of
	// single causes that are the same but for the added test, with its standard error.
	Bits  float64 `json:"bits"`
	Error float64 `json:"standard_error"`
	Lots  int     `json:"lots"`
	// Splits are pairs that cannot be told apart without it and can with it, with the
	// cosine that they have without.
	Splits []AlikePair `json:"splits"`
	// GainsMost are the causes whose probability gains most, with their mean bits.
	GainsMost []CauseBits `json:"gains_most"`
	Why       string      `json:"why,omitempty"` // why it could not be tried
}

// CauseBits is a cause's part of a gain.
type CauseBits struct {
	Cause string  `json:"cause"`
	Bits  float64 `json:"bits"`
}

// candidate is a test that a product could have, with a healthy level. Only ratios
// to the level count; level and spread need not be more than believable.
type candidate struct {
	test         config.Test
	median       float64
	sigma        float64 // as a share of the median
	name, at, by string
}

// candidates lists the tests that a product could add: measures that the device model
// knows and the product lacks, gain at a lower current, capacitance nearer breakdown.
// Levels and spreads of small transistors: common practice, no source.
func candidates(p *config.Product) []candidate {
	level := map[string]float64{}
	spread := map[string]float64{}
	lowest, highest := math.Inf(1), 0.0
	for i := range p.Tests {
		t := &p.Tests[i]
		b, ok := config.BaselineTest{}, false
		if p.Baseline != nil {
			b, ok = p.Baseline.Tests[t.Name]
		}
		if !ok || !(b.Median > 0) {
			b.Median, b.Sigma = math.NaN(), math.NaN()
		}
		if _, seen := level[t.Measures]; !seen || t.Measures == "cob" {
			level[t.Measures], spread[t.Measures] = b.Median, b.Sigma/b.Median
		}
		for _, c := range t.At {
			switch {
			case t.Measures == "hfe" && c.Unit.Base == "A" && c.Value > 0:
				lowest = min(lowest, c.Value)
			case t.Measures == "cob" && c.Unit.Base == "V" && c.Value > highest:
				highest = c.Value
			}
		}
	}
	or := func(v, usual float64) float64 {
		if v > 0 && !math.IsInf(v, 0) {
			return v
		}
		return usual
	}
	breakdown := or(level["bvcbo"], or(level["bvceo"], 40))
	var out []candidate
	add := func(name, measures, unit string, median, sigma float64, at string) {
		u, _ := config.ParseUnit(unit)
		c := candidate{name: name, at: at, by: measures, median: median, sigma: sigma}
		c.test = config.Test{Name: name, Measures: measures, Unit: u, AtText: at,
			Lower: math.NaN(), Upper: math.NaN(), Clamp: math.NaN(), Floor: math.NaN()}
		out = append(out, c)
	}
	missing := func(measures string) bool { _, has := level[measures]; return !has }
	gain := or(spread["hfe"], 0.12)
	if missing("rpinch") {
		add("pinch resistance of the base", "rpinch", "kohm", 8e3, gain, "")
	}
	if missing("rc") {
		add("collector resistance", "rc", "ohm", 30, or(spread["vcesat"], 0.06)*1.2, "IC=10mA")
	}
	if low := 10e-6; !missing("hfe") && lowest > 3*low {
		add("hFE at 10 uA", "hfe", "", 0.75*or(level["hfe"], 120), 1.1*gain, "IC=10uA, VCE=5V")
	}
	if missing("hfe") {
		add("hFE at 2 mA", "hfe", "", 120, 0.12, "IC=2mA, VCE=5V")
	}
	if missing("cob") {
		add("Cob at 5 V", "cob", "pF", 3e-12, 0.02, "VCB=5V, F=1MHz")
	} else if high := math.Round(0.75 * breakdown); high > 1.5*highest {
		was := or(level["cob"], 3e-12)
		add(fmt.Sprintf("Cob at %.0f V", high), "cob", "pF", was*math.Pow((high+0.7)/(max(highest, 1)+0.7), -0.4), or(spread["cob"], 0.02),
			fmt.Sprintf("VCB=%.0fV, F=1MHz", high))
	}
	if missing("bvebo") {
		add("BVEBO", "bvebo", "V", 7, 0.015, "IE=10uA")
	}
	if missing("bvcbo") {
		add("BVCBO", "bvcbo", "V", 1.7*or(level["bvceo"], 25), 0.02, "IC=10uA")
	}
	if missing("icbo") {
		add("ICBO", "icbo", "nA", 0.5e-9, 0.4, fmt.Sprintf("VCB=%.0fV", math.Round(0.5*breakdown)))
	}
	if missing("vcesat") {
		add("VCESAT", "vcesat", "V", 0.1, 0.05, "IC=50mA, IB=5mA")
	}
	return out
}

// with is the product with the candidate's test added.
func (c *candidate) with(p *config.Product) (*config.Product, error) {
	more := *p
	var err error
	if c.test.At, err = config.ParseConditions(c.at); err != nil {
		return nil, err
	}
	for slices.ContainsFunc(p.Tests, func(t config.Test) bool { return t.Name == c.test.Name }) {
		c.test.Name += " (added)"
	}
	more.Tests = append(slices.Clone(p.Tests), c.test)
	b := config.Baseline{Yield: math.NaN(), Tests: map[string]config.BaselineTest{}}
	if p.Baseline != nil {
		b = *p.Baseline
		if b.Tests = maps.Clone(b.Tests); b.Tests == nil {
			b.Tests = map[string]config.BaselineTest{}
		}
	}
	b.Tests[c.test.Name] = config.BaselineTest{Median: c.median, Sigma: c.sigma * c.median, WithinLotSigma: math.NaN(), LotSigma: math.NaN()}
	more.Baseline = &b
	return &more, nil
}

// addedLots are so many lots of each cause on which an added test is tried.
const addedLots = 3

// tryAdded tries every candidate on the same made-up lots, with the weights of the
// product as it is. Lots have plain slopes inside: another device model for every
// candidate would take longer than all the rest.
func tryAdded(ctx context.Context, p *config.Product, w causes.Weights, seed uint64, progress func(done, total int)) ([]Added, error) {
	list := candidates(p)
	lots := deal(addedLots*len(synth.Catalogue()), mixSeed(seed, addedStream), Mix{Single: 1})
	for i := range lots {
		lots[i].Wafers = 10
	}
	cost := loss{min: leastLoss, max: mostLoss, physics: "laws"}
	step := 0
	weigh := func(p *config.Product) ([]Outcome, error) {
		d, err := Diagnosis(p, w, "")
		if err != nil {
			return nil, err
		}
		from := step * len(lots)
		step++
		return weighLots(ctx, p, d, lots, cost, func(done, _ int) {
			if progress != nil {
				progress(from+done, (1+len(list))*len(lots))
			}
		})
	}
	before, err := weigh(p)
	if err != nil {
		return nil, err
	}
	var out []Added
	for i := range list {
		c := &list[i]
		more, err := c.with(p)
		var after []Outcome
		if err == nil {
			after, err = weigh(more)
		}
		if ctx.Err() != nil {
			return nil, ctx.Err()
		}
		a := Added{Test: c.name, Measures: c.by, At: c.at, Lots: len(lots), Splits: []AlikePair{}, GainsMost: []CauseBits{}}
		if err != nil {
			a.Lots, a.Why = 0, err.Error()
		} else {
			a.compare(before, after)
		}
		out = append(out, a)
	}
	sort.SliceStable(out, func(i, j int) bool { return out[i].Bits > out[j].Bits })
	return out, nil
}

// compare fills in what the test brought, from the same lots without and with it.
func (a *Added) compare(before, after []Outcome) {
	sum, squares := 0.0, 0.0
	by, n := map[string]float64{}, map[string]int{}
	count := 0
	for i := range before {
		if before[i].First() != after[i].First() {
			continue // out of reach in one of the two
		}
		gain := after[i].bits() - before[i].bits()
		sum, squares, count = sum+gain, squares+gain*gain, count+1
		by[before[i].First()] += gain
		n[before[i].First()]++
	}
	if a.Lots = count; count == 0 {
		return
	}
	a.Bits = sum / float64(count)
	a.Error = math.Sqrt(max(squares/float64(count)-a.Bits*a.Bits, 0) / float64(count))
	for id, s := range by {
		if mean := s / float64(n[id]); mean >= 0.3 {
			a.GainsMost = append(a.GainsMost, CauseBits{id, mean})
		}
	}
	sort.Slice(a.GainsMost, func(i, j int) bool {
		x, y := a.GainsMost[i], a.GainsMost[j]
		return x.Bits > y.Bits || x.Bits == y.Bits && x.Cause < y.Cause
	})
	a.GainsMost = a.GainsMost[:min(len(a.GainsMost), 3)]
	still := alikePairs(after)
	for _, was := range alikePairs(before) {
		if !slices.ContainsFunc(still, func(p AlikePair) bool { return p.A == was.A && p.B == was.B }) {
			a.Splits = append(a.Splits, was)
		}
	}
}
