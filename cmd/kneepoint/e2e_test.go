package main

import (
	"bytes"
	"compress/gzip"
	"context"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"

	"kneepoint/ingest/synth"
	"kneepoint/reports/text"
)

// buildBinary builds the program once, as a user would.
func buildBinary(t *testing.T) string {
	t.Helper()
	bin := filepath.Join(t.TempDir(), "kneepoint")
	if out, err := exec.Command("go", "build", "-o", bin, ".").CombinedOutput(); err != nil {
		t.Fatalf("go build: %v\n%s", err, out)
	}
	return bin
}

// kneepoint runs a command in-process and wants exit 0 and a quiet stderr.
func kneepoint(t *testing.T, args ...string) string {
	t.Helper()
	var stdout, stderr bytes.Buffer
	if code := run(context.Background(), args, &stdout, &stderr); code != exitDone {
		t.Fatalf("kneepoint %s: exit %d, stderr %s", strings.Join(args, " "), code, stderr.String())
	}
	if stderr.Len() > 0 {
		t.Errorf("kneepoint %s: stderr %s", strings.Join(args, " "), stderr.String())
	}
	return stdout.String()
}

// TestDemo runs the built binary's demo, with one core and with two: the bytes
// of the reports must not differ, and the summary must be short.
func TestDemo(t *testing.T) {
	bin := buildBinary(t)
	dir := t.TempDir()
	var outputs [][]byte
	for _, cores := range []string{"1", "2"} {
		cmd := exec.Command(bin, "demo", "-o", "out"+cores)
		cmd.Dir = dir
		cmd.Env = append(os.Environ(), "GOMAXPROCS="+cores, "KNEEPOINT_CALIBRATE=auto") // by what is shipped
		var stderr bytes.Buffer
		cmd.Stderr = &stderr
		out, err := cmd.Output()
		if err != nil || stderr.Len() > 0 {
			t.Fatalf("demo: %v, stderr %s", err, stderr.String())
		}
		summary := strings.Split(strings.TrimRight(string(out), "\n"), "\n")
		if len(summary) > text.MaxLines {
			t.Errorf("the summary has %d lines, more than %d:\n%s", len(summary), text.MaxLines, out)
		}
		for _, pattern := range []string{"*.html", "*.json"} {
			found, _ := filepath.Glob(filepath.Join(dir, "out"+cores, pattern))
			if len(found) != 1 {
				t.Fatalf("demo wrote %v, want one %s", found, pattern)
			}
			data, err := os.ReadFile(found[0])
			if err != nil {
				t.Fatal(err)
			}
			outputs = append(outputs, bytes.ReplaceAll(data, []byte("out"+cores), []byte("out")))
		}
	}
	for i, kind := range []string{"HTML", "JSON"} {
		if !bytes.Equal(outputs[i], outputs[i+2]) {
			t.Errorf("the %s differs between one core and two", kind)
		}
	}
	r := parseReport(t, outputs[1])
	if len(r.Wafers) != 25 || r.Yield.Estimate > 0.95 || r.Yield.Estimate < 0.5 {
		t.Errorf("the demo lot has %d wafers and yield %v", len(r.Wafers), r.Yield.Estimate)
	}
	if len(r.Causes) == 0 {
		t.Error("the report has no cause, not even 'unexplained'")
	}
}

// TestLayoutsAgree triages one made-up lot in several layouts: the report must be
// the same but for the inputs.
func TestLayoutsAgree(t *testing.T) {
	dir := t.TempDir()
	t.Chdir(dir)
	lot := synth.Demo()
	os.WriteFile("product.yaml", []byte(synth.DemoProductYAML), 0o644)
	write := func(name string, f synth.Format, long bool) {
		var b bytes.Buffer
		var err error
		if long {
			err = lot.WriteLong(&b, f)
		} else {
			err = lot.WriteWide(&b, f)
		}
		if err != nil {
			t.Fatal(err)
		}
		data := b.Bytes()
		if strings.HasSuffix(name, ".gz") {
			var z bytes.Buffer
			w := gzip.NewWriter(&z)
			w.Write(data)
			w.Close()
			data = z.Bytes()
		}
		if err := os.WriteFile(name, data, 0o644); err != nil {
			t.Fatal(err)
		}
	}
	write("wide.csv", synth.Format{UnitRow: true, LimitRows: true}, false)
	write("plain.csv", synth.Format{}, false)
	write("semicolon.csv", synth.Format{Separator: ';', DecimalComma: true, UnitRow: true, LimitRows: true}, false)
	write("tab.txt", synth.Format{Separator: '\t', UnitRow: true, LimitRows: true}, false)
	write("wide.csv.gz", synth.Format{UnitRow: true, LimitRows: true}, false)
	write("long.csv", synth.Format{UnitRow: true, LimitRows: true}, true)
	var want string
	for _, name := range []string{"wide.csv", "plain.csv", "semicolon.csv", "tab.txt", "wide.csv.gz", "long.csv"} {
		kneepoint(t, "triage", name, "-p", "product.yaml", "-o", "out-"+name)
		found, _ := filepath.Glob("out-" + name + "/*.json")
		if len(found) != 1 {
			t.Fatalf("%s: reports %v", name, found)
		}
		r := readReport(t, found[0])
		r.Inputs = nil
		var b strings.Builder
		if err := r.WriteJSON(&b); err != nil {
			t.Fatal(err)
		}
		got := b.String()
		if want == "" {
			want = got
			continue
		}
		if diff := cmp.Diff(want, got); diff != "" {
			t.Errorf("%s gives another report than wide.csv (-wide +%s):\n%s", name, name, diff)
		}
	}
}

