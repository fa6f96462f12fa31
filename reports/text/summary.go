// Package text writes the terminal summary of a Report: at most MaxLines lines
// that say, in this order, what the lot is, how it yields, what lost most, which
// wafers stand out, what the epi layer is, what is wrong with the data, the likely
// cause, what to measure next, what is proposed, and where the full report is.
package text

import (
	"fmt"
	"io"
	"math"
	"sort"
	"strings"

	"kneepoint/reports"
)

// MaxLines is the most lines that a summary takes.
const MaxLines = 25

// Width is the longest line of a summary.
const Width = 100

const (
	testsShown   = 6
	qualityShown = 3
)

// Summary writes the summary of r; files are the paths of the full report. bold
// marks the two lines that matter most, for a terminal that can show it.
func Summary(w io.Writer, r *reports.Report, files []string, bold bool) error {
	s := &sheet{bold: bold}
	s.add(true, "%s", heading(r))
	s.add(true, "%s", yieldLine(r))
	s.losses(r)
	s.add(false, "%s", wafersLine(r))
	if line := clusterLine(r); line != "" {
		s.add(false, "%s", line)
	}
	if line := epiLine(r); line != "" {
		s.add(false, "%s", line)
	}
	s.quality(r)
	s.causes(r)
	s.proposal(r)
	for i, f := range files {
		label := "report   "
		if i > 0 {
			label = "         "
		}
		s.lines = append(s.lines, label+" "+f) // never cut: a path must stay whole
	}
	_, err := io.WriteString(w, strings.Join(s.lines, "\n")+"\n")
	return err
}

type sheet struct {
	lines []string
	bold  bool
}

func (s *sheet) add(strong bool, format string, args ...any) {
	line := []rune(Printable(fmt.Sprintf(format, args...)))
	if len(line) > Width {
		line = append(line[:Width-1], '…')
	}
	text := string(line)
	if strong && s.bold {
		text = "\x1b[1m" + text + "\x1b[0m"
	}
	s.lines = append(s.lines, text)
}

func heading(r *reports.Report) string {
	product := ""
	if r.Product != "" {
		product = ", product " + r.Product
	}
	return fmt.Sprintf("lot %s%s: %s, %s", name(r.Lot), product, plural(len(r.Wafers), "wafer"), plural(r.Dice, "die"))
}

func yieldLine(r *reports.Report) string {
	y := r.Yield
	if !y.Estimate.Valid() {
		return "yield not known: " + y.Why
	}
	line := fmt.Sprintf("yield %s", Percent(y.Estimate))
	if y.Lower.Valid() && y.Upper.Valid() {
		line += fmt.Sprintf(" (95 %%: %s to %s)", Percent(y.Lower), Percent(y.Upper))
	}
	if y.FirstPass.Valid() && y.FirstPass != y.Estimate {
		line += fmt.Sprintf(", first pass %s", Percent(y.FirstPass))
	}
	if y.Baseline.Valid() {
		d := 100 * float64(y.Estimate-y.Baseline)
		word := "above"
		if d < 0 {
			word = "below"
		}
		line += fmt.Sprintf("; %.1f points %s the baseline of %s", math.Abs(d), word, Percent(y.Baseline))
	}
	return line
}

func (s *sheet) losses(r *reports.Report) {
	tests := append([]reports.Test(nil), r.Tests...)
	sort.SliceStable(tests, func(a, b int) bool { return tests[a].Loss.FirstDice > tests[b].Loss.FirstDice })
	var rows []reports.Test
	for _, t := range tests {
		if t.Loss.FirstDice > 0 && len(rows) < testsShown {
			rows = append(rows, t)
		}
	}
	if len(rows) == 0 {
		s.noTestLosses(r)
		return
	}
	wide := 14
	for _, t := range rows {
		wide = max(wide, len(t.Name)+2)
	}
	wide = min(wide, 40)
	s.add(false, "%-*s %8s %8s %8s   %s", wide, "lost by test", "first", "alone", "any", "median, limits")
	for _, t := range rows {
		s.add(false, "  %-*.*s %8s %8s %8s   %s", wide-2, wide-2, t.Name, Percent(t.Loss.First), Percent(t.Loss.Alone), Percent(t.Loss.Any), level(t))
	}
	if r.Program.StopOnFail {
		s.add(false, "  the program stops at the first fail: alone and any cannot be known")
	}
}

