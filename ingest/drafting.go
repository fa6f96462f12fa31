package ingest

import (
	"math"

	"kneepoint/config"
)

// Draft is the start of a product file for what a batch holds: its tests with
// their units, limits and conditions. What a test measures is guessed from its
// name and unit, and has to be looked over. Where lots differ, the first one
// that has a test speaks for it. Everything that the data cannot tell, the
// device above all, is left out; so is a floor, which a pile-up of readings
// only hints at.
func Draft(b *Batch) *config.Product {
	p := &config.Product{TestTemperatureC: 25, Columns: map[string]string{}}
	seen := map[string]bool{}
	for _, l := range b.Lots {
		if p.Name == "" {
			p.Name = l.Product()
		}
		for _, t := range l.Tests() {
			if seen[t.Name] {
				continue
			}
			seen[t.Name] = true
			d := config.Test{Name: t.Name, Measures: t.Measures, Unit: t.Unit, Lower: t.Lower, Upper: t.Upper, Clamp: t.Clamp, Floor: math.NaN()}
			if d.Measures == "" {
				d.Measures = config.GuessMeasures(t.Name, t.Unit)
			}
			if c, err := config.ParseConditions(t.Condition); err == nil {
				d.At, d.AtText = c, t.Condition
			}
			p.Tests = append(p.Tests, d)
		}
	}
	return p
}
