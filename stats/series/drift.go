package series

import (
	"fmt"
	"math"

	"kneepoint/stats"
	"kneepoint/stats/control"
)

// Drift is an average that is watched against a baseline.
type Drift struct {
	control.Chart
	// Baseline counts the values that center and sigma are from.
	Baseline int
	// First is the place of the first signal, -1 without one.
	First int
}

// EWMADrift charts the exponentially weighted average of a series against mean and
// standard deviation of its first baseline values, starting from their mean, with
// the limits of [control.EWMA] that grow from the first value on. A baseline of few
// values is itself off: with ten, expect several times the false alarms of a known
// level.
//
// Fewer than two values in the baseline give no limits. Panics as [control.EWMA],
// and on a baseline outside 0..len(y).
//
// Source: NIST/SEMATECH e-Handbook 6.3.2.4.
func EWMADrift(y []float64, baseline int, lambda, l float64) Drift {
	if baseline < 0 || baseline > len(y) {
		panic("stats/series: baseline longer than the series")
	}
	m := stats.MomentsOf(y[:baseline])
	d := Drift{Baseline: m.N, First: -1}
	d.Chart = control.EWMA(y, m.Mean, m.SD(), control.EWMAOptions{Lambda: lambda, L: l})
	if m.N < 2 {
		d.Why = fmt.Sprintf("%d values in the baseline", m.N)
	}
	if len(d.Signals) > 0 {
		d.First = d.Signals[0]
	}
	return d
}

// Text says in a sentence what a line means for a limit, in units of x named after
// (lots, days).
func (c Crossing) Text(line Line, name string) string {
	switch {
	case c.At.Estimate != c.At.Estimate:
		return "No time to the limit: " + c.At.Why + "."
	case c.Past:
		return "The drifting mean is " + c.At.Why + "."
	case math.IsInf(c.At.Estimate, 1) && math.IsInf(c.At.Lower, 1):
		return "The mean drifts away from the limit."
	case math.IsInf(c.At.Upper, 1):
		return fmt.Sprintf("The drift is not told from none; the limit would be met in %.3g %s at the soonest (95 %%).", c.At.Lower-line.lastX, name)
	}
	return fmt.Sprintf("The mean meets the limit in %.3g %s (95 %%: %.3g to %.3g) if the drift goes on.",
		c.At.Estimate-line.lastX, name, c.At.Lower-line.lastX, c.At.Upper-line.lastX)
}
