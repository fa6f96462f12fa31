package relate

import (
	"cmp"
	"math"
	"math/rand/v2"
	"slices"

	"kneepoint/stats"
	"kneepoint/stats/internal/tail"
)

// Line is a straight line through pairs.
type Line struct {
	Slope stats.Interval // units of y per unit of x
	// Intercept is the median of y - slope x. InterceptOfMedians puts the line
	// through the two medians instead, median(y) - slope median(x).
	Intercept, InterceptOfMedians float64
	N                             int
	Why                           string
}

// TheilSen is the line whose slope is the median of the slopes of all pairs of
// points with different x. It stands 29 % of outliers. Its interval takes the
// slopes at the ranks that Kendall's normal approximation gives (Sen).
//
// The median is exact. Up to 3,000 points all slopes are formed; beyond that the
// slopes up to a candidate are counted in n ln n steps (a pair's slope is below t
// when y - t x puts it out of order), the candidates are closed in on, and only
// the slopes between them are formed.
//
// There is no line with fewer than two different x or a value beyond 1e150.
// Sources: Theil 1950; Sen 1968, J. Amer. Statist. Assoc. 63, 1379-1389.
func TheilSen(x, y []float64, confidence float64) Line {
	checkConfidence(confidence)
	a, b := pairs(x, y)
	l := Line{Slope: stats.NoInterval(""), Intercept: math.NaN(), InterceptOfMedians: math.NaN(), N: len(a)}
	for i := range a {
		if math.Abs(a[i]) > 1e150 || math.Abs(b[i]) > 1e150 {
			l.Why = "an infinite value, or one too large for slopes"
		}
	}
	k := concordance(a, b)
	slopes := int(k.all - k.tiesX)
	if l.Why == "" && slopes == 0 {
		l.Why = "fewer than two different x"
	}
	if l.Why != "" {
		l.Slope.Why = l.Why
		return l
	}
	z := tail.NormalQuantile(0.5+confidence/2) * math.Sqrt(k.variance)
	lower := int(math.RoundToEven((float64(slopes)-z)/2)) - 1
	upper := int(math.RoundToEven((float64(slopes) + z) / 2))
	known := lower >= 0 && upper < slopes
	ranks := []int{(slopes - 1) / 2, slopes / 2}
	if known {
		ranks = append(ranks, lower, upper)
	}
	found := slopesAt(a, b, slopes, ranks)
	s := stats.Interval{Estimate: found[0] + (found[1]-found[0])/2, Lower: math.Inf(-1), Upper: math.Inf(1), Method: "Theil-Sen"}
	if known {
		s.Lower, s.Upper = found[2], found[3]
	} else {
		s.Why = "too few points for an interval"
	}
	l.Slope = s
	rest := make([]float64, len(a))
	for i := range a {
		rest[i] = b[i] - float64(s.Estimate*a[i])
	}
	l.Intercept = stats.Median(rest)
	l.InterceptOfMedians = stats.Median(b) - s.Estimate*stats.Median(a)
	return l
}

// Up to so many points all slopes are formed; so many slopes are at last. Tests
// set them lower.
var (
	fewPoints = 3000
	fewSlopes = int64(4_000_000)
)

// slopesAt returns the slopes of the given ranks (from 0) among all.
func slopesAt(x, y []float64, slopes int, ranks []int) []float64 {
	out := make([]float64, len(ranks))
	if len(x) <= fewPoints {
		all := make([]float64, 0, slopes)
		for i := range x {
			for j := range i {
				if d := x[i] - x[j]; d != 0 {
					all = append(all, (y[i]-y[j])/d)
				}
			}
		}
		all = stats.Sorted(all)
		for i, r := range ranks {
			out[i] = all[r]
		}
		return out
	}
	s := newSlopes(x, y)
	for i, r := range ranks {
		out[i] = s.at(r)
	}
	return out
}

// slopes counts and lists slopes of many points, ordered by x.
type slopes struct {
	x, y   []float64
	z      []float64
	sample []float64 // slopes of pairs drawn at random, ascending
	total  float64
	tried  []counted // ascending
	// list holds slopes in order, the first of them of rank listBelow.
	list      []float64
	listBelow int64
}

func newSlopes(x, y []float64) *slopes {
	s := &slopes{z: make([]float64, len(x))}
	for _, at := range stats.Order(x) {
		s.x, s.y = append(s.x, x[at]), append(s.y, y[at])
	}
	r := rand.New(rand.NewPCG(uint64(len(x)), 1950))
	draw := make([]float64, 0, 200_000)
	for range 200_000 {
		i, j := r.IntN(len(x)), r.IntN(len(x))
		if d := x[i] - x[j]; d != 0 {
			draw = append(draw, (y[i]-y[j])/d)
		}
	}
	s.sample = stats.Sorted(draw)
	s.total = float64(s.upTo(math.Inf(1)))
	return s
}

// upTo counts the slopes that do not exceed t.
func (s *slopes) upTo(t float64) (count int64) {
	n := int64(len(s.x))
	if math.IsInf(t, 1) {
		count = n * (n - 1) / 2
		for i := 0; i < len(s.x); {
			j := s.tie(i)
			m := int64(j - i)
			count -= m * (m - 1) / 2
			i = j
		}
		return count
	}
	// Not above t: z_j <= z_i for i before j. Count the pairs with z_i < z_j and
	// take them off; pairs of one x do not count.
	for i := range s.x {
		s.z[i] = -(s.y[i] - float64(t*s.x[i]))
	}
	var tied int64
	for i := 0; i < len(s.x); {
		j := s.tie(i)
		m := int64(j - i)
		if m > 1 {
			part := append([]float64{}, s.z[i:j]...)
			tied += m*(m-1)/2 - inversions(part)
		}
		i = j
	}
	return n*(n-1)/2 - inversions(s.z) - tied
}

