package series_test

import (
	"fmt"

	"kneepoint/stats/series"
)

// Net epi thickness of twenty lots, in micrometres: a step down at lot 12.
func ExampleChanges() {
	lots := []float64{2.52, 2.55, 2.49, 2.51, 2.54, 2.50, 2.53, 2.52, 2.48, 2.51, 2.55, 2.52,
		2.39, 2.41, 2.37, 2.40, 2.42, 2.38, 2.41, 2.39}
	s := series.Changes(lots, 3)
	for _, part := range s.Segments {
		fmt.Printf("lots %d to %d: %.3f um\n", part.From, part.To-1, part.Mean)
	}
	// Output:
	// lots 0 to 11: 2.518 um
	// lots 12 to 19: 2.396 um
}

// A breakdown voltage that drifts towards its lower limit of 40 V.
func ExampleLine_Reaches() {
	var lot, volts []float64
	for i, v := range []float64{42.1, 41.9, 42.0, 41.8, 41.9, 41.6, 41.7, 41.5, 41.6, 41.4, 41.5, 41.2} {
		lot, volts = append(lot, float64(i)), append(volts, v)
	}
	l := series.FitLine(lot, volts)
	fmt.Printf("%.3f V a lot\n", l.Slope)
	fmt.Println(l.Reaches(40, false, 0.95).Text(l, "lots"))
	// Output:
	// -0.069 V a lot
	// The mean meets the limit in 18.8 lots (95 %: 13.8 to 27.3) if the drift goes on.
}
