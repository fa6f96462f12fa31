package main

import (
	"bytes"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"slices"
	"strconv"
	"strings"

	"github.com/spf13/cobra"

	"kneepoint/config"
	"kneepoint/ingest"
	"kneepoint/ingest/synth"
	"kneepoint/ingest/synth/memory"
	"kneepoint/reports/text"
)

// synthFlags are what synth is asked for on its command line.
type synthFlags struct {
	product, affected, format, out string
	causes                         []string
	wafers, dice                   int
	seed                           uint64
}

// synthFormats are the layouts of a made-up lot, with the ending of the file.
var synthFormats = map[string]struct {
	ending string
	write  func(io.Writer, *synth.Lot, *config.Product) error
}{
	"csv": {".csv", func(w io.Writer, l *synth.Lot, _ *config.Product) error {
		return l.WriteWide(w, synth.Format{UnitRow: true, LimitRows: true, Comments: true})
	}},
	"long": {".csv", func(w io.Writer, l *synth.Lot, _ *config.Product) error {
		return l.WriteLong(w, synth.Format{UnitRow: true, LimitRows: true, Comments: true})
	}},
	"stdf": {".stdf", func(w io.Writer, l *synth.Lot, _ *config.Product) error { return l.WriteSTDF(w, false) }},
	"parquet": {".parquet", func(w io.Writer, l *synth.Lot, p *config.Product) error {
		lot, err := memory.Lot(l, ingest.Options{Product: p})
		if err != nil {
			return err
		}
		return ingest.WriteParquet(w, lot)
	}},
}

func newSynth() *cobra.Command {
	var f synthFlags
	var ids []string
	for _, e := range synth.Catalogue() {
		ids = append(ids, e.ID)
	}
	c := &cobra.Command{
		Use:   "synth -p PRODUCT",
		Short: "a made-up lot with a known cause",
		Long: `synth makes up a lot of a product: healthy, or with one or more causes of the catalogue. It
writes the lot file and <lot>.truth.json, which says what each cause cost on which wafers. What
is not asked for (physics within what is known, spreads within the baseline, the place on the
wafer, the size) is drawn at random by the seed; the same command gives the same bytes.

A cause is ID, ID:DIRECTION or ID:DIRECTION:SIZE. Without a size it is made to cost 3 to 40 %
of the dice, where the product's limits can see it at all. IDs:
  ` + wrapped(ids, 86) + `

Made-up data show when an analysis is wrong, never that it is right on silicon: keep them
apart from measured data.`,
		Example: `  kneepoint synth -p product.yaml --cause epi-thickness:low --affected 7-12
  kneepoint synth -p product.yaml --cause lifetime --cause edge-dice --format stdf --seed 7`,
		Args: cobra.NoArgs,
		RunE: func(c *cobra.Command, _ []string) error { return makeLot(c.OutOrStdout(), f) },
	}
	c.Flags().StringVarP(&f.product, "product", "p", "", "product file (YAML, TOML or JSON)")
	c.Flags().StringArrayVar(&f.causes, "cause", nil, "cause to put in, as ID[:DIRECTION[:SIZE]]; may be repeated")
	c.Flags().IntVar(&f.wafers, "wafers", 25, "wafers of the lot")
	c.Flags().IntVar(&f.dice, "dice", 0, "dice a wafer, in place of the product's die size")
	c.Flags().StringVar(&f.affected, "affected", "", "wafers that the causes act on, as 3,4,7 or 7-12 or all (default drawn)")
	c.Flags().Uint64Var(&f.seed, "seed", 1, "seed of the random numbers")
	c.Flags().StringVar(&f.format, "format", "csv", "csv, long, stdf or parquet")
	c.Flags().StringVarP(&f.out, "out", "o", "out", "folder for the lot file and its truth file")
	return c
}

// wrapped breaks a list of names into lines.
func wrapped(names []string, width int) string {
	var b strings.Builder
	at := 0
	for i, n := range names {
		if i > 0 && at+len(n)+1 > width {
			b.WriteString("\n  ")
			at = 0
		} else if i > 0 {
			b.WriteByte(' ')
		}
		b.WriteString(n)
		at += len(n) + 1
	}
	return b.String()
}

// The most that a made-up lot may have: what fits a 300 mm wafer of the smallest
// dice, and memory.
const mostWafers, mostDice = 200, 200_000

