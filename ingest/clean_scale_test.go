package ingest

import (
	"fmt"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"kneepoint/config"
)

// TestUnitFactor reads leakages of about 0.2 nA that the file gives in ampere,
// picoampere and nanoampere under a product file that says nA.
func TestUnitFactor(t *testing.T) {
	for _, c := range []struct {
		name, baseline string
		factor         float64
		seems          string // "" when nothing is wrong
	}{
		{"nA as said", "", 1, ""},
		{"A, against the limit", "", 1e-9, "in A"},
		{"pA, against the limit: room below an upper limit is no proof", "", 1e3, "in pA"},
		{"uA, against the baseline", "baseline: {tests: {ICBO: {median: 0.2, sigma: 0.02}}}\n", 1e-3, "in uA"},
		{"a lot ten times worse than the baseline", "baseline: {tests: {ICBO: {median: 0.2, sigma: 0.02}}}\n", 10, ""},
	} {
		p, err := config.ParseProduct("p.yaml", []byte("tests: [{name: ICBO, unit: nA, upper: 0.5}]\n"+c.baseline))
		if err != nil {
			t.Fatal(err)
		}
		var b strings.Builder
		b.WriteString("WAFER,X,Y,ICBO\n")
		for i := range 100 {
			fmt.Fprintf(&b, "1,%d,%d,%.4g\n", i%10, i/10, (0.2+0.001*float64(i%37))*c.factor)
		}
		l := mustRead(t, b.String(), Options{Product: p}).Lots[0]
		found := ""
		for _, f := range l.Findings() {
			if f.Code == "unit-factor" {
				found = f.Text
			}
		}
		if (found != "") != (c.seems != "") || !strings.Contains(found, c.seems) {
			t.Errorf("%s: finding %q, want one with %q", c.name, found, c.seems)
		}
	}
}

// TestOutlines turns one wafer of five and leaves a hole in another. The wafers
// have a flat at the bottom and two positions missing on the right, so that a turn
// shows.
func TestOutlines(t *testing.T) {
	var b strings.Builder
	b.WriteString("WAFER,X,Y,BV\n")
	for w := 1; w <= 5; w++ {
		for y := -8; y <= 8; y++ {
			for x := -8; x <= 8; x++ {
				if x*x+y*y > 68 || y < -5 {
					continue
				}
				px, py := x, y
				if w == 3 {
					px, py = y, -x // turned clockwise by a quarter
				}
				if w == 4 && x*x+y*y < 5 {
					continue
				}
				fmt.Fprintf(&b, "%d,%d,%d,25.%d\n", w, px, py, (x+y+20)%10)
			}
		}
	}
	path := filepath.Join(t.TempDir(), "lot.csv")
	os.WriteFile(path, []byte(b.String()), 0o644)
	batch, err := Read(t.Context(), []string{path}, Options{})
	if err != nil {
		t.Fatal(err)
	}
	texts := map[string]string{}
	for _, f := range batch.Lots[0].Findings() {
		texts[f.Code] = f.Text
	}
	if !strings.Contains(texts["wafer-turned"], "3 by 90 degrees") || strings.Contains(texts["wafer-turned"], ", ") {
		t.Errorf("wafer-turned: %q, want wafer 3 alone, by 90 degrees", texts["wafer-turned"])
	}
	if !strings.Contains(texts["map-gaps"], "4 (13)") {
		t.Errorf("map-gaps: %q, want wafer 4 with its 13 positions", texts["map-gaps"])
	}
}
