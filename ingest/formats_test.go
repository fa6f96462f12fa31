package ingest

import (
	"archive/zip"
	"bytes"
	"context"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"
	"github.com/xuri/excelize/v2"

	"kneepoint/config"
	"kneepoint/ingest/synth"
)

// aLot is a made-up lot with retests, blanks, clamped readings and wafer sites.
func aLot(wafers int) *synth.Lot {
	s := synth.DemoSpec()
	s.Wafers, s.Grid.DieWidthMM, s.Grid.DieHeightMM = wafers, 5, 5
	s.Causes = s.Causes[:4]
	s.Missing = 0.01
	return s.Generate(7)
}

func demoProduct(t testing.TB) *config.Product {
	t.Helper()
	path := filepath.Join(t.TempDir(), "product.yaml")
	if err := os.WriteFile(path, []byte(synth.DemoProductYAML), 0o644); err != nil {
		t.Fatal(err)
	}
	p, err := config.LoadProduct(path)
	if err != nil {
		t.Fatal(err)
	}
	return p
}

func save(t testing.TB, name string, write func(io.Writer) error) string {
	t.Helper()
	path := filepath.Join(t.TempDir(), name)
	var b bytes.Buffer
	if err := write(&b); err != nil {
		t.Fatal(err)
	}
	if err := os.WriteFile(path, b.Bytes(), 0o644); err != nil {
		t.Fatal(err)
	}
	return path
}

func readOne(t testing.TB, path string, opt Options) *Lot {
	t.Helper()
	b, err := Read(context.Background(), []string{path}, opt)
	if err != nil {
		t.Fatal(err)
	}
	if len(b.Lots) != 1 {
		t.Fatalf("%s: %d lots", path, len(b.Lots))
	}
	return b.Lots[0]
}

var wideFormat = synth.Format{UnitRow: true, LimitRows: true}

// asWorkbook makes an xlsx of delimited text, numbers as numbers.
func asWorkbook(csv string, more ...string) func(io.Writer) error {
	return func(w io.Writer) error {
		f := excelize.NewFile()
		defer f.Close()
		for r, line := range strings.Split(strings.TrimRight(csv, "\n"), "\n") {
			for c, cell := range strings.Split(line, ",") {
				at, _ := excelize.CoordinatesToCellName(c+1, r+1)
				v, st := parseNumber([]byte(cell), '.')
				if st == cellNumber && !(len(cell) > 1 && cell[0] == '0' && cell[1] != '.') {
					f.SetCellValue("Sheet1", at, v)
				} else if cell != "" {
					f.SetCellValue("Sheet1", at, cell)
				}
			}
		}
		for _, name := range more {
			f.NewSheet(name)
		}
		return f.Write(w)
	}
}

func wideText(t testing.TB, l *synth.Lot, f synth.Format) string {
	t.Helper()
	var b strings.Builder
	if err := l.WriteWide(&b, f); err != nil {
		t.Fatal(err)
	}
	return b.String()
}

// asZip packs texts by name.
func asZip(files ...string) func(io.Writer) error {
	return func(w io.Writer) error {
		z := zip.NewWriter(w)
		for i := 0; i < len(files); i += 2 {
			e, err := z.Create(files[i])
			if err != nil {
				return err
			}
			io.WriteString(e, files[i+1])
		}
		return z.Close()
	}
}

// byWafer parts the text of a lot into one table a wafer, with header rows.
func byWafer(text string, headers int) map[string]string {
	lines := strings.SplitAfter(strings.TrimRight(text, "\n")+"\n", "\n")
	head := strings.Join(lines[:headers], "")
	out := map[string]string{}
	for _, l := range lines[headers:] {
		if f := strings.Split(l, ","); len(f) > 1 {
			if out[f[1]] == "" {
				out[f[1]] = head
			}
			out[f[1]] += l
		}
	}
	return out
}

// The same lot in every format is the same Lot: all values to the last bit,
// STDF's float32 among them, as the made-up tester reads no more digits than a
// float32 tells apart.
func TestFormatsAgree(t *testing.T) {
	l := aLot(3)
	wide := wideText(t, l, wideFormat)
	long := save(t, "long.csv", func(w io.Writer) error { return l.WriteLong(w, wideFormat) })
	var zipped []string
	for id, text := range byWafer(wide, 4) {
		zipped = append(zipped, "wafers/"+id+".csv", text)
	}
	for _, product := range []*config.Product{nil, demoProduct(t)} {
		opt := Options{Product: product}
		base := readOne(t, save(t, "wide.csv", func(w io.Writer) error { _, err := io.WriteString(w, wide); return err }), opt)
		if len(base.Earlier().Of) == 0 || base.Censor(0) == nil && base.Censor(3) == nil {
			t.Fatal("the lot has no retests or no clamped readings: it tests too little")
		}
		want := viewOf(base)
		paths := []string{long,
			save(t, "lot.xlsx", asWorkbook(wide)), save(t, "lot.zip", asZip(zipped...)),
			save(t, "little.stdf", func(w io.Writer) error { return l.WriteSTDF(w, false) }),
			save(t, "big.stdf", func(w io.Writer) error { return l.WriteSTDF(w, true) }),
			save(t, "lot.parquet", func(w io.Writer) error { return WriteParquet(w, base) }),
			save(t, "lot.arrow", func(w io.Writer) error { return WriteArrow(w, base) }),
			save(t, "lot.arrows", func(w io.Writer) error { return WriteArrowStream(w, base) }),
		}
		plain := readOne(t, save(t, "wide.csv", func(w io.Writer) error { _, err := io.WriteString(w, wide); return err }), Options{})
		// Converted without the product file, read with it.
		paths = append(paths, save(t, "plain.parquet", func(w io.Writer) error { return WriteParquet(w, plain) }))
		for _, p := range paths {
			t.Run(fmt.Sprintf("%s/%v", filepath.Base(p), product != nil), func(t *testing.T) {
				got := viewOf(readOne(t, p, opt))
				same := want
				if strings.HasSuffix(p, ".stdf") {
					// STDF says more: pass flags, product, test numbers.
					got.Pass, got.Earlier.Pass, same.Earlier.Pass, got.Product = nil, nil, nil, ""
					for i := range got.Tests {
						got.Tests[i].Number = same.Tests[i].Number
					}
				}
				if d := cmp.Diff(same, got, exactly); d != "" {
					t.Errorf("(-wide CSV +%s)\n%.3000s", filepath.Base(p), d)
				}
			})
		}
	}
}
