package capability

import (
	"fmt"
	"math"

	"kneepoint/stats"
	"kneepoint/stats/dist"
	"kneepoint/stats/internal/tail"
	"kneepoint/stats/yield"
)

// The shares that stand for mean -+ 3 sigma of a normal distribution.
const lowShare, highShare = 0.00135, 0.99865

// PercentileIndices computes the indices of a distribution of any shape from its
// percentiles at 0.135 %, 50 % and 99.865 %,
//
//	Cp  = (U - L) / (high - low)
//	Cpl = (median - L) / (median - low),  Cpu = (U - median) / (high - median)
//
// which for a normal distribution are the usual ones. A NaN limit is no limit, as
// in [Indices]. Source: ISO 22514-2, percentile method; NIST/SEMATECH e-Handbook
// 6.1.6 (Cnpk).
func PercentileIndices(low, median, high, lower, upper float64) Index {
	i := Index{
		Cp:  (upper - lower) / (high - low),
		Cpl: (median - lower) / (median - low),
		Cpu: (upper - median) / (high - median),
		K:   math.Abs((lower+upper)/2-median) / ((upper - lower) / 2),
	}
	i.Cpk = i.Cpl
	if i.Cpk != i.Cpk || i.Cpu < i.Cpk {
		i.Cpk = i.Cpu
	}
	return i
}

// Percentiles is the capability of one test by percentiles.
type Percentiles struct {
	N int // readings, censored ones included
	// Source says what the percentiles are of: a fitted family, or the readings.
	Source string
	// Low, Median and High are the percentiles at 0.135 %, 50 % and 99.865 %, in the
	// readings' unit.
	Low, Median, High stats.Interval
	Index             Index
	// Pp and Ppk are Index.Cp and Index.Cpk with their intervals.
	Pp, Ppk stats.Interval
	// Below, Above and Outside are the expected shares of the population beyond the
	// limits (1e6 times these are parts per million); with percentiles of the
	// readings, what was counted. 0 for a limit that there is not.
	Below, Above, Outside stats.Interval
	// Equivalent is the Ppk of a normal distribution with the same share beyond the
	// worse limit, z(share)/3: the other index in use for shapes that are not normal.
	Equivalent float64
	Why        string   // why there is no number at all
	Notes      []string // never nil
}

// ByPercentiles computes indices and expected shares outside the limits from a
// distribution fitted to the readings of in, or, where fit is nil, from the
// readings themselves (quantiles by Hyndman and Fan 8).
//
// No index is given, and Why says so, for what [Compute] refuses, and for
// percentiles of fewer than 741 readings themselves, of which the 0.135 % one is
// the smallest. Bounds count through the fit; among the readings themselves they
// count as beyond every exact one, and a percentile among them is not known.
//
// Intervals: of a fit by the delta method, with subgroups that differ counted once
// a subgroup as in [Compute] (on the logarithms for families of positive
// values); of the readings themselves by order statistics and, for counts, by
// Clopper and Pearson, both as if dice were independent. It panics as Compute.
func ByPercentiles(in Input, fit dist.Distribution) Percentiles {
	checkConfidence(in.Confidence)
	if in.Censor != nil && len(in.Censor) != len(in.Values) || in.Group != nil && len(in.Group) != len(in.Values) {
		panic("stats/capability: slice length mismatch")
	}
	c := computer{in: in}
	c.Notes = []string{}
	why := c.level()
	p := Percentiles{N: c.N, Notes: []string{}, Why: why}
	if why == "" && fit == nil && c.N < 741 {
		p.Why = fmt.Sprintf("%d readings; percentiles of the readings themselves need 741, a fit does with fewer", c.N)
	}
	if p.Why != "" {
		p.none(p.Why)
		return p
	}
	if fit == nil {
		p.ofReadings(in)
	} else {
		p.ofFit(c, fit)
	}
	return p
}

func (p *Percentiles) none(why string) {
	nan, no := math.NaN(), stats.NoInterval(why)
	p.Low, p.Median, p.High, p.Pp, p.Ppk = no, no, no, no, no
	p.Below, p.Above, p.Outside = no, no, no
	p.Index = Index{nan, nan, nan, nan, nan}
	p.Equivalent = nan
}

