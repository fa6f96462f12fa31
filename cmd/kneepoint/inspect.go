package main

import (
	"bytes"
	"cmp"
	"fmt"
	"io"
	"math"
	"strings"
	"text/tabwriter"

	"github.com/spf13/cobra"

	"kneepoint/config"
	"kneepoint/ingest"
	"kneepoint/reports/text"
)

func newInspect() *cobra.Command {
	var productPath, lot string
	c := &cobra.Command{
		Use:   "inspect FILE...",
		Short: "what the files hold and what looks wrong; no statistics",
		Long: `inspect shows how the files were understood: layout, lots, wafers, dice, tests with unit,
limits, readings, range, and whatever could not be understood, with how to mend it. It computes
no statistics.`,
		Example: "  kneepoint inspect lot.csv",
		Args:    needFiles,
		RunE: func(c *cobra.Command, files []string) error {
			product, err := loadProduct(productPath)
			if err != nil {
				return err
			}
			progress := newProgress(c, "reading")
			batch, err := ingest.Read(c.Context(), files, ingest.Options{Product: product, Lot: lot, Progress: progress.set})
			progress.end()
			if err != nil {
				return err
			}
			var out bytes.Buffer
			writeOverview(&out, batch.Overview())
			_, err = c.OutOrStdout().Write(out.Bytes())
			return err
		},
	}
	c.Flags().StringVarP(&productPath, "product", "p", "", "product file, for units, limits and roles")
	c.Flags().StringVar(&lot, "lot", "", "show only this lot")
	return c
}

// lotsInFull is how many lots are shown with their tests; further ones get a line.
const lotsInFull = 3

func writeOverview(w io.Writer, o ingest.Overview) {
	for _, f := range o.Files {
		writeFileOverview(w, f)
	}
	writeTally(w, o.Tally)
	writeFindings(w, "", o.Findings)
	if len(o.Lots) > 1 {
		fmt.Fprintf(w, "%d lots\n", len(o.Lots))
	}
	for i, l := range o.Lots {
		fmt.Fprintf(w, "\nlot %s: %s on %s%s\n", text.Printable(orNone(l.ID)), counted(l.Dice, "die", "dice"), counted(len(l.Wafers), "wafer", "wafers"), lotExtras(l))
		if i >= lotsInFull {
			if len(l.Findings) > 0 {
				fmt.Fprintf(w, "  %s: see them with --lot %s\n", counted(len(l.Findings), "finding", "findings"), text.Printable(l.ID))
			}
			continue
		}
		writeWafers(w, l)
		writeTests(w, l)
		writeFindings(w, "  ", l.Findings)
	}
}

func writeFileOverview(w io.Writer, f ingest.FileOverview) {
	fmt.Fprintf(w, "%s\n  %s, %s, %s\n", text.Printable(f.File), text.Printable(f.Format), size(f.Bytes), counted(int(f.Rows), "data row", "data rows"))
	if len(f.Columns) == 0 {
		return
	}
	decimal := ""
	if f.DecimalComma {
		decimal = ", decimal comma"
	}
	if f.Separator != "" { // text; other formats have no separator
		fmt.Fprintf(w, "  %s-separated%s, header in line %d\n", f.Separator, decimal, f.HeaderLine)
	}
	var roles, tests, others []string
	for _, c := range f.Columns {
		switch {
		case c.As == "test" && f.Long:
			roles = append(roles, c.Name+" = test name")
		case c.As == "test":
			tests = append(tests, c.Name)
		case c.As == "attribute", c.As == "not used":
			others = append(others, c.Name+" ("+c.As+")")
		default:
			roles = append(roles, c.Name+" = "+c.As)
		}
	}
	for _, part := range []struct {
		label string
		names []string
	}{{"columns", roles}, {"tests", tests}, {"others", others}} {
		if len(part.names) > 0 {
			fmt.Fprintf(w, "  %-8s %s\n", part.label, text.Printable(shortList(part.names, 16)))
		}
	}
}

func writeTally(w io.Writer, t ingest.Tally) {
	fmt.Fprintf(w, "\n%s read: %s with %s", counted(t.Rows, "row", "rows"), counted(t.Dice, "die", "dice"), counted(t.Measurements, "measurement", "measurements"))
	if t.Earlier > 0 {
		fmt.Fprintf(w, ", %s of retested dice among them", text.Thousands(t.Earlier))
	}
	fmt.Fprintln(w)
	for _, reason := range sortedKeys(t.Discarded) {
		fmt.Fprintf(w, "  %s not used: %s\n", counted(t.Discarded[reason], "row", "rows"), strings.ReplaceAll(reason, "-", " "))
	}
}

func lotExtras(l ingest.LotOverview) string {
	var parts []string
	if l.Product != "" {
		parts = append(parts, "product "+text.Printable(l.Product))
	}
	if l.Retested > 0 {
		parts = append(parts, counted(l.Retested, "retested die", "retested dice"))
	}
	if len(l.Sites) > 0 {
		parts = append(parts, counted(len(l.Sites), "site", "sites"))
	}
	if l.Coordinates {
		parts = append(parts, fmt.Sprintf("x %d to %d, y %d to %d", l.X[0], l.X[1], l.Y[0], l.Y[1]))
	} else {
		parts = append(parts, "no die coordinates: maps will be left out")
	}
	return ", " + strings.Join(parts, ", ")
}

