package series

import (
	"fmt"
	"math"
	"math/big"
)

// Polynomial is a polynomial through points by least squares,
// y = Coefficients[0] + Coefficients[1] x + ...
type Polynomial struct {
	Coefficients, StandardErrors []float64
	ResidualSD                   float64 // divisor n - number of coefficients; NaN when that is 0
	RSquared                     float64
	N                            int
	Why                          string
}

// precision in bits: normal equations square the condition number, and powers of
// x of badly scaled data reach 1e15 of it; 500 bits leave a hundred digits.
const precision = 500

// FitPolynomial fits a polynomial of the given degree. The normal equations are
// solved with 500-bit numbers, so coefficients are those of the data given to
// the last digit of a float64, however far x is from zero: what error remains is
// that of the data's own rounding to binary. The time is a few microseconds a point
// and degree.
//
// Pairs with a NaN or an infinity are skipped. Fewer different x than coefficients
// give NaNs and a Why. It panics on a negative degree, and when lengths differ.
//
// Source: Draper and Smith 1998, Applied Regression Analysis, ch. 5 and 12.
func FitPolynomial(x, y []float64, degree int) Polynomial {
	if len(x) != len(y) {
		panic("stats/series: slice length mismatch")
	}
	if degree < 0 {
		panic("stats/series: negative degree")
	}
	p := degree + 1
	fit := Polynomial{Coefficients: make([]float64, p), StandardErrors: make([]float64, p), ResidualSD: math.NaN(), RSquared: math.NaN()}
	for i := range p {
		fit.Coefficients[i], fit.StandardErrors[i] = math.NaN(), math.NaN()
	}
	s := newPowers(p)
	different := map[float64]bool{}
	for i := range x {
		if math.IsInf(x[i], 0) || x[i] != x[i] || math.IsInf(y[i], 0) || y[i] != y[i] {
			continue
		}
		s.add(x[i], y[i])
		fit.N++
		if len(different) < p {
			different[x[i]] = true
		}
	}
	if len(different) < p {
		fit.Why = fmt.Sprintf("%d different x; a polynomial of degree %d needs %d", len(different), degree, p)
		return fit
	}
	b, inverse := s.solve()
	// Squares left: y'y - b'X'y; about the mean: y'y - (sum y)^2/n.
	left := number().Set(s.yy)
	for i := range p {
		fit.Coefficients[i], _ = b[i].Float64()
		left.Sub(left, number().Mul(b[i], s.xy[i]))
	}
	about := number().Mul(s.xy[0], s.xy[0])
	about.Sub(s.yy, about.Quo(about, s.x[0]))
	sse, _ := left.Float64()
	sse = math.Max(0, sse)
	if total, _ := about.Float64(); total > 0 {
		fit.RSquared = 1 - sse/total
	}
	if df := fit.N - p; df > 0 {
		s2 := sse / float64(df)
		fit.ResidualSD = math.Sqrt(s2)
		for i := range p {
			d, _ := inverse[i].Float64()
			fit.StandardErrors[i] = math.Sqrt(s2 * d)
		}
	}
	return fit
}

// At is the polynomial at x.
func (p Polynomial) At(x float64) float64 {
	v := 0.0
	for i := len(p.Coefficients) - 1; i >= 0; i-- {
		v = v*x + p.Coefficients[i]
	}
	return v
}

func number() *big.Float { return new(big.Float).SetPrec(precision) }

// powers are the sums of the normal equations.
type powers struct {
	x  []*big.Float // sum of x^k
	xy []*big.Float // sum of x^k y
	yy *big.Float
}

func newPowers(p int) *powers {
	s := &powers{yy: number()}
	for range 2*p - 1 {
		s.x = append(s.x, number())
	}
	for range p {
		s.xy = append(s.xy, number())
	}
	return s
}

func (s *powers) add(x, y float64) {
	X, Y := number().SetFloat64(x), number().SetFloat64(y)
	power := number().SetInt64(1)
	term := number()
	for k := range s.x {
		s.x[k].Add(s.x[k], power)
		if k < len(s.xy) {
			s.xy[k].Add(s.xy[k], term.Mul(power, Y))
		}
		power.Mul(power, X)
	}
	s.yy.Add(s.yy, term.Mul(Y, Y))
}

// solve gives the coefficients and the diagonal of the inverse, by Gauss and Jordan;
// the matrix is positive definite, so that no pivoting is needed.
func (s *powers) solve() (b, diagonal []*big.Float) {
	p := len(s.xy)
	a := make([][]*big.Float, p) // [matrix | right side | identity]
	for i := range a {
		a[i] = make([]*big.Float, 2*p+1)
		for j := range a[i] {
			switch {
			case j < p:
				a[i][j] = number().Set(s.x[i+j])
			case j == p:
				a[i][j] = number().Set(s.xy[i])
			default:
				a[i][j] = number()
				if j == p+1+i {
					a[i][j].SetInt64(1)
				}
			}
		}
	}
	term := number()
	for k := range p {
		pivot := number().Set(a[k][k])
		for j := range a[k] {
			a[k][j].Quo(a[k][j], pivot)
		}
		for i := range p {
			if i == k {
				continue
			}
			factor := number().Set(a[i][k])
			for j := range a[i] {
				a[i][j].Sub(a[i][j], term.Mul(factor, a[k][j]))
			}
		}
	}
	for i := range p {
		b = append(b, a[i][p])
		diagonal = append(diagonal, a[i][p+1+i])
	}
	return b, diagonal
}
