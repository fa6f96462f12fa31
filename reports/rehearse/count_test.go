package rehearse

import (
	"bytes"
	"context"
	"encoding/json"
	"fmt"
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"kneepoint/config"
	"kneepoint/ingest"
	"kneepoint/ingest/synth"
	"kneepoint/ingest/synth/memory"
	"kneepoint/reports/build"
	"kneepoint/reports/causes"
)

// TestReliability against a count by hand: bins of two lots each.
func TestReliability(t *testing.T) {
	var all []Outcome
	want := 0.0
	for b := range 10 {
		told := 0.05 + 0.1*float64(b)
		for k := range 2 {
			o := Outcome{Named: "lifetime", Probability: told}
			o.Causes = []Cause{{Cause: "lifetime"}}
			if k == 0 && b%2 == 0 || b == 1 {
				o.Named = "edge-field" // right: one of two in even bins, none in bin 1, all in the others
			}
			all = append(all, o)
		}
		right := 1.0
		if b%2 == 0 {
			right = 0.5
		}
		if b == 1 {
			right = 0
		}
		want += math.Abs(told-right) / 10
	}
	rand.New(rand.NewPCG(1, 1)).Shuffle(len(all), func(i, j int) { all[i], all[j] = all[j], all[i] })
	r := reliability(all)
	if math.Abs(r.Error-want) > 1e-12 || len(r.Bins) != 10 || r.Bins[1].Right != 0 || r.Bins[3].Right != 2 {
		t.Errorf("error %v, want %v; bins %+v", r.Error, want, r.Bins)
	}
}

// TestSmallest: on lots that are found by a known curve, the loss at which nine in
// ten are found is covered by its interval about as often as 95 % promises; a cause
// that is always or never found is said to lie beyond.
func TestSmallest(t *testing.T) {
	r := rand.New(rand.NewPCG(7, 7))
	const truth, slope = 0.08, 2.5 // logit P = log 9 + slope ln(loss / truth)
	covered, of := 0, 150
	var logs float64
	for i := range of {
		var trials []trial
		for range 60 {
			x := math.Log(rehearsalLeast) + r.Float64()*math.Log(mostLoss/rehearsalLeast)
			p := 1 / (1 + math.Exp(-math.Log(9)-slope*(x-math.Log(truth))))
			trials = append(trials, trial{x, r.Float64() < p})
		}
		s := smallest(fmt.Sprint("cause ", i), trials, rehearsalLeast, mostLoss)
		logs += math.Log(s.Loss/truth) / float64(of)
		if s.Lower <= truth && truth <= s.Upper {
			covered++
		}
	}
	// 95 % of 150 is 142.5 with a standard error of 2.7; percentile intervals of 60 lots
	// are known to cover a little less.
	if covered < 132 {
		t.Errorf("%d of %d intervals cover", covered, of)
	}
	if math.Abs(logs) > 0.15 {
		t.Errorf("the median loss is off by a factor %.2f", math.Exp(logs))
	}
	for _, found := range []bool{true, false} {
		var trials []trial
		for i := range 20 {
			trials = append(trials, trial{math.Log(rehearsalLeast) + float64(i)/19*math.Log(mostLoss/rehearsalLeast), found})
		}
		want := 1
		if found {
			want = -1
		}
		if s := smallest("x", trials, rehearsalLeast, mostLoss); s.Beyond != want {
			t.Errorf("found %v: %+v", found, s)
		}
	}
	if s := smallest("x", make([]trial, 3), rehearsalLeast, mostLoss); s.Why == "" {
		t.Error("three lots are enough")
	}
}

// TestAdded: what a class product lacks is among what could be added, and can be made.
func TestAdded(t *testing.T) {
	p := synth.ClassProducts("COB", "COB2", "HFE1")[1]
	names := ""
	for _, c := range candidates(p) {
		names += c.name + "; "
		more, err := c.with(p)
		if err != nil {
			t.Errorf("%s: %v", c.name, err)
			continue
		}
		m, err := synth.NewMaker(more)
		if err != nil {
			t.Errorf("%s: %v", c.name, err)
			continue
		}
		made, err := m.Random(synth.RandomOptions{Seed: 5, Wafers: 1, Dice: 60, Physics: "laws"})
		if err != nil {
			t.Errorf("%s: %v", c.name, err)
			continue
		}
		lot := made.Generate()
		v := lot.Wafers[0].Values[len(more.Tests)-1][7]
		unit := more.Tests[len(more.Tests)-1].Unit
		if level := unit.FromSI(c.median); !(v > level/4 && v < level*4) {
			t.Errorf("%s reads %v, the healthy level is %v", c.name, v, level)
		}
	}
	for _, want := range []string{"Cob at 5 V", "hFE at 10 uA", "pinch", "collector resistance"} {
		if !strings.Contains(names, want) {
			t.Errorf("%s is not among %s", want, names)
		}
	}
}