func writeWafers(w io.Writer, l ingest.LotOverview) {
	fmt.Fprintf(w, "  wafers   %s\n", text.Printable(waferList(l.Wafers)))
	if len(l.HardBins) > 0 {
		var bins []string
		for _, b := range l.HardBins {
			name := ""
			if b.Name != "" {
				name = " " + b.Name
			}
			bins = append(bins, fmt.Sprintf("%d%s (%s)", b.Bin, text.Printable(name), text.Thousands(b.Dice)))
		}
		fmt.Fprintf(w, "  bins     %s\n", shortList(bins, 20))
	}
	if line := geometryLine(l.Geometry); line != "" {
		fmt.Fprintf(w, "  geometry %s\n", line)
	}
	if len(l.Attributes) > 0 {
		var parts []string
		for _, k := range sortedKeys(l.Attributes) {
			parts = append(parts, k+" "+l.Attributes[k])
		}
		fmt.Fprintf(w, "  of lot   %s\n", text.Printable(shortList(parts, 12)))
	}
	if len(l.DieColumns) > 0 {
		fmt.Fprintf(w, "  of dice  %s\n", text.Printable(shortList(l.DieColumns, 12)))
	}
}

// geometryLine is what the file says of the wafers, "" when it says nothing.
func geometryLine(g ingest.Geometry) string {
	if !g.Known() {
		return ""
	}
	var parts []string
	if g.DiameterMM > 0 {
		parts = append(parts, fmt.Sprintf("wafer %.4g mm", g.DiameterMM))
	}
	if g.DieWidthMM > 0 && g.DieHeightMM > 0 {
		parts = append(parts, fmt.Sprintf("die %.4g x %.4g mm", g.DieWidthMM, g.DieHeightMM))
	}
	if g.Notch != "" {
		parts = append(parts, "flat or notch "+g.Notch)
	}
	if g.XGrows != "" || g.YGrows != "" {
		parts = append(parts, fmt.Sprintf("x grows %s, y grows %s", cmp.Or(g.XGrows, "?"), cmp.Or(g.YGrows, "?")))
	}
	if g.CentreX != ingest.Missing && g.CentreY != ingest.Missing {
		parts = append(parts, fmt.Sprintf("centre die %d, %d", g.CentreX, g.CentreY))
	}
	return strings.Join(parts, "; ")
}

// waferList names the wafers with their dice, once for all when they have as many.
func waferList(wafers []ingest.WaferOverview) string {
	var names, counts []string
	same := true
	for _, wafer := range wafers {
		names = append(names, wafer.ID)
		counts = append(counts, fmt.Sprintf("%s (%s)", wafer.ID, text.Thousands(wafer.Dice)))
		same = same && wafer.Dice == wafers[0].Dice
	}
	if same && len(wafers) > 1 {
		return shortList(names, 30) + ": " + counted(wafers[0].Dice, "die", "dice") + " each"
	}
	return shortList(counts, 30)
}

func writeTests(w io.Writer, l ingest.LotOverview) {
	t := tabwriter.NewWriter(w, 0, 0, 2, ' ', 0)
	fmt.Fprintln(t, "  test\tmeasures\tunit\tlower\tupper\treadings\tmissing\tclamped\tfloored\tmin\tmax\tmin to max")
	for _, x := range l.Tests {
		fmt.Fprintf(t, "  %s\t%s\t%s\t%s\t%s\t%s\t%s\t%s\t%s\t%s\t%s\t%s\n", text.Printable(x.Name), orDash(x.Measures), orDash(x.Unit.Text),
			value(x.Lower, x.Unit), value(x.Upper, x.Unit), text.Thousands(x.N), orZero(x.Missing), orZero(x.AtLeast), orZero(x.AtMost),
			value(x.Min, x.Unit), value(x.Max, x.Unit), spark(x.Spark))
	}
	t.Flush()
}

func writeFindings(w io.Writer, indent string, findings []ingest.Finding) {
	for _, f := range findings {
		fmt.Fprintf(w, "%s%-8s %s\n", indent, f.Severity, text.Printable(f.Text))
		if f.Remedy != "" {
			fmt.Fprintf(w, "%s         %s\n", indent, text.Printable(f.Remedy))
		}
	}
}

// spark draws counts as a line of bars; the height is that of the root of the
// count, so that a thin tail shows beside the body.
func spark(counts []int) string {
	bars := []rune(" ▁▂▃▄▅▆▇█")
	most := 0
	for _, c := range counts {
		most = max(most, c)
	}
	var b strings.Builder
	for _, c := range counts {
		h := 0
		if c > 0 {
			h = max(1, int(math.Round(math.Sqrt(float64(c)/float64(most))*float64(len(bars)-1))))
		}
		b.WriteRune(bars[h])
	}
	return strings.TrimRight(b.String(), " ")
}

func value(si float64, u config.Unit) string {
	if math.IsNaN(si) {
		return "-"
	}
	return fmt.Sprintf("%.6g", u.FromSI(si))
}