// TestOxide runs on real data: oxide thickness of 8 lots of 3 wafers of 3 sites
// (Littell, Milliken, Stroup and Wolfinger 1996, as in R's nlme package), without
// die coordinates.
func TestOxide(t *testing.T) {
	data, err := filepath.Abs("../../testdata/ingest/oxide.csv")
	if err != nil {
		t.Fatal(err)
	}
	t.Chdir(t.TempDir())
	os.WriteFile("product.yaml", []byte("product: oxide\ntests:\n  - {name: OXIDE_THICKNESS, unit: angstrom, lower: 1950, upper: 2050}\n"), 0o644)
	if out := kneepoint(t, "inspect", data); !strings.Contains(out, "8 lots") || !strings.Contains(out, "OXIDE_THICKNESS") {
		t.Errorf("inspect says\n%s", out)
	}
	out := kneepoint(t, "triage", data, "--lot", "1", "-p", "product.yaml", "-o", "out")
	if !strings.Contains(out, "coordinates") {
		t.Errorf("no line tells that coordinates are missing:\n%s", out)
	}
	r := readReport(t, "out/1.json")
	if len(r.Wafers) != 3 || r.Dice != 9 || len(r.Tests) != 1 {
		t.Fatalf("%d wafers, %d readings, %d tests; want 3, 9, 1", len(r.Wafers), r.Dice, len(r.Tests))
	}
	// Lot 1 of the data: 2006 1999 2007 1980 1988 1982 2000 1998 2007; its mean by hand.
	test := r.Tests[0]
	if test.Unit != "angstrom" || test.N != 9 || float64(test.Mean) < 1996.3 || float64(test.Mean) > 1996.4 {
		t.Errorf("test %+v; want 9 readings of mean 1996.33 angstrom", test)
	}
}

// TestWaferHistory carries the fab's record of the wafers into the report.
func TestWaferHistory(t *testing.T) {
	t.Chdir(t.TempDir())
	os.WriteFile("lot.csv", []byte(small()), 0o644)
	os.WriteFile("history.csv", []byte("LOT,WAFER,REACTOR\nL1,1,R7\n"), 0o644)
	r := parseReport(t, []byte(kneepoint(t, "triage", "lot.csv", "--wafer-history", "history.csv", "--json")))
	if r.Wafers[0].Attributes["REACTOR"] != "R7" || len(r.Inputs) != 2 {
		t.Errorf("attributes %v, inputs %v", r.Wafers[0].Attributes, r.Inputs)
	}
	for _, q := range r.Quality {
		if q.Code == "wafer-without-history" {
			return
		}
	}
	t.Error("nothing says that wafer 2 has no history")
}

// TestJSONOnly prints the report and writes no file.
func TestJSONOnly(t *testing.T) {
	t.Chdir(t.TempDir())
	os.WriteFile("lot.csv", []byte(small()), 0o644)
	parseReport(t, []byte(kneepoint(t, "triage", "lot.csv", "--json")))
	if left, _ := filepath.Glob("out*"); len(left) > 0 {
		t.Errorf("wrote %v", left)
	}
}

// TestFailOnHold exits with 3 when the proposal is not a release, and only then.
func TestFailOnHold(t *testing.T) {
	t.Chdir(t.TempDir())
	os.WriteFile("lot.csv", []byte(small()), 0o644)
	var stdout, stderr bytes.Buffer
	if code := run(context.Background(), []string{"triage", "lot.csv", "--fail-on-hold"}, &stdout, &stderr); code != exitHold {
		t.Errorf("exit %d, want %d", code, exitHold)
	}
	if stderr.Len() > 0 {
		t.Errorf("stderr %q", stderr.String())
	}
}

// TestInterrupted leaves no report behind.
func TestInterrupted(t *testing.T) {
	t.Chdir(t.TempDir())
	os.WriteFile("lot.csv", []byte(small()), 0o644)
	ctx, cancel := context.WithCancel(context.Background())
	cancel()
	var stdout, stderr bytes.Buffer
	if code := run(ctx, []string{"triage", "lot.csv"}, &stdout, &stderr); code != exitFailed || !strings.Contains(stderr.String(), "interrupted") {
		t.Errorf("exit %d, stderr %q", code, stderr.String())
	}
	if left, _ := filepath.Glob("out/*"); len(left) > 0 {
		t.Errorf("left %v", left)
	}
}

// TestHelpExamples checks that each command's help shows an example that starts
// with the program's name.
func TestHelpExamples(t *testing.T) {
	for _, c := range newRoot().Commands() {
		if c.Hidden || c.Name() == "help" || c.Name() == "completion" {
			continue
		}
		if !strings.HasPrefix(c.Example, "  kneepoint "+c.Name()) {
			t.Errorf("%s has no example of itself: %q", c.Name(), c.Example)
		}
		if out := kneepoint(t, c.Name(), "--help"); !strings.Contains(out, "Examples:") {
			t.Errorf("%s --help shows no example:\n%s", c.Name(), out)
		}
	}
}
