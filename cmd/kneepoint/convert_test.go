package main

import (
	"archive/zip"
	"bytes"
	"context"
	"encoding/json"
	"io"
	"os"
	"path/filepath"
	"regexp"
	"strconv"
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"
	"github.com/xuri/excelize/v2"

	"kneepoint/ingest/synth"
)

// waferZip packs a wide table as one file a wafer.
func waferZip(t *testing.T, name, text string, headers int) {
	t.Helper()
	lines := strings.SplitAfter(strings.TrimRight(text, "\n")+"\n", "\n")
	parts, order := map[string]*strings.Builder{}, []string{}
	for _, l := range lines[headers:] {
		if f := strings.Split(l, ","); len(f) > 1 {
			if parts[f[1]] == nil {
				parts[f[1]] = &strings.Builder{}
				parts[f[1]].WriteString(strings.Join(lines[:headers], ""))
				order = append(order, f[1])
			}
			parts[f[1]].WriteString(l)
		}
	}
	var b bytes.Buffer
	z := zip.NewWriter(&b)
	for _, id := range order {
		w, err := z.Create("W" + id + ".csv")
		if err != nil {
			t.Fatal(err)
		}
		io.WriteString(w, parts[id].String())
	}
	z.Close()
	os.WriteFile(name, b.Bytes(), 0o644)
}

// workbook writes a wide table as the first sheet of a workbook: numbers as
// numbers, and what has a zero in front, as wafer ids do, as text.
func workbook(t *testing.T, name, text string) {
	t.Helper()
	f := excelize.NewFile()
	defer f.Close()
	w, err := f.NewStreamWriter("Sheet1")
	if err != nil {
		t.Fatal(err)
	}
	for i, line := range strings.Split(strings.TrimRight(text, "\n"), "\n") {
		var row []any
		for _, cell := range strings.Split(line, ",") {
			v, err := strconv.ParseFloat(cell, 64)
			switch {
			case cell == "":
				row = append(row, nil)
			case err != nil || len(cell) > 1 && cell[0] == '0' && cell[1] != '.':
				row = append(row, cell)
			default:
				row = append(row, v)
			}
		}
		if err := w.SetRow("A"+strconv.Itoa(i+1), row); err != nil {
			t.Fatal(err)
		}
	}
	if err := w.Flush(); err != nil {
		t.Fatal(err)
	}
	if err := f.SaveAs(name); err != nil {
		t.Fatal(err)
	}
}

// TestFormatsGiveOneReport triages one made-up lot in every format: the report
// must be the same but for the inputs. STDF holds float32, which is enough for the
// digits of the made-up tester; and it says which parts passed, which the bins say
// too.
func TestFormatsGiveOneReport(t *testing.T) {
	t.Chdir(t.TempDir())
	os.WriteFile("product.yaml", []byte(synth.DemoProductYAML), 0o644)
	spec := synth.DemoSpec()
	spec.Wafers, spec.Grid.DieWidthMM, spec.Grid.DieHeightMM = 8, 4, 4
	lot := spec.Generate(11)
	format := synth.Format{UnitRow: true, LimitRows: true}
	var text bytes.Buffer
	if err := lot.WriteWide(&text, format); err != nil {
		t.Fatal(err)
	}
	os.WriteFile("lot.csv", text.Bytes(), 0o644)
	waferZip(t, "lot.zip", text.String(), 4)
	workbook(t, "lot.xlsx", text.String())
	for name, write := range map[string]func(io.Writer) error{
		"long.csv":    func(w io.Writer) error { return lot.WriteLong(w, format) },
		"little.stdf": func(w io.Writer) error { return lot.WriteSTDF(w, false) },
		"big.stdf":    func(w io.Writer) error { return lot.WriteSTDF(w, true) },
	} {
		var b bytes.Buffer
		if err := write(&b); err != nil {
			t.Fatal(err)
		}
		os.WriteFile(name, b.Bytes(), 0o644)
	}
	kneepoint(t, "convert", "lot.csv", "-o", "plain.parquet")
	for _, out := range []string{"lot.parquet", "lot.arrow", "lot.arrows"} {
		said := kneepoint(t, "convert", "lot.csv", "-p", "product.yaml", "-o", out)
		if !regexp.MustCompile(`^` + regexp.QuoteMeta(out) + `: .*, lot KP5T-0417, [\d,]+ dice on 8 wafers, 9 tests, \d+ earlier measurements, `).MatchString(said) {
			t.Errorf("convert says %q", said)
		}
	}
	var want map[string]any
	for _, name := range []string{"lot.csv", "long.csv", "lot.zip", "lot.xlsx", "little.stdf", "big.stdf", "lot.parquet", "plain.parquet", "lot.arrow", "lot.arrows"} {
		kneepoint(t, "triage", name, "-p", "product.yaml", "-o", "out-"+name)
		found, _ := filepath.Glob("out-" + name + "/*.json")
		if len(found) != 1 {
			t.Fatalf("%s: reports %v", name, found)
		}
		data, err := os.ReadFile(found[0])
		if err != nil {
			t.Fatal(err)
		}
		var got map[string]any
		if err := json.Unmarshal(data, &got); err != nil {
			t.Fatal(err)
		}
		delete(got, "inputs")
		if want == nil {
			want = got
			continue
		}
		if d := cmp.Diff(want, got); d != "" {
			t.Errorf("%s (-lot.csv +%s)\n%.2500s", name, name, d)
		}
	}
}

func TestConvertRefuses(t *testing.T) {
	t.Chdir(t.TempDir())
	os.WriteFile("lot.csv", []byte(small()), 0o644)
	os.WriteFile("two.csv", []byte(lines("LOT,WAFER,X,Y,BVCEO", "A,1,0,0,25", "A,1,0,1,25", "B,1,0,0,25", "B,1,0,1,25")), 0o644)
	for _, c := range []struct {
		args []string
		want string
	}{
		{[]string{"lot.csv"}, `no file to write is named`},
		{[]string{"lot.csv", "-o", "lot.csv2"}, `lot\.csv2: .*\.parquet, \.arrow or \.arrows`},
		{[]string{"two.csv", "-o", "two.parquet"}, `2 lots \(A, B\); pick one with --lot`},
		{[]string{"none.csv", "-o", "x.parquet"}, `none\.csv: there is no such file`},
		{[]string{"-o", "x.parquet"}, `no data file is named`},
	} {
		var stdout, stderr bytes.Buffer
		code := run(context.Background(), append([]string{"convert"}, c.args...), &stdout, &stderr)
		if code != exitFailed || stdout.Len() > 0 || !regexp.MustCompile(c.want).MatchString(stderr.String()) {
			t.Errorf("convert %v: exit %d, stdout %q, stderr %q", c.args, code, stdout.String(), stderr.String())
		}
	}
	if found, _ := filepath.Glob("*.parquet"); len(found) > 0 {
		t.Errorf("failed runs left %v", found)
	}
	kneepoint(t, "convert", "two.csv", "--lot", "B", "-o", "b.parquet")
	var stdout, stderr bytes.Buffer
	if code := run(context.Background(), []string{"convert", "b.parquet", "-o", "b.parquet"}, &stdout, &stderr); code != exitFailed || !strings.Contains(stderr.String(), "would overwrite the input") {
		t.Errorf("exit %d, stderr %q", code, stderr.String())
	}
}
