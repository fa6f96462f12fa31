package yield_test

import (
	"math"
	"math/rand/v2"
	"slices"
	"strings"
	"testing"

	"kneepoint/stats/yield"
)

var nan = math.NaN()

// broken is the plain reading of the rules: which limits does a value break.
func broken(t yield.TestData, i int) (low, high bool) {
	mark := int8(0)
	if t.Censor != nil {
		mark = t.Censor[i]
	}
	v := t.Values[i]
	if v != v {
		return false, false
	}
	low = t.Lower == t.Lower && v < t.Lower && mark != 1
	high = t.Upper == t.Upper && v > t.Upper && mark != -1
	return low, high
}

// plain counts losses die by die, without regard to stop-on-fail.
func plain(tests []yield.TestData, pass []bool, marginal float64) yield.Losses {
	l := yield.Losses{Tests: make([]yield.Loss, len(tests))}
	for i, p := range pass {
		var failed []int
		for t := range tests {
			low, high := broken(tests[t], i)
			if !low && !high {
				continue
			}
			failed = append(failed, t)
			if p {
				continue
			}
			loss := &l.Tests[t]
			loss.Any++
			v := tests[t].Values[i]
			near := true
			if low {
				loss.Low++
				near = near && tests[t].Lower-v < marginal*math.Abs(tests[t].Lower)
			}
			if high {
				loss.High++
				near = near && v-tests[t].Upper < marginal*math.Abs(tests[t].Upper)
			}
			if near {
				loss.Marginal++
			}
		}
		switch {
		case p && len(failed) > 0:
			l.Disagree.PassBinFailLimit++
		case p:
		case len(failed) == 0:
			l.Unattributed++
			limited, whole := false, true
			last := -1
			for t := range tests {
				has := tests[t].Values[i] == tests[t].Values[i]
				if tests[t].Lower == tests[t].Lower || tests[t].Upper == tests[t].Upper {
					limited = true
					whole = whole && has
				}
				if has {
					last = t
				}
			}
			if limited && whole {
				l.Disagree.FailBinPassLimit++
			}
			if last >= 0 && last < len(tests)-1 {
				l.Tests[last+1].Blank++
			}
		default:
			l.Tests[failed[0]].First++
			if len(failed) == 1 {
				l.Tests[failed[0]].Alone++
			}
		}
	}
	return l
}

// scatter makes a lot of n dice with limits, blanks, bounds and readings exactly
// at the limits.
func scatter(r *rand.Rand, n, tests int) ([]yield.TestData, []bool) {
	data := make([]yield.TestData, tests)
	for t := range data {
		d := &data[t]
		d.Lower, d.Upper = -10, 10
		switch r.IntN(5) {
		case 0:
			d.Lower = nan
		case 1:
			d.Upper = nan
		case 2:
			d.Lower, d.Upper = nan, nan
		case 3:
			d.Lower = 0
		}
		d.Values = make([]float64, n)
		if r.IntN(2) == 0 {
			d.Censor = make([]int8, n)
		}
		for i := range d.Values {
			d.Values[i] = float64(r.IntN(27)-13) + 0.5*float64(r.IntN(2))
			if r.IntN(8) == 0 {
				d.Values[i] = nan
			}
			if d.Censor != nil && r.IntN(4) == 0 {
				d.Censor[i] = int8(r.IntN(3) - 1)
			}
		}
	}
	pass := make([]bool, n)
	for i := range pass {
		pass[i] = r.IntN(2) == 0
	}
	return data, pass
}

