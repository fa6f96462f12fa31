package capability

import (
	"math"

	"gonum.org/v1/gonum/integrate/quad"
	"gonum.org/v1/gonum/stat/distuv"
	"kneepoint/stats"
	"kneepoint/stats/internal/tail"
)

// Tolerance factors: with the stated confidence, at least a share of a normal
// population lies within mean -+ k s of n readings (two-sided), or above
// mean - k s (one-sided). They are NaN for fewer than two readings and panic on
// a share or confidence outside (0, 1).

// ToleranceTwoSided is the exact two-sided factor: the k for which
//
//	E_z P(chi2(n-1) > (n-1) r(z/sqrt(n))^2 / k^2) = confidence
//
// with z standard normal and r(u) the half width about u that holds the share.
// Source: Odeh and Owen 1980, Tables for Normal Tolerance Limits.
func ToleranceTwoSided(n int, share, confidence float64) float64 {
	checkShare(share, confidence)
	if n < 2 {
		return math.NaN()
	}
	const points = 120
	z, w := make([]float64, points), make([]float64, points)
	quad.Legendre{}.FixedLocations(z, w, 0, 8.5)
	r := make([]float64, points)
	for i := range z {
		r[i] = halfWidth(z[i]/math.Sqrt(float64(n)), share)
		w[i] *= 2 * math.Exp(-z[i]*z[i]/2) / math.Sqrt(2*math.Pi)
	}
	df := float64(n - 1)
	at := func(k float64) float64 {
		sum := 0.0
		for i := range r {
			sum += w[i] * tail.ChiSquared(df*r[i]*r[i]/(k*k), df)
		}
		return sum
	}
	return rising(at, confidence, ToleranceHowe(n, share, confidence))
}

// halfWidth is the r with Phi(u+r) - Phi(u-r) = share.
func halfWidth(u, share float64) float64 {
	// Newton's steps from above: the left side is concave in r for r > u.
	r := u + tail.NormalQuantile(0.5+share/2)
	for range 60 {
		miss := tail.Normal(u-r) - tail.Normal(u+r) - share
		step := miss * math.Sqrt(2*math.Pi) / (math.Exp(-(u+r)*(u+r)/2) + math.Exp(-(u-r)*(u-r)/2))
		next := math.Max(r-step, r/2)
		if math.Abs(next-r) < 1e-15*r {
			break
		}
		r = next
	}
	return r
}

// ToleranceHowe is Howe's approximation to the two-sided factor,
//
//	k = sqrt((n-1)(1+1/n) z((1-share)/2)^2 / chi2(1-confidence; n-1))
//
// within a percent of the exact one from about ten readings. Source: Howe 1969,
// J. Amer. Statist. Assoc. 64, 610-620; NIST/SEMATECH e-Handbook 7.2.6.3.
func ToleranceHowe(n int, share, confidence float64) float64 {
	checkShare(share, confidence)
	if n < 2 {
		return math.NaN()
	}
	m := float64(n)
	z := tail.NormalQuantile((1 - share) / 2)
	return math.Sqrt((m - 1) * (1 + 1/m) * z * z / distuv.ChiSquared{K: m - 1}.Quantile(1-confidence))
}

// ToleranceOneSided is the exact one-sided factor: the quantile of noncentral t
// with noncentrality z(share) sqrt(n), over sqrt(n). Source: NIST/SEMATECH
// e-Handbook 7.2.6.3.
func ToleranceOneSided(n int, share, confidence float64) float64 {
	checkShare(share, confidence)
	if n < 2 {
		return math.NaN()
	}
	root := math.Sqrt(float64(n))
	delta := tail.NormalQuantile(share) * root
	t := newNoncentral(float64(n - 1))
	start := math.Max(1, math.Abs(delta))
	return rising(func(x float64) float64 { return t.cdf(x, delta) }, confidence, start) / root
}

// ToleranceNatrella is Natrella's approximation to the one-sided factor; NaN
// where it has no value (few readings, high confidence). At six readings it is
// 20 % too large. Source: Natrella 1963, Experimental Statistics, NBS Handbook
// 91; NIST/SEMATECH e-Handbook 7.2.6.3.
func ToleranceNatrella(n int, share, confidence float64) float64 {
	checkShare(share, confidence)
	m, z, g := float64(n), tail.NormalQuantile(share), tail.NormalQuantile(confidence)
	a := 1 - g*g/(2*(m-1))
	b := z*z - g*g/m
	d := z*z - a*b
	if n < 2 || !(a > 0) || d < 0 {
		return math.NaN()
	}
	return (z + math.Sqrt(d)) / a
}

// ToleranceInterval is mean -+ k s by the exact two-sided factor: with the stated
// confidence at least the share of the normal population that the readings come
// from lies in it. NaNs are skipped. Limits are NaN, and Why says so, below two
// readings.
func ToleranceInterval(x []float64, share, confidence float64) stats.Interval {
	m := stats.MomentsOf(x)
	k := ToleranceTwoSided(m.N, share, confidence)
	iv := stats.Interval{Estimate: m.Mean, Lower: m.Mean - k*m.SD(), Upper: m.Mean + k*m.SD(), Method: "normal tolerance interval, exact factor"}
	if m.N < 2 {
		iv.Why = "fewer than two readings"
	}
	return iv
}

// rising solves f(x) = want for an increasing f, widening a bracket about start.
func rising(f func(float64) float64, want, start float64) float64 {
	lo, hi := start, start
	for step := 0.1 * start; f(lo) > want && step < 1e12; step *= 2 {
		lo -= step
	}
	for step := 0.1 * start; f(hi) < want && step < 1e12; step *= 2 {
		hi += step
	}
	for range 100 {
		mid := lo + (hi-lo)/2
		if !(mid > lo && mid < hi) {
			break
		}
		if f(mid) < want {
			lo = mid
		} else {
			hi = mid
		}
	}
	return lo + (hi-lo)/2
}

// noncentralT is Student's t with a noncentrality, by quadrature over the scale
// s = sqrt(chi2/df): the mean of Phi(t s - delta). The usual series fails beyond
// a noncentrality of 37, which an index of 1.2 reaches at 110 readings.
type noncentralT struct {
	s, w  []float64
	total float64
}

func newNoncentral(df float64) *noncentralT {
	const points = 256
	n := noncentralT{s: make([]float64, points), w: make([]float64, points)}
	reach := 12 / math.Sqrt(2*df)
	quad.Legendre{}.FixedLocations(n.s, n.w, math.Max(0, 1-reach), 1+reach)
	for i, v := range n.s { // density of s up to a factor, 1 at its mode
		n.w[i] *= math.Exp((df-1)*math.Log(v) - df*(v*v-1)/2)
		n.total += n.w[i]
	}
	return &n
}

func (n *noncentralT) cdf(t, delta float64) float64 {
	sum := 0.0
	for i, v := range n.s {
		sum += n.w[i] * 0.5 * math.Erfc((delta-t*v)/math.Sqrt2)
	}
	return sum / n.total
}

func checkShare(share, confidence float64) {
	checkConfidence(confidence)
	if !(share > 0 && share < 1) {
		panic("stats/capability: share outside (0, 1)")
	}
}
