package main

import (
	"bytes"
	"fmt"
	"os"

	"github.com/spf13/cobra"

	"kneepoint/config"
	"kneepoint/ingest"
)

func newProduct() *cobra.Command {
	var out string
	c := &cobra.Command{
		Use:   "product FILE...",
		Short: "draft a product file from a data file",
		Long: `product reads data files and drafts a product file: tests with their units and limits, roles
guessed from names and units, the wafer where the file tells its size, passing bins by pass flags
or limits. Read it through and fill in what the data cannot tell; without -o it is printed.`,
		Example: "  kneepoint product lot.csv -o product.yaml",
		Args:    needFiles,
		RunE: func(c *cobra.Command, files []string) error {
			progress := newProgress(c, "reading")
			batch, err := ingest.Read(c.Context(), files, ingest.Options{Progress: progress.set})
			progress.end()
			if err != nil {
				return err
			}
			var buf bytes.Buffer
			if err := config.Write(&buf, ingest.Draft(batch)); err != nil {
				return err
			}
			for _, note := range ingest.DraftNotes(batch) {
				fmt.Fprintln(c.ErrOrStderr(), "hint:", note)
			}
			if out == "" {
				_, err = c.OutOrStdout().Write(buf.Bytes())
				return err
			}
			if _, err := os.Stat(out); err == nil {
				return fmt.Errorf("%s: exists already, and may hold your edits; name another file, or move it away first", out)
			}
			if err := writeFile(out, files, buf.Bytes()); err != nil {
				return err
			}
			fmt.Fprintf(c.OutOrStdout(), "drafted %s: read it through before use\n", out)
			return nil
		},
	}
	c.Flags().StringVarP(&out, "out", "o", "", "file to write; one that exists is not overwritten")
	return c
}
