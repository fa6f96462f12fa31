package ingest

import (
	"math"
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"
)

// Cells of limits are read, or told with their place; in wide and long tables.
func TestLimitCells(t *testing.T) {
	nan := math.NaN()
	for _, c := range []struct {
		cell string // of the upper limit, the values being in nA
		want float64
		told bool
	}{
		{"5", 5, false}, {"5 nA", 5, false}, {"0.005uA", 5, false}, {"<5", 5, false}, {"<= 5 nA", 5, false}, {"≤5", 5, false}, {`"5,0"`, 5, false},
		{"2 500", 2500, false}, {`"2,500.5"`, 2500.5, false}, {`"1,000,000"`, 1e6, false}, {"5e-1", 0.5, false}, {"", nan, false}, {"-", nan, false},
		{"none", nan, false}, {"inf", nan, false}, {"1e99", nan, false},
		{`"2,500"`, nan, true}, {">=5", nan, true}, {">5", nan, true}, {"abc", nan, true}, {"5.0V", nan, true}, {"5 bananas", nan, true}, {"<", nan, true}, {"1,2,3"[:3] + "x", nan, true},
	} {
		if strings.Contains(c.cell, ",") && c.cell[0] != '"' {
			c.cell = `"` + c.cell + `"`
		}
		for shape, text := range map[string]string{
			"wide": table("WAFER,X,Y,I [nA]", "LSL,,,", "USL,,,"+c.cell, "1,0,0,1", "1,1,0,2"),
			"long": table("WAFER,X,Y,TEST,VALUE,UNIT,USL", "1,0,0,I,1.5,nA,"+c.cell, "1,1,0,I,2.5,nA,"+c.cell),
		} {
			l := mustRead(t, text, Options{}).Lots[0]
			f := findingBy(l.Findings(), "limit-not-understood")
			if d := cmp.Diff(unit("nA").ToSI(c.want), l.Tests()[0].Upper, exactly); d != "" || (f != nil) != c.told {
				t.Errorf("%s %s: upper %v, want %v nA; finding %v", shape, c.cell, l.Tests()[0].Upper, c.want, f)
			}
			line := map[string]string{"wide": ".csv:3: ", "long": ".csv:2: "}[shape]
			if f != nil && (f.Severity != Severe || !strings.Contains(f.Text, line) || !strings.Contains(f.Text, quote(strings.Trim(c.cell, `"`)))) {
				t.Errorf("%s %s: %+v", shape, c.cell, f)
			}
		}
	}
	l := mustRead(t, table("WAFER,X,Y,BV", "LSL,,,>=20 V", "1,0,0,21", "1,1,0,22"), Options{}).Lots[0]
	if x := l.Tests()[0]; x.Lower != 20 || x.Unit.Text != "V" || findingBy(l.Findings(), "unit-from-limit") == nil {
		t.Errorf("%+v %v", x, l.Findings())
	}
}

// findingBy gives the first finding of a code, nil when there is none.
func findingBy(fs []Finding, code string) *Finding {
	for i := range fs {
		if fs[i].Code == code {
			return &fs[i]
		}
	}
	return nil
}
