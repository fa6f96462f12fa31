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

// ratioSigma is how surely dice are expected to be square, as a standard deviation
// of log(height/width): 2.7:1 is two sigmas off.
const ratioSigma = 0.5

// independent is how many points count as independent. How far the hull stays
// inside the circle depends on how rows and columns happen to fall, which is
// alike for neighbouring points and does not average out over their number;
// found by trial on made maps, so that CentreSigma is about right.
const independent = 6

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

// refine improves a circle by reweighted least squares (Gauss-Newton steps on
// cx, cy, rho and log h).
func (f *fitter) refine(c circle) (circle, bool) {
	n, k := len(f.x), 3
	if f.h == 0 {
		k = 4
	}
	residual := make([]float64, n)
	c.weights = make([]float64, n)
	var normal mat.SymDense
	for iteration := range 60 {
		for i := range residual {
			residual[i] = c.distance(f.x[i], f.y[i]) - c.rho
		}
		grain := f.grain
		if f.h == 0 {
			grain *= math.Sqrt(c.h / c.w)
		}
		scale := max(medianAbs(residual)*1.4826, 0.1*grain)
		if iteration < 5 {
			scale = max(scale, 0.5*grain)
		}
		scale = min(scale, grain)
		say := f.say(residual, 4.685*scale)
		normal = *mat.NewSymDense(k, nil)
		right := mat.NewVecDense(k, nil)
		add := func(j []float64, r, weight float64) {
			for a := range j {
				for b := a; b < k; b++ {
					normal.SetSym(a, b, normal.At(a, b)+weight*j[a]*j[b])
				}
				right.SetVec(a, right.AtVec(a)-weight*j[a]*r)
			}
		}
		for i := range residual {
			c.weights[i] = f.biweight(i, residual[i]/(4.685*scale))
			d := residual[i] + c.rho
			if c.weights[i] == 0 || d == 0 {
				continue
			}
			u, v := (f.x[i]-c.cx)*c.w, (f.y[i]-c.cy)*c.h
			// lengths along cx and cy in the unit, not in dice, keep the system even
			add([]float64{-u / d, -v / d, -1, v * v / d}[:k], residual[i], say*c.weights[i]/sq(scale))
		}
		if f.rhoSigma > 0 {
			add([]float64{0, 0, 1, 0}[:k], c.rho-f.rho0, 1/sq(f.rhoSigma))
		}
		if c.rho > f.rhoMax {
			add([]float64{0, 0, 1, 0}[:k], c.rho-f.rhoMax, 1/sq(f.grain/4))
		}
		if f.h == 0 {
			add([]float64{0, 0, 0, 1}, math.Log(c.h/c.w), 1/sq(ratioSigma))
		}
		var move mat.VecDense
		if move.SolveVec(&normal, right) != nil {
			return c, false
		}
		cap := 0.2 * c.rho // no step runs away
		limit := func(v float64) float64 { return max(-cap, min(cap, v)) }
		c.cx += limit(move.AtVec(0)) / c.w
		c.cy += limit(move.AtVec(1)) / c.h
		c.rho += limit(move.AtVec(2))
		size := math.Abs(move.AtVec(0)) + math.Abs(move.AtVec(1)) + math.Abs(move.AtVec(2))
		if k == 4 {
			c.h *= math.Exp(max(-0.2, min(0.2, move.AtVec(3))))
			size += math.Abs(move.AtVec(3)) * c.rho
		}
		if iteration > 8 && size < 1e-10*c.rho {
			break
		}
	}
	var covariance mat.Dense
	if covariance.Inverse(&normal) != nil || !f.sound(c) {
		return c, false
	}
	c.sigma = math.Sqrt(max(covariance.At(0, 0), covariance.At(1, 1)))
	c.rhoSE = math.Sqrt(covariance.At(2, 2))
	if k == 4 {
		c.ratioSE = math.Sqrt(covariance.At(3, 3))
	}
	return c, true
}

// biweight is Tukey's weight of point i, t in units of where it ends.
func (f *fitter) biweight(i int, t float64) float64 {
	if f.out != nil && f.out[i] || t*t >= 1 {
		return 0
	}
	return sq(1 - t*t)
}

// say is the factor that makes the points together count as independent ones.
func (f *fitter) say(residual []float64, end float64) float64 {
	n := 0.0
	for i, r := range residual {
		n += f.biweight(i, r/end)
	}
	return min(1, independent/n)
}

// medianAbs is the median of |v|.
func medianAbs(v []float64) float64 {
	a := make([]float64, len(v))
	for i := range v {
		a[i] = math.Abs(v[i])
	}
	slices.Sort(a)
	return a[len(a)/2]
}

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
