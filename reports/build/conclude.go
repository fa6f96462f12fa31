package build

import (
	"strings"

	"kneepoint/ingest"
	"kneepoint/reports"
)

// conclude fills in what stands at the end: the quality rows of the data, the
// proposal, and the cautions.
func (w *lotwork) conclude() {
	r := w.rep
	var rows []reports.Quality
	for _, f := range w.lot.Findings() {
		rows = append(rows, reports.Quality{Code: f.Code, Severity: string(f.Severity), Text: f.Text, Dice: f.Dice, Remedy: f.Remedy})
	}
	r.Quality = append(rows, r.Quality...)
	if r.Program.StopOnFail {
		r.Quality = append(r.Quality, reports.Quality{Code: "stop-on-fail", Severity: string(ingest.Info), Dice: r.Dice - r.Yield.Passing, Text: r.Program.Text})
	}
	r.Program.RetestRule = "the last valid measurement of a die counts; the first is kept for the first-pass yield"
	if policy := w.in.Settings.Retest; policy == "first" || policy == retestBest {
		r.Program.RetestRule = "the " + string(policy) + " measurement of a die counts, as the settings ask"
	}
	w.dispose()
	w.cautions()
}

// cautions are those that apply, the ones about a step that is proposed first.
func (w *lotwork) cautions() {
	r := w.rep
	add := func(text string) {
		for _, c := range r.Cautions {
			if c == text {
				return
			}
		}
		r.Cautions = append(r.Cautions, text)
	}
	if w.in.Settings.Retest == retestBest {
		add("Retest policy 'best' can ship marginal parts: whoever releases the lot must know it was used. With it no release is proposed.")
	}
	for _, d := range r.Disposition.Wafers {
		if d.Proposal == scrap {
			add("A scrap candidate is a proposal: keep the wafer until those authorised have decided, for it is evidence of the cause as well.")
		}
	}
	for _, p := range append([]string{r.Disposition.Proposal}, proposals(r.Disposition.Wafers)...) {
		if p == afterScreen {
			add("Screening takes dice by what they resemble, not by a failure that was seen: what passes a screen is not thereby reliable, and customer agreements may ask for more.")
		}
	}
	for _, c := range r.Causes {
		for _, n := range c.Next {
			if n.Caution != "" {
				add(n.Caution)
			}
		}
	}
	if !strings.Contains(strings.Join(r.Cautions, " "), "High-voltage") {
		add("High-voltage measurement: use the interlock and a current limit, discharge before touching, and leave it to trained people.")
	}
	add("Releasing, holding or scrapping parts is for the people authorised to do so, under the site's rules and the customer's agreements; this report is advice.")
}

func proposals(list []reports.WaferDisposition) []string {
	var out []string
	for _, d := range list {
		out = append(out, d.Proposal)
	}
	return out
}
