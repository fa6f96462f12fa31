package stats_test

import (
	"math"
	"math/rand/v2"
	"slices"
	"testing"

	"kneepoint/stats"
)

func TestOrder(t *testing.T) {
	nan, inf := math.NaN(), math.Inf(1)
	r := rand.New(rand.NewPCG(8, 8))
	for _, x := range [][]float64{
		nil, {nan}, {3}, {2, 1}, {1, nan, -1, inf, -inf, 0, math.Copysign(0, -1), 5e-324, -5e-324, math.MaxFloat64},
		readings(3000)["gaps"], readings(3000)["amperes"],
	} {
		for i := range x { // and with ties
			if r.IntN(3) == 0 && len(x) > 3 {
				x[i] = x[0]
			}
		}
		before := slices.Clone(x)
		order, sorted := stats.Order(x), stats.Sorted(x)
		want := slices.DeleteFunc(slices.Clone(x), func(v float64) bool { return v != v })
		slices.Sort(want)
		if len(order) != len(want) || len(sorted) != len(want) {
			t.Fatalf("%d and %d of %d values", len(order), len(sorted), len(want))
		}
		for i, at := range order {
			if x[at] != want[i] || sorted[i] != want[i] {
				t.Fatalf("place %d: %v and %v, want %v", i, x[at], sorted[i], want[i])
			}
			if i > 0 && x[at] == x[order[i-1]] && at < order[i-1] {
				t.Fatalf("equal values at %d changed their order", i)
			}
		}
		for i := range x {
			if math.Float64bits(x[i]) != math.Float64bits(before[i]) {
				t.Fatal("Order modified its argument")
			}
		}
	}
}

func TestRanks(t *testing.T) {
	// By hand: 1 is first, the three 2s share 2..4, NaN takes no rank.
	ranks, ties := stats.Ranks([]float64{2, 5, 2, math.NaN(), 1, 2, 9, 9})
	want := []float64{3, 5, 3, math.NaN(), 1, 3, 6.5, 6.5}
	for i := range want {
		if ranks[i] != want[i] && !(ranks[i] != ranks[i] && want[i] != want[i]) {
			t.Errorf("ranks %v, want %v", ranks, want)
			break
		}
	}
	if ties != 24+6 {
		t.Errorf("ties %v, want 30", ties)
	}
}

// Type 6 quartiles by R 4.2.2, quantile(c(2, 3, 5, 7, 11, 13, 17, 19), c(0, .1, .25, .5, .75, .99), type = 6).
func TestQuantileType6(t *testing.T) {
	got := stats.Quantiles([]float64{19, 2, 3, 13, 5, 7, 11, 17}, []float64{0, 0.1, 0.25, 0.5, 0.75, 0.99}, stats.HyndmanFan6)
	want := []float64{2, 2, 3.5, 9, 16, 19}
	for i := range want {
		if math.Abs(got[i]-want[i]) > 1e-13 {
			t.Errorf("got %v, want %v", got, want)
			break
		}
	}
}

func BenchmarkRanks(b *testing.B) {
	x := readings(lot)["volts"]
	for b.Loop() {
		stats.Ranks(x)
	}
}
