package build

import (
	"fmt"
	"math"
	"strings"

	"kneepoint/reports"
	"kneepoint/reports/causes"
)

// The proposals.
const (
	release      = "release"
	afterScreen  = "release-after-screen"
	retest       = "retest"
	hold         = "hold"
	scrap        = "scrap-candidate"
	cannotSay    = "cannot-say"
	retestBest   = "best" // config's retest policy
	scrapBelow   = 0.05   // yield of a wafer with almost no good dice
	lossOnWafer  = 0.02   // of a wafer's dice, for a cause to bear on its proposal
	nearBaseline = 0.3    // of the healthy loss: what healthy lots differ by
)

// Kinds of causes by what they ask for. Common practice, no source.
var (
	// A tester's doing: measuring again heals it.
	setupCauses = map[string]bool{"test-setup": true, "probe-contact": true}
	// Losses that lie with the dice that fail: a screen of their surroundings leaves
	// the rest as good as any.
	localCauses = map[string]bool{"edge-dice": true, "handling-damage": true, "shot-repeat": true, "random-defects": true}
	// Passing dice of such a lot may fail in the field.
	riskyCauses = map[string]string{
		"surface-charge":         "charge may walk under bias, on passing dice too",
		"lifetime":               "contamination may go on moving, on passing dice too",
		"edge-field":             "passing dice may break down at the junction edge in use",
		"emitter-collector-pipe": "pipes that pass today may grow under stress",
		"series-resistance":      "contacts that are poor may open in use",
	}
)

// dispose proposes what to do with the lot and with each wafer. It is advice: the
// people authorised decide by the site's rules and the customer's agreements.
//
// The lot, by the first rule that applies:
//
//   - cannot-say: it is not known which dice pass, the data have a severe problem (a
//     unit conflict, a broken file), or no baseline says what a healthy lot yields
//     and no cause is probable;
//   - retest: test-setup is probable, since then no other number can be trusted;
//   - hold: a probable cause that shifts the process, that is a reliability risk, or
//     that only the unexplained stands for; or no cause has a probability of one half;
//     or the yield is below the statistical limit of the baseline and no local cause
//     explains it;
//   - retest: probe-contact is probable and nothing asks for a hold;
//   - release-after-screen: every probable cause is local (edge dice, handling, shot
//     repeat, random defects); the screen is named with its cost;
//   - release: within-baseline is probable, the yield is at the baseline;
//   - hold, for what is left.
//
// A wafer has the lot's proposal where that rests on the lot as a whole. Else it goes
// by the probable causes that cost it dice, with the same order; a wafer that none
// touches and that yields within its own limit may be released. A wafer with almost no
// good dice by a cause that no retest heals is a scrap candidate.
//
// The statistical limit is the baseline's yield less three sigmas of what healthy lots
// (wafers) differ by, taken as a third (two thirds) of the healthy loss, with counting.
// With the retest policy 'best' nothing is proposed for release.
func (w *lotwork) dispose() {
	d := &dispose{w: w, r: w.rep}
	for i := range w.verdict {
		a := &w.verdict[i]
		if a.Probability >= probable {
			d.likely = append(d.likely, a)
		}
	}
	whole := d.lot()
	if (w.in.Settings.Retest == retestBest) && (d.proposal == release || d.proposal == afterScreen) {
		d.say(hold, "the best of several measurements counted, so marginal parts may be among the passing ones: no release is proposed")
	}
	d.wafers(whole)
	w.rep.Disposition = reports.Disposition{Proposal: d.proposal, Because: d.because, Wafers: d.list, YieldIfFixed: w.yieldIfFixed(d.likely)}
}

type dispose struct {
	w        *lotwork
	r        *reports.Report
	likely   []*causes.Account
	proposal string
	because  []string
	list     []reports.WaferDisposition
}

func (d *dispose) say(proposal string, because ...string) {
	d.proposal, d.because = proposal, append(because, d.because...)
}

