package wafermap

import (
	"math"
	"math/rand/v2"
	"slices"

	"gonum.org/v1/gonum/mat"
)

// circle is a circle over the die grid: (x-cx)*w, (y-cy)*h from its centre, radius
// rho, where w is 1 or the die width and h the die height in the same unit.
type circle struct {
	cx, cy, rho, w, h float64

	sigma   float64   // standard error of the centre along its worse axis, in the unit
	rhoSE   float64   // of the radius
	ratioSE float64   // of log h/w, when it was fitted
	weights []float64 // of the points, 0 for those left out
}

// distance is that of a point in die coordinates from the centre.
func (c circle) distance(x, y float64) float64 {
	return math.Hypot((x-c.cx)*c.w, (y-c.cy)*c.h)
}

// fitter fits a circle to points near it, some of which may lie well inside or
// outside. What is known beforehand comes in as a pull towards it, which
// matters where the points say little, as on a short arc.
type fitter struct {
	x, y []float64 // points, die coordinates
	w, h float64   // pitch; h 0: to be fitted, with w as the unit
	out  []bool    // points that take no part; nil for none

	grain          float64 // how far off an ordinary point may lie, in the unit
	rho0, rhoSigma float64 // radius expected, and how surely; rhoSigma 0: nothing expected
	rhoMax         float64 // the radius cannot be larger; +Inf when not known
}

// fit finds the circle: a start that agrees with most points among circles
// through a few of them (Fischler and Bolles 1981, scored as Torr and Zisserman 2000),
// then weighted least squares on the distances with Tukey's biweight, which
// gives points far off no say. ok is false when there is no sensible circle.
func (f *fitter) fit() (c circle, ok bool) {
	best := math.Inf(1)
	f.tuples(func(t []int) {
		if q, sound := f.through(t); sound {
			if s := f.score(q); s < best {
				best, c, ok = s, q, true
			}
		}
	})
	if !ok {
		return c, false
	}
	return f.refine(c)
}

// tuples visits sets of points to start from: all of them where they are few, else
// a fixed random choice.
func (f *fitter) tuples(try func([]int)) {
	const most = 300
	var use []int
	for i := range f.x {
		if f.out == nil || !f.out[i] {
			use = append(use, i)
		}
	}
	n, k := len(use), 3
	if f.h == 0 {
		k = 4
	}
	if n < k {
		return
	}
	picked := make([]int, k)
	visit := func(t []int) {
		for i := range t {
			picked[i] = use[t[i]]
		}
		try(picked)
	}
	sets := 1.0
	for i := 0; i < k; i++ {
		sets *= float64(n-i) / float64(i+1)
	}
	t := make([]int, k)
	if sets <= most {
		for i := range t {
			t[i] = i
		}
		for {
			visit(t)
			i := k - 1
			for ; i >= 0 && t[i] == n-k+i; i-- {
			}
			if i < 0 {
				return
			}
			t[i]++
			for i++; i < k; i++ {
				t[i] = t[i-1] + 1
			}
		}
	}
	random := rand.New(rand.NewPCG(0x6f75746c, uint64(n)))
	for range most {
		for i := range t {
			for {
				t[i] = random.IntN(n)
				if !slices.Contains(t[:i], t[i]) {
					break
				}
			}
		}
		visit(t)
	}
}

