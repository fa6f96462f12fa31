package build

import (
	"math"
	"strings"
	"testing"

	"kneepoint/config"
	"kneepoint/ingest"
	"kneepoint/ingest/synth"
	"kneepoint/ingest/synth/memory"
	"kneepoint/reports"
	"kneepoint/reports/causes"
)

// disposed runs the rules on a lot of five wafers that yields as given, with causes of
// given probability that cost dice on given wafers.
func disposed(t *testing.T, yields []float64, baseline float64, list []causes.Account, change func(w *lotwork)) reports.Disposition {
	t.Helper()
	s := smallSpec(len(yields))
	s.Grid.DieWidthMM, s.Grid.DieHeightMM = 12, 12
	lot, err := memory.Lot(s.Generate(1), ingest.Options{})
	if err != nil {
		t.Fatal(err)
	}
	r := &reports.Report{Dice: 1000 * len(yields)}
	sum := 0.0
	for i, y := range yields {
		r.Wafers = append(r.Wafers, reports.Wafer{ID: string(rune('1' + i)), Dice: 1000, Passing: int(1000 * y), Yield: reports.Interval{Estimate: num(y)}})
		sum += y
	}
	r.Yield.Estimate, r.Yield.Baseline = num(sum/float64(len(yields))), num(baseline)
	r.Screens = []reports.Screen{{Name: "good die among failing ones", Dice: 40, Loss: 0.008}, {Name: "part average limits, any test", Dice: 5, Loss: 0.001}}
	w := &lotwork{in: Input{Settings: config.DefaultSettings()}, lot: lot, rep: r, verdict: list}
	for i := range list {
		r.Causes = append(r.Causes, reports.Cause{Cause: list[i].Cause, Probability: num(list[i].Probability)})
	}
	if change != nil {
		change(w)
	}
	w.dispose()
	return r.Disposition
}

// account is a cause with the dice that it cost on each wafer, those with some affected.
func account(cause string, p float64, lost ...float64) causes.Account {
	a := causes.Account{Judged: causes.Judged{Cause: cause, Probability: p}, Listed: true, Lost: lost}
	for i, n := range lost {
		a.Dice.Value += n
		if n > 0 {
			a.Wafers = append(a.Wafers, string(rune('1'+i)))
		}
	}
	a.Dice.Lower, a.Dice.Upper = 0.8*a.Dice.Value, 1.2*a.Dice.Value
	return a
}