func (s *slopes) tie(i int) int {
	j := i + 1
	for j < len(s.x) && s.x[j] == s.x[i] {
		j++
	}
	return j
}

// at closes in on the slope of rank r.
func (s *slopes) at(r int) float64 {
	rank := int64(r)
	if k := rank - s.listBelow; k >= 0 && k < int64(len(s.list)) {
		return s.list[k]
	}
	// A slope of 0 may hold a large share of the pairs: equal readings.
	if s.count(0) > rank && s.count(math.Nextafter(0, -1)) <= rank {
		return 0
	}
	// The sample first: what it says about the rank, three standard errors to
	// either side, and its ends.
	last := len(s.sample) - 1
	p := float64(r) / s.total
	spread := 3 * math.Sqrt(p*(1-p)*float64(len(s.sample)))
	mid := p * float64(len(s.sample))
	s.count(s.sample[max(0, min(last, int(mid-spread)-2))])
	s.count(s.sample[max(0, min(last, int(mid+spread)+2))])
	lo, hi := s.bracket(rank)
	for step := math.Abs(s.sample[last]) + math.Abs(s.sample[0]) + 1; math.IsInf(lo.t, -1) && step < math.MaxFloat64/2; step *= 2 {
		s.count(-step)
		lo, hi = s.bracket(rank)
	}
	for step := math.Abs(s.sample[last]) + math.Abs(s.sample[0]) + 1; math.IsInf(hi.t, 1) && step < math.MaxFloat64/2; step *= 2 {
		s.count(step)
		lo, hi = s.bracket(rank)
	}
	for hi.count-lo.count > fewSlopes {
		within := hi.count - lo.count
		if hi.t-lo.t <= 1e-15*math.Max(math.Abs(lo.t), math.Abs(hi.t)) {
			return hi.t // that many equal slopes
		}
		// Were the slopes evenly spread, they would be at this part of the way.
		part := float64(rank-lo.count) / float64(within)
		from, to := lo.t, hi.t
		s.count(from + (to-from)*math.Max(0, part-0.02))
		s.count(from + (to-from)*math.Min(1, part+0.02))
		if lo, hi = s.bracket(rank); hi.count-lo.count > within/4 {
			s.count(lo.t + (hi.t-lo.t)/2)
			lo, hi = s.bracket(rank)
		}
	}
	s.list, s.listBelow = stats.Sorted(s.between(lo.t, hi.t, int(hi.count-lo.count))), lo.count
	if k := int(rank - lo.count); k < len(s.list) {
		return s.list[k]
	}
	return hi.t // only by rounding of the counts
}

// counted is the number of slopes up to t.
type counted struct {
	t     float64
	count int64
}

// count is upTo, remembered.
func (s *slopes) count(t float64) int64 {
	i, ok := slices.BinarySearchFunc(s.tried, t, func(c counted, t float64) int { return cmp.Compare(c.t, t) })
	if !ok {
		s.tried = slices.Insert(s.tried, i, counted{t, s.upTo(t)})
	}
	return s.tried[i].count
}

// bracket returns the tried values next to the slope of a rank: more than rank
// slopes are up to hi, not more than rank up to lo.
func (s *slopes) bracket(rank int64) (lo, hi counted) {
	lo, hi = counted{math.Inf(-1), 0}, counted{math.Inf(1), int64(s.total)}
	for _, c := range s.tried {
		if c.count > rank {
			return lo, c
		}
		lo = c
	}
	return lo, hi
}

// between lists the slopes above lo and up to hi: the pairs whose order in
// y - lo x and y - hi x differs.
func (s *slopes) between(lo, hi float64, about int) []float64 {
	n := len(s.x)
	value := func(t float64, i int) float64 { return s.y[i] - float64(t*s.x[i]) }
	// In order of y - lo x; equal ones, with a slope of lo itself, against the
	// order of x, in which they are at hi too.
	z := make([]float64, n)
	for i := range z {
		if j := n - 1 - i; math.IsInf(lo, -1) {
			z[i] = s.x[j]
		} else {
			z[i] = value(lo, j)
		}
	}
	at := make([]int32, n)
	for i, k := range stats.Order(z) {
		at[i] = int32(n-1) - k
	}
	for i := range z {
		z[i] = value(hi, i)
	}
	out := make([]float64, 0, about+16)
	room := make([]int32, len(at))
	for width := 1; width < len(at); width *= 2 {
		for a := 0; a < len(at); a += 2 * width {
			mid, end := min(a+width, len(at)), min(a+2*width, len(at))
			i, j := a, mid
			for k := a; k < end; k++ {
				if i < mid && (j >= end || z[at[i]] < z[at[j]] || z[at[i]] == z[at[j]] && at[i] > at[j]) {
					room[k] = at[i]
					i++
					continue
				}
				for _, left := range at[i:mid] { // each of them is passed by at[j]
					if d := s.x[at[j]] - s.x[left]; d != 0 {
						out = append(out, (s.y[at[j]]-s.y[left])/d)
					}
				}
				room[k] = at[j]
				j++
			}
		}
		copy(at, room)
	}
	return out
}