func (p *Percentiles) ofFit(c computer, fit dist.Distribution) {
	in := c.in
	p.Source = fmt.Sprintf("%s fit", fit.Family())
	if n := fit.Count(); n.Censored() > 0 {
		p.Notes = append(p.Notes, fmt.Sprintf("%d of %d readings are only bounds: the tail beyond them is extrapolated by the %s fit", n.Censored(), n.N, fit.Family()))
	}
	if location, spread, groups := designEffects(in, fit.Family()); location > 1 || spread > 1 {
		fit = dist.Widen(fit, location, spread)
		if groups < 5 {
			p.Notes = append(p.Notes, fmt.Sprintf("the intervals rest on %d subgroups that differ: they are rough", groups))
		}
	}
	p.Low = dist.QuantileInterval(fit, lowShare, in.Confidence)
	p.Median = dist.QuantileInterval(fit, 0.5, in.Confidence)
	p.High = dist.QuantileInterval(fit, highShare, in.Confidence)
	index := func(d dist.Distribution) Index {
		return PercentileIndices(d.Quantile(lowShare), d.Quantile(0.5), d.Quantile(highShare), in.Lower, in.Upper)
	}
	p.Index = index(fit)
	const method = "delta method on the fit"
	p.Pp = stats.NoInterval("needs both limits")
	if in.Lower == in.Lower && in.Upper == in.Upper {
		se := dist.Delta(fit, func(d dist.Distribution) float64 { return index(d).Cp })
		p.Pp = normalInterval(p.Index.Cp, se*se, in.Confidence, method)
	}
	// The nearer limit stays the same one for the slopes.
	nearer := func(i Index) float64 {
		if p.Index.Cpk == p.Index.Cpl {
			return i.Cpl
		}
		return i.Cpu
	}
	se := dist.Delta(fit, func(d dist.Distribution) float64 { return nearer(index(d)) })
	p.Ppk = normalInterval(p.Index.Cpk, se*se, in.Confidence, method)
	p.Below, p.Above, p.Outside = ExpectedOutside(fit, in.Lower, in.Upper, in.Confidence)
	p.equivalent()
}

func (p *Percentiles) equivalent() {
	p.Equivalent = -tail.NormalQuantile(math.Max(p.Below.Estimate, p.Above.Estimate)) / 3
}

// designEffects says by how much differences between subgroups raise the
// variances of location and spread.
func designEffects(in Input, family dist.Family) (location, spread float64, groups int) {
	if in.Group == nil {
		return 1, 1, 0
	}
	if family != dist.NormalFamily {
		logs := make([]float64, len(in.Values))
		for i, v := range in.Values {
			logs[i] = math.Log(v)
		}
		in.Values = logs
	}
	d, err := dist.FitNormal(in.Values, in.Censor)
	if err != nil {
		return 1, 1, 0
	}
	c := computer{in: in, mean: d.Mu}
	c.within()
	location, spread = c.clustered()
	return location, spread, c.groups
}

// ExpectedOutside is the share of a fitted population below the lower limit,
// above the upper one, and both, with intervals by the delta method on their
// normal deviates. A limit that is NaN has a share of 0.
func ExpectedOutside(d dist.Distribution, lower, upper, confidence float64) (below, above, outside stats.Interval) {
	checkConfidence(confidence)
	nothing := stats.Interval{Method: "no limit"}
	below, above = nothing, nothing
	if lower == lower {
		below = dist.ShareInterval(d, lower, false, confidence)
	}
	if upper == upper {
		above = dist.ShareInterval(d, upper, true, confidence)
	}
	switch {
	case lower != lower:
		return below, above, above
	case upper != upper:
		return below, above, below
	}
	total := func(d dist.Distribution) float64 { return d.CDF(lower) + d.Survival(upper) }
	outside = stats.Interval{Estimate: total(d), Method: below.Method}
	deviate := func(d dist.Distribution) float64 { return tail.NormalQuantile(math.Min(1, total(d))) }
	at := deviate(d)
	if math.IsInf(at, 0) || at != at {
		outside.Lower, outside.Upper = outside.Estimate, outside.Estimate
		outside.Why = "too far out for its size to be known"
		return below, above, outside
	}
	half := tail.NormalQuantile(0.5+confidence/2) * dist.Delta(d, deviate)
	outside.Lower, outside.Upper = tail.Normal(-(at - half)), tail.Normal(-(at + half))
	return below, above, outside
}

