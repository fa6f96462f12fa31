package synth

import (
	"bytes"
	"math"
	"runtime"
	"slices"
	"testing"

	"github.com/google/go-cmp/cmp"
	"github.com/google/go-cmp/cmp/cmpopts"
)

// TestSameOnAnyCores: the same bytes whatever GOMAXPROCS, whole or streamed, and
// other bytes with another seed.
func TestSameOnAnyCores(t *testing.T) {
	text := func(procs int, seed uint64, stream bool) []byte {
		defer runtime.GOMAXPROCS(runtime.GOMAXPROCS(procs))
		var b bytes.Buffer
		s, f := DemoSpec(), Format{UnitRow: true}
		err := error(nil)
		if stream {
			err = s.WriteWide(&b, seed, f)
		} else {
			err = s.Generate(seed).WriteWide(&b, f)
		}
		if err != nil {
			t.Fatal(err)
		}
		return b.Bytes()
	}
	one := text(1, 5, false)
	for _, procs := range []int{2, 7} {
		if !bytes.Equal(one, text(procs, 5, false)) {
			t.Errorf("GOMAXPROCS %d gives other bytes", procs)
		}
	}
	if !bytes.Equal(one, text(3, 5, true)) {
		t.Error("streaming gives other bytes")
	}
	if bytes.Equal(one, text(1, 6, false)) {
		t.Error("another seed gives the same bytes")
	}
}

// TestCauseOff: switching a cause off changes nothing but the dice it acts on.
func TestCauseOff(t *testing.T) {
	s := DemoSpec()
	with := s.Generate(11)
	places, _, _ := s.Grid.layout()
	for c := range s.Causes {
		off := s.without(func(x *Cause) bool { return x.Text == s.Causes[c].Text })
		without := off.Generate(11)
		changed := 0
		for i := range with.Wafers {
			a, b := &with.Wafers[i], &without.Wafers[i]
			for row := range a.Dice {
				same := a.HardBin[row] == b.HardBin[row] && a.SoftBin[row] == b.SoftBin[row]
				for test := range s.Tests {
					x, y := a.Values[test][row], b.Values[test][row]
					same = same && math.Float64bits(x) == math.Float64bits(y)
				}
				if same {
					continue
				}
				changed++
				cause := &s.Causes[c]
				if cause.size(11, c, i) == 0 || cause.Place.strength(&places[row]) == 0 {
					t.Fatalf("%s off: wafer %s row %d changed, where it does not act", cause.Text, a.ID, row)
				}
			}
		}
		if changed == 0 {
			t.Errorf("%s: nothing changes without it", s.Causes[c].Text)
		}
	}
}

// TestGridGrows: a wider edge exclusion drops dice and leaves the rest alone.
func TestGridGrows(t *testing.T) {
	s := DemoSpec()
	s.Wafers = 2
	wide := s.Generate(1)
	s.Grid.EdgeExclusionMM = 9
	narrow := s.Generate(1)
	at := map[[2]int32]float64{}
	w := &wide.Wafers[1]
	for i := range w.Dice {
		at[[2]int32{w.X[i], w.Y[i]}] = w.Values[0][i]
	}
	n := &narrow.Wafers[1]
	if n.Dice >= w.Dice {
		t.Fatalf("%d dice of %d", n.Dice, w.Dice)
	}
	for i := range n.Dice {
		if got, want := n.Values[0][i], at[[2]int32{n.X[i], n.Y[i]}]; math.Float64bits(got) != math.Float64bits(want) {
			t.Fatalf("die %d,%d reads %v, was %v", n.X[i], n.Y[i], got, want)
		}
	}
}

// TestStopOnFail: the same dice fail the same tests, later tests are blank, and
// earlier ones read the same.
func TestStopOnFail(t *testing.T) {
	s := DemoSpec()
	s.Missing = 0
	full := s.Generate(2)
	s.StopOnFail = true
	stop := s.Generate(2)
	fails := 0
	for i := range full.Wafers {
		a, b := &full.Wafers[i], &stop.Wafers[i]
		if !slices.Equal(a.HardBin, b.HardBin) || !slices.Equal(a.SoftBin, b.SoftBin) {
			t.Fatalf("wafer %s: other bins", a.ID)
		}
		for row := range a.X {
			failed := false
			for test := range s.Tests {
				v := b.Values[test][row]
				if failed != math.IsNaN(v) || !failed && v != a.Values[test][row] {
					t.Fatalf("wafer %s row %d test %s reads %v after a fail %v", a.ID, row, s.Tests[test].Name, v, failed)
				}
				failed = failed || v < s.Tests[test].Lower || v > s.Tests[test].Upper
			}
			if failed == s.PassBin(int(b.HardBin[row])) {
				t.Fatalf("wafer %s row %d: bin %d with a fail %v", a.ID, row, b.HardBin[row], failed)
			}
			if failed {
				fails++
			}
		}
	}
	if fails == 0 {
		t.Error("no die failed")
	}
}