// through returns the circle through three points, or through four with the pitch
// ratio free: a u + b v + c + d v^2 = u^2 is linear in its coefficients.
func (f *fitter) through(t []int) (circle, bool) {
	k := len(t)
	a, b := mat.NewDense(k, k, nil), mat.NewVecDense(k, nil)
	x0, y0 := f.x[t[0]], f.y[t[0]] // keeps the numbers small
	for i, p := range t {
		u, v := (f.x[p]-x0)*f.w, f.y[p]-y0
		a.Set(i, 0, u)
		a.Set(i, 1, v)
		a.Set(i, 2, 1)
		b.SetVec(i, u*u)
		if f.h > 0 {
			b.SetVec(i, u*u+v*v*f.h*f.h)
		} else {
			a.Set(i, 3, -v*v)
		}
	}
	var s mat.VecDense
	if s.SolveVec(a, b) != nil {
		return circle{}, false
	}
	hh := f.h * f.h
	if f.h == 0 {
		hh = s.AtVec(3)
	}
	if !(hh > 0) {
		return circle{}, false
	}
	c := circle{w: f.w, h: math.Sqrt(hh)}
	u, v := s.AtVec(0)/2, s.AtVec(1)/(2*hh)
	c.cx, c.cy = x0+u/f.w, y0+v
	c.rho = math.Sqrt(s.AtVec(2) + u*u + v*v*hh)
	return c, f.sound(c)
}

// sound reports whether a circle can be a wafer's: of a size that the points do not
// only touch a sliver of.
func (f *fitter) sound(c circle) bool {
	if !(c.rho > 0) || c.rho > 1.05*f.rhoMax+f.grain {
		return false
	}
	reach := 0.0
	for i := range f.x {
		reach = max(reach, math.Hypot((f.x[i]-f.x[0])*c.w, (f.y[i]-f.y[0])*c.h))
	}
	r := c.h / c.w
	return c.rho < 4*reach && c.rho > reach/8 && r > 1.0/30 && r < 30
}

// score is small where many points lie close to the circle.
func (f *fitter) score(c circle) float64 {
	s := f.pulls(c)
	scale := c.w // the ratio decides what a grain is along y: compare in units of the radius
	if f.h == 0 {
		scale = math.Sqrt(c.w * c.h)
	}
	for i := range f.x {
		if f.out != nil && f.out[i] {
			continue
		}
		r := (c.distance(f.x[i], f.y[i]) - c.rho) / (f.grain * scale / f.w)
		s += min(r*r, 1)
	}
	return s
}

// pulls is what a circle costs for not being as expected.
func (f *fitter) pulls(c circle) float64 {
	s := 0.0
	if f.rhoSigma > 0 {
		s += sq((c.rho - f.rho0) / f.rhoSigma)
	}
	if c.rho > f.rhoMax {
		s += sq((c.rho - f.rhoMax) / (f.grain / 4))
	}
	if f.h == 0 {
		s += sq(math.Log(c.h/c.w) / ratioSigma)
	}
	return s
}

func sq(v float64) float64 { return v * v }

// degrees is how much of the way round the points with a say cover: 360 less the
// largest gap, where the gap is more than the flat sides of a small full map make.
func (f *fitter) degrees(c circle) float64 {
	var at []float64
	for i := range f.x {
		if c.weights[i] > 0 {
			at = append(at, math.Atan2((f.y[i]-c.cy)*c.h, (f.x[i]-c.cx)*c.w))
		}
	}
	if len(at) == 0 {
		return 0
	}
	slices.Sort(at)
	gap := at[0] + 2*math.Pi - at[len(at)-1]
	for i := 1; i < len(at); i++ {
		gap = max(gap, at[i]-at[i-1])
	}
	if gap < math.Pi/2 {
		return 360
	}
	return 360 - gap*180/math.Pi
}

// cutEnds marks the points next to a side of the hull that runs well inside the
// circle: there the map was cut, and the cut's ends are corners of the hull without
// having anything to do with the circle. It returns nil when there are none, or
// too few points would be left.
func (f *fitter) cutEnds(c circle, well float64) []bool {
	n := len(f.x)
	out := make([]bool, n)
	cut := 0
	for i := range f.x {
		j := (i + 1) % n
		if c.distance((f.x[i]+f.x[j])/2, (f.y[i]+f.y[j])/2) < c.rho-well {
			for _, k := range []int{i, j} {
				if !out[k] {
					out[k] = true
					cut++
				}
			}
		}
	}
	if cut == 0 || n-cut < 6 {
		return nil
	}
	return out
}
