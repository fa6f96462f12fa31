package multivariate

import (
	"fmt"
	"math"

	"gonum.org/v1/gonum/mat"
)

// PCA is the principal components of columns scaled to standard deviation one.
type PCA struct {
	N, Skipped  int // rows used, and left out
	Mean, SD    []float64
	Correlation [][]float64
	// Eigenvalues, descending, are the variances of the components; they add up to
	// the number of columns. Explained is their share of that.
	Eigenvalues, Explained []float64
	// Loadings[k] are the weights of the columns in component k: of length one, the
	// largest in size positive.
	Loadings [][]float64
	Why      string
}

// Components finds the principal components of the correlation matrix. Columns
// that do not vary have no correlation: they, and fewer than two complete rows,
// leave the result empty with a Why.
//
// Source: Jolliffe 2002, ch. 2 and 3.
func Components(columns [][]float64) PCA {
	rows := complete(columns)
	p := PCA{N: len(rows)}
	if len(columns) == 0 {
		p.Why = "no columns"
		return p
	}
	p.Skipped = len(columns[0]) - p.N
	if p.N < 2 {
		p.Why = fmt.Sprintf("%d complete rows", p.N)
		return p
	}
	k := len(columns)
	mean, cov := spread(columns, rows)
	sd := make([]float64, k)
	for j := range sd {
		sd[j] = math.Sqrt(cov[j][j])
		if !(sd[j] > 0) {
			p.Why = fmt.Sprintf("column %d does not vary", j)
			return p
		}
	}
	r := mat.NewSymDense(k, nil)
	p.Correlation = make([][]float64, k)
	for i := range k {
		p.Correlation[i] = make([]float64, k)
		for j := range k {
			p.Correlation[i][j] = cov[i][j] / (sd[i] * sd[j])
			if i == j {
				p.Correlation[i][j] = 1
			}
			if i <= j {
				r.SetSym(i, j, p.Correlation[i][j])
			}
		}
	}
	var e mat.EigenSym
	if !e.Factorize(r, true) {
		p.Why = "the correlation matrix has no eigenvectors in floating point"
		return p
	}
	p.Mean, p.SD = mean, sd
	values := e.Values(nil)
	var vectors mat.Dense
	e.VectorsTo(&vectors)
	for c := k - 1; c >= 0; c-- { // ascending there
		v := math.Max(0, values[c])
		p.Eigenvalues = append(p.Eigenvalues, v)
		p.Explained = append(p.Explained, v/float64(k))
		load := mat.Col(nil, c, &vectors)
		largest := 0
		for j := range load {
			// Of weights equal but for rounding the first counts.
			if math.Abs(load[j]) > math.Abs(load[largest])*(1+1e-9) {
				largest = j
			}
		}
		if load[largest] < 0 {
			for j := range load {
				load[j] = -load[j]
			}
		}
		p.Loadings = append(p.Loadings, load)
	}
	return p
}

// Score gives the components of one row; NaN where the row has a NaN. It panics
// when the row is not as long as there are columns.
func (p PCA) Score(row []float64) []float64 {
	if len(row) != len(p.Mean) {
		panic("stats/multivariate: slice length mismatch")
	}
	out := make([]float64, len(p.Loadings))
	for c, load := range p.Loadings {
		for j, w := range load {
			out[c] += w * (row[j] - p.Mean[j]) / p.SD[j]
		}
	}
	return out
}
