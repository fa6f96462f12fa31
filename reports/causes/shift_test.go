package causes

import (
	"math"
	"math/rand/v2"
	"testing"

	"gonum.org/v1/gonum/mat"
	"gonum.org/v1/gonum/stat/distmv"
)

// gonum's multivariate t is the reference for differences of log densities.
func TestDensityIsMultivariateT(t *testing.T) {
	f := &frame{tests: []int{0, 1, 2}, correlation: mat.NewDense(3, 3, []float64{1, 0.3, -0.2, 0.3, 1, 0.5, -0.2, 0.5, 1})}
	sigma, extra, centre := []float64{0.1, 2, 0.5}, []float64{0.05, 0, 1}, []float64{0.2, -1, 3}
	d := f.newDensity(sigma, extra, centre)
	cov := mat.NewSymDense(3, nil)
	for i := range 3 {
		for j := range 3 {
			v := f.correlation.At(i, j) * sigma[i] * sigma[j]
			if i == j {
				v += extra[i] * extra[i]
			}
			cov.SetSym(i, j, v)
		}
	}
	want, ok := distmv.NewStudentsT(centre, cov, tail, nil)
	if !ok {
		t.Fatal("no reference")
	}
	at := func(y []float64) float64 { return d.at(y) - d.at(centre) }
	r := rand.New(rand.NewPCG(1, 2))
	for range 50 {
		y := []float64{r.NormFloat64(), 3 * r.NormFloat64(), 2 + r.NormFloat64()}
		if got, want := at(y), want.LogProb(y)-want.LogProb(centre); math.Abs(got-want) > 1e-9 {
			t.Fatalf("at %v: %g, gonum %g", y, got, want)
		}
	}
	// a missing test is as good as integrated out when it is independent
	lone := &frame{tests: f.tests, correlation: mat.NewDense(3, 3, []float64{1, 0, 0, 0, 1, 0, 0, 0, 1})}
	if a, b := lone.newDensity(sigma, nil, nil).at([]float64{0.1, math.NaN(), 0.2}), lone.newDensity(sigma, nil, nil).at([]float64{0.1, math.NaN(), 0.4}); a <= b {
		t.Error("the tests that are there must still count")
	}
}

func TestCompressKeepsOrder(t *testing.T) {
	last := math.Inf(-1)
	for _, x := range []float64{-1e6, -30, -1, 0, 0.5, 3, 1e3, 1e7} {
		c := compress(x)
		if c <= last || math.Abs(c) > math.Abs(x) || math.Signbit(c) != math.Signbit(x) && x != 0 {
			t.Errorf("compress(%g) = %g after %g", x, c, last)
		}
		last = c
	}
	if c := compress(0.1); math.Abs(c-0.1) > 1e-3 {
		t.Errorf("small ones stay: %g", c)
	}
}

// Fit must find weights that make told probabilities true: rows are drawn so that
// view 0 is an honest log likelihood ratio and view 1 is noise.
func TestFitFindsWhatCounts(t *testing.T) {
	r := rand.New(rand.NewPCG(3, 4))
	var lots []Known
	for range 3000 {
		var k Known
		n := r.IntN(4)
		for i := range 4 {
			row := knownRow{right: i == n}
			if i != 3 {
				row.causes = []int{i} // the last is that nothing is wrong
			}
			mean := -0.5
			if i == n {
				mean = 0.5
			}
			z := r.NormFloat64() + mean // ratio of N(0.5,1) to N(-0.5,1) is z
			row.views[lotView] = z
			row.views[mapView] = 2 * r.NormFloat64()
			k.rows = append(k.rows, row)
		}
		lots = append(lots, k)
	}
	w := Fit(lots)
	if math.Abs(w.View[lotView]-1) > 0.1 {
		t.Errorf("an honest view must count as it is: weight %g", w.View[lotView])
	}
	if w.View[mapView] > 0.12 {
		t.Errorf("noise counts %g", w.View[mapView])
	}
	if math.Abs(w.Nothing) > 0.2 {
		t.Errorf("nothing is neither likelier nor less likely: %g", w.Nothing)
	}
	// the gradient against differences
	start := UsualWeights()
	x := start.vector()
	grad := make([]float64, len(x))
	loss(lots[:50], x, x, grad)
	for i := range x {
		const h = 1e-5
		up, down := append([]float64(nil), x...), append([]float64(nil), x...)
		up[i] += h
		down[i] -= h
		if want := (loss(lots[:50], x, up, nil) - loss(lots[:50], x, down, nil)) / (2 * h); math.Abs(grad[i]-want) > 1e-5*(1+math.Abs(want)) {
			t.Errorf("gradient %d is %g, differences say %g", i, grad[i], want)
		}
	}
}
