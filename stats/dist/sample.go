package dist

import (
	"cmp"
	"math"
	"slices"

	"kneepoint/stats"
)

// sample is a data set reduced to what the likelihood needs: the exact readings
// or their moments, and how often each bound occurs.
type sample struct {
	exact  exact
	bounds map[bound]int
	list   []counted
	// seen is where readings were kept, the truncation; the zero value for all.
	seen bound
	// kernel is the standard distribution; values are the exact readings, for one
	// that needs more of them than moments.
	kernel kernel
	values []float64
}

type bound struct{ lo, hi float64 }

type counted struct {
	bound
	n float64
}

// newSample reduces readings marked as in [FitNormal].
func newSample(x []float64, censor []int8) *sample {
	s := sample{kernel: normalKernel}
	s.exact.start(x, censor)
	for i, v := range x {
		switch {
		case v != v:
		case censor == nil || censor[i] == 0:
			s.exact.add(v)
		case censor[i] > 0:
			s.bound(v, math.Inf(1))
		default:
			s.bound(math.Inf(-1), v)
		}
	}
	return &s
}

// newSampleBetween reduces readings known to lie between limits.
func newSampleBetween(lower, upper []float64) *sample {
	s := sample{kernel: normalKernel}
	only := make([]float64, 0, len(lower))
	for i, a := range lower {
		b := upper[i]
		switch {
		case a != a || b != b:
		case a > b:
			panic("stats/dist: lower limit above upper limit")
		case a == b:
			only = append(only, a)
		default:
			s.bound(a, b)
		}
	}
	s.exact.start(only, nil)
	for _, v := range only {
		s.exact.add(v)
	}
	return &s
}

// byBound orders bounds, so that sums over them run in a fixed order.
func byBound(a, b counted) int {
	return cmp.Or(cmp.Compare(a.lo, b.lo), cmp.Compare(a.hi, b.hi))
}

func (s *sample) bound(lo, hi float64) {
	if s.bounds == nil {
		s.bounds = map[bound]int{}
	}
	s.bounds[bound{lo, hi}]++
}

// exact holds count, mean and sum of squares about it.
type exact struct {
	n           int
	mean, ss    float64
	centre, sum float64
	square      float64
	min, max    float64
}

// start takes the mean first, so that add can sum squares about it.
func (e *exact) start(x []float64, censor []int8) {
	if censor == nil {
		e.centre = stats.Mean(x)
	} else {
		only := make([]float64, 0, len(x))
		for i, v := range x {
			if censor[i] == 0 {
				only = append(only, v)
			}
		}
		e.centre = stats.Mean(only)
	}
	e.min, e.max = math.Inf(1), math.Inf(-1)
}

func (e *exact) add(v float64) {
	d := v - e.centre
	e.n++
	e.sum += d
	e.square += float64(d * d)
	e.min, e.max = min(e.min, v), max(e.max, v)
}

func (e *exact) finish() {
	if e.n == 0 {
		return
	}
	n := float64(e.n)
	e.mean = e.centre + e.sum/n
	e.ss = math.Max(0, e.square-e.sum*e.sum/n)
	if e.min == e.max {
		e.mean, e.ss = e.min, 0
	}
}

// finish makes the list of bounds and counts what there is.
func (s *sample) finish() (c Counts, err error) {
	s.exact.finish()
	c.N = s.exact.n
	for b, n := range s.bounds {
		s.list = append(s.list, counted{b, float64(n)})
		c.N += n
		switch {
		case math.IsInf(b.lo, -1) && math.IsInf(b.hi, 1):
			c.N -= n // says nothing
		case math.IsInf(b.lo, -1):
			c.Left += n
		case math.IsInf(b.hi, 1):
			c.Right += n
		default:
			c.Between += n
		}
	}
	s.list = slices.DeleteFunc(s.list, func(c counted) bool {
		return math.IsInf(c.lo, -1) && math.IsInf(c.hi, 1)
	})
	slices.SortFunc(s.list, byBound)
	if c.N == 0 {
		return c, ErrNoValues
	}
	if err := s.check(); err != nil {
		return c, err
	}
	return c, s.truncate(float64(c.N))
}

func (s *sample) check() error {
	if math.IsInf(s.exact.min, -1) && s.exact.n > 0 || math.IsInf(s.exact.max, 1) && s.exact.n > 0 {
		return ErrInfinite
	}
	for _, c := range s.list {
		if math.IsInf(c.lo, 1) || math.IsInf(c.hi, -1) {
			return ErrInfinite
		}
	}
	between := false
	for _, c := range s.list {
		between = between || !math.IsInf(c.lo, 0) && !math.IsInf(c.hi, 0)
	}
	if !(s.exact.ss > 0) && !between {
		return ErrTooFew
	}
	return nil
}

// truncate says that only readings within seen were kept: each bound is cut to
// them, and each reading's probability is divided by theirs, which is a bound
// that counts negatively.
func (s *sample) truncate(n float64) error {
	if !s.truncated() {
		return nil
	}
	if s.exact.n > 0 && (s.exact.min < s.seen.lo || s.exact.max > s.seen.hi) {
		return ErrOutside
	}
	for i, c := range s.list {
		c.lo, c.hi = math.Max(c.lo, s.seen.lo), math.Min(c.hi, s.seen.hi)
		if c.lo >= c.hi {
			return ErrOutside
		}
		s.list[i] = c
	}
	s.list = append(s.list, counted{s.seen, -n})
	return nil
}

func (s *sample) truncated() bool {
	open := math.IsInf(s.seen.lo, -1) && math.IsInf(s.seen.hi, 1)
	return s.seen != (bound{}) && !open
}

// scale gives location and spread of all readings taken at face value; the
// search works in these units, whether the readings are volts or picoamperes.
func (s *sample) scale() (centre, unit float64) {
	face := make([]counted, 0, len(s.list))
	n := float64(s.exact.n)
	sum := n * s.exact.mean
	width := 0.0
	for _, c := range s.list {
		if c.n < 0 {
			continue
		}
		at := c.lo
		if math.IsInf(c.lo, -1) {
			at = c.hi
		} else if !math.IsInf(c.hi, 1) {
			at = c.lo + (c.hi-c.lo)/2
			width = math.Max(width, c.hi-c.lo)
		}
		face = append(face, counted{bound{at, at}, c.n})
		n += c.n
		sum += c.n * at
	}
	centre = sum / n
	ss := s.exact.ss
	if s.exact.n > 0 {
		ss += float64(s.exact.n) * (s.exact.mean - centre) * (s.exact.mean - centre)
	}
	for _, c := range face {
		ss += c.n * (c.lo - centre) * (c.lo - centre)
	}
	unit = math.Sqrt(ss / n)
	if !(unit > 0) {
		unit = width
	}
	return centre, unit
}
