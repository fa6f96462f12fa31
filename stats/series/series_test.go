package series_test

import (
	"math"
	"math/rand/v2"
	"os"
	"slices"
	"strings"
	"testing"

	"kneepoint/stats"
	"kneepoint/stats/series"
)

var nan = math.NaN()

func draws(short int) int {
	if os.Getenv("KNEEPOINT_LONG") != "" {
		return 2000
	}
	return short
}

// plain is optimal partitioning without dropping candidates, costs from their
// definition.
func plain(y []float64, min int, penalty float64) float64 {
	cost := func(a, b int) float64 {
		m := stats.Mean(y[a:b])
		s := 0.0
		for _, v := range y[a:b] {
			s += (v - m) * (v - m)
		}
		return s
	}
	best := make([]float64, len(y)+1)
	best[0] = -penalty
	for t := 1; t <= len(y); t++ {
		best[t] = math.Inf(1)
		for s := 0; s+min <= t; s++ {
			best[t] = math.Min(best[t], best[s]+cost(s, t)+penalty)
		}
	}
	return best[len(y)]
}

// Dropping candidates loses no optimum, at any shortest stretch and penalty.
func TestOptimalPartitionIsOptimal(t *testing.T) {
	r := rand.New(rand.NewPCG(1, 1))
	for range 300 {
		y := make([]float64, 5+r.IntN(60))
		level := 1e6
		for i := range y {
			if r.Float64() < 0.1 {
				level += 3 * r.NormFloat64()
			}
			y[i] = level + math.Round(4*r.NormFloat64())/4
		}
		min := 1 + r.IntN(5)
		penalty := 0.5 + 20*r.Float64()
		at, cost := series.OptimalPartition(y, min, penalty)
		if want := plain(y, min, penalty); len(y) >= 2*min && math.Abs(cost-want) > 1e-6*math.Max(1, want) {
			t.Fatalf("%d values, stretches of %d: cost %v, least %v", len(y), min, cost, want)
		}
		// The places give that cost, and stretches are long enough.
		sum := penalty * float64(len(at))
		from := 0
		for _, s := range series.Segments(y, at) {
			if s.N < min && len(at) > 0 || s.From != from {
				t.Fatalf("stretch %+v of %v", s, at)
			}
			from = s.To
			for _, v := range y[s.From:s.To] {
				sum += (v - s.Mean) * (v - s.Mean)
			}
		}
		if math.Abs(sum-cost) > 1e-6*math.Max(1, cost) {
			t.Fatalf("places %v cost %v, not %v", at, sum, cost)
		}
	}
}

// A short bump between equal levels hides from binary segmentation but not from
// the optimum; places count missing values.
func TestBump(t *testing.T) {
	r := rand.New(rand.NewPCG(3, 3))
	y := make([]float64, 90)
	for i := range y {
		y[i] = 0.5 * r.NormFloat64()
		if i >= 40 && i < 45 {
			y[i] += 4
		}
	}
	y[2], y[60] = nan, nan
	s := series.Changes(y, 3)
	if !slices.Equal(s.At, []int{40, 45}) || len(s.Segments) != 3 || s.Segments[0].N != 39 || math.Abs(s.Segments[1].Mean-4) > 0.8 {
		t.Errorf("%+v", s)
	}
	if math.Abs(s.Sigma-0.5) > 0.25 {
		t.Errorf("sigma %v, true 0.5", s.Sigma)
	}
	for _, c := range []struct {
		y   []float64
		why string
	}{
		{nil, "0 values; a change needs 3 on either side"},
		{[]float64{1, 2, 9, 9, nan}, "4 values; a change needs 3 on either side"},
		{slices.Repeat([]float64{5}, 20), "values do not differ"},
	} {
		if s := series.Changes(c.y, 3); s.Why != c.why || len(s.At) != 0 || len(s.Segments) != 1 {
			t.Errorf("%v: %+v", c.y, s)
		}
	}
	// A step of values that are otherwise equal.
	if s := series.Changes(append(make([]float64, 10), slices.Repeat([]float64{1}, 12)...), 3); !slices.Equal(s.At, []int{10}) {
		t.Errorf("%+v", s)
	}
}

// Series without a change are given one rarely: what the comment of Penalty says.
func TestFalseChanges(t *testing.T) {
	n := draws(600)
	for _, length := range []int{20, 50, 200} {
		r := rand.New(rand.NewPCG(7, uint64(length)))
		found := 0
		y := make([]float64, length)
		for range n {
			for i := range y {
				y[i] = r.NormFloat64()
			}
			if len(series.Changes(y, 3).At) > 0 {
				found++
			}
		}
		rate := float64(found) / float64(n)
		t.Logf("%d values: a change found in %.4f", length, rate)
		if rate > 0.08 {
			t.Errorf("%d values: a change found in %.4f", length, rate)
		}
	}
}

