package ingest

import (
	"fmt"
	"math"
	"math/rand/v2"
	"strconv"
	"strings"
	"testing"
)

// checkNumber compares the readers of a number with strconv.ParseFloat.
func checkNumber(t *testing.T, text string) {
	t.Helper()
	want, err := strconv.ParseFloat(text, 64)
	for _, tail := range []string{",", "\n", "\r\n", " ,", ",5,5,5,5"} {
		cell := []byte(text + tail + "\n")
		got, end, st := scanNumber(cell, 0, ',', '.')
		if plain, plainEnd, ok := plainNumber(cell, 0, ',', '.'); ok && (st != cellNumber || plainEnd != end || math.Float64bits(plain) != math.Float64bits(got)) {
			t.Fatalf("plainNumber(%q) = %v to %d; scanNumber gives %v to %d, status %d", cell, plain, plainEnd, got, end, st)
		}
		if err == nil {
			if st != cellNumber || math.Float64bits(got) != math.Float64bits(want) {
				t.Fatalf("scanNumber(%q) = %v, status %d; strconv gives %v", cell, got, st, want)
			}
			if c := cell[end]; c != ',' && c != '\n' {
				t.Fatalf("scanNumber(%q) ended at %q", cell, c)
			}
		} else if st != cellOdd {
			t.Fatalf("scanNumber(%q) = status %d; strconv gives %v", cell, st, err)
		}
	}
	got, st := parseNumber([]byte(text), '.')
	if err == nil && (st != cellNumber || math.Float64bits(got) != math.Float64bits(want)) {
		t.Fatalf("parseNumber(%q) = %v, status %d; strconv gives %v", text, got, st, want)
	}
	comma := strings.Replace(text, ".", ",", 1)
	got, _, st = scanNumber([]byte(comma+";\n"), 0, ';', ',')
	if err == nil && (st != cellNumber || math.Float64bits(got) != math.Float64bits(want)) {
		t.Fatalf("scanNumber(%q) with decimal comma = %v, status %d; want %v", comma, got, st, want)
	}
}

// The reference is Go's strconv.ParseFloat, which is correctly rounded.
func TestNumberEqualsStrconv(t *testing.T) {
	for _, s := range []string{"0", "-0", "+0", "-0.0", "1", "-1", ".5", "5.", "-.5e3", "00012.50", "41.9", "4.2e-9", "1e22", "1e23",
		"1e-22", "1e-23", "9007199254740991", "9007199254740992", "9007199254740993", "9007199254740993e-3", "123456789012345678",
		"1234567890123456789", "12345678901234567890", "18446744073709551615", "18446744073709551616", "99999999999999999999",
		"0.000000000000000000000000000001", "0.1e-400", "1e308", "1e309", "1.7976931348623157e308", "1.7976931348623159e308",
		"4.9e-324", "2.4703282292062327e-324", "2.2250738585072011e-308", "179769313486231580793e289", "1E+05", "1e005", "1e+0000000000001",
		"1e99999999999999999999", "1e-99999999999999999999", "0e99999999999", "6.02214076e23", "9.91e37", "41.900000000000006",
		"2.5000000000000000000000000000000000000000000000001", "000000000000000000000000000001.5"} {
		checkNumber(t, s)
	}
	r := rand.New(rand.NewPCG(1, 2))
	for range 200_000 {
		var s string
		switch r.IntN(4) {
		case 0: // any float64, shortest form
			f := math.Float64frombits(r.Uint64())
			if math.IsNaN(f) || math.IsInf(f, 0) {
				continue
			}
			s = strconv.FormatFloat(f, "eEfg"[r.IntN(4)], -1, 64)
		case 1: // what testers write
			s = strconv.FormatFloat(r.NormFloat64()*math.Pow(10, float64(r.IntN(20)-12)), "efg"[r.IntN(3)], r.IntN(18), 64)
		case 2: // around 2^53 and around the exact powers
			s = fmt.Sprintf("%de%d", uint64(1<<53)-8+r.Uint64N(16), r.IntN(60)-30)
		default: // digits with a point anywhere
			d := strconv.FormatUint(r.Uint64()>>r.IntN(64), 10)
			p := r.IntN(len(d) + 1)
			s = d[:p] + "." + d[p:]
		}
		checkNumber(t, s)
	}
}

