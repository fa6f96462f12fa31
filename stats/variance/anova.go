package variance

import (
	"math"

	"gonum.org/v1/gonum/stat/distuv"
	"kneepoint/stats"
)

// Row is one line of a nested analysis of variance.
type Row struct {
	Level  string
	Groups int // groups of this level; readings for the innermost
	DF     int
	SS, MS float64
	// Coefficient[j] is how much of component j is in the mean square on average:
	//
	//	E[MS] = sum_j Coefficient[j] * component[j]
	//
	// components in the order of the rows.
	Coefficient []float64
	// Variance is the component, in the readings' unit squared, by solving those
	// equations from the innermost level out: not cut off at zero. Limits are, see
	// [Design.ANOVA].
	Variance stats.Interval
}

// ANOVA estimates the components by the method of moments: the mean square of
// each level is equated with its expectation, whose coefficients account for
// unequal numbers (Henderson's method 1 for a nested design). Rows are from the
// outermost level in, the dice last.
//
// Limits: for the innermost level chi-square, exact for normal deviations. For
// the others the modified large-sample method for a difference of mean squares
// (Ting and others 1990), with what is subtracted pooled to one mean square by
// Satterthwaite's degrees of freedom; cut off at zero. They are good for balanced
// designs and approximate for others; [Design.REML] has better ones there.
//
// A level with as many groups as the level above has no estimate, and a Why.
// Panics unless 0 < confidence < 1.
//
// Sources: Searle, Casella and McCulloch 1992, Variance Components, ch. 5 (nested
// designs); Ting, Burdick, Graybill, Jeyaratnam and Lu 1990, J. Statist. Comput.
// Simul. 35, 135-143; Burdick and Graybill 1992, ch. 3.
func (d *Design) ANOVA(confidence float64) []Row {
	checkConfidence(confidence)
	levels := len(d.parent)
	rows := make([]Row, levels+1)
	counts, means := d.pyramid()
	inner := d.squares(counts)
	for k := range rows {
		r := &rows[k]
		r.Groups = d.groups(k)
		r.Level = "die"
		if k < levels {
			r.Level = d.names[k]
		}
		r.DF = d.groups(k) - d.groups(k-1)
		r.SS = d.between(k, counts, means)
		r.MS = r.SS / float64(r.DF)
		r.Coefficient = make([]float64, levels+1)
		for j := k; j <= levels; j++ {
			r.Coefficient[j] = (inner[k+1][j] - inner[k][j]) / float64(r.DF)
		}
	}
	for k := levels; k >= 0; k-- {
		rows[k].Variance = d.moment(rows, k, confidence)
	}
	return rows
}

// pyramid is the number of readings and the mean of each group, level by level,
// below one of the whole.
func (d *Design) pyramid() (counts, means [][]float64) {
	levels := len(d.parent)
	counts, means = make([][]float64, levels+1), make([][]float64, levels+1)
	for k := range counts { // index k holds level k-1
		counts[k] = make([]float64, d.groups(k-1))
		means[k] = make([]float64, d.groups(k-1))
	}
	for g, c := range d.cells {
		counts[levels][g], means[levels][g] = float64(c.N), c.Mean
	}
	for k := levels - 1; k >= 0; k-- {
		for g, p := range d.parent[k] {
			counts[k][p] += counts[k+1][g]
		}
		for g, p := range d.parent[k] {
			means[k][p] += means[k+1][g] * (counts[k+1][g] / counts[k][p])
		}
	}
	return counts, means
}

// squares is S[k][j]: the sum over groups g of level k-1 of the squared counts of
// the groups of level j inside g, over g's count. For levels j further out than g
// it is the number of readings, as such a group's deviation is whole in g.
func (d *Design) squares(counts [][]float64) [][]float64 {
	levels := len(d.parent)
	s := make([][]float64, levels+2)
	for k := range s { // groups of level k-1
		s[k] = make([]float64, levels+1)
		for j := range s[k] {
			if j < k {
				s[k][j] = float64(d.N)
			}
		}
	}
	for j := range levels {
		sum := make([]float64, len(counts[j+1]))
		for g, n := range counts[j+1] {
			sum[g] = n * n
		}
		for k := j; k >= 0; k-- { // carry the sums one level up
			up := make([]float64, len(counts[k]))
			for g, p := range d.parent[k] {
				up[p] += sum[g]
			}
			for g, n := range counts[k] {
				s[k][j] += up[g] / n
			}
			sum = up
		}
	}
	for k := range s { // dice: one for each group
		s[k][levels] = float64(d.groups(k - 1))
	}
	return s
}