// P of a split is uniform without a change: below 0.05 in 5 % of series.
func TestSplitP(t *testing.T) {
	n := draws(400)
	r := rand.New(rand.NewPCG(9, 9))
	below, belowRanks := 0, 0
	y := make([]float64, 25)
	for range n {
		for i := range y {
			y[i] = math.Exp(r.NormFloat64())
		}
		if series.SplitTest(y, 2, 199).P <= 0.05 {
			below++
		}
		if series.Pettitt(y).P <= 0.05 {
			belowRanks++
		}
	}
	rate := float64(below) / float64(n)
	t.Logf("P at or below 0.05: %.4f by permutation, %.4f by Pettitt", rate, float64(belowRanks)/float64(n))
	if math.Abs(rate-0.05) > 4*math.Sqrt(0.05*0.95/float64(n)) {
		t.Errorf("P at or below 0.05 in %.4f of series without change", rate)
	}
	if belowRanks > below+n/100 {
		t.Errorf("Pettitt's P at or below 0.05 in %d of %d series", belowRanks, n)
	}
	s := series.SplitTest([]float64{1, 2, nan, 1, 2, 8, 9, 8, 9}, 2, 999)
	if s.At != 5 || s.P > 0.05 || s.MeanAfter != 8.5 {
		t.Errorf("%+v", s)
	}
	if s := series.SingleSplit([]float64{1, 2, 3}, 2); s.At != -1 || s.Why == "" {
		t.Errorf("%+v", s)
	}
	// By hand: ranks 1 2 3 4, U = -3, -4, -3.
	if p := series.Pettitt([]float64{1, 2, 3, 4}); p.K != 4 || p.At != 2 {
		t.Errorf("%+v", p)
	}
	if p := series.Pettitt([]float64{7}); p.At != -1 || !math.IsNaN(p.P) {
		t.Errorf("%+v", p)
	}
}

// Wampler1 and Wampler2 of the NIST StRD (linear regression, higher difficulty):
// y = sum x^k and y = sum (x/10)^k, k = 0..5, at x = 0..20, certified coefficients 1
// and 0.1^k (from memory). And the same far from zero, where float64 normal
// equations give nothing.
func TestPolynomialExact(t *testing.T) {
	for _, unit := range []float64{1, 0.1} {
		var x, y []float64
		for i := range 21 {
			v := 0.0
			for k := 5; k >= 0; k-- {
				v = v*float64(i)*unit + 1
			}
			x, y = append(x, float64(i)), append(y, v)
		}
		p := series.FitPolynomial(x, y, 5)
		for k, c := range p.Coefficients {
			if want := math.Pow(unit, float64(k)); math.Abs(c/want-1) > 1e-9 {
				t.Errorf("unit %v: B%d = %.15g, certified %g", unit, k, c, want)
			}
		}
		if p.ResidualSD > 1e-9 || p.RSquared < 1-1e-14 {
			t.Errorf("%+v", p)
		}
	}
	var x, y []float64
	for i := range 50 {
		u := float64(i)
		x = append(x, 1e8+u)
		y = append(y, 3+2*u+0.5*u*u)
	}
	// (x-c)^2/2 + 2(x-c) + 3, multiplied out: exact in float64 for the leading ones.
	p := series.FitPolynomial(x, y, 2)
	if p.Coefficients[2] != 0.5 || p.Coefficients[1] != 2-1e8 || p.Coefficients[0] != 3-2e8+0.5e16 {
		t.Errorf("%v", p.Coefficients)
	}
	if got := p.At(1e8 + 7); math.Abs(got-(3+14+24.5)) > 4 { // cancellation in evaluating
		t.Errorf("at 7: %v", got)
	}
	if p := series.FitPolynomial([]float64{1, 1, 2, nan}, []float64{1, 2, 3, 4}, 2); p.N != 3 || p.Why == "" || !math.IsNaN(p.Coefficients[0]) {
		t.Errorf("%+v", p)
	}
	if p := series.FitPolynomial([]float64{1, 2, 3}, []float64{1, 4, 9}, 2); math.Abs(p.Coefficients[2]-1) > 1e-15 || !math.IsNaN(p.ResidualSD) {
		t.Errorf("%+v", p)
	}
}

