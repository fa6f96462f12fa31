// Package memory hands made-up lots to the readers' side of the house without a
// file between: the same lot that reading the written file would give.
//
// It stands apart from package synth so that the tests of package ingest can use
// synth.
package memory

import (
	"math"

	"kneepoint/config"
	"kneepoint/ingest"
	"kneepoint/ingest/synth"
)

// Lot is a made-up lot as [ingest.Read] would give it from a wide table with units
// and limits, but for the inputs it names: values in SI, cleaned, each die in its
// last valid measurement under opt's retest policy. Made lots have their own die
// size: give the product file of [synth.Made].
//
// The error is one of a product file that has none of the lot's tests.
func Lot(l *synth.Lot, opt ingest.Options) (*ingest.Lot, error) {
	tests := make([]ingest.Test, len(l.Spec.Tests))
	for i := range tests {
		t := &l.Spec.Tests[i]
		unit := config.Unit{}
		if t.Unit != "" {
			var err error
			if unit, err = config.ParseUnit(t.Unit); err != nil {
				return nil, err
			}
		}
		lower, upper := l.Spec.Limits(i)
		none := math.NaN()
		tests[i] = ingest.Test{Name: t.Name, Unit: unit, Lower: unit.ToSI(lower), Upper: unit.ToSI(upper),
			Clamp: none, Floor: none, Number: ingest.Missing, Place: i}
	}
	t := ingest.NewTable(l.ID, tests...)
	n := l.Rows()
	t.Wafer = make([]string, 0, n)
	for _, column := range []*[]int32{&t.X, &t.Y, &t.Site, &t.Touchdown, &t.HardBin, &t.SoftBin} {
		*column = make([]int32, 0, n)
	}
	for i := range tests {
		t.Values[i] = make([]float64, 0, n)
	}
	for i := range l.Wafers {
		w := &l.Wafers[i]
		for range w.X {
			t.Wafer = append(t.Wafer, w.ID)
		}
		t.X, t.Y = append(t.X, w.X...), append(t.Y, w.Y...)
		t.Site, t.Touchdown = append(t.Site, w.Site...), append(t.Touchdown, w.Touchdown...)
		t.HardBin, t.SoftBin = append(t.HardBin, w.HardBin...), append(t.SoftBin, w.SoftBin...)
		for j, column := range w.Values {
			unit := tests[j].Unit
			for _, v := range column {
				t.Values[j] = append(t.Values[j], unit.ToSI(v))
			}
		}
	}
	return ingest.Build(t, opt)
}
