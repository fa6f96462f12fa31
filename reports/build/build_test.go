package build

import (
	"bytes"
	"context"
	"flag"
	"os"
	"runtime"
	"strconv"
	"testing"

	"github.com/google/go-cmp/cmp"

	"kneepoint/config"
	"kneepoint/ingest"
	"kneepoint/reports"
)

var update = flag.Bool("update", false, "rewrite the golden report")

// makeReport reads a file as triage does and assembles its report.
func makeReport(t testing.TB, data, product string, settings config.Settings) *reports.Report {
	t.Helper()
	var p *config.Product
	if product != "" {
		var err error
		if p, err = config.LoadProduct(product); err != nil {
			t.Fatal(err)
		}
	}
	batch, err := ingest.Read(context.Background(), []string{data}, ingest.Options{Product: p, Retest: ingest.Retest(settings.Retest)})
	if err != nil {
		t.Fatal(err)
	}
	r, err := Report(context.Background(), Input{Lot: batch.Lots[0], Product: p, Settings: settings, Version: "test"})
	if err != nil {
		t.Fatal(err)
	}
	return r
}

func asJSON(t *testing.T, r *reports.Report) []byte {
	t.Helper()
	var b bytes.Buffer
	if err := r.WriteJSON(&b); err != nil {
		t.Fatal(err)
	}
	return b.Bytes()
}

// TestGolden holds the whole report of a small lot: some dice of four wafers of
// the demo lot. It guards against changes nobody meant; that the numbers are
// right is the business of the tests of stats and wafermap.
func TestGolden(t *testing.T) {
	const golden = "testdata/small.golden.json"
	got := asJSON(t, makeReport(t, "testdata/small.csv", "testdata/small.yaml", config.DefaultSettings()))
	if *update {
		if err := os.WriteFile(golden, got, 0o644); err != nil {
			t.Fatal(err)
		}
	}
	want, err := os.ReadFile(golden)
	if err != nil {
		t.Fatal(err)
	}
	if diff := cmp.Diff(string(want), string(got)); diff != "" {
		t.Errorf("the report changed; if that is meant, run with -update and read the diff (-want +got):\n%s", diff)
	}
}

// TestCoresAgree makes the report with one worker and with many.
func TestCoresAgree(t *testing.T) {
	one, many := config.DefaultSettings(), config.DefaultSettings()
	one.Workers, many.Workers = 1, 7
	before := runtime.GOMAXPROCS(1)
	a := makeReport(t, "testdata/small.csv", "testdata/small.yaml", one)
	runtime.GOMAXPROCS(before)
	b := makeReport(t, "testdata/small.csv", "testdata/small.yaml", many)
	if !bytes.Equal(asJSON(t, a), asJSON(t, b)) {
		t.Error("the report depends on the number of workers")
	}
	for i := range a.Pictures.Wafers {
		if !bytes.Equal(a.Pictures.Wafers[i].PNG, b.Pictures.Wafers[i].PNG) {
			t.Errorf("the map of wafer %s depends on the number of workers", a.Wafers[i].ID)
		}
	}
}

func write(t *testing.T, content string) string {
	t.Helper()
	path := t.TempDir() + "/lot.csv"
	if err := os.WriteFile(path, []byte(content), 0o644); err != nil {
		t.Fatal(err)
	}
	return path
}

func product(t *testing.T, content string) string {
	t.Helper()
	path := t.TempDir() + "/product.yaml"
	if err := os.WriteFile(path, []byte(content), 0o644); err != nil {
		t.Fatal(err)
	}
	return path
}

// TestPassRule goes through the rule of design 3.4: a bin of bins.pass, else the
// file's own flag, else hard bin 1, else the limits.
func TestPassRule(t *testing.T) {
	const rows = `WAFER,X,Y,HBIN,PF,BV
1,0,0,1,P,25
1,1,0,2,F,25
1,2,0,7,P,25
1,0,1,1,F,5
`
	limits := "tests:\n  - {name: BV, unit: V, lower: 20}\n"
	noBins := "WAFER,X,Y,BV\n1,0,0,25\n1,1,0,20\n1,2,0,\n1,0,1,19.99\n"
	for _, c := range []struct {
		name, data, product string
		passing             int
	}{
		{"bins of the product", rows, "product: P\nbins: {pass: [1, 2]}\n" + limits, 3},
		{"the file's flag", rows, "product: P\n" + limits, 2},
		{"hard bin 1", "WAFER,X,Y,HBIN,BV\n1,0,0,1,25\n1,1,0,2,25\n1,2,0,1,5\n", "product: P\n" + limits, 2},
		{"limits: a value at the limit passes", noBins, "product: P\n" + limits, 2},
	} {
		t.Run(c.name, func(t *testing.T) {
			r := makeReport(t, write(t, c.data), product(t, c.product), config.DefaultSettings())
			if r.Yield.Passing != c.passing {
				t.Errorf("%d of %d dice pass, want %d (%s)", r.Yield.Passing, r.Dice, c.passing, r.Program.PassRule)
			}
			if r.Program.PassRule == "" {
				t.Error("the rule is not told")
			}
		})
	}
}

