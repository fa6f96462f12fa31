package main

import (
	"bytes"
	"fmt"
	"io"
	"path/filepath"
	"strings"

	"github.com/spf13/cobra"
	"github.com/spf13/viper"

	"kneepoint/config"
	"kneepoint/ingest"
	"kneepoint/reports/text"
)

// lotWriters are the formats that convert writes, by the ending of the file.
var lotWriters = map[string]struct {
	name  string
	write func(io.Writer, *ingest.Lot) error
}{
	".parquet": {"Parquet", ingest.WriteParquet},
	".arrow":   {"Arrow IPC file", ingest.WriteArrow},
	".arrows":  {"Arrow IPC stream", ingest.WriteArrowStream},
}

func newConvert() *cobra.Command {
	var product, lotID, history, out string
	tuned := viper.New()
	c := &cobra.Command{
		Use:   "convert FILE... -o LOT.parquet",
		Short: "one lot to Parquet or Arrow IPC",
		Long: `convert reads one lot from any files that the other commands read and writes it to one file
that reads fast and that other programs read too. The ending of its name gives the format:
.parquet, .arrow (an IPC file) or .arrows (an IPC stream). Columns carry unit, limits and role
as metadata; retests are rows of their own; missing readings are null. A report of that file is
the same as one of the files that it was made of, but for the inputs it names.`,
		Example: "  kneepoint convert wafers/*.stdf.gz -o lot.parquet\n  kneepoint convert week.zip --lot A7 -o A7.arrow",
		Args:    needFiles,
		RunE: func(c *cobra.Command, files []string) error {
			format, ok := lotWriters[strings.ToLower(filepath.Ext(out))]
			switch {
			case out == "":
				return hinted{fmt.Errorf("no file to write is named"), "give one with -o, as in -o lot.parquet"}
			case !ok:
				return fmt.Errorf("%s: the name does not end in .parquet, .arrow or .arrows, which say what to write; choose one of them", out)
			}
			settings, err := config.LoadSettings(tuned, "")
			if err != nil {
				return err
			}
			p, err := loadProduct(product)
			if err != nil {
				return err
			}
			lot, err := readLot(c, job{files: files, lot: lotID, history: history, product: p, settings: settings})
			if err != nil {
				return err
			}
			var data bytes.Buffer
			if err := format.write(&data, lot); err != nil {
				return fmt.Errorf("%s: cannot be made: %w", out, err)
			}
			if err := writeFile(out, files, data.Bytes()); err != nil {
				return err
			}
			return said(c.OutOrStdout(), out, format.name, lot, int64(data.Len()))
		},
	}
	c.Flags().StringVarP(&out, "out", "o", "", "file to write: .parquet, .arrow or .arrows")
	c.Flags().StringVarP(&product, "product", "p", "", "product file, for columns, units and limits")
	c.Flags().StringVar(&lotID, "lot", "", "the lot to convert, when the files hold several")
	c.Flags().StringVar(&history, "wafer-history", "", "table of what the fab recorded of wafers, by lot and wafer")
	bindSettings(c, tuned)
	return c
}

// said prints what was written, and what in the data a reader should know.
func said(w io.Writer, out, format string, lot *ingest.Lot, bytes int64) error {
	var b strings.Builder
	fmt.Fprintf(&b, "%s: %s, lot %s, %s on %s, %s", text.Printable(out), format, text.Printable(lot.ID()), counted(lot.Len(), "die", "dice"),
		counted(len(lot.Wafers()), "wafer", "wafers"), counted(len(lot.Tests()), "test", "tests"))
	if n := len(lot.Earlier().Of); n > 0 {
		fmt.Fprintf(&b, ", %s", counted(n, "earlier measurement", "earlier measurements"))
	}
	fmt.Fprintf(&b, ", %s\n", size(bytes))
	for _, f := range lot.Findings() {
		if f.Severity == ingest.Severe {
			fmt.Fprintf(&b, "%-8s %s\n", f.Severity, text.Printable(f.Text))
		}
	}
	_, err := io.WriteString(w, b.String())
	return err
}
