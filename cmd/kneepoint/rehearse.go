package main

import (
	"bytes"
	"errors"
	"fmt"
	"os"
	"path/filepath"

	"github.com/spf13/cobra"

	"kneepoint/config"
	"kneepoint/reports/rehearse"
	"kneepoint/reports/text"
)

// rehearseFlags are what rehearse is asked for on its command line.
type rehearseFlags struct {
	product, out, calibrate string
	lots                    int
	seed                    uint64
}

// Bounds of --lots: fewer say nothing, more take hours.
const fewestLots, mostLots = 40, 100_000

func newRehearse() *cobra.Command {
	var f rehearseFlags
	c := &cobra.Command{
		Use:   "rehearse -p PRODUCT",
		Short: "how well causes are named with this product's tests",
		Long: `rehearse makes up lots of a product with known causes, puts them through the whole analysis and
counts: which causes are named rightly, whether told probabilities hold, how small a loss is
still found, which causes this product's tests cannot tell apart, and which added test would
help most. With -o it also writes a page and a JSON file.

Made-up lots show when an analysis is wrong, never that it is right on silicon.`,
		Example: "  kneepoint rehearse -p product.yaml\n  kneepoint rehearse -p product.yaml --lots 1000 --seed 2 -o out",
		Args:    cobra.NoArgs,
		RunE:    func(c *cobra.Command, _ []string) error { return rehearsal(c, f) },
	}
	c.Flags().StringVarP(&f.product, "product", "p", "", "product file (YAML, TOML or JSON)")
	c.Flags().IntVar(&f.lots, "lots", rehearse.RehearsalLots, "made-up lots")
	c.Flags().Uint64Var(&f.seed, "seed", 1, "seed of the random numbers")
	c.Flags().StringVarP(&f.out, "out", "o", "", "folder for the page and the JSON file")
	bindCalibrate(c, &f.calibrate)
	return c
}

// rehearsal runs the made-up lots and shows what they gave.
func rehearsal(c *cobra.Command, f rehearseFlags) error {
	switch {
	case f.product == "":
		return hinted{errors.New("no product file is named"), "give one with -p; 'kneepoint demo' writes one to look at"}
	case f.lots < fewestLots || f.lots > mostLots:
		return fmt.Errorf("--lots %d: use %d to %d", f.lots, fewestLots, mostLots)
	}
	product, err := config.LoadProduct(f.product)
	if err != nil {
		return err
	}
	diagnosis, err := newDiagnosis(c, product, f.calibrate)
	if err != nil {
		return err
	}
	progress := newProgress(c, "rehearsing")
	result, err := rehearse.Run(c.Context(), product, diagnosis, rehearse.Options{Lots: f.lots, Seed: f.seed,
		Progress: func(done, total int) { progress.set(int64(done), int64(total)) }})
	progress.end()
	if err != nil {
		return err
	}
	if err := result.WriteText(c.OutOrStdout()); err != nil {
		return fmt.Errorf("standard output: %w", err)
	}
	if f.out == "" {
		return nil
	}
	return writeRehearsal(c, f, result)
}

// writeRehearsal writes the page and the JSON file; both are rendered first.
func writeRehearsal(c *cobra.Command, f rehearseFlags, r *rehearse.Result) error {
	var html, data bytes.Buffer
	if err := r.WriteHTML(&html); err != nil {
		return err
	}
	if err := r.WriteJSON(&data); err != nil {
		return err
	}
	if err := os.MkdirAll(f.out, 0o777); err != nil {
		return fmt.Errorf("%s: cannot make the folder: %w; choose another with -o", f.out, reason(err))
	}
	name := r.Product
	if name == "" {
		name = "product"
	}
	base := filepath.Join(f.out, "rehearsal-"+fileName(name))
	for _, file := range []struct {
		ending string
		data   []byte
	}{{".html", html.Bytes()}, {".json", data.Bytes()}} {
		if err := writeFile(base+file.ending, []string{f.product}, file.data); err != nil {
			return err
		}
		if _, err := fmt.Fprintf(c.OutOrStdout(), "wrote %s\n", text.Printable(base+file.ending)); err != nil {
			return err
		}
	}
	return nil
}
