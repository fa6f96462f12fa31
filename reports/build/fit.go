package build

import (
	"math"

	"kneepoint/reports"
	"kneepoint/stats"
	"kneepoint/stats/dist"
)

// fit chooses the distribution of a test's readings; body is what it is of: the
// readings without far bounds.
func (w *lotwork) fit(t int, x []float64, marks []int8, h *reports.Histogram) (*reports.Fit, dist.Choice, []float64) {
	body, low, high := setAsideBounds(x, marks)
	c := dist.Choose(body, marks)
	w.logScale[t] = c.Best != nil && c.Best.Family() == dist.LognormalFamily
	f := &reports.Fit{Empirical: c.Empirical, Reason: c.Reason, Misfit: c.Misfit.Text, Gap: num(c.Misfit.Gap), AsideLow: c.AsideLow + low, AsideHigh: c.AsideHigh + high}
	for _, k := range c.Candidates {
		r := reports.Candidate{Distribution: k.Family.String(), AIC: reports.NaN, Why: k.Why}
		if k.Fit != nil {
			r.AIC = num(k.Fit.AIC())
		}
		f.Candidates = append(f.Candidates, r)
	}
	for _, p := range c.Populations {
		f.Populations = append(f.Populations, reports.Population{Share: num(p.Weight), Mean: num(p.Mean), SD: num(p.SD), From: num(p.From), To: num(p.To)})
	}
	if c.Best == nil {
		f.Gap = reports.NaN
		return f, c, body
	}
	f.Distribution = c.Best.Family().String()
	for _, p := range c.Best.Parameters(confidence) {
		f.Parameters = append(f.Parameters, reports.Parameter{Name: p.Name, Interval: interval(p.Value)})
	}
	if h != nil {
		h.Fitted = expected(c, body, h.Edges)
	}
	return f, c, body
}

// expected is how many readings the fit puts between each two edges. The fit
// describes the readings that were not set aside, bounds among them.
func expected(c dist.Choice, x []float64, edges []reports.Number) []reports.Number {
	n := 0
	for _, v := range x {
		if !math.IsNaN(v) {
			n++
		}
	}
	n -= c.AsideLow + c.AsideHigh
	var out []reports.Number
	for i := range len(edges) - 1 {
		share := c.Best.CDF(float64(edges[i+1])) - c.Best.CDF(float64(edges[i]))
		out = append(out, num(float64(n)*share))
	}
	return out
}

// farBound is how many robust sigmas off the median a bound is set aside: the
// distance at which dist.Choose sets readings aside.
const farBound = 6

// boundSample is how many readings, evenly taken, tell the level and spread that
// bounds are held against: no more are needed to know what is far.
const boundSample = 20_000

// setAsideBounds returns the readings without the bounds that stand far off the
// others, low ones and high ones counted: an open contact reads a breakdown at
// the tester's clamp, which says nothing of how the junctions are distributed. A
// bound is far when it is so as it stands and, where all readings are positive, in
// the logarithm too. Without such bounds x itself is returned.
func setAsideBounds(x []float64, marks []int8) (body []float64, low, high int) {
	if marks == nil {
		return x, 0, 0
	}
	step := max(1, len(x)/boundSample)
	exact, logs := make([]float64, 0, boundSample), make([]float64, 0, boundSample)
	positive := true
	for i := 0; i < len(x); i += step {
		if v := x[i]; marks[i] == 0 && !math.IsNaN(v) {
			exact = append(exact, v)
			logs = append(logs, math.Log(v))
			positive = positive && v > 0
		}
	}
	centre, sigma := stats.Median(exact), stats.MADSigma(exact)
	logCentre, logSigma := 0.0, 0.0
	if positive {
		logCentre, logSigma = stats.Median(logs), stats.MADSigma(logs)
	}
	body = x
	for i, v := range x {
		if marks[i] == 0 || math.IsNaN(v) || math.Abs(v-centre) <= farBound*sigma {
			continue
		}
		if positive && v > 0 && math.Abs(math.Log(v)-logCentre) <= farBound*logSigma {
			continue
		}
		if low+high == 0 {
			body = append([]float64(nil), x...)
		}
		body[i] = math.NaN()
		if v < centre {
			low++
		} else {
			high++
		}
	}
	return body, low, high
}