// between is the sum of squares of level k about the level above.
func (d *Design) between(k int, counts, means [][]float64) float64 {
	if k == len(d.parent) {
		_, within := d.total()
		return within
	}
	ss := 0.0
	for g, p := range d.parent[k] {
		e := means[k+1][g] - means[k][p]
		ss += counts[k+1][g] * e * e
	}
	return ss
}

// moment solves row k for its own component, those further in being known.
func (d *Design) moment(rows []Row, k int, confidence float64) stats.Interval {
	r := rows[k]
	switch {
	case d.N == 0:
		return stats.NoInterval("no readings")
	case d.infinite:
		return stats.NoInterval("an infinite reading")
	case r.DF == 0:
		return stats.NoInterval(d.aliased(k))
	}
	// The component is a combination of mean squares, found by writing those
	// further in as combinations too.
	weight := d.combination(rows, k)
	if weight == nil {
		return stats.NoInterval("a level further in has no estimate")
	}
	iv := stats.Interval{Method: "modified large-sample"}
	var pooled, spread float64
	for j := k; j < len(rows); j++ {
		part := weight[j] * rows[j].MS
		iv.Estimate += part
		if j > k {
			pooled -= part
			spread += part * part / float64(rows[j].DF)
		}
	}
	alpha := (1 - confidence) / 2
	df := float64(r.DF)
	if k == len(rows)-1 {
		iv.Method = "chi-square"
		iv.Lower = r.SS / distuv.ChiSquared{K: df}.Quantile(1-alpha)
		iv.Upper = r.SS / distuv.ChiSquared{K: df}.Quantile(alpha)
		return iv
	}
	iv.Lower, iv.Upper = difference(weight[k]*r.MS, df, pooled, pooled*pooled/spread, alpha)
	iv.Lower, iv.Upper = math.Max(0, iv.Lower), math.Max(0, iv.Upper)
	if iv.Estimate < 0 {
		iv.Why = "negative: groups of this level differ no more than those within them explain"
	}
	return iv
}

// combination is component k as a combination of mean squares.
func (d *Design) combination(rows []Row, k int) []float64 {
	weight := make([]float64, len(rows))
	weight[k] = 1 / rows[k].Coefficient[k]
	for j := k + 1; j < len(rows); j++ {
		if rows[k].Coefficient[j] == 0 {
			continue
		}
		if rows[j].DF == 0 {
			return nil
		}
		for i, w := range d.combination(rows, j) {
			weight[i] -= w * rows[k].Coefficient[j] / rows[k].Coefficient[k]
		}
	}
	return weight
}

func (d *Design) aliased(k int) string {
	switch {
	case k == 0:
		return "one " + d.names[0] + " only"
	case k == len(d.parent):
		return "one reading in each " + d.names[k-1]
	}
	return "one " + d.names[k] + " in each " + d.names[k-1]
}

// difference is the interval of a - b for independent mean squares, scaled, with
// their degrees of freedom, risking alpha on each side (Burdick and Graybill
// 1992, eq. 3.3.1 and 3.3.2, for c1 S1^2 - c2 S2^2; from memory).
func difference(a, n1, b, n2, alpha float64) (lower, upper float64) {
	if !(b > 0) || !(n2 > 0) {
		b, n2 = 0, 1e9
	}
	f := func(p, m, n float64) float64 { return distuv.F{D1: m, D2: n}.Quantile(p) }
	over := func(p, n float64) float64 { return distuv.ChiSquared{K: n}.Quantile(p) / n } // F(n, inf)
	side := func(p float64) (g1, h2, g12 float64) {
		F := f(p, n1, n2)
		g1 = 1 - 1/over(p, n1)
		h2 = 1/over(1-p, n2) - 1
		return g1, h2, ((F-1)*(F-1) - g1*g1*F*F - h2*h2) / F
	}
	g, h, gh := side(1 - alpha)
	lower = a - b - math.Sqrt(math.Max(0, g*g*a*a+h*h*b*b+gh*a*b))
	// The upper limit has the two swapped: h for a, g for b.
	F := f(alpha, n1, n2)
	h = 1/over(alpha, n1) - 1
	g = 1 - 1/over(1-alpha, n2)
	gh = ((1-F)*(1-F) - h*h*F*F - g*g) / F
	upper = a - b + math.Sqrt(math.Max(0, h*h*a*a+g*g*b*b+gh*a*b))
	return lower, upper
}

func checkConfidence(c float64) {
	if !(c > 0 && c < 1) {
		panic("stats/variance: confidence outside (0, 1)")
	}
}