// TestRetests: only failing dice or the few repeats are measured again, at the
// end, at their own place; a bad contact recovers and a scratch does not.
func TestRetests(t *testing.T) {
	s := DemoSpec()
	s.Repeat, s.Retest = 0, 1
	s.Causes = []Cause{
		{ID: "probe-contact", Wafers: []int{0}, Share: 0.3, Damage: Open, Recover: 0.9},
		{ID: "handling-damage", Wafers: []int{1}, Share: 0.3, Damage: Wreck},
	}
	s.Wafers = 2
	l := s.Generate(4)
	for i, recovered := range []float64{0.9, 0} {
		w := &l.Wafers[i]
		back := 0
		for j, of := range w.RetestOf {
			row := w.Dice + j
			if w.X[of] != w.X[row] || w.Y[of] != w.Y[row] || w.Site[of] != w.Site[row] || s.PassBin(int(w.HardBin[of])) {
				t.Fatalf("wafer %s: row %d is no retest of a failing die %d", w.ID, row, of)
			}
			if w.Touchdown[row] <= w.Touchdown[row-1] {
				t.Fatalf("wafer %s: retest %d is not after the row before", w.ID, row)
			}
			if s.PassBin(int(w.HardBin[row])) {
				back++
			}
		}
		n := float64(len(w.RetestOf))
		if share := float64(back) / n; n < 300 || math.Abs(share-recovered) > 5*math.Sqrt(0.09/n) {
			t.Errorf("wafer %s: %.3f of %v recover, want %.2f", w.ID, share, n, recovered)
		}
	}
}

// TestOpen: an open passes breakdown and leakage, and fails gain (the trade's
// sign of a bad contact; common practice, no source).
func TestOpen(t *testing.T) {
	s := DemoSpec()
	s.Causes, s.Missing, s.Wafers = []Cause{{ID: "probe-contact", Share: 1, Damage: Open}}, 0, 1
	w := &s.Generate(1).Wafers[0]
	for test, want := range map[string]float64{"BVCBO": 80, "BVCEO": 60, "BVEBO": 20, "VCESAT": 2} {
		i := slices.IndexFunc(s.Tests, func(x Test) bool { return x.Name == test })
		if got := w.Values[i][0]; got != want {
			t.Errorf("%s reads %v, want its clamp %v", test, got, want)
		}
	}
	if icbo, hfe := w.Values[3][0], w.Values[4][0]; icbo > 0.1 || hfe > 2 || w.HardBin[0] != 7 {
		t.Errorf("ICBO %v, HFE1 %v, bin %d: want nothing, nothing, gain", icbo, hfe, w.HardBin[0])
	}
}

// TestTruthAddsUp: losses and what is shared make up the whole, each loss is
// what a lot without the cause yields more, and counts by wafer agree.
func TestTruthAddsUp(t *testing.T) {
	s := DemoSpec()
	truth := s.Truth(9)
	l := s.Generate(9)
	approx := cmpopts.EquateApprox(0, 1e-12)
	if !cmp.Equal(truth.Yield, l.Yield(), approx) || truth.Dice != l.Dice() {
		t.Errorf("truth yields %v of %d, the lot %v of %d", truth.Yield, truth.Dice, l.Yield(), l.Dice())
	}
	sum := truth.Shared
	for _, c := range truth.Causes {
		sum += c.Loss
		off := s.without(func(x *Cause) bool { return x.Text == c.Text })
		if got := off.Generate(9).Yield() - l.Yield(); !cmp.Equal(got, c.Loss, approx) {
			t.Errorf("%s: loss %v, by making the lot without it %v", c.Text, c.Loss, got)
		}
		lost := 0
		for _, n := range c.Lost {
			lost += n
		}
		if len(c.Lost) != len(c.Wafers) || !cmp.Equal(float64(lost)/float64(truth.Dice), c.Loss, approx) || lost <= 0 {
			t.Errorf("%s: %d dice lost on %d wafers, loss %v", c.Text, lost, len(c.Wafers), c.Loss)
		}
	}
	if !cmp.Equal(truth.Clean-truth.Yield, sum, approx) {
		t.Errorf("clean %v less yield %v is not the sum %v", truth.Clean, truth.Yield, sum)
	}
	if got := s.Healthy().Generate(9).Yield(); got != truth.Healthy {
		t.Errorf("healthy %v, truth says %v", got, truth.Healthy)
	}
	for i, w := range truth.Wafers {
		if diff := cmp.Diff(w.Epi, l.Wafers[i].Epi, approx); diff != "" {
			t.Error(diff)
		}
		if w.Pass != l.Wafers[i].passing(&s) {
			t.Errorf("wafer %s: %d pass, truth says %d", w.ID, l.Wafers[i].passing(&s), w.Pass)
		}
	}
}

// TestDemo: what the demo is said to hold.
func TestDemo(t *testing.T) {
	l := Demo()
	if len(l.Wafers) != 25 || l.Dice() != 25*1353 || l.Rows() <= l.Dice() {
		t.Errorf("%d wafers, %d dice, %d rows", len(l.Wafers), l.Dice(), l.Rows())
	}
	if y := l.Yield(); y < 0.85 || y > 0.88 {
		t.Errorf("yield %.4f", y)
	}
	blank, clamped := 0, 0
	for i := range l.Wafers {
		for t, column := range l.Wafers[i].Values {
			for _, v := range column {
				if math.IsNaN(v) {
					blank++
				} else if t == 0 && v == 80 {
					clamped++
				}
			}
		}
	}
	if blank < 50 || blank > 500 || clamped < 100 || clamped > 2000 {
		t.Errorf("%d blanks, %d clamped BVCBO readings", blank, clamped)
	}
	truth := l.Spec.Truth(l.Seed)
	epi := truth.Causes[len(background())]
	if epi.ID != "epi-thickness" || !slices.Equal(epi.Wafers, []string{"07", "08", "09", "10", "11", "12"}) || epi.Loss < 0.04 {
		t.Errorf("%+v", epi)
	}
	for _, w := range truth.Wafers[6:12] {
		if w.Epi.ThicknessUM > 3.1 {
			t.Errorf("wafer %s: %.2f um is not below the spec's 3.1", w.ID, w.Epi.ThicknessUM)
		}
	}
}
