package relate

import (
	"math"
	"math/rand/v2"
	"slices"
	"strings"
	"testing"
)

// The cases of R are checked by TestReference of package stats; here are further
// values, laws and the ends of the range.

var nan, inf = math.NaN(), math.Inf(1)

func near(got, want, tolerance float64) bool {
	return math.Abs(got-want) <= tolerance*math.Max(math.Abs(want), 1e-300)
}

// R 4.2.2, cor.test(1:7, c(2,1,4,3,5,7,6)): all permutations counted.
func TestExactSmall(t *testing.T) {
	x, y := []float64{1, 2, 3, nan, 4, 5, 6, 7}, []float64{2, 1, 4, 9, 3, 5, 7, 6}
	if s := Spearman(x, y); !near(s.PExact, 0.0123015873015873, 1e-12) || s.N != 7 {
		t.Errorf("%+v", s)
	}
	if k := Kendall(x, y); !near(k.PExact, 0.0301587301587301, 1e-12) {
		t.Errorf("%+v", k)
	}
	// All in order: one permutation of n!, both tails.
	up := []float64{1, 2, 3, 4, 5, 6, 7}
	if s, k := Spearman(up, up), Kendall(up, up); !near(s.PExact, 2.0/5040, 1e-12) || !near(k.PExact, 2.0/5040, 1e-12) ||
		s.Estimate.Estimate != 1 || k.Estimate.Estimate != 1 {
		t.Errorf("%+v %+v", s, k)
	}
	long := make([]float64, 40)
	for i := range long {
		long[i] = float64(i)
	}
	if s := Spearman(long, long); !(s.PExact >= 0 && s.PExact < 1e-20) || s.P != 0 {
		t.Errorf("%+v", s)
	}
}

func TestNothing(t *testing.T) {
	for _, c := range []struct {
		name, got, want string
	}{
		{"pearson", Pearson([]float64{1, 2}, []float64{1, 2}, 0.95).Why, "fewer than three"},
		{"pearson infinite", Pearson([]float64{1, 2, inf}, []float64{1, 2, 4}, 0.95).Why, "infinite"},
		{"pearson constant", Pearson([]float64{1, 1, 1}, []float64{1, 2, 4}, 0.95).Why, "without spread"},
		{"kendall", Kendall([]float64{1, nan}, []float64{1, 2}).Why, "fewer than two"},
		{"kendall constant", Kendall([]float64{1, 1}, []float64{1, 2}).Why, "equal"},
		{"line", TheilSen([]float64{1, 1}, []float64{1, 2}, 0.95).Why, "different x"},
		{"line infinite", TheilSen([]float64{1, 2}, []float64{1, inf}, 0.95).Why, "infinite"},
		{"trend", MannKendall([]float64{1, nan, 2}, 0.95).Why, "fewer than three"},
		{"trend constant", MannKendall([]float64{2, 2, 2}, 0.95).Why, "equal"},
	} {
		if !strings.Contains(c.got, c.want) {
			t.Errorf("%s: %q, want %q", c.name, c.got, c.want)
		}
	}
	for _, f := range []func(){func() { Kendall(nil, []float64{1}) }, func() { Pearson(nil, nil, 0) }} {
		func() {
			defer func() {
				if s, ok := recover().(string); !ok || !strings.HasPrefix(s, "stats/relate: ") {
					t.Errorf("recovered %q", s)
				}
			}()
			f()
		}()
	}
}

// Knight's counting against counting pairs.
func TestConcordance(t *testing.T) {
	r := rand.New(rand.NewPCG(2, 7))
	for _, n := range []int{2, 3, 17, 100, 333} {
		x, y := make([]float64, n), make([]float64, n)
		for i := range x {
			x[i], y[i] = float64(r.IntN(12)), float64(r.IntN(7))
		}
		before := append(slices.Clone(x), y...)
		k := concordance(x, y)
		var s, tx, ty float64
		for i := range x {
			for j := range i {
				dx, dy := x[i]-x[j], y[i]-y[j]
				switch {
				case dx*dy > 0:
					s++
				case dx*dy < 0:
					s--
				}
				if dx == 0 {
					tx++
				}
				if dy == 0 {
					ty++
				}
			}
		}
		if k.s != s || k.tiesX != tx || k.tiesY != ty {
			t.Errorf("n %d: %+v, want %v %v %v", n, k, s, tx, ty)
		}
		if !slices.Equal(before, append(slices.Clone(x), y...)) {
			t.Error("arguments modified")
		}
	}
}

