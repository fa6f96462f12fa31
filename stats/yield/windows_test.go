package yield_test

import (
	"math"
	"math/rand/v2"
	"os"
	"testing"

	"kneepoint/stats/yield"
)

// windowLot is a made lot of round wafers, and the share of dice that its
// systematic and its random fails took.
type windowLot struct {
	x, y, wafer        []int32
	pass               []bool
	systematic, random float64
}

// makeWindowLot makes wafers of 1,257 dice (radius 20). fails gives a wafer's
// chance of a systematic fail by place; other dice fail with chance rate.
func makeWindowLot(r *rand.Rand, wafers int, rate float64, fails func(r *rand.Rand, wafer int) func(x, y float64) float64) (l windowLot) {
	const radius = 20
	for w := range wafers {
		f := fails(r, w)
		for x := -radius; x <= radius; x++ {
			for y := -radius; y <= radius; y++ {
				if x*x+y*y > radius*radius {
					continue
				}
				systematic := r.Float64() < f(float64(x)/radius, float64(y)/radius)
				random := r.Float64() < rate
				if systematic {
					l.systematic++
				} else if random {
					l.random++
				}
				l.x, l.y, l.wafer = append(l.x, int32(x)), append(l.y, int32(y)), append(l.wafer, int32(w))
				l.pass = append(l.pass, !systematic && !random)
			}
		}
	}
	n := float64(len(l.pass))
	l.systematic /= n
	l.random /= n
	return l
}

// where fails are certain.
func inside(in func(x, y float64) bool) func(x, y float64) float64 {
	return func(x, y float64) float64 {
		if in(x, y) {
			return 1
		}
		return 0
	}
}

type scenario struct {
	name  string
	rate  float64
	fails func(r *rand.Rand, wafer int) func(x, y float64) float64
	// off is how far the mean estimate may be from the truth, as a share of dice.
	off float64
}

var scenarios = []scenario{
	{"nothing systematic, 4 %", 0.04, func(*rand.Rand, int) func(x, y float64) float64 {
		return inside(func(x, y float64) bool { return false })
	}, 0.002},
	{"nothing systematic, 10 %", 0.10, func(*rand.Rand, int) func(x, y float64) float64 {
		return inside(func(x, y float64) bool { return false })
	}, 0.002},
	{"dead ring", 0.03, func(*rand.Rand, int) func(x, y float64) float64 {
		return inside(func(x, y float64) bool { return math.Hypot(x, y) > 0.9 })
	}, 0.002},
	{"dead half", 0.10, func(*rand.Rand, int) func(x, y float64) float64 {
		return inside(func(x, y float64) bool { return x > 0 })
	}, 0.003},
	{"two dead wafers", 0.05, func(_ *rand.Rand, w int) func(x, y float64) float64 {
		return inside(func(x, y float64) bool { return w%12 == 5 })
	}, 0.002},
	{"blobs on a third of wafers", 0.03, func(r *rand.Rand, w int) func(x, y float64) float64 {
		cx, cy := 0.5*r.NormFloat64(), 0.5*r.NormFloat64()
		return inside(func(x, y float64) bool { return w%3 == 0 && math.Hypot(x-cx, y-cy) < 0.25 })
	}, 0.002},
	{"scratches on half of wafers", 0.02, func(r *rand.Rand, w int) func(x, y float64) float64 {
		sin, cos := math.Sincos(math.Pi * r.Float64())
		return inside(func(x, y float64) bool { return w%2 == 0 && math.Abs(x*cos+y*sin-0.15) < 0.03 })
	}, 0.002},
	// Not of one kind: part of this loss may be called either.
	{"ring failing half", 0.03, func(*rand.Rand, int) func(x, y float64) float64 {
		return func(x, y float64) float64 {
			if math.Hypot(x, y) > 0.85 {
				return 0.5
			}
			return 0
		}
	}, 0.03},
	{"gradient", 0.02, func(*rand.Rand, int) func(x, y float64) float64 {
		return func(x, y float64) float64 { return 0.6 * math.Exp(-(x*x+y*y)/0.09) }
	}, 0.012},
}