func TestLossesAgainstPlainCounting(t *testing.T) {
	r := rand.New(rand.NewPCG(1, 4))
	for round := range 300 {
		n := r.IntN(60)
		if round%50 == 0 {
			n = 4096 + r.IntN(5000) // more than a block
		}
		tests, pass := scatter(r, n, 1+r.IntN(5))
		got := yield.TestLosses(tests, pass, 0.1)
		want := plain(tests, pass, 0.1)
		if got.StopOnFail {
			for i := range want.Tests {
				want.Tests[i].Alone, want.Tests[i].Any = -1, -1
			}
		}
		if !slices.Equal(got.Tests, want.Tests) || got.Unattributed != want.Unattributed || got.Disagree != want.Disagree {
			t.Fatalf("round %d, n %d:\ngot  %+v\nwant %+v", round, n, got, want)
		}
		if got.StopText == "" {
			t.Fatal("no account of the program")
		}
		sum := got.Unattributed
		for _, l := range got.Tests {
			sum += l.First
		}
		bad := 0
		for _, p := range pass {
			if !p {
				bad++
			}
		}
		if sum != bad {
			t.Fatalf("first losses and the unattributed make %d of %d failing dice", sum, bad)
		}
		first := yield.FirstFailing(tests, pass)
		for k, l := range got.Tests {
			if c := count(first, int32(k)); c != l.First {
				t.Fatalf("FirstFailing gives test %d to %d dice, First is %d", k, c, l.First)
			}
		}
	}
}

func count[T comparable](x []T, v T) (n int) {
	for _, y := range x {
		if y == v {
			n++
		}
	}
	return n
}

// A reading at a limit passes; the next float64 beyond fails, and is marginal.
func TestLimitIsInside(t *testing.T) {
	lower, upper := 22.5, 80.0
	below, above := math.Nextafter(lower, 0), math.Nextafter(upper, 100)
	tests := []yield.TestData{{Values: []float64{lower, upper, below, above, nan}, Lower: lower, Upper: upper}}
	pass, blank := yield.PassByLimits(tests, 5)
	if !slices.Equal(pass, []bool{true, true, false, false, false}) || blank != 1 {
		t.Errorf("pass %v, %d blank", pass, blank)
	}
	l := yield.TestLosses(tests, pass, 0.1)
	if got := l.Tests[0]; got.Low != 1 || got.High != 1 || got.Marginal != 2 || got.First != 2 || l.Unattributed != 1 {
		t.Errorf("%+v", l)
	}
	// Marginal means by less than a tenth of the limit: 22.5*0.9 = 20.25.
	at := 22.5 - 0.1*22.5
	tests[0].Values = []float64{at, math.Nextafter(at, 100), 88, math.Nextafter(88, 0), -1}
	l = yield.TestLosses(tests, make([]bool, 5), 0.1)
	if l.Tests[0].Marginal != 2 {
		t.Errorf("marginal %d, want 2", l.Tests[0].Marginal)
	}
	// A limit of zero has no tenth.
	zero := []yield.TestData{{Values: []float64{-1e-300}, Lower: 0, Upper: nan}}
	if l := yield.TestLosses(zero, []bool{false}, 0.1); l.Tests[0].Marginal != 0 || l.Tests[0].Low != 1 {
		t.Errorf("limit 0: %+v", l.Tests[0])
	}
}

// Bounds fail a limit only when they say so.
func TestCensoredReadings(t *testing.T) {
	for _, c := range []struct {
		value     float64
		mark      int8
		low, high int
	}{
		{30, 0, 1, 0}, {90, 0, 0, 1},
		{30, +1, 0, 0}, // at least 30 V: may well be 50 V
		{90, +1, 0, 1}, // at least 90 V is above 80 V
		{30, -1, 1, 0}, // at most 30 V is below 35 V
		{90, -1, 0, 0}, // at most 90 V: may be 50 V
		{35, -1, 0, 0}, {80, +1, 0, 0},
	} {
		tests := []yield.TestData{{Values: []float64{c.value}, Censor: []int8{c.mark}, Lower: 35, Upper: 80}}
		l := yield.TestLosses(tests, []bool{false}, 0.1).Tests[0]
		if l.Low != c.low || l.High != c.high {
			t.Errorf("%v marked %d: low %d, high %d", c.value, c.mark, l.Low, l.High)
		}
	}
}

// program simulates a test program of k tests, each failed by a die with
// probability fail, that stops as stops says: after which test, given the first
// failing one, testing ends.
type program struct {
	tests, dice int
	fail        []float64
	stops       func(first int) int // index of the last test made
	missing     float64             // share of readings lost at random
}

