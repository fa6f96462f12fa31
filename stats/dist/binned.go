package dist

import (
	"math"

	"kneepoint/stats"
)

// cell stands for n readings close to each other: their mean, and their mean
// squared deviation from it.
type cell struct{ n, mean, spread float64 }

// fewCells is about how many cells stand for a large sample.
const fewCells = 2048

// cells reduces readings to cells, in ascending order. Up to fewCells different
// values keep a cell each. Beyond that a cell takes so many neighbours that
// fewCells would do, but none is wider than a thousandth of the central 98 % of
// the readings: an outlier at 1e30 gets a cell of its own and does not blur the
// others. NaNs are left out.
func cells(x []float64) []cell {
	v := stats.Sorted(x)
	var out []cell
	for i := 0; i < len(v) && len(out) <= fewCells; {
		j := i + 1
		for j < len(v) && v[j] == v[i] {
			j++
		}
		out = append(out, cell{n: float64(j - i), mean: v[i]})
		i = j
	}
	if len(out) <= fewCells {
		return out
	}
	out = out[:0]
	last := len(v) - 1
	width := (v[last-last/100] - v[last/100]) / 1000
	most := len(v)/fewCells + 1
	for i := 0; i < len(v); {
		j := i
		for j < len(v) && j-i < most && v[j]-v[i] <= width {
			j++
		}
		if j == i { // an infinity, of which the difference to itself is NaN
			j = i + 1
		}
		c := cell{n: float64(j - i)}
		for _, u := range v[i:j] {
			c.mean += (u - v[i]) / c.n
		}
		for _, u := range v[i:j] {
			d := u - v[i] - c.mean
			c.spread += float64(d*d) / c.n
		}
		c.mean += v[i]
		out = append(out, c)
		i = j
	}
	return out
}

// momentsOf returns count, mean and standard deviation (divisor n) of cells.
func momentsOf(cs []cell) (n, mean, sd float64) {
	for _, c := range cs {
		n += c.n
		mean += (c.mean - mean) * c.n / n
	}
	ss := 0.0
	for _, c := range cs {
		d := c.mean - mean
		ss += c.n * (float64(d*d) + c.spread)
	}
	return n, mean, math.Sqrt(ss / n)
}
