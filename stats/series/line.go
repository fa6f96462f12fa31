package series

import (
	"fmt"
	"math"

	"gonum.org/v1/gonum/mathext"
	"gonum.org/v1/gonum/stat/distuv"
	"kneepoint/stats"
)

// Line is a straight line through points by least squares, y = Intercept + Slope x.
type Line struct {
	Intercept, Slope     float64
	SEIntercept, SESlope float64
	T, P                 float64 // of Slope against none; P two-sided
	RSquared             float64
	ResidualSD           float64 // divisor n-2
	F                    float64
	// DurbinWatson is about 2 when residuals, in the order given, do not follow each
	// other, and below when neighbours are alike: intervals are then too narrow.
	// LagOne is the residuals' first autocorrelation.
	DurbinWatson, LagOne float64
	N                    int
	Why                  string

	meanX, meanY, sxx, lastX float64
}

// FitLine fits a straight line. Pairs with a NaN are skipped. With fewer than three
// pairs, or one x only, everything is NaN and Why says so. Intervals assume
// residuals that are independent and alike, and not far from normal when points
// are few.
//
// Source: Draper and Smith 1998, Applied Regression Analysis, ch. 1; Durbin and
// Watson 1950, Biometrika 37, 409-428.
func FitLine(x, y []float64) Line {
	if len(x) != len(y) {
		panic("stats/series: slice length mismatch")
	}
	var u, v []float64
	for i := range x {
		if x[i] == x[i] && y[i] == y[i] {
			u, v = append(u, x[i]), append(v, y[i])
		}
	}
	nan := math.NaN()
	l := Line{Intercept: nan, Slope: nan, SEIntercept: nan, SESlope: nan, T: nan, P: nan, RSquared: nan,
		ResidualSD: nan, F: nan, DurbinWatson: nan, LagOne: nan, N: len(u), meanX: nan, meanY: nan, sxx: nan, lastX: nan}
	if l.N < 3 {
		l.Why = fmt.Sprintf("%d points; a line with an interval needs 3", l.N)
		return l
	}
	l.meanX, l.meanY = stats.Mean(u), stats.Mean(v)
	var sxy, syy float64
	l.sxx, l.lastX = 0, math.Inf(-1)
	for i := range u {
		dx, dy := u[i]-l.meanX, v[i]-l.meanY
		l.sxx += dx * dx
		sxy += dx * dy
		syy += dy * dy
		l.lastX = math.Max(l.lastX, u[i])
	}
	if !(l.sxx > 0) {
		l.Why = "all points have the same x"
		return l
	}
	l.Slope = sxy / l.sxx
	l.Intercept = l.meanY - l.Slope*l.meanX
	var sse, steps, products, before float64
	for i := range u {
		e := v[i] - l.meanY - l.Slope*(u[i]-l.meanX)
		sse += e * e
		if i > 0 {
			steps += (e - before) * (e - before)
			products += e * before
		}
		before = e
	}
	n := float64(l.N)
	s2 := sse / (n - 2)
	l.ResidualSD = math.Sqrt(s2)
	l.SESlope = math.Sqrt(s2 / l.sxx)
	l.SEIntercept = math.Sqrt(s2 * (1/n + l.meanX*l.meanX/l.sxx))
	l.RSquared = 1 - sse/syy
	l.T = l.Slope / l.SESlope
	l.F = l.T * l.T
	l.P = twoSided(l.T, n-2)
	l.DurbinWatson, l.LagOne = steps/sse, products/sse
	return l
}

// twoSided is the chance of a Student's t beyond t on either side.
func twoSided(t, df float64) float64 {
	if t != t {
		return t
	}
	return mathext.RegIncBeta(df/2, 0.5, df/(df+t*t))
}

func (l Line) quantile(confidence float64) float64 {
	if !(confidence > 0 && confidence < 1) {
		panic("stats/series: confidence outside (0, 1)")
	}
	if l.N < 3 {
		return math.NaN()
	}
	return distuv.StudentsT{Mu: 0, Sigma: 1, Nu: float64(l.N - 2)}.Quantile(0.5 + confidence/2)
}

func (l Line) interval(at, se, confidence float64) stats.Interval {
	t := l.quantile(confidence)
	return stats.Interval{Estimate: at, Lower: at - t*se, Upper: at + t*se, Method: "least squares", Why: l.Why}
}

