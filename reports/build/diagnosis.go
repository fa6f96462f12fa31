package build

import (
	"context"
	"math"

	"kneepoint/config"
	"kneepoint/ingest"
	"kneepoint/reports"
	"kneepoint/reports/causes"
	"kneepoint/stats"
	"kneepoint/stats/junction"
)

// Diagnosis is what naming causes needs of a product: its device model, the
// catalogue with the site's own causes, and the weights that calibration found.
// It is made once per product and is safe for concurrent use.
type Diagnosis struct {
	Catalogue *causes.Catalogue
	Weights   causes.Weights
	// Calibrated says how the weights were found, "" for the usual ones.
	Calibrated string

	product *config.Product
	device  *device // nil: DeviceWhy says why; of its own for each lot without a baseline
	why     string
}

// NewDiagnosis prepares a product; nil stands for none. The error is about the
// site's causes in the product file.
func NewDiagnosis(p *config.Product) (*Diagnosis, error) {
	d := &Diagnosis{Catalogue: causes.Default(), Weights: causes.UsualWeights(), product: p}
	if p == nil {
		d.why = "there is no product file to describe the device"
		return d, nil
	}
	var err error
	if d.Catalogue, err = d.Catalogue.With(p.Causes); err != nil {
		return nil, &config.FileError{File: p.File, What: err.Error(), Remedy: "mend the block causes"}
	}
	if hasBaseline(p) {
		d.device, d.why = deviceModel(p, nil)
	}
	return d, nil
}

// Evidence looks at a lot without making a report of it.
func (d *Diagnosis) Evidence(ctx context.Context, lot *ingest.Lot, settings config.Settings) (*causes.Evidence, error) {
	w := &lotwork{in: Input{Lot: lot, Product: d.product, Settings: settings}, lot: lot, rep: &reports.Report{}}
	w.code = waferCode(lot)
	w.judgeDice()
	w.findGeometry()
	return causes.Observe(ctx, w.columns(d), d.Catalogue)
}

// columns are the lot's dice as the room of causes takes them.
func (w *lotwork) columns(d *Diagnosis) *causes.Columns {
	lot := w.lot
	c := &causes.Columns{X: lot.X(), Y: lot.Y(), Site: lot.Site(), Order: w.firstOrder(), Pass: w.pass,
		Geometry: w.geo, Spread: junction.UsualPrior(), BaselineYield: math.NaN(), Missing: ingest.Missing, Baseline: "none"}
	if w.geo.Unit == "" {
		c.X, c.Y = nil, nil
	}
	for _, s := range lot.Wafers() {
		c.Wafers = append(c.Wafers, causes.Span{ID: s.ID, Lo: s.Lo, Hi: s.Hi})
	}
	if p := d.product; p != nil {
		c.ShotColumns, c.ShotRows = p.Wafer.ShotColumns, p.Wafer.ShotRows
		c.Baseline = "lot majority"
		if p.Baseline != nil {
			c.BaselineYield = p.Baseline.Yield
			if hasBaseline(p) {
				c.Baseline = "product file"
			}
		}
	}
	dev := d.device
	if dev == nil && d.product != nil && d.product.Device != nil && d.why == "" {
		dev, _ = deviceModel(d.product, w.majority())
	}
	if dev != nil {
		c.Model, c.Spread = dev.Model, dev.Prior
	}
	for t := range lot.Tests() {
		c.Tests = append(c.Tests, w.causeTest(t, d, dev))
	}
	c.Retest = w.retestedDice()
	c.Raised = w.raised()
	return c
}

// firstOrder is the order of test with the dice that were measured again left out:
// the measurement that counts came at the end of their wafer, and dice that failed
// would all seem to have failed there.
func (w *lotwork) firstOrder() []int32 {
	order, index := w.lot.Touchdown(), w.lot.FirstPass().Index
	if index == nil {
		return order
	}
	out := append([]int32(nil), order...)
	for row, first := range index {
		if first >= 0 {
			out[row] = ingest.Missing
		}
	}
	return out
}

// majority is the median of every test, by name, SI.
func (w *lotwork) majority() map[string]float64 {
	out := map[string]float64{}
	for t, test := range w.lot.Tests() {
		var v []float64
		for i, x := range w.lot.Values(t) {
			if w.pass[i] && !math.IsNaN(x) {
				v = append(v, x)
			}
		}
		if len(v) > 0 {
			out[test.Name] = stats.Median(v)
		}
	}
	return out
}

// causeTest is one test with what the product says of its healthy level.
func (w *lotwork) causeTest(t int, d *Diagnosis, dev *device) causes.Test {
	test := &w.lot.Tests()[t]
	out := causes.Test{Name: test.Name, Measures: test.Measures, Values: w.lot.Values(t), Censor: w.lot.Censor(t),
		Lower: test.Lower, Upper: test.Upper, Clamp: test.Clamp, Floor: test.Floor,
		Median: math.NaN(), Sigma: math.NaN(), Within: math.NaN(), Lot: math.NaN(), Model: -1}
	if d.product == nil {
		return out
	}
	for i := range d.product.Tests {
		if p := &d.product.Tests[i]; p.Name == test.Name {
			out.Current = junctionTest(p).Current
		}
	}
	if b := d.product.Baseline; b != nil {
		if level, ok := b.Tests[test.Name]; ok {
			out.Median, out.Sigma, out.Within, out.Lot = level.Median, level.Sigma, level.WithinLotSigma, level.LotSigma
		}
	}
	if dev != nil {
		out.Model = dev.Test(test.Name)
	}
	return out
}

// retestedDice lists the dice that were measured again, with how the first
// measurement went.
func (w *lotwork) retestedDice() causes.Retest {
	var r causes.Retest
	index := w.lot.FirstPass().Index
	if index == nil || w.unjudged != "" {
		return r
	}
	early := w.lot.Earlier()
	j := newJudge(w.lot, w.in.Product)
	for row, first := range index {
		if first < 0 {
			continue
		}
		value := func(t int) (float64, int8) { return early.Values[t][first], 0 }
		r.Of = append(r.Of, int32(row))
		r.Failed = append(r.Failed, !j.passes(at(early.HardBin, int(first)), at(early.SoftBin, int(first)), flagAt(early.Pass, int(first)), value))
	}
	return r
}

// raised are the flags that reading the files raised.
func (w *lotwork) raised() []string {
	flag := map[string]string{"limits-differ": "limits-differ", "limits-mixed": "limits-differ", "limits-crossed": "limits-differ",
		"unit-conflict": "unit-conflict", "unit-factor": "unit-conflict", "over-range": "pile-up"}
	var out []string
	for _, f := range w.lot.Findings() {
		if name, ok := flag[f.Code]; ok {
			out = append(out, name)
		}
	}
	return out
}
