package compare

import (
	"math"

	"kneepoint/stats"
	"kneepoint/stats/internal/tail"
)

// KruskalWallis asks whether the readings of some groups tend to be larger than
// those of others. Statistic is H, corrected for ties, on DF1 = k-1,
//
//	H = 12/(n(n+1)) sum n_i (r_i - (n+1)/2)^2 / (1 - sum(t^3-t)/(n^3-n))
//
// with r_i the mean rank of group i. Effect is epsilon squared, H/(n-1): the
// share of the ranks' variance that the groups explain.
//
// The p is from chi-square, good from about five readings a group. NaNs are
// skipped; infinities have their rank. There is no H, and Why says so, with
// fewer than two groups, one reading a group, or all readings equal. It panics
// when lengths differ. Source: Kruskal and Wallis 1952, J. Amer. Statist. Assoc.
// 47, 583-621.
func KruskalWallis(y []float64, group []int32) Result {
	parts := split(y, group)
	if w := why(parts); w != "" {
		return no(w)
	}
	ranks, ties := stats.Ranks(y)
	byGroup := split(ranks, group)
	n, k := float64(total(parts)), float64(len(parts))
	between := 0.0
	for _, p := range byGroup {
		d := stats.Mean(p.values) - (n+1)/2
		between += float64(len(p.values)) * d * d
	}
	left := 1 - ties/(n*n*n-n)
	if !(left > 0) {
		return no("all readings are equal")
	}
	r := Result{DF1: k - 1, DF2: math.NaN(), N: int(n), Groups: int(k)}
	r.Statistic = 12 / (n * (n + 1)) * between / left
	r.P = tail.ChiSquared(r.Statistic, r.DF1)
	r.Effect = r.Statistic / (n - 1)
	return r
}

// RankSum is the outcome of [MannWhitney].
type RankSum struct {
	// W counts the pairs in which the reading of x is larger, ties as one half.
	W float64
	P float64 // two-sided
	// Larger is W over all pairs: the probability that a reading of x exceeds one
	// of y; 0.5 is no difference.
	Larger float64
	// Shift is by how much x lies above y: the median of all differences x_i - y_j
	// (Hodges-Lehmann), with its interval by rank. In the readings' unit.
	Shift  stats.Interval
	NX, NY int
	Why    string
}

// MannWhitney asks whether readings of x tend to be larger than those of y. The
// p is from the normal approximation with variance corrected for ties and a
// continuity correction of one half; with fewer than 10 readings a side it is
// rough, and Why says so.
//
// NaNs are skipped; infinities have their rank. With no reading on a side, or
// all readings equal, there is no p. Sources: Mann and Whitney 1947, Ann. Math.
// Statist. 18, 50-60; the shift: Hodges and Lehmann 1963, ibid. 34, 598-611, and
// its interval, Moses 1965, Technometrics 7, 257-260.
func MannWhitney(x, y []float64, confidence float64) RankSum {
	checkConfidence(confidence)
	a, b := stats.Sorted(x), stats.Sorted(y)
	r := RankSum{NX: len(a), NY: len(b), W: math.NaN(), P: math.NaN(), Larger: math.NaN()}
	if len(a) == 0 || len(b) == 0 {
		r.Why = "no readings on a side"
		r.Shift = stats.NoInterval(r.Why)
		return r
	}
	ranks, ties := stats.Ranks(append(append(make([]float64, 0, len(a)+len(b)), a...), b...))
	var sum float64
	for _, v := range ranks[:len(a)] {
		sum += v
	}
	n, m := float64(len(a)), float64(len(b))
	r.W = sum - n*(n+1)/2
	r.Larger = r.W / (n * m)
	all := n + m
	sigma := math.Sqrt(n * m / 12 * (all + 1 - ties/(all*(all-1))))
	if !(sigma > 0) {
		r.Why = "all readings are equal"
		r.Shift = stats.NoInterval(r.Why)
		return r
	}
	z := r.W - n*m/2
	z = math.Copysign(math.Max(math.Abs(z)-0.5, 0), z) / sigma
	r.P = math.Min(1, 2*tail.Normal(math.Abs(z)))
	if len(a) < 10 || len(b) < 10 {
		r.Why = "fewer than 10 readings on a side: p and interval are rough"
	}
	r.Shift = shift(a, b, sigma, confidence)
	return r
}

// shift takes the quantiles of all differences of sorted values at the middle
// and at the ranks that the normal approximation gives.
func shift(a, b []float64, sigma, confidence float64) stats.Interval {
	iv := stats.Interval{Method: "Hodges-Lehmann, Moses"}
	for _, s := range [][]float64{a, b} {
		if math.IsInf(s[0], 0) || math.IsInf(s[len(s)-1], 0) {
			return stats.NoInterval("an infinite reading")
		}
	}
	pairs := len(a) * len(b)
	iv.Estimate = difference(a, b, (pairs-1)/2)
	if pairs%2 == 0 {
		iv.Estimate = iv.Estimate/2 + difference(a, b, pairs/2)/2
	}
	z := tail.NormalQuantile(0.5 + confidence/2)
	cut := int(math.Round(float64(pairs)/2 - z*sigma)) // pairs cut off on each side
	if cut < 1 {
		iv.Lower, iv.Upper = math.Inf(-1), math.Inf(1)
		iv.Why = "too few readings for an interval"
		return iv
	}
	iv.Lower, iv.Upper = difference(a, b, cut-1), difference(a, b, pairs-cut)
	return iv
}

// difference returns the difference a_i - b_j of rank r (from 0): a value is
// bisected over the float64 numbers, and for each the differences up to it are
// counted in one walk.
func difference(a, b []float64, r int) float64 {
	upTo := func(t float64) int {
		count, j := 0, 0 // a ascending: ever more of b are needed to stay below t
		for _, v := range a {
			for j < len(b) && v-b[j] > t {
				j++
			}
			count += len(b) - j
		}
		return count
	}
	lo, hi := orderKey(a[0]-b[len(b)-1]), orderKey(a[len(a)-1]-b[0])
	for lo < hi {
		mid := lo + int64(uint64(hi-lo)/2)
		if upTo(orderValue(mid)) > r {
			hi = mid
		} else {
			lo = mid + 1
		}
	}
	return orderValue(lo)
}

// orderKey maps float64 numbers to integers of the same order.
func orderKey(v float64) int64 {
	b := int64(math.Float64bits(v + 0))
	return b ^ int64(uint64(b>>63)>>1)
}

func orderValue(k int64) float64 {
	return math.Float64frombits(uint64(k ^ int64(uint64(k>>63)>>1)))
}

func checkConfidence(c float64) {
	if !(c > 0 && c < 1) {
		panic("stats/compare: confidence outside (0, 1)")
	}
}