// Above 3,000 points slopes are not all formed; here they are, to compare. Equal
// x, equal y and one far outlier included.
func TestTheilSenLarge(t *testing.T) {
	defer func(p int, s int64) { fewPoints, fewSlopes = p, s }(fewPoints, fewSlopes)
	fewPoints, fewSlopes = 500, 3000
	r := rand.New(rand.NewPCG(2, 8))
	for name, make := range map[string]func(i int) (x, y float64){
		"fine":   func(i int) (x, y float64) { x = r.NormFloat64(); return x, 2*x + r.NormFloat64() },
		"coarse": func(i int) (x, y float64) { x = float64(r.IntN(40)); return x, math.Round(x/4 + 2*r.NormFloat64()) },
		"series": func(i int) (x, y float64) {
			return float64(i), math.Round(100*(84+1e-4*float64(i)+r.NormFloat64())) / 100
		},
		"no slope": func(i int) (x, y float64) { return float64(i), float64(r.IntN(3)) },
	} {
		var x, y []float64
		for i := range fewPoints + 260 {
			a, b := make(i)
			x, y = append(x, a), append(y, b)
		}
		y[77] = 1e6
		var all []float64
		for i := range x {
			for j := range i {
				if d := x[i] - x[j]; d != 0 {
					all = append(all, (y[i]-y[j])/d)
				}
			}
		}
		slices.Sort(all)
		ranks := []int{0, 5, len(all) / 3, len(all) / 2, len(all) - 1}
		got := slopesAt(x, y, len(all), ranks)
		for i, k := range ranks {
			if !near(got[i], all[k], 1e-12) && math.Abs(got[i]-all[k]) > 1e-12 {
				t.Errorf("%s: slope of rank %d: %v, want %v", name, k, got[i], all[k])
			}
		}
	}
}

// The slope's interval holds the slope in about 95 %, and the trend test raises a
// false alarm in about 5 %.
func TestLevels(t *testing.T) {
	r := rand.New(rand.NewPCG(5, 8))
	const draws = 1000
	hold, alarm, pearson := 0, 0, 0
	x, y, e := make([]float64, 30), make([]float64, 30), make([]float64, 30)
	for range draws {
		for i := range x {
			x[i], e[i] = float64(i), r.NormFloat64()
			y[i] = 0.05*x[i] + e[i]
		}
		if s := TheilSen(x, y, 0.95).Slope; s.Lower <= 0.05 && 0.05 <= s.Upper {
			hold++
		}
		if MannKendall(e, 0.95).P <= 0.05 {
			alarm++
		}
		if c := Pearson(x, e, 0.95); c.Estimate.Lower <= 0 && 0 <= c.Estimate.Upper {
			pearson++
		}
	}
	for name, c := range map[string][2]float64{"slope": {float64(hold), 0.95}, "alarm": {float64(alarm), 0.05}, "pearson": {float64(pearson), 0.95}} {
		if share := c[0] / draws; math.Abs(share-c[1]) > 0.021 {
			t.Errorf("%s: %.3f", name, share)
		}
	}
}

func BenchmarkKendall(b *testing.B) {
	r := rand.New(rand.NewPCG(1, 1))
	x, y := make([]float64, 200_000), make([]float64, 200_000)
	for i := range x {
		x[i], y[i] = float64(i), math.Round(100*r.NormFloat64())/100
	}
	b.Run("tau", func(b *testing.B) {
		for b.Loop() {
			Kendall(x, y)
		}
	})
	b.Run("slope", func(b *testing.B) {
		for b.Loop() {
			TheilSen(x, y, 0.95)
		}
	})
}
