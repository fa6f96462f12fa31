package screen

import (
	"math"
	"math/rand/v2"
	"slices"
	"testing"
)

// wafer is a round wafer of so many dice across, with a bowl and a tilt.
func wafer(r *rand.Rand, across int, noise float64) (x, y []int32, v []float64) {
	c := float64(across-1) / 2
	for j := range across {
		for i := range across {
			dx, dy := (float64(i)-c)/c, (float64(j)-c)/c
			if dx*dx+dy*dy <= 1.02 {
				x, y = append(x, int32(i)-5), append(y, int32(j)+1000)
				v = append(v, 42+3*(dx*dx+dy*dy)+2*dx+noise*r.NormFloat64())
			}
		}
	}
	return x, y, v
}

// Each residual against forming the median of the neighbours by hand; the pattern
// is taken out, the planted dice are found, and nothing else.
func TestNeighbourResidual(t *testing.T) {
	r := rand.New(rand.NewPCG(4, 4))
	x, y, v := wafer(r, 40, 0.1)
	planted := []int{100, 444, 800}
	for _, i := range planted {
		v[i] -= 1.5 // well within the lot: limits of the lot would not see them
	}
	v[50] = nan
	got := NeighbourResidual(x, y, v, nil, Nearby())
	for i := range x {
		var near []float64
		for j := range x {
			if j != i && v[j] == v[j] && max(x[j]-x[i], x[i]-x[j]) <= 2 && max(y[j]-y[i], y[i]-y[j]) <= 2 {
				near = append(near, v[j])
			}
		}
		want := nan
		if v[i] == v[i] && len(near) >= 8 {
			slices.Sort(near)
			k := len(near)
			want = v[i] - (near[(k-1)/2]+near[k/2])/2
		}
		if math.Abs(got.Residual[i]-want) > 1e-12 || math.IsNaN(got.Residual[i]) != math.IsNaN(want) {
			t.Fatalf("die %d: %v, want %v", i, got.Residual[i], want)
		}
		if got.Flag[i] != slices.Contains(planted, i) {
			t.Errorf("die %d with residual %v: flag %v", i, got.Residual[i], got.Flag[i])
		}
	}
	if got.Sigma > 0.2 || got.N < len(x)-3 {
		t.Errorf("sigma %v, N %d", got.Sigma, got.N)
	}
	// The order of the dice and far-out coordinates do not matter.
	perm := r.Perm(len(x))
	px, py, pv := make([]int32, len(x)), make([]int32, len(x)), make([]float64, len(x))
	for k, i := range perm {
		px[k], py[k], pv[k] = x[i], y[i], v[i]
	}
	px, py, pv = append(px, math.MaxInt32, math.MinInt32), append(py, math.MinInt32, math.MaxInt32), append(pv, 42, 42)
	other := NeighbourResidual(px, py, pv, nil, Nearby())
	for k, i := range perm {
		if other.Residual[k] != got.Residual[i] && got.Residual[i] == got.Residual[i] || other.Flag[k] != got.Flag[i] {
			t.Fatalf("die %d: %v in another order, %v", i, other.Residual[k], got.Residual[i])
		}
	}
	if !math.IsNaN(other.Residual[len(x)]) {
		t.Error("a residual without neighbours")
	}
}

