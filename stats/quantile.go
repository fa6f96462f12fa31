package stats

import (
	"math"
	"slices"
)

// QuantileKind names the definition of a sample quantile, by the numbering of
// Hyndman and Fan 1996, The American Statistician 50, 361-365.
type QuantileKind int

const (
	// HyndmanFan6 puts the order statistics at p = k/(n+1), the mean share of the
	// population below them. The textbooks on part average limits and control
	// charts use it.
	HyndmanFan6 QuantileKind = 6
	// HyndmanFan7 puts the order statistics at p = (k-1)/(n-1): the extremes are
	// the quantiles 0 and 1. Spreadsheets do this.
	HyndmanFan7 QuantileKind = 7
	// HyndmanFan8 puts them at p = (k-1/3)/(n+1/3), which is approximately
	// median-unbiased whatever the distribution: the kind that Hyndman and Fan
	// recommend, and the one used in reports.
	HyndmanFan8 QuantileKind = 8
)

// position returns the rank (from 0) below the quantile and the weight of the
// next one.
func (k QuantileKind) position(p float64, n int) (rank int, weight float64) {
	var h float64
	switch k {
	case HyndmanFan6:
		h = p*(float64(n)+1) - 1
	case HyndmanFan7:
		h = p * float64(n-1)
	case HyndmanFan8:
		h = 1.0/3 + p*(float64(n)+1.0/3) - 1
	default:
		panic("stats: unknown kind of quantile")
	}
	h = math.Min(math.Max(h, 0), float64(n-1))
	// A position that is whole but for rounding is whole: 0.1*30 is 3.
	const fuzz = 4 * 0x1p-52
	f := math.Floor(h + fuzz*math.Max(1, h))
	if w := h - f; w > fuzz*math.Max(1, h) && int(f) < n-1 {
		return int(f), w
	}
	return int(f), 0
}

// between weighs two neighbouring order statistics without leaving their range.
func between(a, b, weight float64) float64 {
	if weight == 0 || a == b {
		return a
	}
	return math.Min(math.Max(float64((1-weight)*a)+float64(weight*b), a), b)
}

// Quantiles returns the quantiles of x at probs, in the order of probs.
//
// NaNs in x are skipped; with no value left every quantile is NaN. x is not
// modified. It panics on a probability outside [0, 1] and on an unknown kind.
func Quantiles(x, probs []float64, kind QuantileKind) []float64 {
	s := selectors.Get().(*Selector)
	defer selectors.Put(s)
	return s.Quantiles(x, probs, kind)
}

// Median is the middle value, or the mean of the two middle ones. NaNs are
// skipped; NaN with no value.
func Median(x []float64) float64 {
	s := selectors.Get().(*Selector)
	defer selectors.Put(s)
	return s.Median(x)
}

// MADSigma is a robust standard deviation,
//
//	1.4826 * median |x - median(x)|
//
// which estimates sigma for a normal population and cannot be moved far by
// outliers until they are half of the data. It is 0 when more than half of the
// values are equal. NaNs are skipped; NaN with no value. Source: Hampel 1974,
// J. Amer. Statist. Assoc. 69, 383-393; the factor is 1/qnorm(3/4) rounded to
// four decimals, as is customary.
func MADSigma(x []float64) float64 {
	s := selectors.Get().(*Selector)
	defer selectors.Put(s)
	_, mad := s.MedianMADSigma(x)
	return mad
}

const madFactor = 1.4826

// Quantiles is as the function [Quantiles].
func (s *Selector) Quantiles(x, probs []float64, kind QuantileKind) []float64 {
	n := s.load(x)
	out := make([]float64, len(probs))
	s.quantiles(n, probs, kind, out)
	return out
}

// quantiles works on the n loaded keys.
func (s *Selector) quantiles(n int, probs []float64, kind QuantileKind, out []float64) {
	s.ranks = s.ranks[:0]
	for _, p := range probs {
		if !(p >= 0 && p <= 1) {
			panic("stats: probability outside [0, 1]")
		}
		if n > 0 {
			r, w := kind.position(p, n)
			s.ranks = append(s.ranks, r)
			if w > 0 {
				s.ranks = append(s.ranks, r+1)
			}
		}
	}
	if n == 0 {
		for i := range out {
			out[i] = math.NaN()
		}
		return
	}
	slices.Sort(s.ranks)
	s.ranks = slices.Compact(s.ranks)
	s.found = grow(s.found, len(s.ranks))
	s.pick(n, s.ranks, s.found)
	at := func(rank int) float64 {
		i, _ := slices.BinarySearch(s.ranks, rank)
		return s.found[i]
	}
	for i, p := range probs {
		r, w := kind.position(p, n)
		out[i] = at(r)
		if w > 0 {
			out[i] = between(out[i], at(r+1), w)
		}
	}
}

// Median is as the function [Median].
func (s *Selector) Median(x []float64) float64 {
	return s.median(s.load(x))
}

// MedianMADSigma returns [Median] and [MADSigma] for little more than the price
// of the latter.
func (s *Selector) MedianMADSigma(x []float64) (median, madSigma float64) {
	median = s.Median(x)
	return median, s.madSigma(x, median)
}

// MADSigma is as the function [MADSigma].
func (s *Selector) MADSigma(x []float64) float64 {
	_, mad := s.MedianMADSigma(x)
	return mad
}

// madSigma is the MAD sigma about a median already known. An infinite median
// has no deviations: NaN.
func (s *Selector) madSigma(x []float64, median float64) float64 {
	if math.IsInf(median, 0) || median != median {
		return math.NaN()
	}
	return madFactor * s.median(s.loadDeviations(x, median))
}

func (s *Selector) median(n int) float64 {
	if n == 0 {
		return math.NaN()
	}
	s.ranks = append(s.ranks[:0], (n-1)/2)
	if n%2 == 0 {
		s.ranks = append(s.ranks, n/2)
	}
	s.found = grow(s.found, len(s.ranks))
	s.pick(n, s.ranks, s.found)
	if n%2 == 1 {
		return s.found[0]
	}
	return middle(s.found[0], s.found[1])
}

// middle is (a+b)/2 where that does not overflow.
func middle(a, b float64) float64 {
	if m := (a + b) / 2; !math.IsInf(m, 0) {
		return m
	}
	return a/2 + b/2
}
