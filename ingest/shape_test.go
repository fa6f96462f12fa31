package ingest

import (
	"fmt"
	"math"
	"math/rand/v2"
	"strconv"
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"
)

// What a shape takes for a number is the number that strconv.ParseFloat reads,
// which is correctly rounded, and it takes every cell of the same shape.
func TestShapeEqualsStrconv(t *testing.T) {
	r := rand.New(rand.NewPCG(3, 4))
	taken := 0
	for range 200_000 {
		shape := "-#.##########"[r.IntN(2):]
		shape = shape[:1+r.IntN(len(shape))]
		if p := r.IntN(9); p < len(shape) && !strings.Contains(shape, ".") {
			shape = shape[:p] + "." + shape[p:]
		}
		if r.IntN(4) == 0 {
			shape = `"` + shape + `"`
		}
		if r.IntN(4) == 0 {
			shape += "\r"
		}
		one, two := withDigits(shape, r), withDigits(shape, r)
		s := shapeOf([]byte(one), '.')
		number := strings.Trim(two, "\"\r")
		want, err := strconv.ParseFloat(number, 64)
		whole := !strings.Contains(number, ".")
		if s.length == 0 {
			if err == nil && len(two) <= 8 {
				t.Fatalf("%q has no shape", one)
			}
			continue
		}
		b := []byte(two + ",5,5,5,5\n")
		if !s.fits(s.word(b, 0)) || b[s.length] != ',' {
			t.Fatalf("%q does not fit the shape of %q", two, one)
		}
		if got := s.float(s.word(b, 0)); err != nil || math.Float64bits(got) != math.Float64bits(want) {
			t.Fatalf("%q by the shape of %q is %v; strconv gives %v, %v", two, one, got, want, err)
		}
		if got := s.int(s.word(b, 0)); whole && float64(got) != want {
			t.Fatalf("%q by the shape of %q is %d", two, one, got)
		}
		taken++
	}
	if taken < 50_000 {
		t.Errorf("only %d cells had a shape", taken)
	}
}

func withDigits(shape string, r *rand.Rand) string {
	return strings.Map(func(c rune) rune {
		if c == '#' {
			return '0' + r.Int32N(10)
		}
		return c
	}, shape)
}

// A cell with one byte changed fits only when it still is of the shape.
func TestShapeTakesNothingElse(t *testing.T) {
	for _, cell := range []string{"41.937", "-12.5", "7", "-3", ".5", "5.", "12345678", `"1.25"`, "3.1\r"} {
		s := shapeOf([]byte(cell), '.')
		if s.length != len(cell) {
			t.Fatalf("%q has no shape", cell)
		}
		for i := range cell {
			for c := range 256 {
				b := []byte(cell + ",,,,,,,,\n")
				b[i] = byte(c)
				digit := cell[i]-'0' <= 9
				if want := digit && byte(c)-'0' <= 9 || byte(c) == cell[i]; s.fits(s.word(b, 0)) != want {
					t.Errorf("%q by the shape of %q: fits %v", b[:len(cell)], cell, !want)
				}
			}
		}
	}
	b := []byte("00000000,0\n")
	if s := noShape; s.fits(s.word(b, 0)) && b[s.length] == ',' {
		t.Error("no shape fits zeros")
	}
}

