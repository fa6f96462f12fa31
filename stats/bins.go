package stats

import (
	"fmt"
	"math"
	"slices"
)

// Bins are the bins of a histogram: bin i is [Edges[i], Edges[i+1]), the last
// one is closed. With Log the edges are equal steps of the logarithm.
type Bins struct {
	Edges []float64
	Log   bool
	Rule  string // how the bins were chosen, for the reader
}

// FreedmanDiaconis chooses at most maxBins bins for the values of x: width
//
//	2 * IQR * n^(-1/3)
//
// with the following care, each step of which Rule tells:
//
//   - Range. The bins cover the data or, when they reach further, five
//     interquartile ranges below the first and above the third quartile (a normal
//     population has one value in 10^13 beyond); a shorted die must not squeeze
//     all others into one bin. [Bins.Count] counts what lies outside.
//   - Resolution. Readings come in steps of the tester. A width that is no whole
//     multiple of the step gives bins that hold, say, two and three steps in
//     turn: a comb that is not in the data. So the width is rounded to whole
//     steps, at least one, and edges lie halfway between two readings.
//   - No IQR. When half of the readings are equal the width is Scott's,
//     3.49 * sd * n^(-1/3); constant readings get a single bin.
//   - Skewed positive data (leakage) get bins of the logarithm: where the middle
//     90 % of the values lie much further above the median than below, and their
//     logarithms do not.
//   - More than maxBins bins are made wider to fit.
//
// NaNs and infinities are left out of the choice. With no value Edges is nil.
// It panics on a maxBins below 1.
//
// Sources: Freedman and Diaconis 1981, Z. Wahrsch. verw. Gebiete 57, 453-476;
// Scott 1979, Biometrika 66, 605-610. The rest is ours.
func FreedmanDiaconis(x []float64, maxBins int) Bins {
	if maxBins < 1 {
		panic("stats: maxBins below 1")
	}
	c := chooser{maxBins: maxBins}
	if !c.look(x) {
		return Bins{Rule: "no values"}
	}
	if c.lo == c.hi {
		return c.single()
	}
	if c.skewed() {
		return c.logBins()
	}
	return c.linearBins(x)
}

// chooser holds what the choice of bins rests on.
type chooser struct {
	maxBins    int
	n          int // finite values
	lo, hi     float64
	q          [5]float64 // quantiles of binProbs
	mean, sd   float64
	belowCount int
}

var binProbs = []float64{0.05, 0.25, 0.5, 0.75, 0.95}

// look takes the measures of x; false when it holds no finite value.
func (c *chooser) look(x []float64) bool {
	v := x
	for _, y := range x {
		if math.IsInf(y, 0) {
			v = finiteOnly(x)
			break
		}
	}
	m := MomentsOf(v)
	if m.N == 0 {
		return false
	}
	c.n, c.lo, c.hi, c.mean, c.sd = m.N, m.Min, m.Max, m.Mean, m.SD()
	copy(c.q[:], Quantiles(v, binProbs, HyndmanFan8))
	return true
}

func finiteOnly(x []float64) []float64 {
	out := make([]float64, 0, len(x))
	for _, v := range x {
		if v == v && !math.IsInf(v, 0) {
			out = append(out, v)
		}
	}
	return out
}

func (c *chooser) single() Bins {
	half := math.Max(math.Abs(c.lo)*0x1p-20, math.SmallestNonzeroFloat64*4)
	return Bins{Edges: []float64{c.lo - half, c.lo + half}, Rule: "one bin: all values are equal"}
}

// skewed reports whether the logarithm suits the data better. The measure is
// the octile-like skewness (upper - lower)/(upper + lower) of the distances from
// the median to the 5 % and 95 % quantiles.
func (c *chooser) skewed() bool {
	if !(c.lo > 0) {
		return false
	}
	skew := func(a, m, b float64) float64 { return ((b - m) - (m - a)) / (b - a) }
	linear := skew(c.q[0], c.q[2], c.q[4])
	log := skew(math.Log(c.q[0]), math.Log(c.q[2]), math.Log(c.q[4]))
	return linear > 0.3 && math.Abs(log) < 0.6*linear
}