// TestRetest counts a retested die once, by its last measurement, and keeps its
// first for the first-pass yield.
func TestRetest(t *testing.T) {
	data := write(t, "WAFER,X,Y,HBIN,BV\n1,0,0,5,10\n1,1,0,1,25\n1,2,0,1,26\n1,3,0,1,27\n1,0,0,1,24\n")
	r := makeReport(t, data, "", config.DefaultSettings())
	if r.Dice != 4 || r.Yield.Estimate != 1 || r.Yield.FirstPass != 0.75 || r.Wafers[0].Retested != 1 {
		t.Errorf("dice %d, yield %v, first pass %v, retested %d; want 4, 1, 0.75, 1",
			r.Dice, r.Yield.Estimate, r.Yield.FirstPass, r.Wafers[0].Retested)
	}
	first := config.DefaultSettings()
	first.Retest = "first"
	if r := makeReport(t, data, "", first); r.Yield.Estimate != 0.75 {
		t.Errorf("retest policy first: yield %v, want 0.75", r.Yield.Estimate)
	}
}

// TestClampedReadings keeps a clamp out of mean and capability.
func TestClampedReadings(t *testing.T) {
	var b bytes.Buffer
	b.WriteString("WAFER,X,Y,BV\n")
	for i := range 100 {
		v := 60 + i%50 // 60 to 109
		if v > 80 {
			v = 80
		}
		b.WriteString("1," + strconv.Itoa(i%10) + "," + strconv.Itoa(i/10) + "," + strconv.Itoa(v) + "\n")
	}
	r := makeReport(t, write(t, b.String()), product(t, "product: P\ntests:\n  - {name: BV, unit: V, lower: 50, clamp: 80}\n"), config.DefaultSettings())
	test := r.Tests[0]
	if test.Censored.AtLeast != 60 || test.Median.Valid() || test.Max != 80 {
		t.Errorf("at least %d, median %v, max %v; want 60, none, 80: the median lies among the bounds", test.Censored.AtLeast, test.Median, test.Max)
	}
	if !(test.Mean > 80) {
		t.Errorf("mean %v, want above the clamp: six readings in ten are beyond it", test.Mean)
	}
	if test.Why == "" {
		t.Error("nothing says that readings are bounds")
	}
}

// TestEdgeDice leaves out the edge exclusion when the settings ask for it.
func TestEdgeDice(t *testing.T) {
	all, inner := config.DefaultSettings(), config.DefaultSettings()
	inner.CountEdgeDice = false
	const wafer = "product: P\nwafer: {diameter_mm: 10, die_width_mm: 1, die_height_mm: 1, edge_exclusion_mm: 2}\ntests: [{name: BV, unit: V}]\n"
	var b bytes.Buffer
	b.WriteString("WAFER,X,Y,HBIN,BV\n")
	for y := -4; y <= 4; y++ {
		for x := -4; x <= 4; x++ {
			if x*x+y*y <= 16 {
				b.WriteString("1," + strconv.Itoa(x) + "," + strconv.Itoa(y) + ",1,25\n")
			}
		}
	}
	data := write(t, b.String())
	a, c := makeReport(t, data, product(t, wafer), all), makeReport(t, data, product(t, wafer), inner)
	if a.Dice <= c.Dice {
		t.Fatalf("%d dice with the edge, %d without", a.Dice, c.Dice)
	}
	for _, q := range c.Quality {
		if q.Code == "edge-dice-left-out" && q.Dice == a.Dice-c.Dice {
			return
		}
	}
	t.Errorf("no quality row counts the %d dice left out: %+v", a.Dice-c.Dice, c.Quality)
}

// TestStopOnFail leaves alone and any open on a program that stops at the first
// fail.
func TestStopOnFail(t *testing.T) {
	var b bytes.Buffer
	b.WriteString("WAFER,X,Y,HBIN,BV,ICBO,HFE\n")
	for i := range 200 {
		row := ",1,25,1,100\n"
		switch {
		case i%10 == 3:
			row = ",5,10,,\n"
		case i%10 == 7:
			row = ",6,25,90,\n"
		}
		b.WriteString("1," + strconv.Itoa(i%20) + "," + strconv.Itoa(i/20) + row)
	}
	// The second product file lists the tests in another order than the program runs
	// them; the data file's order is then the one that shows the stop.
	for _, tests := range []string{
		"  - {name: BV, unit: V, lower: 20}\n  - {name: ICBO, unit: nA, upper: 5}\n  - {name: HFE, lower: 50}\n",
		"  - {name: HFE, lower: 50}\n  - {name: ICBO, unit: nA, upper: 5}\n  - {name: BV, unit: V, lower: 20}\n",
	} {
		r := makeReport(t, write(t, b.String()), product(t, "product: P\ntests:\n"+tests), config.DefaultSettings())
		if !r.Program.StopOnFail {
			t.Fatalf("not found to stop on fail: %s", r.Program.Text)
		}
		for _, test := range r.Tests {
			l, want := test.Loss, map[string]reports.Number{"BV": 0.1, "ICBO": 0.1, "HFE": 0}[test.Name]
			if l.First != want || l.Alone.Valid() || l.Any.Valid() || l.Why == "" {
				t.Errorf("%s: loss %+v; want first %v, alone and any open with a reason", test.Name, l, want)
			}
		}
	}
}
