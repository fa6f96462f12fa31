package yield

import "math"

// TestData is one test over all dice of a lot.
//
// A reading at a limit passes. A NaN limit is no limit, a NaN reading is blank
// and fails nothing. Censor (nil: all readings are exact) marks readings that
// are only bounds: +1 "at least" the value, as at a tester's clamp, fails the
// upper limit when the value itself is beyond it and cannot be told to fail the
// lower one; -1 "at most" the value, as under a floor, the other way round.
type TestData struct {
	Values       []float64
	Lower, Upper float64
	Censor       []int8
}

// fails tells which limits die i breaks.
func (t *TestData) fails(i int) (low, high bool) {
	var mark int8
	if t.Censor != nil {
		mark = t.Censor[i]
	}
	return Breaks(t.Values[i], mark, t.Lower, t.Upper)
}

// Breaks tells which limits a reading breaks, by the rule of TestData; mark is its
// entry in Censor, 0 for an exact reading.
func Breaks(v float64, mark int8, lower, upper float64) (low, high bool) {
	return v < lower && mark <= 0, v > upper && mark >= 0
}

// Loss is what one test costs, in dice. All counts are over failing dice.
type Loss struct {
	// First counts dice of which this is the first failing test in program order.
	First int
	// Alone counts dice that fail this test and no other; Any those that fail it.
	// Both are -1 on a stop-on-fail program.
	Alone, Any int
	// Low and High count the measured fails of either limit. On a stop-on-fail
	// program they are what was seen before the stop.
	Low, High int
	// Marginal counts fails that are beyond the limit by less than the given part
	// of the limit's size. A limit of zero has no marginal fails.
	Marginal int
	// Blank counts failing dice without any failing test whose readings stop just
	// before this test: as when a program does not record the reading that failed.
	Blank int
}

// Losses is what all tests of a program cost.
type Losses struct {
	Tests []Loss // in the order of the tests
	// Unattributed counts failing dice on which no test fails: not measured,
	// failed by something that is not among the tests, or binned wrongly.
	Unattributed int
	// StopOnFail: testing a die ends at its first fail. StopText says how that was
	// told and how sure it is; GroupEnds lists the tests after which testing ends
	// when it does so at the end of a group of tests, else it is nil.
	StopOnFail bool
	StopText   string
	GroupEnds  []int
	// Cut and Ran count the failing dice that the verdict rests on: with and
	// without blanks after the first fail.
	Cut, Ran int
	// Disagree counts dice whose bin and whose limits say different things. A
	// failing die counts only when every test that has a limit has a reading.
	Disagree struct{ PassBinFailLimit, FailBinPassLimit int }
}

// TestLosses finds what each test costs: tests in program order, pass telling
// for each die whether its bin passes it. A fail is marginal when it is beyond
// the limit by less than marginal times the limit's size (0.10: a tenth).
//
// No die: all counts 0. It panics when lengths differ, or marginal is negative.
func TestLosses(tests []TestData, pass []bool, marginal float64) Losses {
	if !(marginal >= 0) {
		panic("stats/yield: marginal not a share")
	}
	f := findFails(tests, pass)
	l := Losses{Tests: make([]Loss, len(tests))}
	for i := range l.Tests {
		l.Tests[i] = f.count(i, marginal)
	}
	for k, t := range f.first {
		switch {
		case t < 0:
			l.Unattributed++
			f.unattributed(int(f.dice[k]), &l)
		default:
			l.Tests[t].First++
			if !f.several[k] {
				l.Tests[t].Alone++
			}
		}
	}
	l.Disagree.PassBinFailLimit = f.passBeyond
	f.findStop(&l)
	if l.StopOnFail {
		for i := range l.Tests {
			l.Tests[i].Alone, l.Tests[i].Any = -1, -1
		}
	}
	return l
}

// FirstFailing gives for every die the index of its first failing test, or -1:
// for passing dice and for failing ones on which no test fails.
func FirstFailing(tests []TestData, pass []bool) []int32 {
	f := findFails(tests, pass)
	out := make([]int32, len(pass))
	for i := range out {
		out[i] = -1
	}
	for k, d := range f.dice {
		out[d] = f.first[k]
	}
	return out
}

