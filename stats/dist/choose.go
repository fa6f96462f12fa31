package dist

import (
	"cmp"
	"fmt"
	"math"
	"slices"
	"strings"

	"kneepoint/stats"
)

// Candidate is one family's fit.
type Candidate struct {
	Family Family
	Fit    Distribution // nil when it could not be made
	Why    string       // why not
}

// Choice is the distribution chosen for a test's readings, and why.
type Choice struct {
	// Best is the chosen fit; nil when there is none, and Reason says why.
	Best Distribution
	// Empirical says that no family describes the readings: percentiles should be
	// taken from the readings themselves.
	Empirical bool
	// Candidates are all four families, in their order.
	Candidates []Candidate
	Misfit     Misfit // of Best
	// Populations are the populations of a mixture, when no family describes the
	// readings but two or more normal populations do. Nil otherwise.
	Populations []Population
	// AsideLow and AsideHigh count gross outliers that were set aside, below AsideFrom
	// and above AsideTo: readings beyond six robust sigmas of the median both as
	// they are and, where all readings are positive, in their logarithms.
	AsideLow, AsideHigh int
	AsideFrom, AsideTo  float64
	Reason              string
}

// Choose picks the family that describes readings, marked as in [FitNormal],
// best: the smallest AIC of normal, lognormal, Weibull and gamma, and the normal
// one wherever it does practically as well, being the simplest.
//
// Gross outliers (shorted dice in a breakdown test) are set aside first, and
// counted: no family describes what failed for another reason. When the best
// family is [Poor], the choice is Empirical, and a mixture is tried to say
// whether the lot holds more than one population.
//
// NaNs are skipped; it panics when lengths differ.
func Choose(x []float64, censor []int8) Choice {
	if censor != nil && len(censor) != len(x) {
		panic("stats/dist: slice length mismatch")
	}
	var c Choice
	main := c.setAside(x, censor)
	r := Readings{Values: main, Censor: censor}
	logged := r.logs()
	for _, f := range []Family{NormalFamily, LognormalFamily, WeibullFamily, GammaFamily} {
		d, err := fit(f, r, &logged)
		if err != nil {
			c.Candidates = append(c.Candidates, Candidate{Family: f, Why: err.Error()})
			continue
		}
		c.Candidates = append(c.Candidates, Candidate{Family: f, Fit: d})
		if c.Best == nil || d.AIC() < c.Best.AIC() {
			c.Best = d
		}
	}
	if c.Best == nil {
		c.Reason = "no distribution: " + c.Candidates[0].Why
		return c
	}
	var because []string
	normal := c.Candidates[0].Fit
	switch {
	case c.Best.Family() == NormalFamily:
		because = append(because, "normal has the smallest AIC"+c.runnerUp())
	case normal != nil && (normal.AIC()-c.Best.AIC() < 2 || alike(normal, c.Best)):
		because = append(because, fmt.Sprintf("normal does practically as well as %s, which has the smallest AIC", c.Best.Family()))
		c.Best = normal
	default:
		because = append(because, fmt.Sprintf("%s has the smallest AIC%s", c.Best.Family(), c.runnerUp()))
		if s := skewness(main, censor); c.Best.Count().Censored() == 0 && math.Abs(s) > 0.1 {
			side := "right"
			if s < 0 {
				side = "left"
			}
			because = append(because, fmt.Sprintf("skewed to the %s (%.2g)", side, s))
		}
	}
	c.Misfit = SizeOfMisfit(main, censor, c.Best)
	because = append(because, c.Misfit.Text)
	if c.Misfit.Verdict == Poor {
		c.Empirical = true
		because = append(because, c.populations(main, censor))
	}
	if n := c.AsideLow + c.AsideHigh; n > 0 {
		because = append(because, fmt.Sprintf("%d gross outliers were set aside (%d low, %d high)", n, c.AsideLow, c.AsideHigh))
	}
	c.Reason = strings.Join(because, "; ")
	return c
}