// width gives the rule's width for quartiles and sd on the scale in use.
func (c *chooser) width(q1, q3, sd float64) (w float64, rule string) {
	cube := math.Cbrt(float64(c.n))
	if iqr := q3 - q1; iqr > 0 {
		return 2 * iqr / cube, "Freedman-Diaconis"
	}
	return 3.49 * sd / cube, "Scott, as half of the values are equal"
}

// fence returns the range that the bins cover.
func fence(lo, hi, q1, q3, mean, sd float64) (from, to float64, cut bool) {
	reach := 5 * (q3 - q1)
	if reach == 0 {
		q1, q3, reach = mean, mean, 5*sd
	}
	from, to = math.Max(lo, q1-reach), math.Min(hi, q3+reach)
	return from, to, from > lo || to < hi
}

func (c *chooser) linearBins(x []float64) Bins {
	w, rule := c.width(c.q[1], c.q[3], c.sd)
	from, to, cut := fence(c.lo, c.hi, c.q[1], c.q[3], c.mean, c.sd)
	rule += " width"
	if least := (to - from) / float64(c.maxBins); w < least {
		w, rule = least, rule+fmt.Sprintf(", widened to %d bins", c.maxBins)
	}
	var edges []float64
	if g := findGrid(x, from, to); g.step > 0 {
		edges, rule = c.gridEdges(g, from, to, w, rule)
	} else {
		edges = equalEdges(from, to, binsFor(to-from, w, c.maxBins))
	}
	if cut {
		rule += ", over the central range"
	}
	return Bins{Edges: edges, Rule: rule}
}

// gridEdges lays bins of whole steps, edges halfway between readings.
func (c *chooser) gridEdges(g grid, from, to, w float64, rule string) ([]float64, string) {
	first := math.Ceil((from-g.origin)/g.step - 1e-6)
	last := math.Floor((to-g.origin)/g.step + 1e-6)
	steps := last - first + 1
	per := math.Max(1, math.Round(w/g.step))
	if least := math.Ceil(steps / float64(c.maxBins)); per < least {
		per = least
	}
	bins := int(math.Ceil(steps / per))
	edges := make([]float64, bins+1)
	for i := range edges {
		edges[i] = g.origin + (first+float64(i)*per-0.5)*g.step
	}
	if per == 1 {
		return edges, rule + ", taken as one step of the readings"
	}
	return edges, rule + fmt.Sprintf(", rounded to %.0f steps of the readings", per)
}

func (c *chooser) logBins() Bins {
	q1, q3 := math.Log(c.q[1]), math.Log(c.q[3])
	w, rule := c.width(q1, q3, 0)
	from, to, cut := fence(math.Log(c.lo), math.Log(c.hi), q1, q3, 0, 0)
	rule += " width of the logarithm"
	if least := (to - from) / float64(c.maxBins); w < least {
		w, rule = least, rule+fmt.Sprintf(", widened to %d bins", c.maxBins)
	}
	edges := equalEdges(from, to, binsFor(to-from, w, c.maxBins))
	for i := range edges {
		edges[i] = math.Exp(edges[i])
	}
	last := len(edges) - 1
	if !cut { // the logarithm's rounding must not push an extreme outside
		edges[0], edges[last] = math.Min(edges[0], c.lo), math.Max(edges[last], c.hi)
	} else {
		rule += ", over the central range"
	}
	return Bins{Edges: edges, Log: true, Rule: rule}
}

func binsFor(span, w float64, maxBins int) int {
	return int(math.Min(math.Max(math.Ceil(span/w-1e-9), 1), float64(maxBins)))
}

func equalEdges(from, to float64, bins int) []float64 {
	edges := make([]float64, bins+1)
	for i := range edges {
		f := float64(i) / float64(bins)
		edges[i] = float64((1-f)*from) + float64(f*to)
	}
	edges[0], edges[bins] = from, to
	return edges
}

