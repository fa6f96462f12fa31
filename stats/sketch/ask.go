package sketch

import (
	"math"
	"slices"
)

// Quantile is the p-quantile of Hyndman and Fan's definition 8, as reports have it,
// between the two order statistics a <= b next to it: within
// ErrorBound*max(|a|, |b|) of that of the readings themselves. p = 0 and 1 are the
// extremes, exact. NaN with no reading. It panics on p outside [0, 1].
func (q *Quantiles) Quantile(p float64) float64 { return q.Quantiles([]float64{p})[0] }

// Quantiles is Quantile at several p, for little more than the price of one.
func (q *Quantiles) Quantiles(probs []float64) []float64 {
	list := q.buckets()
	out := make([]float64, len(probs))
	for i, p := range probs {
		if !(p >= 0 && p <= 1) {
			panic("stats/sketch: probability outside [0, 1]")
		}
		out[i] = q.quantile(list, p)
	}
	return out
}

func (q *Quantiles) quantile(list []bucket, p float64) float64 {
	if q.n == 0 {
		return math.NaN()
	}
	h := 1.0/3 + p*(float64(q.n)+1.0/3) - 1
	h = math.Min(math.Max(h, 0), float64(q.n-1))
	k := int(h)
	a := q.order(list, k)
	w := h - float64(k)
	if w < 1e-9 || k+1 >= q.n {
		return a
	}
	b := q.order(list, k+1)
	if a == b {
		return a
	}
	return math.Min(math.Max(float64((1-w)*a)+float64(w*b), a), b)
}

// order is the order statistic of rank k, from 0.
func (q *Quantiles) order(list []bucket, k int) float64 {
	switch k {
	case 0:
		return q.min
	case q.n - 1:
		return q.max
	}
	for _, b := range list {
		if k < b.n {
			return math.Min(math.Max(b.value, q.min), q.max)
		}
		k -= b.n
	}
	return q.max
}

// Below bounds the number of readings smaller than x: between least and most. They
// differ by the readings of the one bucket that x falls into.
func (q *Quantiles) Below(x float64) (least, most int) {
	x = flush(x)
	if x != x || q.n == 0 || x <= q.min {
		return 0, 0
	}
	if x > q.max {
		return q.n, q.n
	}
	for _, b := range q.buckets() {
		// A positive bucket ends before its upper edge, others with it.
		open := b.value > 0 && b.lower < b.upper
		switch {
		case b.upper < x || open && b.upper == x:
			least += b.n
			most += b.n
		case b.lower < x:
			most += b.n
		}
	}
	return least, most
}

// MADSigma is 1.4826 times the median absolute deviation from the median, of
// readings put in the middle of their buckets: within 1.4826 * 2 ErrorBound times the
// largest reading at play, which is exact enough while the spread is not far below
// ErrorBound times the level. NaN with no reading, or an infinite median.
func (q *Quantiles) MADSigma() float64 {
	m := q.Quantile(0.5)
	if m != m || math.IsInf(m, 0) {
		return math.NaN()
	}
	list := q.buckets()
	for i := range list {
		list[i].value = math.Abs(math.Min(math.Max(list[i].value, q.min), q.max) - m)
	}
	slices.SortFunc(list, func(a, b bucket) int {
		switch {
		case a.value < b.value:
			return -1
		case a.value > b.value:
			return 1
		}
		return 0
	})
	at := func(k int) float64 {
		for _, b := range list {
			if k < b.n {
				return b.value
			}
			k -= b.n
		}
		return math.NaN()
	}
	return 1.4826 * (at((q.n-1)/2)/2 + at(q.n/2)/2)
}
