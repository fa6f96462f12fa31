package build

import (
	"fmt"
	"math"
	"strings"

	"gonum.org/v1/gonum/stat/distuv"

	"kneepoint/ingest"
	"kneepoint/stats"
	"kneepoint/stats/junction"
)

// level is where a test stands on a set of dice, as the log of its reading over the
// baseline.
type level struct {
	Test   int     // of the model
	Log    float64 // median; a bound when Censor is not 0; NaN when there is none
	SE     float64 // standard error of Log by sampling
	Die    float64 // robust sigma of a die about it
	Censor int     // +1: more than half the dice are at the clamp, -1: at the floor
	N      int     // dice (or wafers) with a reading
	Misses int     // whole dice without one
}

// fewestDice is the fewest whole dice of a wafer that make a level.
const fewestDice = 5

// mostDice is how many dice of a wafer a level is taken over: a median over so many
// is known far better than any tester agrees with the next.
const mostDice = 4000

// A die is whole when nothing of it is wrecked: a reading this many times off its
// baseline level either way is a short, an open or no transistor, and no process
// level. Process shifts are far smaller in breakdown, capacitance and resistance;
// in gain at low current a contaminated lifetime alone makes a factor of three; of
// a leakage any factor is believed. (Common practice, no source.)
func wreckedBeyond(measures string) float64 {
	switch measures {
	case junction.HFE:
		return 8
	case junction.Icbo, junction.Iceo, junction.Iebo, junction.AreaLeakage:
		return math.Inf(1)
	}
	return 2.5
}

// leveller takes levels of one lot.
type leveller struct {
	d       *device
	column  []int       // by model test: test of the lot, -1
	values  [][]float64 // by model test
	marks   [][]int8
	wrecked []uint16 // by die: model tests whose reading is wrecked
}

func newLeveller(d *device, lot *ingest.Lot) *leveller {
	l := &leveller{d: d, wrecked: make([]uint16, lot.Len())}
	n := len(d.Tests) - len(d.Monitors)
	l.column, l.values, l.marks = make([]int, n), make([][]float64, n), make([][]int8, n)
	for i := range n {
		if l.column[i] = lot.TestIndex(d.Tests[i].Name); l.column[i] < 0 {
			continue
		}
		l.values[i], l.marks[i] = lot.Values(l.column[i]), lot.Censor(l.column[i])
		factor := wreckedBeyond(d.Tests[i].Measures)
		low, high := d.Level(i)/factor, d.Level(i)*factor
		for row, v := range l.values[i] {
			if v < low || v > high {
				l.wrecked[row] |= 1 << i
			}
		}
	}
	return l
}

// wafer takes the levels of rows [lo, hi) over its whole dice. A single test that
// is wrecked on nearly all dice is set aside instead of the dice, and said; two are
// no wafer of transistors, and why says so.
func (l *leveller) wafer(lo, hi int) (levels []level, notes []string, why string) {
	set := uint16(0)
	need := max(fewestDice, (hi-lo)/20)
	for {
		whole, by := 0, make([]int, len(l.values))
		for _, w := range l.wrecked[lo:hi] {
			if w &^= set; w == 0 {
				whole++
				continue
			}
			for i := range by {
				by[i] += int(w >> i & 1)
			}
		}
		if whole >= need || hi-lo < fewestDice {
			break
		}
		if set != 0 {
			return nil, nil, "nearly all dice read as opens, shorts or no transistor in more than one test"
		}
		worst := fallingOrder(by)[0]
		set = 1 << worst
		notes = append(notes, fmt.Sprintf("%s is far off on nearly all dice and is not used", l.d.Tests[worst].Name))
	}
	var rows []int
	for row := lo; row < hi; row++ {
		if l.wrecked[row]&^set == 0 {
			rows = append(rows, row)
		}
	}
	if len(rows) < fewestDice {
		return nil, nil, fmt.Sprintf("%d dice that are neither open nor short; a level needs %d", len(rows), fewestDice)
	}
	if every := (len(rows) + mostDice - 1) / mostDice; every > 1 {
		few := rows[:0]
		for i := 0; i < len(rows); i += every {
			few = append(few, rows[i])
		}
		rows = few
	}
	var s stats.Selector
	x := make([]float64, len(rows))
	for i := range l.values {
		if l.values[i] != nil && set>>i&1 == 0 {
			if v := l.level(i, rows, x, &s); !math.IsNaN(v.Log) {
				levels = append(levels, v)
			}
		}
	}
	if len(levels) == 0 {
		return nil, nil, "no test that the device model knows has readings"
	}
	return levels, notes, ""
}

