package stats_test

import (
	"math"
	"math/rand/v2"
	"slices"
	"testing"

	"kneepoint/stats"
)

// awkward returns data that break careless selection.
func awkward(r *rand.Rand, n int) map[string][]float64 {
	make1 := func(f func(i int) float64) []float64 {
		x := make([]float64, n)
		for i := range x {
			x[i] = f(i)
		}
		return x
	}
	return map[string][]float64{
		"normal":   make1(func(int) float64 { return r.NormFloat64() }),
		"sorted":   make1(func(i int) float64 { return float64(i) }),
		"reversed": make1(func(i int) float64 { return float64(-i) }),
		"ties":     make1(func(int) float64 { return float64(r.IntN(3)) }),
		"constant": make1(func(int) float64 { return -4.25 }),
		"one outlier": make1(func(i int) float64 {
			if i == n/2 {
				return 1e300
			}
			return 1 + 1e-12*float64(r.IntN(1000))
		}),
		"all scales": make1(func(int) float64 { return r.NormFloat64() * math.Ldexp(1, r.IntN(2000)-1000) }),
		"zeros": make1(func(i int) float64 {
			return []float64{0, math.Copysign(0, -1), math.SmallestNonzeroFloat64, -math.SmallestNonzeroFloat64}[i%4]
		}),
		"infinities": make1(func(int) float64 { return []float64{math.Inf(1), math.Inf(-1), r.NormFloat64()}[r.IntN(3)] }),
		"gaps": make1(func(int) float64 {
			if r.IntN(2) == 0 {
				return math.NaN()
			}
			return math.Round(100*r.NormFloat64()) / 100
		}),
	}
}

// bySorting is the plain way to the same quantiles: the definitions of Hyndman
// and Fan 1996, table 1 and eq. 1, on sorted data, positions from 1.
func bySorting(x []float64, p float64, kind stats.QuantileKind) float64 {
	v := slices.DeleteFunc(slices.Clone(x), math.IsNaN)
	if len(v) == 0 {
		return math.NaN()
	}
	slices.Sort(v)
	n := float64(len(v))
	at := 1 + p*(n-1)
	if kind == stats.HyndmanFan8 {
		at = 1.0/3 + p*(n+1.0/3)
	}
	at = math.Min(math.Max(at, 1), n)
	if whole := math.Round(at); math.Abs(at-whole) < 1e-9 {
		return v[int(whole)-1]
	}
	j := math.Floor(at)
	a, b := v[int(j)-1], v[int(j)]
	if a == b {
		return a
	}
	return (1-(at-j))*a + (at-j)*b
}

func TestQuantilesAgainstSorting(t *testing.T) {
	r := rand.New(rand.NewPCG(1, 2))
	probs := []float64{0.5, 0, 1, 0.00135, 0.25, 0.75, 0.99865, 0.1, 0.9, 0.5}
	var s stats.Selector // kept, so that left-over scratch would show
	for _, n := range []int{1, 2, 3, 4, 5, 10, 47, 48, 49, 50, 100, 1000, 4099, 20000} {
		for name, x := range awkward(r, n) {
			for _, kind := range []stats.QuantileKind{stats.HyndmanFan7, stats.HyndmanFan8} {
				got := s.Quantiles(x, probs, kind)
				for i, p := range probs {
					want := bySorting(x, p, kind)
					if !close1(got[i], want, 1e-12) && math.Abs(got[i]-want) > 1e-300 {
						t.Fatalf("%s, n %d, type %d: quantile %v = %v, want %v", name, n, kind, p, got[i], want)
					}
				}
			}
		}
	}
}

func TestMedianAndMADAgainstSorting(t *testing.T) {
	r := rand.New(rand.NewPCG(4, 2))
	var s stats.Selector
	for _, n := range []int{1, 2, 3, 48, 49, 50, 1001, 30000} {
		for name, x := range awkward(r, n) {
			median, mad := s.MedianMADSigma(x)
			want := sortedMedian(x)
			if !close1(median, want, 0) {
				t.Fatalf("%s, n %d: median %v, want %v", name, n, median, want)
			}
			d := make([]float64, len(x))
			for i := range x {
				d[i] = math.Abs(x[i] - want)
			}
			wantMAD := 1.4826 * sortedMedian(d)
			if math.IsInf(want, 0) {
				wantMAD = math.NaN()
			}
			if !close1(mad, wantMAD, 0) {
				t.Fatalf("%s, n %d: MAD sigma %v, want %v", name, n, mad, wantMAD)
			}
			if alone := stats.MADSigma(x); !close1(alone, mad, 0) {
				t.Fatalf("%s: MADSigma %v, MedianMADSigma %v", name, alone, mad)
			}
		}
	}
}

