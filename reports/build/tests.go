package build

import (
	"fmt"
	"math"

	"kneepoint/config"
	"kneepoint/ingest"
	"kneepoint/reports"
	"kneepoint/stats"
	"kneepoint/stats/capability"
	"kneepoint/stats/dist"
	"kneepoint/stats/yield"
)

// quantileLevels are the points of a distribution that a report gives.
var quantileLevels = []float64{0.001, 0.01, 0.05, 0.25, 0.5, 0.75, 0.95, 0.99, 0.999}

// waferLevels are the points that a report gives of a test on one wafer.
var waferLevels = []float64{0.05, 0.25, 0.75, 0.95}

// histogramBins is the most bars a histogram of the page can show well.
const histogramBins = 60

// testAccount makes the account of test t. All its numbers are computed in the
// unit that is shown, so that a limit of 5 nA is the number 5 and not a rounding
// of it.
func (w *lotwork) testAccount(t int, curve []yield.LimitPoint) reports.Test {
	test := w.lot.Tests()[t]
	x := inUnit(w.lot.Values(t), test.Unit)
	marks := w.lot.Censor(t)
	sum := describe(x, marks, quantileLevels)
	r := reports.Test{
		Name: test.Name, Measures: test.Measures, Unit: test.Unit.Text, Condition: test.Condition,
		Lower: shown(test.Lower, test.Unit), Upper: shown(test.Upper, test.Unit), LimitFrom: test.LimitsFrom,
		N: sum.N, Missing: sum.Missing, Over: w.over(t),
		Mean: num(sum.Mean), SD: num(sum.SD), Median: num(sum.Median), MADSigma: num(sum.MADSigma),
		Min: num(sum.Min), Max: num(sum.Max), Skewness: num(sum.Skewness), Kurtosis: num(sum.Kurtosis),
	}
	r.Censored = reports.Censored{Clamp: shown(test.Clamp, test.Unit), Floor: shown(test.Floor, test.Unit)}
	for _, m := range marks {
		switch {
		case m > 0:
			r.Censored.AtLeast++
		case m < 0:
			r.Censored.AtMost++
		}
	}
	r.Why = sum.Why
	for i, q := range sum.Quantiles {
		r.Quantiles = append(r.Quantiles, reports.Quantile{P: num(quantileLevels[i]), Value: num(q)})
	}
	if sum.N > 0 {
		r.Histogram = w.histogram(x)
	}
	fit, choice, body := w.fit(t, x, marks, r.Histogram)
	r.Fit = fit
	within, aside := withoutGross(x, body, choice)
	if r.Capability = w.capability(t, within, marks, aside); len(r.Capability.Why) == 0 {
		r.Capability.ByPercentiles = w.byPercentiles(t, within, marks, choice)
	}
	w.testLoss(t, &r)
	r.LimitWhy = w.curveWhy(test)
	for _, p := range curve {
		if p.Upper && test.Upper == 0 || !p.Upper && test.Lower == 0 {
			continue // a share of zero moves nothing
		}
		limit := "lower"
		if p.Upper {
			limit = "upper"
		}
		r.LimitCurve = append(r.LimitCurve, reports.LimitPoint{Limit: limit, Shift: num(p.Shift), Value: shown(p.Value, test.Unit), Yield: num(p.Yield)})
	}
	r.ByWafer = w.testByWafer(t, x, marks)
	r.Repeatability = w.repeatability(t, x, marks)
	return r
}

// curveWhy says why the yield against the limits is not known, or not all of it.
func (w *lotwork) curveWhy(test ingest.Test) string {
	switch {
	case !finite(test.Lower) && !finite(test.Upper):
		return "the test has no limit"
	case w.losses.StopOnFail:
		return "the program stops at the first fail: what a wider limit would win is not known"
	case test.Lower == 0 || test.Upper == 0:
		return "a limit of zero cannot be moved by a share of itself"
	}
	return ""
}

// over says which dice the distribution of test t is over.
func (w *lotwork) over(t int) string {
	if w.losses.StopOnFail && w.position[0] != t {
		return "dice that reached this test: the program stops at the first fail, so dice failing earlier tests are not in it"
	}
	return "all tested dice with a reading"
}