// level is the median of a test over rows. Readings at a clamp or floor keep their
// place at the end of the order, so the median is right as long as it is not among
// them, and a bound when it is. Dice without a reading of it (a program that stops
// at the first fail) were not lost at random: the median of the others is off by up
// to what a cut of that share shifts a normal one, of which half is added to the
// standard error.
func (l *leveller) level(i int, rows []int, x []float64, s *stats.Selector) level {
	v := level{Test: i, Log: math.NaN()}
	base := math.Log(l.d.Level(i))
	end := [2]float64{math.NaN(), math.NaN()} // the loosest floor and clamp
	for k, row := range rows {
		y, mark := l.values[i][row], int8(0)
		if l.marks[i] != nil {
			mark = l.marks[i][row]
		}
		switch {
		case math.IsNaN(y):
			v.Misses++
			x[k] = math.NaN()
			continue
		case mark > 0:
			end[1] = math.Max(y, orNumber(end[1], y))
			x[k] = math.Inf(1)
		case mark < 0 || y <= 0: // a leakage below nothing is noise about the floor
			if y > 0 {
				end[0] = math.Min(y, orNumber(end[0], y))
			}
			x[k] = math.Inf(-1)
		default:
			x[k] = math.Log(y) - base
		}
		v.N++
	}
	if v.N < fewestDice {
		return v
	}
	v.Log = s.Median(x)
	if math.IsInf(v.Log, 0) {
		v.Censor = int(math.Copysign(1, v.Log))
		v.Log = math.Log(end[(v.Censor+1)/2]) - base // NaN without a known end
		return v
	}
	if v.Die = s.MADSigma(x); math.IsInf(v.Die, 0) || math.IsNaN(v.Die) {
		v.Die = 2 * junction.UsualSigma(l.d.Tests[i].Measures)
	}
	share := float64(v.Misses) / float64(v.N+v.Misses)
	cut := v.Die * distuv.UnitNormal.Quantile((1+share)/2)
	v.SE = math.Hypot(medianSE*v.Die/math.Sqrt(float64(v.N)), cut/2)
	return v
}

// medianSE is the standard error of a normal median in those of the mean.
const medianSE = 1.2533

func orNumber(v, otherwise float64) float64 {
	if math.IsNaN(v) {
		return otherwise
	}
	return v
}

// lotLevels are the typical wafer's levels: medians over wafers.
func lotLevels(d *device, wafers [][]level) []level {
	var out []level
	for i := range len(d.Tests) - len(d.Monitors) {
		v := level{Test: i, Log: math.NaN()}
		var x, bounds []float64
		for _, w := range wafers {
			for _, one := range w {
				if one.Test != i {
					continue
				}
				v.N++
				v.SE = math.Max(v.SE, one.SE)
				if one.Censor != 0 {
					x = append(x, math.Inf(one.Censor))
					bounds = append(bounds, one.Log)
				} else {
					x = append(x, one.Log)
				}
			}
		}
		if v.N == 0 {
			continue
		}
		v.Log = stats.Median(x)
		if math.IsInf(v.Log, 0) {
			v.Censor = int(math.Copysign(1, v.Log))
			v.Log = stats.Median(bounds)
		} else if v.N > 2 {
			if v.Die = stats.MADSigma(x); math.IsInf(v.Die, 0) || math.IsNaN(v.Die) {
				v.Die = 0
			}
			v.SE = math.Hypot(v.SE, medianSE*v.Die/math.Sqrt(float64(v.N)))
		}
		out = append(out, v)
	}
	return out
}

// readings are levels as the inversion takes them. Their sigma is what one tester
// leaves between lots (junction.UsualSigma) and the sampling error. It is not the
// baseline's spread between lots: that is the process, which the prior holds.
func readings(d *device, levels []level) []junction.Reading {
	var out []junction.Reading
	for _, v := range levels {
		out = append(out, junction.Reading{Test: v.Test, LogRatio: v.Log, Censor: v.Censor,
			Sigma: math.Hypot(junction.UsualSigma(d.Tests[v.Test].Measures), v.SE)})
	}
	return out
}

// blanks says which levels are over fewer dice than there are.
func (l *leveller) blanks(levels []level) string {
	var names []string
	for _, v := range levels {
		if 20*v.Misses > v.N+v.Misses {
			names = append(names, l.d.Tests[v.Test].Name)
		}
	}
	if len(names) == 0 {
		return ""
	}
	return strings.Join(names, ", ") + " not read on all dice: levels are of those that were"
}
