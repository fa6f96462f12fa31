package build

import (
	"fmt"
	"strings"
	"testing"

	"kneepoint/config"
)

// wafersOf writes wafers of 100 dice, of which failing[w] fail their bin.
func wafersOf(failing ...int) string {
	var b strings.Builder
	b.WriteString("WAFER,X,Y,HBIN,BV\n")
	for w, bad := range failing {
		for i := range 100 {
			bin := 1
			if i < bad {
				bin = 5
			}
			fmt.Fprintf(&b, "%d,%d,%d,%d,25.%d\n", w+1, i%10, i/10, bin, i%7)
		}
	}
	return b.String()
}

// TestStandsOut marks a dead wafer among whole ones, and among few; it marks no
// wafer that chance explains.
func TestStandsOut(t *testing.T) {
	for _, c := range []struct {
		name    string
		failing []int
		want    string // marks by wafer: l, h or .
	}{
		{"a dead wafer, the others whole", []int{0, 0, 0, 100, 0, 0, 0, 0}, "...l...."},
		{"all whole", []int{0, 0, 0, 0, 0}, "....."},
		{"chance", []int{5, 3, 8, 4, 6, 2}, "......"},
		{"three wafers, one dead", []int{0, 100, 2}, ".l."},
		{"two like wafers", []int{4, 6}, ".."},
		{"one wafer", []int{50}, "."},
	} {
		r := makeReport(t, write(t, wafersOf(c.failing...)), "", config.DefaultSettings())
		got := ""
		for _, w := range r.Wafers {
			switch w.Stands {
			case "low":
				got += "l"
			case "high":
				got += "h"
			default:
				got += "."
			}
		}
		if strings.ReplaceAll(got, "h", ".") != c.want {
			t.Errorf("%s: %s, want %s", c.name, got, c.want)
		}
	}
}

// TestNotJudged gives no yield where nothing tells passing dice from failing
// ones: a made-up 100 % would be believed.
func TestNotJudged(t *testing.T) {
	r := makeReport(t, write(t, "WAFER,X,Y,BV\n1,0,0,25\n1,1,0,24\n1,2,0,26\n"), "", config.DefaultSettings())
	if r.Yield.Estimate.Valid() || r.Yield.Why == "" || r.Wafers[0].Yield.Estimate.Valid() || r.Tests[0].Loss.First.Valid() {
		t.Errorf("yield %+v, wafer %+v, loss %+v; want none, with a reason", r.Yield.Interval, r.Wafers[0].Yield, r.Tests[0].Loss)
	}
	for _, q := range r.Quality {
		if q.Code == "not-judged" && q.Severity == "warning" {
			return
		}
	}
	t.Errorf("no warning in %+v", r.Quality)
}

// TestGrossOutliers keeps shorted dice out of mean, fit and capability, and
// counts them as losses.
func TestGrossOutliers(t *testing.T) {
	var b strings.Builder
	b.WriteString("WAFER,X,Y,BV\n")
	for w := 1; w <= 4; w++ {
		for i := range 400 {
			v := 25 + 0.05*float64((i*37+w*11)%41-20) // 24 to 26
			if i%50 == 7 {
				v = 1.5
			}
			fmt.Fprintf(&b, "%d,%d,%d,%.2f\n", w, i%20, i/20, v)
		}
	}
	r := makeReport(t, write(t, b.String()), product(t, "product: P\ntests: [{name: BV, unit: V, lower: 20, upper: 30}]\n"), config.DefaultSettings())
	test := r.Tests[0]
	if test.Loss.FirstDice != 32 || test.Fit.AsideLow != 32 {
		t.Errorf("%d dice lost, %d set aside; want 32 each", test.Loss.FirstDice, test.Fit.AsideLow)
	}
	// The body is uniform over 24 to 26: sigma 2/sqrt(12) = 0.58, so Pp near 10/(6*0.58) = 2.9.
	if pp := float64(test.Capability.Pp.Estimate); pp < 2.6 || pp > 3.1 {
		t.Errorf("Pp %v, want about 2.8", pp)
	}
	if !strings.Contains(test.Capability.Over, "32 gross outliers") {
		t.Errorf("capability is over %q; want the outliers told", test.Capability.Over)
	}
}
