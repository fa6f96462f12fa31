package causes

import (
	"math"
	"slices"

	"gonum.org/v1/gonum/mat"

	"kneepoint/stats"
	"kneepoint/stats/junction"
)

// frame is the space in which levels are judged: the tests that have levels, and
// how those of healthy lots, wafers and zones spread. All in natural logs.
type frame struct {
	e     *Evidence
	tests []int // indexes into the columns' tests
	slope *slopes

	lot, wafer, zone []float64  // sigma by test of the frame
	correlation      *mat.Dense // of the usual variation
}

// Sigmas where the baseline says nothing of lots or wafers, as shares of what it
// says. Common practice, no source.
const (
	lotShare   = 0.6
	waferShare = 0.5
	zoneShare  = 0.4
)

func newFrame(e *Evidence) *frame {
	f := &frame{e: e, slope: newSlopes(e.cols)}
	for t := range e.cols.Tests {
		if e.Reference[t] > 0 && !math.IsNaN(e.Lot[t]) && e.Scatter[t] > 0 {
			f.tests = append(f.tests, t)
		}
	}
	for _, t := range f.tests {
		test := &e.cols.Tests[t]
		within := firstAbove(relative(test.Within, test.Median), 0.8*relative(test.Sigma, test.Median), e.Scatter[t])
		lot := firstAbove(relative(test.Lot, test.Median), lotShare*relative(test.Sigma, test.Median), e.Scatter[t])
		read := readError(test.Measures)
		f.lot = append(f.lot, math.Sqrt(lot*lot+read*read/2))
		f.wafer = append(f.wafer, f.waferSigma(t, within, read))
		f.zone = append(f.zone, f.zoneSigma(t, within))
	}
	f.correlate()
	return f
}

// relative is the log sigma that a sigma stands for at a median.
func relative(sigma, median float64) float64 {
	if !(sigma > 0) || !(median > 0) {
		return math.NaN()
	}
	return math.Log1p(sigma / median)
}

func firstAbove(v ...float64) float64 {
	for _, x := range v {
		if x > 0 {
			return x
		}
	}
	return 0.05
}

// waferSigma is the spread of healthy wafers about their lot: what the wafers
// themselves show, within a factor of what healthy lots have. Ruined wafers must
// not hide themselves in it.
func (f *frame) waferSigma(t int, within, read float64) float64 {
	var levels, sampling []float64
	for w := range f.e.Wafers {
		if l := f.e.Wafers[w].Level[t]; !math.IsNaN(l) {
			levels = append(levels, l)
			sampling = append(sampling, f.e.Wafers[w].Sampling[t])
		}
	}
	s := waferShare * within
	if len(levels) >= 6 {
		s = min(max(stats.MADSigma(levels), 0.25*within), 0.8*within)
	}
	s = max(s, 0.2*read)
	if len(sampling) > 0 {
		s = math.Hypot(s, stats.Median(sampling))
	}
	return s
}

// zoneSigma is the spread of healthy zones about their wafer.
func (f *frame) zoneSigma(t int, within float64) float64 {
	var dev, dice []float64
	for w := range f.e.Wafers {
		for z := range f.e.Wafers[w].Zone {
			if v := f.e.Wafers[w].Zone[z]; v != nil && !math.IsNaN(v[t]) {
				dev = append(dev, v[t])
				dice = append(dice, float64(f.e.Wafers[w].ZoneDice[z]))
			}
		}
	}
	s := zoneShare * within
	if len(dev) >= 9 {
		s = min(max(stats.MADSigma(dev), 0.2*within), 0.7*within)
	}
	n := 30.0
	if len(dice) > 0 {
		n = stats.Median(dice)
	}
	return math.Hypot(s, 1.25*f.e.Scatter[t]/math.Sqrt(n))
}

// correlate finds how the usual variation of the process correlates the tests,
// drawn towards none: no model of it is exact.
func (f *frame) correlate() {
	n := len(f.tests)
	if n == 0 {
		return // no test has a level: single dice, maps and flags are all there is
	}
	f.correlation = mat.NewDense(n, n, nil)
	for i := range n {
		f.correlation.Set(i, i, 1)
	}
	const trusted = 0.6
	rows := make([][]float64, n)
	for i, t := range f.tests {
		rows[i] = f.slope.usual(t, f.e.cols.Spread)
	}
	variance := func(i, j int) float64 {
		s := 0.0
		for p := range rows[i] {
			s += rows[i][p] * rows[j][p]
		}
		if i == j {
			r := readError(f.e.cols.Tests[f.tests[i]].Measures)
			s += r * r
		}
		return s
	}
	for i := range n {
		for j := range i {
			if rows[i] == nil || rows[j] == nil {
				continue
			}
			r := trusted * variance(i, j) / math.Sqrt(variance(i, i)*variance(j, j))
			f.correlation.Set(i, j, r)
			f.correlation.Set(j, i, r)
		}
	}
}

// slopes say how a test moves with process parameters: by the device model, or by
// the catalogue's moves without one.
type slopes struct {
	c   *Columns
	jac map[int][junction.NumParams]float64
}

func newSlopes(c *Columns) *slopes {
	s := &slopes{c: c, jac: map[int][junction.NumParams]float64{}}
	for t := range c.Tests {
		if m := c.Tests[t].Model; c.Model != nil && m >= 0 {
			s.jac[t] = c.Model.Sensitivity(m)
		}
	}
	return s
}

// usual is the row of a test's sigmas by parameter in healthy lots, nil without a
// model.
func (s *slopes) usual(t int, prior junction.Prior) []float64 {
	j, ok := s.jac[t]
	if !ok {
		return nil
	}
	row := make([]float64, junction.NumParams)
	for p := range row {
		if v := j[p] * prior.Sigma[p]; !math.IsNaN(v) && !math.IsInf(v, 0) {
			row[p] = v
		}
	}
	return row
}

// lowCurrent is the collector current below which recombination shows in hFE, A.
const lowCurrent = 1e-4

// move is the change of a test's log reading when a shift has the given log size
// (its sign included). NaN where the device has no solution there.
func (s *slopes) move(t int, shift *Shift, size float64) float64 {
	test := &s.c.Tests[t]
	if s.c.Model != nil && test.Model >= 0 && len(shift.Parameters) > 0 {
		var p junction.Process
		for name, by := range shift.Parameters {
			p[parameters[name]] += by * size
		}
		r := math.Log(s.c.Model.Ratio(test.Model, p))
		if math.IsInf(r, 1) {
			return 8 // a leakage past breakdown
		}
		return r
	}
	if by, ok := shift.Moves[test.Name]; ok {
		return by * size
	}
	if test.Measures == junction.HFE && test.Current > 0 && test.Current < lowCurrent {
		if by, ok := shift.Moves["hfe-low"]; ok {
			return by * size
		}
	}
	if s.c.Model != nil && test.Model >= 0 && len(shift.Parameters) > 0 {
		return 0 // the model knows the test and the shift touches no parameter of it
	}
	return shift.Moves[test.Measures] * size
}

// index of a test in the frame, -1 without.
func (f *frame) index(t int) int { return slices.Index(f.tests, t) }
