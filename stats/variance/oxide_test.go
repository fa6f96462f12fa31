package variance_test

import (
	"encoding/csv"
	"math"
	"os"
	"strconv"
	"testing"

	"kneepoint/stats/variance"
)

// oxide reads the Oxide data: thickness of the oxide layer in angstrom, 8 lots x
// 3 wafers x 3 sites (Littell, Milliken, Stroup and Wolfinger 1996; Pinheiro and
// Bates 2000, appendix A.20).
func oxide(t *testing.T) (lot, wafer, site []int32, y []float64) {
	t.Helper()
	f, err := os.Open("../../testdata/ingest/oxide.csv")
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	rows, err := csv.NewReader(f).ReadAll()
	if err != nil || len(rows) != 73 {
		t.Fatal(len(rows), err)
	}
	for _, r := range rows[1:] {
		code := func(s string) int32 { n, _ := strconv.Atoi(s); return int32(n) }
		lot, wafer, site = append(lot, code(r[0])), append(wafer, code(r[1])), append(site, code(r[2]))
		v, _ := strconv.ParseFloat(r[6], 64)
		y = append(y, v)
	}
	return lot, wafer, site, y
}

// REML of R's nlme::lme(Thickness ~ 1, random = ~1|Lot/Wafer): variances
// 129.90719, 35.86575 and 12.56944, mean 2000.1527778, as printed in the note
// beside the reference data.
func TestOxide(t *testing.T) {
	lot, wafer, _, y := oxide(t)
	d := variance.New([]variance.Level{{Name: "lot", Code: lot}, {Name: "wafer", Code: wafer}}, y)
	f := d.REML(0.95)
	for i, want := range []float64{129.90719, 35.86575, 12.56944} {
		if got := f.Components[i].Variance.Estimate; math.Abs(got/want-1) > 1e-6 {
			t.Errorf("%s: %v, want %v", f.Components[i].Level, got, want)
		}
	}
	if got := f.Mean.Estimate; math.Abs(got-2000.1527778) > 1e-7 {
		t.Errorf("mean %v", got)
	}
	// Log-likelihood -227.011 (Pinheiro and Bates 2000, section 4.2.1, from memory).
	if math.Abs(f.LogLik+227.011) > 5e-4 {
		t.Errorf("log-likelihood %v", f.LogLik)
	}
	if top, clear := f.Source(); top != 0 || clear {
		t.Errorf("source %d, clear %v: %s", top, clear, f.Text())
	}
}