// noTestLosses says what is known of the loss where no test is charged with any.
func (s *sheet) noTestLosses(r *reports.Report) {
	lost := r.Dice - r.Yield.Passing
	if !r.Yield.Estimate.Valid() {
		return
	}
	if lost == 0 {
		s.add(false, "no die is lost")
		return
	}
	s.add(false, "%s lost, none of them by a reading outside a known limit", plural(lost, "die"))
	var bins []string
	for _, b := range r.Bins {
		if !b.Pass && b.Kind == "hard" && len(bins) < testsShown {
			bins = append(bins, strings.TrimSpace(fmt.Sprintf("%d %s", b.Bin, b.Name))+" "+Percent(b.Share))
		}
	}
	if len(bins) > 0 {
		s.add(false, "lost by bin: %s", strings.Join(bins, ", "))
	}
}

func level(t reports.Test) string {
	unit := ""
	if t.Unit != "" {
		unit = " " + t.Unit
	}
	out := "no reading"
	if t.Median.Valid() {
		out = fmt.Sprintf("%.4g%s", float64(t.Median), unit)
	}
	if t.Lower.Valid() {
		out += fmt.Sprintf(", at least %g", float64(t.Lower))
	}
	if t.Upper.Valid() {
		out += fmt.Sprintf(", at most %g", float64(t.Upper))
	}
	return out
}

func wafersLine(r *reports.Report) string {
	var low []reports.Wafer
	for _, w := range r.Wafers {
		if w.Stands == "low" {
			low = append(low, w)
		}
	}
	if len(low) == 0 {
		if len(r.Wafers) < 2 {
			return "wafers    one only"
		}
		return "wafers    none stands out from the rest of the lot"
	}
	sort.SliceStable(low, func(a, b int) bool { return low[a].Rank < low[b].Rank })
	var parts []string
	for _, w := range low[:min(len(low), 6)] {
		parts = append(parts, fmt.Sprintf("%s (%s)", name(w.ID), Percent(w.Yield.Estimate)))
	}
	more := ""
	if len(low) > 6 {
		more = fmt.Sprintf(" and %d more", len(low)-6)
	}
	return "wafers    low against the rest: " + strings.Join(parts, ", ") + more
}

// clusterLine counts the wafers whose fails lie together by more than chance, by
// Bonferroni over the wafers.
func clusterLine(r *reports.Report) string {
	tested, clustered := 0, 0
	for _, w := range r.Wafers {
		if jc := w.Spatial.JoinCount; jc != nil && jc.PValue.Valid() {
			tested++
		}
	}
	for _, w := range r.Wafers {
		if jc := w.Spatial.JoinCount; jc != nil && jc.PValue.Valid() && float64(jc.PValue)*float64(tested) < 0.05 {
			clustered++
		}
	}
	if tested == 0 {
		if r.Geometry.Source == "" && r.Geometry.Why != "" {
			return "maps      " + r.Geometry.Why
		}
		return ""
	}
	return fmt.Sprintf("maps      fails lie together by more than chance on %d of %s (join count)", clustered, plural(tested, "wafer"))
}

func (s *sheet) quality(r *reports.Report) {
	var rows []reports.Quality
	for _, severity := range []string{"severe", "warning"} {
		for _, q := range r.Quality {
			if q.Severity == severity {
				rows = append(rows, q)
			}
		}
	}
	if len(rows) == 0 {
		s.add(false, "data      nothing that needs attention")
		return
	}
	for _, q := range rows[:min(len(rows), qualityShown)] {
		s.add(false, "data      %s: %s", q.Severity, q.Text)
	}
	if n := len(rows) - qualityShown; n > 0 {
		s.add(false, "data      and %d more: see the report", n)
	}
}

// Percent shows a share: 87.3 %, or n/a where it is not known.
func Percent(n reports.Number) string {
	if !n.Valid() {
		return "n/a"
	}
	v := 100 * float64(n)
	if v != 0 && math.Abs(v) < 0.005 {
		return "< 0.01 %"
	}
	if v != 0 && math.Abs(v) < 0.05 {
		return fmt.Sprintf("%.2g %%", v)
	}
	return fmt.Sprintf("%.1f %%", v)
}

func plural(n int, noun string) string {
	if n != 1 {
		noun += "s"
		if noun == "dies" {
			noun = "dice"
		}
	}
	return Thousands(n) + " " + noun
}

// Thousands writes a number with commas between its thousands.
func Thousands(n int) string {
	s := fmt.Sprint(n)
	for i := len(s) - 3; i > 0; i -= 3 {
		s = s[:i] + "," + s[i:]
	}
	return s
}

// name shows an identifier that may be empty.
func name(s string) string {
	if s == "" {
		return "without a name"
	}
	return s
}

// Printable replaces control characters, which data files may carry and a
// terminal would obey.
func Printable(s string) string {
	return strings.Map(func(r rune) rune {
		if r < ' ' || r == 0x7f || (r >= 0x80 && r < 0xa0) {
			return '?'
		}
		return r
	}, s)
}
