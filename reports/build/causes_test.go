package build

import (
	"bytes"
	"context"
	"math"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"sync"
	"testing"

	"kneepoint/config"
	"kneepoint/ingest"
	"kneepoint/ingest/synth"
	"kneepoint/reports"
)

// madeReport writes a made-up lot as a fab would export it and reports on it.
func madeReport(t testing.TB, spec synth.Spec, seed uint64, productYAML string, settings config.Settings) *reports.Report {
	t.Helper()
	dir := t.TempDir()
	var csv bytes.Buffer
	if err := spec.Generate(seed).WriteWide(&csv, synth.Format{UnitRow: true, LimitRows: true, Comments: true}); err != nil {
		t.Fatal(err)
	}
	return reportOf(t, dir, csv.Bytes(), productYAML, settings)
}

func reportOf(t testing.TB, dir string, csv []byte, productYAML string, settings config.Settings) *reports.Report {
	t.Helper()
	data := filepath.Join(dir, "lot.csv")
	if err := os.WriteFile(data, csv, 0o644); err != nil {
		t.Fatal(err)
	}
	product := ""
	if productYAML != "" {
		product = filepath.Join(dir, "product.yaml")
		if err := os.WriteFile(product, []byte(productYAML), 0o644); err != nil {
			t.Fatal(err)
		}
	}
	r := makeReport(t, data, product, settings)
	holdContract(t, r)
	return r
}

// holdContract checks what design 3.4 and 3.5 promise of causes and proposal.
func holdContract(t testing.TB, r *reports.Report) {
	t.Helper()
	if len(r.Causes) == 0 {
		t.Fatal("there is no cause")
	}
	alone, others := 0.0, 0.0
	for i, c := range r.Causes {
		p := float64(c.Probability)
		if !(p >= 0 && p <= 1+1e-9) {
			t.Errorf("%s has probability %v", c.Cause, p)
		}
		if i > 0 && c.Probability > r.Causes[i-1].Probability {
			t.Errorf("%s comes after a less probable cause", c.Cause)
		}
		if c.Cause == "within-baseline" || c.Cause == "unexplained" {
			alone += p
		} else {
			others = math.Max(others, p)
		}
		if l := c.Loss; l.Estimate.Valid() && !(l.Lower <= l.Estimate && l.Estimate <= l.Upper && l.Lower >= 0 && l.Upper <= 1) {
			t.Errorf("%s: loss %v (%v to %v)", c.Cause, l.Estimate, l.Lower, l.Upper)
		} else if !l.Estimate.Valid() && l.Why == "" {
			t.Errorf("%s: no loss, and nothing says why", c.Cause)
		}
		for _, e := range slices.Concat(c.For, c.Against) {
			if !e.LogOdds.Valid() || strings.Contains(e.Text, "NaN") || strings.Contains(e.Text, "Inf") {
				t.Errorf("%s: %+v", c.Cause, e)
			}
		}
		for _, n := range c.Next {
			if !n.InformationBits.Valid() || n.InformationBits < 0 || n.InformationBits > 5 {
				t.Errorf("%s: %+v", c.Cause, n)
			}
		}
	}
	if alone+others > 1+1e-6 {
		t.Errorf("within-baseline and unexplained have %.3f beside a cause of %.3f: they exclude it", alone, others)
	}
	d := r.Disposition
	if len(d.Because) == 0 || len(d.Wafers) != len(r.Wafers) {
		t.Errorf("proposal %s because %q, of %d wafers for %d", d.Proposal, d.Because, len(d.Wafers), len(r.Wafers))
	}
	for _, w := range d.Wafers {
		if len(w.Because) == 0 {
			t.Errorf("wafer %s: %s without a reason", w.ID, w.Proposal)
		}
	}
	if y := d.YieldIfFixed; y.Estimate.Valid() && !(y.Lower <= y.Estimate && y.Estimate <= y.Upper && y.Upper <= 1) {
		t.Errorf("yield if fixed %v (%v to %v)", y.Estimate, y.Lower, y.Upper)
	} else if !y.Estimate.Valid() && y.Why == "" {
		t.Error("no yield if fixed, and nothing says why")
	}
	if len(r.Cautions) == 0 || r.CausesBy == "" {
		t.Errorf("cautions %q, weighed by %q", r.Cautions, r.CausesBy)
	}
}

// demo is the report of the demo lot with its truth, made once.
var demo = sync.OnceValues(func() (*reports.Report, synth.Truth) {
	t := &testing.T{}
	dir, err := os.MkdirTemp("", "demo")
	if err != nil {
		panic(err)
	}
	defer os.RemoveAll(dir)
	var csv bytes.Buffer
	if err := synth.Demo().WriteWide(&csv, synth.Format{UnitRow: true, LimitRows: true, Comments: true}); err != nil {
		panic(err)
	}
	r := reportOf(t, dir, csv.Bytes(), synth.DemoProductYAML, config.DefaultSettings())
	return r, synth.DemoSpec().Truth(synth.DemoSeed)
})