// setAside returns the readings with gross outliers made missing.
func (c *Choice) setAside(x []float64, censor []int8) []float64 {
	var s stats.Selector
	const k = 6
	med, sigma := s.MedianMADSigma(x)
	lo, hi := med-k*sigma, med+k*sigma
	least, most := math.Inf(1), math.Inf(-1)
	for _, v := range x {
		if v == v {
			least, most = min(least, v), max(most, v)
		}
	}
	if c.AsideFrom, c.AsideTo = lo, hi; least >= lo && most <= hi {
		return x
	}
	if least > 0 {
		logs := make([]float64, len(x))
		for i, v := range x {
			logs[i] = math.Log(v)
		}
		u, v := s.MedianMADSigma(logs)
		lo, hi = math.Min(lo, math.Exp(u-k*v)), math.Max(hi, math.Exp(u+k*v))
	}
	c.AsideFrom, c.AsideTo = lo, hi
	if !(lo < hi) { // half of the readings are equal: there is no robust sigma
		c.AsideFrom, c.AsideTo = math.Inf(-1), math.Inf(1)
		return x
	}
	out := make([]float64, len(x))
	for i, v := range x {
		out[i] = v
		bounded := censor != nil && censor[i] != 0 // a clamp far out is a bound like any other
		switch {
		case v < lo && !bounded:
			c.AsideLow++
			out[i] = math.NaN()
		case v > hi && !bounded:
			c.AsideHigh++
			out[i] = math.NaN()
		}
	}
	return out
}

// alike says that two fits differ by nothing that matters: quantiles out to three
// sigma within a quarter of a sigma.
func alike(a, b Distribution) bool {
	sigma := (b.Quantile(0.8413447460685429) - b.Quantile(0.15865525393145705)) / 2
	for _, p := range []float64{0.00135, 0.02, 0.25, 0.5, 0.75, 0.98, 0.99865} {
		if math.Abs(a.Quantile(p)-b.Quantile(p)) > 0.25*sigma {
			return false
		}
	}
	return true
}

// runnerUp says by how much the second best is worse.
func (c *Choice) runnerUp() string {
	var fits []Distribution
	for _, k := range c.Candidates {
		if k.Fit != nil {
			fits = append(fits, k.Fit)
		}
	}
	if len(fits) < 2 {
		return ", being the only one that can be fitted"
	}
	slices.SortStableFunc(fits, func(a, b Distribution) int { return cmp.Compare(a.AIC(), b.AIC()) })
	return fmt.Sprintf(", %.3g below %s", fits[1].AIC()-fits[0].AIC(), fits[1].Family())
}

// populations tries a mixture on what no family describes.
//
// Many readings are thinned to so many evenly spaced order statistics, which keep the
// shape: parts that show in more readings and not in these would differ by
// less than anybody cares for.
func (c *Choice) populations(x []float64, censor []int8) string {
	const none = "percentiles of the readings themselves are used"
	x, censor = evenly(x, censor, 1500)
	m, err := fitMixtures(x, censor, 4, 100, 1e-8) // where the parts lie, not their last digit
	if err != nil {
		return none
	}
	p := m.ByParts[m.Best-1].Populations()
	if len(p) < 2 {
		return none
	}
	c.Populations = p
	var parts []string
	for _, q := range p {
		parts = append(parts, fmt.Sprintf("%.3g %% about %.4g", 100*q.Weight, q.Mean))
	}
	return fmt.Sprintf("the readings fall into %d populations (%s); %s", len(p), strings.Join(parts, ", "), none)
}

// evenly returns n order statistics of x at even steps of rank, with their marks; x
// itself when it has no more.
func evenly(x []float64, censor []int8, n int) ([]float64, []int8) {
	if len(x) <= n {
		return x, censor
	}
	order := make([]int32, len(x))
	for i := range order {
		order[i] = int32(i)
	}
	slices.SortStableFunc(order, func(a, b int32) int { return cmp.Compare(x[a], x[b]) })
	out := make([]float64, n)
	var marks []int8
	if censor != nil {
		marks = make([]int8, n)
	}
	for i := range out {
		k := order[(2*i+1)*len(x)/(2*n)]
		out[i] = x[k]
		if censor != nil {
			marks[i] = censor[k]
		}
	}
	return out, marks
}
