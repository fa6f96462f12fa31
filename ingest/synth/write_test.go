package synth

import (
	"bytes"
	"encoding/csv"
	"math"
	"strconv"
	"strings"
	"testing"
)

// read parses delimited text with the standard library.
func parse(t *testing.T, write func(*bytes.Buffer) error, sep rune) [][]string {
	t.Helper()
	var b bytes.Buffer
	if err := write(&b); err != nil {
		t.Fatal(err)
	}
	r := csv.NewReader(&b)
	r.Comma, r.Comment = sep, '#'
	rows, err := r.ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	return rows
}

// TestLayouts: wide, long and decimal comma hold the same values, and those are
// the lot's own.
func TestLayouts(t *testing.T) {
	s := DemoSpec()
	s.Wafers = 2
	s.Lot = `KP;5T,"0"`
	l := s.Generate(1)
	ids := len(idColumns)
	wide := parse(t, func(b *bytes.Buffer) error {
		return l.WriteWide(b, Format{Comments: true, UnitRow: true, LimitRows: true})
	}, ',')
	comma := parse(t, func(b *bytes.Buffer) error {
		return l.WriteWide(b, Format{Separator: ';', DecimalComma: true})
	}, ';')
	long := parse(t, func(b *bytes.Buffer) error {
		return l.WriteLong(b, Format{Separator: '\t', DecimalComma: true, UnitRow: true, LimitRows: true})
	}, '\t')
	if len(wide) != 4+l.Rows() || len(comma) != 1+l.Rows() || len(long) != 1+l.Rows()*len(s.Tests) {
		t.Fatalf("%d, %d and %d rows for %d measurements", len(wide), len(comma), len(long), l.Rows())
	}
	if wide[1][0] != "UNIT" || wide[1][ids] != "V" || wide[2][ids] != "35" || wide[3][ids] != "" || wide[3][ids+6] != "0.12" {
		t.Errorf("rows under the header: %v", wide[1:4])
	}
	row := 0
	for i := range l.Wafers {
		w := &l.Wafers[i]
		for j := range w.X {
			a, b := wide[4+row], comma[1+row]
			if a[0] != s.Lot || a[1] != w.ID || a[2] != strconv.Itoa(int(w.X[j])) || a[6] != strconv.Itoa(int(w.HardBin[j])) {
				t.Fatalf("row %d: %v", row, a[:ids])
			}
			for test := range s.Tests {
				c := long[1+row*len(s.Tests)+test]
				text := a[ids+test]
				if got := strings.Replace(b[ids+test], ",", ".", 1); got != text {
					t.Fatalf("row %d test %d: %q with a comma, %q with a point", row, test, got, text)
				}
				if got := strings.Replace(c[ids+1], ",", ".", 1); got != text || c[ids] != s.Tests[test].Name || c[ids+2] != s.Tests[test].Unit {
					t.Fatalf("row %d test %d: long row %v, wide %q", row, test, c, text)
				}
				v := w.Values[test][j]
				if got, err := strconv.ParseFloat(text, 64); math.IsNaN(v) != (text == "") || text != "" && (err != nil || got != v) {
					t.Fatalf("row %d test %d: %q for %v", row, test, text, v)
				}
			}
			row++
		}
	}
	if err := l.WriteWide(&bytes.Buffer{}, Format{DecimalComma: true}); err == nil {
		t.Error("a decimal comma between commas passes")
	}
}

// TestValueText: the fast path writes what strconv writes.
func TestValueText(t *testing.T) {
	for _, res := range []float64{1, 0.1, 0.02, 0.005, 1e-6, 20, 0, 1.0 / 3} {
		s := Spec{Tests: []Test{{Resolution: res}}}
		text := newText(Format{}, &s)
		for _, v := range []float64{0, 1, -1, 0.1, -0.02, 1234.56, 40.42, 999999, 1e17, -1e-9} {
			d := text.decimals[0]
			want := strconv.FormatFloat(v, 'f', d, 64)
			if d < 0 || math.Abs(v) >= 1e16 {
				want = strconv.FormatFloat(v, 'g', -1, 64)
			} else if x, _ := strconv.ParseFloat(want, 64); x == 0 {
				want = strconv.FormatFloat(0, 'f', d, 64) // no negative zero
			} else if math.Abs(v-x) > 0.4999*math.Pow10(-d) {
				continue // a tie, which readings at a resolution never are
			}
			if got := string(text.value(nil, 0, v)); got != want {
				t.Errorf("%v at %v: %q, want %q", v, res, got, want)
			}
		}
	}
}

// TestHistory: one row a wafer with the reactor load that the thin epi follows.
func TestHistory(t *testing.T) {
	l := Demo()
	rows := parse(t, func(b *bytes.Buffer) error { return l.WriteHistory(b) }, ',')
	if len(rows) != 26 || strings.Join(rows[0], ",") != "LOT,WAFER,reactor,load,pocket,boat_position" {
		t.Fatalf("%d rows under %v", len(rows), rows[0])
	}
	for i := 7; i <= 12; i++ {
		if rows[i][3] != rows[7][3] || rows[6][3] == rows[7][3] || rows[13][3] == rows[7][3] {
			t.Errorf("wafer %s is of load %s", rows[i][1], rows[i][3])
		}
	}
}