// SlopeInterval is the slope with its interval.
func (l Line) SlopeInterval(confidence float64) stats.Interval {
	return l.interval(l.Slope, l.SESlope, confidence)
}

// InterceptInterval is the line at x = 0 with its interval.
func (l Line) InterceptInterval(confidence float64) stats.Interval {
	return l.interval(l.Intercept, l.SEIntercept, confidence)
}

// Mean is the line at x with the interval of the line itself.
func (l Line) Mean(x, confidence float64) stats.Interval {
	d := x - l.meanX
	return l.interval(l.meanY+l.Slope*d, l.ResidualSD*math.Sqrt(1/float64(l.N)+d*d/l.sxx), confidence)
}

// Predict is the line at x with the interval that holds one further value there.
func (l Line) Predict(x, confidence float64) stats.Interval {
	d := x - l.meanX
	return l.interval(l.meanY+l.Slope*d, l.ResidualSD*math.Sqrt(1+1/float64(l.N)+d*d/l.sxx), confidence)
}

// Crossing is when a drifting mean meets a limit.
type Crossing struct {
	// At is the x at which the line meets the limit. Upper is +Inf when the data
	// leave open that it never does; Estimate is +Inf when the line does not go
	// there.
	At stats.Interval
	// Past: the line is at or beyond the limit at the last x already.
	Past bool
}

// Reaches says when the line's mean meets a limit that it comes from below (rising)
// or from above, if the drift goes on as it did. The interval is Fieller's: all x
// at which the line's own interval holds the limit, cut off at the last x of the
// data. When the slope is not told from none, the lower end still says how soon
// it could be, and the upper is +Inf.
//
// Single values meet the limit before their mean does; see [Line.Predict].
//
// Source: Fieller 1954, J. R. Statist. Soc. B 16, 175-185; Draper and Smith 1998,
// section 3.2 (inverse regression).
func (l Line) Reaches(limit float64, rising bool, confidence float64) Crossing {
	t := l.quantile(confidence)
	if l.Why != "" || limit != limit {
		why := l.Why
		if why == "" {
			why = "no limit"
		}
		return Crossing{At: stats.NoInterval(why)}
	}
	side := 1.0
	if !rising {
		side = -1
	}
	gap := side * (limit - l.Mean(l.lastX, confidence).Estimate) // still to go
	slope := side * l.Slope
	c := Crossing{Past: gap <= 0}
	c.At = stats.Interval{Estimate: math.Inf(1), Lower: math.Inf(1), Upper: math.Inf(1), Method: "Fieller"}
	if slope > 0 {
		c.At.Estimate = l.meanX + (limit-l.meanY)/l.Slope
	}
	// In u = x - mean x: where the interval of the line holds the limit, that is
	// a u^2 + b u + q <= 0.
	m := l.meanY - limit
	g := t * l.SESlope
	a := l.Slope*l.Slope - g*g
	b := 2 * m * l.Slope
	q := m*m - t*t*l.ResidualSD*l.ResidualSD/float64(l.N)
	end := l.lastX - l.meanX
	holds := func(u float64) bool { return a*u*u+b*u+q <= 0 }
	var roots []float64
	if disc := b*b - 4*a*q; disc >= 0 && a != 0 {
		w := -0.5 * (b + math.Copysign(math.Sqrt(disc), b))
		r1, r2 := w/a, math.Inf(1)
		if w != 0 {
			r2 = q / w
		}
		roots = []float64{math.Min(r1, r2), math.Max(r1, r2)}
	}
	switch {
	case c.Past:
		c.At.Estimate, c.At.Lower, c.At.Upper = math.Min(c.At.Estimate, l.lastX), math.Inf(-1), l.lastX
		c.At.Why = "at the limit already"
		if !holds(end) {
			c.At.Why = "beyond the limit already"
		}
	case a > 0: // a slope told from none
		if slope < 0 {
			c.At.Why = "drifts away from the limit"
			break
		}
		c.At.Lower, c.At.Upper = l.meanX+math.Max(roots[0], end), l.meanX+roots[1]
	default:
		c.At.Why = "the drift is not told from none: it may never get there"
		c.At.Lower = l.lastX
		if !holds(end) && len(roots) == 2 {
			c.At.Lower = l.meanX + roots[1] // the gap between the roots holds the end
		}
	}
	return c
}
