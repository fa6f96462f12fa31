package yield_test

import (
	"fmt"
	"math"
	"math/rand/v2"

	"kneepoint/stats/yield"
)

// Five wafers of a lot, one of them bad. Counted as dice the yield is known to
// within a percent; as a statement on the process it is not.
func ExampleProcess() {
	passing := []int{1290, 1301, 980, 1285, 1295}
	dice := []int{1365, 1365, 1365, 1365, 1365}
	good, all := 0, 0
	for i := range dice {
		good += passing[i]
		all += dice[i]
	}
	c := yield.Wilson(good, all, 0.95)
	p := yield.Process(passing, dice, 0.95)
	fmt.Printf("%.3f, counting %.3f to %.3f, process %.2f to %.2f\n", p.Estimate, c.Lower, c.Upper, p.Lower, p.Upper)
	// Output:
	// 0.901, counting 0.894 to 0.908, process 0.69 to 0.99
}

// Two tests on six dice. The third die fails both: the first test takes it, and
// neither test alone could save it.
func ExampleTestLosses() {
	nan := math.NaN()
	tests := []yield.TestData{
		{Values: []float64{42, 41, 12, 43, 34, 42}, Lower: 35, Upper: nan},               // BVCBO, V
		{Values: []float64{2e-9, 9e-9, 8e-9, 1e-9, 2e-9, 3e-9}, Lower: nan, Upper: 5e-9}, // ICBO, A
	}
	pass := []bool{true, false, false, true, false, true}
	l := yield.TestLosses(tests, pass, 0.10)
	for i, name := range []string{"BVCBO", "ICBO"} {
		t := l.Tests[i]
		fmt.Printf("%s: first %d, alone %d, any %d, marginal %d\n", name, t.First, t.Alone, t.Any, t.Marginal)
	}
	fmt.Println(l.StopText)
	// Output:
	// BVCBO: first 2, alone 1, any 2, marginal 1
	// ICBO: first 1, alone 1, any 2, marginal 0
	// runs on: 2 of 2 failing dice hold readings after their first fail
}

// Five wafers with a dead ring and 5 % of the other dice failing by themselves.
func ExampleWindows() {
	r := rand.New(rand.NewPCG(1, 2))
	var x, y, wafer []int32
	var pass []bool
	for w := range int32(5) {
		for i := int32(-15); i <= 15; i++ {
			for j := int32(-15); j <= 15; j++ {
				if d := i*i + j*j; d <= 225 {
					x, y, wafer = append(x, i), append(y, j), append(wafer, w)
					pass = append(pass, d < 190 && r.Float64() > 0.05)
				}
			}
		}
	}
	w := yield.Windows(x, y, wafer, pass, 0.95)
	fmt.Printf("yield %.3f: %.3f lost together, %.3f one by one (%.1f %% of dice elsewhere)\n",
		float64(w.Passing)/float64(w.Dice), w.Systematic.Estimate, w.Random.Estimate, 100*w.RandomRate.Estimate)
	// Output:
	// yield 0.798: 0.164 lost together, 0.038 one by one (4.5 % of dice elsewhere)
}
