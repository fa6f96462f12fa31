package junction

import "math"

// root finds where f changes sign between a and b to a relative width of 1e-12 or
// an |f| of tol, by Ridders' and bisection steps that keep the bracket. It is NaN
// when f has the same sign at both ends or is NaN there.
//
// Method: Ridders, IEEE Trans. Circuits Syst. 26 (1979) 979.
func root(f func(float64) float64, a, b, tol float64) float64 {
	fa, fb := f(a), f(b)
	if fa == 0 {
		return a
	}
	if fb == 0 {
		return b
	}
	if !(fa*fb < 0) {
		return math.NaN()
	}
	for range 60 {
		m := (a + b) / 2
		fm := f(m)
		if math.Abs(fm) <= tol || math.Abs(b-a) <= 1e-12*math.Abs(m) {
			return m
		}
		d := math.Sqrt(float64(fm*fm) - float64(fa*fb))
		x := m + (m-a)*math.Copysign(1, fa-fb)*fm/d
		fx := f(x)
		if math.Abs(fx) <= tol {
			return x
		}
		if math.IsNaN(fx) {
			return math.NaN()
		}
		switch {
		case fm*fx < 0:
			if m < x {
				a, fa, b, fb = m, fm, x, fx
			} else {
				a, fa, b, fb = x, fx, m, fm
			}
		case fa*fx < 0:
			b, fb = x, fx
		default:
			a, fa = x, fx
		}
	}
	return (a + b) / 2
}

// bracketed finds the zero of a rising f between lo and hi, starting near guess:
// it widens a bracket from there by steps, which spares the far ends. NaN when
// there is none.
func bracketed(f func(float64) float64, guess, step, lo, hi float64) float64 {
	a := math.Min(math.Max(guess, lo), hi)
	fa := f(a)
	if fa > 0 {
		step = -step
	}
	for range 60 {
		b := math.Min(math.Max(a+step, lo), hi)
		fb := f(b)
		if math.IsNaN(fb) || b == a {
			return math.NaN()
		}
		if fa*fb <= 0 {
			return root(f, math.Min(a, b), math.Max(a, b), 1e-8)
		}
		a, fa = b, fb
		step *= 2
	}
	return math.NaN()
}