func TestNeighbourBounds(t *testing.T) {
	r := rand.New(rand.NewPCG(4, 5))
	x, y, v := wafer(r, 20, 0.1)
	mark := make([]int8, len(x))
	v[100], mark[100] = v[100]+9, 1  // at least far above: flagged
	v[150], mark[150] = v[150]+9, -1 // at most that: not known
	v[200], mark[200] = v[200]-9, 1  // at least far below: not known
	got := NeighbourResidual(x, y, v, mark, Nearby())
	if !got.Flag[100] || got.Flag[150] || got.Flag[200] {
		t.Errorf("%v %v %v", got.Flag[100], got.Flag[150], got.Flag[200])
	}
	for i := range mark { // all at the clamp: no level
		v[i], mark[i] = 50, 1
	}
	if got = NeighbourResidual(x, y, v, mark, Nearby()); got.N != 0 || got.Why == "" {
		t.Errorf("%+v", got.Why)
	}
	if got = NeighbourResidual(x, y, v, nil, Nearby()); got.Why == "" || slices.Contains(got.Flag, true) {
		t.Errorf("%+v", got.Why)
	}
	if got = NeighbourResidual(nil, nil, nil, nil, Nearby()); got.Why == "" {
		t.Error("no dice")
	}
	// Two readings at one place are neighbours of each other.
	two := NeighbourResidual([]int32{1, 1, 2}, []int32{1, 1, 1}, []float64{3, 5, 4}, nil, NeighbourOptions{Radius: 1, Minimum: 1, K: 6})
	if !slices.Equal(two.Residual, []float64{-1.5, 1.5, 0}) {
		t.Errorf("%v", two.Residual)
	}
	mustPanic(t, func() { NeighbourResidual(x, y[:1], v, nil, Nearby()) })
	mustPanic(t, func() { NeighbourResidual(x, y, v, nil, NeighbourOptions{}) })
}

func TestBadNeighbourhood(t *testing.T) {
	// A 3x3 square of fails with a good die in its middle, one at its corner and a
	// lonely fail.
	//
	//   . . . . .
	//   . F F F .
	//   . F g F .
	//   . F F . .
	//   . . . . F
	picture := []string{".....", ".FFF.", ".FgF.", ".FF..", "....F"}
	var x, y []int32
	var fail []bool
	for j, row := range picture {
		for i, c := range row {
			x, y, fail = append(x, int32(i)), append(y, int32(j)), append(fail, c == 'F')
		}
	}
	n := BadNeighbourhood(x, y, fail, 1, 3, 0.5)
	at := func(i, j int) int { return 5*j + i }
	if n.Failing[at(2, 2)] != 7 || n.Neighbours[at(2, 2)] != 8 || n.Neighbours[at(0, 0)] != 3 || n.Failing[at(3, 3)] != 3 {
		t.Errorf("%+v", n)
	}
	for i, f := range n.Flag {
		if want := i == at(2, 2) || i == at(2, 0) || i == at(0, 2); f != want { // 7 of 8, 3 of 5, 3 of 5
			t.Errorf("die %d,%d: %v", i%5, i/5, f)
		}
	}
	mustPanic(t, func() { BadNeighbourhood(x, y, fail, 1, 1, 0) })
	mustPanic(t, func() { BadNeighbourhood(x, y, nil, 1, 1, 0.5) })
}

func BenchmarkNeighbourResidual(b *testing.B) {
	x, y, v := wafer(rand.New(rand.NewPCG(1, 1)), 335, 0.1)
	b.ReportMetric(float64(len(x)), "dice")
	for b.Loop() {
		NeighbourResidual(x, y, v, nil, Nearby())
	}
}

// TestMedianAbout wants the median whatever the guess.
func TestMedianAbout(t *testing.T) {
	r := rand.New(rand.NewPCG(4, 24))
	for n := 1; n < 30; n++ {
		for k := range 60 {
			v := make([]float64, n)
			for i := range v {
				switch r.IntN(8) {
				case 0:
					v[i] = math.Inf(r.IntN(2)*2 - 1)
				case 1:
					v[i] = float64(r.IntN(2))
				default:
					v[i] = r.NormFloat64()
				}
			}
			guess := [...]float64{math.NaN(), math.Inf(1), math.Inf(-1), 0, r.NormFloat64(), v[r.IntN(n)]}[k%6]
			sorted := slices.Sorted(slices.Values(v))
			want := sorted[n/2]
			if a := sorted[(n-1)/2]; a != want {
				want = a/2 + want/2
			}
			if got := medianAbout(guess, v); got != want && !(math.IsNaN(got) && math.IsNaN(want)) {
				t.Fatalf("%v about %g: %g, want %g", sorted, guess, got, want)
			}
		}
	}
}
