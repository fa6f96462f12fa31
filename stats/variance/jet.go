package variance

import "math"

// maxVars is the number of variances: of every level, and the dice.
const maxVars = maxLevels + 1

// jet is a number with its first and second derivatives by the variances. The
// likelihood is written once, in jets, and its gradient and curvature come out
// exact; derived by hand they would be three times the code (Griewank and
// Walther 2008, Evaluating Derivatives, ch. 13).
type jet struct {
	v float64
	g [maxVars]float64
	h [maxVars * (maxVars + 1) / 2]float64 // (i, j <= i) at i(i+1)/2 + j
}

// field knows how many variances are in use.
type field int

func variable(v float64, i int) jet {
	a := jet{v: v}
	a.g[i] = 1
	return a
}

func constant(v float64) jet { return jet{v: v} }

// add sets a += s*b.
func (d field) add(a *jet, s float64, b *jet) {
	a.v += s * b.v
	for i := range int(d) {
		a.g[i] += s * b.g[i]
	}
	for i := range int(d * (d + 1) / 2) {
		a.h[i] += s * b.h[i]
	}
}

func (d field) mul(a, b *jet) (c jet) {
	c.v = a.v * b.v
	n := 0
	for i := range int(d) {
		c.g[i] = a.v*b.g[i] + b.v*a.g[i]
		for j := 0; j <= i; j++ {
			c.h[n] = a.v*b.h[n] + b.v*a.h[n] + a.g[i]*b.g[j] + a.g[j]*b.g[i]
			n++
		}
	}
	return c
}

// chain is f(a) for a function with value v and derivatives f1, f2 at a.
func (d field) chain(a *jet, v, f1, f2 float64) (c jet) {
	c.v = v
	n := 0
	for i := range int(d) {
		c.g[i] = f1 * a.g[i]
		for j := 0; j <= i; j++ {
			c.h[n] = f1*a.h[n] + f2*a.g[i]*a.g[j]
			n++
		}
	}
	return c
}

func (d field) inv(a *jet) jet {
	u := 1 / a.v
	return d.chain(a, u, -u*u, 2*u*u*u)
}

func (d field) log(a *jet) jet {
	u := 1 / a.v
	return d.chain(a, math.Log(a.v), u, -u*u)
}

func (d field) div(a, b *jet) jet {
	u := d.inv(b)
	return d.mul(a, &u)
}

// second is the (i, j) second derivative.
func (a *jet) second(i, j int) float64 {
	if j > i {
		i, j = j, i
	}
	return a.h[i*(i+1)/2+j]
}
