package stats_test

import (
	"math"
	"math/rand/v2"
	"slices"
	"strings"
	"testing"

	"kneepoint/stats"
)

func fill(n int, f func() float64) []float64 {
	x := make([]float64, n)
	for i := range x {
		x[i] = f()
	}
	return x
}

// Whatever the data, no value is lost, edges rise and the bins are not too many.
func TestBinsLoseNothing(t *testing.T) {
	r := rand.New(rand.NewPCG(1, 9))
	for _, n := range []int{0, 1, 2, 3, 10, 100, 3000} {
		sets := awkward(r, n)
		sets["leakage"] = fill(n, func() float64 { return 1e-9 * math.Exp(r.NormFloat64()) })
		sets["near constant"] = fill(n, func() float64 { return 1 })
		sets["beyond numbers"] = fill(n, func() float64 { return math.MaxFloat64 * (2*r.Float64() - 1) })
		if n > 1 {
			sets["near constant"][0] = 1e9
			sets["beyond numbers"][0], sets["beyond numbers"][1] = math.MaxFloat64, -math.MaxFloat64
		}
		for name, x := range sets {
			for _, most := range []int{1, 2, 7, 80} {
				b := stats.FreedmanDiaconis(x, most)
				counts, below, above := b.Count(x)
				total := below + above
				for _, c := range counts {
					total += c
				}
				values := 0
				for _, v := range x {
					if v == v {
						values++
					}
				}
				if total != values || len(counts) > most || b.Rule == "" {
					t.Errorf("%s, n %d, at most %d bins: %d bins hold %d of %d values (%s)", name, n, most, len(counts), total, values, b.Rule)
				}
				for i := 1; i < len(b.Edges); i++ {
					if !(b.Edges[i] > b.Edges[i-1]) {
						t.Fatalf("%s, n %d: edges %v do not rise", name, n, b.Edges)
					}
				}
			}
		}
	}
	mustPanic(t, "stats: ", func() { stats.FreedmanDiaconis(nil, 0) })
}

// Width 2 IQR n^(-1/3): for 1000 values 0..999 (IQR by type 8 is 500) the width is
// 100 and the resolution 1, so ten bins of 100 whole steps.
func TestFreedmanDiaconisWidth(t *testing.T) {
	x := make([]float64, 1000)
	for i := range x {
		x[i] = float64(i)
	}
	b := stats.FreedmanDiaconis(x, 80)
	counts, below, above := b.Count(x)
	if len(counts) != 10 || below+above != 0 || b.Edges[0] != -0.5 || b.Edges[10] != 999.5 || b.Log {
		t.Fatalf("%+v", b)
	}
	for _, c := range counts {
		if c != 100 {
			t.Errorf("counts %v, want 100 each", counts)
		}
	}
	// Without a common step: the same width, to whole bins over the range.
	r := rand.New(rand.NewPCG(1, 1))
	for i := range x {
		x[i] += 0.3 * r.Float64()
	}
	if b := stats.FreedmanDiaconis(x, 80); len(b.Edges) != 11 || !strings.HasPrefix(b.Rule, "Freedman-Diaconis") {
		t.Errorf("%d edges, %s", len(b.Edges), b.Rule)
	}
}

// Readings at a coarse resolution: every bin must hold the same number of steps,
// or counts alternate although the population is smooth.
func TestNoComb(t *testing.T) {
	r := rand.New(rand.NewPCG(7, 3))
	for _, step := range []float64{0.01, 0.05, 0.1, 0.25, 1.0 / 3, 0.012207} {
		x := fill(40000, func() float64 { return step * math.Round((42+0.9*r.NormFloat64())/step) })
		b := stats.FreedmanDiaconis(x, 80)
		counts, _, _ := b.Count(x)
		per := (b.Edges[1] - b.Edges[0]) / step
		if math.Abs(per-math.Round(per)) > 1e-6 {
			t.Errorf("step %v: a bin holds %v steps (%s)", step, per, b.Rule)
		}
		// Second differences of a smooth curve are small against counting noise.
		chi, n := 0.0, 0
		for i := 1; i+1 < len(counts); i++ {
			if a, m, z := float64(counts[i-1]), float64(counts[i]), float64(counts[i+1]); a > 500 && m > 500 && z > 500 {
				curve := m * math.Pow(b.Edges[1]-b.Edges[0], 2) / 0.81 * 1.5
				d := math.Max(0, math.Abs(m-(a+z)/2)-curve)
				chi += d * d / (m + (a+z)/4)
				n++
			}
		}
		if n > 4 && chi > 3*float64(n) {
			t.Errorf("step %v: comb, %.0f over %d bins: %v", step, chi, n, counts)
		}
	}
}

