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
//   - Range. The bins cover the data or, when these reach further, five
//     interquartile ranges below the first and above the third quartile (a normal
//     population has one value in 10^13 beyond); a shorted die must not squeeze
//     all others into one bin. Where the outermost 1 % or 0.1 % end within as far
//     again, they are covered too: a second population. [Bins.Count] counts what
//     lies outside.
//   - Resolution. Readings come in steps of the tester. A width that is no whole
//     multiple of the step gives bins that hold, say, two and three steps in
//     turn: a comb that is not in the data. So the width is rounded to whole
//     steps, at least one, and edges lie halfway between two readings.
//   - No IQR. When half of the readings are equal the width is Scott's,
//     3.49 * sd * n^(-1/3); constant readings get a single bin.
//   - Skewed positive data (leakage) get bins of the logarithm: where the middle
//     90 % of the values lie much further above the median than below, and their
//     logarithms do not; unless the resolution is too coarse for that.
//   - More than maxBins bins are made wider to fit.
//
// NaNs and infinities are left out of the choice. With no value Edges is nil.
// It panics on a maxBins below 1.
//
// Sources: Freedman and Diaconis 1981, Z. Wahrsch. verw. Gebiete 57, 453-476;
// Scott 1979, Biometrika 66, 605-610. The rest is ours.
func FreedmanDiaconis(x []float64, maxBins int) Bins {
	var s Selector
	return s.FreedmanDiaconis(x, maxBins)
}

// FreedmanDiaconis is as the function [FreedmanDiaconis].
func (s *Selector) FreedmanDiaconis(x []float64, maxBins int) Bins {
	if maxBins < 1 {
		panic("stats: maxBins below 1")
	}
	c := chooser{x: x, maxBins: maxBins}
	if !c.look(s) {
		return Bins{Rule: "no values"}
	}
	if math.IsInf(c.hi-c.lo, 0) {
		return Bins{Edges: []float64{c.lo, c.hi}, Rule: "one bin: the range is beyond all numbers"}
	}
	if c.lo == c.hi {
		return single(c.lo, "one bin: all values are equal")
	}
	if c.skewed() {
		if b, ok := c.logBins(c.grid()); ok {
			return b
		}
	}
	return c.linearBins(c.grid())
}

// chooser holds what the choice of bins rests on.
type chooser struct {
	x        []float64
	maxBins  int
	n        int // finite values
	lo, hi   float64
	mean, sd float64
	q        [9]float64 // quantiles of binProbs
}

var binProbs = []float64{0.001, 0.01, 0.05, 0.25, 0.5, 0.75, 0.95, 0.99, 0.999}

