// Package control draws control charts and says which of their points call for a
// person.
//
// A chart is a sequence of points, one for a wafer, a lot or a week, with a centre
// and limits at three standard deviations of what the point would do by chance
// alone. [Chart] is the common form of all of them. Which chart to take:
//
//   - one number a point (a lot's median, its epi thickness): [Individuals], and
//     [EWMA] or [CUSUM] for shifts too small for it;
//   - a few readings a point, alike by chance (monitor sites): [XbarS], or [XbarR];
//   - failing dice of so many (a bin's share): [P], or nearly always [LaneyP];
//   - counts of defects, per lot or by area: [C], [U], [LaneyU].
//
// # The trap of many dice
//
// A chart of subgroups, or of shares, takes the spread within a point as the
// measure of chance between points. With thousands of dice on a wafer that
// measure is minute, and every wafer is out of control. Where points differ by more than
// their dice explain, as wafers and lots always do, chart each point as one
// number ([Individuals] of wafer medians) or let the chart learn the extra spread
// from the points ([LaneyP]).
//
// # Limits first, then charts
//
// Limits are set once from a time when all was well (phase 1) and held against what comes
// (phase 2): [PhaseOne] finds the points that were well, and [Against] holds new ones to
// given limits. A chart that sets its limits by the points it judges is blind to the first of
// a shift.
//
// # False alarms
//
// A three-sigma limit cries wolf once in 370 points. Each of Nelson's rules adds
// its own rate, so that all eight together do once in some 75 points; see [Rules]. Rates
// here are for points that are independent and normal. Points that follow each
// other (a lot like the last one) make all of these charts alarm more often:
// package series tests for that.
//
// # Missing points
//
// A NaN point is skipped: it keeps its place, has no signal, and moving ranges do
// not bridge it. Indexes are from 0. Nothing is modified.
//
// Sources: Shewhart 1931; Montgomery 2013, Introduction to Statistical Quality
// Control; NIST/SEMATECH e-Handbook 6.3; Nelson 1984, J. Quality Technology 16,
// 237-239; Laney 2002, Quality Engineering 14, 531-537; AEC-Q002.
package control

import (
	"math"

	"kneepoint/stats"
)

// Chart is a sequence of points with their limits.
type Chart struct {
	// Points as charted: readings, means, ranges, shares ... NaN where missing.
	Points []float64
	// Lower and Upper are the limits of each point, in its unit.
	Lower, Upper []float64
	Center       float64
	// Sigma is the standard deviation of a single reading that the limits rest on;
	// the factor on the binomial or Poisson one for Laney's charts; NaN for other
	// charts of counts.
	Sigma float64
	// Signals are the indexes of points beyond a limit.
	Signals []int
	// N counts points that are not missing.
	N int
	// Why says what keeps the chart from having limits, or what to know about them.
	Why string
}

// newChart finishes a chart: counts, and signals beyond limits.
func newChart(points []float64, center, sigma float64, limits func(i int) (lower, upper float64)) Chart {
	c := Chart{Points: points, Center: center, Sigma: sigma,
		Lower: make([]float64, len(points)), Upper: make([]float64, len(points)), Signals: []int{}}
	for i, v := range points {
		c.Lower[i], c.Upper[i] = limits(i)
		if v != v {
			continue
		}
		c.N++
		if v < c.Lower[i] || v > c.Upper[i] {
			c.Signals = append(c.Signals, i)
		}
	}
	return c
}

// fixed are limits that are the same for all points.
func fixed(lower, upper float64) func(int) (float64, float64) {
	return func(int) (float64, float64) { return lower, upper }
}

// empty is a chart without limits, and why.
func empty(points []float64, why string) Chart {
	c := newChart(points, math.NaN(), math.NaN(), fixed(math.NaN(), math.NaN()))
	c.Why = why
	return c
}

// Against holds points to given limits, center -+ 3 sigma: the chart of phase 2.
func Against(x []float64, center, sigma float64) Chart {
	return newChart(append([]float64{}, x...), center, sigma, fixed(center-3*sigma, center+3*sigma))
}

// Individuals charts single readings about their mean, with sigma from the mean
// moving range,
//
//	sigma = mean |x_i - x_i-1| / d2(2), d2(2) = 2/sqrt(pi)
//	limits mean -+ 3 sigma
//
// and the moving ranges themselves, with upper limit D4(2) times their mean (index 0
// has none). The moving range sees only the difference of neighbours, so that a
// slow drift or a step does not widen the limits. Fewer than two neighbouring
// points give no limits.
//
// Source: NIST/SEMATECH e-Handbook 6.3.2.2.
func Individuals(x []float64) (individuals, ranges Chart) {
	points := append([]float64{}, x...)
	mr := movingRanges(x)
	m := stats.MomentsOf(mr)
	if m.N == 0 {
		return empty(points, "fewer than two neighbouring points"), empty(mr, "fewer than two neighbouring points")
	}
	mean := stats.Mean(x)
	k := ConstantsFor(2)
	sigma := m.Mean / k.MeanRange
	individuals = newChart(points, mean, sigma, fixed(mean-3*sigma, mean+3*sigma))
	if sigma == 0 {
		individuals.Why = "neighbouring points do not differ"
	}
	return individuals, newChart(mr, m.Mean, sigma, fixed(k.D3*m.Mean, k.D4*m.Mean))
}

// movingRanges are |x_i - x_i-1|: NaN first, and where either is missing.
func movingRanges(x []float64) []float64 {
	mr := make([]float64, len(x))
	for i := range x {
		mr[i] = math.NaN()
		if i > 0 {
			mr[i] = math.Abs(x[i] - x[i-1])
		}
	}
	return mr
}