// PassByLimits judges dice of a file without bins: a die passes when it has a
// reading and every limit holds. blank counts the dice without a reading of any
// test, which do not pass. dice is their number.
func PassByLimits(tests []TestData, dice int) (pass []bool, blank int) {
	pass = make([]bool, dice)
	checkLengths(tests, pass)
	broken := make([]bool, dice)
	for t := range tests {
		test := &tests[t]
		for i, v := range test.Values {
			if v == v {
				pass[i] = true
				if low, high := test.fails(i); low || high {
					broken[i] = true
				}
			}
		}
	}
	for i := range pass {
		if !pass[i] {
			blank++
		}
		pass[i] = pass[i] && !broken[i]
	}
	return pass, blank
}

// fails holds the failing dice of a lot.
type fails struct {
	tests []TestData
	pass  []bool

	dice       []int32 // failing dice, ascending
	first      []int32 // their first failing test, -1 none
	several    []bool  // more than one test fails
	passBeyond int     // passing dice beyond a limit
}

func checkLengths(tests []TestData, pass []bool) {
	for _, t := range tests {
		if len(t.Values) != len(pass) || (t.Censor != nil && len(t.Censor) != len(pass)) {
			panic("stats/yield: slice length mismatch")
		}
	}
}

// findFails walks the dice in blocks small enough to stay in cache while all
// tests are looked at.
func findFails(tests []TestData, pass []bool) *fails {
	checkLengths(tests, pass)
	const block = 4096
	f := &fails{tests: tests, pass: pass}
	bad := 0
	for _, p := range pass {
		if !p {
			bad++
		}
	}
	f.dice = make([]int32, 0, bad)
	f.first = make([]int32, 0, bad)
	f.several = make([]bool, 0, bad)
	var first [block]int32
	var several [block]bool
	for lo := 0; lo < len(pass); lo += block {
		n := min(block, len(pass)-lo)
		for i := range n {
			first[i], several[i] = -1, false
		}
		for t := range tests {
			test := &tests[t]
			lower, upper := test.Lower, test.Upper
			for i, v := range test.Values[lo : lo+n] {
				if v < lower || v > upper {
					if low, high := test.fails(lo + i); low || high {
						several[i] = first[i] >= 0
						if first[i] < 0 {
							first[i] = int32(t)
						}
					}
				}
			}
		}
		for i := range n {
			if !pass[lo+i] {
				f.dice = append(f.dice, int32(lo+i))
				f.first = append(f.first, first[i])
				f.several = append(f.several, several[i])
			} else if first[i] >= 0 {
				f.passBeyond++
			}
		}
	}
	return f
}

// count takes the measures of test t that do not depend on other tests.
func (f *fails) count(t int, marginal float64) Loss {
	var l Loss
	test := &f.tests[t]
	reachLow, reachHigh := marginal*math.Abs(test.Lower), marginal*math.Abs(test.Upper)
	for _, d := range f.dice {
		v := test.Values[d]
		if !(v < test.Lower || v > test.Upper) {
			continue
		}
		low, high := test.fails(int(d))
		if !low && !high {
			continue
		}
		l.Any++
		near := true
		if low {
			l.Low++
			near = near && test.Lower-v < reachLow
		}
		if high {
			l.High++
			near = near && v-test.Upper < reachHigh
		}
		if near {
			l.Marginal++
		}
	}
	return l
}

// unattributed looks at a failing die without a failing test.
func (f *fails) unattributed(die int, l *Losses) {
	last, limited, whole := -1, false, true
	for t := range f.tests {
		test := &f.tests[t]
		has := test.Values[die] == test.Values[die]
		if has {
			last = t
		}
		if test.Lower == test.Lower || test.Upper == test.Upper {
			limited = true
			whole = whole && has
		}
	}
	if limited && whole {
		l.Disagree.FailBinPassLimit++
	}
	if last >= 0 && last+1 < len(f.tests) {
		l.Tests[last+1].Blank++
	}
}
