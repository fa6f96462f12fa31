package wafermap

import (
	"math"
	"math/rand/v2"
	"testing"
)

// The Poisson-binomial tail against the sum over all outcomes, and against the binomial law
// where the rates are equal.
func TestPoissonBinomial(t *testing.T) {
	rates := []float64{0.02, 0.3, 0.11, 0.07, 0.5, 0.9}
	tested := []bool{true, true, false, true, true, true}
	l := poissonBinomial(tested, func(w int) float64 { return rates[w] })
	var want [7]float64
	for set := range 1 << len(rates) {
		p, k := 1.0, 0
		for w, q := range rates {
			in := set>>w&1 == 1
			switch {
			case !tested[w] && in:
				p = 0
			case !tested[w]:
			case in:
				p *= q
				k++
			default:
				p *= 1 - q
			}
		}
		for j := 0; j <= k; j++ {
			want[j] += p
		}
	}
	for k := range 6 {
		if math.Abs(l.tail[k]-want[k]) > 1e-12 {
			t.Errorf("P(at least %d) = %g, want %g", k, l.tail[k], want[k])
		}
	}
	if math.Abs(l.mean-1.79) > 1e-12 {
		t.Errorf("mean %g, want 1.79", l.mean)
	}
}

func TestRepeaters(t *testing.T) {
	random := rand.New(rand.NewPCG(5, 13))
	// a bad edge on all wafers and one bad wafer must not make repeaters
	rate := func(w int, u, v float64) float64 {
		p := 0.03
		if u*u+v*v > 0.85 {
			p = 0.3
		}
		if w == 4 {
			p = 0.5
		}
		return p
	}
	false_ := 0
	for range 20 {
		g, lot := madeLot(random, 20, 25, rate)
		got, positions := Repeaters(g, lot, 0.05)
		if len(got) > 0 {
			false_++
		}
		if positions != len(lot[0].X) {
			t.Fatalf("%d positions looked at of %d", positions, len(lot[0].X))
		}
	}
	t.Logf("repeaters on %d of 20 lots without", false_)
	if false_ > 5 { // one expected
		t.Errorf("repeaters on %d of 20 lots without", false_)
	}
	g, lot := madeLot(random, 20, 25, rate)
	ix := NewGrid(lot[0].X, lot[0].Y)
	made := [][2]int{{3, 4}, {-10, 2}, {0, 19}}
	for w := range lot {
		for _, p := range made {
			if w%2 == 0 || p[1] == 19 {
				lot[w].Fail[ix.Index(p[0], p[1])] = true
			}
		}
	}
	got, _ := Repeaters(g, lot, 0.05)
	found := 0
	for _, r := range got {
		for _, p := range made {
			if int(r.X) == p[0] && int(r.Y) == p[1] {
				found++
				if r.Failing < 13 || r.Tested != 25 || !(r.Adjusted >= r.PValue) || !(r.Expected < 10) {
					t.Errorf("repeater %+v", r)
				}
			}
		}
	}
	if found != 3 || len(got) > 5 {
		t.Errorf("%d of 3 repeaters found, %d in all: %+v", found, len(got), got)
	}
}

func TestRepeatersOfSampledWafers(t *testing.T) {
	// positions tested on different wafers have different laws; untested ones none
	lot := []WaferFails{
		{[]int32{0, 1, 2, Missing}, []int32{0, 0, 0, 0}, []bool{true, false, false, true}},
		{[]int32{0, 1}, []int32{0, 0}, []bool{true, false}},
		{[]int32{0, 0, 1}, []int32{0, 0, 0}, []bool{false, true, false}}, // the last row counts
	}
	got, positions := Repeaters(Geometry{}, lot, 1)
	if positions != 2 || len(got) != 1 || got[0].X != 0 || got[0].Failing != 3 || got[0].Tested != 3 {
		t.Fatalf("%d positions, %+v", positions, got)
	}
	// rates: (1 + 25/3)/(3+25) and so on, in one ring
	want := (1 + 25.0/3) / 28 * (1 + 25.0/2) / 27 * (1 + 25.0/2) / 27
	if math.Abs(got[0].PValue-want) > 1e-12 {
		t.Errorf("p = %g, want %g", got[0].PValue, want)
	}
}

func BenchmarkRepeaters(b *testing.B) {
	g, lot := madeLot(rand.New(rand.NewPCG(1, 1)), 167.5, 25, func(w int, u, v float64) float64 { return 0.05 })
	for b.Loop() {
		Repeaters(g, lot, 0.05)
	}
}
