package main

import (
	"bytes"
	"compress/gzip"
	"context"
	"fmt"
	"os"
	"path/filepath"
	"regexp"
	"strings"
	"testing"

	"kneepoint/reports"
)

// lines joins lines of a small file.
func lines(l ...string) string { return strings.Join(l, "\n") + "\n" }

// small is a whole little lot: two wafers of nine dice.
func small() string {
	var b strings.Builder
	b.WriteString("LOT,WAFER,X,Y,HBIN,BVCEO,ICBO\n")
	for w := 1; w <= 2; w++ {
		for i := range 9 {
			bin, v := 1, 25.0+0.1*float64(i)
			if i == 4 {
				bin, v = 5, 11.5
			}
			fmt.Fprintf(&b, "L1,%d,%d,%d,%d,%.2f,0.%d\n", w, i%3, i/3, bin, v, i+1)
		}
	}
	return b.String()
}

const smallProduct = `product: P1
bins: {pass: [1]}
tests:
  - {name: BVCEO, measures: bvceo, unit: V, lower: 22.5, at: "IC=1mA"}
  - {name: ICBO, measures: icbo, unit: nA, upper: 5}
`

func gz(s string) string {
	var b bytes.Buffer
	w := gzip.NewWriter(&b)
	w.Write([]byte(s))
	w.Close()
	return b.String()
}

// badInput is one way in which a user's input is wrong. Either the run fails
// with exit 1, nothing on stdout and each line of stderr an error or a hint of
// which one matches want; or it ends with exit 0 and a quality row of code.
type badInput struct {
	name    string
	data    string            // lot.csv
	product string            // product.yaml; "" leaves -p out
	files   map[string]string // further files
	args    []string          // instead of lot.csv -p product.yaml -o out
	prepare func(t *testing.T, dir string)
	want    string // of stderr, a regular expression
	quality string // code of a quality row
}

