package page

import (
	"cmp"
	"fmt"
	"slices"
	"strings"

	"kneepoint/reports"
)

// head says first what matters most.
type head struct {
	Lot, Product string
	Figures      []figure
	Alarm        *alarm
	Findings     []finding
}

// figure is one key number.
type figure struct {
	Name, Value, Note string
}

// alarm is the line on data that must not be trusted blindly.
type alarm struct {
	Severity string
	Texts    []string
	More     string
}

// finding is one plain sentence or two under a short name.
type finding struct {
	Name, Text string
	Link       string
	LinkText   string
	List       []string
}

func newHead(r *reports.Report, tests []testPlace) head {
	h := head{Lot: r.Lot, Product: r.Product}
	if h.Lot == "" {
		h.Lot = "(no lot name)"
	}
	h.Figures = figures(r)
	h.Alarm = newAlarm(r.Quality)
	h.Findings = append(h.Findings, finding{Name: "Yield", Text: yieldText(r)})
	h.Findings = append(h.Findings, lossFinding(r, tests))
	if len(r.Wafers) > 0 {
		h.Findings = append(h.Findings, finding{Name: "Wafers", Text: waferText(r.Wafers), Link: "#wafers", LinkText: "maps and table"})
	}
	if s := zoneText(r.Zones); s != "" {
		h.Findings = append(h.Findings, finding{Name: "Where", Text: s, Link: "#zones", LinkText: "zones"})
	}
	if len(r.Causes) > 0 {
		h.Findings = append(h.Findings, causeFinding(r.Causes))
	}
	if d := r.Disposition; d.Proposal != "" {
		h.Findings = append(h.Findings, finding{Name: "Proposal", Text: proposalText(d), List: sentences(d.Because)})
	}
	return h
}

func figures(r *reports.Report) []figure {
	y := r.Yield
	yield := figure{Name: "Yield", Value: percent(y.Estimate), Note: orWhy(percentRange(y.Interval), y.Why)}
	if y.Estimate.Valid() {
		yield.Note += ", 95" + space + "% interval"
	}
	out := []figure{yield}
	if y.Baseline.Valid() {
		out = append(out, figure{Name: "Baseline", Value: percent(y.Baseline), Note: against(y)})
	}
	first := figure{Name: "First pass", Value: percent(y.FirstPass)}
	if y.FirstPass.Valid() {
		first.Note = "before any retest"
	}
	out = append(out, first,
		figure{Name: "Tested", Value: count(r.Dice), Note: "dice on " + plural(len(r.Wafers), "wafer", "wafers")})
	if y.SystematicLoss.Valid() || y.RandomLoss.Valid() {
		out = append(out, figure{Name: "Systematic loss", Value: percent(y.SystematicLoss), Note: "and random loss " + percent(y.RandomLoss)})
	} else if y.LossWhy != "" {
		out = append(out, figure{Name: "Systematic loss", Value: notAvailable, Note: y.LossWhy})
	}
	return out
}

// against sets the lot's yield against the baseline's.
func against(y reports.LotYield) string {
	if !y.Estimate.Valid() || !y.Baseline.Valid() {
		return ""
	}
	d := float64(y.Estimate - y.Baseline)
	switch {
	case d < 0:
		return "this lot is " + points(d) + " lower"
	case d > 0:
		return "this lot is " + points(d) + " higher"
	}
	return "this lot yields the same"
}

func newAlarm(quality []reports.Quality) *alarm {
	var severe, warnings []string
	for _, q := range quality {
		switch q.Severity {
		case "severe":
			severe = append(severe, sentence(q.Text))
		case "warning":
			warnings = append(warnings, sentence(q.Text))
		}
	}
	if len(severe)+len(warnings) == 0 {
		return nil
	}
	a := &alarm{Severity: "warning"}
	texts := warnings
	if len(severe) > 0 {
		a.Severity, texts = "severe", severe
	}
	a.Texts = texts[:min(3, len(texts))]
	if rest := len(severe) + len(warnings) - len(a.Texts); rest > 0 {
		a.More = fmt.Sprintf("%d more in the data-quality table", rest)
	}
	return a
}

