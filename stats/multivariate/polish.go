package multivariate

import (
	"math"

	"kneepoint/stats"
)

// Polish is a table as overall level, row and column effects, and what is left:
// table[i][j] = Overall + Row[i] + Column[j] + Residual[i][j].
type Polish struct {
	Overall     float64
	Row, Column []float64
	Residual    [][]float64
	Sweeps      int
	// Converged: the last sweep changed the sum of absolute residuals by less than
	// the part asked for.
	Converged bool
}

// MedianPolish takes the median out of each row, then of each column, in turn,
// until the sum of absolute residuals changes by less than eps of itself or sweeps
// are used up. Medians of effects go to the overall level. Up to half of a
// row's or column's cells may be bad without moving its effect.
//
// Missing cells (NaN) are passed over; a row or column without any has effect 0.
// The result depends a little on rows going first. It panics on rows of different
// length.
//
// Source: Tukey 1977, ch. 11.
func MedianPolish(table [][]float64, eps float64, sweeps int) Polish {
	p := Polish{Row: make([]float64, len(table))}
	for i, row := range table {
		if len(row) != len(table[0]) {
			panic("stats/multivariate: slice length mismatch")
		}
		p.Residual = append(p.Residual, append([]float64{}, table[i]...))
	}
	if len(table) == 0 {
		return p
	}
	p.Column = make([]float64, len(table[0]))
	column := make([]float64, len(table))
	before := 0.0
	for p.Sweeps < sweeps && !p.Converged {
		p.Sweeps++
		for i, row := range p.Residual {
			m := medianOrZero(row)
			p.Row[i] += m
			for j := range row {
				row[j] -= m
			}
		}
		p.shift(p.Column)
		for j := range p.Column {
			for i := range column {
				column[i] = p.Residual[i][j]
			}
			m := medianOrZero(column)
			p.Column[j] += m
			for i := range column {
				p.Residual[i][j] -= m
			}
		}
		p.shift(p.Row)
		sum := 0.0
		for _, row := range p.Residual {
			for _, v := range row {
				if v == v {
					sum += math.Abs(v)
				}
			}
		}
		p.Converged = sum == 0 || math.Abs(sum-before) < eps*sum
		before = sum
	}
	return p
}

// shift moves the median of effects into the overall level.
func (p *Polish) shift(effects []float64) {
	m := medianOrZero(effects)
	p.Overall += m
	for i := range effects {
		effects[i] -= m
	}
}

func medianOrZero(x []float64) float64 {
	if m := stats.Median(x); m == m {
		return m
	}
	return 0
}
