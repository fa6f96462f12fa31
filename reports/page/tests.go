package page

import (
	"strings"

	"kneepoint/reports"
)

// openCards is how many tests, worst first, are open from the start; the
// others are drawn when the reader opens them.
const openCards = 12

// testCard is one test's account.
type testCard struct {
	Anchor, Name string
	About        string // role and condition
	Summary      string
	Open         bool
	Groups       []factGroup
	Quantiles    *table
	Capability   *table
	Notes        []string
	Charts       []chart
}

type factGroup struct {
	Title string
	Facts []fact
}

type fact struct{ Name, Value string }

func newTestCards(tests []testPlace) ([]testCard, error) {
	cards := make([]testCard, 0, len(tests))
	for i, p := range tests {
		c, err := newTestCard(p)
		if err != nil {
			return nil, err
		}
		c.Open = i < openCards
		cards = append(cards, c)
	}
	return cards, nil
}

func newTestCard(p testPlace) (testCard, error) {
	t := p.Test
	c := testCard{Anchor: p.Anchor, Name: t.Name, Summary: cardSummary(t)}
	about := []string{}
	for _, s := range []string{t.Measures, t.Condition, limits(t)} {
		if s != "" {
			about = append(about, s)
		}
	}
	if t.LimitFrom != "" {
		about[len(about)-1] += " (" + t.LimitFrom + ")"
	}
	c.About = strings.Join(about, " · ")
	if t.Why != "" {
		c.Notes = append(c.Notes, sentence(t.Why))
	}
	c.Groups = []factGroup{countFacts(t), levelFacts(t), spreadFacts(t), lossFacts(t)}
	c.Quantiles = quantileTable(t)
	c.Capability = capabilityTable(t)
	if k := t.Capability; k != nil {
		for _, n := range k.Notes {
			c.Notes = append(c.Notes, sentence(n))
		}
		if k.Why != "" {
			c.Notes = append(c.Notes, "Capability "+notAvailable+": "+k.Why)
		}
	}
	if t.Loss.Why != "" {
		c.Notes = append(c.Notes, sentence(t.Loss.Why))
	}
	if t.Fit != nil {
		c.Notes = append(c.Notes, fitText(t.Fit))
	}
	for _, draw := range []func(testPlace) (*chart, error){drawHistogram, strip, limitCurve} {
		d, err := draw(p)
		if err != nil {
			return c, err
		}
		if d != nil {
			c.Charts = append(c.Charts, *d)
		}
	}
	return c, nil
}

func drawHistogram(p testPlace) (*chart, error) {
	if p.Histogram == nil {
		return nil, nil
	}
	c, err := histogram(p)
	if c == nil || err != nil {
		return c, err
	}
	h := p.Histogram
	var outside []string
	if h.Below > 0 {
		outside = append(outside, count(h.Below)+" below")
	}
	if h.Above > 0 {
		outside = append(outside, count(h.Above)+" above")
	}
	if len(outside) > 0 {
		c.Note += "Dice outside the bins: " + list(outside) + ". "
	}
	if h.Rule != "" {
		c.Note += "Bins: " + h.Rule + "."
	}
	return c, nil
}

func cardSummary(t *reports.Test) string {
	parts := []string{}
	if t.Loss.First > 0 {
		parts = append(parts, "loses "+percent(t.Loss.First)+" first")
	} else if t.Loss.First == 0 {
		parts = append(parts, "no die fails it first")
	}
	if t.Median.Valid() {
		parts = append(parts, "median "+withUnit(value(t.Median), t.Unit))
	}
	if t.Capability != nil && t.Capability.Cpk.Estimate.Valid() {
		parts = append(parts, "Cpk "+ratio(t.Capability.Cpk.Estimate))
	}
	return strings.Join(parts, " · ")
}

func countFacts(t *reports.Test) factGroup {
	g := factGroup{Title: "Readings"}
	add := func(name, v string) { g.Facts = append(g.Facts, fact{name, v}) }
	add("dice with a value", count(t.N))
	add("missing", count(t.Missing))
	bound := func(n int, at reports.Number) string {
		if n > 0 && at.Valid() {
			return count(n) + " (" + withUnit(exact(at), t.Unit) + ")"
		}
		return count(n)
	}
	add("known as at least", bound(t.Censored.AtLeast, t.Censored.Clamp))
	add("known as at most", bound(t.Censored.AtMost, t.Censored.Floor))
	if t.Over != "" {
		add("numbers over", t.Over)
	}
	return g
}

func levelFacts(t *reports.Test) factGroup {
	u := func(v reports.Number) string { return withUnit(value(v), t.Unit) }
	return factGroup{"Level", []fact{{"median", u(t.Median)}, {"mean", u(t.Mean)}, {"lowest", u(t.Min)}, {"highest", u(t.Max)}}}
}