func (w *lotwork) histogram(x []float64) *reports.Histogram {
	bins := stats.FreedmanDiaconis(x, histogramBins)
	if len(bins.Edges) < 2 {
		return nil
	}
	passing, failing := make([]float64, len(x)), make([]float64, len(x))
	for i, v := range x {
		passing[i], failing[i] = v, math.NaN()
		if !w.pass[i] {
			passing[i], failing[i] = math.NaN(), v
		}
	}
	h := &reports.Histogram{Scale: "linear", Rule: bins.Rule}
	if bins.Log {
		h.Scale = "log"
	}
	for _, e := range bins.Edges {
		h.Edges = append(h.Edges, num(e))
	}
	var below, above int
	h.Pass, h.Below, h.Above = bins.Count(passing)
	h.Fail, below, above = bins.Count(failing)
	h.Below += below
	h.Above += above
	return h
}

func (w *lotwork) capability(t int, x []float64, marks []int8, aside int) *reports.Capability {
	test := w.lot.Tests()[t]
	lower, upper := float64(shown(test.Lower, test.Unit)), float64(shown(test.Upper, test.Unit))
	if !finite(lower) && !finite(upper) {
		none := unknown("the test has no limits")
		return &reports.Capability{Cp: none, Cpk: none, Pp: none, Ppk: none, Within: reports.NaN, Overall: reports.NaN, Over: "nothing", Why: none.Why}
	}
	over := w.over(t) + "; failing dice too"
	if aside > 0 {
		over += fmt.Sprintf(", but without %d gross outliers, which no process spread explains and which are counted as losses", aside)
	}
	c := capability.Compute(capability.Input{Values: x, Censor: marks, Group: w.code, Lower: lower, Upper: upper,
		MinimumN: w.in.Settings.MinimumN, Confidence: confidence})
	return &reports.Capability{N: c.N, Cp: interval(c.Cp), Cpk: interval(c.Cpk), Pp: interval(c.Pp), Ppk: interval(c.Ppk),
		Within: num(c.Within), Overall: num(c.Overall), Over: over, Why: c.Why, Notes: c.Notes}
}

// withoutGross returns the readings that the fit describes, gross outliers NaN,
// and how many they are.
func withoutGross(x, body []float64, c dist.Choice) (within []float64, aside int) {
	within = make([]float64, len(x))
	for i, v := range body {
		within[i] = v
		if c.AsideLow+c.AsideHigh > 0 && (v < c.AsideFrom || v > c.AsideTo) {
			within[i] = math.NaN()
		}
		if within[i] != v && x[i] == x[i] {
			aside++
		}
	}
	return within, aside
}

// byPercentiles is the capability of what the fit describes: gross outliers, which
// it sets aside, are losses of another kind and are counted as such.
func (w *lotwork) byPercentiles(t int, x []float64, marks []int8, c dist.Choice) *reports.PercentileCapability {
	test := w.lot.Tests()[t]
	fit := c.Best
	if c.Empirical {
		fit = nil
	}
	p := capability.ByPercentiles(capability.Input{Values: x, Censor: marks, Group: w.code, MinimumN: w.in.Settings.MinimumN, Confidence: confidence,
		Lower: float64(shown(test.Lower, test.Unit)), Upper: float64(shown(test.Upper, test.Unit))}, fit)
	ppm := func(i stats.Interval) reports.Interval {
		i.Estimate, i.Lower, i.Upper = 1e6*i.Estimate, 1e6*i.Lower, 1e6*i.Upper
		return interval(i)
	}
	return &reports.PercentileCapability{Source: p.Source, N: p.N, Low: interval(p.Low), Median: interval(p.Median), High: interval(p.High), Pp: interval(p.Pp), Ppk: interval(p.Ppk),
		PPMBelow: ppm(p.Below), PPMAbove: ppm(p.Above), PPMOutside: ppm(p.Outside), Why: p.Why, Notes: p.Notes}
}

