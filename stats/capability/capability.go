package capability

import (
	"fmt"
	"math"

	"kneepoint/stats"
	"kneepoint/stats/dist"
)

// Input is one test's readings and limits.
type Input struct {
	Values []float64 // NaN: missing, skipped
	Censor []int8    // nil: all exact; +1 at least, -1 at most, as in stats/dist
	Group  []int32   // subgroup (wafer) of each value; nil: none
	// Lower and Upper are the limits, NaN for none.
	Lower, Upper float64
	// MinimumN is the number of exact readings below which no index is given;
	// below 2 it counts as 2. Common practice, no source: 30 or more.
	MinimumN   int
	Confidence float64 // of the intervals, two-sided
}

// Result is the capability of one test.
type Result struct {
	N int // readings used, censored ones included
	// Cp and Cpk are by the spread within subgroups, Pp and Ppk by the overall
	// one. NaN with a Why where not computed.
	Cp, Cpk, Pp, Ppk stats.Interval
	// Within is the pooled standard deviation within subgroups,
	// sqrt(sum (n_i-1) s_i^2 / sum (n_i-1)); Overall that of all readings, divisor
	// n-1. With censored readings both are by maximum likelihood, Overall without
	// a correction for n.
	Within, Overall float64
	Why             string   // why there is no number at all; "" when there is one
	Notes           []string // what a reader of the numbers must know; never nil
}

// Compute computes the indices of a test with their intervals.
//
// Nothing is given, and Why says so, for: no reading, no limit, limits that
// cross, fewer exact readings than MinimumN, readings that are all equal, an
// infinite reading. With one limit there is no Cp and no Pp, and Cpk and Ppk are
// those of that limit. Without subgroups there is no Cp and no Cpk.
//
// Intervals: Pp and Cp by chi-square, Ppk and Cpk by Bissell's normal
// approximation. Two things change the numbers that go in. With two subgroups or
// more, the mean and the overall sigma count as resting on subgroups as far as
// these differ (variance of the mean from the mean square between subgroups;
// degrees of freedom of sigma by Satterthwaite 1946, Biometrics Bulletin 2,
// 110-114); without a difference that is the usual formula again. With censored
// readings the variances are those of the censored fit. The method of each
// interval is named in it.
//
// It panics when lengths differ or Confidence is outside (0, 1).
func Compute(in Input) Result {
	checkConfidence(in.Confidence)
	if in.Censor != nil && len(in.Censor) != len(in.Values) || in.Group != nil && len(in.Group) != len(in.Values) {
		panic("stats/capability: slice length mismatch")
	}
	c := computer{in: in}
	c.Notes = []string{}
	if why := c.level(); why != "" {
		r := Result{N: c.N, Within: math.NaN(), Overall: math.NaN(), Why: why, Notes: c.Notes}
		r.Cp, r.Cpk, r.Pp, r.Ppk = stats.NoInterval(why), stats.NoInterval(why), stats.NoInterval(why), stats.NoInterval(why)
		return r
	}
	c.within()
	c.overallIndices()
	c.withinIndices()
	c.shape()
	return c.Result
}

// computer carries what the steps find out.
type computer struct {
	Result
	in       Input
	censored int
	mean     float64
	moments  stats.Moments
	// Variance of the mean and of ln(Overall), and their covariance.
	varMean, varLog, cov float64
	// Subgroups: number, mean squares between and within, degrees of freedom
	// within, and the variance of ln(Within).
	groups          int
	between, inside float64
	df, varLogIn    float64
	withinWhy       string
}

// level finds mean and overall sigma, or why there are none.
func (c *computer) level() string {
	in := c.in
	exact := 0
	for i, v := range in.Values {
		if v != v {
			continue
		}
		c.N++
		if in.Censor == nil || in.Censor[i] == 0 {
			exact++
		}
	}
	c.censored = c.N - exact
	least := max(in.MinimumN, 2)
	switch {
	case c.N == 0:
		return "no readings"
	case in.Lower != in.Lower && in.Upper != in.Upper:
		return "no limit"
	case in.Lower >= in.Upper:
		return "the lower limit is not below the upper one"
	case exact < least && c.censored > 0:
		return fmt.Sprintf("%d exact readings (%d more are only bounds); an index needs %d", exact, c.censored, least)
	case exact < least:
		return fmt.Sprintf("%d readings; an index needs %d", exact, least)
	}
	if c.censored > 0 {
		return c.censoredLevel()
	}
	m := stats.MomentsOf(in.Values)
	if math.IsInf(m.Min, 0) || math.IsInf(m.Max, 0) {
		return "an infinite reading"
	}
	if m.Min == m.Max {
		return "all readings are equal: no spread to compare with the limits"
	}
	c.moments, c.mean, c.Overall = m, m.Mean, m.SD()
	n := float64(m.N)
	c.varMean, c.varLog = c.Overall*c.Overall/n, 1/(2*(n-1))
	return ""
}

func (c *computer) censoredLevel() string {
	fit, err := dist.FitNormal(c.in.Values, c.in.Censor)
	switch {
	case err == dist.ErrTooFew:
		return "all exact readings are equal: no spread to compare with the limits"
	case err != nil:
		return "no censored fit: " + err.Error()
	}
	c.mean, c.Overall = fit.Mu, fit.Sigma
	c.varMean, c.varLog, c.cov = fit.SEMu*fit.SEMu, fit.SELogSigma*fit.SELogSigma, fit.Cov
	c.Notes = append(c.Notes, fmt.Sprintf("%d of %d readings are only bounds (%d at least, %d at most): "+
		"mean and sigma are from a censored normal fit, and the tail beyond the bound is extrapolated",
		fit.Censored(), fit.N, fit.Right, fit.Left))
	return ""
}

