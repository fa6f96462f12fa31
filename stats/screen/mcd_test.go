package screen

import (
	"math"
	"math/rand/v2"
	"strings"
	"testing"
)

// dice are n dice of three related tests, the first share of them off in
// combination.
func dice(r *rand.Rand, n int, share float64) (columns [][]float64, off int) {
	off = int(share * float64(n))
	columns = [][]float64{make([]float64, n), make([]float64, n), make([]float64, n)}
	for i := range n {
		a, b, c := r.NormFloat64(), r.NormFloat64(), r.NormFloat64()
		if i < off {
			b -= 9
		}
		columns[0][i] = 42 + 0.9*a
		columns[1][i] = 25 + 0.6*(0.8*a+0.6*b)
		columns[2][i] = 1e-9 * (180 + 20*(0.5*a-0.3*b+0.8*c))
	}
	return columns, off
}

// The majority's covariance comes back although a fifth of the dice are off; the
// dice that are off are far, the others chi-square.
func TestRobustDistance(t *testing.T) {
	r := rand.New(rand.NewPCG(7, 1))
	for _, n := range []int{600, 20000} { // below and above the size that is sampled
		columns, off := dice(r, n, 0.2)
		m := RobustDistance(columns)
		if m.Why != "" || m.N != n || m.H != (n+4)/2 {
			t.Fatalf("%+v", m.Why)
		}
		slack := 6 / math.Sqrt(float64(n))
		for j, want := range []float64{0.9 * 0.9, 0.36, 1e-18 * 400 * 0.98} {
			if got := m.Covariance[j][j]; math.Abs(got/want-1) > slack {
				t.Errorf("n %d, test %d: variance %v, want %v", n, j, got, want)
			}
		}
		flag := m.Flag(0.999)
		beyond := 0
		for i, f := range flag {
			if i < off && !f {
				t.Errorf("n %d: die %d off is not flagged (%v)", n, i, m.Squared[i])
				break
			}
			if i >= off && f {
				beyond++
			}
		}
		if share := float64(beyond) / float64(n-off); math.Abs(share-0.001) > 0.004 {
			t.Errorf("n %d: %.4f of the good dice beyond the 99.9 %% cutoff", n, share)
		}
		// The same data, the same result.
		again := RobustDistance(columns)
		for i := range m.Squared {
			if m.Squared[i] != again.Squared[i] {
				t.Fatal("not the same twice")
			}
		}
		if p := m.P(m.Cutoff(0.99)); !near(p, 0.01, 1e-9) {
			t.Errorf("P %v", p)
		}
	}
}

// Distances do not depend on units, on the order of dice or tests, nor on adding
// one test to another.
func TestRobustDistanceLaws(t *testing.T) {
	r := rand.New(rand.NewPCG(7, 2))
	columns, _ := dice(r, 300, 0.1)
	columns[1][7] = nan
	columns[2][9] = inf
	a := RobustDistance(columns)
	if a.N != 298 || !math.IsNaN(a.Squared[7]) || !math.IsNaN(a.Squared[9]) || a.Flag(0.9)[7] {
		t.Errorf("N %d", a.N)
	}
	mixed := [][]float64{make([]float64, 300), make([]float64, 300), make([]float64, 300)}
	for i := range 300 {
		mixed[0][i] = columns[1][i]*1e6 + 3
		mixed[1][i] = columns[0][i] - 2*columns[1][i]
		mixed[2][i] = -columns[2][i]
	}
	b := RobustDistance(mixed)
	for i := range a.Squared {
		if math.Abs(a.Squared[i]-b.Squared[i]) > 1e-6*a.Squared[i] {
			t.Fatalf("die %d: %v and %v", i, a.Squared[i], b.Squared[i])
		}
	}
}

func TestRobustDistanceWhy(t *testing.T) {
	r := rand.New(rand.NewPCG(7, 3))
	columns, _ := dice(r, 200, 0)
	sum := make([]float64, 200)
	for i := range sum {
		sum[i] = columns[0][i] + columns[1][i]
	}
	for _, c := range []struct {
		columns [][]float64
		want    string
	}{
		{[][]float64{columns[0][:14], columns[1][:14], columns[2][:14]}, "14 dice"},
		{[][]float64{columns[0], make([]float64, 200)}, "test 2 of 2 has no spread"},
		{[][]float64{columns[0], columns[1], sum}, "in a plane"},
	} {
		m := RobustDistance(c.columns)
		if !strings.Contains(m.Why, c.want) || !math.IsNaN(m.Squared[0]) || len(m.Flag(0.9)) != len(c.columns[0]) {
			t.Errorf("%q, want %q", m.Why, c.want)
		}
	}
	mustPanic(t, func() { RobustDistance(nil) })
	mustPanic(t, func() { RobustDistance([][]float64{{1, 2}, {1}}) })
	// One test alone works too.
	if m := RobustDistance(columns[:1]); m.Why != "" || math.Abs(m.Location[0]-42) > 0.3 {
		t.Errorf("%+v", m.Location)
	}
}

func BenchmarkRobustDistance(b *testing.B) {
	columns, _ := dice(rand.New(rand.NewPCG(1, 1)), 2_200_000, 0.01)
	for b.Loop() {
		RobustDistance(columns)
	}
}
