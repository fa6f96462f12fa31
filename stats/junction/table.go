package junction

import (
	"math"
	"runtime"
	"sync"
)

// axis is an evenly spaced axis of a table.
type axis struct {
	lo, step float64
	n        int
}

func newAxis(lo, hi float64, n int) axis { return axis{lo, (hi - lo) / float64(n-1), n} }

func (a axis) at(i int) float64 { return a.lo + a.step*float64(i) }
func (a axis) hi() float64      { return a.at(a.n - 1) }

// stencil is where a point lies on an axis: the first of four nodes and their
// cubic (Catmull-Rom) weights, with the weights of the derivative. Outside the
// axis it extends the end's tangent.
type stencil struct {
	i    int
	w, d [4]float64
}

func (a axis) stencil(x float64) (s stencil) {
	over := 0.0
	if lo := a.lo; x < lo {
		x, over = lo, x-lo
	} else if hi := a.hi(); x > hi {
		x, over = hi, x-hi
	}
	f := (x - a.lo) / a.step
	i := min(int(f), a.n-2)
	t := f - float64(i)
	t2 := t * t
	t3 := t2 * t
	w := [4]float64{(-t3 + 2*t2 - t) / 2, (3*t3 - 5*t2 + 2) / 2, (-3*t3 + 4*t2 + t) / 2, (t3 - t2) / 2}
	d := [4]float64{(-3*t2 + 4*t - 1) / 2, (9*t2 - 10*t) / 2, (-9*t2 + 8*t + 1) / 2, (3*t2 - 2*t) / 2}
	s.i = i - 1
	switch { // the node beyond either end is the parabola's through the last three
	case i == 0:
		s.i = 0
		fold(&w, &d, true)
	case i == a.n-2:
		s.i = a.n - 4
		fold(&w, &d, false)
	}
	for k := range 4 {
		d[k] /= a.step
		s.w[k] = w[k] + over*d[k]
		s.d[k] = d[k]
	}
	return s
}

// fold replaces the missing outer node by 3 f0 - 3 f1 + f2 and shifts the weights
// onto the four nodes at that end.
func fold(w, d *[4]float64, low bool) {
	for _, v := range []*[4]float64{w, d} {
		if low {
			m := v[0]
			*v = [4]float64{v[1] + 3*m, v[2] - 3*m, v[3] + m, 0}
		} else {
			m := v[3]
			*v = [4]float64{0, v[0] + m, v[1] - 3*m, v[2] + 3*m}
		}
	}
}

// plane2 is the table grid of net thickness against doping, both as logs of ratios
// to nominal, and where a point lies on it.
type plane2 struct{ u, v axis }

type point2 struct {
	at   int // offset of the first node
	u, v stencil
}

func (g plane2) point(u, v float64) point2 {
	p := point2{u: g.u.stencil(u), v: g.v.stencil(v)}
	p.at = p.u.i*g.v.n + p.v.i
	return p
}

// surface is one tabulated quantity on a plane2, row by row of u.
type surface []float64

func (f surface) value(g plane2, p *point2) float64 {
	s := 0.0
	o := p.at
	for i := range 4 {
		r := f[o : o+4 : o+4]
		s += p.u.w[i] * (p.v.w[0]*r[0] + p.v.w[1]*r[1] + p.v.w[2]*r[2] + p.v.w[3]*r[3])
		o += g.v.n
	}
	return s
}

// slopes returns the value and its derivatives along u and v.
func (f surface) slopes(g plane2, p *point2) (val, du, dv float64) {
	o := p.at
	for i := range 4 {
		r := f[o : o+4 : o+4]
		a := p.v.w[0]*r[0] + p.v.w[1]*r[1] + p.v.w[2]*r[2] + p.v.w[3]*r[3]
		b := p.v.d[0]*r[0] + p.v.d[1]*r[1] + p.v.d[2]*r[2] + p.v.d[3]*r[3]
		val += p.u.w[i] * a
		du += p.u.d[i] * a
		dv += p.u.w[i] * b
		o += g.v.n
	}
	return val, du, dv
}

// mend replaces NaN nodes by the nearest node of the same doping that has a value,
// then of the same thickness. It reports whether any value was there.
func (f surface) mend(g plane2) bool {
	pass := func(at func(i, j int) int, n, m int) {
		for j := range m {
			for i := 1; i < n; i++ {
				if math.IsNaN(f[at(i, j)]) {
					f[at(i, j)] = f[at(i-1, j)]
				}
			}
			for i := n - 2; i >= 0; i-- {
				if math.IsNaN(f[at(i, j)]) {
					f[at(i, j)] = f[at(i+1, j)]
				}
			}
		}
	}
	pass(func(i, j int) int { return i*g.v.n + j }, g.u.n, g.v.n)
	pass(func(i, j int) int { return j*g.v.n + i }, g.v.n, g.u.n)
	return !math.IsNaN(f[0])
}

// each runs f for 0..n-1 on all cores. Every call writes only its own results, so
// the outcome does not depend on the number of cores.
func each(n int, f func(i int)) {
	var wg sync.WaitGroup
	next := make(chan int)
	for range min(runtime.GOMAXPROCS(0), n) {
		wg.Go(func() {
			for i := range next {
				f(i)
			}
		})
	}
	for i := range n {
		next <- i
	}
	close(next)
	wg.Wait()
}

// taylor is a log quantity to second order around nominal.
type taylor[T ~[4]float64 | ~[5]float64] struct {
	f    float64
	grad T
	hess []T
}

// expand takes a quantity's derivatives by central differences of a step that
// spans the usual spread. f must be defined within one step of 0.
func expand[T ~[4]float64 | ~[5]float64](f func(T) float64) taylor[T] {
	const h = 0.06
	var zero T
	n := len(zero)
	t := taylor[T]{f: f(zero), hess: make([]T, n)}
	up, down := make([]float64, n), make([]float64, n)
	for i := range n {
		p, m := zero, zero
		p[i], m[i] = h, -h
		up[i], down[i] = f(p), f(m)
		t.grad[i] = (up[i] - down[i]) / (2 * h)
		t.hess[i][i] = (up[i] - 2*t.f + down[i]) / (h * h)
		for j := range i {
			pp, mm := zero, zero
			pp[i], pp[j], mm[i], mm[j] = h, h, -h, -h
			t.hess[i][j] = (f(pp) + f(mm) - up[i] - down[i] - up[j] - down[j] + 2*t.f) / (2 * h * h)
			t.hess[j][i] = t.hess[i][j]
		}
	}
	return t
}

func (t *taylor[T]) value(x *T) float64 {
	s := t.f
	for i := range len(*x) {
		xi := (*x)[i]
		if xi == 0 {
			continue
		}
		q := 0.0
		for j := range len(*x) {
			q += t.hess[i][j] * (*x)[j]
		}
		s += xi * (t.grad[i] + q/2)
	}
	return s
}