// Count counts the values of x into the bins, and those below the first and
// above the last edge. NaNs are skipped. Bins without edges count every value as
// above.
func (b Bins) Count(x []float64) (counts []int, below, above int) {
	c := b.counter()
	for _, v := range x {
		c.add(v)
	}
	return c.counts, c.below, c.above
}

// CountBy is as [Bins.Count] in two histograms at once: of the values whose
// second[i] is false, and of those where it is true (passing and failing dice).
// Values outside the edges are counted together. It panics when the lengths
// differ.
func (b Bins) CountBy(x []float64, second []bool) (first, other []int, below, above int) {
	if len(x) != len(second) {
		panic("stats: slice length mismatch")
	}
	c := b.counter()
	d := c
	d.counts = make([]int, len(c.counts))
	for i, v := range x {
		if second[i] {
			d.add(v)
		} else {
			c.add(v)
		}
	}
	return c.counts, d.counts, c.below + d.below, c.above + d.above
}

type counter struct {
	edges        []float64
	log          bool
	origin, rate float64
	counts       []int
	below, above int
}

func (b Bins) counter() counter {
	n := len(b.Edges) - 1
	if n < 1 {
		return counter{}
	}
	c := counter{edges: b.Edges, log: b.Log, counts: make([]int, n)}
	lo, hi := b.Edges[0], b.Edges[n]
	if b.Log {
		lo, hi = math.Log(lo), math.Log(hi)
	}
	c.origin, c.rate = lo, float64(n)/(hi-lo)
	return c
}

// add guesses the bin from the spacing and then lets the edges decide, so that
// a value on an edge is always in the bin above it.
func (c *counter) add(v float64) {
	n := len(c.counts)
	switch {
	case v != v:
		return
	case n == 0 || v > c.edges[n]:
		c.above++
		return
	case v < c.edges[0]:
		c.below++
		return
	}
	at := v
	if c.log {
		at = math.Log(v)
	}
	i := min(max(int((at-c.origin)*c.rate), 0), n-1)
	for i > 0 && v < c.edges[i] {
		i--
	}
	for i < n-1 && v >= c.edges[i+1] {
		i++
	}
	c.counts[i]++
}

// grid is a regular lattice origin + k*step that the readings lie on.
type grid struct{ origin, step float64 }

// findGrid looks for the step of the readings between from and to. It takes an
// evenly spread sample of them, since every subset of a lattice lies on it, and
// looks for the greatest common divisor of the gaps. A step below a hundred
// thousandth of the range makes no comb and is not looked for: step 0.
func findGrid(x []float64, from, to float64) grid {
	const sample = 2048
	v := make([]float64, 0, sample+1)
	stride := max(1, len(x)/sample)
	for i := 0; i < len(x); i += stride {
		if x[i] >= from && x[i] <= to {
			v = append(v, x[i])
		}
	}
	slices.Sort(v)
	v = slices.Compact(v)
	if len(v) < 2 {
		return grid{}
	}
	least := (to - from) / 1e5
	noise := 16 * 0x1p-52 * math.Max(math.Abs(from), math.Abs(to)) // of decimal fractions in binary
	least = math.Max(least, 64*noise)
	var step float64
	for i := 1; i < len(v); i++ {
		if gap := v[i] - v[i-1]; gap > noise {
			step = commonStep(step, gap, least/4)
			if step < least {
				return grid{}
			}
		}
	}
	if step == 0 {
		return grid{}
	}
	// Average the rounding of single readings out of the step.
	span := v[len(v)-1] - v[0]
	step = span / math.Round(span/step)
	return grid{origin: v[0], step: step}
}

// commonStep is the greatest common divisor of two lengths that carry noise.
func commonStep(a, b, noise float64) float64 {
	for b > noise {
		r := math.Abs(a - b*math.Round(a/b))
		a, b = b, r
	}
	return a
}
