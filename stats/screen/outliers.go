package screen

import (
	"math"

	"kneepoint/stats"
	"kneepoint/stats/internal/tail"
)

// GrubbsResult is the outcome of [Grubbs].
type GrubbsResult struct {
	// G is the largest distance from the mean in standard deviations; Index is the
	// reading that has it. Max and Min are those of the largest and the smallest
	// reading.
	G        float64
	Index    int
	Max, Min float64
	// Critical is what G must exceed at level alpha, CriticalOneSided what Max (or
	// Min) must when only that side was in question.
	Critical, CriticalOneSided float64
	// P is that of G, PMax and PMin those of Max and Min: Bonferroni bounds, exact
	// for one side where small.
	P, PMax, PMin float64
	N             int
	Why           string
}

// Grubbs tests whether the most extreme of n normal readings is an outlier,
//
//	G = max |x - mean| / s,  critical (n-1)/sqrt(n) sqrt(t^2/(n-2+t^2))
//
// with t Student's t on n-2 degrees of freedom at alpha/(2n), one-sided alpha/n.
// It looks for one outlier only: two hide each other, see [GESD].
//
// NaNs are skipped (Index counts them). There is no test, and Why says so, below
// three readings, with an infinite one or without spread; Index is then -1. It
// panics on an alpha outside (0, 1). Sources: Grubbs 1969, Technometrics 11, 1-21;
// NIST/SEMATECH e-Handbook 1.3.5.17.1.
func Grubbs(x []float64, alpha float64) GrubbsResult {
	checkAlpha(alpha)
	nan := math.NaN()
	m := stats.MomentsOf(x)
	g := GrubbsResult{G: nan, Index: -1, Max: nan, Min: nan, Critical: nan, CriticalOneSided: nan, P: nan, PMax: nan, PMin: nan, N: m.N}
	switch {
	case m.N < 3:
		g.Why = "fewer than three readings"
	case math.IsInf(m.Min, 0) || math.IsInf(m.Max, 0):
		g.Why = "an infinite reading"
	case m.Min == m.Max:
		g.Why = "all readings are equal"
	}
	if g.Why != "" {
		return g
	}
	n, sd := float64(m.N), m.SD()
	for i, v := range x {
		if d := math.Abs(v-m.Mean) / sd; g.Index < 0 && d == d || d > g.G {
			g.G, g.Index = d, i
		}
	}
	g.Max, g.Min = (m.Max-m.Mean)/sd, (m.Mean-m.Min)/sd
	critical := func(upper float64) float64 {
		t := tail.TQuantile(upper, n-2)
		return (n - 1) / math.Sqrt(n) * math.Sqrt(t*t/(n-2+t*t))
	}
	g.Critical, g.CriticalOneSided = critical(alpha/(2*n)), critical(alpha/n)
	p := func(d float64) float64 {
		t2 := n * (n - 2) * d * d / ((n-1)*(n-1) - n*d*d)
		if !(t2 >= 0) { // at its largest possible value, and rounded beyond
			return 0
		}
		return tail.T(math.Sqrt(t2), n-2)
	}
	g.P, g.PMax, g.PMin = math.Min(1, 2*n*p(g.G)), math.Min(1, n*p(g.Max)), math.Min(1, n*p(g.Min))
	return g
}

// Extremes is the outcome of [GESD].
type Extremes struct {
	// R and Lambda are the statistic and its critical value with 0, 1, 2 ... of the
	// most extreme readings removed; Removed are their indexes in order.
	R, Lambda []float64
	Removed   []int
	// Outliers is how many of Removed are outliers: the last for which R exceeds
	// Lambda, and all before it.
	Outliers int
	N        int
	Why      string
}

// GESD is the generalised extreme studentised deviate test for up to most
// outliers of either side among normal readings. Unlike repeated Grubbs tests it
// is not blinded by outliers that raise the standard deviation together. Of equal
// extremes the one that comes first in x goes first.
//
// NaNs are skipped (indexes count them). At most n-2 readings are removed. There
// is no test, and Why says so, as for [Grubbs]; it ends early when what is left
// has no spread. It panics on an alpha outside (0, 1) and on most < 1.
//
// Sources: Rosner 1983, Technometrics 25, 165-172; NIST/SEMATECH e-Handbook
// 1.3.5.17.3. Good for 25 readings or more, fair from 15 (Rosner).
func GESD(x []float64, most int, alpha float64) Extremes {
	checkAlpha(alpha)
	if most < 1 {
		panic("stats/screen: fewer than one outlier to look for")
	}
	order := stats.Order(x)
	v := make([]float64, len(order))
	for i, at := range order {
		v[i] = x[at]
	}
	n := len(v)
	e := Extremes{N: n, R: []float64{}, Lambda: []float64{}, Removed: []int{}}
	switch {
	case n < 3:
		e.Why = "fewer than three readings"
	case math.IsInf(v[0], 0) || math.IsInf(v[n-1], 0):
		e.Why = "an infinite reading"
	case v[0] == v[n-1]:
		e.Why = "all readings are equal"
	}
	if e.Why != "" {
		return e
	}
	lo, hi := 0, n // what is left of the sorted readings
	for j := 1; j <= min(most, n-2) && v[lo] < v[hi-1]; j++ {
		m := stats.MomentsOf(v[lo:hi])
		sd := m.SD()
		low, high := (m.Mean-v[lo])/sd, (v[hi-1]-m.Mean)/sd
		top := hi - 1 // the first of the readings equal to the largest
		for top > lo && v[top-1] == v[hi-1] {
			top--
		}
		left := float64(n - j)
		t := tail.TQuantile(alpha/(2*(left+1)), left-1)
		e.Lambda = append(e.Lambda, left*t/math.Sqrt((left-1+t*t)*(left+1)))
		if low > high || low == high && order[lo] < order[top] {
			e.R, e.Removed = append(e.R, low), append(e.Removed, int(order[lo]))
			lo++
		} else {
			e.R, e.Removed = append(e.R, high), append(e.Removed, int(order[top]))
			copy(order[top:hi-1], order[top+1:hi])
			hi--
		}
		if e.R[j-1] > e.Lambda[j-1] {
			e.Outliers = j
		}
	}
	return e
}

func checkAlpha(alpha float64) {
	if !(alpha > 0 && alpha < 1) {
		panic("stats/screen: alpha outside (0, 1)")
	}
}
