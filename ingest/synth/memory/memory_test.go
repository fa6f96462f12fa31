package memory

import (
	"bytes"
	"context"
	"io"
	"math"
	"os"
	"path/filepath"
	"testing"

	"github.com/google/go-cmp/cmp"

	"kneepoint/config"
	"kneepoint/ingest"
	"kneepoint/ingest/synth"
)

// columns is what a lot holds, in a form that can be compared.
type columns struct {
	ID           string
	Wafers       []ingest.Wafer
	Tests        []ingest.Test
	X, Y, Site   []int32
	Touchdown    []int32
	Hard, Soft   []int32
	Values       [][]uint64
	Censor       [][]int8
	Earlier      ingest.Earlier
	First        ingest.FirstPass
	FindingCodes map[string]int
}

func columnsOf(l *ingest.Lot) columns {
	c := columns{ID: l.ID(), Wafers: l.Wafers(), Tests: l.Tests(), X: l.X(), Y: l.Y(), Site: l.Site(), Touchdown: l.Touchdown(),
		Hard: l.HardBin(), Soft: l.SoftBin(), Earlier: *l.Earlier(), First: l.FirstPass(), FindingCodes: map[string]int{}}
	for t := range c.Tests {
		var bits []uint64
		for _, v := range l.Values(t) {
			if v != v {
				v = math.NaN()
			}
			bits = append(bits, math.Float64bits(v))
		}
		c.Values = append(c.Values, bits)
		c.Censor = append(c.Censor, l.Censor(t))
	}
	for _, f := range l.Findings() {
		c.FindingCodes[f.Code] = f.Dice
	}
	return c
}

// TestSameAsFile: a lot in memory is the lot of its wide table, to the last bit, with
// retests, blanks, clamped readings and a wrong range.
func TestSameAsFile(t *testing.T) {
	p, err := config.ParseProduct("demo.yaml", []byte(synth.DemoProductYAML))
	if err != nil {
		t.Fatal(err)
	}
	m, err := synth.NewMaker(p)
	if err != nil {
		t.Fatal(err)
	}
	for seed := uint64(1); seed <= 6; seed++ {
		made, err := m.Random(synth.RandomOptions{Seed: seed, Wafers: 4, Dice: 200, Physics: "laws", StopOnFail: seed == 3,
			Causes: []synth.Wanted{{ID: "test-setup", Variety: []string{"range", "limit"}[seed%2]}, {ID: "handling-damage"}}})
		if err != nil {
			t.Fatal(err)
		}
		lot := made.Generate()
		path := filepath.Join(t.TempDir(), "lot.csv")
		var b bytes.Buffer
		if err := lot.WriteWide(&b, synth.Format{UnitRow: true, LimitRows: true}); err != nil {
			t.Fatal(err)
		}
		if err := os.WriteFile(path, b.Bytes(), 0o644); err != nil {
			t.Fatal(err)
		}
		opt := ingest.Options{Product: made.Product}
		batch, err := ingest.Read(context.Background(), []string{path}, opt)
		if err != nil {
			t.Fatal(err)
		}
		got, err := Lot(lot, opt)
		if err != nil {
			t.Fatal(err)
		}
		nan := cmp.Comparer(func(a, b float64) bool { return a == b || a != a && b != b })
		if diff := cmp.Diff(columnsOf(batch.Lots[0]), columnsOf(got), nan); diff != "" {
			t.Fatalf("seed %d: file (-), memory (+):\n%.3000s", seed, diff)
		}
		if err := ingest.WriteParquet(io.Discard, got); err != nil {
			t.Error(err)
		}
	}
}

// BenchmarkLot is a small lot from its draw to the lot in memory.
func BenchmarkLot(b *testing.B) {
	p, err := config.ParseProduct("demo.yaml", []byte(synth.DemoProductYAML))
	if err != nil {
		b.Fatal(err)
	}
	m, err := synth.NewMaker(p)
	if err != nil {
		b.Fatal(err)
	}
	if err := m.Prepare(); err != nil {
		b.Fatal(err)
	}
	seed := uint64(0)
	for b.Loop() {
		seed++
		made, err := m.Random(synth.RandomOptions{Seed: seed, Wafers: 12, Dice: 300, Causes: []synth.Wanted{{ID: "epi-doping"}}})
		if err != nil {
			b.Fatal(err)
		}
		if _, err := Lot(made.Generate(), ingest.Options{Product: made.Product, Workers: 1}); err != nil {
			b.Fatal(err)
		}
	}
}
