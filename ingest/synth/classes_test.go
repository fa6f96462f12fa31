package synth

import (
	"bytes"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"
	"github.com/google/go-cmp/cmp/cmpopts"
	"gonum.org/v1/gonum/stat"

	"kneepoint/config"
	"kneepoint/stats/junction"
)

// classLevels are the medians of a class product: the device model's own levels,
// without any baseline to anchor it.
func classLevels(t *testing.T, p *config.Product) []float64 {
	var tests []junction.Test
	for i := range p.Tests {
		x := junctionTest(p, &p.Tests[i])
		x.Baseline = junction.Level{}
		tests = append(tests, x)
	}
	m, err := junction.NewModel(deviceOf(p), tests...)
	if err != nil {
		t.Fatal(err)
	}
	levels := make([]float64, len(p.Tests))
	for i := range levels {
		levels[i] = p.Tests[i].Unit.FromSI(m.Level(i))
	}
	return levels
}

// healthySpec makes healthy lots of a class product at given medians, with the
// spreads of a well-kept line alone: nothing of the file's baseline is used.
func healthySpec(t *testing.T, p *config.Product, medians []float64) Spec {
	bare := *p
	bare.Baseline = nil
	s, err := FromProduct(&bare)
	if err != nil {
		t.Fatal(err)
	}
	for i := range s.Tests {
		scale := medians[i] / s.Tests[i].Typical
		s.Tests[i].Typical, s.Tests[i].Noise = medians[i], s.Tests[i].Noise*scale
	}
	s.Grid.DicePerWafer = 120
	return s
}

// baselineOf measures a baseline on healthy lots.
func baselineOf(s Spec, lots int) (levels []level, yield float64) {
	n := len(s.Tests)
	pooled, medians, spreads := make([][]float64, n), make([][]float64, n), make([]float64, n)
	for seed := range lots {
		l := s.Generate(uint64(seed))
		yield += l.Yield() / float64(lots)
		for t := range s.Tests {
			var v []float64
			for i := range l.Wafers {
				w := &l.Wafers[i]
				for _, row := range w.Final() {
					if x := w.Values[t][row]; s.PassBin(int(w.HardBin[row])) && !math.IsNaN(x) {
						v = append(v, x)
					}
				}
			}
			m, sd := robust(v)
			medians[t] = append(medians[t], m)
			spreads[t] += sd * sd / float64(lots)
			pooled[t] = append(pooled[t], v...)
		}
	}
	for t := range pooled {
		m, sd := robust(pooled[t])
		levels = append(levels, level{m, sd, math.Sqrt(spreads[t]), stat.StdDev(medians[t], nil)})
	}
	return levels, yield
}

// TestClassBaselines holds the class products to the device model and to healthy
// lots; -update rewrites their baselines. The model's levels take long and are
// checked with KNEEPOINT_LONG=1.
func TestClassBaselines(t *testing.T) {
	for _, p := range ClassProducts() {
		var medians []float64
		long := *update || os.Getenv("KNEEPOINT_LONG") != ""
		if long {
			medians = classLevels(t, p)
		} else {
			for i := range p.Tests {
				medians = append(medians, p.Tests[i].Unit.FromSI(p.Baseline.Tests[p.Tests[i].Name].Median))
			}
		}
		lots := 60
		if *update {
			lots = 150
		}
		s := healthySpec(t, p, medians)
		levels, yield := baselineOf(s, lots)
		if *update {
			path := filepath.Join("classes", p.File)
			data, err := os.ReadFile(path)
			if err != nil {
				t.Fatal(err)
			}
			if err := os.WriteFile(path, classBaseline(data, p, levels, yield), 0o644); err != nil {
				t.Fatal(err)
			}
			continue
		}
		if math.Abs(p.Baseline.Yield-yield) > 0.006 {
			t.Errorf("%s: yield %.3f in the file, %.4f generated", p.Name, p.Baseline.Yield, yield)
		}
		for i, test := range p.Tests {
			// A robust spread of readings moves by steps of the tester.
			far := func(got, want, tolerance float64) bool {
				return math.Abs(got-want) > tolerance*want+1.5*s.Tests[i].Resolution
			}
			in, want := p.Baseline.Tests[test.Name], levels[i]
			got := level{test.Unit.FromSI(in.Median), test.Unit.FromSI(in.Sigma), test.Unit.FromSI(in.WithinLotSigma), test.Unit.FromSI(in.LotSigma)}
			// 60 lots know a spread between lots to 9 %, so a median to 0.13 of it.
			if math.Abs(got.median-want.median) > 0.3*want.sigma+s.Tests[i].Resolution ||
				far(got.sigma, want.sigma, 0.12) || far(got.within, want.within, 0.08) || far(got.lot, want.lot, 0.3) {
				t.Errorf("%s %s: %+v in the file, %+v generated", p.Name, test.Name, got, want)
			}
		}
	}
}

func classBaseline(file []byte, p *config.Product, levels []level, yield float64) []byte {
	head, _, _ := bytes.Cut(file, []byte("\nbaseline:"))
	out := bytes.NewBuffer(bytes.Clone(head))
	fmt.Fprintf(out, "\nbaseline:   # computed from the device model and healthy lots of the generator\n  yield: %.3f\n  tests:\n", yield)
	for i, test := range p.Tests {
		l := levels[i]
		fmt.Fprintf(out, "    %-7s {median: %s, sigma: %s, within_lot_sigma: %s, lot_sigma: %s}\n", test.Name+":",
			digits(l.median, 4), digits(l.sigma, 3), digits(l.within, 3), digits(l.lot, 3))
	}
	return out.Bytes()
}

// TestWithout: a product with tests left out is another file, and the rest stays.
func TestWithout(t *testing.T) {
	for i, p := range ClassProducts("COB", "COB2", "HFE1") {
		full := ClassProducts()[i]
		if len(p.Tests) != len(full.Tests)-3 || p.SHA256 == full.SHA256 || len(p.Baseline.Tests) != len(p.Tests) {
			t.Errorf("%s: %d tests, %d in the baseline, hash %s", p.Name, len(p.Tests), len(p.Baseline.Tests), p.SHA256)
		}
		if p.Baseline.Tests["BVCEO"] != full.Baseline.Tests["BVCEO"] || !cmp.Equal(p.Device, full.Device, cmpopts.EquateNaNs()) || p.Wafer != full.Wafer {
			t.Errorf("%s: something else changed", p.Name)
		}
	}
	if _, err := Without(ClassProducts()[0], "XYZ"); err == nil || !strings.Contains(err.Error(), "XYZ") {
		t.Errorf("error %v, want one that names XYZ", err)
	}
}