// lot finds the lot's proposal; whole says that it holds for every wafer alike.
func (d *dispose) lot() (whole bool) {
	if why := d.unsayable(); why != "" {
		d.say(cannotSay, why)
		return true
	}
	first := d.r.Causes[0]
	if len(d.likely) == 0 && !d.r.Yield.Baseline.Valid() {
		d.say(cannotSay, "no cause is probable, and no baseline says what a healthy lot yields")
		return true
	}
	if len(d.likely) == 0 {
		d.say(hold, fmt.Sprintf("no cause is probable: the first is %s with %s", causeWords(first.Cause, first.Direction), chanceWords(float64(first.Probability))))
		return true
	}
	var setup, local, hard []*causes.Account
	for _, a := range d.likely {
		switch {
		case a.Cause == causes.Nothing:
			return d.normal()
		case setupCauses[a.Cause]:
			setup = append(setup, a)
		case localCauses[a.Cause]:
			local = append(local, a)
		default:
			hard = append(hard, a)
		}
	}
	for _, a := range setup {
		if a.Cause == "test-setup" {
			d.say(retest, named(a)+": measure again on a checked setup before anything else is believed")
			return len(a.Wafers) == 0
		}
	}
	below := d.belowLimit()
	switch {
	case len(hard) > 0:
		for _, a := range hard {
			d.because = append(d.because, named(a)+onWafers(a), holdReason(a.Cause))
			whole = whole || a.Cause == causes.Unknown
		}
		d.proposal = hold
	case len(setup) > 0:
		d.proposal = retest
	case len(local) > 0 && below != "" && !d.explained(local):
		d.proposal, d.because, whole = hold, []string{below, "the probable causes do not explain all of it"}, true
	default:
		d.proposal = afterScreen
	}
	for _, a := range setup {
		d.because = append(d.because, named(a)+onWafers(a)+": clean the contacts and measure its dice again")
	}
	for _, a := range local {
		d.because = append(d.because, named(a)+onWafers(a)+": local loss"+d.screenFor(a.Cause))
	}
	if below != "" && d.proposal != hold {
		d.because = append(d.because, below)
	}
	return whole
}

// unsayable is why nothing can be proposed, "" when something can.
func (d *dispose) unsayable() string {
	if d.w.unjudged != "" {
		return d.w.unjudged
	}
	if d.w.lot.Len() == 0 {
		return "there are no dice"
	}
	for _, q := range d.r.Quality {
		if q.Severity == "severe" {
			return "the data have a severe problem (" + q.Code + "): " + q.Text
		}
	}
	return ""
}

// normal is a lot of which nothing is probably wrong.
func (d *dispose) normal() (whole bool) {
	y, base := d.r.Yield, d.r.Yield.Baseline
	switch below := d.belowLimit(); {
	case !base.Valid():
		d.say(cannotSay, "nothing stands out, but no baseline says what a healthy lot yields")
	case below != "":
		d.say(hold, below, "no known cause explains it")
	default:
		d.say(release, fmt.Sprintf("nothing is wrong with %s probability", chanceWords(float64(d.r.Causes[0].Probability))),
			fmt.Sprintf("the yield of %s is at the baseline's %s", percentWords(y.Estimate), percentWords(base)))
		return false
	}
	return true
}

// belowLimit says that the lot's yield is below the statistical limit of the baseline,
// "" when it is not, or when there is none.
func (d *dispose) belowLimit() string {
	y := d.r.Yield
	limit := yieldLimit(float64(y.Baseline), d.r.Dice, nearBaseline)
	if !(float64(y.Estimate) < limit) {
		return ""
	}
	return fmt.Sprintf("the yield of %s is below the statistical limit of %s (baseline %s)", percentWords(y.Estimate), percentWords(num(limit)), percentWords(y.Baseline))
}