func (p program) run(seed uint64) ([]yield.TestData, []bool) {
	r := rand.New(rand.NewPCG(seed, 77))
	data := make([]yield.TestData, p.tests)
	for t := range data {
		data[t] = yield.TestData{Values: make([]float64, p.dice), Lower: -1, Upper: 1}
	}
	pass := make([]bool, p.dice)
	for i := range p.dice {
		first := -1
		for t := range data {
			v := 0.0
			if r.Float64() < p.fail[t] {
				v = 5
				if first < 0 {
					first = t
				}
			}
			data[t].Values[i] = v
		}
		pass[i] = first < 0
		for t := range data {
			if first >= 0 && t > p.stops(first) || t != first && r.Float64() < p.missing {
				data[t].Values[i] = nan
			}
		}
	}
	return data, pass
}

func same(p float64, n int) []float64 {
	out := make([]float64, n)
	for i := range out {
		out[i] = p
	}
	return out
}

func TestStopOnFail(t *testing.T) {
	at := func(first int) int { return first }
	never := func(int) int { return 99 }
	only := func(test int, p float64) []float64 {
		f := make([]float64, 8)
		f[test] = p
		return f
	}
	for _, c := range []struct {
		name string
		program
		stop bool
		text string
		ends []int
	}{
		{"plain stop", program{8, 2000, same(0.02, 8), at, 0}, true, "stops at the first failing test", nil},
		{"plain stop, readings lost", program{8, 2000, same(0.02, 8), at, 0.05}, true, "stops at the first failing test", nil},
		{"runs on", program{8, 2000, same(0.02, 8), never, 0}, false, "runs on", nil},
		{"runs on, readings lost", program{8, 2000, same(0.02, 8), never, 0.1}, false, "runs on", nil},
		{"every die fails, stop", program{8, 500, same(1, 8), at, 0}, true, "taken as stop-on-fail", nil},
		{"nearly every die fails, stop", program{8, 500, same(0.6, 8), at, 0}, true, "stops", nil},
		{"every die fails, runs on", program{8, 500, same(1, 8), never, 0}, false, "runs on", nil},
		{"only the last test fails", program{8, 2000, only(7, 0.2), at, 0}, false, "not told: no die fails before the last test", nil},
		{"only the first test fails, stop", program{8, 2000, only(0, 0.2), at, 0}, true, "stops at the first failing test", nil},
		{"the last but one fails, readings lost", program{8, 2000, only(6, 0.2), never, 0.15}, false, "runs on", nil},
		{"no fails", program{8, 200, same(0, 8), at, 0}, false, "not told: no die fails", nil},
		{"groups", program{8, 3000, same(0.02, 8), func(f int) int { return []int{2, 2, 2, 5, 5, 5, 7, 7}[f] }, 0}, true, "end of the group", []int{2, 5}},
		{"two groups, mostly the second fails", program{8, 3000, []float64{.01, .01, .01, .01, .05, .05, .05, .05},
			func(f int) int { return []int{3, 3, 3, 3, 7, 7, 7, 7}[f] }, 0.01}, true, "end of the group", []int{3}},
		{"only a rare first test stops", program{8, 20000, []float64{.001, .02, .02, .02, .02, .02, .02, .02}, func(f int) int {
			if f == 0 {
				return 0
			}
			return 7
		}, 0}, false, "runs on", nil},
		{"one test", program{1, 100, same(0.1, 1), at, 0}, false, "not told", nil},
	} {
		for seed := range uint64(5) {
			tests, pass := c.run(seed)
			l := yield.TestLosses(tests, pass, 0.1)
			if l.StopOnFail != c.stop || !strings.Contains(l.StopText, c.text) || !slices.Equal(l.GroupEnds, c.ends) {
				t.Errorf("%s: stop %v, ends %v: %s", c.name, l.StopOnFail, l.GroupEnds, l.StopText)
			}
			for _, loss := range l.Tests {
				if (loss.Alone == -1) != c.stop || (loss.Any == -1) != c.stop {
					t.Errorf("%s: alone %d, any %d", c.name, loss.Alone, loss.Any)
				}
			}
		}
	}
}

