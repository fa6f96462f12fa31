package variance_test

import (
	"fmt"

	"kneepoint/stats/variance"
)

// Breakdown voltages of three dice on each of four wafers in two lots.
func ExampleDesign_REML() {
	volts := []float64{41.9, 42.3, 42.0, 43.1, 43.0, 43.4, 41.2, 41.5, 41.3, 42.6, 42.9, 42.5,
		42.2, 42.1, 42.6, 41.0, 41.2, 40.9, 43.3, 43.2, 42.8, 42.0, 41.7, 41.9}
	lot, wafer := make([]int32, 24), make([]int32, 24)
	for i := range volts {
		lot[i], wafer[i] = int32(i/12), int32(i/3%4)
	}
	f := variance.New([]variance.Level{{Name: "lot", Code: lot}, {Name: "wafer", Code: wafer}}, volts).REML(0.95)
	for _, c := range f.Components {
		s := c.Sigma()
		fmt.Printf("%-6s sigma %.2f V (%.2f to %.2f)\n", c.Level, s.Estimate, s.Lower, s.Upper)
	}
	fmt.Println(f.Text())
	// Output:
	// lot    sigma 0.00 V (0.00 to 2.94)
	// wafer  sigma 0.77 V (0.48 to 1.46)
	// die    sigma 0.21 V (0.15 to 0.30)
	// 93 % of the variance of 24 readings lies between wafers of a lot (95 %: 7 to 98 %), 0 % between lots, 7 % between dice of a wafer; which is the largest is not settled by these data.
}
