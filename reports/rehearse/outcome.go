package rehearse

import (
	"context"
	"math"
	"slices"

	"kneepoint/config"
	"kneepoint/ingest/synth"
	"kneepoint/reports/build"
	"kneepoint/reports/causes"
)

// Outcome is a made-up lot with what was told of it.
type Outcome struct {
	Truth
	Named       string  `json:"named"` // the first cause
	Direction   string  `json:"named_direction,omitempty"`
	Probability float64 `json:"probability"`
	// Accused is the highest probability of a cause of the catalogue.
	Accused float64 `json:"accused"`
	// OfTruth are the probabilities of what is there, in the order of Causes; of
	// "within-baseline" for a healthy lot.
	OfTruth []float64 `json:"of_truth"`

	alike []causes.Alike
}

// First is what the lot has first: a cause, "within-baseline" or "unexplained".
func (o *Outcome) First() string {
	if len(o.Causes) == 0 {
		return causes.Nothing
	}
	return o.Causes[0].Cause
}

// Right says whether the first cause that was named is there.
func (o *Outcome) Right() bool {
	if len(o.Causes) == 0 {
		return o.Named == causes.Nothing
	}
	return slices.Contains(o.Names(), o.Named)
}

// RightWithin says whether it is there, or is one that this lot does not tell from
// what is there.
func (o *Outcome) RightWithin() bool {
	return o.Right() || slices.Contains(o.Class(), o.Named)
}

// Class are the causes that the lot does not tell from the first one that is there.
func (o *Outcome) Class() []string {
	var out []string
	for _, a := range o.alike {
		if a.Told {
			continue
		}
		switch o.First() {
		case a.A:
			out = append(out, a.B)
		case a.B:
			out = append(out, a.A)
		}
	}
	return out
}

// Loss is what the first cause costs; 0 for a healthy lot.
func (o *Outcome) Loss() float64 {
	if len(o.Causes) == 0 {
		return 0
	}
	return o.Causes[0].Loss
}

// bits is the log2 of the probability of what is there, of the less likely when
// there are two, no lower than of 1 in 1000: beyond that the
// number says more of rounding than of the lot.
func (o *Outcome) bits() float64 { return math.Log2(max(slices.Min(o.OfTruth), 1e-3)) }

func newOutcome(truth Truth, v *causes.Verdict) Outcome {
	first := &v.Causes[0]
	o := Outcome{Truth: truth, Named: first.Cause, Direction: first.Direction, Probability: first.Probability, alike: v.Alike}
	p := map[string]float64{}
	for i := range v.Causes {
		c := &v.Causes[i]
		p[c.Cause] = c.Probability
		if c.Cause != causes.Nothing && c.Cause != causes.Unknown {
			o.Accused = max(o.Accused, c.Probability)
		}
	}
	if len(truth.Causes) == 0 {
		o.OfTruth = []float64{p[causes.Nothing]}
	}
	for _, c := range truth.Causes {
		o.OfTruth = append(o.OfTruth, p[c.Cause])
	}
	return o
}

// weighLots makes lots and weighs their causes.
func weighLots(ctx context.Context, p *config.Product, d *build.Diagnosis, lots []Lot, cost loss, progress func(done, total int)) ([]Outcome, error) {
	m, err := synth.NewMaker(p)
	if err != nil {
		return nil, err
	}
	out := make([]Outcome, len(lots))
	err = each(ctx, len(lots), progress, func(ctx context.Context, i int) error {
		e, truth, err := lots[i].make(ctx, m, cost)
		if err != nil {
			return err
		}
		out[i] = newOutcome(truth, causes.Weigh(e, d.Catalogue, d.Weights))
		return nil
	})
	return out, err
}
