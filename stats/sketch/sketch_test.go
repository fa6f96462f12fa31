package sketch_test

import (
	"bytes"
	"encoding/json"
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"kneepoint/stats"
	"kneepoint/stats/sketch"
)

var nan, inf = math.NaN(), math.Inf(1)

// samples are of the shapes that test data have, and of some that they do not.
func samples() map[string][]float64 {
	r := rand.New(rand.NewPCG(1, 1))
	draw := func(n int, f func() float64) []float64 {
		x := make([]float64, n)
		for i := range x {
			x[i] = f()
		}
		return x
	}
	return map[string][]float64{
		"volts":       draw(20000, func() float64 { return math.Round(100*(42+0.9*r.NormFloat64())) / 100 }),
		"nanoamperes": draw(20001, func() float64 { return 2e-9 * math.Exp(1.5*r.NormFloat64()) }),
		"about zero":  draw(5000, func() float64 { return math.Round(3 * r.NormFloat64()) }),
		"all over":    draw(5000, func() float64 { return math.Exp(200*r.NormFloat64()) * float64(1-2*r.IntN(2)) }),
		"constant":    draw(100, func() float64 { return -7.25 }),
		"one":         {3},
		"two":         {-1, 1e9},
		"clamped":     draw(1000, func() float64 { return math.Min(80, 78+2*r.NormFloat64()) }),
		"infinities":  append(draw(50, r.NormFloat64), inf, -inf, inf),
		"tiny":        {5e-324, -3e-310, 0, 1e-308, 3e-308},
	}
}

// Quantiles are within the bound of those of the readings, counts below a limit
// within theirs, at every resolution.
func TestWithinBound(t *testing.T) {
	probs := []float64{0, 0.0001, 0.001, 0.01, 0.05, 0.25, 0.333, 0.5, 0.75, 0.9, 0.99, 0.9999, 1}
	for name, x := range samples() {
		for _, bits := range []int{3, 7, 10, 14} {
			q := sketch.New(bits)
			q.AddAll(append([]float64{nan}, x...))
			if q.Count() != len(x) || q.Missing() != 1 {
				t.Fatalf("%s: %d readings, %d missing", name, q.Count(), q.Missing())
			}
			exact := stats.Quantiles(x, probs, stats.HyndmanFan8)
			for i, got := range q.Quantiles(probs) {
				want := exact[i]
				// The bound is on the order statistics on either side.
				ends := stats.Quantiles(x, []float64{math.Max(0, probs[i]-1/float64(len(x))), math.Min(1, probs[i]+1/float64(len(x)))}, stats.HyndmanFan7)
				size := math.Max(math.Abs(want), math.Max(math.Abs(ends[0]), math.Abs(ends[1])))
				if got != want && !(math.Abs(got-want) <= q.ErrorBound()*size*(1+1e-12)+0x1p-1022) {
					t.Errorf("%s, %d bits: quantile %v = %v, exact %v", name, bits, probs[i], got, want)
				}
			}
			for _, at := range append(exact, 0, 42, -7.25, inf, -inf) {
				below := 0
				for _, v := range x {
					if flush(v) < flush(at) {
						below++
					}
				}
				if least, most := q.Below(at); below < least || below > most {
					t.Errorf("%s, %d bits: %d to %d below %v, exact %d", name, bits, least, most, at, below)
				}
			}
			if q.Min() != flush(exact[0]) || q.Max() != flush(exact[len(exact)-1]) {
				t.Errorf("%s: extremes %v, %v", name, q.Min(), q.Max())
			}
		}
	}
	q := sketch.New(10)
	if !math.IsNaN(q.Quantile(0.5)) || !math.IsNaN(q.Min()) || !math.IsNaN(q.MADSigma()) {
		t.Error("an empty sketch has quantiles")
	}
}

// flush is what counts as zero.
func flush(x float64) float64 {
	if math.Abs(x) < 0x1p-1022 {
		return 0
	}
	return x
}