// Lots of known split: the estimates are as near as the comment of Windows says.
func TestWindowsFindTheSplit(t *testing.T) {
	lots := 8
	if os.Getenv("KNEEPOINT_LONG") != "" {
		lots = 100
	}
	for _, s := range scenarios {
		r := rand.New(rand.NewPCG(6, 6))
		var off, bias float64
		var truth, got float64
		for range lots {
			l := makeWindowLot(r, 25, s.rate, s.fails)
			w := yield.Windows(l.x, l.y, l.wafer, l.pass, 0.95)
			if sum := w.Systematic.Estimate + w.Random.Estimate + float64(w.Passing)/float64(w.Dice); math.Abs(sum-1) > 1e-12 {
				t.Fatalf("%s: parts add up to %v", s.name, sum)
			}
			bias += w.Systematic.Estimate - l.systematic
			off += math.Abs(w.Systematic.Estimate - l.systematic)
			truth += l.systematic
			got += w.Systematic.Estimate
		}
		n := float64(lots)
		t.Logf("%s: systematic %.4f, true %.4f, off by %.4f", s.name, got/n, truth/n, off/n)
		if math.Abs(bias/n) > s.off {
			t.Errorf("%s: systematic %.4f, true %.4f", s.name, got/n, truth/n)
		}
	}
}

// Intervals hold what such wafers lose on average, where the model is right.
func TestWindowIntervalsCover(t *testing.T) {
	draws := 60
	if os.Getenv("KNEEPOINT_LONG") != "" {
		draws = 1000
	}
	for _, s := range []struct {
		wafers int
		scenario
		truth float64
	}{
		{25, scenario{"blobs of all sizes on wafers", 0.03, blobs, 0}, nan},
		{8, scenario{"blobs of all sizes on wafers", 0.03, blobs, 0}, nan},
		{25, scenario{"rings of all widths", 0.05, rings, 0}, nan},
	} {
		r := rand.New(rand.NewPCG(31, uint64(s.wafers)))
		big := makeWindowLot(r, 4000, s.rate, s.fails)
		held, heldRandom := 0, 0
		for range draws {
			l := makeWindowLot(r, s.wafers, s.rate, s.fails)
			w := yield.Windows(l.x, l.y, l.wafer, l.pass, 0.95)
			if w.Systematic.Lower <= big.systematic && big.systematic <= w.Systematic.Upper {
				held++
			}
			if w.Random.Lower <= big.random && big.random <= w.Random.Upper {
				heldRandom++
			}
		}
		a, b := float64(held)/float64(draws), float64(heldRandom)/float64(draws)
		t.Logf("%d wafers, %s (systematic %.4f, random %.4f): systematic covered %.3f, random %.3f", s.wafers, s.name, big.systematic, big.random, a, b)
		slack := 3 * math.Sqrt(0.08*0.92/float64(draws))
		if a < 0.88-slack || b < 0.88-slack {
			t.Errorf("%d wafers, %s: systematic covered %.3f, random %.3f", s.wafers, s.name, a, b)
		}
	}
}

func blobs(r *rand.Rand, _ int) func(x, y float64) float64 {
	cx, cy, size := 0.5*r.NormFloat64(), 0.5*r.NormFloat64(), 0.4*r.Float64()
	return inside(func(x, y float64) bool { return math.Hypot(x-cx, y-cy) < size })
}

func rings(r *rand.Rand, _ int) func(x, y float64) float64 {
	from := 0.8 + 0.3*r.Float64()
	return inside(func(x, y float64) bool { return math.Hypot(x, y) > from })
}