func TestBinsOfHardCases(t *testing.T) {
	r := rand.New(rand.NewPCG(5, 3))
	shorts := fill(20000, func() float64 {
		if r.Float64() < 0.05 {
			return 0.1 * r.Float64()
		}
		return 42 + 0.9*r.NormFloat64()
	})
	b := stats.FreedmanDiaconis(shorts, 80)
	counts, below, _ := b.Count(shorts)
	if below < 800 || len(counts) < 40 || b.Edges[0] < 35 || !strings.Contains(b.Rule, "central range") {
		t.Errorf("shorted dice squeeze the picture: %d bins from %v, %d below", len(counts), b.Edges[0], below)
	}
	second := fill(20000, func() float64 {
		if r.Float64() < 0.05 {
			return 30 + 0.5*r.NormFloat64()
		}
		return 42 + 0.9*r.NormFloat64()
	})
	if _, below, _ := stats.FreedmanDiaconis(second, 80).Count(second); below > 40 {
		t.Errorf("a second population of 1000 is not shown: %d below", below)
	}
	clamped := fill(20000, func() float64 { return math.Min(80, 80+6*(r.NormFloat64()+1)) })
	if b := stats.FreedmanDiaconis(clamped, 80); !strings.HasPrefix(b.Rule, "Scott") {
		t.Errorf("no IQR: %s", b.Rule)
	}
	if b := stats.FreedmanDiaconis([]float64{3, 3, 3}, 80); len(b.Edges) != 2 || !(b.Edges[0] < 3 && b.Edges[1] > 3) {
		t.Errorf("constant: %+v", b)
	}
	if b := stats.FreedmanDiaconis([]float64{math.NaN(), math.Inf(1)}, 80); b.Edges != nil {
		t.Errorf("no finite value: %+v", b)
	}
}

func TestLogBins(t *testing.T) {
	r := rand.New(rand.NewPCG(5, 4))
	amperes := fill(5000, func() float64 { return 1.8e-9 * math.Exp(0.55*r.NormFloat64()) })
	b := stats.FreedmanDiaconis(amperes, 80)
	if !b.Log {
		t.Fatalf("leakage on a linear scale: %s", b.Rule)
	}
	step := b.Edges[1] / b.Edges[0]
	for i := 1; i < len(b.Edges); i++ {
		if !close1(b.Edges[i]/b.Edges[i-1], step, 1e-9) {
			t.Fatalf("edges are no equal steps of the logarithm at %d", i)
		}
	}
	if _, below, above := b.Count(amperes); below+above != 0 {
		t.Errorf("extremes fall outside: %d below, %d above", below, above)
	}
	volts := fill(5000, func() float64 { return 42 + 0.9*r.NormFloat64() })
	mixed := append(slices.Clone(amperes), -1e-12)
	for name, x := range map[string][]float64{"volts": volts, "a negative reading": mixed} {
		if stats.FreedmanDiaconis(x, 80).Log {
			t.Errorf("%s on a logarithmic scale", name)
		}
	}
}

// A value on an edge belongs to the bin above it, the last edge to the last bin,
// and the neighbouring float64 to the other side.
func TestCountAtEdges(t *testing.T) {
	for _, b := range []stats.Bins{
		{Edges: []float64{0, 0.1, 0.2, 0.30000000000000004, 0.4}},
		{Edges: []float64{1e-12, 1e-10, 1e-9, 1e-3}, Log: true},
		{Edges: []float64{-5, 1, 2, 100}}, // unequal: slow, and right
	} {
		n := len(b.Edges) - 1
		for i, e := range b.Edges {
			counts, below, above := b.Count([]float64{e, math.Nextafter(e, math.Inf(-1)), math.Nextafter(e, math.Inf(1)), math.NaN()})
			want := make([]int, n)
			wantBelow, wantAbove := 0, 0
			want[min(i, n-1)]++ // the edge itself
			if i == 0 {
				wantBelow++
			} else {
				want[i-1]++
			}
			if i == n {
				wantAbove++
			} else {
				want[i]++
			}
			if !slices.Equal(counts, want) || below != wantBelow || above != wantAbove {
				t.Errorf("edge %v: %v %d %d, want %v %d %d", e, counts, below, above, want, wantBelow, wantAbove)
			}
		}
	}
	if c, below, above := (stats.Bins{}).Count([]float64{1, 2, math.NaN()}); c != nil || below != 0 || above != 2 {
		t.Errorf("no bins: %v %d %d", c, below, above)
	}
}

func TestCountBy(t *testing.T) {
	b := stats.Bins{Edges: []float64{0, 1, 2}}
	first, other, below, above := b.CountBy([]float64{0.5, 0.5, 1.5, -1, 3, math.NaN()}, []bool{false, true, true, false, true, true})
	if !slices.Equal(first, []int{1, 0}) || !slices.Equal(other, []int{1, 1}) || below != 1 || above != 1 {
		t.Errorf("%v %v %d %d", first, other, below, above)
	}
	mustPanic(t, "stats: ", func() { b.CountBy([]float64{1}, nil) })
}
