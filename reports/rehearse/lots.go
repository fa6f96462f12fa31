package rehearse

import (
	"context"
	"fmt"
	"math"
	"math/rand/v2"
	"slices"

	"kneepoint/config"
	"kneepoint/ingest"
	"kneepoint/ingest/synth"
	"kneepoint/ingest/synth/memory"
	"kneepoint/reports/build"
	"kneepoint/reports/causes"
)

// Kind is what a made-up lot is for.
type Kind string

// The kinds.
const (
	Healthy Kind = "healthy"
	Single  Kind = "single"
	Pair    Kind = "pair"
	Odd     Kind = "odd" // something is wrong that no cause of the catalogue couples
)

// Mix is how many lots of each kind there are in a round; rounds follow one another.
type Mix struct{ Healthy, Single, Pair, Odd int }

// The mixes that are dealt. A calibration sees a quarter of healthy lots and an
// eighth of pairs; a rehearsal more single causes, whose rates it tells.
var (
	calibrationMix = Mix{Healthy: 4, Single: 9, Pair: 2, Odd: 1}
	rehearsalMix   = Mix{Healthy: 3, Single: 14, Pair: 2, Odd: 1}
)

// Lot is one made-up lot, before it is made.
type Lot struct {
	Index int
	Seed  uint64
	Kind  Kind
	// Causes that are to be there; for [Single], further causes follow, tried in turn
	// when no believable size of the first costs enough.
	Causes []string
	Wafers int
	Dice   int // a wafer
}

// deal lists n lots of a mix. Kinds are spread evenly over the rounds, and causes
// are taken in turn.
func deal(n int, seed uint64, mix Mix) []Lot {
	var ids []string
	for _, e := range synth.Catalogue() {
		ids = append(ids, e.ID)
	}
	round := spread(mix)
	lots := make([]Lot, n)
	singles, pairs := 0, 0
	for i := range lots {
		r := rand.New(rand.NewPCG(seed, uint64(i)))
		l := Lot{Index: i, Seed: r.Uint64(), Kind: round[i%len(round)], Wafers: 10 + r.IntN(9), Dice: 200 + r.IntN(161)}
		switch l.Kind {
		case Single:
			at := singles % len(ids)
			l.Causes = append(slices.Clone(ids[at:]), ids[:at]...)
			singles++
		case Pair:
			// A stride that has no divisor in common with the number of causes goes
			// through all second causes as the first goes round.
			a := pairs * 7 % len(ids)
			b := (a + 1 + r.IntN(len(ids)-1)) % len(ids)
			l.Causes = []string{ids[a], ids[b]}
			pairs++
		}
		lots[i] = l
	}
	return lots
}

// spread is one round, the rarer kinds evenly among the others.
func spread(m Mix) []Kind {
	counts := []struct {
		kind Kind
		n    int
	}{{Single, m.Single}, {Healthy, m.Healthy}, {Pair, m.Pair}, {Odd, m.Odd}}
	total := m.Healthy + m.Single + m.Pair + m.Odd
	given := make([]int, len(counts))
	var out []Kind
	for i := 1; i <= total; i++ {
		best, lag := 0, math.Inf(-1)
		for k, c := range counts {
			if behind := float64(c.n*i)/float64(total) - float64(given[k]); given[k] < c.n && behind > lag {
				best, lag = k, behind
			}
		}
		given[best]++
		out = append(out, counts[best].kind)
	}
	return out
}

// Truth is what a made-up lot has.
type Truth struct {
	Index   int     `json:"lot"`
	Seed    uint64  `json:"seed"`
	Kind    Kind    `json:"kind"`
	Causes  []Cause `json:"causes"`
	Physics string  `json:"physics"`
	Wafers  int     `json:"wafers"`
	Dice    int     `json:"dice"`
	// Missed are causes of which no believable size costs enough on this product, and
	// in whose place the lot has another.
	Missed []string `json:"out_of_reach,omitempty"`
}

// Cause is one that a made-up lot has.
type Cause struct {
	Cause     string  `json:"cause"`
	Direction string  `json:"direction,omitempty"`
	Variety   string  `json:"variety,omitempty"`
	Size      float64 `json:"size,omitempty"`
	// Loss is the share of the lot's dice that it costs.
	Loss float64 `json:"loss,omitempty"`
}

// Names are the causes as package causes takes a truth: none for a healthy lot.
func (t *Truth) Names() []string {
	var out []string
	for _, c := range t.Causes {
		out = append(out, c.Cause)
	}
	return out
}

// loss is the range that causes may cost, and which physics lots have inside.
type loss struct {
	min, max float64
	physics  string // "" either
	exact    bool   // count what causes really cost: makes each lot twice
}

// attempts are so many draws of a cause before the next one stands in for it: other
// draws have other directions and patterns.
const attempts = 4

// make makes a lot and looks at it.
func (l *Lot) make(ctx context.Context, m *synth.Maker, cost loss) (*causes.Evidence, Truth, error) {
	made, truth, err := l.draw(m, cost)
	if err != nil {
		return nil, truth, err
	}
	whole := made.Generate()
	if cost.exact {
		for i := range truth.Causes { // the wanted causes are the last
			number := len(made.Spec.Causes) - len(truth.Causes) + i
			truth.Causes[i].Loss = whole.CauseTruth(number).Loss
		}
	}
	lot, err := memory.Lot(whole, ingest.Options{Product: made.Product, Workers: 1})
	if err != nil {
		return nil, truth, err
	}
	settings := config.DefaultSettings()
	settings.Workers = 1                         // lots run side by side
	own, err := build.NewDiagnosis(made.Product) // the lot has a die size of its own
	if err != nil {
		return nil, truth, err
	}
	e, err := own.Evidence(ctx, lot, settings)
	return e, truth, err
}

