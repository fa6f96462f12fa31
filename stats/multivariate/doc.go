// Package multivariate looks at several tests of the same dice at once.
//
// Tests of one die hang together: a thin base raises the current gain and lowers
// the breakdown voltage. [Components] finds the few directions along which most
// of the spread lies, and so which tests tell the same story. [Mahalanobis] measures how
// far a die is from the others given how tests hang together: a die may pass each
// limit and still be like no other. [MedianPolish] takes a table (wafers by zones, lots by
// tests) apart into row and column effects that single bad cells do not move.
//
// Mean and covariance are themselves moved by outliers, and hide them: a tenth of
// bad dice in one place is enough. For outliers in numbers take a robust covariance
// (package screen).
//
// Columns are tests, all of the same length; row i of every column is die i. A die
// with a NaN or an infinity in any column is left out and counted. Nothing is
// modified. Columns of different length panic.
//
// Sources: Jolliffe 2002, Principal Component Analysis; Mahalanobis 1936, Proc.
// Nat. Inst. Sci. India 2, 49-55; Tukey 1977, Exploratory Data Analysis, ch. 11.
package multivariate

import (
	"math"
)

// complete lists the rows without a NaN or infinity.
func complete(columns [][]float64) []int {
	if len(columns) == 0 {
		return nil
	}
	for _, c := range columns {
		if len(c) != len(columns[0]) {
			panic("stats/multivariate: slice length mismatch")
		}
	}
	rows := make([]int, 0, len(columns[0]))
next:
	for i := range columns[0] {
		for _, c := range columns {
			if math.IsNaN(c[i]) || math.IsInf(c[i], 0) {
				continue next
			}
		}
		rows = append(rows, i)
	}
	return rows
}

// spread is the mean and the covariance (divisor n-1) of columns over rows, in two
// passes.
func spread(columns [][]float64, rows []int) (mean []float64, cov [][]float64) {
	p, n := len(columns), float64(len(rows))
	mean = make([]float64, p)
	cov = make([][]float64, p)
	for j, c := range columns {
		first := c[rows[0]] // deviations from a value near all others keep the digits
		for _, i := range rows {
			mean[j] += c[i] - first
		}
		mean[j] = first + mean[j]/n
		cov[j] = make([]float64, p)
	}
	for j := range columns {
		for k := 0; k <= j; k++ {
			s, ej, ek := 0.0, 0.0, 0.0
			for _, i := range rows {
				a, b := columns[j][i]-mean[j], columns[k][i]-mean[k]
				s += float64(a * b)
				ej += a
				ek += b
			}
			cov[j][k] = (s - ej*ek/n) / (n - 1)
			cov[k][j] = cov[j][k]
		}
	}
	return mean, cov
}