// The bound is attained nowhere but it is not idle: with few bits errors come near.
func TestBoundIsNotIdle(t *testing.T) {
	q := sketch.New(3)
	x := []float64{0.5, 1, math.Nextafter(1.125, 0), 9}
	q.AddAll(x)
	got := q.Quantile(0.4)
	if err := math.Abs(got-1) / q.ErrorBound(); !(err > 0.5 && err <= 1) {
		t.Errorf("%v, %v of the bound", got, err)
	}
}

func TestMADSigma(t *testing.T) {
	for name, x := range samples() {
		if name == "all over" || name == "infinities" || name == "tiny" {
			continue
		}
		q := sketch.New(12)
		q.AddAll(x)
		want := stats.MADSigma(x)
		if got := q.MADSigma(); math.Abs(got-want) > 1.4826*2*q.ErrorBound()*math.Max(math.Abs(q.Min()), math.Abs(stats.Median(x))+2*want) {
			t.Errorf("%s: %v, exact %v", name, got, want)
		}
	}
}

// Parts merged in any order give the bytes of the whole, also through storage; a
// finer part gives what a coarser one would have been.
func TestMergingIsExact(t *testing.T) {
	r := rand.New(rand.NewPCG(5, 5))
	for name, x := range samples() {
		whole := sketch.New(9)
		whole.AddAll(x)
		want, _ := whole.MarshalBinary()
		parts := make([]*sketch.Quantiles, 4)
		for i := range parts {
			parts[i] = sketch.New(9 + i%2*3)
		}
		for _, v := range x {
			parts[r.IntN(4)].Add(v)
		}
		all := sketch.New(11)
		for _, i := range r.Perm(4) {
			before, _ := parts[i].MarshalBinary()
			stored := sketch.New(5)
			if err := stored.UnmarshalBinary(before); err != nil {
				t.Fatalf("%s: %v", name, err)
			}
			all.Merge(stored)
			if after, _ := parts[i].MarshalBinary(); !bytes.Equal(before, after) {
				t.Fatal("merging modified a part")
			}
		}
		if got, _ := all.MarshalBinary(); !bytes.Equal(got, want) {
			t.Errorf("%s: merged parts differ from the whole", name)
		}
	}
}

func TestDamagedBytes(t *testing.T) {
	q := sketch.New(8)
	q.AddAll(samples()["volts"][:300])
	b, _ := q.MarshalBinary()
	keep := sketch.New(8)
	keep.Add(3)
	for i := range b {
		for _, bad := range [][]byte{b[:i], append(append(append([]byte{}, b[:i]...), b[i]^0x10), b[i+1:]...)} {
			if err := keep.UnmarshalBinary(bad); err != sketch.ErrStored {
				t.Fatalf("damage at %d: %v", i, err)
			}
		}
	}
	if keep.Count() != 1 || keep.Quantile(0.5) != 3 {
		t.Error("damaged bytes modified the sketch")
	}
}

// close compares to a relative tolerance.
func near(a, b, tolerance float64) bool {
	return a == b || a != a && b != b || math.Abs(a-b) <= tolerance*math.Max(math.Abs(a), math.Abs(b))
}

