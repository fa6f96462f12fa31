package rehearse

import (
	"context"
	"encoding/json"
	"io"
	"math"
	"sort"

	"kneepoint/config"
	"kneepoint/ingest/synth"
	"kneepoint/reports/build"
	"kneepoint/reports/causes"
)

// Result is what a rehearsal counted; as JSON it is the file beside the page.
type Result struct {
	Schema     int      `json:"schema"`
	Product    string   `json:"product"`
	File       string   `json:"file"`
	SHA256     string   `json:"sha256"`
	Tests      []string `json:"tests"`
	Calibrated string   `json:"calibrated,omitempty"` // how the weights were found, absent for usual ones
	Seed       uint64   `json:"seed"`
	Lots       int      `json:"lots"`
	// Leaner are lots whose cause costs under 3 % of the dice: they count for the
	// smallest sizes alone.
	Leaner int `json:"lean_lots"`
	// Assumed says what the product file does not give and was assumed; Laws why lots
	// do not follow the device model, absent when they do.
	Assumed []string `json:"assumed"`
	Laws    string   `json:"laws_alone,omitempty"`

	Causes    []CauseCount `json:"causes"`
	Confusion Confusion    `json:"confusion"`
	Worst     []Confused   `json:"confused"`
	Singles   Share        `json:"singles"`        // first cause right, of lots of one cause
	Within    Share        `json:"singles_within"` // or one that the lot does not tell from it
	InClass   Share        `json:"in_class"`       // of these lots, those that do not tell their cause from others
	Pairs     Share        `json:"pairs"`          // first cause is one of two
	PairsBoth Share        `json:"pairs_both"`     // both told at more than one half
	Accused   Share        `json:"accused"`        // healthy lots given a cause at more than one half
	Odd       Share        `json:"unexplained"`    // lots of no known cause that are called unexplained

	Reliability Reliability `json:"reliability"`
	Alike       []AlikePair `json:"alike"`
	Added       []Added     `json:"added_tests"`
	// OutOfReach are causes of which no believable size costs 1 % of the dice with this
	// product's limits, with the number of lots that were to have them.
	OutOfReach []CauseLots `json:"out_of_reach"`
	Outcomes   []Outcome   `json:"outcomes"`
}

// CauseLots is a number of lots.
type CauseLots struct {
	Cause string `json:"cause"`
	Lots  int    `json:"lots"`
}

// CauseCount is the account of one cause.
type CauseCount struct {
	Cause    string   `json:"cause"`
	First    Share    `json:"first"`  // named first
	Within   Share    `json:"within"` // or one that the lot does not tell from it
	Smallest Smallest `json:"smallest"`
}

// rehearsalLeast is the least that causes cost in a rehearsal.
const rehearsalLeast = 0.01

// Run rehearses a product with a diagnosis of it: made-up lots through the whole
// analysis, and again with each test that could be added. It fails when no lots of the
// product can be made, or when ctx ends.
func Run(ctx context.Context, p *config.Product, d *build.Diagnosis, o Options) (*Result, error) {
	if o.Lots <= 0 {
		o.Lots = RehearsalLots
	}
	lots := deal(o.Lots, mixSeed(o.Seed, rehearsalStream), rehearsalMix)
	total := len(lots) + (1+len(candidates(p)))*addedLots*len(synth.Catalogue())
	from := 0
	progress := func(done, _ int) {
		if o.Progress != nil {
			o.Progress(from+done, total)
		}
	}
	outcomes, err := weighLots(ctx, p, d, lots, loss{min: rehearsalLeast, max: mostLoss, physics: o.Physics, exact: true}, progress)
	if err != nil {
		return nil, err
	}
	from = len(lots)
	added, err := tryAdded(ctx, p, d.Weights, o.Seed, progress)
	if err != nil {
		return nil, err
	}
	r := &Result{Schema: 1, Product: p.Name, File: p.File, SHA256: p.SHA256, Calibrated: d.Calibrated, Seed: o.Seed,
		Lots: len(lots), Assumed: []string{}, Added: added, Outcomes: outcomes}
	for i := range p.Tests {
		r.Tests = append(r.Tests, p.Tests[i].Name)
	}
	if m, err := synth.NewMaker(p); err == nil {
		r.Assumed, r.Laws = append(r.Assumed, m.Assumed...), m.NoPhysics
	}
	r.count()
	return r, nil
}

// count fills in what follows from the outcomes.
func (r *Result) count() {
	var full []Outcome // of full size
	trials := map[string][]trial{}
	missed := map[string]int{}
	for i := range r.Outcomes {
		o := &r.Outcomes[i]
		for _, id := range o.Missed {
			missed[id]++
		}
		if o.Kind == Single {
			x := math.Log(max(o.Loss(), rehearsalLeast/10))
			trials[o.First()] = append(trials[o.First()], trial{x, o.Right()})
			if o.Loss() < leastLoss {
				r.Leaner++
				continue
			}
		}
		full = append(full, *o)
	}
	single := func(o *Outcome) bool { return o.Kind == Single }
	pair := func(o *Outcome) bool { return o.Kind == Pair }
	r.Confusion = confuse(full)
	r.Worst = r.Confusion.worst(full)
	r.Singles = shareOf(full, single, (*Outcome).Right)
	r.Within = shareOf(full, single, (*Outcome).RightWithin)
	r.InClass = shareOf(full, single, func(o *Outcome) bool { return len(o.Class()) > 0 })
	r.Pairs = shareOf(full, pair, (*Outcome).Right)
	r.PairsBoth = shareOf(full, pair, func(o *Outcome) bool { return min(o.OfTruth[0], o.OfTruth[1]) > 0.5 })
	r.Accused = shareOf(full, func(o *Outcome) bool { return o.Kind == Healthy }, func(o *Outcome) bool { return o.Accused > 0.5 })
	r.Odd = shareOf(full, func(o *Outcome) bool { return o.Kind == Odd }, (*Outcome).Right)
	r.Reliability = reliability(full)
	r.Alike = append([]AlikePair{}, alikePairs(r.Outcomes)...)
	for _, e := range synth.Catalogue() {
		of := func(o *Outcome) bool { return o.Kind == Single && o.First() == e.ID }
		r.Causes = append(r.Causes, CauseCount{Cause: e.ID, First: shareOf(full, of, (*Outcome).Right),
			Within: shareOf(full, of, (*Outcome).RightWithin), Smallest: smallest(e.ID, trials[e.ID], rehearsalLeast, mostLoss)})
		if n := missed[e.ID]; n > 0 {
			r.OutOfReach = append(r.OutOfReach, CauseLots{e.ID, n})
		}
	}
	sort.SliceStable(r.OutOfReach, func(a, b int) bool { return r.OutOfReach[a].Lots > r.OutOfReach[b].Lots })
	r.OutOfReach = append([]CauseLots{}, r.OutOfReach...)
}

// tenth is the rate from which a confusion is worth a word.
const tenth = 0.1

// confused are the wrong namings of at least a tenth of a cause's lots.
func (r *Result) confused() []Confused {
	var out []Confused
	for _, w := range r.Worst {
		if float64(w.Lots) >= tenth*float64(w.Of) && w.There != causes.Unknown {
			out = append(out, w)
		}
	}
	return out
}

// WriteJSON writes the result as JSON.
func (r *Result) WriteJSON(w io.Writer) error {
	data, err := json.MarshalIndent(r, "", " ")
	if err != nil {
		return err
	}
	_, err = w.Write(append(data, '\n'))
	return err
}