// yieldLimit is a baseline's yield less three sigmas of its lots or wafers, NaN
// without a baseline.
func yieldLimit(baseline float64, dice int, differ float64) float64 {
	loss := math.Max(1-baseline, 0.002)
	return baseline - 3*math.Hypot(differ*loss, math.Sqrt(loss*(1-loss)/math.Max(float64(dice), 1)))
}

// explained says whether the causes cost at least two thirds of the loss beyond the
// baseline's.
func (d *dispose) explained(list []*causes.Account) bool {
	lost := 0.0
	for _, a := range list {
		lost += a.Dice.Value
	}
	excess := float64(d.r.Yield.Baseline-d.r.Yield.Estimate) * float64(d.r.Dice)
	return !(lost < excess*2/3)
}

func holdReason(cause string) string {
	if risk, ok := riskyCauses[cause]; ok {
		return risk
	}
	if cause == causes.Unknown {
		return "what is not understood may go on"
	}
	return "the process is off: passing dice, too, are nearer to their limits than healthy ones"
}

// screenFor names the screen for a local cause, with its cost in this lot.
func (d *dispose) screenFor(cause string) string {
	want := "good die among failing ones"
	if cause == "random-defects" {
		want = "part average limits, any test"
	}
	for _, s := range d.r.Screens {
		if s.Name != want {
			continue
		}
		if s.Why != "" || !s.Loss.Valid() {
			return "; the screen '" + want + "' could not be tried here"
		}
		return fmt.Sprintf("; the screen '%s' takes %d passing dice, %s of all", want, s.Dice, percentWords(s.Loss))
	}
	return "; the screen for it ('" + want + "') needs die coordinates: mark the wafers by hand"
}

func named(a *causes.Account) string {
	return causeWords(a.Cause, a.Direction) + " is probable (" + chanceWords(a.Probability) + ")"
}

func onWafers(a *causes.Account) string {
	switch n := len(a.Wafers); {
	case n == 0:
		return ""
	case n == 1:
		return " on wafer " + a.Wafers[0]
	case n <= 6:
		return " on wafers " + strings.Join(a.Wafers, ", ")
	default:
		return fmt.Sprintf(" on %d wafers", n)
	}
}

func causeWords(cause, direction string) string {
	if direction == "" {
		return cause
	}
	return cause + " " + direction
}

func chanceWords(p float64) string {
	switch {
	case p > 0.99:
		return "over 99 %"
	case p < 0.01:
		return "under 1 %"
	}
	return fmt.Sprintf("%.0f %%", 100*p)
}

func percentWords(v reports.Number) string {
	if !v.Valid() {
		return "not known"
	}
	return fmt.Sprintf("%.1f %%", 100*float64(v))
}

// yieldIfFixed is the yield without what the probable causes cost. A die that two of
// them claim is already shared between them.
func (w *lotwork) yieldIfFixed(likely []*causes.Account) reports.Interval {
	y := w.rep.Yield
	if w.unjudged != "" || !y.Estimate.Valid() {
		return unknown(orWhy(w.unjudged, "the yield is not known"))
	}
	lost, variance, n := 0.0, 0.0, 0
	for _, a := range likely {
		if a.Cause == causes.Nothing || a.Cause == causes.Unknown {
			continue
		}
		lost += a.Dice.Value
		half := (a.Dice.Upper - a.Dice.Lower) / 2
		variance += half * half
		n++
	}
	if n == 0 {
		return unknown("no known cause is probable: there is nothing to fix")
	}
	dice := float64(w.lot.Len())
	at := func(lost float64) reports.Number { return num(min(1, float64(y.Estimate)+lost/dice)) }
	return reports.Interval{Estimate: at(lost), Lower: at(max(0, lost-math.Sqrt(variance))), Upper: at(lost + math.Sqrt(variance)),
		Method: "yield and what the probable causes cost, their intervals taken as independent"}
}

func orWhy(why, otherwise string) string {
	if why != "" {
		return why
	}
	return otherwise
}