// Cells that change their way of being written from row to row, and such that
// look like the one above but are not, give what the full reader gives.
func TestRowsLikeTheOneAbove(t *testing.T) {
	head := "LOT,WAFER,X,Y,PASS,NOTE,BV,ICBO\n"
	for name, rows := range map[string][]string{
		"quoted separator":   {`L1,1,0,0,P,"a,b",1.5,2.5`, `L1,1,1,0,P,a,b,1.5,2.5`, `L1,1,2,0,P,"a,b",1.5,2.5`},
		"quoted and not":     {`L1,1,0,0,P,"ab",1.5,2.5`, `L1,1,1,0,P,ab,1.5,2.5`, `"L1","1","2","0","P","ab","1.5","2.5"`, `"L1","1","3","0","F","ab","1.6","2.6"`},
		"long texts":         {`LOT-2210-77,1,0,0,P,note 123 a,1.5,2.5`, `LOT-2210-77,1,1,0,P,note 123 b,1.5,2.5`, `LOT-2210-77,1,2,0,P,note 123 b,1.5,2.5`, `LOT-2210-7,1,3,0,P,note 123,1.5,2.5`},
		"signs":              {`L1,1,-1,0,P,a,-1.5,2.5`, `L1,1,-2,-0,P,a,11.5,-0.0`, `L1,1,12,0,P,a,-1.5,2.5`, `L1,1,+3,0,P,a,+1.5,2.5`},
		"empty":              {`L1,1,1,0,P,a,1.5,2.5`, `L1,1,2,0,P,a,,2.5`, `L1,1,3,0,,,1.5,`, `L1,1,4,0,P,a,1.5,2.5`, `,1,5,0,P,a,1.5,2.5`},
		"zeros":              {`L1,1,1,0,P,a,,2.5`, `L1,1,2,0,P,a,00000000,2.5`, `L1,1,3,0,P,a,0,00000000`},
		"bytes above digits": {`L1,1,1,0,P,a,1.5,2.5`, `L1,1,2,0,P,a,1:5,2.5`, `L1,1,3,0,P,a,1.:,2.5`, `L1,1,4,0,P,a,1./,2.5`, "L1,1,5,0,P,a,1.\xb5,2.5", `L1,1,6,0,P,a,1 5,2.5`},
		"other flags":        {`L1,1,1,0,P,a,1.5,2.5`, `L1,1,2,0,PASS,a,1.5,2.5`, `L1,1,3,0,PX,a,1.5,2.5`, `L1,1,4,0,F,a,1.5,2.5`, `L1,1,5,0,,a,1.5,2.5`, `L1,1,6,0,P,a,1.5,2.5`, `L1,1,7,0,?!,a,1.5,2.5`, `L1,1,8,0,P,a,1.5,2.5`},
		"short and long":     {`L1,1,1,0,P,a,1.5,2.5`, `L1,1,2,0,P,a,1.5`, `L1,1,3,0,P,a,1.5,2.5,9`, `L1,1,4,0,P`, `L1,1,5,0,P,a,1.5,2.5,`, `L1,1,6,0,P,a,1.5,2.5`},
		"long numbers":       {`L1,1,1,0,P,a,1234567.5,0.12345678901234567`, `L1,1,2,0,P,a,12345678,9007199254740993`, `L1,1,100000000,0,P,a,123456789,1e5`, `L1,1,3,0,P,a,1.5e-9,12345678`},
	} {
		for _, end := range []string{"\n", "\r\n"} {
			text := head
			for range 3 { // each after each
				text += strings.Join(rows, "\n") + "\n"
			}
			text = strings.ReplaceAll(text, "\n", end)
			want := mustRead(t, text, Options{Workers: 1, careful: true})
			for _, block := range []int{0, 64} {
				got := mustRead(t, text, Options{Workers: 2, block: block})
				if d := cmp.Diff(stripped(views(want)), stripped(views(got)), exactly); d != "" {
					t.Errorf("%s, line end %q, block %d (-full reader +fast)\n%s", name, end, block, d)
				}
				if d := cmp.Diff(want.Tally, got.Tally); d != "" {
					t.Errorf("%s, line end %q, block %d: tally (-full reader +fast)\n%s", name, end, block, d)
				}
			}
		}
	}
}

// Lines that are no rows take no room in the columns, and rows behind them come
// to stand where they would without.
func TestMostRows(t *testing.T) {
	var text strings.Builder
	text.WriteString("LOT,WAFER,X,Y,BV\n")
	plain := text.String()
	for i := range 400 {
		row := fmt.Sprintf("L1,%d,%d,0,%d.5\n", 1+i/200, i%200, 30+i%7)
		plain += row
		text.WriteString(row)
		switch i % 5 {
		case 1:
			text.WriteString(strings.Repeat("\n", 50))
		case 2:
			text.WriteString(strings.Repeat("#\n", 20))
		case 3:
			text.WriteString(strings.Repeat("\r\n", 3))
		}
	}
	want := mustRead(t, plain, Options{Workers: 1, careful: true}).Lots[0]
	for _, block := range []int{0, 64, 300, 5000} {
		got := mustRead(t, text.String(), Options{Workers: 2, block: block}).Lots[0]
		for i := range want.Tests() {
			if !cmp.Equal(got.Values(i), want.Values(i), exactly) || !cmp.Equal(got.X(), want.X()) || got.Len() != want.Len() {
				t.Errorf("block %d: %v %v", block, got.X(), got.Values(i))
			}
		}
	}
	for lines, rows := range map[string]int{"\n\n\n1,2,3\n\n": 1, "#a\n#b\n1\n\n": 1, "1,2,3\n4,5,6\n": 2, "\r\n1\n2\n": 3} {
		if n := mostRows(&block{buf: []byte(lines), lines: strings.Count(lines, "\n")}, 3); n != rows {
			t.Errorf("%q may have %d rows, want %d", lines, n, rows)
		}
	}
}
