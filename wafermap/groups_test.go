package wafermap

import (
	"math"
	"math/rand/v2"
	"testing"
)

// madeLot draws wafers whose fail rate at a place is given by the wafer's number.
func madeLot(random *rand.Rand, radius float64, wafers int, rate func(w int, u, v float64) float64) (g Geometry, lot []WaferFails) {
	x, y := disc(radius)
	g = FindGeometry(x, y, Known{DieWidthMM: 1, DieHeightMM: 1})
	for w := range wafers {
		fail := make([]bool, len(x))
		for i := range x {
			fail[i] = random.Float64() < rate(w, float64(x[i])/radius, float64(y[i])/radius)
		}
		lot = append(lot, WaferFails{x, y, fail})
	}
	return g, lot
}

func TestGroupWafers(t *testing.T) {
	ring := func(u, v float64) float64 {
		if u*u+v*v > 0.7 {
			return 1
		}
		return 0
	}
	centre := func(u, v float64) float64 { return math.Exp(-4 * (u*u + v*v)) }
	for _, c := range []struct {
		name   string
		truth  func(w int) int
		groups int
		rate   func(w int, u, v float64) float64
	}{
		{"all alike", nil, 1, func(w int, u, v float64) float64 { return 0.05 + 0.1*ring(u, v) }},
		{"levels that vary from wafer to wafer", nil, 1, func(w int, u, v float64) float64 { return 0.04 + 0.03*math.Abs(math.Sin(float64(w*w))) }},
		{"every second wafer with a ring", func(w int) int { return w % 2 }, 2, func(w int, u, v float64) float64 { return 0.05 + float64(w%2)*0.2*ring(u, v) }},
		{"three kinds in stretches", func(w int) int { return w / 9 }, 3, func(w int, u, v float64) float64 {
			return 0.04 + []float64{0, 0.2 * ring(u, v), 0.3 * centre(u, v)}[w/9]
		}},
	} {
		right := 0
		const lots = 12
		for k := range lots {
			random := rand.New(rand.NewPCG(uint64(k), 11))
			g, lot := madeLot(random, 22, 25, c.rate)
			got := GroupWafers(g, lot, nil)
			agrees := got.Count == c.groups
			for w := range lot {
				for v := range w {
					if c.truth != nil && (c.truth(w) == c.truth(v)) != (got.Group[w] == got.Group[v]) {
						agrees = false
					}
				}
			}
			if agrees {
				right++
			}
			if got.Group[0] != 0 || (got.Count > 1) != (got.Why == "") || (got.Count > 1) == math.IsNaN(got.Silhouette) {
				t.Fatalf("%s: %+v", c.name, got)
			}
		}
		t.Logf("%s: right in %d of %d lots", c.name, right, lots)
		if right < lots-2 {
			t.Errorf("%s: right in %d of %d lots", c.name, right, lots)
		}
	}
}

// A scratch is too thin for the cells; its signature tells.
func TestGroupWafersBySignatures(t *testing.T) {
	random := rand.New(rand.NewPCG(3, 12))
	g, lot := madeLot(random, 22, 12, func(w int, u, v float64) float64 { return 0.05 })
	signatures := make([][]Signature, len(lot))
	for w := range lot {
		signatures[w] = []Signature{{Kind: "random"}}
		if w >= 8 {
			signatures[w] = []Signature{{Kind: "line", Loss: 0.02 + 0.002*float64(w)}}
		}
	}
	if got := GroupWafers(g, lot, nil); got.Count != 1 {
		t.Errorf("without signatures: %d groups", got.Count)
	}
	got := GroupWafers(g, lot, signatures)
	if got.Count != 2 || got.Group[7] != 0 || got.Group[8] != 1 {
		t.Errorf("with signatures: %+v", got)
	}
}

func TestGroupWafersDegenerate(t *testing.T) {
	if got := GroupWafers(Geometry{}, nil, nil); got.Count != 0 || got.Why == "" {
		t.Errorf("no wafers: %+v", got)
	}
	random := rand.New(rand.NewPCG(4, 12))
	g, lot := madeLot(random, 8, 5, func(w int, u, v float64) float64 { return 0.1 })
	lot[2] = WaferFails{}
	if got := GroupWafers(g, lot, nil); got.Group[2] != -1 || got.Count != 1 {
		t.Errorf("a wafer without dice: %+v", got)
	}
	if got := GroupWafers(Geometry{Why: "none"}, lot, nil); got.Count != 1 {
		t.Errorf("no geometry: %+v", got)
	}
	if got := GroupWafers(g, lot[:3], nil); got.Count != 1 || got.Why == "" {
		t.Errorf("two wafers: %+v", got)
	}
}

// Ward's joins of five points on a line, worked by hand: 0 and 1 (growth 0.5), 10 and 11.5
// (1.125), then 20 joins neither before those two pairs: {10, 11.5} and 20 grow by 2/3 * 9.25^2.
func TestWard(t *testing.T) {
	points := [][]float64{{0}, {10}, {1}, {20}, {11.5}}
	tree := ward(points)
	want := []join{{0, 2}, {1, 4}, {6, 3}, {5, 7}}
	for i := range want {
		if tree[i] != want[i] && tree[i] != (join{want[i].b, want[i].a}) {
			t.Fatalf("joins %v, want %v", tree, want)
		}
	}
	labels := cutTree(tree, 5, 3)
	if labels[0] != 0 || labels[2] != 0 || labels[1] != 1 || labels[4] != 1 || labels[3] != 2 {
		t.Errorf("three groups: %v", labels)
	}
	if got, want := spread(points, labels, 3), 0.5+1.125; math.Abs(got-want) > 1e-12 {
		t.Errorf("spread %g, want %g", got, want)
	}
	// by hand: a of 0 is 1, b is 10.75; of 1: 1, 9.75; of 10: 1.5, 9.5; of 11.5: 1.5, 8.5; alone 0
	s := (1 - 1/10.75 + 1 - 1/9.75 + 1 - 1.5/9.5 + 1 - 1.5/8.5) / 5
	if got := silhouette(points, labels, 3); math.Abs(got-s) > 1e-12 {
		t.Errorf("silhouette %g, want %g", got, s)
	}
}

func BenchmarkGroupWafers(b *testing.B) {
	g, lot := madeLot(rand.New(rand.NewPCG(1, 1)), 167.5, 25, func(w int, u, v float64) float64 { return 0.05 + 0.01*float64(w%3)*u*u })
	for b.Loop() {
		GroupWafers(g, lot, nil)
	}
}