// TestShown: a rehearsal's tables fit a terminal, its page is whole and loads nothing,
// and a product's name cannot write into either.
func TestShown(t *testing.T) {
	p := demoProduct(t)
	d, err := Diagnosis(p, causes.UsualWeights(), "")
	if err != nil {
		t.Fatal(err)
	}
	lots := deal(20, 9, rehearsalMix)
	out, err := weighLots(context.Background(), p, d, lots, loss{min: rehearsalLeast, max: mostLoss, physics: "laws", exact: true}, nil)
	if err != nil {
		t.Fatal(err)
	}
	for i := range out {
		for _, c := range out[i].Causes {
			if c.Cause != causes.Unknown && !(c.Loss > -0.02 && c.Loss < 0.7) {
				t.Errorf("lot %d: %s costs %v", i, c.Cause, c.Loss)
			}
		}
	}
	r := &Result{Product: "<script>\x1b[2J", File: p.File, SHA256: p.SHA256, Lots: len(lots), Outcomes: out, Assumed: []string{},
		Added: []Added{{Test: "pinch resistance of the base", Bits: 0.5, Error: 0.1, Lots: 48,
			Splits:    []AlikePair{{A: "emitter-depth", B: "emitter-efficiency", Cosine: 0.99}},
			GainsMost: []CauseBits{{"emitter-depth", 2}}}}}
	r.count()
	var text, html, data bytes.Buffer
	if err := r.WriteText(&text); err != nil {
		t.Fatal(err)
	}
	for _, line := range strings.Split(text.String(), "\n") {
		if n := len([]rune(line)); n > 80 {
			t.Errorf("%d columns: %s", n, line)
		}
	}
	if err := r.WriteHTML(&html); err != nil {
		t.Fatal(err)
	}
	for _, bad := range []string{"<script", "http:", "https:", "src=", "ZgotmplZ", "NaN"} {
		if strings.Contains(html.String(), bad) {
			t.Errorf("the page has %s", bad)
		}
	}
	if !strings.Contains(html.String(), "Most would help: pinch resistance") || strings.Contains(text.String(), "\x1b") {
		t.Error("the added test is missing, or a control character went through")
	}
	if err := r.WriteJSON(&data); err != nil {
		t.Fatal(err)
	}
	var back Result
	if err := json.Unmarshal(data.Bytes(), &back); err != nil || back.Singles != r.Singles {
		t.Errorf("the JSON does not read back: %v", err)
	}
}

// BenchmarkCauses is what naming causes adds to the triage of a lot of 25 wafers of
// 4,000 dice: evidence and weighing, with the device model built.
func BenchmarkCauses(b *testing.B) {
	p := demoProduct(b)
	m, err := synth.NewMaker(p)
	if err != nil {
		b.Fatal(err)
	}
	l := Lot{Seed: 3, Kind: Single, Causes: []string{"lifetime"}, Wafers: 25, Dice: 4000}
	lot, own, err := benchLot(&l, m)
	if err != nil {
		b.Fatal(err)
	}
	for b.Loop() {
		e, err := own.Evidence(context.Background(), lot, benchSettings)
		if err != nil {
			b.Fatal(err)
		}
		causes.Weigh(e, own.Catalogue, own.Weights)
	}
}

var benchSettings = config.DefaultSettings()

// benchLot makes a lot and readies its diagnosis.
func benchLot(l *Lot, m *synth.Maker) (*ingest.Lot, *build.Diagnosis, error) {
	made, _, err := l.draw(m, loss{min: leastLoss, max: mostLoss, physics: "laws"})
	if err != nil {
		return nil, nil, err
	}
	lot, err := memory.Lot(made.Generate(), ingest.Options{Product: made.Product})
	if err != nil {
		return nil, nil, err
	}
	d, err := build.NewDiagnosis(made.Product)
	return lot, d, err
}
