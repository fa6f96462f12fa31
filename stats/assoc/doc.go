// Package assoc asks what the readings of a lot, or its yield, go with: the order
// of wafers, the test site, the order of test, the tool that a wafer went through,
// its place in the boat, the supplier of its substrate. [Scan] tries every response
// against every factor, says how large each dependence is and how sure, and writes a
// sentence.
//
// # What is counted
//
// Dice are not the units of such questions. If wafers 1 to 12 went through one
// furnace and 13 to 25 through another there are 25 cases, not two million: any two
// wafers differ, and with dice as cases every factor is significant. So a factor
// that is the same for all dice of a wafer is judged by wafers (their medians, or
// yields), one that is the same for a lot by lots. A factor that varies within
// wafers, such as the site, is judged by whether its effect repeats from wafer
// to wafer: each wafer gives one answer, and the wafers are the cases.
//
// # How many looks
//
// A scan of ten tests against five columns is fifty looks, of which two or three will
// reach p = 0.05 with nothing there. Adjusted is p after Benjamini and Hochberg's
// adjustment for all looks of a scan; the sentence speaks of a dependence when it is
// 0.05 or less.
//
// # What it cannot say
//
// That one thing causes another. Wafers of one furnace may also be those of one
// crystal; and the order of test follows the place on the wafer, so that a
// pattern on the wafer looks like a drift of the tester. The sentence says so where it
// knows.
//
// Tests are by rank, so that a shorted wafer is one bad wafer and no more. Values
// at a tester's clamp have their rank as well.
//
// Sources: Conover and Iman 1981, Amer. Statist. 35, 124-133 (F on ranks); Hodges and
// Lehmann 1962, Ann. Math. Statist. 33, 482-497 (aligned ranks); Benjamini and
// Hochberg 1995, J. R. Statist. Soc. B 57, 289-300.
package assoc

import (
	"math"

	"kneepoint/stats"
	"kneepoint/stats/compare"
)

// Response is what may depend on something.
type Response struct {
	Name string
	// Values by die: NaN where missing. Of the yield 1 for a passing die, 0 for a
	// failing one.
	Values []float64
	// Yield: values are 1 and 0, and groups have means, in percent.
	Yield bool
	// Unit is named in sentences; values are multiplied by Scale (0: 1) there, as
	// amperes by 1e9 for nA.
	Unit  string
	Scale float64
}

// Factor is what responses may depend on: Values, or Codes with Labels.
type Factor struct {
	Name   string
	Values []float64 // NaN unknown
	// Codes index Labels; a negative code is unknown. Nil for a factor of numbers.
	Codes  []int32
	Labels []string
	// Order: the factor is the order of test, which follows the place on the wafer.
	Order bool
}

// Units are the wafers and lots that dice belong to. Lot nil: one lot.
type Units struct{ Wafer, Lot []int32 }

// Group is one value of a factor with names.
type Group struct {
	Label string
	Units int // wafers or lots that have it
	Dice  int
	// Level is the middle of the units' medians (of the yield: the mean).
	Level float64
}

// Finding is one response against one factor.
type Finding struct {
	Of, With string
	// Cases are what was taken as independent: "lots", "wafers", or "dice" when there
	// is one wafer only, which is a caution.
	Cases    string
	N        int // of them
	Dice     int
	Within   bool // the factor varies within wafers
	P        float64
	Adjusted float64 // for all looks of the scan
	Looks    int
	// Strength is the share of the cases' variance in rank that the factor explains,
	// less what it would by chance: 0 to 1.
	Strength float64
	// Effect is by how much the response differs, in its own unit (of the yield: as a
	// share): the group furthest from the others against them; of numbers, the
	// response at the upper end of the factor's range against the lower one.
	Effect stats.Interval
	// InSigmas is Effect in standard deviations of dice within a wafer (MAD sigma);
	// NaN for the yield.
	InSigmas float64
	// Slope of a numeric factor that is judged by wafers or lots: response per unit of
	// the factor (Theil and Sen).
	Slope  stats.Interval
	Groups []Group // of a factor with names
	// Furthest is the index in Groups of the one that Effect is of; -1 for numbers.
	Furthest int
	// Bend: the dependence is not one of rising or falling only.
	Bend bool
	Text string
	Why  string // why there is no P

	say words
}

// words is what a sentence needs beside the numbers.
type words struct {
	unit                  string
	scale                 float64
	yield, order, numeric bool
	low, high             float64 // range of a factor of numbers
}

// Dependent says whether the finding stands after adjustment.
func (f Finding) Dependent() bool { return f.Adjusted <= 0.05 }

// fewestCases is how many wafers or lots a factor of numbers needs; factors with
// names need two more than they have names.
const fewestCases = 5

// Scan tries every response against every factor. Findings are in the order of
// responses, then factors. What cannot be judged has no P, and a Why; it is no look.
//
// It panics when lengths differ, or a code is beyond the labels.
func Scan(responses []Response, factors []Factor, units Units) []Finding {
	d := newDice(units)
	for _, f := range factors {
		d.check(f)
	}
	views := make([]*view, len(factors))
	for i, f := range factors {
		views[i] = d.view(f)
	}
	var out []Finding
	for _, r := range responses {
		if len(r.Values) != d.n {
			panic("stats/assoc: slice length mismatch")
		}
		m := d.measure(r)
		for _, v := range views {
			out = append(out, d.judge(m, v))
		}
	}
	p := make([]float64, len(out))
	looks := 0
	for i, f := range out {
		p[i] = f.P
		if f.P == f.P {
			looks++
		}
	}
	for i, a := range compare.Adjust(p, compare.BenjaminiHochberg) {
		out[i].Adjusted, out[i].Looks = a, looks
		if out[i].P != out[i].P {
			out[i].Adjusted = math.NaN()
		}
		out[i].Text = out[i].sentence()
	}
	return out
}
