package causes

import (
	"context"
	"math"
	"math/rand/v2"
	"reflect"
	"runtime"
	"testing"

	"kneepoint/wafermap"
)

// lotOf makes a lot of wafers of the given number of dice on a disc, with healthy
// readings of eight tests about round levels. Change may alter them.
func lotOf(wafers int, seed uint64, change func(c *Columns, i, wafer int)) *Columns {
	measures := []string{"bvcbo", "bvceo", "bvebo", "icbo", "hfe", "hfe", "vcesat", "cob"}
	level := []float64{60, 30, 8, 1e-9, 120, 150, 0.1, 3e-12}
	sigma := []float64{0.02, 0.02, 0.01, 0.4, 0.06, 0.06, 0.03, 0.01}
	c := &Columns{Baseline: "product file", BaselineYield: 0.95, Missing: math.MinInt32}
	for t := range measures {
		test := Test{Name: measures[t], Measures: measures[t], Lower: math.NaN(), Upper: math.NaN(), Clamp: math.NaN(), Floor: math.NaN(),
			Median: level[t], Sigma: level[t] * sigma[t] * 1.2, Within: level[t] * sigma[t], Lot: level[t] * sigma[t] / 2, Model: -1}
		if measures[t] == "bvcbo" || measures[t] == "bvceo" {
			test.Clamp = 80
		}
		if t == 4 {
			test.Name, test.Current = "hfe-10uA", 1e-5
		}
		c.Tests = append(c.Tests, test)
	}
	r := rand.New(rand.NewPCG(seed, 7))
	for w := range wafers {
		lo := len(c.Pass)
		order := int32(0)
		for y := -10; y <= 10; y++ {
			for x := -10; x <= 10; x++ {
				if x*x+y*y > 104 {
					continue
				}
				c.X, c.Y = append(c.X, int32(x)), append(c.Y, int32(y))
				c.Site, c.Order = append(c.Site, order%4), append(c.Order, order/4)
				order++
				c.Pass = append(c.Pass, true)
				for t := range c.Tests {
					c.Tests[t].Values = append(c.Tests[t].Values, level[t]*math.Exp(sigma[t]*r.NormFloat64()))
				}
				if change != nil {
					change(c, len(c.Pass)-1, w)
				}
			}
		}
		c.Wafers = append(c.Wafers, Span{ID: string(rune('a' + w)), Lo: lo, Hi: len(c.Pass)})
	}
	c.Geometry = wafermap.FindGeometry(c.X, c.Y, wafermap.Known{})
	return c
}

func observed(t *testing.T, c *Columns) *Evidence {
	t.Helper()
	e, err := Observe(context.Background(), c, Default())
	if err != nil {
		t.Fatal(err)
	}
	return e
}

// What each damage does to a die's readings is the design's table of causes and
// the physics page's section 5; the numbers are made for this test.
func TestClassesOfDice(t *testing.T) {
	healthy := []float64{60, 30, 8, 1e-9, 120, 150, 0.1, 3e-12}
	for want, change := range map[string]map[int]float64{
		"short":         {0: 2, 1: 2, 3: 1e-4, 4: 20, 5: 30},
		"emitter-short": {2: 0.5, 4: 2, 5: 3, 6: 2},
		"pipe":          {1: 1},
		"open":          {0: 80, 1: 80, 2: 20, 3: 1e-13, 4: 0, 5: 0, 6: 9, 7: 1e-14},
		"edge-low":      {0: 42},
		"leaky":         {3: 5e-8, 4: 60},
		"resistive":     {6: 0.2},
		"gain":          {4: 60, 5: 75},
	} {
		c := lotOf(4, 1, func(c *Columns, i, w int) {
			if w == 1 && c.X[i] == 3 && c.Y[i] == -2 {
				for t := range c.Tests {
					c.Tests[t].Values[i] = healthy[t]
				}
				for t, v := range change {
					c.Tests[t].Values[i] = v
				}
			}
		})
		e, k := observed(t, c), Default()
		found := ""
		for i, class := range e.class {
			if class >= 0 && i >= c.Wafers[1].Lo && i < c.Wafers[1].Hi && c.X[i] == 3 && c.Y[i] == -2 {
				found = k.Classes[class].Class
			}
		}
		if found != want {
			t.Errorf("a die with %v is told %q, not %q", change, found, want)
		}
		total := 0.0
		for _, n := range e.single(len(k.Classes)) {
			total += n
		}
		if total > 4 { // one, and hardly one in 10,000 of a Gaussian
			t.Errorf("%s: %g dice stand alone", want, total)
		}
	}
}

func TestLevelsKeepClearOfRuinedDice(t *testing.T) {
	c := lotOf(5, 2, func(c *Columns, i, w int) {
		if w == 0 && i%5 < 2 { // 40 % shorted
			c.Tests[0].Values[i], c.Tests[1].Values[i], c.Tests[3].Values[i] = 1, 1, 1e-3
		}
		if w == 1 { // all of the wafer lower by a tenth
			c.Tests[0].Values[i] *= 0.9
		}
	})
	e := observed(t, c)
	for w := range e.Wafers {
		want := 0.0
		if w == 1 {
			want = math.Log(0.9)
		}
		if got := e.Wafers[w].Level[0]; math.Abs(got-want) > 0.01 {
			t.Errorf("wafer %d: level of BVcbo %.4f, not %.4f", w, got, want)
		}
	}
	if math.Abs(e.Lot[0]) > 0.005 {
		t.Errorf("lot's level %.4f", e.Lot[0])
	}
}

