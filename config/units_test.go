package config

import (
	"math"
	"math/rand/v2"
	"strconv"
	"strings"
	"testing"
)

// SI prefixes: BIPM, The International System of Units (SI Brochure), 9th
// edition, 2019, table 7; values from memory.
var siPrefixes = []struct {
	symbol string
	exp    int
}{{"f", -15}, {"p", -12}, {"n", -9}, {"u", -6}, {"µ", -6}, {"μ", -6}, {"m", -3}, {"", 0}, {"k", 3}, {"M", 6}, {"G", 9}}

func TestParseUnitSI(t *testing.T) {
	bases := map[string]string{"V": "V", "A": "A", "ohm": "ohm", "Ohm": "ohm", "\u03a9": "ohm", "\u2126": "ohm",
		"F": "F", "s": "s", "Hz": "Hz", "m": "m", "W": "W"}
	for symbol, base := range bases {
		for _, p := range siPrefixes {
			text := p.symbol + symbol
			got, err := ParseUnit(text)
			if err != nil || got != (Unit{text, base, p.exp}) {
				t.Errorf("ParseUnit(%q) = %+v, %v; want base %s, exponent %d", text, got, err, base, p.exp)
			}
		}
	}
}

// Spellings of testers and of people: common practice, no source.
func TestParseUnitSpellings(t *testing.T) {
	for _, c := range []struct {
		text, base string
		exp        int
	}{
		{"", "ratio", 0}, {"1", "ratio", 0}, {"-", "ratio", 0}, {"ratio", "ratio", 0}, {"%", "ratio", -2},
		{"percent", "ratio", -2}, {"ppm", "ratio", -6}, {"A/A", "ratio", 0},
		{"angstrom", "m", -10}, {"Angstroms", "m", -10}, {"Å", "m", -10}, {"\u212b", "m", -10}, {"A", "A", 0}, {"a", "A", 0},
		{"um", "m", -6}, {"UM", "m", -6}, {"MM", "m", -3}, {"cm", "m", -2}, {"micron", "m", -6},
		{"degC", "degC", 0}, {"°C", "degC", 0},
		{"v", "V", 0}, {"volt", "V", 0}, {"Volts", "V", 0}, {"VOLTS", "V", 0}, {"mv", "V", -3}, {"KV", "V", 3}, {"kv", "V", 3},
		{"mV", "V", -3}, {"MV", "V", 6}, {"millivolts", "V", -3}, {"MegaVolt", "V", 6},
		{"NA", "A", -9}, {"UA", "A", -6}, {"PA", "A", -12}, {"FA", "A", -15}, {"na", "A", -9}, {"ma", "A", -3},
		{"amp", "A", 0}, {"Amps", "A", 0}, {"nAmps", "A", -9}, {"microamps", "A", -6}, {"MA", "A", 6},
		{"PF", "F", -12}, {"pf", "F", -12}, {"FF", "F", -15}, {"f", "F", 0}, {"pFarad", "F", -12},
		{"ohms", "ohm", 0}, {"OHM", "ohm", 0}, {"KOHM", "ohm", 3}, {"kOhms", "ohm", 3}, {"MOHM", "ohm", 6}, {"mohm", "ohm", -3},
		{"mOhm", "ohm", -3}, {"k ohm", "ohm", 3}, {"ohm/sq", "ohm", 0}, {"kΩ/□", "ohm", 3},
		{"hz", "Hz", 0}, {"HZ", "Hz", 0}, {"KHZ", "Hz", 3}, {"KHz", "Hz", 3}, {"MHZ", "Hz", 6}, {"mhz", "Hz", 6}, {"mHz", "Hz", -3}, {"ghz", "Hz", 9},
		{"sec", "s", 0}, {"mSec", "s", -3}, {"MSEC", "s", -3}, {"US", "s", -6}, {"NS", "s", -9}, {"us", "s", -6},
		{"w", "W", 0}, {"UW", "W", -6}, {" nA ", "A", -9}, {"[nA]", "A", -9}, {"(V)", "V", 0},
	} {
		got, err := ParseUnit(c.text)
		if err != nil || got.Base != c.base || got.Exp != c.exp {
			t.Errorf("ParseUnit(%q) = %s 10^%d, %v; want %s 10^%d", c.text, got.Base, got.Exp, err, c.base, c.exp)
		}
	}
	for text, want := range map[string]string{
		"S": "siemens", "mS": "siemens", "MS": "siemens", "nS": "siemens", "Mv": "milli or mega", "M": "prefix",
		"K": "unknown unit", "u": "unknown unit", "Pa": "unknown unit", "volz": "unknown unit", "dB": "unknown unit",
		"V2": "unknown unit", "5V": "unknown unit", "-A": "unknown unit", "\xff": "unknown unit", "cV": "unknown unit", "Nm": "unknown unit",
	} {
		if got, err := ParseUnit(text); err == nil || !strings.Contains(err.Error(), want) || got.Given() {
			t.Errorf("ParseUnit(%q) = %+v, %v; want an error with %q", text, got, err, want)
		}
	}
}

