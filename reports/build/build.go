// Package build assembles the Report of one lot: it takes the lot's columns, the
// product file and the settings, asks stats and wafermap for numbers, and puts
// them in their places.
//
// It is the only room that knows both the data and the numbers, and it holds
// the rules that join them:
//
//   - which dice pass (judge.go): the bin says so, else the file's own flag, else
//     the limits;
//   - which dice a number is over (tests.go): a stop-on-fail program leaves later
//     tests blank on failing dice, and every account says what it is over;
//   - what is said when something cannot be computed: a Why, never a zero.
//
// Work over tests and wafers runs in parallel; each task writes its own place of
// the report and sums in row order, so the report is the same on any number of
// cores.
package build

import (
	"context"
	"runtime"

	"golang.org/x/sync/errgroup"

	"kneepoint/config"
	"kneepoint/ingest"
	"kneepoint/reports"
	"kneepoint/reports/causes"
	"kneepoint/stats/yield"
	"kneepoint/wafermap"
)

// confidence of every interval in a report.
const confidence = 0.95

// Input is all that a report is made from.
type Input struct {
	Lot      *ingest.Lot
	Product  *config.Product // nil: no product file
	Settings config.Settings
	// Diagnosis is what naming causes needs of the product; nil: made here, with usual
	// weights, which the report says.
	Diagnosis *Diagnosis
	Version   string                // of kneepoint
	Progress  func(done, total int) // tasks done; may be nil; called from one goroutine at a time
}

// lotwork is what the steps of one report share.
type lotwork struct {
	in           Input
	lot          *ingest.Lot
	pass         []bool
	code         []int32          // by die: index of its wafer
	unjudged     string           // why it is not known which dice pass, "" when it is
	data         []yield.TestData // SI, in the order of lot.Tests
	losses       yield.Losses
	first        []int32 // first failing test of each die, -1 for none
	retested     []int   // by wafer
	firstPassing []int   // by wafer: dice that passed when first measured
	position     []int   // tests in the order of the program
	logScale     []bool  // by test: its spread is one of ratios
	geo          wafermap.Geometry
	maps         mapwork
	rep          *reports.Report
	model        *device // see lotwork.device
	modelWhy     string
	verdict      []causes.Account // see explain
}

// Report assembles the report of a lot. It fails only when ctx is cancelled, a
// picture cannot be encoded, or the product file has a cause that cannot be used;
// what cannot be computed is said in the report.
func Report(ctx context.Context, in Input) (*reports.Report, error) {
	w := &lotwork{in: in, lot: in.Lot, rep: &reports.Report{Schema: reports.SchemaVersion}}
	if !in.Settings.CountEdgeDice {
		w.leaveOutEdge()
	}
	w.code = waferCode(w.lot)
	w.identify()
	w.judgeDice()
	w.testLosses()
	w.findGeometry()
	w.prepareMaps()
	if err := w.accounts(ctx); err != nil {
		return nil, err
	}
	w.lotYield()
	w.bins()
	w.zones()
	if err := w.chains(ctx); err != nil {
		return nil, err
	}
	w.conclude()
	w.rep.FillLists()
	return w.rep, nil
}

// chains are the parts of the report that know nothing of each other, side by side. Each
// fills fields of its own.
func (w *lotwork) chains(ctx context.Context) error {
	type step func(context.Context) error
	pictures := func(context.Context) error { return w.pictures() }
	associate := func(context.Context) error { w.associate(); return nil }
	group, within := errgroup.WithContext(ctx)
	group.SetLimit(w.workers())
	for _, chain := range [][]step{{w.mapsOfLot, pictures}, {w.explain}, {w.spread, w.screens, associate}, {w.inferEpi}} { // longest first
		group.Go(func() error {
			for _, s := range chain {
				if err := s(within); err != nil {
					return err
				}
			}
			return nil
		})
	}
	return group.Wait()
}

// accounts makes the account of every test and every wafer, in parallel.
func (w *lotwork) accounts(ctx context.Context) error {
	tests, wafers := w.lot.Tests(), w.lot.Wafers()
	w.rep.Tests = make([]reports.Test, len(tests))
	w.logScale = make([]bool, len(tests))
	w.rep.Wafers = make([]reports.Wafer, len(wafers))
	curves := yield.AllAgainstLimits(w.data, w.pass, limitShifts(w.in.Settings.LimitShiftPercent), w.losses.StopOnFail)

	group, ctx := errgroup.WithContext(ctx)
	group.SetLimit(w.workers())
	done := make(chan struct{})
	finished := make(chan struct{})
	go func() {
		defer close(finished)
		n := 0
		for range done {
			n++
			if w.in.Progress != nil {
				w.in.Progress(n, len(tests)+len(wafers))
			}
		}
	}()
	run := func(task func()) {
		group.Go(func() error {
			if err := ctx.Err(); err != nil {
				return err
			}
			task()
			done <- struct{}{}
			return nil
		})
	}
	for t := range tests {
		run(func() { w.rep.Tests[t] = w.testAccount(t, curves[t]) })
	}
	for i := range wafers {
		run(func() { w.rep.Wafers[i] = w.waferAccount(i) })
	}
	err := group.Wait()
	close(done)
	<-finished
	if err != nil {
		return err
	}
	w.compareWafers()
	return nil
}

// workers is how many tasks may run at once.
func (w *lotwork) workers() int {
	if n := w.in.Settings.Workers; n > 0 {
		return n
	}
	return runtime.GOMAXPROCS(0)
}

// identify fills in what the report is about.
func (w *lotwork) identify() {
	r, p := w.rep, w.in.Product
	r.Tool = reports.Tool{Name: "kneepoint", Version: w.in.Version}
	r.Lot = w.lot.ID()
	r.Product = w.lot.Product()
	r.Dice = w.lot.Len()
	r.Baseline = reports.Source{Source: "none"}
	for _, in := range w.lot.Inputs() {
		r.Inputs = append(r.Inputs, reports.Input{File: in.File, SHA256: in.SHA256, Format: in.Format, Bytes: in.Bytes, Rows: in.Rows})
	}
	if p == nil {
		return
	}
	r.ProductFile = &reports.Input{File: p.File, SHA256: p.SHA256, Format: "product file"}
	if p.Name != "" {
		r.Product = p.Name
	}
	if p.Baseline != nil {
		r.Baseline = reports.Source{Source: "product file", ID: p.Name, SHA256: p.SHA256}
	}
}
