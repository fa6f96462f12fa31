package stats

import (
	"math"
	"slices"
)

// present returns a copy of x without NaNs.
func present(x []float64) []float64 {
	out := make([]float64, 0, len(x))
	for _, v := range x {
		if v == v {
			out = append(out, v)
		}
	}
	return out
}

// TrimmedMean is the mean of what is left after floor(n*trim) values are cut
// from each end. NaNs are skipped; NaN with no value. From trim = 0.5 on it is
// the median. It panics on a trim outside [0, 1).
func TrimmedMean(x []float64, trim float64) float64 {
	if !(trim >= 0 && trim < 1) {
		panic("stats: trim outside [0, 1)")
	}
	if trim >= 0.5 {
		return Median(x)
	}
	v := present(x)
	slices.Sort(v)
	cut := int(math.Floor(float64(len(v)) * trim))
	return Mean(v[cut : len(v)-cut])
}

// HodgesLehmann is the median of all Walsh averages (x_i + x_j)/2, i <= j: an
// estimate of the centre that loses 4.5 % against the mean for normal data and
// stands 29 % of outliers. For a skewed population it estimates the
// pseudomedian, which is not the median. NaNs are skipped; NaN with no value.
//
// The median is found exactly, without forming the n(n+1)/2 averages: for a
// candidate t the averages up to t are counted in one walk over the sorted
// values, and t is bisected over the float64 numbers.
//
// Source: Hodges and Lehmann 1963, Ann. Math. Statist. 34, 598-611.
func HodgesLehmann(x []float64) float64 {
	v := present(x)
	n := len(v)
	if n == 0 {
		return math.NaN()
	}
	slices.Sort(v)
	if math.IsInf(v[0], -1) && math.IsInf(v[n-1], 1) {
		return math.NaN() // averages of opposite infinities have no rank
	}
	pairs := n * (n + 1) / 2
	low := walsh(v, (pairs-1)/2)
	if pairs%2 == 1 {
		return low
	}
	return middle(low, walsh(v, pairs/2))
}

// walsh returns the Walsh average of rank r (from 0) of sorted values.
func walsh(v []float64, r int) float64 {
	upTo := func(t float64) int { // averages <= t
		count, j := 0, len(v)-1
		for i := range v {
			for j >= i && middle(v[i], v[j]) > t {
				j--
			}
			if j < i {
				break
			}
			count += j - i + 1
		}
		return count
	}
	lo, hi := key(v[0]+0), key(v[len(v)-1]+0)
	for lo < hi {
		mid := lo + (hi-lo)/2
		if upTo(unkey(mid)) > r {
			hi = mid
		} else {
			lo = mid + 1
		}
	}
	return unkey(lo)
}

// Huber is Huber's M-estimate of location with the scale held at the MAD sigma:
// the value that is the mean of the data clipped to k*MADSigma on either side of
// it. k = 1.5 keeps 96 % of the mean's precision for normal data (common
// practice, no source). It returns that scale too.
//
// NaNs are skipped; NaN with no value or an infinite one. With a MADSigma of 0
// the median is returned, which is the limit for a small scale.
//
// Source: Huber 1964, Ann. Math. Statist. 35, 73-101.
func Huber(x []float64, k float64) (location, scale float64) {
	checkHuber(k)
	v := present(x)
	var s Selector
	mu, scale := s.MedianMADSigma(v)
	if len(v) == 0 || !finite(v) {
		return math.NaN(), math.NaN()
	}
	if scale == 0 {
		return mu, 0
	}
	for range 10000 {
		next := clippedMean(v, mu, k*scale)
		done := math.Abs(next-mu) <= 1e-15*scale
		mu = next
		if done {
			break
		}
	}
	return mu, scale
}

// HuberProposal2 estimates location and scale together: the data are clipped to
// k*scale on either side of the location, whose mean they have, and their
// standard deviation about it, corrected for the clipping, is the scale.
//
// NaNs are skipped; NaN with no value or an infinite one. With a MADSigma of 0,
// which is where it starts, median and 0 are returned.
//
// Source: Huber 1964 (as for [Huber]), proposal 2; divisor n-1.
func HuberProposal2(x []float64, k float64) (location, scale float64) {
	return huberProposal2(x, k, 10000)
}

// huberProposal2 takes at most so many steps.
func huberProposal2(x []float64, k float64, steps int) (location, scale float64) {
	checkHuber(k)
	v := present(x)
	var sel Selector
	mu, s := sel.MedianMADSigma(v)
	if len(v) == 0 || !finite(v) {
		return math.NaN(), math.NaN()
	}
	if s == 0 {
		return mu, 0
	}
	// E[psi(Z)^2] of a standard normal Z clipped to [-k, k].
	th := math.Erf(k / math.Sqrt2)
	beta := th + k*k*(1-th) - 2*k*math.Exp(-k*k/2)/math.Sqrt(2*math.Pi)
	for range steps {
		m := clippedMean(v, mu, k*s)
		var ss sum
		for _, y := range v {
			d := clip(y, mu-k*s, mu+k*s) - m
			ss.add(float64(d * d))
		}
		next := math.Sqrt(ss.value() / float64(len(v)-1) / beta)
		done := math.Abs(m-mu) <= 1e-14*s && math.Abs(next-s) <= 1e-14*s
		mu, s = m, next
		if done || s == 0 {
			break
		}
	}
	return mu, s
}

func checkHuber(k float64) {
	if !(k > 0) {
		panic("stats: Huber's k not positive")
	}
}

func finite(x []float64) bool {
	for _, v := range x {
		if math.IsInf(v, 0) || v != v {
			return false
		}
	}
	return true
}

func clip(v, lo, hi float64) float64 { return math.Min(math.Max(v, lo), hi) }

func clippedMean(v []float64, mu, half float64) float64 {
	var s sum // of deviations from mu, which keeps the digits
	for _, y := range v {
		s.add(clip(y-mu, -half, half))
	}
	return mu + s.value()/float64(len(v))
}

// Geometric returns the geometric mean exp(mean(ln x)) and the geometric
// standard deviation exp(sd(ln x)), a factor. NaNs are skipped. With no value,
// or any value that is not positive, both are NaN; with one value the factor is.
func Geometric(x []float64) (mean, sd float64) {
	logs := make([]float64, 0, len(x))
	for _, v := range x {
		if v != v {
			continue
		}
		if !(v > 0) {
			return math.NaN(), math.NaN()
		}
		logs = append(logs, math.Log(v))
	}
	m := MomentsOf(logs)
	return math.Exp(m.Mean), math.Exp(m.SD())
}