// look takes the measures of x; false when it holds no finite value.
func (c *chooser) look(s *Selector) bool {
	v := c.x
	for _, y := range c.x {
		if math.IsInf(y, 0) {
			v = finiteOnly(c.x)
			break
		}
	}
	m := MomentsOf(v)
	if m.N == 0 {
		return false
	}
	c.n, c.lo, c.hi, c.mean, c.sd = m.N, m.Min, m.Max, m.Mean, m.SD()
	copy(c.q[:], s.Quantiles(v, binProbs, HyndmanFan8))
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

func single(v float64, rule string) Bins {
	half := math.Max(math.Abs(v)*0x1p-20, math.SmallestNonzeroFloat64*4)
	return Bins{Edges: []float64{v - half, v + half}, Rule: rule}
}

// skewed reports whether the logarithm suits the data better. The measure is
// (upper - lower)/(upper + lower) of the distances from the median to the 95 %
// and the 5 % quantile.
func (c *chooser) skewed() bool {
	if !(c.lo > 0) {
		return false
	}
	skew := func(a, m, b float64) float64 { return ((b - m) - (m - a)) / (b - a) }
	linear := skew(c.q[2], c.q[4], c.q[6])
	log := skew(math.Log(c.q[2]), math.Log(c.q[4]), math.Log(c.q[6]))
	return linear > 0.3 && math.Abs(log) < 0.6*linear
}

// scale holds the measures that the choice takes from either scale.
type scale struct {
	lo, hi   float64
	q        [9]float64
	mean, sd float64
}

// width is the rule's.
func (c *chooser) width(s scale) (w float64, rule string) {
	cube := math.Cbrt(float64(c.n))
	if iqr := s.q[5] - s.q[3]; iqr > 0 {
		return 2 * iqr / cube, "Freedman-Diaconis width"
	}
	return 3.49 * s.sd / cube, "Scott's width (half of the values are equal)"
}

// span is the range that the bins cover.
func (s scale) span() (from, to float64) {
	q25, q75 := s.q[3], s.q[5]
	reach := 5 * (q75 - q25)
	if reach == 0 {
		q25, q75, reach = s.mean, s.mean, 5*s.sd
	}
	from, to = math.Max(s.lo, q25-reach), math.Min(s.hi, q75+reach)
	wide := to - from
	for _, i := range []int{1, 0} { // 1 %, 0.1 %
		if q := s.q[i]; q < from && q >= q25-reach-wide {
			from = q
		}
		if q := s.q[8-i]; q > to && q <= q75+reach+wide {
			to = q
		}
	}
	return from, to
}

// inside returns the extreme values between from and to, so that no bins are
// spent on an empty margin.
func (c *chooser) inside(from, to float64) (lo, hi float64) {
	lo, hi = math.Inf(1), math.Inf(-1)
	for _, v := range c.x {
		if v >= from && v <= to {
			lo, hi = min(lo, v), max(hi, v)
		}
	}
	return lo, hi
}

func (c *chooser) linearBins(g grid) Bins {
	s := scale{c.lo, c.hi, c.q, c.mean, c.sd}
	w, rule := c.width(s)
	from, to := c.inside(s.span())
	if from == to {
		return single(from, "one bin: nearly all values are equal")
	}
	b := Bins{}
	if g.step > 0 {
		b.Edges, rule = c.gridEdges(g, from, to, w, rule)
	} else {
		b.Edges, rule = c.plainEdges(from, to, w, rule)
	}
	if from > c.lo || to < c.hi {
		rule += ", over the central range"
	}
	b.Rule = rule
	return b
}

// gridEdges lays bins of whole steps, edges halfway between readings.
func (c *chooser) gridEdges(g grid, from, to, w float64, rule string) ([]float64, string) {
	first := math.Ceil((from-g.origin)/g.step - 1e-6)
	last := math.Floor((to-g.origin)/g.step + 1e-6)
	steps := last - first + 1
	per := math.Max(1, math.Round(w/g.step))
	rule += fmt.Sprintf(" in whole steps of the readings (%.0f)", per)
	if least := math.Ceil(steps / float64(c.maxBins)); per < least {
		per = least
		rule += fmt.Sprintf(", widened to %.0f to fit %d bins", per, c.maxBins)
	}
	edges := make([]float64, int(math.Ceil(steps/per))+1)
	for i := range edges {
		edges[i] = g.origin + (first+float64(i)*per-0.5)*g.step
	}
	return edges, rule
}

func (c *chooser) plainEdges(from, to, w float64, rule string) ([]float64, string) {
	if least := (to - from) / float64(c.maxBins); w < least {
		w, rule = least, rule+fmt.Sprintf(", widened to fit %d bins", c.maxBins)
	}
	return equalEdges(from, to, binsFor(to-from, w, c.maxBins)), rule
}

// logBins are equal steps of the logarithm. They are not laid when a bin at the
// first quartile would hold fewer than two steps of the readings: those of the
// logarithm cannot all hold as many.
func (c *chooser) logBins(g grid) (Bins, bool) {
	s := scale{lo: math.Log(c.lo), hi: math.Log(c.hi)}
	for i, q := range c.q {
		s.q[i] = math.Log(q)
	}
	w, rule := c.width(s)
	from, to := s.span()
	// The slack takes up the rounding of the logarithm at an extreme.
	from, to = c.inside(math.Exp(from)*(1-1e-12), math.Exp(to)*(1+1e-12))
	if from == to {
		return Bins{}, false
	}
	edges, rule := c.plainEdges(math.Log(from), math.Log(to), w, rule+" of the logarithm")
	if w = edges[1] - edges[0]; 2*g.step > c.q[3]*w {
		return Bins{}, false
	}
	for i := range edges {
		edges[i] = math.Exp(edges[i])
	}
	edges[0], edges[len(edges)-1] = from, to
	if from > c.lo || to < c.hi {
		rule += ", over the central range"
	}
	return Bins{Edges: edges, Log: true, Rule: rule}, true
}

// grid is the lattice of the readings within the quantiles that hold 99.8 %.
func (c *chooser) grid() grid { return findGrid(c.x, c.q[0], c.q[8]) }

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
	return slices.Compact(edges) // a range of a few float64 numbers has no more edges
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
	least = math.Max(least, math.Max(64*noise, 0x1p-1000))         // subnormal numbers cannot be halved
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
