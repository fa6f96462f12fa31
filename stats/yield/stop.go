package yield

import (
	"fmt"
	"math"
	"slices"
	"strings"
)

// How the verdict is reached. A test is telling when most dice that have not
// failed yet hold a reading of it; tests that are sampled, or not part of the
// program, tell nothing. A failing die is cut when the last telling test is
// blank on it. Dice are grouped by their first failing test: in a program that
// stops, (nearly) all dice of a group are cut, in one that runs on (nearly) none
// are. In a program that stops at the end of a group of tests, dice that fail in
// the last group are not cut, and in one where only some tests stop (a contact
// test, often) only those groups are; hence the verdict by share of dice.
const (
	telling    = 0.8  // share of readings that makes a test telling
	nearlyAll  = 0.9  // share of cut dice that makes a first failing test a stopping one
	enough     = 0.1  // share of dice at stopping tests that makes a program stop-on-fail
	surely     = 1e-6 // chance of the blanks in a program that runs on
	plausibly  = 0.01
	fewFailing = 5
	fewPassing = 20 // fewer passing dice do not show which tests are telling
)

// findStop decides whether the program stops on fail.
func (f *fails) findStop(l *Losses) {
	share := f.presence()
	last := -1
	for t, s := range share {
		if s >= telling {
			last = t
		}
	}
	if len(f.dice) == 0 {
		l.StopText = "not told: no die fails"
		return
	}
	if last < 0 {
		f.noTelling(l)
		return
	}
	type class struct{ cut, ran int }
	classes := make([]class, last+1)
	ends := make([][]int, last+1) // by first failing test: where readings end on cut dice
	for i := range ends {
		ends[i] = make([]int, last+1)
	}
	for k, die := range f.dice {
		t := int(f.first[k])
		if t < 0 || t >= last {
			continue
		}
		end := last
		for end > t && !(share[end] >= telling && f.tests[end].Values[die] == f.tests[end].Values[die]) {
			end--
		}
		if end < last {
			classes[t].cut++
			ends[t][end]++
		} else {
			classes[t].ran++
		}
	}
	stopping := 0
	for t, c := range classes {
		l.Cut += c.cut
		l.Ran += c.ran
		if c.cut > 0 && float64(c.cut) >= nearlyAll*float64(c.cut+c.ran) {
			stopping += c.cut + c.ran
		} else {
			ends[t] = nil
		}
	}
	n := l.Cut + l.Ran
	if n == 0 {
		l.StopText = "not told: no die fails before the last test, which shows the same in either kind of program"
		return
	}
	// The chance that a die which ran on lacks the last telling reading.
	blank := math.Max(1-share[last], 1/float64(len(f.pass)+2))
	chance := math.Pow(blank, float64(l.Cut))
	stops := float64(stopping) >= enough*float64(n) || l.Cut*2 >= n
	switch {
	case l.Cut == 0 || !stops && float64(l.Cut) <= (2*blank+0.02)*float64(n):
		l.StopText = fmt.Sprintf("runs on: %d of %d failing dice hold readings after their first fail", l.Ran, n)
	case !stops:
		l.StopText = fmt.Sprintf("runs on, with gaps: %d of %d failing dice lack the readings after their first fail; "+
			"what they would have failed later is not counted", l.Cut, n)
	case chance > plausibly:
		l.StopText = fmt.Sprintf("not told: %d of %d failing dice lack readings after their first fail, "+
			"which so few may by chance", l.Cut, n)
	default:
		l.StopOnFail = true
		l.GroupEnds = groupEnds(ends)
		l.StopText = stopText(l, n, chance)
	}
}

func stopText(l *Losses, n int, chance float64) string {
	where := "stops at the first failing test"
	if l.GroupEnds != nil {
		var s []string
		for _, e := range l.GroupEnds {
			s = append(s, fmt.Sprint(e+1))
		}
		where = "stops at the end of the group of tests that fails (after test number " + strings.Join(s, ", ") + ")"
	}
	sure := "certain"
	if chance > surely || l.Cut < fewFailing {
		sure = "likely, from few dice"
	}
	if float64(l.Cut) < nearlyAll*float64(n) && l.GroupEnds == nil {
		where = "stops at the first fail of some tests or on some wafers"
	}
	return fmt.Sprintf("%s: %d of %d failing dice are blank after it where passing dice hold readings (%s)",
		where, l.Cut, n, sure)
}

// groupEnds returns where testing stops if that is later than at the failing
// test, nil if it is at the failing test. ends is nil for tests that do not stop
// the program.
func groupEnds(ends [][]int) []int {
	atOnce, later := 0, 0
	var out []int
	for t, e := range ends {
		if e == nil {
			continue
		}
		mode := t
		for end, n := range e {
			if n > e[mode] {
				mode = end
			}
			if end <= t {
				atOnce += n
			} else {
				later += n
			}
		}
		if e[mode] > 0 {
			out = append(out, mode)
		}
	}
	if float64(atOnce) >= nearlyAll*float64(atOnce+later) {
		return nil
	}
	slices.Sort(out)
	return slices.Compact(out)
}

// presence is the share of readings of each test on dice that have not failed
// before it: passing dice and, when these are few, failing ones up to their
// first fail. NaN where there is no such die, and then the test is not telling.
func (f *fails) presence() []float64 {
	share := make([]float64, len(f.tests))
	passing := len(f.pass) - len(f.dice)
	for t := range f.tests {
		v := f.tests[t].Values
		has, of := 0, 0
		if passing > 0 {
			for i, p := range f.pass {
				if p && v[i] == v[i] {
					has++
				}
			}
			of = passing
		}
		if passing < fewPassing {
			for k, d := range f.dice {
				if int(f.first[k]) > t {
					of++
					if v[d] == v[d] {
						has++
					}
				}
			}
		}
		share[t] = float64(has) / float64(of)
	}
	return share
}

// noTelling handles a lot of which no test is telling, as when all dice fail the
// first test. If then no later reading exists at all, alone and any are unknown
// whatever the program does.
func (f *fails) noTelling(l *Losses) {
	for k, die := range f.dice {
		t := int(f.first[k])
		if t < 0 || t+1 == len(f.tests) {
			continue
		}
		blank := true
		for _, test := range f.tests[t+1:] {
			blank = blank && test.Values[die] != test.Values[die]
		}
		if blank {
			l.Cut++
		} else {
			l.Ran++
		}
	}
	if l.Cut > 0 && float64(l.Cut) >= nearlyAll*float64(l.Cut+l.Ran) {
		l.StopOnFail = true
		l.StopText = fmt.Sprintf("taken as stop-on-fail: all readings after the first fail are blank on %d of %d failing dice, "+
			"and no die passes that could show them", l.Cut, l.Cut+l.Ran)
		return
	}
	if l.Ran > 0 && float64(l.Ran) >= nearlyAll*float64(l.Cut+l.Ran) {
		l.StopText = fmt.Sprintf("runs on: %d of %d failing dice hold readings after their first fail", l.Ran, l.Cut+l.Ran)
		return
	}
	l.StopText = "not told: no test has readings on most dice"
}