// makeLot makes the lot that the flags ask for, writes it and says what it is.
func makeLot(w io.Writer, f synthFlags) error {
	format, ok := synthFormats[f.format]
	switch {
	case !ok:
		return fmt.Errorf("--format %s: there is no such format; use csv, long, stdf or parquet", f.format)
	case f.product == "":
		return hinted{errors.New("no product file is named"), "give one with -p; 'kneepoint demo' writes one to look at"}
	case f.wafers < 1 || f.wafers > mostWafers:
		return fmt.Errorf("--wafers %d: use 1 to %d", f.wafers, mostWafers)
	case f.dice < 0 || f.dice > mostDice:
		return fmt.Errorf("--dice %d: use 1 to %d", f.dice, mostDice)
	}
	o := synth.RandomOptions{Seed: f.seed, Wafers: f.wafers, Dice: f.dice}
	var err error
	if o.Causes, err = wanted(f); err != nil {
		return err
	}
	product, err := config.LoadProduct(f.product)
	if err != nil {
		return err
	}
	maker, err := synth.NewMaker(product)
	if err != nil {
		return err
	}
	made, err := maker.Random(o)
	if err != nil {
		return err
	}
	lot := made.Generate()
	var data bytes.Buffer
	if err := format.write(&data, lot, made.Product); err != nil {
		return fmt.Errorf("lot %s: cannot be written as %s: %w", lot.ID, f.format, err)
	}
	truth := made.Truth()
	sheet, err := json.MarshalIndent(&truth, "", " ")
	if err != nil {
		return err
	}
	files := map[string][]byte{format.ending: data.Bytes(), ".truth.json": append(sheet, '\n')}
	if f.dice > 0 { // the lot has a die size of its own
		var p bytes.Buffer
		if err := config.Write(&p, made.Product); err != nil {
			return err
		}
		files[".product.yaml"] = p.Bytes()
	}
	if err := os.MkdirAll(f.out, 0o777); err != nil {
		return fmt.Errorf("%s: cannot make the folder: %w; choose another with -o", f.out, reason(err))
	}
	base := filepath.Join(f.out, fileName(lot.ID))
	for _, ending := range sortedKeys(files) {
		if err := writeFile(base+ending, []string{f.product}, files[ending]); err != nil {
			return err
		}
	}
	return saySynth(w, base, format.ending, maker, made, lot, &truth)
}

// wanted reads the causes and the wafers they act on.
func wanted(f synthFlags) ([]synth.Wanted, error) {
	wafers, err := affectedWafers(f.affected, f.wafers)
	if err != nil {
		return nil, err
	}
	var out []synth.Wanted
	for _, flag := range f.causes {
		id, rest, _ := strings.Cut(flag, ":")
		direction, size, _ := strings.Cut(rest, ":")
		w := synth.Wanted{ID: id, Direction: direction, Wafers: wafers, AllWafers: f.affected == "all"}
		if size != "" {
			v, err := strconv.ParseFloat(size, 64)
			if err != nil || !(v > 0) {
				return nil, fmt.Errorf("--cause %s: %q is no size; write a number above 0, as in %s:%s:0.2", flag, size, id, direction)
			}
			w.Size = v
		}
		if _, err := synth.NewCause(id, direction, w.Size); err != nil {
			return nil, fmt.Errorf("--cause %s: %w", flag, err)
		}
		out = append(out, w)
	}
	return out, nil
}

// affectedWafers reads wafers from 1, as 3,4,7 or 7-12, to indices from 0; nil for none
// given and for all.
func affectedWafers(list string, wafers int) ([]int, error) {
	if list == "" || list == "all" {
		return nil, nil
	}
	var out []int
	for _, part := range strings.Split(list, ",") {
		from, to, isRange := strings.Cut(strings.TrimSpace(part), "-")
		if !isRange {
			to = from
		}
		lo, err1 := strconv.Atoi(from)
		hi, err2 := strconv.Atoi(to)
		if err1 != nil || err2 != nil || lo < 1 || hi < lo || hi > wafers {
			return nil, fmt.Errorf("--affected %s: %q names no wafers from 1 to %d; write them as 3,4,7 or 7-12, or all", list, part, wafers)
		}
		for i := lo; i <= hi; i++ {
			out = append(out, i-1)
		}
	}
	slices.Sort(out)
	return slices.Compact(out), nil
}

// saySynth says in a few lines what was made.
func saySynth(w io.Writer, base, ending string, maker *synth.Maker, made *synth.Made, lot *synth.Lot, truth *synth.Truth) error {
	var b strings.Builder
	fmt.Fprintf(&b, "made up    %s, %s on %s, %s, yield %.1f %% (healthy %.1f %%), by %s\n", text.Printable(base+ending),
		counted(lot.Dice(), "die", "dice"), counted(len(lot.Wafers), "wafer", "wafers"), counted(len(lot.Spec.Tests), "test", "tests"),
		100*truth.Yield, 100*truth.Healthy, physicsWords(made.Physics))
	for _, c := range truth.Causes {
		if c.Background {
			continue
		}
		name := strings.TrimSpace(c.ID + " " + c.Direction)
		on := "all wafers"
		if len(c.Wafers) < len(lot.Wafers) {
			on = "wafers " + shortList(c.Wafers, 12)
		}
		fmt.Fprintf(&b, "cause      %s: %s; costs %.2f %% of the dice, acts on %s of %s\n", name, c.Text, 100*c.Loss,
			counted(c.Dice, "die", "dice"), on)
		if c.Note != "" {
			fmt.Fprintf(&b, "           %s\n", c.Note)
		}
	}
	for _, a := range maker.Assumed {
		fmt.Fprintf(&b, "assumed    %s\n", a)
	}
	fmt.Fprintf(&b, "truth      %s\n", text.Printable(base+".truth.json"))
	if made.Spec.Grid.DicePerWafer > 0 {
		fmt.Fprintf(&b, "product    %s, with the die size of this lot\n", text.Printable(base+".product.yaml"))
	}
	_, err := io.WriteString(w, b.String())
	return err
}

func physicsWords(p string) string {
	if n, ok := strings.CutPrefix(p, "junction "); ok {
		return "variant " + n + " of the device model"
	}
	return "laws with drawn slopes"
}
