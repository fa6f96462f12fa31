package wafermap

import (
	"math"
	"math/rand/v2"
	"testing"
)

// surfaceWafer is a disc of dice with its geometry.
func surfaceWafer(radius float64) (g Geometry, x, y []int32) {
	x, y = disc(radius)
	return FindGeometry(x, y, Known{DieWidthMM: 1, DieHeightMM: 1}), x, y
}

func TestZernikePowersAreZernikeTerms(t *testing.T) {
	for term := range monomials {
		for _, p := range [][2]float64{{0, 0}, {0.3, -0.4}, {-0.9, 0.2}, {0.1, 0.95}, {1, 0}} {
			want := Zernike(term+1, math.Hypot(p[0], p[1]), math.Atan2(p[1], p[0]))
			if got := polynomial(&zernikePowers[term], p[0], p[1]); math.Abs(got-want) > 1e-12 {
				t.Errorf("term %d at %v: %g, want %g", term+1, p, got, want)
			}
		}
	}
}

func TestSlopesAreDerivatives(t *testing.T) {
	var m, mu, mv, a, b [monomials]float64
	const u, v, h = 0.37, -0.61, 1e-6
	powers(&m, u, v)
	slopes(&mu, &mv, &m)
	powers(&a, u+h, v)
	powers(&b, u-h, v)
	for k := range m {
		if want := (a[k] - b[k]) / (2 * h); math.Abs(mu[k]-want) > 1e-8 {
			t.Errorf("monomial %d by u: %g, want %g", k, mu[k], want)
		}
	}
	powers(&a, u, v+h)
	powers(&b, u, v-h)
	for k := range m {
		if want := (a[k] - b[k]) / (2 * h); math.Abs(mv[k]-want) > 1e-8 {
			t.Errorf("monomial %d by v: %g, want %g", k, mv[k], want)
		}
	}
}

// Without outliers and noise the robust fit is the least-squares fit, which the reference
// cases check.
func TestSurfaceOfAPolynomialIsThePolynomial(t *testing.T) {
	for _, radius := range []float64{15, 80} {
		g, x, y := surfaceWafer(radius)
		random := rand.New(rand.NewPCG(3, 4))
		value := make([]float64, len(x))
		b := NewSurfaceBasis(g, x, y)
		want := []float64{40, 1.5, -0.7, 0.9, 0, 0.2, 0, 0, 0.1, 0, 0.15}
		for i := range x {
			u, v := float64(x[i])-g.CentreX, float64(y[i])-g.CentreY
			for j, c := range want {
				value[i] += c * Zernike(j+1, math.Hypot(u, v)/b.radius, math.Atan2(v, u))
			}
			value[i] += 1e-3 * random.NormFloat64()
		}
		s := b.Fit(value, nil)
		if s.Why != "" || s.Order != 4 || s.Terms != 15 {
			t.Fatalf("radius %g: order %d, %q, cv %v", radius, s.Order, s.Why, s.CV)
		}
		for j, c := range s.Coefficients {
			w := 0.0
			if j < len(want) {
				w = want[j]
			}
			if math.Abs(c-w) > 5e-4 {
				t.Errorf("radius %g: term %d is %g, want %g", radius, j+1, c, w)
			}
		}
		if math.Abs(s.Noise-1e-3) > 2e-4 {
			t.Errorf("noise %g, want 0.001", s.Noise)
		}
		sum := 0.0
		for _, q := range s.Orthogonal[1:] {
			sum += q * q
		}
		if math.Abs(sum/s.Variance-1) > 0.03 || math.Abs(s.SmoothShare-1) > 1e-3 {
			t.Errorf("squares of orthogonal terms add up to %g, variance %g, smooth share %g", sum, s.Variance, s.SmoothShare)
		}
		at := s.At(3-g.CentreX, 5-g.CentreY)
		k := NewGrid(x, y).Index(3, 5)
		if math.Abs(at-value[k]) > 0.01 || math.Abs(value[k]-at-s.Residual[k]) > 1e-9 {
			t.Errorf("At(3, 5) = %g, value %g, residual %g", at, value[k], s.Residual[k])
		}
	}
}

