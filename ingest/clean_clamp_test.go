package ingest

import (
	"maps"
	"math"
	"math/rand/v2"
	"slices"
	"testing"
)

// grid rounds to a resolution, as a tester's display does.
func grid(x, step float64) float64 { return math.Round(x/step) * step }

// digits3 rounds to three significant digits.
func digits3(x float64) float64 {
	e := math.Pow(10, math.Floor(math.Log10(math.Abs(x)))-2)
	return math.Round(x/e) * e
}

// Columns without a clamp, of every kind that might look like one: none may be
// called a pile. The sizes and resolutions span what testers give.
func TestNoPileWithoutClamp(t *testing.T) {
	r := rand.New(rand.NewPCG(3, 5))
	draws := map[string]func() float64{
		"normal, fine":         func() float64 { return grid(41.9+0.9*r.NormFloat64(), 0.001) },
		"normal, 10 steps":     func() float64 { return grid(41.9+0.9*r.NormFloat64(), 0.3) },
		"normal, 3 steps":      func() float64 { return grid(41.9+0.9*r.NormFloat64(), 1) },
		"normal, 1 step":       func() float64 { return grid(41.9+0.3*r.NormFloat64(), 1) },
		"unrounded":            func() float64 { return r.NormFloat64() },
		"uniform":              func() float64 { return grid(r.Float64(), 0.01) },
		"uniform, unrounded":   func() float64 { return r.Float64() },
		"exponential":          func() float64 { return grid(r.ExpFloat64(), 0.01) },
		"exponential, coarse":  func() float64 { return grid(r.ExpFloat64(), 0.5) },
		"negative exponential": func() float64 { return grid(50-r.ExpFloat64(), 0.05) },
		"lognormal, 3 digits":  func() float64 { return digits3(1e-9 * math.Exp(r.NormFloat64())) },
		"lognormal, wide":      func() float64 { return digits3(1e-9 * math.Exp(3*r.NormFloat64())) },
		"lognormal, grid":      func() float64 { return grid(math.Exp(r.NormFloat64()), 0.1) },
		"gain, whole":          func() float64 { return math.Round(131 + 8*r.NormFloat64()) },
		"two values":           func() float64 { return float64(r.IntN(10) / 9) },
		"skewed classes":       func() float64 { return float64(max(r.IntN(4), r.IntN(4))) },
		"two humps":            func() float64 { return grid(20+20*float64(r.IntN(2))+r.NormFloat64(), 0.01) },
		"steep edge":           func() float64 { return grid(44-math.Abs(r.NormFloat64()), 0.25) },
		"ADC steps":            func() float64 { return grid(grid(41.9+0.9*r.NormFloat64(), 0.012207), 0.001) },
		"outliers":             func() float64 { return grid(41+r.NormFloat64()+30*float64(r.IntN(50)/49)*r.Float64(), 0.01) },
		"count, mean 4":        func() float64 { return math.Floor(-4 * math.Log(r.Float64())) },
	}
	for _, name := range slices.Sorted(maps.Keys(draws)) {
		draw := draws[name]
		for _, n := range []int{5, 9, 30, 100, 1000, 10_000} {
			tries := 40
			if n > 1000 {
				tries = 6
			}
			for range tries {
				v := make([]float64, n)
				for i := range v {
					v[i] = draw()
				}
				for _, sign := range []float64{1, -1} {
					if p, ok := findPile(v, survey(v, nil), sign); ok {
						t.Errorf("%s, n %d: pile of %d at %v, expected %.3g", name, n, p.n, p.value, p.expected)
					}
				}
			}
		}
	}
}

// Columns that a tester cut off: each must be found, with the count exact.
func TestPileAtClamp(t *testing.T) {
	r := rand.New(rand.NewPCG(4, 6))
	for _, c := range []struct {
		name  string
		n     int
		clamp float64
		draw  func() float64
	}{
		{"half of the dice", 1000, 41.9, func() float64 { return grid(41.9+0.9*r.NormFloat64(), 0.001) }},
		{"a tenth", 1000, 43, func() float64 { return grid(41.9+0.9*r.NormFloat64(), 0.001) }},
		{"nearly all", 1000, 40.2, func() float64 { return grid(41.9+0.9*r.NormFloat64(), 0.001) }},
		{"few of a small lot", 80, 42.8, func() float64 { return grid(41.9+0.9*r.NormFloat64(), 0.001) }},
		{"coarse resolution", 5000, 43, func() float64 { return grid(41.9+1.5*r.NormFloat64(), 0.1) }},
		{"far from the body", 1000, 80, func() float64 {
			if r.IntN(100) == 0 {
				return 90
			}
			return grid(41.9+0.9*r.NormFloat64(), 0.001)
		}},
		{"whole numbers", 5000, 140, func() float64 { return math.Round(131 + 8*r.NormFloat64()) }},
		{"large lot", 100_000, 45, func() float64 { return grid(41.9+0.9*r.NormFloat64(), 0.001) }},
	} {
		v := make([]float64, c.n)
		want := 0
		for i := range v {
			if v[i] = c.draw(); v[i] >= c.clamp {
				v[i] = c.clamp
				want++
			}
		}
		if p, ok := findPile(v, survey(v, nil), 1); !ok || p.n != want || p.value != c.clamp {
			t.Errorf("%s: found %v %+v, want %d at %v", c.name, ok, p, want, c.clamp)
		}
		for i := range v {
			v[i] = -v[i]
		}
		if p, ok := findPile(v, survey(v, nil), -1); !ok || p.n != want || p.value != -c.clamp {
			t.Errorf("%s, floor: found %v %+v, want %d at %v", c.name, ok, p, want, -c.clamp)
		}
		if p, ok := findPile(v, survey(v, nil), 1); ok {
			t.Errorf("%s: pile at the other end: %+v", c.name, p)
		}
	}
}