var badInputs = []badInput{
	{name: "no file named", args: []string{"triage"}, want: `no data file is named`},
	{name: "no such file", args: []string{"triage", "nowhere.csv"}, want: `nowhere\.csv: .*(no such file|does not exist|not found)`},
	{name: "unknown command", args: []string{"analyze", "lot.csv"}, want: `unknown command "analyze"`},
	{name: "unknown flag", args: []string{"triage", "lot.csv", "--sort"}, want: `unknown flag: --sort`},
	{name: "empty file", data: " \n", want: `lot\.csv.*(empty|no data)`},
	{name: "zero bytes", files: map[string]string{"zero.csv": ""}, args: []string{"triage", "zero.csv"}, want: `zero\.csv.*empty`},
	{name: "header only", data: "LOT,WAFER,X,Y,BVCEO\n", want: `lot\.csv.*(no data|no row|header only|only a header)`},
	{name: "binary junk", data: "\x00\x01\x02\xff\xfe\x00junk\x00\x00", want: `lot\.csv.*`},
	{name: "UTF-16", data: "\xff\xfeL\x00O\x00T\x00\n\x00", want: `lot\.csv.*UTF-16`},
	{name: "a picture", data: "\x89PNG\r\n\x1a\n\x00\x00\x00\rIHDR", want: `lot\.csv.*`},
	{name: "no test column", data: lines("LOT,WAFER,X,Y", "L1,1,0,0", "L1,1,0,1"), want: `lot\.csv.*test`},
	{name: "header twice the same", data: lines("WAFER,X,Y,BVCEO,BVCEO", "1,0,0,25,26"), want: `lot\.csv.*BVCEO`},
	{name: "prose", data: lines("Dear colleague,", "please find the lot below.", "Best regards"), want: `lot\.csv.*`},
	{name: "column of the product missing", data: small(),
		product: smallProduct + "columns: {wafer: SLICE}\n", want: `SLICE`},
	{name: "lot not in the file", data: small(), args: []string{"triage", "lot.csv", "--lot", "L9"}, want: `L9.*L1`},
	{name: "several lots", data: lines("LOT,WAFER,X,Y,BVCEO", "A,1,0,0,25", "A,1,0,1,25", "B,1,0,0,25", "B,1,0,1,25"), want: `2 lots \(A, B\); pick one with --lot`},
	{name: "a folder for data", args: []string{"triage", "."}, want: `folder|directory`},
	{name: "gzip cut before any row", files: map[string]string{"cut.csv.gz": gz(small())[:12]}, args: []string{"triage", "cut.csv.gz"}, want: `cut\.csv\.gz.*`},
	{name: "gzip that is none", files: map[string]string{"no.csv.gz": "\x1f\x8bnot gzip at all"}, args: []string{"triage", "no.csv.gz"}, want: `no\.csv\.gz.*`},
	{name: "unreadable file", data: small(), prepare: func(t *testing.T, dir string) {
		if os.Geteuid() == 0 {
			t.Skip("root reads everything")
		}
		os.Chmod(filepath.Join(dir, "lot.csv"), 0)
	}, want: `lot\.csv.*permission`},

	{name: "product file missing", data: small(), args: []string{"triage", "lot.csv", "-p", "none.yaml"}, want: `none\.yaml.*(no such file|does not exist)`},
	{name: "product file empty", data: small(), product: " ", want: `product\.yaml.*empty`},
	{name: "product file is the data file", data: small(), args: []string{"triage", "lot.csv", "-p", "lot.csv"}, want: `lot\.csv`},
	{name: "product file broken", data: small(), product: "product: [unclosed\n", want: `product\.yaml`},
	{name: "product: misspelt key", data: small(), product: smallProduct + "wafre: {diameter_mm: 100}\n", want: `wafre.*wafer`},
	{name: "product: lower above upper", data: small(), product: "product: P\ntests:\n  - {name: BVCEO, unit: V, lower: 30, upper: 20}\n", want: `(lower|upper).*`},
	{name: "product: unknown unit", data: small(), product: "product: P\ntests:\n  - {name: BVCEO, unit: furlong}\n", want: `furlong`},
	{name: "product: unknown measures", data: small(), product: "product: P\ntests:\n  - {name: BVCEO, measures: bvcoe, unit: V}\n", want: `bvcoe.*bvceo`},
	{name: "product: die larger than wafer", data: small(), product: smallProduct + "wafer: {diameter_mm: 100, die_width_mm: 150, die_height_mm: 1}\n", want: `die_width_mm`},
	{name: "product: text for a number", data: small(), product: "product: P\ntests:\n  - {name: BVCEO, unit: V, lower: high}\n", want: `lower.*number`},
	{name: "settings file missing", data: small(), args: []string{"triage", "lot.csv", "--settings", "none.yaml"}, want: `none\.yaml`},
	{name: "retest policy unknown", data: small(), args: []string{"triage", "lot.csv", "--retest", "median"}, want: `median.*(last|first|best)`},

	{name: "output folder is a file", data: small(), files: map[string]string{"out": "a file"}, want: `out: cannot make the folder`},
	{name: "output folder not writable", data: small(), args: []string{"triage", "lot.csv", "-o", "/proc/out"}, want: `/proc/out: cannot make the folder`},
	{name: "disk full", data: small(), args: []string{"triage", "lot.csv", "--json"}, prepare: func(t *testing.T, dir string) {
		if _, err := os.Stat("/dev/full"); err != nil {
			t.Skip("no /dev/full here")
		}
	}, want: `standard output: .*no space left`},
	{name: "output would overwrite the input", data: small(), files: map[string]string{"L1.json": small()},
		args: []string{"triage", "L1.json", "-o", "."}, want: `would overwrite the input`},
	{name: "draft would overwrite a product file", data: small(), product: smallProduct,
		args: []string{"product", "lot.csv", "-o", "product.yaml"}, want: `product\.yaml: exists already`},

	{name: "cut in the middle of a line", data: strings.TrimSuffix(small(), "5.80,0.9\n"), quality: "cut-short"},
	{name: "nan, inf and 1e999", data: strings.Replace(strings.Replace(strings.Replace(small(), "25.00", "nan", 1), "25.10", "inf", 1), "25.20", "1e999", 1), quality: "over-range"},
	{name: "text in a number column", data: strings.Replace(small(), "25.10", "25.l0", 1), quality: "unreadable-value"},
	{name: "a sentinel", data: strings.ReplaceAll(strings.ReplaceAll(small(), "25.10", "-9999"), "25.20", "-9999"), quality: "sentinel"},
	{name: "short row", data: strings.Replace(small(), "L1,1,2,0,1,25.20,0.3", "L1,1,2,0,1", 1), quality: "short-row"},
	{name: "long row", data: strings.Replace(small(), "L1,1,2,0,1,25.20,0.3", "L1,1,2,0,1,25.20,0.3,7,8", 1), quality: "long-row"},
	{name: "row twice", data: small() + "L1,2,2,2,1,25.80,0.9\n", quality: "duplicate-row"},
	{name: "retest", data: small() + "L1,2,1,1,1,25.40,0.9\n", quality: "retest"},
	{name: "die without coordinates", data: strings.Replace(small(), "L1,1,2,0,", "L1,1,,,", 1), quality: "die-without-coordinates"},
	{name: "limits differ", data: strings.Replace(small(), "L1,1,0,0", "lower,,,,,20,\nL1,1,0,0", 1), product: smallProduct, quality: "limits-differ"},
	{name: "gzip cut in the middle", files: map[string]string{"part.csv.gz": gz(strings.Repeat(small(), 3))[:110]}, args: []string{"triage", "part.csv.gz", "-o", "out"}, quality: ""},
	{name: "no coordinates at all", data: lines("LOT,WAFER,SITE,BVCEO", "L1,1,1,25", "L1,1,2,26", "L1,2,1,27"), quality: "no-coordinates"},
	{name: "product test not in the data", data: small(), product: smallProduct + "  - {name: BVEBO, measures: bvebo, unit: V, lower: 6}\n", quality: "test-not-in-data"},
	{name: "passing bin, failing limit", data: strings.Replace(small(), "25.00", "12.00", 1), product: smallProduct, quality: "passing-die-outside-limit"},
	{name: "failing bin, no failing limit", data: strings.Replace(small(), "11.50", "25.00", 1), product: smallProduct, quality: "failing-die-inside-limits"},
}

