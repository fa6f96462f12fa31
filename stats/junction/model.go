package junction

import (
	"fmt"
	"math"
)

// Model is a device with its tests, anchored to the baseline levels it was given,
// and tabulated so that a die costs a microsecond. It is safe for concurrent use.
type Model struct {
	Device  Device   // completed and anchored
	Tests   []Test   // as given, with the usual bias filled in; methods take an index into it
	Assumed []string // what was not given and what the baseline changed, in sentences
	// FieldScale is what the ionisation law's fields were multiplied by to have the
	// baseline's BVceo; 1 without one. A long way from 1 (over 15 %) says that device
	// and baseline do not describe the same transistor.
	FieldScale float64

	nat     nature
	nominal *die

	grid    plane2
	tables  []planeTable
	recipes []recipe
	base    baseTable
	rims    *rimTable
	levels  []float64 // log of each test's value at nominal, by the tables
	linear  []linear  // of each test at nominal
}

// The range of net thickness and doping that is tabulated, as ratios to nominal.
// Outside it the tables go on with their end tangents.
const (
	MinThicknessRatio, MaxThicknessRatio = 0.35, 2.2
	MinDopingRatio, MaxDopingRatio       = 0.4, 2.5
)

// NewModel completes a device, anchors it to the tests' baseline medians where
// there are any, and builds the tables for the tests' biases. Tests that a user
// might add (for [Model.NextTest]) are given like any other.
//
// It returns [ErrPolarity] for a pnp device, and an error that names the field for
// a device without a solution or a test it does not know.
func NewModel(device Device, tests ...Test) (*Model, error) {
	return newModel(device, natural, tests)
}

func newModel(device Device, nat nature, tests []Test) (*Model, error) {
	m, err := anchored(device, nat, tests)
	if err != nil {
		return nil, err
	}
	if err := m.fill(&tape{}); err != nil {
		return nil, err
	}
	return m, nil
}

// anchored is a model without its tables.
func anchored(device Device, nat nature, tests []Test) (*Model, error) {
	m := &Model{nat: nat}
	var err error
	if m.Device, m.Assumed, err = device.complete(); err != nil {
		return nil, err
	}
	for _, t := range tests {
		t = t.biased()
		if err := t.check(); err != nil {
			return nil, err
		}
		m.Tests = append(m.Tests, t)
	}
	if err := m.anchor(); err != nil {
		return nil, err
	}
	m.FieldScale = m.nat.fieldScale
	m.nominal = m.Device.make(&Process{}, &m.nat)
	return m, nil
}

// fill makes a model's tables and levels; the tables go to a tape, or come from it.
func (m *Model) fill(kept *tape) error {
	if err := m.build(kept); err != nil {
		return err
	}
	m.levels = make([]float64, len(m.Tests))
	var s spot
	m.locate(&s, &Process{})
	for i := range m.Tests {
		if m.levels[i] = m.log(i, &s); math.IsNaN(m.levels[i]) || math.IsInf(m.levels[i], 0) {
			return fmt.Errorf("junction: test %q has no solution on this device at its bias (voltage %g V, current %g A)",
				m.Tests[i].Name, m.Tests[i].Voltage, m.Tests[i].Current)
		}
	}
	m.linear = make([]linear, len(m.Tests))
	if !kept.reading {
		each(len(m.Tests), func(i int) {
			m.linear[i] = m.linearAt(0, 0, &Process{}, func(s *spot, _ float64) float64 { return m.log(i, s) - m.levels[i] })
		})
	}
	for i := range m.linear {
		l := &m.linear[i]
		if kept.reading {
			l.resp = make(surface, m.grid.u.n*m.grid.v.n)
		}
		kept.row(l.resp)
		kept.row(l.slopes[:])
	}
	return nil
}

// Find returns the index of the test of a name, -1 when there is none.
func (m *Model) Find(name string) int {
	for i := range m.Tests {
		if m.Tests[i].Name == name {
			return i
		}
	}
	return -1
}

// Level returns the typical reading of a test: the baseline's median, or the
// model's own level, which for a breakdown voltage is good to 10 to 20 % only.
func (m *Model) Level(test int) float64 {
	if v := m.Tests[test].Baseline.Median; v > 0 {
		return v
	}
	return math.Exp(m.levels[test])
}

// NetThickness returns the nominal net epi, um.
func (m *Model) NetThickness() float64 { return m.Device.netUM() }

// Exact returns a test's reading at a process point by the full model, without
// tables, SI: some tenths of a millisecond to milliseconds. Levels are the
// model's own, see [Model.Level].
func (m *Model) Exact(test int, p Process) float64 {
	return m.Device.make(&p, &m.nat).value(&m.Tests[test])
}

// Ratio returns a test's reading at a process point over that at nominal. It is NaN
// where the test has no solution (a transistor that does not saturate, no base
// left) and +Inf for a leakage at or above breakdown. Against [Model.Exact] it is
// within 1.5 % (multiplication: 2 %) up to three usual sigmas of every parameter at once
// (TestTables holds it), and mostly within 0.3 %.
func (m *Model) Ratio(test int, p Process) float64 {
	var s spot
	m.locate(&s, &p)
	return math.Exp(m.log(test, &s) - m.levels[test])
}

// LogRatios writes ln Ratio of every test into dst, which has the tests' length.
func (m *Model) LogRatios(dst []float64, p *Process) {
	if len(dst) != len(m.Tests) {
		panic("junction: LogRatios: dst has not the length of Tests")
	}
	var s spot
	m.locate(&s, p)
	for i := range dst {
		dst[i] = m.log(i, &s) - m.levels[i]
	}
}

// Sensitivity returns d ln reading / d ln parameter of a test at nominal, by
// central difference of 1 %: a row of the Jacobian of the reference page.
func (m *Model) Sensitivity(test int) [NumParams]float64 {
	return m.sensitivityAt(test, &Process{})
}

func (m *Model) sensitivityAt(test int, at *Process) (j [NumParams]float64) {
	const h = 0.01
	var s spot
	for i := range j {
		up, down := *at, *at
		up[i] += h
		down[i] -= h
		m.locate(&s, &up)
		a := m.log(test, &s)
		m.locate(&s, &down)
		j[i] = (a - m.log(test, &s)) / (2 * h)
	}
	return j
}