func yieldText(r *reports.Report) string {
	y := r.Yield
	if !y.Estimate.Valid() {
		return sentence("The yield is " + notAvailable + reason(y.Why))
	}
	s := fmt.Sprintf("%s of %s tested %s pass: %s", count(y.Passing), count(r.Dice), noun(r.Dice, "die", "dice"), percent(y.Estimate))
	if y.Lower.Valid() && y.Upper.Valid() {
		s += ", with a 95" + space + "% interval for the process of " + percentRange(y.Interval)
	} else if y.Why != "" {
		s += "; its interval is " + notAvailable + ": " + y.Why
	}
	s = sentence(s)
	if y.Baseline.Valid() {
		s += " The baseline (" + r.Baseline.Source + ") is " + percent(y.Baseline) + ": " + against(y)
		if y.Lower.Valid() && y.Upper.Valid() {
			if y.Baseline > y.Upper || y.Baseline < y.Lower {
				s += ", and the interval excludes the baseline"
			} else {
				s += ", and the interval includes the baseline"
			}
		}
		s += "."
	}
	if y.FirstPass.Valid() {
		s += " On first pass " + percent(y.FirstPass) + " passed."
	}
	return s
}

func reason(why string) string {
	if why == "" {
		return ""
	}
	return ": " + why
}

func noun(n int, one, many string) string {
	if n == 1 {
		return one
	}
	return many
}

func lossFinding(r *reports.Report, tests []testPlace) finding {
	f := finding{Name: "Lost most"}
	if len(tests)+len(r.Bins) > 0 {
		f.Link, f.LinkText = "#losses", "all tests and bins"
	}
	var lossy []testPlace
	for _, t := range tests {
		if t.Loss.FirstDice > 0 {
			lossy = append(lossy, t)
		}
	}
	if len(lossy) == 0 {
		f.Text = "No test is known to lose dice."
		if len(tests) == 0 {
			f.Text = "There are no parametric tests in the data."
		}
		return f
	}
	t := lossy[0]
	f.Text = t.Name + " loses most: " + plural(t.Loss.FirstDice, "die fails", "dice fail") + " it first, " + percent(t.Loss.First) + " of the tested dice"
	if t.LowFails+t.HighFails > 0 {
		switch {
		case t.HighFails == 0:
			f.Text += ", all below the lower limit"
		case t.LowFails == 0:
			f.Text += ", all above the upper limit"
		}
	}
	f.Text += "."
	if t.Marginal.Valid() {
		f.Text += " " + percent(t.Marginal) + " of its fails are marginal."
	}
	var next []string
	for _, t := range lossy[1:min(4, len(lossy))] {
		next = append(next, t.Name+" ("+percent(t.Loss.First)+", "+plural(t.Loss.FirstDice, "die", "dice")+")")
	}
	if len(next) > 0 {
		f.Text += " Next: " + list(next) + "."
	}
	if r.Program.StopOnFail {
		f.Text += " The program stops at the first fail, so later tests of a failing die are unknown."
	}
	return f
}

// waferText says which wafers stand out, as a person would.
func waferText(ws []reports.Wafer) string {
	var low, high, rest []reports.Wafer
	for _, w := range ws {
		switch w.Stands {
		case "low":
			low = append(low, w)
		case "high":
			high = append(high, w)
		default:
			rest = append(rest, w)
		}
	}
	if len(ws) == 1 {
		return "There is one wafer only, so nothing to compare it with."
	}
	if len(low)+len(high) == 0 {
		s := "No wafer stands out from the rest of the lot"
		if r := yieldSpan(ws); r != "" {
			s += "; all yield " + r
		}
		return s + "."
	}
	var parts []string
	if len(low) > 0 {
		parts = append(parts, standOut(low, "low"))
	}
	if len(high) > 0 {
		parts = append(parts, standOut(high, "high"))
	}
	if r := yieldSpan(rest); r != "" && len(rest) == 1 {
		parts = append(parts, "The other wafer yields "+r+".")
	} else if r != "" {
		parts = append(parts, fmt.Sprintf("The other %d yield %s.", len(rest), r))
	}
	return strings.Join(parts, " ")
}