// TestProposals goes through the rules of dispose.
func TestProposals(t *testing.T) {
	good := []float64{0.95, 0.95, 0.94, 0.96, 0.95}
	oneLow := []float64{0.95, 0.75, 0.95, 0.95, 0.95}
	none := account(causes.Nothing, 0.02)
	for _, c := range []struct {
		name     string
		yields   []float64
		list     []causes.Account
		change   func(w *lotwork)
		proposal string
		wafer2   string
		says     string
	}{
		{"nothing wrong", good, []causes.Account{account(causes.Nothing, 0.9)}, nil, "release", "release", "at the baseline's 95.0 %"},
		{"nothing known wrong and far below", []float64{0.6, 0.6, 0.6, 0.6, 0.6}, []causes.Account{account(causes.Nothing, 0.6)}, nil, "hold", "hold", "below the statistical limit"},
		{"severe data", good, []causes.Account{account(causes.Nothing, 0.9)}, func(w *lotwork) {
			w.rep.Quality = []reports.Quality{{Code: "unit-conflict", Severity: "severe", Text: "V or mV"}}
		}, "cannot-say", "cannot-say", "unit-conflict"},
		{"not judged", good, []causes.Account{account(causes.Nothing, 0.9)}, func(w *lotwork) { w.unjudged = "no limits" }, "cannot-say", "cannot-say", "no limits"},
		{"best of several", good, []causes.Account{account(causes.Nothing, 0.9)}, func(w *lotwork) { w.in.Settings.Retest = "best" }, "hold", "hold", "no release is proposed"},
		{"undecided", oneLow, []causes.Account{account("lifetime", 0.45, 0, 200, 0, 0, 0), account("surface-charge", 0.4, 0, 200, 0, 0, 0), none}, nil, "hold", "hold", "no cause is probable"},
		{"unexplained", oneLow, []causes.Account{account(causes.Unknown, 0.8, 0, 200, 0, 0, 0), none}, nil, "hold", "hold", "not understood"},
		{"process shift", oneLow, []causes.Account{account("epi-thickness", 0.9, 0, 200, 0, 0, 0), none}, nil, "hold", "hold", "nearer to their limits"},
		{"reliability risk", oneLow, []causes.Account{account("surface-charge", 0.9, 0, 200, 0, 0, 0), none}, nil, "hold", "hold", "walk under bias"},
		{"local", oneLow, []causes.Account{account("edge-dice", 0.9, 0, 200, 0, 0, 0), none}, nil, "release-after-screen", "release-after-screen", "takes 40 passing dice, 0.8 % of all"},
		{"contact", oneLow, []causes.Account{account("probe-contact", 0.9, 0, 200, 0, 0, 0), none}, nil, "retest", "retest", "measure its dice again"},
		{"setup before all else", oneLow, []causes.Account{account("test-setup", 0.9), account("epi-thickness", 0.6, 0, 200, 0, 0, 0)}, nil, "retest", "retest", "checked setup"},
		{"local and process", oneLow, []causes.Account{account("epi-thickness", 0.9, 0, 100, 0, 0, 0), account("handling-damage", 0.9, 0, 0, 50, 0, 0)}, nil, "hold", "hold", "handling-damage"},
		{"ruined", []float64{0.95, 0.01, 0.95, 0.95, 0.95}, []causes.Account{account("handling-damage", 0.9, 0, 940, 0, 0, 0), none}, nil, "release-after-screen", "scrap-candidate", "handling-damage"},
		{"ruined but by contact", []float64{0.95, 0.01, 0.95, 0.95, 0.95}, []causes.Account{account("probe-contact", 0.9, 0, 940, 0, 0, 0), none}, nil, "retest", "retest", "clean"},
	} {
		t.Run(c.name, func(t *testing.T) {
			d := disposed(t, c.yields, 0.95, c.list, c.change)
			if d.Proposal != c.proposal || !strings.Contains(strings.Join(d.Because, "; "), c.says) {
				t.Errorf("%s because %q, want %s saying %q", d.Proposal, d.Because, c.proposal, c.says)
			}
			if w := d.Wafers[1]; w.Proposal != c.wafer2 {
				t.Errorf("wafer 2: %s because %q, want %s", w.Proposal, w.Because, c.wafer2)
			}
		})
	}
}

// TestYieldIfFixed adds what the probable causes cost, by hand.
func TestYieldIfFixed(t *testing.T) {
	d := disposed(t, []float64{0.95, 0.75}, 0.95, []causes.Account{account("edge-dice", 0.9, 0, 3), account("lifetime", 0.3, 0, 20)}, nil)
	lot, _ := memory.Lot(func() *synth.Lot {
		s := smallSpec(2)
		s.Grid.DieWidthMM, s.Grid.DieHeightMM = 12, 12
		return s.Generate(1)
	}(), ingest.Options{})
	want := 0.85 + 3/float64(lot.Len())
	if got := float64(d.YieldIfFixed.Estimate); math.Abs(got-want) > 1e-12 || want >= 1 {
		t.Errorf("yield if fixed %v, want %v", got, want)
	}
	d = disposed(t, []float64{0.95, 0.95}, 0.95, []causes.Account{account(causes.Nothing, 0.9)}, nil)
	if d.YieldIfFixed.Estimate.Valid() || d.YieldIfFixed.Why == "" {
		t.Errorf("nothing to fix, and yet %+v", d.YieldIfFixed)
	}
}

// TestYieldLimit: three sigmas of lots, a third of the loss each, and of counting, by hand.
func TestYieldLimit(t *testing.T) {
	// sqrt((0.3*0.05)^2 + 0.05*0.95/1900) = sqrt(0.000225 + 0.000025) = 0.0158114
	if got := yieldLimit(0.95, 1900, 0.3); got < 0.902565 || got > 0.902567 {
		t.Errorf("limit %.6f", got)
	}
	if got := yieldLimit(float64(reports.NaN), 1900, 0.3); got == got {
		t.Errorf("a limit of %v without a baseline", got)
	}
}
