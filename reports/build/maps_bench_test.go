package build

import (
	"context"
	"os"
	"path/filepath"
	"testing"

	"kneepoint/config"
	"kneepoint/ingest"
	"kneepoint/ingest/synth"
	"kneepoint/reports"
)

// benchmarkMaps times all that is said of the maps of a lot of 25 wafers, on one core:
// patterns, statistics and surfaces of every wafer, groups, stacks and repeaters.
func benchmarkMaps(b *testing.B, dice int) {
	spec := synth.BenchSpec()
	spec.Grid.DicePerWafer = dice
	file := filepath.Join(b.TempDir(), "lot.csv")
	out, err := os.Create(file)
	if err != nil {
		b.Fatal(err)
	}
	if err := spec.WriteWide(out, 1, synth.Format{}); err != nil {
		b.Fatal(err)
	}
	if err := out.Close(); err != nil {
		b.Fatal(err)
	}
	p, err := config.ParseProduct("product.yaml", []byte(synth.DemoProductYAML))
	if err != nil {
		b.Fatal(err)
	}
	p.Wafer.DiameterMM, p.Wafer.DieWidthMM, p.Wafer.DieHeightMM = 150, 0, 0
	batch, err := ingest.Read(context.Background(), []string{file}, ingest.Options{Product: p})
	if err != nil {
		b.Fatal(err)
	}
	in := Input{Lot: batch.Lots[0], Product: p, Settings: config.DefaultSettings()}
	in.Settings.Workers = 1
	w := &lotwork{in: in, lot: in.Lot, rep: &reports.Report{}, code: waferCode(in.Lot)}
	w.judgeDice()
	w.testLosses()
	w.findGeometry()
	w.prepareMaps()
	if err := w.accounts(context.Background()); err != nil {
		b.Fatal(err)
	}
	part := func(name string, work func() error) {
		b.Run(name, func(b *testing.B) {
			for b.Loop() {
				w.rep.Groups, w.rep.Stacks, w.rep.Repeaters, w.maps.stacks = nil, nil, nil, nil
				if err := work(); err != nil {
					b.Fatal(err)
				}
			}
			b.ReportMetric(float64(w.lot.Len()), "dice")
		})
	}
	part("wafers", func() error {
		for i := range w.lot.Wafers() {
			w.spatial(i, &reports.Wafer{})
		}
		return nil
	})
	part("surfaces", func() error { return w.surfaces(context.Background(), w.newPlaces()) })
	part("lot", func() error { return w.mapsOfLot(context.Background()) }) // surfaces in it
}

func BenchmarkMaps4000(b *testing.B)  { benchmarkMaps(b, 4000) }
func BenchmarkMaps88000(b *testing.B) { benchmarkMaps(b, 88000) }
