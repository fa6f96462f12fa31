package yield_test

import (
	"math"
	"math/rand/v2"
	"os"
	"testing"

	"gonum.org/v1/gonum/stat/distuv"
	"kneepoint/stats/yield"
)

// wafers draws k wafers whose fail rates are beta distributed with the given mean
// and coefficient of variation (0: all the same), each fail of a wafer
// independent then.
func wafers(r *rand.Rand, k int, rate, cv float64, sizes []int) (passing, dice []int) {
	for i := range k {
		n := sizes[i%len(sizes)]
		f := rate
		if cv > 0 {
			// variance of a beta: m(1-m)/(a+b+1)
			ab := (1-rate)/(cv*cv*rate) - 1
			f = distuv.Beta{Alpha: rate * ab, Beta: (1 - rate) * ab, Src: r}.Rand()
		}
		dice = append(dice, n)
		passing = append(passing, n-int(distuv.Binomial{N: float64(n), P: f, Src: r}.Rand()))
	}
	return passing, dice
}

// The 95 % interval for the process must hold the long-run yield in 93 % of lots
// or more where the doc comment says so, and in less where a few bad wafers carry
// the loss. By default 300 lots a case, checked with three standard errors of
// slack; with KNEEPOINT_LONG=1, 2,000.
func TestProcessCovers(t *testing.T) {
	draws := 300
	if os.Getenv("KNEEPOINT_LONG") != "" {
		draws = 2000
	}
	for _, sizes := range [][]int{{1365}, {200}, {1365, 1365, 600, 40}} {
		for _, k := range []int{2, 5, 12, 25} {
			for _, rate := range []float64{0.5, 0.1, 0.01, 0.001} {
				for _, cv := range []float64{0, 0.3, 1, 2} {
					if cv*cv*rate >= 0.9*(1-rate) {
						continue // no such beta distribution, or one of 0 and 1 only
					}
					r := rand.New(rand.NewPCG(uint64(k), math.Float64bits(rate+cv)))
					covered := 0
					for range draws {
						passing, dice := wafers(r, k, rate, cv, sizes)
						iv := yield.Process(passing, dice, 0.95)
						if iv.Lower <= 1-rate && 1-rate <= iv.Upper {
							covered++
						}
					}
					least := 0.93
					if cv > 1 {
						least = 0.85
						if k <= 5 {
							least = 0.77
						}
					}
					share := float64(covered) / float64(draws)
					slack := 3 * math.Sqrt(least*(1-least)/float64(draws))
					if share < least-slack {
						t.Errorf("%d wafers of %v dice, fail rate %v, spread %v of it: covers %.3f", k, sizes, rate, cv, share)
					}
					if draws >= 2000 {
						t.Logf("%d wafers of %v dice, fail rate %v, spread %v of it: covers %.3f", k, sizes, rate, cv, share)
					}
				}
			}
		}
	}
}

func TestProcessSpecialCases(t *testing.T) {
	// One wafer: the yield, and no interval.
	iv := yield.Process([]int{90}, []int{100}, 0.95)
	if iv.Estimate != 0.9 || !math.IsNaN(iv.Lower) || !math.IsNaN(iv.Upper) || iv.Why == "" {
		t.Errorf("one wafer: %+v", iv)
	}
	// An empty wafer is no wafer.
	if again := yield.Process([]int{0, 90}, []int{0, 100}, 0.95); again.Why != iv.Why || again.Estimate != 0.9 {
		t.Errorf("one wafer and an empty one: %+v", again)
	}
	for _, dice := range [][]int{nil, {0, 0}} {
		if iv := yield.Process(make([]int, len(dice)), dice, 0.95); !math.IsNaN(iv.Estimate) || iv.Why == "" {
			t.Errorf("no dice: %+v", iv)
		}
	}
	all := make([]int, 25)
	none := make([]int, 25)
	for i := range all {
		all[i] = 1365
	}
	iv = yield.Process(all, all, 0.95)
	counting := yield.Wilson(25*1365, 25*1365, 0.95)
	if iv.Estimate != 1 || iv.Upper != 1 || !(iv.Lower < 1) || iv.Lower > counting.Lower || iv.Why == "" {
		t.Errorf("all pass: %+v", iv)
	}
	iv = yield.Process(none, all, 0.95)
	if iv.Estimate != 0 || iv.Lower != 0 || !(iv.Upper > 0) || iv.Why == "" {
		t.Errorf("none passes: %+v", iv)
	}
	// Wafers that agree by chance do not make the interval narrower than counting.
	iv = yield.Process([]int{90, 90, 90}, []int{100, 100, 100}, 0.95)
	if w := yield.Wilson(270, 300, 0.95); iv.Lower > w.Lower || iv.Upper < w.Upper {
		t.Errorf("alike wafers: %+v, counting alone %+v", iv, w)
	}
	// Wafers that differ a lot make it much wider than counting.
	iv = yield.Process([]int{1300, 1320, 700, 1290, 1310}, []int{1365, 1365, 1365, 1365, 1365}, 0.95)
	if w := yield.Wilson(5920, 6825, 0.95); iv.Upper-iv.Lower < 8*(w.Upper-w.Lower) || iv.Estimate != w.Estimate {
		t.Errorf("wafers that differ: %+v, counting alone %+v", iv, w)
	}
	// A wide interval stays inside [0, 1].
	if iv = yield.Process([]int{0, 100}, []int{100, 100}, 0.95); iv.Lower < 0 || iv.Upper > 1 || iv.Upper-iv.Lower < 0.9 {
		t.Errorf("a good and a dead wafer: %+v", iv)
	}
	if iv = yield.Process([]int{1, 50000}, []int{1, 60000}, 0.95); !(iv.Lower >= 0 && iv.Upper <= 1 && iv.Lower < iv.Upper) || iv.Why == "" {
		t.Errorf("one die of a second wafer: %+v", iv)
	}
}

