package page

import (
	"strings"

	"kneepoint/reports"
)

// others are the accounts below the tests, with the pictures that they have.
type others struct {
	Charts []chart
	Tables []table
}

func newOthers(r *reports.Report) (others, error) {
	o := others{Tables: otherTables(r)}
	c, err := spreadChart(r.Variance)
	if err != nil {
		return o, err
	}
	if c != nil {
		o.Charts = append(o.Charts, *c)
	}
	if c, err = screenChart(r.Screens); c != nil {
		o.Charts = append(o.Charts, *c)
	}
	return o, err
}

// otherTables are the accounts of screens, variance, groups and associations;
// those that the report does not have leave nothing behind.
func otherTables(r *reports.Report) []table {
	var out []table
	add := func(t table) {
		if len(t.Rows) > 0 {
			out = append(out, t)
		}
	}
	groups := table{Caption: "Groups of wafers with like maps", Columns: []column{{Name: "Group", Numeric: true}, {Name: "Wafers"}, {Name: "What they share"}}}
	for _, g := range r.Groups {
		groups.Rows = append(groups.Rows, []cell{counted(g.ID), {Text: strings.Join(g.Wafers, ", "), Class: "phrase"}, {Text: g.Text, Class: "wide"}})
	}
	add(groups)
	variance := table{Caption: "Where the spread of passing dice comes from", Sortable: true, Columns: []column{{Name: "Test"}, {Name: "Level"}, {Name: "Groups", Numeric: true}, {Name: "Sigma", Numeric: true}, {Name: "95 % interval", Numeric: true, Plain: true}, {Name: "Unit"}, {Name: "Share of variance", Numeric: true}, {Name: "95 % interval", Numeric: true, Plain: true}}}
	for _, v := range r.Variance {
		share := reports.Interval{Estimate: v.Share, Lower: v.ShareLower, Upper: v.ShareUpper}
		variance.Rows = append(variance.Rows, []cell{text(v.Test), text(v.Level), counted(v.Groups), number(value(v.Sigma.Estimate), v.Sigma.Estimate), text(orWhy(valueRange(v.Sigma), v.Sigma.Why)), text(v.Unit), number(percent(v.Share), v.Share), text(percentRange(share))})
	}
	add(variance)
	associations := table{Caption: "What goes with what, by more than chance", Sortable: true, Columns: []column{{Name: "Of"}, {Name: "With"}, {Name: "Difference", Numeric: true}, {Name: "95 % interval", Numeric: true, Plain: true}, {Name: "Adjusted p", Numeric: true}, {Name: "In words", Plain: true}}}
	for _, a := range r.Associations {
		effect, between := withUnit(value(a.Effect.Estimate), a.Unit), valueRange(a.Effect)
		if a.Of == "yield" {
			effect, between = signedPercent(a.Effect.Estimate), percentRange(a.Effect)
		}
		associations.Rows = append(associations.Rows, []cell{text(a.Of), text(a.With), number(effect, a.Effect.Estimate), text(between), number(pValue(a.Adjusted), a.Adjusted), {Text: a.Text, Class: "wide"}})
	}
	add(associations)
	screens := table{Caption: "Screens for passing dice that do not belong, and what each would cost", Sortable: true, Columns: []column{{Name: "Screen"}, {Name: "Test"}, {Name: "Limits", Plain: true}, {Name: "Passing dice", Numeric: true}, {Name: "Extra", Numeric: true, Help: "dice that no screen above takes"}, {Name: "Yield cost", Numeric: true}, {Name: "How", Plain: true}}}
	for _, s := range r.Screens {
		limits := ""
		if s.LowerLimit.Valid() && s.UpperLimit.Valid() {
			limits = withUnit(value(s.LowerLimit)+" to "+value(s.UpperLimit), s.Unit)
		}
		how := s.Text
		if s.Why != "" {
			how = notAvailable + ": " + s.Why
		}
		screens.Rows = append(screens.Rows, []cell{text(s.Name), text(s.Test), text(limits), counted(s.Dice), counted(s.Extra), number(percent(s.Loss), s.Loss), {Text: how, Class: "wide"}})
	}
	if len(screens.Rows) > 0 {
		screens.Note = "Screening is a proposal: which dice are scrapped is for the people who answer for the product, under site rules and customer agreements."
	}
	add(screens)
	return out
}