// limited gives every test a limit far below its readings.
func limited(c *Columns) *Columns {
	for t := range c.Tests {
		c.Tests[t].Lower = 0
	}
	return c
}

func TestFlags(t *testing.T) {
	flag := func(name string, c *Columns) (raised, known bool) {
		e := observed(t, c)
		raised, known = e.Flags[name]
		return
	}
	open := func(c *Columns, i int) {
		for t, v := range []float64{80, 80, 20, 1e-13, 0, 0, 9, 1e-14} {
			c.Tests[t].Values[i] = v
		}
		c.Pass[i] = false
	}
	r := rand.New(rand.NewPCG(9, 9))
	for name, c := range map[string]*Columns{
		"one-site": lotOf(6, 3, func(c *Columns, i, w int) {
			if c.Site[i] == 2 && r.IntN(5) == 0 {
				open(c, i)
			}
		}),
		"bvceo-above-bvcbo": lotOf(6, 4, func(c *Columns, i, w int) { c.Tests[1].Values[i] = c.Tests[0].Values[i] * 1.1 }),
		"pile-up":           lotOf(6, 5, func(c *Columns, i, w int) { c.Tests[0].Values[i] = math.Min(c.Tests[0].Values[i], 60.3) }),
		"repeats-mostly": lotOf(8, 6, func(c *Columns, i, w int) {
			if (c.X[i]*7+c.Y[i]*13)%11 == 0 && r.IntN(10) > 0 {
				open(c, i)
			}
		}),
		"few-wafers": lotOf(10, 7, func(c *Columns, i, w int) {
			if w == 4 && r.IntN(4) == 0 {
				open(c, i)
			}
		}),
		"step": lotOf(10, 8, func(c *Columns, i, w int) {
			if w >= 6 {
				c.Tests[6].Values[i] *= 1.3
			}
		}),
		"one-test-scaled":      lotOf(8, 10, func(c *Columns, i, w int) { c.Tests[7].Values[i] *= 1.12 }),
		"fails-without-reason": limited(lotOf(5, 11, func(c *Columns, i, w int) { c.Pass[i] = i%7 != 0 })),
	} {
		if raised, known := flag(name, c); !raised || !known {
			t.Errorf("%s is not raised (known %v)", name, known)
		}
		if raised, _ := flag(name, lotOf(8, 99, nil)); raised {
			t.Errorf("%s is raised on a healthy lot", name)
		}
	}
	recovered := lotOf(5, 12, nil)
	for i := int32(0); i < 20; i++ {
		recovered.Retest.Of, recovered.Retest.Failed = append(recovered.Retest.Of, i*3), append(recovered.Retest.Failed, true)
	}
	if raised, known := flag("recovers", recovered); !raised || !known {
		t.Error("dice that pass when measured again recover")
	}
	if _, known := flag("recovers", lotOf(5, 13, nil)); known {
		t.Error("without retests nothing is known of recovery")
	}
}

func TestEvidenceOnAnyCores(t *testing.T) {
	c := lotOf(6, 14, func(c *Columns, i, w int) {
		if w == 2 && c.X[i] > 5 {
			c.Tests[3].Values[i] *= 40
		}
	})
	was := runtime.GOMAXPROCS(1)
	one := observed(t, c)
	runtime.GOMAXPROCS(4)
	four := observed(t, c)
	runtime.GOMAXPROCS(was)
	a, b := Weigh(one, Default(), UsualWeights()), Weigh(four, Default(), UsualWeights())
	for i := range a.Causes {
		if a.Causes[i].Cause != b.Causes[i].Cause || a.Causes[i].Probability != b.Causes[i].Probability {
			t.Fatalf("%v against %v", a.Causes[i], b.Causes[i])
		}
	}
	if !reflect.DeepEqual(one.class, four.class) {
		t.Error("classes differ")
	}
}

// A lot of nothing: no wafers with levels, no tests, one wafer, no places.
func TestObserveOddLots(t *testing.T) {
	noPlace := lotOf(3, 15, nil)
	noPlace.X, noPlace.Y = nil, nil
	dead := lotOf(3, 16, func(c *Columns, i, w int) {
		for t := range c.Tests {
			c.Tests[t].Values[i] = math.NaN()
		}
		c.Pass[i] = false
	})
	bare := lotOf(2, 17, nil)
	bare.Tests = nil
	for name, c := range map[string]*Columns{"no place": noPlace, "one wafer": lotOf(1, 18, nil), "no readings": dead, "no tests": bare, "no dice": {}} {
		v := Weigh(observed(t, c), Default(), UsualWeights())
		sum := 0.0
		for _, g := range v.Causes {
			if math.IsNaN(g.Probability) {
				t.Errorf("%s: probability of %s is not a number", name, g.Cause)
			}
			sum += g.Probability
		}
		if len(v.Causes) == 0 || sum < 0.999 {
			t.Errorf("%s: %d causes, probabilities sum to %g", name, len(v.Causes), sum)
		}
	}
}
