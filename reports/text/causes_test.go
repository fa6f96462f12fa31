package text

import (
	"fmt"
	"strings"
	"testing"

	"kneepoint/reports"
)

// TestCauseLines: the summary says what is likely, what to measure, what is proposed and
// what the lot would yield, in lines of bounded length and number.
func TestCauseLines(t *testing.T) {
	r := &reports.Report{Lot: "L", Causes: []reports.Cause{
		{Cause: "epi-thickness", Direction: "low", Probability: 0.93, Loss: reports.Interval{Estimate: 0.08, Lower: 0.07, Upper: 0.09}, Wafers: []string{"03", "04"},
			Alike: []string{"epi-doping"}, Next: []reports.Next{{Text: "measure Cob", InformationBits: 0.41}}},
		{Cause: "edge-dice", Probability: 0.06},
		{Cause: "lifetime", Probability: 0.049},
	}, Disposition: reports.Disposition{Proposal: "hold", Because: []string{"a", "b", "c"}, YieldIfFixed: reports.Interval{Estimate: 0.95, Lower: 0.94, Upper: 0.96}}}
	for i := range 60 {
		r.Quality = append(r.Quality, reports.Quality{Severity: "warning", Text: fmt.Sprint("row ", i)})
		r.Tests = append(r.Tests, reports.Test{Name: fmt.Sprint("T", i), Loss: reports.Loss{FirstDice: 60 - i}})
	}
	var b strings.Builder
	if err := Summary(&b, r, []string{"a.html", "a.json"}, false); err != nil {
		t.Fatal(err)
	}
	out := b.String()
	for _, want := range []string{
		"cause     epi-thickness low 93 %: cost 8.0 % (7.0 % to 9.0 %), wafers 03 04; not told apart from ep…",
		"cause     edge-dice 6 %", "next      0.41 bits: measure Cob", "proposal  hold: a\n          b\n",
		"without the probable causes the yield would be 95.0 % (94.0 % to 96.0 %)",
	} {
		if !strings.Contains(out, want) {
			t.Errorf("no line %q in\n%s", want, out)
		}
	}
	if strings.Contains(out, "lifetime") {
		t.Error("an improbable cause takes a line")
	}
	lines := strings.Split(strings.TrimSuffix(out, "\n"), "\n")
	if len(lines) > MaxLines {
		t.Errorf("%d lines", len(lines))
	}
	for _, l := range lines {
		if len([]rune(l)) > Width {
			t.Errorf("%d wide: %s", len([]rune(l)), l)
		}
	}
}
