package multivariate

import (
	"fmt"
	"math"

	"gonum.org/v1/gonum/mat"
	"gonum.org/v1/gonum/stat/distuv"
)

// Distances are how far rows are from their mean.
type Distances struct {
	N, Skipped, Columns int
	// D2 is the squared distance of each row, in the order of rows; NaN where one is
	// left out.
	D2         []float64
	Mean       []float64
	Covariance [][]float64 // divisor n-1
	Why        string
}

// Mahalanobis measures the squared distance of every row from the mean,
//
//	d2 = (x - m)' S^-1 (x - m)
//
// in units of the columns' own spread and correlation. For normal columns it is
// about chi-square with as many degrees of freedom as columns; see
// [Distances.Limit] and [Distances.ExactLimit].
//
// Fewer complete rows than columns and one, or columns of which one follows from
// others, leave D2 NaN with a Why.
func Mahalanobis(columns [][]float64) Distances {
	rows := complete(columns)
	d := Distances{N: len(rows), Columns: len(columns)}
	if len(columns) == 0 {
		d.Why = "no columns"
		return d
	}
	d.Skipped = len(columns[0]) - d.N
	d.D2 = make([]float64, len(columns[0]))
	for i := range d.D2 {
		d.D2[i] = math.NaN()
	}
	p := len(columns)
	if d.N <= p {
		d.Why = fmt.Sprintf("%d complete rows; %d columns need %d", d.N, p, p+1)
		return d
	}
	d.Mean, d.Covariance = spread(columns, rows)
	scale := make([]float64, p) // the factorisation is of correlations, whatever the units
	for j := range scale {
		scale[j] = math.Sqrt(d.Covariance[j][j])
		if !(scale[j] > 0) {
			d.Why = fmt.Sprintf("column %d does not vary", j)
			return d
		}
	}
	s := mat.NewSymDense(p, nil)
	for i := range p {
		for j := i; j < p; j++ {
			s.SetSym(i, j, d.Covariance[i][j]/(scale[i]*scale[j]))
		}
	}
	var chol mat.Cholesky
	if !chol.Factorize(s) || chol.Cond() > 1e13 {
		d.Why = "a column follows from others"
		return d
	}
	var l mat.TriDense
	chol.LTo(&l)
	z := make([]float64, p)
	for _, i := range rows {
		sum := 0.0
		for j := range p { // forward substitution
			v := (columns[j][i] - d.Mean[j]) / scale[j]
			for k := range j {
				v -= l.At(j, k) * z[k]
			}
			z[j] = v / l.At(j, j)
			sum += z[j] * z[j]
		}
		d.D2[i] = sum
	}
	return d
}

// Limit is the chi-square quantile at p: what the squared distance of a normal row
// stays below with that chance, in large samples.
func (d Distances) Limit(p float64) float64 {
	return distuv.ChiSquared{K: float64(d.Columns)}.Quantile(p)
}

// ExactLimit is as Limit for a row that had its part in mean and covariance, at any
// n: (n-1)^2/n times a beta quantile. NaN for n of columns + 1 and below. Source:
// Tracy, Young and Mason 1992, J. Quality Technology 24, 88-95.
func (d Distances) ExactLimit(p float64) float64 {
	n, k := float64(d.N), float64(d.Columns)
	if n <= k+1 {
		return math.NaN()
	}
	return (n - 1) * (n - 1) / n * distuv.Beta{Alpha: k / 2, Beta: (n - k - 1) / 2}.Quantile(p)
}

// P is the chance of a normal row's squared distance to be d2 or more, in large
// samples.
func (d Distances) P(d2 float64) float64 {
	return distuv.ChiSquared{K: float64(d.Columns)}.Survival(d2)
}