// within finds the spread inside subgroups and how much these differ.
func (c *computer) within() {
	c.Within = math.NaN()
	if c.in.Group == nil {
		c.withinWhy = "no subgroups: the spread within them is not known"
		return
	}
	fit, err := dist.FitNormalGroups(c.in.Values, c.in.Censor, c.in.Group)
	if err != nil {
		c.withinWhy = "the readings within each subgroup are equal, or too few"
		return
	}
	if fit.Dropped > 0 {
		c.Notes = append(c.Notes, fmt.Sprintf("%d readings are of subgroups without an exact one and are left out of the within sigma", fit.Dropped))
	}
	c.groups = len(fit.Groups)
	c.Within, c.varLogIn = fit.Sigma, fit.SELogSigma*fit.SELogSigma
	c.df = float64(fit.N - c.groups)
	c.inside = fit.Sigma * fit.Sigma
	if c.groups < 2 {
		return
	}
	var n, sum float64
	for i, mu := range fit.Mu {
		n += float64(fit.Each[i])
		sum += float64(fit.Each[i]) * (mu - c.mean)
	}
	centre := sum / n
	for i, mu := range fit.Mu {
		d := mu - c.mean - centre
		c.between += float64(fit.Each[i]) * d * d
	}
	c.between /= float64(c.groups - 1)
	c.between = math.Max(c.between, c.inside) // a difference below chance is none
}

// clustered returns by how much the differences between subgroups raise the
// variance of the mean and of ln sigma against independent readings.
func (c *computer) clustered() (mean, logSigma float64) {
	if c.groups < 2 {
		return 1, 1
	}
	k := float64(c.groups)
	b, w := (k-1)*c.between, c.df*c.inside
	all := k - 1 + c.df
	overall := (b + w) / all
	df := (b + w) * (b + w) / (b*b/(k-1) + w*w/c.df)
	return math.Max(1, c.between/overall), math.Max(1, all/df)
}

func (c *computer) overallIndices() {
	onMean, onSigma := c.clustered()
	varMean, varLog, cov := c.varMean*onMean, c.varLog*onSigma, c.cov*math.Sqrt(onMean*onSigma)
	i := Indices(c.mean, c.Overall, c.in.Lower, c.in.Upper)
	c.Pp = c.potential(i.Cp, varLog, onSigma > 1)
	c.Ppk = c.nearer(i, c.Overall, varMean, varLog, cov)
	if onMean > 1 {
		c.Ppk.Method += ", by subgroup"
		if c.groups < 5 {
			c.Notes = append(c.Notes, fmt.Sprintf("the overall indices rest on %d subgroups that differ: their intervals are rough", c.groups))
		}
	}
}

func (c *computer) withinIndices() {
	if c.Within != c.Within {
		c.Cp, c.Cpk = stats.NoInterval(c.withinWhy), stats.NoInterval(c.withinWhy)
		return
	}
	onMean, _ := c.clustered()
	i := Indices(c.mean, c.Within, c.in.Lower, c.in.Upper)
	c.Cp = c.potential(i.Cp, c.varLogIn, false)
	c.Cpk = c.nearer(i, c.Within, c.varMean*onMean, c.varLogIn, 0)
	if onMean > 1 {
		c.Cpk.Method += ", mean by subgroup"
	}
}

// potential is the interval of Cp or Pp. The variance of ln sigma stands for the
// degrees of freedom 1/(2 variance), n-1 in the plain case.
func (c *computer) potential(cp, varLog float64, bySubgroup bool) stats.Interval {
	if cp != cp {
		return stats.NoInterval("needs both limits")
	}
	iv := CpInterval(cp, 1/(2*varLog), c.in.Confidence)
	if bySubgroup {
		iv.Method = "chi-square, degrees of freedom by subgroup (Satterthwaite)"
	}
	if c.censored > 0 {
		iv.Method = "chi-square, degrees of freedom of the censored fit"
	}
	return iv
}

// nearer is the interval of Cpk or Ppk: the delta method for the index of the
// nearer limit, which is Bissell's formula when mean and sigma are independent.
func (c *computer) nearer(i Index, sigma, varMean, varLog, cov float64) stats.Interval {
	toMean := 1 / (3 * sigma)
	if i.Cpk != i.Cpl {
		toMean = -toMean
	}
	v := toMean*toMean*varMean + i.Cpk*i.Cpk*varLog - 2*toMean*i.Cpk*cov
	iv := normalInterval(i.Cpk, v, c.in.Confidence, "Bissell 1990")
	if c.censored > 0 {
		iv.Method = "delta method on the censored fit"
	}
	return iv
}

// shape notes readings that are far from normal.
func (c *computer) shape() {
	if c.censored > 0 {
		return // skewness and kurtosis of clamped readings are not those of the process
	}
	skew, kurt := c.moments.Skewness(), c.moments.Kurtosis()
	if math.Abs(skew) > 1 || kurt > 3 {
		c.Notes = append(c.Notes, fmt.Sprintf("far from normal (skewness %.2g, excess kurtosis %.2g): "+
			"the indices do not translate into parts per million outside", skew, kurt))
	}
}