func standOut(ws []reports.Wafer, how string) string {
	sorted := slices.Clone(ws)
	slices.SortStableFunc(sorted, func(a, b reports.Wafer) int { return cmp.Compare(a.Yield.Estimate, b.Yield.Estimate) })
	if how == "high" {
		slices.Reverse(sorted)
	}
	const named = 8
	var names []string
	for _, w := range sorted[:min(named, len(sorted))] {
		names = append(names, w.ID+" ("+percent(w.Yield.Estimate)+")")
	}
	if rest := len(sorted) - len(names); rest > 0 {
		names = append(names, fmt.Sprintf("%d more", rest))
	}
	return noun(len(ws), "Wafer ", "Wafers ") + list(names) + noun(len(ws), " stands", " stand") + " out " + how + "."
}

// yieldSpan is the range of wafer yields, "88.1 to 93.0 %".
func yieldSpan(ws []reports.Wafer) string {
	i := reports.Interval{Estimate: reports.NaN, Lower: reports.NaN, Upper: reports.NaN}
	for _, w := range ws {
		v := w.Yield.Estimate
		if !v.Valid() {
			continue
		}
		if !i.Lower.Valid() || v < i.Lower {
			i.Lower = v
		}
		if !i.Upper.Valid() || v > i.Upper {
			i.Upper = v
		}
	}
	if !i.Lower.Valid() {
		return ""
	}
	if i.Lower == i.Upper {
		return percent(i.Lower)
	}
	return percentRange(i)
}

// zoneText names the lowest and the highest zone of each kind.
func zoneText(zones []reports.Zone) string {
	var parts []string
	for _, kind := range []string{"ring", "sector"} {
		var list []reports.Zone
		for _, z := range zones {
			if z.Kind == kind && z.Yield.Estimate.Valid() {
				list = append(list, z)
			}
		}
		if len(list) < 2 {
			continue
		}
		byYield := func(a, b reports.Zone) int { return cmp.Compare(a.Yield.Estimate, b.Yield.Estimate) }
		low, high := slices.MinFunc(list, byYield), slices.MaxFunc(list, byYield)
		parts = append(parts, fmt.Sprintf("Of the %ss, %s is lowest with %s and %s highest with %s.", kind, low.Name, percent(low.Yield.Estimate), high.Name, percent(high.Yield.Estimate)))
	}
	return strings.Join(parts, " ")
}

func causeFinding(causes []reports.Cause) finding {
	f := finding{Name: "Likely cause", Link: "#causes", LinkText: "evidence"}
	var likely []string
	for _, c := range causes[:min(3, len(causes))] {
		if c.Probability.Valid() {
			likely = append(likely, causeName(c)+" ("+chance(c.Probability)+")")
		}
	}
	if len(likely) == 0 {
		f.Name = "Cause"
		f.Text = sentence("probabilities are " + notAvailable + reason(causes[0].Why))
		return f
	}
	f.Text = sentence(list(likely))
	return f
}

func causeName(c reports.Cause) string {
	if c.Direction != "" {
		return c.Cause + ", " + c.Direction
	}
	return c.Cause
}

func proposalText(d reports.Disposition) string {
	s := sentence(words(d.Proposal)) + " This is advice, never a release: the site's rules and the people authorised decide."
	if d.YieldIfFixed.Estimate.Valid() {
		s += " Without the cause the lot would yield " + percent(d.YieldIfFixed.Estimate) + " (" + percentRange(d.YieldIfFixed) + ")."
	} else if d.YieldIfFixed.Why != "" {
		s += " " + sentence("Yield without the cause: "+notAvailable+reason(d.YieldIfFixed.Why))
	}
	return s
}

// words writes a name such as release-after-screen as a person says it.
func words(name string) string { return strings.ReplaceAll(name, "-", " ") }

func sentences(list []string) []string {
	out := make([]string, 0, len(list))
	for _, s := range list {
		out = append(out, sentence(s))
	}
	return out
}
