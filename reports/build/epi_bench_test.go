package build

import (
	"context"
	"testing"

	"kneepoint/stats/junction"
)

// BenchmarkEpi infers 25 wafers of 4,000 dice, the device model built before.
func BenchmarkEpi(b *testing.B) {
	p := madeProduct("B", with("cob-high", junction.Rc)...)
	f := newFab(p, 1, false)
	var wafers []madeWafer
	for range 25 {
		wafers = append(wafers, f.wafer(f.truth(specPrior(p), 0), true))
	}
	lot := f.lot("MADE", 36, p, wafers...)
	w := prepared(lot, p)
	w.device()
	for b.Loop() {
		w.rep.Pictures.Epi = nil
		if err := w.inferEpi(context.Background()); err != nil || w.rep.Epi == nil {
			b.Fatal(err, w.rep.EpiWhy)
		}
	}
	b.ReportMetric(float64(lot.Len()), "dice")
}