// With few failing dice the verdict still comes, and says on how little it rests;
// where blanks are common anyway it does not come.
func TestStopOnFailFromFewDice(t *testing.T) {
	for _, dice := range []int{1, 2, 3} {
		tests, pass := program{6, 1000, same(0, 6), func(f int) int { return f }, 0}.run(1)
		for i := range dice {
			tests[2].Values[i] = 5
			for k := 3; k < 6; k++ {
				tests[k].Values[i] = nan
			}
			pass[i] = false
		}
		if l := yield.TestLosses(tests, pass, 0.1); !l.StopOnFail || dice < 3 && !strings.Contains(l.StopText, "few dice") {
			t.Errorf("%d dice: %v, %s", dice, l.StopOnFail, l.StopText)
		}
	}
	tests, pass := program{6, 1000, same(0, 6), func(f int) int { return f }, 0.15}.run(1)
	tests[2].Values[0], tests[5].Values[0], pass[0] = 5, nan, false
	tests[3].Values[0], tests[4].Values[0] = nan, nan
	if l := yield.TestLosses(tests, pass, 0.1); l.StopOnFail || !strings.Contains(l.StopText, "by chance") {
		t.Errorf("%v, %s", l.StopOnFail, l.StopText)
	}
}

// A shorted die whose later readings were thrown out as sentinels is no proof
// that the program stops.
func TestHardFailsWithGapsRunOn(t *testing.T) {
	tests, pass := program{6, 4000, same(0.03, 6), func(int) int { return 99 }, 0}.run(3)
	r := rand.New(rand.NewPCG(1, 1))
	for i := range pass {
		if !pass[i] && tests[0].Values[i] == 5 && r.Float64() < 0.7 {
			for k := 1; k < 6; k++ {
				tests[k].Values[i] = nan
			}
		}
	}
	l := yield.TestLosses(tests, pass, 0.1)
	if l.StopOnFail || !strings.Contains(l.StopText, "runs on, with gaps") {
		t.Errorf("%v, %s", l.StopOnFail, l.StopText)
	}
}

// A program that does not record the reading that failed leaves its trace in
// Blank.
func TestUnrecordedFails(t *testing.T) {
	tests, pass := program{5, 500, same(0, 5), func(f int) int { return f }, 0}.run(1)
	for i := range 40 {
		pass[i] = false
		for k := 3; k < 5; k++ {
			tests[k].Values[i] = nan
		}
	}
	l := yield.TestLosses(tests, pass, 0.1)
	if l.Unattributed != 40 || l.Tests[3].Blank != 40 || l.Disagree.FailBinPassLimit != 0 {
		t.Errorf("%+v", l)
	}
}

func TestLossesPanic(t *testing.T) {
	ok := yield.TestData{Values: []float64{1}, Lower: nan, Upper: nan}
	for _, f := range []func(){
		func() { yield.TestLosses([]yield.TestData{ok}, []bool{true, false}, 0.1) },
		func() {
			yield.TestLosses([]yield.TestData{{Values: []float64{1}, Censor: []int8{}}}, []bool{true}, 0.1)
		},
		func() { yield.TestLosses([]yield.TestData{ok}, []bool{true}, nan) },
		func() { yield.AgainstLimit([]yield.TestData{ok}, 1, []bool{true}, nil, false) },
		func() {
			yield.AgainstLimit([]yield.TestData{{Values: []float64{1}, Lower: 1, Upper: 2}}, 0, []bool{true}, []float64{nan}, false)
		},
		func() { yield.PassByLimits([]yield.TestData{ok}, 2) },
	} {
		mustPanic(t, f)
	}
}

func mustPanic(t *testing.T, f func()) {
	t.Helper()
	defer func() {
		t.Helper()
		if s, ok := recover().(string); !ok || !strings.HasPrefix(s, "stats/yield: ") {
			t.Errorf("recovered %v", s)
		}
	}()
	f()
}