// A fifth of the dice far off on one side, all in one half of the wafer, must not move the
// surface by more than the noise allows.
func TestSurfaceWithstandsOutliers(t *testing.T) {
	g, x, y := surfaceWafer(40)
	random := rand.New(rand.NewPCG(5, 6))
	b := NewSurfaceBasis(g, x, y)
	clean, dirty := make([]float64, len(x)), make([]float64, len(x))
	for i := range x {
		u, v := float64(x[i])/b.radius, float64(y[i])/b.radius
		clean[i] = 10 + 2*u + 1.5*(u*u+v*v) + 0.3*random.NormFloat64()
		dirty[i] = clean[i]
		if u > 0 && random.Float64() < 0.4 {
			dirty[i] -= 6 * random.ExpFloat64()
		}
	}
	a, d := b.Fit(clean, nil), b.Fit(dirty, nil)
	worst := 0.0
	for i := range x {
		mx, my := g.Position(x[i], y[i])
		worst = max(worst, math.Abs(a.At(mx, my)-d.At(mx, my)))
	}
	if worst > 0.35 || d.Outliers < len(x)/12 {
		t.Errorf("outliers moved the surface by up to %.2f (noise 0.3); %d of %d dice found to be outliers", worst, d.Outliers, len(x))
	}
}

// The intervals must hold the truth in 95 of 100 wafers, on a whole and a sampled
// wafer, with independent noise and with noise that neighbours share.
func TestSurfaceIntervalsCover(t *testing.T) {
	const wafers = 200
	for _, c := range []struct {
		name    string
		sampled bool
		patchy  bool
	}{{"independent", false, false}, {"sampled", true, false}, {"patches", false, true}} {
		g, x, y := surfaceWafer(18)
		if c.sampled {
			keepX, keepY := []int32{}, []int32{}
			for i := range x {
				if (x[i]*7+y[i]*13)%5 == 0 {
					keepX, keepY = append(keepX, x[i]), append(keepY, y[i])
				}
			}
			x, y = keepX, keepY
		}
		b := NewSurfaceBasis(g, x, y)
		grid := NewGrid(x, y)
		random := rand.New(rand.NewPCG(7, 8))
		held := map[string]int{}
		const bowl, tiltX, tiltY, roll = 1.2, 0.5, 0.3, -0.8
		for range wafers {
			value := make([]float64, len(x))
			for i := range x {
				value[i] = random.NormFloat64()
			}
			if c.patchy {
				shared := make([]float64, len(x))
				for i := range x {
					for _, s := range Queen.all() {
						if k := grid.at(int32(i), s); k >= 0 {
							shared[i] += value[k] / 3
						}
					}
				}
				value = shared
			}
			for i := range x {
				u, v := float64(x[i])/b.radius, float64(y[i])/b.radius
				value[i] += tiltX*u + tiltY*v + bowl*(u*u+v*v) + roll*edgeTerm(math.Hypot(u, v))
			}
			s := b.Fit(value, nil)
			for name, e := range map[string]struct {
				Estimate
				want float64
			}{
				"bowl": {s.Bowl, bowl}, "tilt": {s.Tilt, 2 * math.Hypot(tiltX, tiltY)}, "roll-off": {s.RollOff, roll},
				"direction": {s.TiltDirection, math.Atan2(tiltY, tiltX) * 180 / math.Pi},
			} {
				if e.Lower <= e.want && e.want <= e.Upper {
					held[name]++
				}
			}
		}
		for _, name := range []string{"bowl", "tilt", "roll-off", "direction"} {
			share := float64(held[name]) / wafers
			t.Logf("%s: %s covered %.1f %%", c.name, name, 100*share)
			lo := 0.9
			if c.patchy {
				lo = 0.85
			}
			if share < lo || share > 0.995 {
				t.Errorf("%s: the interval of %s holds the truth in %.1f %% of wafers", c.name, name, 100*share)
			}
		}
	}
}

