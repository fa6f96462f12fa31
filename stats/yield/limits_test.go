package yield_test

import (
	"math"
	"math/rand/v2"
	"testing"

	"kneepoint/stats/yield"
)

// moved is the plain way: move the limit, look at every die again.
func moved(tests []yield.TestData, t int, pass []bool, upper bool, value float64, stop bool) float64 {
	old := tests[t]
	limit := old.Lower
	if upper {
		limit = old.Upper
	}
	looser := upper && value > limit || !upper && value < limit
	if stop && looser || len(pass) == 0 {
		return nan
	}
	good := 0
	for i, p := range pass {
		v, mark := old.Values[i], int8(0)
		if old.Censor != nil {
			mark = old.Censor[i]
		}
		if !upper { // mirror, so that one reading of the rules serves both limits
			v, mark = -v, -mark
		}
		was, is := limit, value
		if !upper {
			was, is = -limit, -value
		}
		if p {
			switch {
			case v != v || !(is < was): // not tightened
				good++
			case mark == 0 && v > is && v <= was, mark > 0 && v > is && v <= was: // now fails
			case mark == 0 || v > was && mark > 0: // inside, or its bin knows better
				good++
			case mark > 0: // at least v, v <= is
				return nan
			case v > is: // at most v
				return nan
			default:
				good++
			}
			continue
		}
		if !looser {
			continue
		}
		others := false
		for k := range tests {
			low, high := broken(tests[k], i)
			if k == t {
				others = others || (upper && low) || (!upper && high)
			} else {
				others = others || low || high
			}
		}
		low, high := broken(old, i)
		if others || (upper && !high) || (!upper && !low) {
			continue
		}
		if v <= is {
			if mark != 0 {
				return nan
			}
			good++
		}
	}
	return float64(good) / float64(len(pass))
}

func TestLimitsAgainstPlainCounting(t *testing.T) {
	r := rand.New(rand.NewPCG(3, 4))
	shifts := []float64{0.3, -0.1, 0, 0.1, -0.3, 0.1, 0.05, -0.05, 1, -1}
	for round := range 400 {
		tests, pass := scatter(r, r.IntN(40), 1+r.IntN(4))
		stop := r.IntN(3) == 0
		all := yield.AllAgainstLimits(tests, pass, shifts, stop)
		for k, test := range tests {
			points := yield.AgainstLimit(tests, k, pass, shifts, stop)
			want := 0
			for _, limit := range []float64{test.Lower, test.Upper} {
				if limit == limit {
					want += len(shifts)
				}
			}
			if len(points) != want || len(all[k]) != want || points == nil {
				t.Fatalf("%d points, want %d", len(points), want)
			}
			for i, p := range points {
				if all[k][i].Upper != p.Upper || math.Float64bits(all[k][i].Yield) != math.Float64bits(p.Yield) {
					t.Fatal("AllAgainstLimits and AgainstLimit differ")
				}
				limit := test.Lower
				if p.Upper {
					limit = test.Upper
				}
				if p.Shift != shifts[i%len(shifts)] || p.Value != limit+p.Shift*math.Abs(limit) {
					t.Fatalf("point %d: %+v", i, p)
				}
				if y := moved(tests, k, pass, p.Upper, p.Value, stop); !(y == p.Yield || y != y && p.Yield != p.Yield) {
					t.Fatalf("round %d: test %d of %d, %d dice, %+v: want yield %v", round, k, len(tests), len(pass), p, y)
				}
			}
		}
	}
}

// A shift of nothing gives the lot's yield, and yield never falls as a limit is
// loosened.
func TestLimitCurveIsMonotone(t *testing.T) {
	r := rand.New(rand.NewPCG(5, 4))
	n := 3000
	volts := make([]float64, n)
	other := make([]float64, n)
	for i := range volts {
		volts[i], other[i] = 24.8+0.9*r.NormFloat64(), r.NormFloat64()
	}
	tests := []yield.TestData{{Values: volts, Lower: 23, Upper: 27}, {Values: other, Lower: -2.5, Upper: nan}}
	pass, _ := yield.PassByLimits(tests, n)
	base := float64(count(pass, true)) / float64(n)
	shifts := []float64{}
	for s := -10; s <= 10; s++ {
		shifts = append(shifts, float64(s)/100)
	}
	points := yield.AgainstLimit(tests, 0, pass, shifts, false)
	for i, p := range points {
		if p.Shift == 0 && p.Yield != base {
			t.Errorf("unmoved: yield %v, the lot's is %v", p.Yield, base)
		}
		if i%len(shifts) > 0 {
			if d := p.Yield - points[i-1].Yield; d != 0 && (d > 0) != p.Upper {
				t.Errorf("upper %v, shift %v: yield goes from %v to %v", p.Upper, p.Shift, points[i-1].Yield, p.Yield)
			}
		}
		// The limits as they stand, recomputed from the readings.
		moved := []yield.TestData{tests[0], tests[1]}
		if p.Upper {
			moved[0].Upper = p.Value
		} else {
			moved[0].Lower = p.Value
		}
		again, _ := yield.PassByLimits(moved, n)
		if y := float64(count(again, true)) / float64(n); y != p.Yield {
			t.Errorf("%+v: recomputed yield %v", p, y)
		}
	}
}

func TestStopOnFailHidesLooserLimits(t *testing.T) {
	tests := []yield.TestData{{Values: []float64{1, 2, 3, 4}, Lower: 1.5, Upper: 3.5}}
	pass := []bool{false, true, true, false}
	for _, p := range yield.AgainstLimit(tests, 0, pass, []float64{-0.5, 0, 0.5}, true) {
		looser := p.Upper && p.Shift > 0 || !p.Upper && p.Shift < 0
		if looser != math.IsNaN(p.Yield) {
			t.Errorf("%+v", p)
		}
	}
}

func lot() ([]yield.TestData, []bool) {
	const n = 25 * 88_000
	r := rand.New(rand.NewPCG(1, 1))
	tests := make([]yield.TestData, 8)
	for t := range tests {
		v := make([]float64, n)
		for i := range v {
			v[i] = 42 + 0.9*r.NormFloat64()
		}
		tests[t] = yield.TestData{Values: v, Lower: 42 - 2.3*0.9, Upper: 42 + 2.3*0.9}
	}
	pass, _ := yield.PassByLimits(tests, n)
	return tests, pass
}

// A full lot, 2.2 million dice and 8 tests, a sixth of the dice failing.
func BenchmarkLossesAndLimits(b *testing.B) {
	tests, pass := lot()
	shifts := make([]float64, 21)
	for i := range shifts {
		shifts[i] = float64(i-10) / 100
	}
	b.Run("TestLosses", func(b *testing.B) {
		b.ReportAllocs()
		for b.Loop() {
			yield.TestLosses(tests, pass, 0.1)
		}
	})
	b.Run("AllAgainstLimits", func(b *testing.B) {
		b.ReportAllocs()
		for b.Loop() {
			yield.AllAgainstLimits(tests, pass, shifts, false)
		}
	})
}