func (w *lotwork) testLoss(t int, r *reports.Test) {
	loss, n := w.losses.Tests[t], w.lot.Len()
	r.Loss = reports.Loss{First: share(loss.First, n), FirstDice: loss.First, Alone: reports.NaN, Any: reports.NaN}
	r.LowFails, r.HighFails = loss.Low, loss.High
	if w.unjudged != "" {
		r.Loss.First, r.Loss.Why = reports.NaN, w.unjudged
		r.Marginal, r.MarginalMeans = reports.NaN, w.unjudged
		return
	}
	if w.losses.StopOnFail {
		r.Loss.Why = "the program stops at the first fail: which other tests a failing die would fail is not known"
	} else {
		r.Loss.Alone, r.Loss.Any = share(loss.Alone, n), share(loss.Any, n)
		r.Loss.AloneDice, r.Loss.AnyDice = &loss.Alone, &loss.Any
	}
	failing := loss.Low + loss.High
	r.Marginal = share(loss.Marginal, failing)
	switch {
	case failing == 0:
		r.MarginalMeans = "no die fails this test"
	case w.lot.Tests()[t].Lower == 0 || w.lot.Tests()[t].Upper == 0:
		r.Marginal, r.MarginalMeans = reports.NaN, "not known: a share of a limit of zero is nothing"
	default:
		r.MarginalMeans = "share of the dice failing this test that are within " + percent(w.in.Settings.MarginalPercent) + " of the limit"
	}
}

// testByWafer is the level of a test on each wafer.
func (w *lotwork) testByWafer(t int, x []float64, marks []int8) []reports.WaferLevel {
	var out []reports.WaferLevel
	test := w.lot.Tests()[t]
	raw := w.lot.Values(t)
	for _, wafer := range w.lot.Wafers() {
		var m []int8
		if marks != nil {
			m = marks[wafer.Lo:wafer.Hi]
		}
		sum := describe(x[wafer.Lo:wafer.Hi], m, waferLevels)
		level := reports.WaferLevel{Wafer: wafer.ID, N: sum.N, Median: num(sum.Median), MADSigma: num(sum.MADSigma),
			Q05: reports.NaN, Q25: reports.NaN, Q75: reports.NaN, Q95: reports.NaN}
		if len(sum.Quantiles) == len(waferLevels) {
			level.Why = sum.Why
			level.Q05, level.Q25, level.Q75, level.Q95 = num(sum.Quantiles[0]), num(sum.Quantiles[1]), num(sum.Quantiles[2]), num(sum.Quantiles[3])
		}
		for i := wafer.Lo; i < wafer.Hi; i++ {
			var mark int8
			if marks != nil {
				mark = marks[i]
			}
			if outside(raw[i], mark, test.Lower, test.Upper) {
				level.Fails++
			}
		}
		out = append(out, level)
	}
	return out
}

// repeatability compares the first reading of retested dice with the one that
// counts. Bounds say nothing of the gauge and are left out.
func (w *lotwork) repeatability(t int, x []float64, marks []int8) *reports.Repeat {
	index, unit := w.lot.FirstPass().Index, w.lot.Tests()[t].Unit
	if index == nil {
		return &reports.Repeat{Sigma: reports.NaN, Shift: reports.NaN, Why: "no die was measured twice"}
	}
	early := w.lot.Earlier().Values[t]
	var first, last []float64
	for row, k := range index {
		if k >= 0 && (marks == nil || marks[row] == 0) {
			first, last = append(first, unit.FromSI(early[k])), append(last, x[row])
		}
	}
	g := stats.RepeatabilityOf(first, last)
	return &reports.Repeat{Dice: g.N, Sigma: num(g.Sigma), Shift: num(g.Shift), Why: g.Why}
}

// limitShifts are the moves of a limit at which the yield is given: eleven steps
// either way of at most percent of the limit, and none.
func limitShifts(percent float64) []float64 {
	const steps = 10
	out := make([]float64, 0, 2*steps+1)
	for i := -steps; i <= steps; i++ {
		out = append(out, percent/100*float64(i)/steps)
	}
	return out
}

// inUnit returns SI values in the unit that is shown; always a copy.
func inUnit(si []float64, u config.Unit) []float64 {
	out := make([]float64, len(si))
	for i, v := range si {
		out[i] = u.FromSI(v)
	}
	return out
}

func shown(si float64, u config.Unit) reports.Number { return num(u.FromSI(si)) }

func num(v float64) reports.Number { return reports.Number(v) }

func interval(i stats.Interval) reports.Interval {
	return reports.Interval{Estimate: num(i.Estimate), Lower: num(i.Lower), Upper: num(i.Upper), Method: i.Method, Why: i.Why}
}
