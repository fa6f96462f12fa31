package main

import (
	"bytes"
	"fmt"
	"os"
	"path/filepath"

	"github.com/spf13/cobra"
	"github.com/spf13/viper"

	"kneepoint/config"
	"kneepoint/ingest/synth"
)

func newDemo() *cobra.Command {
	var out string
	tuned := viper.New()
	c := &cobra.Command{
		Use:   "demo",
		Short: "an invented lot, end to end",
		Long: `demo writes an invented lot of 25 wafers with its product file into a folder and triages it, as
a first look at what kneepoint does. Nothing in it is real: the lot comes from a seeded
generator, and is the same every time.`,
		Example: "  kneepoint demo\n  kneepoint demo -o somewhere",
		Args:    cobra.NoArgs,
		RunE: func(c *cobra.Command, _ []string) error {
			settings, err := config.LoadSettings(tuned, "")
			if err != nil {
				return err
			}
			data, productPath, err := writeDemo(out)
			if err != nil {
				return err
			}
			product, err := config.LoadProduct(productPath)
			if err != nil {
				return err
			}
			report, err := analyse(c, job{files: []string{data}, product: product, settings: settings, calibrate: calibrateAuto})
			if err != nil {
				return err
			}
			written, err := writeReport(out, []string{data, productPath}, report)
			if err != nil {
				return err
			}
			if err := printSummary(c.OutOrStdout(), report, written); err != nil {
				return err
			}
			_, err = fmt.Fprintf(c.OutOrStdout(), "again      kneepoint triage %s -p %s -o %s\n", data, productPath, out)
			return err
		},
	}
	c.Flags().StringVarP(&out, "out", "o", "out", "folder for the invented lot and its report")
	return c
}

// writeDemo writes the demo lot and its product file, and returns their paths.
func writeDemo(dir string) (data, product string, err error) {
	if err := os.MkdirAll(dir, 0o777); err != nil {
		return "", "", fmt.Errorf("%s: cannot make the folder: %w; choose another with -o", dir, reason(err))
	}
	lot := synth.Demo()
	var csv bytes.Buffer
	if err := lot.WriteWide(&csv, synth.Format{UnitRow: true, LimitRows: true, Comments: true}); err != nil {
		return "", "", err
	}
	data = filepath.Join(dir, fileName(lot.ID)+".csv")
	product = filepath.Join(dir, "product.yaml")
	if err := writeFile(data, nil, csv.Bytes()); err != nil {
		return "", "", err
	}
	return data, product, writeFile(product, nil, []byte(synth.DemoProductYAML))
}