// Moments of parts merged agree with those of the whole, also for values with many
// equal leading digits, one by one and in trees, and through JSON.
func TestMomentsMerge(t *testing.T) {
	r := rand.New(rand.NewPCG(3, 1))
	for _, shift := range []float64{0, 42, 1e6} {
		x := make([]float64, 4000)
		for i := range x {
			x[i] = shift + r.ExpFloat64()
		}
		x[17], x[300] = nan, inf
		clean := append(append(append([]float64{}, x[:17]...), x[18:300]...), x[301:]...)
		want := stats.MomentsOf(clean)
		var one, tree sketch.Moments
		for _, v := range x {
			one.Add(v)
		}
		for i := 0; i < len(x); {
			n := min(len(x)-i, 1+r.IntN(200))
			tree = tree.Merge(sketch.MomentsOf(x[i : i+n]))
			i += n
		}
		raw, _ := json.Marshal(tree)
		var read sketch.Moments
		if err := json.Unmarshal(raw, &read); err != nil || read != tree {
			t.Errorf("through JSON: %+v, %v", read, err)
		}
		for _, m := range []sketch.Moments{one, tree, sketch.MomentsOf(x)} {
			if m.N != want.N || m.Missing != 1 || m.Infinite != 1 || m.Min != want.Min || m.Max != want.Max ||
				!near(m.Mean, want.Mean, 1e-13) || !near(m.SD(), want.SD(), 1e-9) ||
				!near(m.Skewness(), want.Skewness(), 1e-7) || !near(m.Kurtosis(), want.Kurtosis(), 1e-7) {
				t.Errorf("shift %v: %+v, sd %v, %v, %v; want %+v, %v, %v, %v", shift, m, m.SD(), m.Skewness(), m.Kurtosis(), want, want.SD(), want.Skewness(), want.Kurtosis())
			}
		}
	}
	var none sketch.Moments
	if !math.IsNaN(none.SD()) || none.Merge(none) != none {
		t.Errorf("%+v", none)
	}
	if m := sketch.MomentsOf([]float64{5, 5, 5, 5, 5}); m.SD() != 0 || !math.IsNaN(m.Skewness()) {
		t.Errorf("%+v", m)
	}
}

// NIST StRD univariate data, wafer by wafer of ten values: certified means and
// standard deviations (in the reference cases) to the digits that merging keeps.
func TestMomentsOfStRD(t *testing.T) {
	raw, err := os.ReadFile(filepath.Join("..", "..", "testdata", "reference", "01_descriptive.json"))
	if err != nil {
		t.Fatal(err)
	}
	var doc struct {
		Cases []struct {
			ID     string
			Inputs struct{ Y []float64 }

			Expected struct{ Mean, SD float64 }
		}
	}
	if err := json.Unmarshal(raw, &doc); err != nil {
		t.Fatal(err)
	}
	tried := 0
	for _, c := range doc.Cases {
		if !strings.Contains(c.ID, "strd") {
			continue
		}
		tried++
		var m sketch.Moments
		for i := 0; i < len(c.Inputs.Y); i += 10 {
			m = m.Merge(sketch.MomentsOf(c.Inputs.Y[i:min(i+10, len(c.Inputs.Y))]))
		}
		if !near(m.Mean, c.Expected.Mean, 1e-14) || !near(m.SD(), c.Expected.SD, 1e-8) {
			t.Errorf("%s: mean %v, sd %v, certified %v, %v", c.ID, m.Mean, m.SD(), c.Expected.Mean, c.Expected.SD)
		}
	}
	if tried == 0 {
		t.Error("no StRD case found")
	}
}

func TestSummary(t *testing.T) {
	x := samples()
	s := sketch.Of(x["volts"], 10)
	s.Merge(sketch.Of(x["clamped"], 10))
	if s.Moments.N != 21000 || s.Quantiles.Count() != 21000 || s.Quantiles.Max() != 80 {
		t.Errorf("%+v", s.Moments)
	}
	for _, f := range []func(){func() { sketch.New(2) }, func() { sketch.New(15) }, func() { s.Quantiles.Quantile(1.1) }} {
		func() {
			defer func() {
				if s, ok := recover().(string); !ok || !strings.HasPrefix(s, "stats/sketch: ") {
					t.Errorf("recovered %v", s)
				}
			}()
			f()
		}()
	}
}

func BenchmarkAddAll(b *testing.B) {
	r := rand.New(rand.NewPCG(1, 1))
	x := make([]float64, 2_200_000)
	for i := range x {
		x[i] = 42 + r.NormFloat64()
	}
	b.ResetTimer()
	for b.Loop() {
		sketch.New(10).AddAll(x)
	}
	s := sketch.New(10)
	s.AddAll(x)
	raw, _ := s.MarshalBinary()
	b.ReportMetric(float64(len(raw)), "bytes")
}
