package compare

import (
	"math"

	"kneepoint/stats"
)

// Exact is the outcome of [Fisher].
type Exact struct {
	// P is two-sided: the chance of a table as unlikely as this one, or more so.
	// Greater and Less are one-sided, for an odds ratio above and below 1.
	P, Greater, Less float64
	// OddsRatio is the conditional maximum-likelihood estimate with its exact
	// interval: 0 or infinite where a cell is empty.
	OddsRatio stats.Interval
}

// Fisher is the exact test of a two-by-two table of counts: are fails as
// frequent in row 1 as in row 2? Given the sums of rows and columns, the upper
// left count is hypergeometric.
//
// The two-sided p sums the tables that are no more likely than the observed one.
// An empty row or column says nothing: p is 1 and the odds ratio unknown. It
// panics on a negative count and a confidence outside (0, 1). Tables of
// millions cost little more than small ones: sums start at the largest term and
// end where terms vanish.
//
// Sources: Fisher 1935, J. R. Statist. Soc. 98, 39-82; Cornfield 1956 for the
// interval.
func Fisher(table [2][2]int, confidence float64) Exact {
	checkConfidence(confidence)
	a, b, c, d := table[0][0], table[0][1], table[1][0], table[1][1]
	if a < 0 || b < 0 || c < 0 || d < 0 {
		panic("stats/compare: negative count")
	}
	h := hypergeometric{first: a + c, other: b + d, drawn: a + b, lo: max(0, a-d), hi: a + min(b, c)}
	if h.lo == h.hi {
		return Exact{P: 1, Greater: 1, Less: 1, OddsRatio: stats.NoInterval("an empty row or column")}
	}
	e := Exact{Greater: h.above(a, 0), Less: h.below(a, 0)}
	e.P = h.twoSided(a)

	alpha := (1 - confidence) / 2
	iv := stats.Interval{Estimate: 0, Lower: 0, Upper: math.Inf(1), Method: "Fisher, conditional exact"}
	if a > h.lo {
		iv.Estimate = math.Inf(1)
		iv.Lower = math.Exp(rising(func(t float64) float64 { return h.above(a, t) - alpha }))
	}
	if a < h.hi {
		iv.Upper = math.Exp(rising(func(t float64) float64 { return alpha - h.below(a, t) }))
		if a > h.lo {
			iv.Estimate = math.Exp(rising(func(t float64) float64 { return h.mean(t) - float64(a) }))
		}
	}
	e.OddsRatio = iv
	return e
}

// hypergeometric is the count of the first kind among drawn ones; with a log
// odds ratio t it is Fisher's noncentral one.
type hypergeometric struct{ first, other, drawn, lo, hi int }

// ratio is the probability of k+1 over that of k.
func (h hypergeometric) ratio(k int, t float64) float64 {
	return math.Exp(t) * float64(h.first-k) / float64(k+1) * (float64(h.drawn-k) / float64(h.other-h.drawn+k+1))
}

// mode is the likeliest count: ratios fall with k.
func (h hypergeometric) mode(t float64) int {
	lo, hi := h.lo, h.hi
	for lo < hi {
		if mid := lo + (hi-lo)/2; h.ratio(mid, t) >= 1 {
			lo = mid + 1
		} else {
			hi = mid
		}
	}
	return lo
}

// up is the sum of the probabilities from k on, over that of k; down the same
// from k downwards. moment, if wanted, gets the sum of (i-k) times them.
func (h hypergeometric) up(k int, t float64, moment *float64) float64 {
	sum, term := 1.0, 1.0
	for i := k; i < h.hi; i++ {
		term *= h.ratio(i, t)
		sum += term
		if moment != nil {
			*moment += float64(i+1-k) * term
		}
		if term < 1e-18*sum {
			break
		}
	}
	return sum
}

func (h hypergeometric) down(k int, t float64, moment *float64) float64 {
	sum, term := 1.0, 1.0
	for i := k; i > h.lo; i-- {
		term /= h.ratio(i-1, t)
		sum += term
		if moment != nil {
			*moment += float64(i-1-k) * term
		}
		if term < 1e-18*sum {
			break
		}
	}
	return sum
}

// log is ln of the weight of k.
func (h hypergeometric) log(k int, t float64) float64 {
	return logChoose(h.first, k) + logChoose(h.other, h.drawn-k) + t*float64(k)
}

func logChoose(n, k int) float64 {
	a, _ := math.Lgamma(float64(n + 1))
	b, _ := math.Lgamma(float64(k + 1))
	c, _ := math.Lgamma(float64(n - k + 1))
	return a - b - c
}

// at is the probability of k.
func (h hypergeometric) at(k int, t float64) float64 {
	m := h.mode(t)
	return math.Exp(h.log(k, t)-h.log(m, t)) / (h.up(m, t, nil) + h.down(m, t, nil) - 1)
}

// above is P(count >= k), below P(count <= k), each summed on its own side of
// the mode so that small ones keep their digits.
func (h hypergeometric) above(k int, t float64) float64 {
	switch {
	case k <= h.lo:
		return 1
	case k > h.mode(t):
		return math.Min(1, h.at(k, t)*h.up(k, t, nil))
	}
	return 1 - h.at(k-1, t)*h.down(k-1, t, nil)
}

func (h hypergeometric) below(k int, t float64) float64 {
	switch {
	case k >= h.hi:
		return 1
	case k < h.mode(t):
		return math.Min(1, h.at(k, t)*h.down(k, t, nil))
	}
	return 1 - h.at(k+1, t)*h.up(k+1, t, nil)
}

// twoSided sums the counts that are no likelier than k, equal ones included
// within the rounding of logarithms.
func (h hypergeometric) twoSided(k int) float64 {
	m := h.mode(0)
	limit := h.log(k, 0) + 1e-7
	if k == m || h.log(m, 0) <= limit {
		return 1
	}
	// The first count on the other side that is no likelier.
	var lo, hi int
	if k < m {
		for lo, hi = m, h.hi+1; lo < hi; {
			if mid := lo + (hi-lo)/2; mid <= h.hi && h.log(mid, 0) > limit {
				lo = mid + 1
			} else {
				hi = mid
			}
		}
		if lo > h.hi {
			return h.below(k, 0)
		}
		return math.Min(1, h.below(k, 0)+h.above(lo, 0))
	}
	for lo, hi = h.lo-1, m; lo < hi; {
		if mid := hi - (hi-lo)/2; mid >= h.lo && h.log(mid, 0) > limit {
			hi = mid - 1
		} else {
			lo = mid
		}
	}
	if lo < h.lo {
		return h.above(k, 0)
	}
	return math.Min(1, h.above(k, 0)+h.below(lo, 0))
}

func (h hypergeometric) mean(t float64) float64 {
	m := h.mode(t)
	var moment float64
	sum := h.up(m, t, &moment) + h.down(m, t, &moment) - 1
	return float64(m) + moment/sum
}

// rising finds the root of a rising function of the log odds ratio.
func rising(f func(t float64) float64) float64 {
	lo, hi := -1.0, 1.0
	for f(lo) > 0 && lo > -700 {
		lo *= 2
	}
	for f(hi) < 0 && hi < 700 {
		hi *= 2
	}
	for range 100 {
		mid := lo + (hi-lo)/2
		if mid <= lo || mid >= hi {
			break
		}
		if f(mid) < 0 {
			lo = mid
		} else {
			hi = mid
		}
	}
	return lo + (hi-lo)/2
}