func (p *Percentiles) ofReadings(in Input) {
	p.Source = "the readings themselves (quantile type 8)"
	ordered := make([]float64, 0, len(in.Values))
	var below, above int
	for i, v := range in.Values {
		if v != v {
			continue
		}
		if in.Censor != nil && in.Censor[i] != 0 {
			// At least a value above the upper limit fails for sure; short of the limit
			// it is not known, and does not count.
			if in.Censor[i] > 0 && v > in.Upper {
				above++
			} else if in.Censor[i] < 0 && v < in.Lower {
				below++
			}
			ordered = append(ordered, math.Inf(int(in.Censor[i])))
			continue
		}
		if v < in.Lower {
			below++
		} else if v > in.Upper {
			above++
		}
		ordered = append(ordered, v)
	}
	ordered = stats.Sorted(ordered)
	p.Low = orderInterval(ordered, lowShare, in.Confidence)
	p.Median = orderInterval(ordered, 0.5, in.Confidence)
	p.High = orderInterval(ordered, highShare, in.Confidence)
	p.Index = PercentileIndices(p.Low.Estimate, p.Median.Estimate, p.High.Estimate, in.Lower, in.Upper)
	p.Pp, p.Ppk = stats.NoInterval("needs both limits"), stats.NoInterval("a percentile among the bounds is not known")
	z := tail.NormalQuantile(0.5 + in.Confidence/2)
	// Standard errors from the intervals; the percentiles are nearly independent.
	se := func(iv stats.Interval) float64 { return (iv.Upper - iv.Lower) / (2 * z) }
	a, m, b := se(p.Low), se(p.Median), se(p.High)
	const method = "order statistics"
	if in.Lower == in.Lower && in.Upper == in.Upper {
		width := p.High.Estimate - p.Low.Estimate
		p.Pp = open(normalInterval(p.Index.Cp, p.Index.Cp*p.Index.Cp*(a*a+b*b)/(width*width), in.Confidence, method))
	}
	if p.Index.Cpk == p.Index.Cpk {
		end, limit, s := p.Low.Estimate, in.Lower, a
		if p.Index.Cpk != p.Index.Cpl {
			end, limit, s = p.High.Estimate, in.Upper, b
		}
		width := p.Median.Estimate - end
		byMedian, byEnd := (limit-end)/(width*width), p.Index.Cpk/width
		p.Ppk = open(normalInterval(p.Index.Cpk, byMedian*byMedian*m*m+byEnd*byEnd*s*s, in.Confidence, method))
	}
	share := func(k int) stats.Interval { return yield.ClopperPearson(k, p.N, in.Confidence) }
	p.Below, p.Above, p.Outside = share(below), share(above), share(below+above)
	p.equivalent()
}

// open gives an interval that is not finite a reason.
func open(iv stats.Interval) stats.Interval {
	if math.IsNaN(iv.Lower) || math.IsInf(iv.Lower, 0) {
		iv.Lower, iv.Upper = math.NaN(), math.NaN()
		iv.Why = "too few readings to bound the outer percentiles"
	}
	return iv
}

// orderInterval is a quantile of sorted readings (type 8) with the interval
// between the order statistics whose ranks a binomial count leaves out with
// (1-confidence)/2 on each side; infinite where there is none. An estimate among
// bounds is NaN.
func orderInterval(v []float64, p, confidence float64) stats.Interval {
	iv := stats.Interval{Lower: math.Inf(-1), Upper: math.Inf(1), Method: "order statistics"}
	iv.Estimate = stats.Quantiles(v, []float64{p}, stats.HyndmanFan8)[0]
	if math.IsInf(iv.Estimate, 0) {
		iv.Estimate, iv.Why = math.NaN(), "among the bounds"
	}
	// The number of readings below the quantile is binomial: P(K < lo) and
	// P(K >= hi) are at most alpha. P(K >= k) is an incomplete beta function.
	n, alpha := len(v), (1-confidence)/2
	atLeast := func(k int) float64 { return tail.BinomialAtLeast(k, n, p) }
	search := func(ok func(k int) bool) int { // the first k in 0..n+1 for which ok, which turns once
		lo, hi := 0, n+1
		for lo < hi {
			if mid := (lo + hi) / 2; ok(mid) {
				hi = mid
			} else {
				lo = mid + 1
			}
		}
		return lo
	}
	// The largest lo with P(K <= lo-1) <= alpha; the smallest hi with P(K >= hi) <= alpha.
	lo := search(func(k int) bool { return 1-atLeast(k) > alpha }) - 1
	hi := search(func(k int) bool { return atLeast(k) <= alpha })
	if lo >= 1 {
		iv.Lower = v[lo-1]
	}
	if hi <= n {
		iv.Upper = v[hi-1]
	}
	return iv
}
