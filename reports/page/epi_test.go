package page

import (
	"strings"
	"testing"

	"kneepoint/reports"
)

// TestEpiSection shows an account in which data alone give a bound of one quantity
// and nothing of the other: no number may stand where there is none.
func TestEpiSection(t *testing.T) {
	known := func(v float64) reports.Interval {
		n := reports.Number(v)
		return reports.Interval{Estimate: n, Lower: 0.9 * n, Upper: 1.1 * n}
	}
	no := reports.Interval{Estimate: reports.NaN, Lower: reports.NaN, Upper: reports.NaN}
	bound := reports.Interval{Estimate: reports.NaN, Lower: 7.5, Upper: reports.NaN}
	out := false
	x := &reports.Epi{NetThicknessUM: known(8), ThicknessUM: reports.SpecInterval{Interval: known(9), SpecLower: 8.5, SpecUpper: 9.5},
		DopingCM3: known(1.5e15), ResistivityOhmCM: reports.SpecInterval{Interval: known(3.1), SpecLower: 4, SpecUpper: reports.NaN, InSpec: &out},
		Regime: "no reach-through", DepletionRatio: known(1.3), DopingObservable: false, ThicknessShare: 0.97, DopingShare: 0.95,
		DataOnly: reports.EpiData{NetThicknessUM: reports.SightInterval{Interval: bound, Sight: "lower bound only"}, ThicknessUM: reports.SightInterval{Interval: bound, Sight: "lower bound only"},
			DopingCM3: reports.SightInterval{Interval: no, Sight: "not observable"}, ResistivityOhmCM: reports.SightInterval{Interval: no, Sight: "not observable"}},
		BetweenWafers: &reports.EpiSpread{Text: "one wafer: nothing to compare with"},
		Next:          []reports.Next{{Text: "collector resistance in the active region", InformationBits: 1.53}},
		Note:          "One wafer: nothing to compare with. The depletion layer ends inside the epi. Net thickness 8 um.",
	}
	r := &reports.Report{Epi: x, Wafers: []reports.Wafer{{ID: "7", Epi: x}}}
	e, err := newEpi(r)
	if err != nil {
		t.Fatal(err)
	}
	all := strings.Join(e.Texts, "\n") + "\n" + strings.Join(e.Notes, "\n")
	for _, f := range e.Facts {
		all += "\n" + f.Name + " " + f.Value
	}
	for _, want := range []string{"against the spec of 8.5 to 9.5 not decided by these data", "out of the spec of at least 4", "thickness seen no", "no reach-through",
		"Net thickness 8 µm.", "do not tell thickness from doping"} {
		if !strings.Contains(all, want) {
			t.Errorf("no %q in\n%s", want, all)
		}
	}
	if strings.Count(all, "nothing to compare with") != 1 {
		t.Errorf("the comparison of wafers is said once:\n%s", all)
	}
	cells := ""
	for _, table := range e.Tables {
		for _, row := range table.Rows {
			for _, c := range row {
				cells += c.Text + "|"
			}
		}
	}
	for _, want := range []string{"at least 7.50|", "not seen|", "|not decided|", "|out|", "|1.50 (1.35 to 1.65)|", "|1.5|"} {
		if !strings.Contains(cells, want) {
			t.Errorf("no %q in %s", want, cells)
		}
	}
	if strings.Contains(cells, "NaN") || strings.Contains(all, "NaN") {
		t.Error("NaN is shown")
	}
	if len(e.Charts) != 3 || strings.Contains(string(e.Charts[0].Payload), "NaN") {
		t.Errorf("%d charts", len(e.Charts))
	}
	if e, err := newEpi(&reports.Report{EpiWhy: "pnp"}); e != nil || err != nil {
		t.Error("a section without an account")
	}
}