func TestLineEdges(t *testing.T) {
	for _, l := range []series.Line{
		series.FitLine(nil, nil), series.FitLine([]float64{1, 2, nan}, []float64{1, 2, 3}), series.FitLine([]float64{2, 2, 2}, []float64{1, 2, 3}),
	} {
		if l.Why == "" || !math.IsNaN(l.Slope) || !math.IsNaN(l.SlopeInterval(0.95).Lower) || !math.IsNaN(l.Reaches(3, true, 0.95).At.Estimate) {
			t.Errorf("%+v", l)
		}
	}
	// Points on a line: no residual, exact crossing.
	l := series.FitLine([]float64{0, 1, 2, 3}, []float64{1, 3, 5, 7})
	c := l.Reaches(11, true, 0.95)
	if c.At.Estimate != 5 || math.Abs(c.At.Lower-5) > 1e-9 || math.Abs(c.At.Upper-5) > 1e-9 || c.Past {
		t.Errorf("%+v", c)
	}
	if c := l.Reaches(6, true, 0.95); !c.Past || c.At.Estimate != 2.5 || c.At.Why != "beyond the limit already" {
		t.Errorf("%+v", c)
	}
	if c := l.Reaches(-5, false, 0.95); !math.IsInf(c.At.Estimate, 1) || c.At.Why != "drifts away from the limit" {
		t.Errorf("%+v", c)
	}
}

// The interval of the time to a limit holds the true time in 95 % of series with a
// drift, plain and faint; a faint one gives an open end.
func TestReachesCovers(t *testing.T) {
	n := draws(600)
	for _, c := range []struct {
		slope, sd float64
		rising    bool
	}{{0.1, 0.5, true}, {-0.1, 0.5, false}, {0.02, 0.5, true}} {
		r := rand.New(rand.NewPCG(5, math.Float64bits(c.slope)))
		held, open := 0, 0
		limit := 80 + c.slope*100 // met at x = 100
		x, y := make([]float64, 30), make([]float64, 30)
		for range n {
			for i := range x {
				x[i], y[i] = float64(i), 80+c.slope*float64(i)+c.sd*r.NormFloat64()
			}
			k := series.FitLine(x, y).Reaches(limit, c.rising, 0.95)
			if k.At.Lower <= 100 && 100 <= k.At.Upper {
				held++
			}
			if math.IsInf(k.At.Upper, 1) {
				open++
			}
		}
		rate := float64(held) / float64(n)
		t.Logf("slope %v: covers %.4f, open %.3f", c.slope, rate, float64(open)/float64(n))
		slack := 0.0
		if n < 2000 {
			slack = 3 * math.Sqrt(0.05*0.95/float64(n))
		}
		if rate < 0.93-slack || rate > 0.97+slack {
			t.Errorf("slope %v: covers %.4f", c.slope, rate)
		}
	}
}

func TestDependenceEdges(t *testing.T) {
	// By hand: mean 2, squares 2, products (-1)(0) + 0(1) = 0 and (-1)(1) = -1.
	r := series.Autocorrelation([]float64{1, 2, 3}, 4)
	if r[0] != 0 || r[1] != -0.5 || !math.IsNaN(r[2]) || !math.IsNaN(r[3]) {
		t.Errorf("%v", r)
	}
	if r := series.Autocorrelation([]float64{2, 2, 2}, 1); !math.IsNaN(r[0]) {
		t.Errorf("%v", r)
	}
	if got, want := series.Autocorrelation([]float64{1, nan, 3, 5, 2}, 1)[0], stats.Lag1([]float64{1, nan, 3, 5, 2}); math.Abs(got-want) > 1e-14 {
		t.Errorf("lag 1 with a missing value: %v, package stats %v", got, want)
	}
	// By hand: the median is 2; - - + + - +.
	u := series.Runs([]float64{1, 1, nan, 5, 5, 1, 3})
	if u.Runs != 4 || u.Above != 3 || u.Below != 3 || u.Z != 0 {
		t.Errorf("%+v", u)
	}
	if u := series.Runs([]float64{1, 1}); !math.IsNaN(u.Z) {
		t.Errorf("%+v", u)
	}
	d := series.EWMADrift([]float64{1, 2, 1, 2, 9, 9}, 1, 0.2, 3)
	if d.Why == "" || d.First != -1 {
		t.Errorf("%+v", d)
	}
}

func TestPanics(t *testing.T) {
	for _, f := range []func(){
		func() { series.FitLine([]float64{1}, nil) },
		func() { series.FitPolynomial([]float64{1}, nil, 1) },
		func() { series.FitPolynomial(nil, nil, -1) },
		func() { series.Changes(nil, 0) },
		func() { series.Autocorrelation(nil, -1) },
		func() { series.EWMADrift([]float64{1}, 2, 0.2, 3) },
		func() { series.FitLine([]float64{1, 2, 3}, []float64{1, 2, 4}).Mean(1, 1) },
	} {
		func() {
			defer func() {
				if s, ok := recover().(string); !ok || !strings.HasPrefix(s, "stats/series: ") {
					t.Errorf("recovered %v", s)
				}
			}()
			f()
		}()
	}
}
