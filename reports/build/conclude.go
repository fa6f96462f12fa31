package build

import (
	"kneepoint/ingest"
	"kneepoint/reports"
)

// conclude fills in what stands at the end: the quality rows of the data, and
// the parts that this version does not compute, each with its reason.
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
	if policy := w.in.Settings.Retest; policy == "first" || policy == "best" {
		r.Program.RetestRule = "the " + string(policy) + " measurement of a die counts, as the settings ask"
		if policy == "best" {
			r.Cautions = append(r.Cautions, "Retest policy 'best' can ship marginal parts: whoever releases the lot must know it was used.")
		}
	}
	const noCauses = "this version does not weigh physical causes yet"
	none := reports.Interval{Estimate: reports.NaN, Lower: reports.NaN, Upper: reports.NaN, Why: noCauses}
	r.Causes = []reports.Cause{{Cause: "unexplained", Probability: reports.NaN, Why: noCauses, Loss: none}}
	r.Disposition = reports.Disposition{Proposal: "cannot-say", YieldIfFixed: none,
		Because: []string{noCauses + ": read the losses and maps, and decide by the site's rules"}}
	r.Cautions = append(r.Cautions,
		"Releasing, holding or scrapping parts is for the people authorised to do so, under the site's rules and the customer's agreements; this report is advice.",
		"Retesting at high voltage: use the interlock and a current limit, discharge before touching, and leave it to trained people.")
}