// draw draws what the lot is.
func (l *Lot) draw(m *synth.Maker, cost loss) (*synth.Made, Truth, error) {
	truth := Truth{Index: l.Index, Seed: l.Seed, Kind: l.Kind, Wafers: l.Wafers, Dice: l.Dice}
	wanted, others := l.Causes, []string(nil)
	if l.Kind == Single {
		wanted, others = l.Causes[:1], l.Causes[1:]
	}
	least := cost.min
	if l.Kind == Pair {
		least = max(least, leastLoss) // a part of a pair that costs less is hardly one
	}
	for {
		for try := range uint64(attempts) {
			o := synth.RandomOptions{Seed: l.Seed + try, Wafers: l.Wafers, Dice: l.Dice, LossMin: least, LossMax: cost.max, Physics: cost.physics}
			for _, id := range wanted {
				o.Causes = append(o.Causes, synth.Wanted{ID: id})
			}
			made, err := m.Random(o)
			if err != nil {
				return nil, truth, fmt.Errorf("made-up lot %d: %w", l.Index, err)
			}
			// A pair with one cause that costs nothing is no pair that limits can see, but
			// its levels show; only single causes must cost something.
			if reached(made) || l.Kind == Pair && try == attempts-1 {
				truth.Seed, truth.Physics = o.Seed, made.Physics
				if l.Kind == Odd {
					truth.Causes = append(truth.Causes, scaleTogether(made, l.Seed))
				}
				for _, c := range made.Causes {
					truth.Causes = append(truth.Causes, Cause{c.ID, c.Direction, c.Variety, c.Size, c.Loss})
				}
				return made, truth, nil
			}
		}
		if len(others) == 0 {
			return nil, truth, fmt.Errorf("made-up lot %d: no cause of the catalogue can cost %.3g %% of the dice with the limits of this product; check limits and baseline", l.Index, 100*least)
		}
		truth.Missed = append(truth.Missed, wanted[0])
		wanted, others = others[:1], others[1:]
	}
}

func reached(m *synth.Made) bool {
	for _, c := range m.Causes {
		if !c.Reached {
			return false
		}
	}
	return true
}

// uncoupled are kinds of tests that no cause of the catalogue moves together without
// a third: emitter breakdown goes with base dose and so with gain, capacitance with
// doping and so with BVceo.
var uncoupled = [][2]string{{"bvebo", "cob"}, {"bvebo", "icbo"}, {"bvebo", "vcesat"}, {"cob", "icbo"}, {"cob", "bvcbo"}, {"bvebo", "bvcbo"}, {"icbo", "vcesat"}}

// scaleTogether puts something odd into a healthy lot: two kinds of tests, sometimes
// three, off by factors of several healthy spreads, on all wafers or some.
func scaleTogether(m *synth.Made, seed uint64) Cause {
	r := rand.New(rand.NewPCG(seed, 1))
	has := map[string]bool{}
	for i := range m.Spec.Tests {
		has[m.Spec.Tests[i].Measures] = true
	}
	var choice [][2]string
	for _, u := range uncoupled {
		if has[u[0]] && has[u[1]] {
			choice = append(choice, u)
		}
	}
	kinds := []string{"bvceo", "hfe"} // a product with few tests: against what any cause does
	if len(choice) > 0 {
		u := choice[r.IntN(len(choice))]
		kinds = u[:]
	}
	kinds = slices.Clone(kinds)
	if third := []string{"bvceo", "vcesat", "hfe"}[r.IntN(3)]; r.IntN(3) == 0 && !slices.Contains(kinds, third) {
		kinds = append(kinds, third)
	}
	c := synth.Cause{ID: causes.Unknown, Text: "tests off together as no cause couples them"}
	same := 1 - 2*float64(r.IntN(2))
	for n, kind := range kinds {
		sigmas, sign := 4+8*r.Float64(), 1-2*float64(r.IntN(2))
		if len(choice) == 0 && n < 2 {
			sign = same
		}
		for i := range m.Spec.Tests {
			if t := &m.Spec.Tests[i]; t.Measures == kind {
				c.Faults = append(c.Faults, synth.Fault{Test: t.Name, Factor: math.Exp(sign * sigmas * relativeSigma(m, t))})
			}
		}
	}
	if r.IntN(2) == 0 {
		for w := range m.Spec.Wafers {
			if r.IntN(2) == 0 {
				c.Wafers = append(c.Wafers, w)
			}
		}
	}
	m.Spec.Causes = append(slices.Clone(m.Spec.Causes), c)
	return Cause{Cause: causes.Unknown}
}

// relativeSigma is the baseline's spread of a test as a share of its level.
func relativeSigma(m *synth.Made, t *synth.Test) float64 {
	s := 0.03
	if b := m.Product.Baseline; b != nil {
		if l := b.Tests[t.Name]; l.Median > 0 && l.Sigma > 0 {
			s = math.Log1p(l.Sigma / l.Median)
		}
	}
	return min(max(s, 0.01), 0.4)
}