// The order of wafers does not matter beyond rounding, nor does splitting the
// loss between pass and fail.
func TestProcessLaws(t *testing.T) {
	passing, dice := []int{90, 70, 99, 85}, []int{100, 90, 100, 110}
	a := yield.Process(passing, dice, 0.9)
	b := yield.Process([]int{85, 99, 70, 90}, []int{110, 100, 90, 100}, 0.9)
	failing := make([]int, 4)
	for i := range dice {
		failing[i] = dice[i] - passing[i]
	}
	c := yield.Process(failing, dice, 0.9)
	for _, d := range []float64{a.Lower - b.Lower, a.Upper - b.Upper, a.Lower - (1 - c.Upper), a.Upper - (1 - c.Lower)} {
		if math.Abs(d) > 1e-9 {
			t.Errorf("%+v %+v %+v", a, b, c)
		}
	}
	if wide := yield.Process(passing, dice, 0.99); wide.Lower >= a.Lower || wide.Upper <= a.Upper {
		t.Error("more confidence, narrower interval")
	}
}

func TestProportionEdges(t *testing.T) {
	for n := 1; n < 60; n++ {
		for k := range n + 1 {
			w, e := yield.Wilson(k, n, 0.95), yield.ClopperPearson(k, n, 0.95)
			p := float64(k) / float64(n)
			if w.Lower < 0 || w.Upper > 1 || w.Lower > p || w.Upper < p || e.Lower > p || e.Upper < p {
				t.Fatalf("%d of %d: %+v %+v", k, n, w, e)
			}
			m := yield.Wilson(n-k, n, 0.95)
			if math.Abs(m.Lower-(1-w.Upper)) > 1e-15 {
				t.Fatalf("%d of %d: not symmetric", k, n)
			}
			// Exact: the tail beyond each limit holds 2.5 %.
			if k > 0 {
				tail := 1 - distuv.Binomial{N: float64(n), P: e.Lower}.CDF(float64(k)-1)
				if math.Abs(tail-0.025) > 1e-9 {
					t.Fatalf("%d of %d: %v beyond the lower limit", k, n, tail)
				}
			}
		}
	}
	for _, iv := range []func(int, int, float64) (est, lo float64){
		func(k, n int, c float64) (float64, float64) { i := yield.Wilson(k, n, c); return i.Estimate, i.Lower },
		func(k, n int, c float64) (float64, float64) {
			i := yield.ClopperPearson(k, n, c)
			return i.Estimate, i.Lower
		},
		func(k, n int, c float64) (float64, float64) {
			i := yield.AgrestiCoull(k, n, c)
			return i.Estimate, i.Lower
		},
	} {
		if est, lo := iv(0, 0, 0.95); !math.IsNaN(est) || !math.IsNaN(lo) {
			t.Error("an interval from no dice")
		}
		for _, f := range []func(){func() { iv(-1, 5, 0.95) }, func() { iv(6, 5, 0.95) }, func() { iv(1, 5, 1) }, func() { iv(1, 5, nan) }} {
			mustPanic(t, f)
		}
	}
	mustPanic(t, func() { yield.Process([]int{1}, []int{1, 2}, 0.95) })
	mustPanic(t, func() { yield.Process([]int{3}, []int{2}, 0.95) })
	mustPanic(t, func() { yield.Process(nil, nil, 0) })
}
