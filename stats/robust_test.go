package stats_test

import (
	"math"
	"math/rand/v2"
	"slices"
	"testing"

	"kneepoint/stats"
)

// walshMedian forms every Walsh average.
func walshMedian(x []float64) float64 {
	var w []float64
	for i := range x {
		for j := i; j < len(x); j++ {
			w = append(w, (x[i]+x[j])/2)
		}
	}
	slices.Sort(w)
	return sortedMedian(w)
}

func TestHodgesLehmannAgainstAllPairs(t *testing.T) {
	r := rand.New(rand.NewPCG(2, 2))
	for n := 1; n < 60; n++ {
		x := make([]float64, n)
		for i := range x {
			x[i] = math.Round(20*math.Exp(r.NormFloat64())) / 20
		}
		if got, want := stats.HodgesLehmann(x), walshMedian(x); got != want {
			t.Fatalf("n %d: %v, want %v", n, got, want)
		}
	}
}

// The estimating equations of proposal 2 hold at its result: the clipped data
// have the location as mean and beta*scale^2 as mean square (divisor n-1).
func TestHuberProposal2(t *testing.T) {
	r := rand.New(rand.NewPCG(8, 2))
	for _, k := range []float64{1, 1.5, 2.5} {
		x := make([]float64, 300)
		for i := range x {
			x[i] = 10 + r.NormFloat64()
			if i%10 == 0 {
				x[i] += 50
			}
		}
		mu, s := stats.HuberProposal2(x, k)
		sum, square := 0.0, 0.0
		for _, v := range x {
			z := math.Min(math.Max((v-mu)/s, -k), k)
			sum += z
			square += z * z
		}
		// beta = E[min(|Z|,k)^2] by quadrature of the normal density.
		beta := 0.0
		const step = 1e-4
		for z := step / 2; z < 12; z += step {
			c := math.Min(z, k)
			beta += 2 * c * c * math.Exp(-z*z/2) / math.Sqrt(2*math.Pi) * step
		}
		if math.Abs(sum) > 1e-8 || math.Abs(square/float64(len(x)-1)-beta) > 1e-6 {
			t.Errorf("k %v: sum %v, mean square %v, want 0 and %v", k, sum, square/float64(len(x)-1), beta)
		}
	}
}

func TestRobustLocations(t *testing.T) {
	nan := math.NaN()
	for _, c := range []struct {
		name string
		x    []float64
		want float64
	}{
		{"nothing", nil, nan},
		{"only missing", []float64{nan}, nan},
		{"one", []float64{7}, 7},
		{"constant", []float64{2, 2, nan, 2}, 2},
		{"symmetric", []float64{1, 2, 3, 4, nan, 5}, 3},
	} {
		huber, _ := stats.Huber(c.x, 1.5)
		second, _ := stats.HuberProposal2(c.x, 1.5)
		for name, got := range map[string]float64{"Hodges-Lehmann": stats.HodgesLehmann(c.x), "Huber": huber,
			"proposal 2": second, "trimmed mean": stats.TrimmedMean(c.x, 0.2)} {
			if !close1(got, c.want, 1e-14) {
				t.Errorf("%s of %s: %v, want %v", name, c.name, got, c.want)
			}
		}
	}
	// An outlier moves none of them far, and the mean a lot.
	x := []float64{1, 2, 3, 4, 5, 6, 7, 8, 9, 1e6}
	for name, got := range map[string]float64{"Hodges-Lehmann": stats.HodgesLehmann(x), "trimmed mean": stats.TrimmedMean(x, 0.1)} {
		if got < 5 || got > 7 {
			t.Errorf("%s with an outlier: %v", name, got)
		}
	}
	if h, _ := stats.Huber(x, 1.5); h < 5 || h > 7 {
		t.Errorf("Huber with an outlier: %v", h)
	}
	if h := stats.HodgesLehmann([]float64{math.Inf(-1), math.Inf(1), 1}); !math.IsNaN(h) {
		t.Errorf("Hodges-Lehmann of opposite infinities: %v", h)
	}
	if got := stats.TrimmedMean([]float64{1, 2, 30}, 0.5); got != 2 {
		t.Errorf("half trimmed: %v, want the median", got)
	}
	mustPanic(t, "stats: ", func() { stats.TrimmedMean(x, 1) })
	mustPanic(t, "stats: ", func() { stats.Huber(x, 0) })
}

func TestGeometric(t *testing.T) {
	if m, s := stats.Geometric([]float64{1, math.NaN(), 100}); !close1(m, 10, 1e-15) || !close1(s, math.Pow(10, math.Sqrt2), 1e-14) {
		t.Errorf("%v %v", m, s)
	}
	for _, x := range [][]float64{nil, {0, 1}, {-1, 2}} {
		if m, _ := stats.Geometric(x); !math.IsNaN(m) {
			t.Errorf("Geometric(%v) = %v", x, m)
		}
	}
}
