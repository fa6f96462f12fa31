package series

import (
	"fmt"
	"math"
	"math/rand/v2"
	"slices"

	"kneepoint/stats"
)

// Split is the one place that divides a series best.
type Split struct {
	// At is the place where the second part begins; -1 when there is none.
	At                    int
	MeanBefore, MeanAfter float64
	// SSENone and SSE are the squares without and with the split; Gain their
	// difference.
	SSENone, SSE, Gain float64
	// SupF is Gain over SSE/(n-2). It is the largest of many F statistics: their
	// tables do not hold for it.
	SupF float64
	// P is the chance of a SupF as large in the same values in random order: NaN
	// unless asked for, see [SplitTest].
	P   float64
	N   int
	Why string
}

// SingleSplit finds the split into two parts of at least minSegment values with
// the least squares about the parts' means. It always finds one: [SplitTest] says
// whether to believe it. It panics on minSegment < 1.
func SingleSplit(y []float64, minSegment int) Split {
	checkSegment(minSegment)
	v, place := present(y)
	s := Split{At: -1, MeanBefore: math.NaN(), MeanAfter: math.NaN(), SSENone: math.NaN(), SSE: math.NaN(),
		Gain: math.NaN(), SupF: math.NaN(), P: math.NaN(), N: len(v)}
	c := newCosts(v)
	k, gain := c.bestSplit(0, len(v), minSegment)
	if k < 0 {
		s.Why = fmt.Sprintf("%d values; a split needs %d on either side", len(v), minSegment)
		return s
	}
	s.At, s.Gain, s.SSENone = place[k], gain, c.of(0, len(v))
	s.SSE = s.SSENone - gain
	if s.SSE > 1e-14*s.SSENone {
		s.SupF = gain / (s.SSE / float64(len(v)-2))
	} else if gain > 0 {
		s.SupF = math.Inf(1)
	}
	s.MeanBefore, s.MeanAfter = stats.Mean(v[:k]), stats.Mean(v[k:])
	return s
}

// SplitTest is [SingleSplit] with P: of the split and `orders` random orders of the
// same values, the share that gain as much. It holds for any distribution of values
// that do not follow each other; drift or neighbours alike make it too small.
// The order of draws is fixed: the same values give the same P.
//
// Source: permutation test, Good 2005, Permutation, Parametric and Bootstrap Tests
// of Hypotheses.
func SplitTest(y []float64, minSegment, orders int) Split {
	s := SingleSplit(y, minSegment)
	if s.At < 0 || orders < 1 {
		return s
	}
	v, _ := present(y)
	slices.Sort(v) // P depends on the values, not on their order
	r := rand.New(rand.NewPCG(0x5eed, uint64(len(v))))
	reached := 1
	for range orders {
		r.Shuffle(len(v), func(i, j int) { v[i], v[j] = v[j], v[i] })
		c := newCosts(v)
		if _, gain := c.bestSplit(0, len(v), minSegment); gain >= s.Gain*(1-1e-12) {
			reached++
		}
	}
	s.P = float64(reached) / float64(orders+1)
	return s
}

// RankSplit is Pettitt's test for a change of level.
type RankSplit struct {
	At int // where the second part begins; -1 with fewer than two values
	// K is the largest of |U_t|, with U_t the rank-sum statistic of the first t
	// values against the rest.
	K float64
	P float64 // approximate, two-sided
	N int
}

// Pettitt tests for one change of level by ranks, which outliers cannot force: with
// R_i the ranks (ties share their mean),
//
//	U_t = 2 sum_i<=t R_i - t(n+1), K = max |U_t|, P = 2 exp(-6 K^2/(n^3+n^2))
//
// P is good when it is small, below about 0.5, and errs to the safe side for short
// series. Of equal |U_t| the first counts.
//
// Source: Pettitt 1979, Applied Statistics 28, 126-135.
func Pettitt(y []float64) RankSplit {
	v, place := present(y)
	n := len(v)
	s := RankSplit{At: -1, K: math.NaN(), P: math.NaN(), N: n}
	if n < 2 {
		return s
	}
	r, _ := stats.Ranks(v)
	u := 0.0
	s.K = -1
	for t := 1; t < n; t++ {
		u += 2*r[t-1] - float64(n+1)
		if a := math.Abs(u); a > s.K {
			s.K, s.At = a, place[t]
		}
	}
	m := float64(n)
	s.P = math.Min(1, 2*math.Exp(-6*s.K*s.K/(m*m*m+m*m)))
	return s
}