func TestBadInput(t *testing.T) {
	if len(badInputs) < 40 {
		t.Fatalf("only %d kinds of bad input", len(badInputs))
	}
	for _, c := range badInputs {
		t.Run(c.name, func(t *testing.T) { c.run(t) })
	}
}

func (c badInput) run(t *testing.T) {
	dir := t.TempDir()
	t.Chdir(dir)
	for name, content := range c.files {
		os.WriteFile(name, []byte(content), 0o644)
	}
	if c.data != "" {
		os.WriteFile("lot.csv", []byte(c.data), 0o644)
	}
	args := c.args
	if args == nil {
		args = []string{"triage", "lot.csv", "-o", "out"}
		if c.product != "" {
			args = append(args, "-p", "product.yaml")
		}
	}
	if c.product != "" {
		os.WriteFile("product.yaml", []byte(c.product), 0o644)
	}
	if c.prepare != nil {
		c.prepare(t, dir)
	}
	var stdout, stderr bytes.Buffer
	code := 0
	if strings.HasPrefix(c.name, "disk full") {
		full, err := os.OpenFile("/dev/full", os.O_WRONLY, 0)
		if err != nil {
			t.Fatal(err)
		}
		defer full.Close()
		code = run(context.Background(), args, full, &stderr)
	} else {
		code = run(context.Background(), args, &stdout, &stderr)
	}
	if c.want == "" {
		c.checkQuality(t, code, stderr.String())
		return
	}
	if code != exitFailed || stdout.Len() > 0 {
		t.Errorf("exit %d, stdout %q, stderr %q; want exit 1 and nothing on stdout", code, stdout.String(), stderr.String())
	}
	matched := false
	for _, line := range strings.Split(strings.TrimSpace(stderr.String()), "\n") {
		if !strings.HasPrefix(line, "error: ") && !strings.HasPrefix(line, "hint: ") {
			t.Errorf("stderr line %q is neither error nor hint", line)
		}
		matched = matched || regexp.MustCompile(c.want).MatchString(line)
	}
	if !matched {
		t.Errorf("stderr %q has no line like %q", stderr.String(), c.want)
	}
	if found, _ := filepath.Glob("out/*.html"); len(found) > 0 {
		t.Errorf("a failed run left %v", found)
	}
}

// checkQuality looks for the quality row in the report that was written.
func (c badInput) checkQuality(t *testing.T, code int, stderr string) {
	if code != exitDone {
		t.Fatalf("exit %d, stderr %q; want a report", code, stderr)
	}
	found, _ := filepath.Glob("out/*.json")
	if len(found) != 1 {
		t.Fatalf("reports %v, want one", found)
	}
	r := readReport(t, found[0])
	if c.quality == "" {
		for _, q := range r.Quality {
			if q.Severity == "severe" {
				return
			}
		}
		t.Fatalf("no severe quality row in %+v", r.Quality)
	}
	for _, q := range r.Quality {
		if q.Code == c.quality {
			if q.Text == "" || q.Severity == "" {
				t.Errorf("row %+v says nothing", q)
			}
			return
		}
	}
	t.Errorf("no quality row %q in %+v", c.quality, r.Quality)
}

var _ = reports.SchemaVersion
