package page

import (
	"strings"

	"kneepoint/reports"
)

// record is the last section: what the report stands on.
type record struct {
	Quality  *table
	Inputs   *table
	Facts    []fact
	Cautions []string
}

func newRecord(r *reports.Report) record {
	rec := record{Cautions: sentences(r.Cautions)}
	if len(r.Quality) > 0 {
		rec.Quality = &table{Caption: "Data quality", Sortable: true, Columns: []column{
			{Name: "Severity"}, {Name: "What", Plain: true}, {Name: "Dice", Numeric: true}, {Name: "Remedy", Plain: true}, {Name: "Code"}}}
		order := map[string]string{"severe": "0", "warning": "1", "info": "2"}
		for _, wanted := range []string{"severe", "warning", "info", ""} {
			for _, q := range r.Quality {
				key, known := order[q.Severity]
				if q.Severity != wanted && (wanted != "" || known) {
					continue
				}
				rec.Quality.Rows = append(rec.Quality.Rows, []cell{{Text: q.Severity, Sort: key, Class: severityClass(q.Severity)}, {Text: sentence(q.Text), Class: "wide"}, counted(q.Dice), {Text: sentence(q.Remedy), Class: "wide"}, text(q.Code)})
			}
		}
	}
	if len(r.Inputs) > 0 || r.ProductFile != nil {
		rec.Inputs = &table{Caption: "Inputs", Columns: []column{{Name: "File"}, {Name: "Format"}, {Name: "Size", Numeric: true}, {Name: "Rows", Numeric: true}, {Name: "SHA-256"}}}
		for i := range r.Inputs {
			rec.Inputs.Rows = append(rec.Inputs.Rows, inputRow(&r.Inputs[i], counted(int(r.Inputs[i].Rows))))
		}
		if r.ProductFile != nil {
			rec.Inputs.Rows = append(rec.Inputs.Rows, inputRow(r.ProductFile, cell{}))
		}
	}
	rec.Facts = recordFacts(r)
	return rec
}

func severityClass(s string) string {
	switch s {
	case "severe", "warning", "info":
		return s
	}
	return ""
}

func inputRow(i *reports.Input, rows cell) []cell {
	return []cell{text(i.File), text(i.Format), text(size(i.Bytes)), rows, {Text: i.SHA256, Class: "hash"}}
}

func recordFacts(r *reports.Report) []fact {
	var out []fact
	add := func(name, v string) {
		if v != "" {
			out = append(out, fact{name, v})
		}
	}
	product := r.Product
	if r.ProductFile == nil {
		product += " (triaged without a product file)"
	}
	add("Product", strings.TrimSpace(product))
	add("Baseline", baselineText(r.Baseline))
	add("Pass rule", r.Program.PassRule)
	add("Retest rule", r.Program.RetestRule)
	program := "tests on after a fail"
	if r.Program.StopOnFail {
		program = "stops at the first fail"
	}
	if r.Program.Text != "" {
		program += ": " + r.Program.Text
	}
	add("Test program", program)
	if r.Epi == nil && r.EpiWhy != "" {
		add("Epi layer", notAvailable+": "+r.EpiWhy)
	}
	if r.Pictures.Why != "" && len(r.Pictures.Wafers) == 0 {
		add("Wafer maps", notAvailable+": "+r.Pictures.Why)
	}
	add("Geometry", geometryText(r.Geometry))
	c := r.Yield.Counting
	if c.Estimate.Valid() {
		add("Yield, counting only", percent(c.Estimate)+" ("+percentRange(c)+"), "+c.Method+"; dice taken as independent")
	}
	if r.Yield.Method != "" {
		add("Yield interval", r.Yield.Method)
	}
	add("Written by", r.Tool.Name+" "+r.Tool.Version)
	return out
}

func baselineText(s reports.Source) string {
	if s.Source == "" || s.Source == "none" {
		return "none"
	}
	text := s.Source
	if s.ID != "" {
		text += " " + s.ID
	}
	if s.SHA256 != "" {
		text += ", SHA-256 " + s.SHA256
	}
	return text
}

func geometryText(g reports.Geometry) string {
	mm := func(v reports.Number) string { return withUnit(exact(v), "mm") }
	if !g.DiameterMM.Valid() && !g.DieWidthMM.Valid() && !g.CentreX.Valid() {
		return orWhy(notAvailable, g.Why)
	}
	s := "wafer " + mm(g.DiameterMM) + ", die " + exact(g.DieWidthMM) + " by " + mm(g.DieHeightMM) +
		", edge exclusion " + mm(g.EdgeExclusionMM) + ", centre at x" + space + value(g.CentreX) + ", y" + space + value(g.CentreY)
	if g.Source != "" {
		s += "; from: " + g.Source
	}
	if g.Why != "" {
		s += ". " + sentence(g.Why)
	}
	return s
}
