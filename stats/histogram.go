package stats

import "math"

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
