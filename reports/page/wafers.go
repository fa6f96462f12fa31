package page

import (
	"maps"
	"slices"
	"strings"

	"kneepoint/reports"
)

// wafers is the section with every wafer's account.
type wafers struct {
	Maps  gallery
	Chart *chart
	Table *table
}

func newWafers(r *reports.Report, a *atlas) (wafers, error) {
	w := wafers{Maps: newGallery(r, a)}
	var err error
	if len(r.Wafers) == 0 {
		return w, nil
	}
	low := scaleFrom(waferYields(r.Wafers))
	w.Table = waferTable(r, low)
	w.Chart, err = waferChart(r, low)
	return w, err
}

func waferYields(ws []reports.Wafer) []reports.Interval {
	yields := make([]reports.Interval, len(ws))
	for i := range ws {
		yields[i] = ws[i].Yield
	}
	return yields
}

func waferTable(r *reports.Report, low float64) *table {
	t := &table{Caption: "Wafers", Sortable: true, Columns: []column{
		{Name: "Wafer"}, {Name: "Yield", Numeric: true}, {Name: "95" + space + "% interval", Numeric: true, Plain: true},
		{Name: fixed(100*low, 0) + " to 100" + space + "%", Plain: true, Help: "yield with its interval, drawn"},
		{Name: "Main losses", Plain: true, Help: "tests that lose most, first loss"},
		{Name: "Dice", Numeric: true}, {Name: "First pass", Numeric: true}, {Name: "Retested", Numeric: true},
	}}
	has := waferExtras(r)
	if has.signatures {
		t.Columns = append(t.Columns, column{Name: "Patterns", Plain: true, Help: "patterns of the fail map with the loss to each, those that cost most first"})
	}
	if has.group {
		t.Columns = append(t.Columns, column{Name: "Group", Numeric: true})
	}
	if has.proposals != nil {
		t.Columns = append(t.Columns, column{Name: "Proposal"})
	}
	for _, a := range has.attributes {
		t.Columns = append(t.Columns, column{Name: a})
	}
	for i := range r.Wafers {
		t.Rows = append(t.Rows, waferRow(&r.Wafers[i], low, has))
	}
	return t
}

func waferRow(w *reports.Wafer, low float64, has extras) []cell {
	yield := number(percent(w.Yield.Estimate), w.Yield.Estimate)
	if w.Stands != "" {
		yield.Text, yield.Class = w.Stands+space+space+yield.Text, w.Stands
	}
	row := []cell{
		text(w.ID), yield, text(orWhy(percentRange(w.Yield), w.Yield.Why)), {Bar: intervalBar(w.Yield, low, w.Stands == "low")},
		{Text: shares(w.MainLoss), Class: "wide losses"},
		counted(w.Dice), number(percent(w.FirstPass), w.FirstPass), counted(w.Retested),
	}
	if has.signatures {
		row = append(row, cell{Text: patternsWithLoss(w.Signatures), Class: "phrase"})
	}
	if has.group {
		c := cell{}
		if w.Group != 0 {
			c = counted(w.Group)
		}
		row = append(row, c)
	}
	if has.proposals != nil {
		row = append(row, text(has.proposals[w.ID]))
	}
	for _, a := range has.attributes {
		row = append(row, text(w.Attributes[a]))
	}
	return row
}

// extras are the columns that only some reports have.
type extras struct {
	signatures, group bool
	attributes        []string
	proposals         map[string]string
}

func waferExtras(r *reports.Report) extras {
	var e extras
	names := map[string]bool{}
	for i := range r.Wafers {
		w := &r.Wafers[i]
		e.signatures = e.signatures || len(w.Signatures) > 0
		e.group = e.group || w.Group != 0
		for a := range w.Attributes {
			names[a] = true
		}
	}
	e.attributes = slices.Sorted(maps.Keys(names))
	if len(r.Disposition.Wafers) > 0 {
		e.proposals = map[string]string{}
		for _, d := range r.Disposition.Wafers {
			e.proposals[d.ID] = words(d.Proposal)
		}
	}
	return e
}

func shares(list []reports.Share) string {
	var parts []string
	for _, s := range list {
		parts = append(parts, s.Name+space+percent(s.Share))
	}
	return strings.Join(parts, ", ")
}

// waferChart draws each wafer's yield with its interval, against the lot's and
// the baseline's.
func waferChart(r *reports.Report, low float64) (*chart, error) {
	p := yieldChart{
		ID: "chart-wafers", Label: "Yield by wafer with 95 % intervals. The numbers are in the table of wafers.",
		Axis: "wafer", From: low, Lot: r.Yield.Estimate, Baseline: r.Yield.Baseline,
		Columns: []string{"Wafer", "Yield", "95 % interval", "Dice", "Main losses"},
	}
	for i := range r.Wafers {
		w := &r.Wafers[i]
		p.Names, p.Yields, p.StandsLow = append(p.Names, w.ID), append(p.Yields, w.Yield), append(p.StandsLow, w.Stands == "low")
		p.Rows = append(p.Rows, []string{w.ID, percent(w.Yield.Estimate), percentRange(w.Yield), count(w.Dice), shares(w.MainLoss)})
	}
	return p.draw()
}
