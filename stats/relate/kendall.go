package relate

import (
	"math"

	"kneepoint/stats"
	"kneepoint/stats/internal/tail"
)

// Kendall is the rank correlation tau-b,
//
//	tau = S / sqrt((n0 - n1)(n0 - n2)),  S = concordant - discordant pairs
//
// with n0 = n(n-1)/2 pairs, n1 and n2 of them tied in x and in y. P is from the
// normal approximation with the variance corrected for ties and no continuity
// correction. PExact is given without ties up to 200 pairs.
//
// It takes n ln n steps (Knight 1966, J. Amer. Statist. Assoc. 61, 436-439).
// There is no tau with fewer than two pairs or a column of equal values.
// Sources: Kendall 1938, 1945; Kendall 1975, Rank Correlation Methods.
func Kendall(x, y []float64) Correlation {
	a, b := pairs(x, y)
	k := concordance(a, b)
	if why := k.why(); why != "" {
		return none(len(a), why)
	}
	c := Correlation{N: len(a), PExact: math.NaN()}
	tau := k.s / math.Sqrt((k.all-k.tiesX)*(k.all-k.tiesY))
	c.Estimate = stats.Interval{Estimate: tau, Lower: math.NaN(), Upper: math.NaN(), Method: "Kendall tau-b"}
	c.P = math.Min(1, 2*tail.Normal(math.Abs(k.s)/math.Sqrt(k.variance)))
	if k.tiesX == 0 && k.tiesY == 0 && len(a) <= 200 {
		c.PExact = kendallExact(k.s, len(a))
	}
	return c
}

// kendall holds what is counted over pairs.
type kendall struct {
	n, all       float64
	s            float64 // concordant less discordant
	tiesX, tiesY float64 // tied pairs
	variance     float64 // of s
}

func (k kendall) why() string {
	switch {
	case k.n < 2:
		return "fewer than two pairs"
	case k.tiesX == k.all || k.tiesY == k.all:
		return "a column of equal values"
	}
	return ""
}

// concordance counts by sorting: in order of x, the pairs out of order in y.
func concordance(x, y []float64) kendall {
	k := kendall{n: float64(len(x))}
	k.all = k.n * (k.n - 1) / 2
	if k.n < 2 {
		return k
	}
	// By x, then by y: order y first, and then, keeping that, x.
	first := stats.Order(y)
	byY := make([]float64, len(x))
	for i, at := range first {
		byY[i] = x[at]
	}
	second := stats.Order(byY)
	a, b := make([]float64, len(x)), make([]float64, len(x))
	for i, at := range second {
		a[i], b[i] = x[first[at]], y[first[at]]
	}
	tx := runs(a, func(i, j int) bool { return a[i] == a[j] })
	both := runs(a, func(i, j int) bool { return a[i] == a[j] && b[i] == b[j] })
	swaps := inversions(b)
	sorted := b // inversions leaves it sorted
	ty := runs(sorted, func(i, j int) bool { return sorted[i] == sorted[j] })
	k.tiesX, k.tiesY = tx[0]/2, ty[0]/2
	k.s = k.all - k.tiesX - k.tiesY + both[0]/2 - 2*float64(swaps)
	n := k.n
	k.variance = (n*(n-1)*(2*n+5) - tx[2] - ty[2]) / 18
	k.variance += tx[0] * ty[0] / (2 * n * (n - 1))
	if n > 2 {
		k.variance += tx[1] * ty[1] / (9 * n * (n - 1) * (n - 2))
	}
	return k
}

// runs sums t(t-1), t(t-1)(t-2) and t(t-1)(2t+5) over runs of t equal members.
func runs(x []float64, same func(i, j int) bool) (s [3]float64) {
	for i := 0; i < len(x); {
		j := i + 1
		for j < len(x) && same(i, j) {
			j++
		}
		t := float64(j - i)
		s[0] += t * (t - 1)
		s[1] += t * (t - 1) * (t - 2)
		s[2] += t * (t - 1) * (2*t + 5)
		i = j
	}
	return s
}

// inversions counts the pairs i < j with x[i] > x[j], sorting x by merging.
func inversions(x []float64) (count int64) {
	const block = 12 // sorted by insertion
	for lo := 0; lo < len(x); lo += block {
		part := x[lo:min(lo+block, len(x))]
		for i := 1; i < len(part); i++ {
			v, j := part[i], i
			for ; j > 0 && part[j-1] > v; j-- {
				part[j] = part[j-1]
			}
			part[j] = v
			count += int64(i - j)
		}
	}
	room := make([]float64, len(x))
	for width := block; width < len(x); width *= 2 {
		for lo := 0; lo < len(x); lo += 2 * width {
			mid, hi := min(lo+width, len(x)), min(lo+2*width, len(x))
			i, j := lo, mid
			for k := lo; k < hi; k++ {
				if i < mid && (j >= hi || !(x[i] > x[j])) {
					room[k] = x[i]
					i++
				} else {
					count += int64(mid - i)
					room[k] = x[j]
					j++
				}
			}
		}
		copy(x, room)
	}
	return count
}

// kendallExact doubles the smaller tail of the number of discordant pairs, which
// over all permutations of n is a sum of uniform counts 0..k-1, k = 1..n.
func kendallExact(s float64, n int) float64 {
	top := n * (n - 1) / 2
	p := make([]float64, top+1) // by the number of concordant pairs
	p[0] = 1
	next := make([]float64, top+1)
	reach := 0
	for k := 2; k <= n; k++ {
		reach += k - 1
		window := 0.0
		for q := 0; q <= reach; q++ {
			window += p[q]
			if q >= k {
				window -= p[q-k]
			}
			next[q] = math.Max(window, 0) / float64(k)
		}
		p, next = next, p
	}
	q := int(math.Round((s + float64(top)) / 2))
	var upTo, from float64
	for i, v := range p {
		if i <= q {
			upTo += v
		}
		if i >= q {
			from += v
		}
	}
	return math.Min(1, 2*math.Min(upTo, from))
}
