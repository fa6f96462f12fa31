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

// Numbers with thousands apart, and with their unit in the cell.
func TestQuantitiesInCells(t *testing.T) {
	for _, c := range []struct {
		name, text string
		want       []float64
	}{
		{"thousands, decimal comma", table("Los;Scheibe;X;Y;A", "L;1;0;0;1.120,5", "L;1;1;0;999,5"), []float64{1120.5, 999.5}},
		{"thousands in quotes", table("WAFER,X,Y,A", `1,0,0,"1,234.5"`, "1,1,0,999.5"), []float64{1234.5, 999.5}},
		{"all in thousands", table("WAFER,X,Y,A", `1,0,0,"1,234.5"`, `1,1,0,"2,345.5"`), []float64{1234.5, 2345.5}},
		{"unit in every cell", table("WAFER,X,Y,A", "1,0,0,1.2nA", "1,1,0,3.5 nA"), []float64{1.2e-9, 3.5e-9}},
		{"units of one dimension", table("WAFER,X,Y,A", "1,0,0,1.2nA", "1,1,0,350pA", "1,2,0,1uA"), []float64{1.2e-9, 350e-12, 1e-6}},
		{"unit in a cell of a column with a unit", table("WAFER,X,Y,A [nA]", "1,0,0,1.2", "1,1,0,350pA"), []float64{1.2e-9, 350e-12}},
		{"unit in a cell of a long table", table("WAFER,X,Y,TEST,VALUE,UNIT", "1,0,0,A,1.2,nA", "1,1,0,A,350pA,nA"), []float64{1.2e-9, 350e-12}},
	} {
		l := mustRead(t, c.text, Options{}).Lots[0]
		if testNames(l) != "A" || !cmp.Equal(c.want, l.Values(0), exactly) {
			t.Errorf("%s: tests %q %v, want %v", c.name, testNames(l), l.Values(0), c.want)
		}
	}
	l := mustRead(t, table("WAFER,X,Y,POCKETNAME,A", "1,0,0,5A,1.5", "1,1,0,6A,2.5"), Options{}).Lots[0]
	if testNames(l) != "A" {
		t.Errorf("names taken for quantities: %s", testNames(l))
	}
}
