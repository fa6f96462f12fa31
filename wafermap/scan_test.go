package wafermap

import (
	"math"
	"math/rand/v2"
	"testing"
)

// The log-likelihood ratio of a window against the sum of the logarithms of the binomial
// likelihoods, dice by dice.
func TestScanRatioIsTheLikelihoodRatio(t *testing.T) {
	x, y := disc(9)
	fail := make([]bool, len(x))
	for i := range x {
		fail[i] = x[i] > 2 && x[i] < 6 && y[i] > -2 && y[i] < 2 || (x[i]*5+y[i]*3)%17 == 0
	}
	g := NewGrid(x, y)
	geometry := FindGeometry(x, y, Known{DieWidthMM: 2, DieHeightMM: 2})
	s := g.Scan(geometry, fail, ScanOptions{})
	if len(s.Clusters) == 0 {
		t.Fatalf("no cluster: %+v", s)
	}
	c := s.Clusters[0]
	var in, out, failsIn, failsOut float64
	angle := c.Angle * math.Pi / 180
	for i := range x {
		mx, my := geometry.Position(x[i], y[i])
		dx, dy := mx-c.CentreX, my-c.CentreY
		a, b := (dx*math.Cos(angle)+dy*math.Sin(angle))/c.SemiMajor, (dy*math.Cos(angle)-dx*math.Sin(angle))/c.SemiMinor
		if a*a+b*b <= 1+1e-9 {
			in++
			if fail[i] {
				failsIn++
			}
		} else {
			out++
			if fail[i] {
				failsOut++
			}
		}
	}
	if int(in) != c.Dice || int(failsIn) != c.Fails || len(c.Rows) != c.Fails {
		t.Fatalf("the ellipse holds %g dice and %g fails, the cluster says %d and %d (%d rows)", in, failsIn, c.Dice, c.Fails, len(c.Rows))
	}
	term := func(k, n float64) float64 {
		if k == 0 {
			return 0
		}
		return k * math.Log(k/n)
	}
	want := term(failsIn, in) + term(in-failsIn, in) + term(failsOut, out) + term(out-failsOut, out)
	want -= term(failsIn+failsOut, in+out) + term(in+out-failsIn-failsOut, in+out)
	if math.Abs(c.LogRatio-want) > 1e-9*want {
		t.Errorf("log-likelihood ratio %g, want %g", c.LogRatio, want)
	}
	if math.Abs(c.Risk-failsIn/in/(failsOut/out)) > 1e-12 {
		t.Errorf("risk %g", c.Risk)
	}
}

// On random wafers the p-value of the strongest window must be evenly spread.
func TestScanIsFair(t *testing.T) {
	const wafers = 100
	x, y := disc(11)
	g := NewGrid(x, y)
	geometry := FindGeometry(x, y, Known{})
	below := map[float64]int{}
	for k := range wafers {
		rate := []float64{0.01, 0.05, 0.3}[k%3]
		s := g.Scan(geometry, scatter(len(x), rate, uint64(k)+77), ScanOptions{Simulations: 99})
		for _, p := range []float64{0.05, 0.2, 0.5} {
			if s.PValue <= p {
				below[p]++
			}
		}
		if (s.PValue <= 0.05) != (len(s.Clusters) > 0) {
			t.Errorf("p %g and %d clusters", s.PValue, len(s.Clusters))
		}
	}
	for _, p := range []float64{0.05, 0.2, 0.5} {
		got, sigma := float64(below[p])/wafers, math.Sqrt(p*(1-p)/wafers)
		t.Logf("p <= %g on %.3f of random wafers", p, got)
		if math.Abs(got-p) > 3.5*sigma {
			t.Errorf("p <= %g on %.3f of random wafers", p, got)
		}
	}
}

// Two blobs, one of them long, on a wafer of many dice.
func TestScanFindsBlobs(t *testing.T) {
	x, y := disc(60)
	fail := scatter(len(x), 0.04, 5)
	random := rand.New(rand.NewPCG(1, 9))
	for i := range x {
		u, v := float64(x[i]), float64(y[i])
		round := math.Hypot(u-20, v-25) < 8
		long := math.Hypot((u+v+40)/math.Sqrt2/18, (v-u)/math.Sqrt2/6) < 1
		if (round || long) && random.Float64() < 0.25 {
			fail[i] = true
		}
	}
	g := NewGrid(x, y)
	s := g.Scan(FindGeometry(x, y, Known{DieWidthMM: 1, DieHeightMM: 1}), fail, ScanOptions{})
	if len(s.Clusters) < 2 || len(s.Clusters) > 3 { // the ends of the long blob may make one more
		t.Fatalf("%d clusters: %+v", len(s.Clusters), s)
	}
	a, b := s.Clusters[0], s.Clusters[1]
	if math.Hypot(a.CentreX+20, a.CentreY+20) > 6 || a.SemiMajor < 1.5*a.SemiMinor || math.Abs(a.Angle-45) > 31 {
		t.Errorf("the long blob at (-20, -20) along 45 degrees: %+v", a)
	}
	if math.Hypot(b.CentreX-20, b.CentreY-25) > 5 {
		t.Errorf("the round blob at (20, 25): %+v", b)
	}
	if a.PValue != 1.0/200 || !(a.PTail < 1e-8) || s.Method != "Monte Carlo, 199 random wafers, stopped early" {
		t.Errorf("p %g, tail %g, %s", a.PValue, a.PTail, s.Method)
	}
}

func TestScanGivesUpAndSaysWhy(t *testing.T) {
	x, y := disc(5)
	g := NewGrid(x, y)
	all := make([]bool, len(x))
	if s := g.Scan(Geometry{}, all, ScanOptions{}); s.Why == "" || len(s.Clusters) > 0 || !math.IsNaN(s.PValue) {
		t.Errorf("no fails: %+v", s)
	}
	for i := range all {
		all[i] = true
	}
	if s := g.Scan(Geometry{}, all, ScanOptions{}); s.Why == "" {
		t.Errorf("all fail: %+v", s)
	}
	all[3] = false
	if s := g.Scan(Geometry{}, all, ScanOptions{}); s.Why != "" || s.PValue < 0.05 {
		t.Errorf("all but one fail: %+v", s)
	}
	if s := NewGrid(nil, nil).Scan(Geometry{}, nil, ScanOptions{}); s.Why == "" {
		t.Errorf("no dice: %+v", s)
	}
}

func BenchmarkScanOrdinary(b *testing.B) {
	g, x, y, fail := benchWafer(b, 0.05)
	geometry := FindGeometry(x, y, Known{})
	var s Scan
	for b.Loop() {
		s = g.Scan(geometry, fail, ScanOptions{})
	}
	b.Log(s.Method, s.Windows)
}

func BenchmarkScanSignificant(b *testing.B) {
	in := hurt(b)
	var s Scan
	for b.Loop() {
		s = in.Grid.Scan(in.Geometry, in.Fail, ScanOptions{})
	}
	b.Log(s.Method, s.Windows)
}