func spreadFacts(t *reports.Test) factGroup {
	u := func(v reports.Number) string { return withUnit(value(v), t.Unit) }
	g := factGroup{"Spread and shape", []fact{{"MAD sigma", u(t.MADSigma)}, {"standard deviation", u(t.SD)}, {"skewness", ratio(t.Skewness)}, {"excess kurtosis", ratio(t.Kurtosis)}}}
	if r := t.Repeatability; r != nil && r.Sigma.Valid() {
		g.Facts = append(g.Facts, fact{"repeatability", u(r.Sigma) + ", " + plural(r.Dice, "die", "dice") + " read again"})
	}
	return g
}

func lossFacts(t *reports.Test) factGroup {
	g := factGroup{Title: "Loss"}
	with := func(share reports.Number, dice *int) string {
		if dice == nil || !share.Valid() {
			return percent(share)
		}
		return percent(share) + " (" + count(*dice) + ")"
	}
	g.Facts = []fact{
		{"first", with(t.Loss.First, &t.Loss.FirstDice)}, {"alone", with(t.Loss.Alone, t.Loss.AloneDice)}, {"any", with(t.Loss.Any, t.Loss.AnyDice)},
	}
	if t.Lower.Valid() {
		g.Facts = append(g.Facts, fact{"below the lower limit", count(t.LowFails)})
	}
	if t.Upper.Valid() {
		g.Facts = append(g.Facts, fact{"above the upper limit", count(t.HighFails)})
	}
	if t.Marginal.Valid() || t.MarginalMeans != "" {
		g.Facts = append(g.Facts, fact{"marginal fails", percent(t.Marginal)})
	}
	return g
}

func quantileTable(t *reports.Test) *table {
	if len(t.Quantiles) == 0 {
		return nil
	}
	q := &table{Caption: "Quantiles" + inUnit(t.Unit)}
	var row []cell
	for _, v := range t.Quantiles {
		name := percent(v.P)
		if v.P.Valid() {
			name = exact(100*v.P) + space + "%"
		}
		q.Columns = append(q.Columns, column{Name: name, Numeric: true})
		row = append(row, text(value(v.Value)))
	}
	q.Rows = [][]cell{row}
	return q
}

func inUnit(unit string) string {
	if unit == "" {
		return ""
	}
	return ", " + unit
}

func capabilityTable(t *reports.Test) *table {
	k := t.Capability
	if k == nil {
		return nil
	}
	anything := false
	q := &table{Caption: "Capability, n" + space + count(k.N), Columns: []column{{Name: "Index"}, {Name: "Estimate", Numeric: true}, {Name: "95 % interval", Numeric: true}}}
	for _, i := range []struct {
		name string
		v    reports.Interval
	}{{"Cp", k.Cp}, {"Cpk", k.Cpk}, {"Pp", k.Pp}, {"Ppk", k.Ppk}} {
		interval := ratioRange(i.v)
		if i.v.Estimate.Valid() {
			anything = true
		} else if i.v.Why != "" {
			interval = i.v.Why
		}
		q.Rows = append(q.Rows, []cell{text(i.name), text(ratio(i.v.Estimate)), text(interval)})
	}
	if p := k.ByPercentiles; p != nil && p.Why == "" {
		anything = true
		from := " by percentiles"
		q.Rows = append(q.Rows, []cell{text("Pp" + from), text(ratio(p.Pp.Estimate)), text(orWhy(ratioRange(p.Pp), p.Pp.Why))},
			[]cell{text("Ppk" + from), text(ratio(p.Ppk.Estimate)), text(orWhy(ratioRange(p.Ppk), p.Ppk.Why))},
			[]cell{text("expected outside, ppm"), text(partsPerMillion(p.PPMOutside.Estimate)), text(orWhy(partsPerMillion(p.PPMOutside.Lower)+" to "+partsPerMillion(p.PPMOutside.Upper), p.PPMOutside.Why))})
	}
	if !anything && k.Why != "" {
		return nil // the note says why
	}
	if k.Over != "" {
		q.Note = "Over " + k.Over + ". "
	}
	if p := k.ByPercentiles; p != nil && p.Source != "" {
		q.Note += "Percentiles are of " + p.Source + ", without gross outliers. "
	}
	q.Note += "Sigma within wafers " + withUnit(value(k.Within), t.Unit) + ", overall " + withUnit(value(k.Overall), t.Unit) + "."
	return q
}

// fitText says which distribution describes a test's readings, and how well.
func fitText(f *reports.Fit) string {
	var s string
	switch {
	case f.Distribution == "":
		s = "No distribution fitted"
	case f.Empirical:
		s = "No family of distributions describes the readings; nearest is " + f.Distribution
	default:
		s = "Distribution: " + f.Distribution
	}
	var parts []string
	for _, p := range f.Parameters {
		parts = append(parts, p.Name+space+value(p.Estimate)+" ("+valueRange(p.Interval)+")")
	}
	if len(parts) > 0 {
		s += " with " + list(parts)
	}
	s += "."
	if f.Reason != "" {
		s += " " + sentence(f.Reason)
	}
	if f.Misfit != "" && !strings.Contains(f.Reason, f.Misfit) {
		s += " " + sentence(f.Misfit)
	}
	return s
}
