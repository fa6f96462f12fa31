package wafermap

import (
	"fmt"
	"math"

	"gonum.org/v1/gonum/mat"
)

// Noll returns the radial order n and the azimuthal order m of Zernike term j, which
// counts from 1. m is positive for cosine terms and negative for sine terms.
// Terms follow each other by n, then |m|; even j are cosines (Noll 1976, J. Opt. Soc.
// Am. 66, 207). Terms 2 and 3 are tilt, 4 is the bowl, 11 the roll-off at the edge.
func Noll(j int) (n, m int) {
	if j < 1 {
		panic("wafermap: Zernike terms count from 1")
	}
	rest := j - 1
	for rest > n {
		n++
		rest -= n
	}
	m = n%2 + 2*((rest+(n+1)%2)/2)
	if j%2 == 1 {
		m = -m
	}
	return n, m
}

// Zernike returns term j at a point of the unit disc, in Noll's normalisation: its
// mean square over the disc is 1.
func Zernike(j int, rho, theta float64) float64 {
	n, m := Noll(j)
	order := max(m, -m)
	r := radial(n, order, rho)
	switch {
	case m == 0:
		return math.Sqrt(float64(n+1)) * r
	case m > 0:
		return math.Sqrt(2*float64(n+1)) * r * math.Cos(float64(order)*theta)
	}
	return math.Sqrt(2*float64(n+1)) * r * math.Sin(float64(order)*theta)
}

// radial is Zernike's radial polynomial for m >= 0 and n-m even,
//
//	R_n^m(rho) = (-1)^k rho^m P_k^(m,0)(1 - 2 rho^2),  k = (n-m)/2,
//
// by the three-term recurrence of the Jacobi polynomials P: the textbook sum of
// factorials loses digits at high orders.
func radial(n, m int, rho float64) float64 {
	k := (n - m) / 2
	t := 1 - 2*rho*rho
	b := float64(m)
	before, p := 0.0, 1.0 // (-1)^i P_i
	for i := 1; i <= k; i++ {
		f := float64(i)
		s := 2*f + b
		next := 0.0
		if i == 1 {
			next = -(b+2)/2*t - b/2
		} else {
			next = ((s-1)*(-s*(s-2)*t-b*b)*p - 2*(f-1)*(f+b-1)*s*before) / (2 * f * (f + b) * (s - 2))
		}
		before, p = p, next
	}
	return math.Pow(rho, b) * p
}

// ZernikeFit is a smooth surface fitted to a value over a disc.
type ZernikeFit struct {
	Coefficients []float64 // Coefficients[j-1] of term j
	N            int       // dice used
	RSS          float64   // sum of squared residuals
	RMS          float64   // sqrt(RSS / N)
	RSquared     float64   // NaN for a constant value
	Condition    float64   // largest over smallest singular value of the design: near 1 on a full disc, large when the dice do not tell the terms apart
	Why          string
}

// farthest is how far out a die may lie, in radii, to take part in a fit: one at a
// wrong place would carry any surface with it.
const farthest = 1.1

// FitZernike fits terms 1 to terms by least squares to a value at points of the
// plane: mmX and mmY from the wafer's centre, in the unit of radius. Points with a
// NaN or infinite value or place, and points more than a tenth outside the disc,
// are left out. On a die grid the terms are only nearly orthogonal, so coefficients
// depend a little on how many terms are fitted. With fewer points than terms, or
// terms that the points cannot tell apart, the numbers are NaN, with a Why.
func FitZernike(mmX, mmY, value []float64, radius float64, terms int) ZernikeFit {
	if len(mmX) != len(mmY) || len(mmX) != len(value) {
		panic("wafermap: mmX, mmY and value differ in length")
	}
	if terms < 1 {
		panic("wafermap: no Zernike terms to fit")
	}
	f := ZernikeFit{Coefficients: make([]float64, terms), RSS: nan, RMS: nan, RSquared: nan, Condition: nan}
	for j := range f.Coefficients {
		f.Coefficients[j] = nan
	}
	if !(radius > 0) {
		f.Why = "the wafer's radius is not known"
		return f
	}
	var rows []int
	for i := range value {
		if sum := mmX[i] + mmY[i] + value[i]; !math.IsNaN(sum) && !math.IsInf(sum, 0) && math.Hypot(mmX[i], mmY[i]) <= farthest*radius {
			rows = append(rows, i)
		}
	}
	f.N = len(rows)
	if f.N < terms {
		f.Why = fmt.Sprintf("%d dice with a value: %d terms need at least as many", f.N, terms)
		return f
	}
	a, b := mat.NewDense(f.N, terms, nil), mat.NewVecDense(f.N, nil)
	mean := 0.0
	for k, i := range rows {
		mean += (value[i] - mean) / float64(k+1)
	}
	for k, i := range rows {
		rho, theta := math.Hypot(mmX[i], mmY[i])/radius, math.Atan2(mmY[i], mmX[i])
		for j := 1; j <= terms; j++ {
			a.Set(k, j-1, Zernike(j, rho, theta))
		}
		b.SetVec(k, value[i]-mean) // the constant term takes the mean back: fewer digits are lost
	}
	f.solve(a, b, mean)
	return f
}

// solve finishes a fit whose right side had the mean taken off.
func (f *ZernikeFit) solve(a *mat.Dense, b *mat.VecDense, mean float64) {
	terms := len(f.Coefficients)
	var qr mat.QR
	qr.Factorize(a)
	var r mat.Dense
	qr.RTo(&r)
	var svd mat.SVD
	if !svd.Factorize(r.Slice(0, terms, 0, terms), mat.SVDNone) {
		f.Why = "the fit did not converge"
		return
	}
	singular := svd.Values(nil)
	f.Condition = singular[0] / singular[terms-1]
	if !(f.Condition < 1e10) {
		f.Why = "the dice do not tell the terms apart: fit fewer"
		return
	}
	var x mat.VecDense
	if err := qr.SolveVecTo(&x, false, b); err != nil {
		f.Why = "the dice do not tell the terms apart: fit fewer"
		return
	}
	var fitted mat.VecDense
	fitted.MulVec(a, &x)
	f.RSS = 0
	total := 0.0
	for i := range f.N {
		f.RSS += sq(b.AtVec(i) - fitted.AtVec(i))
		total += sq(b.AtVec(i))
	}
	f.RMS = math.Sqrt(f.RSS / float64(f.N))
	if total > 0 {
		f.RSquared = 1 - f.RSS/total
	}
	for j := range f.Coefficients {
		f.Coefficients[j] = x.AtVec(j)
	}
	f.Coefficients[0] += mean
}
