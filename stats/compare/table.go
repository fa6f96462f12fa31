package compare

import (
	"math"

	"kneepoint/stats/internal/tail"
)

// Counts is the outcome of [ChiSquare].
type Counts struct {
	Statistic, DF, P float64
	// Yates and PYates are with the continuity correction, for two rows and two
	// columns only; else NaN.
	Yates, PYates float64
	// Expected are the counts that rows and columns alone would give.
	Expected [][]float64
	// CramersV is the size of the effect, 0 (none) to 1 (each row has columns of
	// its own).
	CramersV float64
	// Small is the number of cells with an expected count below 5, where the
	// chi-square distribution is a rough guide: see [Fisher].
	Small int
	Why   string
}

// ChiSquare asks whether the columns of a table of counts are shared out alike
// in every row: fail and pass by site, bins by wafer,
//
//	X2 = sum (observed - expected)^2 / expected
//
// on (rows-1)(columns-1) degrees of freedom. Rows and columns of zeros do not
// count; with fewer than two of either left there is no test, and Why says so.
// Yates' correction takes up to one half off each |observed - expected|. It
// panics when rows differ in length or a count is negative.
//
// Sources: Pearson 1900; Yates 1934, Suppl. J. R. Statist. Soc. 1, 217-235;
// Cramer 1946.
func ChiSquare(table [][]int) Counts {
	nan := math.NaN()
	c := Counts{Statistic: nan, DF: nan, P: nan, Yates: nan, PYates: nan, CramersV: nan}
	if len(table) == 0 {
		c.Why = "no counts"
		return c
	}
	rows, cols := make([]float64, len(table)), make([]float64, len(table[0]))
	n := 0.0
	for i, row := range table {
		if len(row) != len(cols) {
			panic("stats/compare: rows of different length")
		}
		for j, v := range row {
			if v < 0 {
				panic("stats/compare: negative count")
			}
			rows[i] += float64(v)
			cols[j] += float64(v)
			n += float64(v)
		}
	}
	used := func(sums []float64) (k float64) {
		for _, s := range sums {
			if s > 0 {
				k++
			}
		}
		return k
	}
	r, k := used(rows), used(cols)
	c.Expected = make([][]float64, len(table))
	var sum, yates float64
	for i, row := range table {
		c.Expected[i] = make([]float64, len(cols))
		for j, v := range row {
			if rows[i] == 0 || cols[j] == 0 {
				continue
			}
			e := rows[i] * cols[j] / n
			c.Expected[i][j] = e
			if e < 5 {
				c.Small++
			}
			d := math.Abs(float64(v) - e)
			sum += d * d / e
			d -= math.Min(0.5, d)
			yates += d * d / e
		}
	}
	if r < 2 || k < 2 {
		c.Why = "fewer than two rows or columns with counts"
		return c
	}
	c.Statistic, c.DF = sum, (r-1)*(k-1)
	c.P = tail.ChiSquared(sum, c.DF)
	c.CramersV = math.Sqrt(sum / (n * (math.Min(r, k) - 1)))
	if r == 2 && k == 2 {
		c.Yates, c.PYates = yates, tail.ChiSquared(yates, 1)
	}
	return c
}