func TestParseUnitsCapitals(t *testing.T) {
	exps := func(list string) (out []int) {
		units, errs := ParseUnits(strings.Split(list, " "))
		for i, u := range units {
			if errs[i] != nil {
				u.Exp = 99
			}
			out = append(out, u.Exp)
		}
		return out
	}
	for list, want := range map[string][]int{
		"V NA MV MOHM MS": {0, -9, -3, 6, -3}, // NA: the writer has capitals only
		"V nA MV MOHM MS": {0, -9, 6, 6, 99},  // a small letter: SI as it stands
		"V MV":            {0, 6},             // no evidence
		"MV PF mA":        {6, -12, -3},
	} {
		if got := exps(list); len(got) != len(want) || !equalInts(got, want) {
			t.Errorf("ParseUnits(%s): exponents %v, want %v", list, got, want)
		}
	}
	u, _ := ParseUnit("MV")
	if alt, ok := u.Capitals(); !ok || alt.Exp != -3 {
		t.Errorf("Capitals of MV: %v, %v", alt, ok)
	}
	for _, s := range []string{"mV", "NA", "MHZ", "Mohm", "V"} {
		u, _ := ParseUnit(s)
		if _, ok := u.Capitals(); ok {
			t.Errorf("Capitals of %s differs", s)
		}
	}
}

func equalInts(a, b []int) bool {
	for i := range a {
		if a[i] != b[i] {
			return false
		}
	}
	return true
}

func TestToSI(t *testing.T) {
	for _, c := range []struct {
		v    float64
		unit string
		want float64
	}{
		{4.2, "nA", 4.2e-9}, {10, "uA", 1e-5}, {3.6, "pF", 3.6e-12}, {10, "kohm", 1e4}, {1, "MHz", 1e6},
		{5, "%", 0.05}, {150, "angstrom", 1.5e-8}, {0.12, "V", 0.12}, {70, "", 70}, {-3, "mV", -0.003}, {25, "degC", 25},
	} {
		u, err := ParseUnit(c.unit)
		if err != nil {
			t.Fatal(err)
		}
		if got := u.ToSI(c.v); got != c.want {
			t.Errorf("%v %s = %v, want %v", c.v, c.unit, got, c.want)
		}
	}
	for _, v := range []float64{math.NaN(), math.Inf(1), math.Inf(-1)} {
		u := Unit{"nA", "A", -9}
		if got := u.FromSI(u.ToSI(v)); got != v && !(math.IsNaN(v) && math.IsNaN(got)) {
			t.Errorf("%v came back as %v", v, got)
		}
	}
	if v := (Unit{}).ToSI(4.2); v != 4.2 {
		t.Errorf("a unit that is not given changed 4.2 to %v", v)
	}
}

// Every decimal of up to 15 digits becomes the float64 nearest to the shifted
// decimal (strconv parses decimals correctly rounded), and comes back as written.
func TestConversionMovesTheDecimalPoint(t *testing.T) {
	r := rand.New(rand.NewPCG(1, 2))
	exps := []int{-15, -12, -10, -9, -6, -3, -2, 0, 3, 6, 9, -20, 20}
	plain := 0
	const tries = 400_000
	for i := range tries {
		digits := 1 + r.IntN(15)
		mantissa := strconv.FormatInt(r.Int64N(int64(math.Pow10(digits))), 10)
		e := r.IntN(26) - digits - 11
		parse := func(e int) float64 {
			v, err := strconv.ParseFloat(mantissa+"e"+strconv.Itoa(e), 64)
			if err != nil {
				t.Fatal(err)
			}
			return v
		}
		v := parse(e)
		u := Unit{"", "A", exps[i%len(exps)]}
		si := u.ToSI(v)
		if want := parse(e + u.Exp); si != want {
			t.Fatalf("%v with exponent %d is %v, want %v", v, u.Exp, si, want)
		}
		if got := u.FromSI(si); got != v {
			t.Fatalf("%v with exponent %d came back as %v", v, u.Exp, got)
		}
		if scale10(v, u.Exp) == si {
			plain++
		}
	}
	if plain == tries {
		t.Error("a plain product was always right: this test cannot fail")
	}
	u := Unit{"nA", "A", -9}
	if s := strconv.FormatFloat(u.FromSI(u.ToSI(4.2)), 'g', -1, 64); s != "4.2" {
		t.Errorf("4.2 nA shows as %s", s)
	}
}