func TestSurfaceTellsSmoothSiteAndDie(t *testing.T) {
	g, x, y := surfaceWafer(35)
	b := NewSurfaceBasis(g, x, y)
	random := rand.New(rand.NewPCG(9, 10))
	offset := []float64{0.8, -0.3, -0.9, 0.4}
	value, site := make([]float64, len(x)), make([]int32, len(x))
	for i := range x {
		u, v := float64(x[i])/b.radius, float64(y[i])/b.radius
		site[i] = (x[i]%4 + 4) % 4
		value[i] = 5 + 2*(u+v)/math.Sqrt2 + offset[site[i]] + random.NormFloat64()
	}
	s := b.Fit(value, site)
	// variances: 2^2/4 = 1 of a tilt of 2 u over a disc; sites as drawn; noise 1
	sites := (0.8*0.8 + 0.3*0.3 + 0.9*0.9 + 0.4*0.4) / 3
	total := 1 + sites + 1
	for _, c := range []struct {
		name      string
		got, want float64
	}{{"smooth", s.SmoothShare, 1 / total}, {"site", s.SiteShare, sites / total}, {"die", s.DieShare, 1 / total}} {
		if math.Abs(c.got-c.want) > 0.05 {
			t.Errorf("%s: share %.3f, want %.3f", c.name, c.got, c.want)
		}
	}
	if s.Order < 1 || s.Order > 2 {
		t.Errorf("order %d of a tilted plane", s.Order)
	}
}

func TestSurfaceGivesUpAndSaysWhy(t *testing.T) {
	g, x, y := surfaceWafer(10)
	b := NewSurfaceBasis(g, x, y)
	none := make([]float64, len(x))
	for i := range none {
		none[i] = math.NaN()
	}
	for name, value := range map[string][]float64{"missing": none, "constant": make([]float64, len(x))} {
		if s := b.Fit(value, nil); s.Why == "" || !math.IsNaN(s.Noise) || !math.IsNaN(s.At(0, 0)) {
			t.Errorf("%s: %+v", name, s)
		}
	}
	if s := NewSurfaceBasis(Geometry{Why: "none"}, x, y).Fit(none, nil); s.Why == "" {
		t.Error("a surface without a wafer")
	}
	var rowX, rowY []int32
	var value []float64
	for i := range int32(20) {
		rowX, rowY, value = append(rowX, i-10), append(rowY, 0), append(value, float64(i*i%7))
	}
	if s := NewSurfaceBasis(g, rowX, rowY).Fit(value, nil); s.Why == "" {
		t.Error("a surface through one row of dice")
	}
}

// Values of the noncentral chi-squared distribution function with two degrees of freedom:
// for a centre at 0 it is 1-exp(-x^2/2); the others by numerical integration of the plane
// normal density over the disc.
func TestBelowIsTheShareOfAPlaneNormalInADisc(t *testing.T) {
	for _, c := range [][2]float64{{1, 0}, {2, 1}, {3, 3}, {1, 4}, {7, 5}, {36, 35}} {
		x, l := c[0], c[1]
		sum := 0.0
		const n = 2000
		for i := range n { // slices of the disc across the mean
			u := -x + (float64(i)+0.5)*2*x/n
			half := math.Sqrt(x*x - u*u)
			sum += math.Exp(-(u-l)*(u-l)/2) / math.Sqrt(2*math.Pi) * math.Erf(half/math.Sqrt2) * 2 * x / n
		}
		if got := below(x, l); math.Abs(got-sum) > 2e-3 {
			t.Errorf("below(%g, %g) = %.5f, by integration %.5f", x, l, got, sum)
		}
	}
}

func BenchmarkSurfaceBasis(b *testing.B) {
	_, x, y, _ := benchWafer(b, 0)
	g := FindGeometry(x, y, Known{DieWidthMM: 0.45, DieHeightMM: 0.45})
	for b.Loop() {
		NewSurfaceBasis(g, x, y)
	}
}

func BenchmarkSurfaceFit(b *testing.B) {
	_, x, y, _ := benchWafer(b, 0)
	g := FindGeometry(x, y, Known{DieWidthMM: 0.45, DieHeightMM: 0.45})
	basis := NewSurfaceBasis(g, x, y)
	random := rand.New(rand.NewPCG(1, 2))
	value := make([]float64, len(x))
	for i := range x {
		u, v := float64(x[i])/167, float64(y[i])/167
		value[i] = 40 + u + u*u + v*v + 0.5*random.NormFloat64()
	}
	b.ReportAllocs()
	for b.Loop() {
		basis.Fit(value, nil)
	}
}