func TestCellsThatAreNoPlainNumbers(t *testing.T) {
	for text, want := range map[string]status{
		"": cellEmpty, "NA": cellMissing, "n/a": cellMissing, "NaN": cellMissing, "null": cellMissing, "-": cellMissing, "--": cellMissing,
		"OVL": cellOver, "OVERFLOW": cellOver, "inf": cellOver, "-Infinity": cellUnder, "1e999": cellOver, "-1e999": cellUnder,
		"abc": cellBad, "1.2.3": cellBad, "1,5": cellBad, "0x10": cellBad, "1_000": cellBad, "1e": cellBad, "e5": cellBad, ".": cellMissing,
		"+": cellBad, "1 2": cellBad, "12V": cellBad, strings.Repeat("x", 99): cellBad,
	} {
		if _, got := parseNumber([]byte(text), '.'); got != want {
			t.Errorf("parseNumber(%q): status %d, want %d", text, got, want)
		}
		wantScan := cellOdd
		if want == cellEmpty {
			wantScan = cellEmpty
		}
		if _, _, got := scanNumber([]byte(text+";\n"), 0, ';', '.'); got != wantScan {
			t.Errorf("scanNumber(%q): status %d, want %d", text, got, wantScan)
		}
	}
}

func TestInt(t *testing.T) {
	for _, c := range []struct {
		text string
		fast status
		want int32
		st   status
	}{
		{"7", cellNumber, 7, cellNumber}, {"-12", cellNumber, -12, cellNumber}, {"", cellEmpty, Missing, cellEmpty},
		{"1.0", cellOdd, 1, cellNumber}, {"+3", cellOdd, 3, cellNumber}, {"2e1", cellOdd, 20, cellNumber}, {"1.5", cellOdd, Missing, cellBad},
		{"2147483647", cellOdd, math.MaxInt32, cellNumber}, {"2147483648", cellOdd, Missing, cellBad}, {"-2147483648", cellOdd, Missing, cellBad},
		{"-", cellOdd, Missing, cellMissing}, {"A", cellOdd, Missing, cellBad}, {"999999999", cellNumber, 999999999, cellNumber},
	} {
		v, _, st := scanInt([]byte(c.text+",\n"), 0, ',')
		if plain, end, ok := plainInt([]byte(c.text+",5,5,5,5\n"), 0, ','); ok && (c.fast != cellNumber || plain != c.want || end != len(c.text)) {
			t.Errorf("plainInt(%q) = %d", c.text, plain)
		}
		if st != c.fast || st == cellNumber && v != c.want {
			t.Errorf("scanInt(%q) = %d, status %d", c.text, v, st)
		}
		if v, st := parseInt([]byte(c.text), '.'); v != c.want || st != c.st {
			t.Errorf("parseInt(%q) = %d, status %d; want %d, %d", c.text, v, st, c.want, c.st)
		}
	}
}

func FuzzNumber(f *testing.F) {
	for _, s := range []string{"41.9", "-1e-9", "9007199254740993", "1e999", "0x1p4", "..", "1_0"} {
		f.Add(s)
	}
	f.Fuzz(func(t *testing.T, s string) {
		if strings.ContainsAny(s, ",\n\r\x00 ") || strings.ContainsAny(s, "xXpP_") || word([]byte(s)) != cellBad {
			return // not one cell, or strconv's extra spellings, or a word
		}
		if _, err := strconv.ParseFloat(s, 64); err != nil && !strings.Contains(err.Error(), "range") {
			if _, st := parseNumber([]byte(s), '.'); st == cellNumber {
				t.Fatalf("parseNumber takes %q", s)
			}
			if _, _, st := scanNumber([]byte(s+",\n"), 0, ',', '.'); st == cellNumber {
				t.Fatalf("scanNumber takes %q", s)
			}
			return
		}
		checkNumber(t, s)
	})
}

// The reader by the word takes what most cells are.
func TestPlainNumbersAreTaken(t *testing.T) {
	for text, want := range map[string]float64{"41.937": 41.937, "-0.25": -0.25, "7": 7, "0.0934121": 0.0934121, "-1.2345e-09": -1.2345e-9, "1234567.25": 1234567.25,
		".5": .5, "5.": 5, "1.5E+3": 1500, "-0": math.Copysign(0, -1)} {
		for _, end := range []string{",5,5,5,5\n", "\n5,5,5,5\n", "\r\n5,5,5,5\n"} {
			if v, _, ok := plainNumber([]byte(text+end), 0, ',', '.'); !ok || math.Float64bits(v) != math.Float64bits(want) {
				t.Errorf("plainNumber(%q) = %v, %v", text+end, v, ok)
			}
		}
	}
}