// A reading at a limit is at it whatever the units of the two.
func TestSameValueInAnyUnit(t *testing.T) {
	for _, c := range []struct {
		a  float64
		ua string
		b  float64
		ub string
	}{{0.01, "nA", 10, "pA"}, {0.01, "nA", 1e-11, "A"}, {0.07, "mA", 70, "uA"}, {120, "mV", 0.12, "V"}, {3.6, "pF", 0.0036, "nF"}, {7, "%", 0.07, ""}} {
		ua, _ := ParseUnit(c.ua)
		ub, _ := ParseUnit(c.ub)
		if x, y := ua.ToSI(c.a), ub.ToSI(c.b); x != y {
			t.Errorf("%v %s is %v, %v %s is %v", c.a, c.ua, x, c.b, c.ub, y)
		}
	}
}

// FromSI inverts ToSI wherever a value exists: SI -> unit -> SI is stable.
func TestFromSIStable(t *testing.T) {
	r := rand.New(rand.NewPCG(3, 4))
	for range 200_000 {
		u := Unit{"", "A", []int{-15, -12, -10, -9, -6, -3, -2, 3, 6, 9}[r.IntN(10)]}
		v := u.ToSI((r.Float64() - 0.5) * math.Pow10(r.IntN(30)-15))
		if got := u.ToSI(u.FromSI(v)); got != v {
			t.Fatalf("exponent %d: %v became %v", u.Exp, v, got)
		}
	}
}

func TestCompatible(t *testing.T) {
	na, _ := ParseUnit("nA")
	ua, _ := ParseUnit("µA")
	v, _ := ParseUnit("V")
	ratio, _ := ParseUnit("")
	if !na.Compatible(ua) || na.Compatible(v) || v.Compatible(ratio) || !v.Compatible(Unit{}) || !(Unit{}).Compatible(v) {
		t.Error("Compatible is wrong")
	}
	if (Unit{}).Given() || !ratio.Given() || ratio.String() != "" || ua.String() != "µA" {
		t.Error("Given or String is wrong")
	}
}

func FuzzParseUnit(f *testing.F) {
	for _, s := range []string{"nA", "µA", "kΩ", "MV", "ohm/sq", "[V]", "%", "", "\xff", "MSEC"} {
		f.Add(s)
	}
	f.Fuzz(func(t *testing.T, s string) {
		u, err := ParseUnit(s)
		if (err == nil) != u.Given() {
			t.Fatalf("ParseUnit(%q) = %+v, %v", s, u, err)
		}
		if err != nil {
			if strings.ContainsAny(err.Error(), "\n\r") {
				t.Fatalf("error of several lines: %q", err)
			}
			return
		}
		again, err := ParseUnit(u.Text)
		if err != nil || again != u {
			t.Fatalf("ParseUnit(%q).Text = %q reads as %+v, %v", s, u.Text, again, err)
		}
	})
}

func BenchmarkToSI(b *testing.B) {
	u := Unit{"nA", "A", -9}
	s := 0.0
	for i := 0; b.Loop(); i++ {
		s += u.ToSI(float64(i))
	}
	sink = s
}

func BenchmarkToSILongDigits(b *testing.B) {
	u := Unit{"nA", "A", -9}
	s := 0.0
	for i := 0; b.Loop(); i++ {
		s += u.ToSI(math.Sqrt(float64(i)))
	}
	sink = s
}

func BenchmarkFromSI(b *testing.B) {
	u := Unit{"nA", "A", -9}
	s := 0.0
	for i := 0; b.Loop(); i++ {
		s += u.FromSI(float64(i) / 1e9)
	}
	sink = s
}

var sink float64
