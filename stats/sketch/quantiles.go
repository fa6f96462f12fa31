package sketch

import (
	"math"
	"slices"
)

// Quantiles counts readings in buckets. An octave (from a power of two to the next)
// has 2^bits buckets of equal width, so a bucket is at most 2^-bits of its lower
// edge wide, and its middle within 2^-(bits+1) of every reading in it. Octaves
// without readings take no memory; one with readings takes 8 * 2^bits bytes.
//
// Zeros, infinities and extremes are kept exactly. Readings closer to zero than
// 2.2e-308, where floating point itself loses digits, count as zero.
type Quantiles struct {
	bits               int
	n, missing         int
	zero, below, above int // zeros, and infinities
	min, max           float64
	positive, negative map[uint16][]int // counts by octave (the float's exponent bits)
}

// New makes an empty sketch with the given bits a bucket, from 3 to 14: 10 make
// the error bound 0.05 % of the value, and hold a breakdown voltage in 8 to 16
// kilobytes. It panics on others.
func New(bits int) *Quantiles {
	if bits < 3 || bits > 14 {
		panic("stats/sketch: bits outside 3 to 14")
	}
	return &Quantiles{bits: bits, min: math.Inf(1), max: math.Inf(-1),
		positive: map[uint16][]int{}, negative: map[uint16][]int{}}
}

const smallestNormal = 0x1p-1022

// AddAll takes readings. Most follow one in the same octave, whose counts are kept
// at hand.
func (q *Quantiles) AddAll(x []float64) {
	var at uint64 // sign and exponent of the page at hand; 0 is none
	var page []int
	for _, v := range x {
		if top := math.Float64bits(v) >> 52; top == at && at != 0 {
			page[q.place(v)]++
			q.n++
			q.min, q.max = min(q.min, v), max(q.max, v)
		} else {
			q.Add(v)
			if octave := uint16(top & 2047); octave != 0 && octave != 2047 {
				at, page = top, q.page(v < 0, octave)
			}
		}
	}
}

// Add takes one reading.
func (q *Quantiles) Add(x float64) {
	if x != x {
		q.missing++
		return
	}
	x = flush(x)
	q.n++
	q.min, q.max = min(q.min, x), max(q.max, x)
	size := math.Abs(x)
	switch {
	case x == 0:
		q.zero++
	case math.IsInf(x, 1):
		q.above++
	case math.IsInf(x, -1):
		q.below++
	default:
		q.page(x < 0, uint16(math.Float64bits(size)>>52))[q.place(size)]++
	}
}

// flush makes zero of what counts as zero.
func flush(x float64) float64 {
	if math.Abs(x) < smallestNormal {
		return 0
	}
	return x
}

// place is the bucket of a size within its octave: its leading bits.
func (q *Quantiles) place(size float64) int {
	return int(math.Float64bits(size) & (1<<52 - 1) >> (52 - q.bits))
}

func (q *Quantiles) page(negative bool, octave uint16) []int {
	pages := q.positive
	if negative {
		pages = q.negative
	}
	p := pages[octave]
	if p == nil {
		p = make([]int, 1<<q.bits)
		pages[octave] = p
	}
	return p
}

// middle is the middle of a bucket.
func (q *Quantiles) middle(octave uint16, place int) float64 {
	width := uint64(1) << (52 - q.bits)
	return math.Float64frombits(uint64(octave)<<52 + uint64(place)*width + width/2)
}

// edges are the ends of a bucket, the upper one not in it.
func (q *Quantiles) edges(octave uint16, place int) (lower, upper float64) {
	width := uint64(1) << (52 - q.bits)
	b := uint64(octave)<<52 + uint64(place)*width
	return math.Float64frombits(b), math.Float64frombits(b + width)
}

// Count is the number of readings that are not missing.
func (q *Quantiles) Count() int { return q.n }

// Missing is the number of NaNs.
func (q *Quantiles) Missing() int { return q.missing }

// Min and Max are the extremes, exact; NaN with no reading.
func (q *Quantiles) Min() float64 {
	if q.n == 0 {
		return math.NaN()
	}
	return q.min
}

// Max: see Min.
func (q *Quantiles) Max() float64 {
	if q.n == 0 {
		return math.NaN()
	}
	return q.max
}

// ErrorBound is 2^-(bits+1): an order statistic x comes back within ErrorBound*|x|.
func (q *Quantiles) ErrorBound() float64 { return math.Ldexp(1, -q.bits-1) }

// Merge adds the readings of o, which is left as it is. The result is that of all
// readings added to one sketch, in any order; with sketches of different bits, to
// one of the fewer bits.
func (q *Quantiles) Merge(o *Quantiles) {
	if o.bits < q.bits {
		*q = *q.coarser(o.bits)
	} else if o.bits > q.bits {
		o = o.coarser(q.bits)
	}
	q.n += o.n
	q.missing += o.missing
	q.zero += o.zero
	q.below += o.below
	q.above += o.above
	q.min, q.max = math.Min(q.min, o.min), math.Max(q.max, o.max)
	for _, side := range []bool{false, true} {
		pages := o.positive
		if side {
			pages = o.negative
		}
		for octave, page := range pages { // any order: sums of whole numbers
			to := q.page(side, octave)
			for i, n := range page {
				to[i] += n
			}
		}
	}
}

// coarser is a copy with fewer bits: neighbouring buckets joined.
func (q *Quantiles) coarser(bits int) *Quantiles {
	c := New(bits)
	c.n, c.missing, c.zero, c.below, c.above, c.min, c.max = q.n, q.missing, q.zero, q.below, q.above, q.min, q.max
	for _, side := range []bool{false, true} {
		pages := q.positive
		if side {
			pages = q.negative
		}
		for octave, page := range pages {
			to := c.page(side, octave)
			for i, n := range page {
				to[i>>(q.bits-bits)] += n
			}
		}
	}
	return c
}

// bucket is a value that stands for a number of readings.
type bucket struct {
	value, lower, upper float64
	n                   int
}

// buckets lists what is not empty in ascending order.
func (q *Quantiles) buckets() []bucket {
	var out []bucket
	if q.below > 0 {
		out = append(out, bucket{math.Inf(-1), math.Inf(-1), math.Inf(-1), q.below})
	}
	octaves := sortedOctaves(q.negative)
	slices.Reverse(octaves)
	for _, o := range octaves {
		page := q.negative[o]
		for i := len(page) - 1; i >= 0; i-- {
			if page[i] > 0 {
				lo, hi := q.edges(o, i)
				out = append(out, bucket{-q.middle(o, i), -hi, -lo, page[i]})
			}
		}
	}
	if q.zero > 0 {
		out = append(out, bucket{0, 0, 0, q.zero})
	}
	for _, o := range sortedOctaves(q.positive) {
		for i, n := range q.positive[o] {
			if n > 0 {
				lo, hi := q.edges(o, i)
				out = append(out, bucket{q.middle(o, i), lo, hi, n})
			}
		}
	}
	if q.above > 0 {
		out = append(out, bucket{math.Inf(1), math.Inf(1), math.Inf(1), q.above})
	}
	return out
}

func sortedOctaves(pages map[uint16][]int) []uint16 {
	out := make([]uint16, 0, len(pages))
	for o := range pages {
		out = append(out, o)
	}
	slices.Sort(out)
	return out
}
