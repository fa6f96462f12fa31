package variance_test

import (
	"math/rand/v2"
	"testing"

	"kneepoint/stats/variance"
)

// A lot of 25 wafers x 88,000 dice in five zones: summarising and splitting.
func BenchmarkLot(b *testing.B) {
	r := rand.New(rand.NewPCG(1, 2))
	var wafer, zone []int32
	var y []float64
	for w := range int32(25) {
		level := 42 + 0.3*r.NormFloat64()
		for i := range 88000 {
			z := int32(i / 300 % 5)
			wafer, zone = append(wafer, w), append(zone, z)
			y = append(y, level+0.1*float64(z)+0.6*r.NormFloat64())
		}
	}
	levels := []variance.Level{{Name: "wafer", Code: wafer}, {Name: "zone", Code: zone, Repeats: true}}
	b.Run("summarise", func(b *testing.B) {
		for b.Loop() {
			variance.New(levels, y)
		}
	})
	d := variance.New(levels, y)
	b.Run("REML", func(b *testing.B) {
		for b.Loop() {
			d.REML(0.95)
		}
	})
	f := d.REML(0.95)
	for _, c := range f.Components {
		b.Logf("%s pattern %v: %.4f (%.4f to %.4f), share %.3f (%.3f, %.3f), %.1f df", c.Level, c.Pattern, c.Variance.Estimate, c.Variance.Lower, c.Variance.Upper, c.Share.Estimate, c.Share.Lower, c.Share.Upper, c.DF)
	}
}

// Fifty lots of 25 wafers in five zones, from their cells.
func BenchmarkManyLots(b *testing.B) {
	r := rand.New(rand.NewPCG(1, 2))
	levels := []variance.Level{{Name: "lot"}, {Name: "wafer"}, {Name: "zone"}}
	var cells []variance.Cell
	for l := range int32(50) {
		lot := r.NormFloat64()
		for w := range int32(25) {
			wafer := 0.5 * r.NormFloat64()
			for z := range int32(5) {
				levels[0].Code, levels[1].Code, levels[2].Code = append(levels[0].Code, l), append(levels[1].Code, w), append(levels[2].Code, z)
				cells = append(cells, variance.Cell{N: 200, Mean: lot + wafer + 0.2*r.NormFloat64(), SS: 199 * 0.36})
			}
		}
	}
	d := variance.FromCells(levels, cells)
	b.ResetTimer()
	for b.Loop() {
		d.REML(0.95)
	}
}
