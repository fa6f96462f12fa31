package control_test

import (
	"fmt"

	"kneepoint/stats/control"
)

// Fail shares of twelve wafers of 1,300 dice. Wafers differ by more than dice do by
// chance: the p chart calls for a person three times, Laney's for the one wafer that
// is worth it.
func ExampleLaneyP() {
	fails := []float64{61, 84, 52, 70, 95, 66, 49, 78, 60, 73, 240, 68}
	dice := make([]float64, len(fails))
	for i := range dice {
		dice[i] = 1300
	}
	p, laney := control.P(fails, dice), control.LaneyP(fails, dice)
	fmt.Printf("p chart   %.3f to %.3f: %v\n", p.Lower[0], p.Upper[0], p.Signals)
	fmt.Printf("Laney     %.3f to %.3f: %v (wafers spread %.1f times as much as chance)\n", laney.Lower[0], laney.Upper[0], laney.Signals, laney.Sigma)
	// Output:
	// p chart   0.044 to 0.084: [2 6 10]
	// Laney     0.000 to 0.165: [10] (wafers spread 5.0 times as much as chance)
}

// A weekly share of bin 5 against limits from eight good lots.
func ExampleBinLimits() {
	l := control.BinLimits([]float64{0.021, 0.018, 0.025, 0.019, 0.022, 0.020, 0.024, 0.017}, false)
	fmt.Printf("hold above %.3f (chance %.1f %%), all the more above %.3f: 0.034 is judged %d\n", l.First, 100*l.FirstRisk, l.Second, l.Judge(0.034))
	// Output:
	// hold above 0.029 (chance 1.3 %), all the more above 0.032: 0.034 is judged 2
}