// TestDemoCauses holds the report of the demo lot against its answer sheet: which
// cause, on which wafers, what it cost (yield without the cause less yield with it on
// the same random numbers), by the lot and by the wafer.
func TestDemoCauses(t *testing.T) {
	r, truth := demo()
	holdContract(t, r)
	first := r.Causes[0]
	if first.Cause != "epi-thickness" || first.Direction != "low" || first.Probability < 0.8 {
		t.Fatalf("first cause %s %s with %v; want epi-thickness low", first.Cause, first.Direction, first.Probability)
	}
	var epi synth.CauseTruth
	for _, c := range truth.Causes {
		if c.ID == "epi-thickness" {
			epi = c
		}
	}
	if !slices.Equal(first.Wafers, epi.Wafers) {
		t.Errorf("affected wafers %v, want %v", first.Wafers, epi.Wafers)
	}
	if l := first.Loss; math.Abs(float64(l.Estimate)-epi.Loss) > 0.004 || !(l.Lower-0.002 <= reports.Number(epi.Loss) && reports.Number(epi.Loss) <= l.Upper+0.002) {
		t.Errorf("loss %.4f (%.4f to %.4f), truth %.4f", l.Estimate, l.Lower, l.Upper, epi.Loss)
	}
	if y := r.Disposition.YieldIfFixed; math.Abs(float64(y.Estimate)-(truth.Yield+epi.Loss)) > 0.03 {
		t.Errorf("yield if fixed %.4f; with the epi as it should be %.4f", y.Estimate, truth.Yield+epi.Loss)
	}
	for _, test := range []string{"BVCEO", "COB30"} {
		if !slices.ContainsFunc(first.For, func(e reports.Evidence) bool { return e.Test == test && e.LogOdds > 1 }) {
			t.Errorf("%s does not speak for thin epi: %+v", test, first.For)
		}
	}
}

// TestDemoWafers holds the proposals wafer by wafer against what was done to them.
func TestDemoWafers(t *testing.T) {
	r, _ := demo()
	if r.Disposition.Proposal != "hold" {
		t.Errorf("proposal %s", r.Disposition.Proposal)
	}
	want := map[string]string{"04": "release-after-screen", "05": "release-after-screen", "18": "release-after-screen", "19": "release-after-screen",
		"23": "release-after-screen", "14": "retest", "15": "retest", "16": "retest", "17": "retest"}
	for _, id := range []string{"07", "08", "09", "10", "11", "12"} {
		want[id] = "hold"
	}
	for _, w := range r.Disposition.Wafers {
		expected := want[w.ID]
		if expected == "" {
			expected = "release"
		}
		if w.Proposal != expected {
			t.Errorf("wafer %s: %s because %q, want %s", w.ID, w.Proposal, w.Because, expected)
		}
	}
}

// small is a lot like the demo's with fewer wafers and dice, for speed.
func smallSpec(wafers int) synth.Spec {
	s := synth.DemoSpec().Healthy()
	s.Wafers, s.Grid.DieWidthMM, s.Grid.DieHeightMM, s.Lot = wafers, 4, 4, "SMALL"
	s.History = nil
	return s
}

// TestHealthyLot says of a lot with nothing wrong that nothing is wrong.
func TestHealthyLot(t *testing.T) {
	r := madeReport(t, smallSpec(12), 5, synth.DemoProductYAML, config.DefaultSettings())
	if c := r.Causes[0]; c.Cause != "within-baseline" || c.Probability < 0.5 {
		t.Errorf("first cause %s with %v", c.Cause, c.Probability)
	}
	if d := r.Disposition; d.Proposal != "release" {
		t.Errorf("proposal %s because %q", d.Proposal, d.Because)
	}
	best := config.DefaultSettings()
	best.Retest = "best"
	r = madeReport(t, smallSpec(12), 5, synth.DemoProductYAML, best)
	if p := r.Disposition.Proposal; strings.HasPrefix(p, "release") {
		t.Errorf("retest policy best: proposal %s", p)
	}
	for _, w := range r.Disposition.Wafers {
		if strings.HasPrefix(w.Proposal, "release") {
			t.Errorf("retest policy best: wafer %s %s", w.ID, w.Proposal)
		}
	}
	if len(r.Cautions) == 0 || !strings.Contains(r.Cautions[0], "best") {
		t.Errorf("retest policy best: first caution %q", r.Cautions)
	}
}

