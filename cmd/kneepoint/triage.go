package main

import (
	"fmt"
	"slices"
	"strings"

	"github.com/spf13/cobra"
	"github.com/spf13/viper"

	"kneepoint/config"
	"kneepoint/ingest"
	"kneepoint/reports"
	"kneepoint/reports/build"
)

// triageFlags are what triage is asked for on its command line.
type triageFlags struct {
	product, settings, out, lot, history, calibrate string
	json, failOnHold                                bool
	tuned                                           *viper.Viper
}

func newTriage() *cobra.Command {
	f := triageFlags{tuned: viper.New()}
	c := &cobra.Command{
		Use:   "triage FILE...",
		Short: "one lot in, a report out",
		Long: `triage reads one lot and writes DIR/<lot>.html and DIR/<lot>.json, with a short summary on
the terminal. Without a product file it works from what the data say of themselves.`,
		Example: "  kneepoint triage lot.csv.gz -p product.yaml -o out",
		Args:    needFiles,
		RunE: func(c *cobra.Command, args []string) error {
			f.json = f.json || c.Flags().Changed("json")
			return triage(c, args, f)
		},
	}
	c.Flags().StringVarP(&f.product, "product", "p", "", "product file (YAML, TOML or JSON)")
	c.Flags().StringVarP(&f.out, "out", "o", "out", "folder for the report")
	c.Flags().StringVar(&f.lot, "lot", "", "the lot to triage, when the files hold several")
	c.Flags().StringVar(&f.history, "wafer-history", "", "CSV by lot and wafer; each further column is an attribute of the wafers")
	c.Flags().StringVar(&f.settings, "settings", "", "settings file")
	bindCalibrate(c, &f.calibrate)
	c.Flags().BoolVar(&f.json, "json", false, "print the report as JSON; writes files only with -o")
	c.Flags().BoolVar(&f.failOnHold, "fail-on-hold", false, "exit with 3 when the proposal is not a release")
	bindSettings(c, f.tuned)
	return c
}

func triage(c *cobra.Command, files []string, f triageFlags) error {
	settings, err := config.LoadSettings(f.tuned, f.settings)
	if err != nil {
		return err
	}
	product, err := loadProduct(f.product)
	if err != nil {
		return err
	}
	report, err := analyse(c, job{files: files, lot: f.lot, history: f.history, product: product, settings: settings, calibrate: f.calibrate})
	if err != nil {
		return err
	}
	var written []string
	if !f.json || c.Flags().Changed("out") {
		if written, err = writeReport(f.out, append(slices.Clone(files), f.product, f.history, f.settings), report); err != nil {
			return err
		}
	}
	if f.json {
		if err := report.WriteJSON(c.OutOrStdout()); err != nil {
			return fmt.Errorf("standard output: %w", err)
		}
	} else if err := printSummary(c.OutOrStdout(), report, written); err != nil {
		return err
	}
	if f.failOnHold && report.Disposition.Proposal != "release" {
		return errHold
	}
	return nil
}

// job is one lot to read and to report on.
type job struct {
	files        []string
	lot, history string
	product      *config.Product
	settings     config.Settings
	calibrate    string // see bindCalibrate
}

// analyse reads one lot and assembles its report.
func analyse(c *cobra.Command, j job) (*reports.Report, error) {
	lot, err := readLot(c, j)
	if err != nil {
		return nil, err
	}
	diagnosis, err := newDiagnosis(c, j.product, j.calibrate)
	if err != nil {
		return nil, err
	}
	progress := newProgress(c, "analysing")
	defer progress.end()
	return build.Report(c.Context(), build.Input{Lot: lot, Product: j.product, Settings: j.settings, Diagnosis: diagnosis, Version: version(),
		Progress: func(done, total int) { progress.set(int64(done), int64(total)) }})
}

// readLot reads the files and picks the one lot that is asked for.
func readLot(c *cobra.Command, j job) (*ingest.Lot, error) {
	var history *ingest.History
	if j.history != "" {
		var err error
		if history, err = ingest.ReadHistory(j.history); err != nil {
			return nil, err
		}
	}
	progress := newProgress(c, "reading")
	batch, err := ingest.Read(c.Context(), j.files, ingest.Options{Product: j.product, Lot: j.lot, History: history,
		Workers: j.settings.Workers, Retest: ingest.Retest(j.settings.Retest), Progress: progress.set})
	progress.end()
	if err != nil {
		return nil, err
	}
	if len(batch.Lots) == 1 {
		return batch.Lots[0], nil
	}
	var names []string
	for _, l := range batch.Lots {
		names = append(names, l.ID())
	}
	const most = 12
	shown := strings.Join(names[:min(len(names), most)], ", ")
	if len(names) > most {
		shown += fmt.Sprintf(" and %d more", len(names)-most)
	}
	return nil, fmt.Errorf("%s: holds %d lots (%s); pick one with --lot", j.files[0], len(names), shown)
}

// loadProduct loads the product file, or returns nil when none is named.
func loadProduct(path string) (*config.Product, error) {
	if path == "" {
		return nil, nil
	}
	return config.LoadProduct(path)
}
