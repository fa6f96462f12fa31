package rehearse

import (
	"context"
	"fmt"
	"runtime"
	"sync"

	"golang.org/x/sync/errgroup"

	"kneepoint/config"
	"kneepoint/ingest/synth"
	"kneepoint/reports/build"
	"kneepoint/reports/causes"
)

// Options say how many lots to make and from which seed. The zero value is usual.
type Options struct {
	Lots     int                   // 0: [CalibrationLots] or [RehearsalLots]
	Seed     uint64                // a calibration and a rehearsal of one seed have no lot in common
	Progress func(done, total int) // may be nil; called from one goroutine at a time
	Physics  string                // inside the lots: "laws", "junction" or "", either
}

// Usual numbers of lots.
const (
	CalibrationLots = 320
	RehearsalLots   = 400
)

// Summary says what weights were fitted on.
type Summary struct {
	Lots    int    `json:"lots"`
	Seed    uint64 `json:"seed"`
	Healthy int    `json:"healthy"`
	Pairs   int    `json:"pairs"`
	Odd     int    `json:"unexplained"`
	// OutOfReach are causes of which no believable size costs 3 % of the dice, with
	// the number of lots that were to have them.
	OutOfReach map[string]int `json:"out_of_reach,omitempty"`
	// Assumed says what the product file does not give and was assumed.
	Assumed []string `json:"assumed,omitempty"`
}

// Text is the summary in one line.
func (s *Summary) Text() string {
	return fmt.Sprintf("calibrated on %d made-up lots of this product (%d healthy, %d of two causes, %d of none that is known)",
		s.Lots, s.Healthy, s.Pairs, s.Odd)
}

// streams keep the seeds of calibrations apart from those of rehearsals.
const (
	calibrationStream = 0x63616c
	rehearsalStream   = 0x726568
	addedStream       = 0x616464
)

// Usual losses: what the causes of made-up lots cost.
const (
	leastLoss = 0.03
	mostLoss  = 0.40
)

// Calibrate fits the weights of causes on made-up lots of a product. The result does
// not depend on the number of cores. The error is that of a product of which no lots
// can be made, or of ctx.
func Calibrate(ctx context.Context, p *config.Product, o Options) (causes.Weights, Summary, error) {
	if o.Lots <= 0 {
		o.Lots = CalibrationLots
	}
	s := Summary{Lots: o.Lots, Seed: o.Seed, OutOfReach: map[string]int{}}
	d, err := build.NewDiagnosis(p)
	if err != nil {
		return causes.Weights{}, s, err
	}
	m, err := synth.NewMaker(p)
	if err != nil {
		return causes.Weights{}, s, err
	}
	s.Assumed = m.Assumed
	lots := deal(o.Lots, mixSeed(o.Seed, calibrationStream), calibrationMix)
	known := make([]causes.Known, len(lots))
	truths := make([]Truth, len(lots))
	cost := loss{min: leastLoss, max: mostLoss, physics: o.Physics}
	err = each(ctx, len(lots), o.Progress, func(ctx context.Context, i int) error {
		e, truth, err := lots[i].make(ctx, m, cost)
		if err != nil {
			return err
		}
		known[i], truths[i] = causes.Remember(e, d.Catalogue, truth.Names()), truth
		return nil
	})
	if err != nil {
		return causes.Weights{}, s, err
	}
	for i := range truths {
		switch truths[i].Kind {
		case Healthy:
			s.Healthy++
		case Pair:
			s.Pairs++
		case Odd:
			s.Odd++
		}
		for _, id := range truths[i].Missed {
			s.OutOfReach[id]++
		}
	}
	return causes.Fit(known), s, nil
}

// Diagnosis is a product's diagnosis with given weights; text says where they come
// from, "" for the usual ones.
func Diagnosis(p *config.Product, w causes.Weights, text string) (*build.Diagnosis, error) {
	d, err := build.NewDiagnosis(p)
	if err != nil {
		return nil, err
	}
	d.Weights, d.Calibrated = w, text
	return d, nil
}

func mixSeed(seed, stream uint64) uint64 { return seed*0x9e3779b97f4a7c15 ^ stream }

// each runs a task for every index, side by side, and counts progress. Tasks write
// only their own place.
func each(ctx context.Context, n int, progress func(done, total int), task func(ctx context.Context, i int) error) error {
	group, within := errgroup.WithContext(ctx)
	group.SetLimit(runtime.GOMAXPROCS(0))
	var mu sync.Mutex
	done := 0
	if progress != nil {
		progress(0, n) // the first lots wait for the device models
	}
	for i := range n {
		if within.Err() != nil {
			break
		}
		group.Go(func() error {
			if err := within.Err(); err != nil {
				return err
			}
			if err := task(within, i); err != nil {
				return err
			}
			mu.Lock()
			defer mu.Unlock()
			if done++; progress != nil {
				progress(done, n)
			}
			return nil
		})
	}
	if err := group.Wait(); err != nil {
		return err
	}
	return ctx.Err()
}