func TestWindowsEdges(t *testing.T) {
	r := rand.New(rand.NewPCG(1, 9))
	l := makeWindowLot(r, 3, 0.05, blobs)
	keep := append([]bool{}, l.pass...)
	w := yield.Windows(l.x, l.y, l.wafer, l.pass, 0.95)
	if w.Wafers != 3 || w.Dice != len(l.pass) || w.Why == "" || w.Sizes[0].Windows != w.Dice {
		t.Errorf("%+v", w)
	}
	for i := range keep {
		if keep[i] != l.pass[i] {
			t.Fatal("pass was modified")
		}
	}
	// Order, shift, mirror and strays do not matter.
	var x, y, wafer []int32
	var pass []bool
	for _, i := range r.Perm(len(l.pass)) {
		x, y, wafer, pass = append(x, 1000-l.x[i]), append(y, l.y[i]-7), append(wafer, 50+l.wafer[i]), append(pass, l.pass[i])
	}
	v := yield.Windows(x, y, wafer, pass, 0.95)
	if math.Abs(v.Systematic.Estimate-w.Systematic.Estimate) > 1e-9 || math.Abs(v.Systematic.Upper-w.Systematic.Upper) > 1e-9 {
		t.Errorf("moved: %+v, %+v", v.Systematic, w.Systematic)
	}
	x, y, wafer, pass = append(x, math.MaxInt32, math.MinInt32, x[0]), append(y, -math.MaxInt32, 3, y[0]), append(wafer, 50, 50, wafer[0]), append(pass, true, true, pass[0])
	u := yield.Windows(x, y, wafer, pass, 0.95)
	if u.Unplaced != 1 || u.Again != 1 || u.Dice != v.Dice+1 || math.Abs(u.Systematic.Estimate-v.Systematic.Estimate) > 1e-3 {
		t.Errorf("with strays: %+v", u)
	}
	// One wafer: a split and no interval. Nothing passes, or nothing has neighbours: none.
	one := makeWindowLot(r, 1, 0.05, blobs)
	if w := yield.Windows(one.x, one.y, one.wafer, one.pass, 0.95); math.IsNaN(w.Systematic.Estimate) || !math.IsNaN(w.Systematic.Lower) || w.Why == "" {
		t.Errorf("%+v", w)
	}
	for i := range one.pass {
		one.pass[i] = false
	}
	if w := yield.Windows(one.x, one.y, one.wafer, one.pass, 0.95); !math.IsNaN(w.Systematic.Estimate) || w.Why != "no die passes: what is random cannot be told" {
		t.Errorf("%+v", w)
	}
	var apart windowLot
	for i := range int32(200) {
		apart.x, apart.y, apart.wafer, apart.pass = append(apart.x, 3*i), append(apart.y, 5*(i%7)), append(apart.wafer, 0), append(apart.pass, i%9 > 0)
	}
	if w := yield.Windows(apart.x, apart.y, apart.wafer, apart.pass, 0.95); w.Why != "too few windows of good neighbours" {
		t.Errorf("%+v", w)
	}
	if w := yield.Windows(nil, nil, nil, nil, 0.95); w.Why != "no dice with coordinates" || !math.IsNaN(w.Random.Estimate) {
		t.Errorf("%+v", w)
	}
	// No die fails: nothing is lost.
	all := makeWindowLot(r, 5, 0, func(*rand.Rand, int) func(x, y float64) float64 {
		return inside(func(x, y float64) bool { return false })
	})
	if w := yield.Windows(all.x, all.y, all.wafer, all.pass, 0.95); w.Systematic.Estimate != 0 || w.Random.Estimate != 0 || w.Systematic.Upper != 0 {
		t.Errorf("%+v", w)
	}
	mustPanic(t, func() { yield.Windows(x, y, wafer, pass[1:], 0.95) })
	mustPanic(t, func() { yield.Windows(nil, nil, nil, nil, 0) })
}

// A lot of 25 wafers of 88,000 dice.
func BenchmarkWindows(b *testing.B) {
	r := rand.New(rand.NewPCG(1, 1))
	var l windowLot
	for w := range int32(25) {
		for x := int32(-167); x <= 167; x++ {
			for y := int32(-167); y <= 167; y++ {
				if x*x+y*y <= 167*167 {
					l.x, l.y, l.wafer = append(l.x, x), append(l.y, y), append(l.wafer, w)
					l.pass = append(l.pass, r.Float64() > 0.03 && x*x+y*y < 160*160)
				}
			}
		}
	}
	b.ResetTimer()
	for b.Loop() {
		yield.Windows(l.x, l.y, l.wafer, l.pass, 0.95)
	}
}
