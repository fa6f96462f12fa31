package relate

import (
	"math"

	"kneepoint/stats"
	"kneepoint/stats/internal/tail"
)

// Pearson is the product-moment correlation
//
//	r = sum (x-mx)(y-my) / sqrt(sum (x-mx)^2 sum (y-my)^2)
//
// P is from Student's t on n-2 degrees of freedom; the interval from Fisher's
// tanh^-1 r, normal with standard error 1/sqrt(n-3), and infinite-free: it stays
// within -1 and 1. There is no r with fewer than three pairs, an infinite value,
// or a column without spread; no interval with three pairs. Sources: Pearson
// 1896; Fisher 1921, Metron 1, 3-32.
func Pearson(x, y []float64, confidence float64) Correlation {
	checkConfidence(confidence)
	a, b := pairs(x, y)
	n := float64(len(a))
	r, why := product(a, b)
	if why != "" {
		return none(len(a), why)
	}
	c := Correlation{N: len(a), PExact: math.NaN(), P: pOfR(r, n)}
	c.Estimate = stats.Interval{Estimate: r, Lower: math.NaN(), Upper: math.NaN(), Method: "Fisher's z"}
	if n < 4 {
		c.Estimate.Why = "three pairs give no interval"
		return c
	}
	half := tail.NormalQuantile(0.5+confidence/2) / math.Sqrt(n-3)
	c.Estimate.Lower, c.Estimate.Upper = math.Tanh(math.Atanh(r)-half), math.Tanh(math.Atanh(r)+half)
	return c
}

// pOfR is the two-sided p of a product-moment correlation of n pairs.
func pOfR(r, n float64) float64 {
	return tail.T2(r*math.Sqrt((n-2)/((1-r)*(1+r))), n-2)
}

func product(a, b []float64) (r float64, why string) {
	if len(a) < 3 {
		return math.NaN(), "fewer than three pairs"
	}
	m, k := stats.MomentsOf(a), stats.MomentsOf(b)
	u, v := m.SD(), k.SD()
	switch {
	case u != u || v != v:
		return math.NaN(), "an infinite value"
	case u == 0 || v == 0:
		return math.NaN(), "a column without spread"
	}
	var uv, uu, vv float64
	for i := range a {
		p, q := (a[i]-m.Mean)/u, (b[i]-k.Mean)/v
		uv += float64(p * q)
		uu += float64(p * p)
		vv += float64(q * q)
	}
	return math.Max(-1, math.Min(1, uv/math.Sqrt(uu*vv))), ""
}

// Spearman is Pearson's correlation of the ranks, ties sharing their mean rank.
// P is from Student's t on n-2 degrees of freedom. PExact is given without ties
// up to 1,290 pairs: by all permutations up to nine pairs, beyond that by an
// Edgeworth series that is good to about 1e-4. Sources: Spearman 1904; Best and
// Roberts 1975, Applied Statistics 24, 377-379 (algorithm AS 89).
func Spearman(x, y []float64) Correlation {
	a, b := pairs(x, y)
	ra, ta := stats.Ranks(a)
	rb, tb := stats.Ranks(b)
	r, why := product(ra, rb)
	if why != "" {
		return none(len(a), why)
	}
	n := float64(len(a))
	c := Correlation{N: len(a), P: pOfR(r, n), PExact: math.NaN()}
	c.Estimate = stats.Interval{Estimate: r, Lower: math.NaN(), Upper: math.NaN(), Method: "Spearman"}
	if ta == 0 && tb == 0 && len(a) <= 1290 {
		// Far out the series falls below 0; there the t approximation is left.
		if c.PExact = spearmanExact(ra, rb); c.PExact <= 0 {
			c.PExact = c.P
		}
	}
	return c
}

// spearmanExact doubles the tail of the sum of squared rank differences.
func spearmanExact(ra, rb []float64) float64 {
	n := len(ra)
	d := 0.0
	for i := range ra {
		d += (ra[i] - rb[i]) * (ra[i] - rb[i])
	}
	cube := float64(n) * (float64(n)*float64(n) - 1)
	var p float64
	if d > cube/6 {
		p = spearmanTail(d, n)
	} else {
		p = 1 - spearmanTail(d+2, n) // d is even
	}
	return math.Min(1, 2*p)
}

// spearmanTail is P(D >= d).
func spearmanTail(d float64, n int) float64 {
	if d <= 0 {
		return 1
	}
	if n <= 9 {
		return permutations(d, n)
	}
	b := 1 / float64(n)
	x := (6*(d-1)*b/(float64(n)*float64(n)-1) - 1) * math.Sqrt(1/b-1)
	y := x * x
	u := x * b * (.2274 + b*(.2531+.1745*b) + y*(-.0758+b*(.1033+.3932*b)-y*b*(.0879+.0151*b-y*(.0072-.0831*b+y*b*(.0131-4.6e-4*y)))))
	return math.Max(0, math.Min(1, u/math.Exp(y/2)+tail.Normal(x)))
}

// permutations counts all n! of them.
func permutations(d float64, n int) float64 {
	p := make([]int, n)
	for i := range p {
		p[i] = i
	}
	hits, all := 0, 0
	var walk func(k, sum int)
	walk = func(k, sum int) {
		if k == n {
			all++
			if float64(sum) >= d {
				hits++
			}
			return
		}
		for i := k; i < n; i++ {
			p[k], p[i] = p[i], p[k]
			walk(k+1, sum+(p[k]-k)*(p[k]-k))
			p[k], p[i] = p[i], p[k]
		}
	}
	walk(0, 0)
	return float64(hits) / float64(all)
}