// TestContactLot has one site without contact on most wafers.
func TestContactLot(t *testing.T) {
	s := smallSpec(12)
	s.Causes = append(s.Causes, synth.Cause{ID: "probe-contact", Share: 0.5, Damage: synth.Open, Recover: 0.95,
		Wafers: []int{2, 3, 4, 5, 6, 7, 8}, Place: synth.Place{Sites: []int{2}}})
	truth := s.Truth(9)
	r := madeReport(t, s, 9, synth.DemoProductYAML, config.DefaultSettings())
	c := r.Causes[0]
	if c.Cause != "probe-contact" || c.Probability < 0.5 {
		t.Fatalf("first cause %s with %v", c.Cause, c.Probability)
	}
	loss := truth.Causes[len(truth.Causes)-1].Loss
	if !(float64(c.Loss.Lower) <= loss+0.005 && loss-0.005 <= float64(c.Loss.Upper)) {
		t.Errorf("loss %.4f (%.4f to %.4f), truth %.4f", c.Loss.Estimate, c.Loss.Lower, c.Loss.Upper, loss)
	}
	if r.Disposition.Proposal != "retest" {
		t.Errorf("proposal %s because %q", r.Disposition.Proposal, r.Disposition.Because)
	}
	if !strings.Contains(strings.Join(r.Cautions, "\n"), "High-voltage") {
		t.Errorf("a retest without its caution: %q", r.Cautions)
	}
}

// TestOddLots are lots of which little is known: each must come to a report that holds
// the contract, and to no release.
func TestOddLots(t *testing.T) {
	var csv bytes.Buffer
	if err := smallSpec(4).Generate(3).WriteWide(&csv, synth.Format{UnitRow: true, LimitRows: true}); err != nil {
		t.Fatal(err)
	}
	whole := csv.String()
	noBaseline := synth.DemoProductYAML[:strings.Index(synth.DemoProductYAML, "\nbaseline:")+1]
	pnp := strings.Replace(synth.DemoProductYAML, "polarity: npn", "polarity: pnp", 1)
	if pnp == synth.DemoProductYAML {
		t.Fatal("the demo product has another polarity")
	}
	noPlace := strings.NewReplacer("DIE_X", "REMARK_A", "DIE_Y", "REMARK_B").Replace(whole)
	productNoPlace := strings.Replace(synth.DemoProductYAML, "x: DIE_X, y: DIE_Y, ", "", 1)
	var one []string
	for _, line := range strings.SplitAfter(whole, "\n") {
		f := strings.SplitN(line, ",", 3)
		if len(f) < 3 || f[0] != "SMALL" || f[1] == "01" {
			one = append(one, line)
		}
	}
	for _, c := range []struct{ name, csv, product, proposal string }{
		{"no product file", whole, "", "cannot-say"},
		{"no baseline", whole, noBaseline, "cannot-say"},
		{"pnp", whole, pnp, ""},
		{"no coordinates", noPlace, productNoPlace, ""},
		{"one wafer", strings.Join(one, ""), synth.DemoProductYAML, ""},
		{"not judged", "WAFER,X,Y,BV\n1,0,0,25\n1,1,0,26\n2,0,0,25\n", "", "cannot-say"},
		{"no readings", "WAFER,X,Y,HBIN\n1,0,0,1\n1,1,0,2\n", "", "cannot-say"},
	} {
		t.Run(c.name, func(t *testing.T) {
			r := reportOf(t, t.TempDir(), []byte(c.csv), c.product, config.DefaultSettings())
			t.Logf("%s %v, %s because %q", r.Causes[0].Cause, r.Causes[0].Probability, r.Disposition.Proposal, r.Disposition.Because)
			if c.proposal != "" && r.Disposition.Proposal != c.proposal {
				t.Errorf("proposal %s because %q, want %s", r.Disposition.Proposal, r.Disposition.Because, c.proposal)
			}
		})
	}
}

// BenchmarkExplain weighs the causes of 25 wafers of about 4,000 dice, as the report
// does when all else is done.
func BenchmarkExplain(b *testing.B) {
	s := synth.DemoSpec()
	s.Grid = synth.Grid{DiameterMM: 150, EdgeExclusionMM: 3, DicePerWafer: 4000, SiteColumns: 4, SiteRows: 1}
	dir := b.TempDir()
	var csv bytes.Buffer
	if err := s.Generate(synth.DemoSeed).WriteWide(&csv, synth.Format{UnitRow: true, LimitRows: true}); err != nil {
		b.Fatal(err)
	}
	data, path := filepath.Join(dir, "lot.csv"), filepath.Join(dir, "product.yaml")
	os.WriteFile(data, csv.Bytes(), 0o644)
	os.WriteFile(path, []byte(synth.DemoProductYAML), 0o644)
	p, err := config.LoadProduct(path)
	if err != nil {
		b.Fatal(err)
	}
	batch, err := ingest.Read(context.Background(), []string{data}, ingest.Options{Product: p})
	if err != nil {
		b.Fatal(err)
	}
	d, err := NewDiagnosis(p)
	if err != nil {
		b.Fatal(err)
	}
	w := prepared(batch.Lots[0], p)
	w.in.Diagnosis = d
	b.ResetTimer()
	for range b.N {
		w.rep.Causes = nil
		if err := w.explain(context.Background()); err != nil {
			b.Fatal(err)
		}
	}
}
