package synth

import (
	"bytes"
	"flag"
	"fmt"
	"math"
	"os"
	"slices"
	"strconv"
	"testing"

	"gonum.org/v1/gonum/stat"

	"kneepoint/config"
)

var update = flag.Bool("update", false, "rewrite the baseline of demo.yaml from healthy lots")

// level is one test's baseline, as the product file has it.
type level struct{ median, sigma, within, lot float64 }

// healthyLevels makes healthy lots of the demo and measures what a baseline
// says: the median and robust spread of passing dice pooled over lots, the
// robust spread within a lot (root mean square over lots), and the standard
// deviation of lot medians.
func healthyLevels(lots int) (levels []level, yield float64) {
	s := DemoSpec().Healthy()
	s.Grid.DieWidthMM, s.Grid.DieHeightMM = 7, 7 // the same wafer, seen at fewer places
	levels, _ = baselineOf(s, lots)
	whole := DemoSpec().Healthy()
	for seed := range uint64(4) {
		yield += whole.Generate(seed).Yield() / 4
	}
	return levels, yield
}

// robust returns the median and the scaled median absolute deviation; it sorts
// a copy.
func robust(v []float64) (median, sigma float64) {
	v = slices.Clone(v)
	slices.Sort(v)
	median = stat.Quantile(0.5, stat.LinInterp, v, nil)
	for i := range v {
		v[i] = math.Abs(v[i] - median)
	}
	slices.Sort(v)
	return median, 1.4826 * stat.Quantile(0.5, stat.LinInterp, v, nil)
}

// TestDemoBaseline holds the demo's product file to the generator. Pure
// structure: both are ours.
func TestDemoBaseline(t *testing.T) {
	levels, yield := healthyLevels(120)
	if *update {
		if err := os.WriteFile("demo.yaml", rewriteBaseline([]byte(DemoProductYAML), levels, yield), 0o666); err != nil {
			t.Fatal(err)
		}
		return
	}
	p := demoProduct(t)
	if got := p.Baseline.Yield; math.Abs(got-yield) > 0.006 {
		t.Errorf("yield %.3f in the file, %.4f generated", got, yield)
	}
	for i, test := range p.Tests {
		in, want := p.Baseline.Tests[test.Name], levels[i]
		got := level{test.Unit.FromSI(in.Median), test.Unit.FromSI(in.Sigma), test.Unit.FromSI(in.WithinLotSigma), test.Unit.FromSI(in.LotSigma)}
		if math.Abs(got.median-want.median) > 0.1*want.sigma+demoTests()[i].Resolution {
			t.Errorf("%s: median %v in the file, %v generated", test.Name, got.median, want.median)
		}
		// 120 lots know the spread between lots to 6.5 %.
		if off(got.sigma, want.sigma) > 0.05 || off(got.within, want.within) > 0.05 || off(got.lot, want.lot) > 0.2 {
			t.Errorf("%s: %+v in the file, %+v generated", test.Name, got, want)
		}
	}
}

func off(got, want float64) float64 { return math.Abs(got/want - 1) }

// demoProduct reads the demo's product file.
func demoProduct(t *testing.T) *config.Product { return demoProductFile(t) }

func demoProductFile(t testing.TB) *config.Product {
	t.Helper()
	p, err := config.ParseProduct("demo.yaml", []byte(DemoProductYAML))
	if err != nil {
		t.Fatal(err)
	}
	return p
}

func rewriteBaseline(file []byte, levels []level, yield float64) []byte {
	head, _, _ := bytes.Cut(file, []byte("\nbaseline:"))
	out := bytes.NewBuffer(bytes.Clone(head))
	fmt.Fprintf(out, "\nbaseline:   # computed from healthy lots of the generator\n  yield: %.3f\n  tests:\n", yield)
	for i, test := range demoTests() {
		l := levels[i]
		fmt.Fprintf(out, "    %-7s {median: %s, sigma: %s, within_lot_sigma: %s, lot_sigma: %s}\n", test.Name+":",
			digits(l.median, 4), digits(l.sigma, 3), digits(l.within, 3), digits(l.lot, 3))
	}
	return out.Bytes()
}

func digits(v float64, n int) string {
	rounded, _ := strconv.ParseFloat(strconv.FormatFloat(v, 'e', n-1, 64), 64)
	return strconv.FormatFloat(rounded, 'f', -1, 64)
}
