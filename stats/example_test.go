package stats_test

import (
	"fmt"
	"math"

	"kneepoint/stats"
)

// Breakdown voltages of nine dice, one of them shorted and one not measured: the
// median and the MAD sigma describe the other seven, mean and sd nobody.
func ExampleDescribe() {
	volts := []float64{41.9, 42.3, 41.2, 0.1, 42.0, math.NaN(), 41.6, 42.7, 41.8}
	d := stats.Describe(volts, []float64{0.25, 0.75})
	fmt.Printf("%d readings, %d missing\n", d.N, d.Missing)
	fmt.Printf("mean   %.2f, sd        %.2f\n", d.Mean, d.SD)
	fmt.Printf("median %.2f, MAD sigma %.2f\n", d.Median, d.MADSigma)
	fmt.Printf("middle half %.2f to %.2f\n", d.Quantiles[0], d.Quantiles[1])
	// Output:
	// 8 readings, 1 missing
	// mean   36.70, sd        14.80
	// median 41.85, MAD sigma 0.52
	// middle half 41.37 to 42.17
}

// Readings in steps of 0.1 V, with bins of whole steps.
func ExampleFreedmanDiaconis() {
	volts := []float64{41.2, 41.5, 41.6, 41.7, 41.7, 41.8, 41.8, 41.9, 41.9, 41.9, 42.0, 42.0, 42.1, 42.1, 42.3, 42.6}
	b := stats.FreedmanDiaconis(volts, 80)
	counts, below, above := b.Count(volts)
	fmt.Println(b.Rule)
	for i, c := range counts {
		fmt.Printf("%.2f to %.2f: %d\n", b.Edges[i], b.Edges[i+1], c)
	}
	fmt.Println(below, "below,", above, "above")
	// Output:
	// Freedman-Diaconis width in whole steps of the readings (3)
	// 41.15 to 41.45: 1
	// 41.45 to 41.75: 4
	// 41.75 to 42.05: 7
	// 42.05 to 42.35: 3
	// 42.35 to 42.65: 1
	// 0 below, 0 above
}