func sortedMedian(x []float64) float64 {
	v := slices.DeleteFunc(slices.Clone(x), math.IsNaN)
	slices.Sort(v)
	n := len(v)
	switch {
	case n == 0:
		return math.NaN()
	case n%2 == 1:
		return v[n/2]
	}
	m := (v[n/2-1] + v[n/2]) / 2
	if math.IsInf(m, 0) { // of two huge values
		m = v[n/2-1]/2 + v[n/2]/2
	}
	return m
}

func TestDescribeAgreesWithItsParts(t *testing.T) {
	r := rand.New(rand.NewPCG(9, 2))
	probs := []float64{0.05, 0.5, 0.95}
	for _, n := range []int{0, 1, 2, 3, 4, 5, 100, 5001} {
		for name, x := range awkward(r, n) {
			d := stats.Describe(x, probs)
			m := stats.MomentsOf(x)
			for what, pair := range map[string][2]float64{
				"mean": {d.Mean, m.Mean}, "sd": {d.SD, m.SD()}, "min": {d.Min, m.Min}, "max": {d.Max, m.Max},
				"median": {d.Median, stats.Median(x)}, "MAD sigma": {d.MADSigma, stats.MADSigma(x)},
				"skewness": {d.Skewness, m.Skewness()}, "kurtosis": {d.Kurtosis, m.Kurtosis()},
			} {
				if !close1(pair[0], pair[1], 0) {
					t.Errorf("%s, n %d: %s %v, alone %v", name, n, what, pair[0], pair[1])
				}
			}
			q := stats.Quantiles(x, probs, stats.HyndmanFan8)
			for i := range q {
				if !close1(d.Quantiles[i], q[i], 0) {
					t.Errorf("%s, n %d: quantile %v, alone %v", name, n, d.Quantiles[i], q[i])
				}
			}
			if d.N+d.Missing != n || len(d.Quantiles) != len(probs) {
				t.Errorf("%s, n %d: %d + %d values, %d quantiles", name, n, d.N, d.Missing, len(d.Quantiles))
			}
		}
	}
	if d := stats.Describe([]float64{1, 2}, nil); len(d.Quantiles) != 0 || d.Median != 1.5 {
		t.Errorf("without probabilities: %+v", d)
	}
}

func TestQuantileLaws(t *testing.T) {
	r := rand.New(rand.NewPCG(6, 6))
	x := make([]float64, 333)
	for i := range x {
		x[i] = r.ExpFloat64()
	}
	probs := make([]float64, 101)
	for i := range probs {
		probs[i] = float64(i) / 100
	}
	q := stats.Quantiles(x, probs, stats.HyndmanFan8)
	if !slices.IsSorted(q) {
		t.Error("quantiles fall while p rises")
	}
	y := make([]float64, len(x))
	for i := range x {
		y[i] = -4*x[i] + 1
	}
	mirrored := stats.Quantiles(y, probs, stats.HyndmanFan8)
	for i := range probs {
		if got, want := mirrored[len(probs)-1-i], -4*q[i]+1; math.Abs(got-want) > 1e-12 {
			t.Errorf("p = %v: %v under x -> 1-4x, want %v", probs[i], got, want)
		}
	}
	if got, want := stats.MADSigma(y), 4*stats.MADSigma(x); !close1(got, want, 1e-13) {
		t.Errorf("MAD sigma %v, want %v", got, want)
	}
}

func TestQuantilePanics(t *testing.T) {
	x := []float64{1, 2, 3}
	for _, p := range []float64{-0.1, math.Nextafter(1, 2), math.NaN()} {
		mustPanic(t, "stats: ", func() { stats.Quantiles(x, []float64{p}, stats.HyndmanFan8) })
		mustPanic(t, "stats: ", func() { stats.Describe(nil, []float64{p}) })
	}
	mustPanic(t, "stats: ", func() { stats.Quantiles(x, []float64{0.5}, 3) })
}
