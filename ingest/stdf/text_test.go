package stdf

import (
	"math"
	"math/rand/v2"
	"strconv"
	"testing"
	"time"
)

// The scales are those of the standard's table, from memory: 15 f, 12 p, 9 n,
// 6 u, 3 m, 2 %, -3 K, -6 M, -9 G, -12 T. Kilo is written k here, as in SI.
func TestDisplayUnit(t *testing.T) {
	for _, c := range []struct {
		units  string
		scale  int8
		want   string
		factor float64
	}{
		{"A", 9, "nA", 1e9},
		{"A", 12, "pA", 1e12},
		{"A", 15, "fA", 1e15},
		{"V", 0, "V", 1},
		{"V", 3, "mV", 1e3},
		{"F", 12, "pF", 1e12},
		{"A", 6, "uA", 1e6},
		{"Ohm", -3, "kOhm", 1e-3},
		{"Hz", -6, "MHz", 1e-6},
		{"Hz", -9, "GHz", 1e-9},
		{"W", -12, "TW", 1e-12},
		{"", 0, "", 1},
		{"", 2, "%", 100},
		{"%", 2, "%", 100},
		{"V", 4, "1e-4 V", 1e4},
		{"V", -1, "1e1 V", 0.1},
		{"", 3, "1e-3", 1e3},
		{"nA", 9, "nA", 1}, // the prefix is there already
		{"mV", 3, "mV", 1},
		{"µA", 6, "µA", 1},
		{"m", 3, "mm", 1e3}, // metre, no bare prefix
		{"mA", 9, "1e-9 mA", 1e9},
	} {
		if got := DisplayUnit(c.units, c.scale); got != c.want {
			t.Errorf("DisplayUnit(%q, %d) is %q, want %q", c.units, c.scale, got, c.want)
		}
		if got := DisplayFactor(c.units, c.scale); got != c.factor {
			t.Errorf("DisplayFactor(%q, %d) is %g, want %g", c.units, c.scale, got, c.factor)
		}
	}
	l := Limits{Units: "A", ResScale: 9}
	if got := l.DisplayUnit(); got != "nA" {
		t.Errorf("Limits.DisplayUnit is %q", got)
	}
}

// The short way of Decimal gives what strconv gives, over all magnitudes and at the
// steps of two and of ten.
func TestDecimalIsShortest(t *testing.T) {
	check := func(f float32) {
		t.Helper()
		want, err := strconv.ParseFloat(strconv.FormatFloat(float64(f), 'g', -1, 32), 64)
		if err == nil && want == want && Decimal(f) != want {
			t.Fatalf("Decimal(%x) is %.17g, strconv says %.17g", math.Float32bits(f), Decimal(f), want)
		}
	}
	rnd := rand.New(rand.NewPCG(9, 4))
	for range 200_000 {
		check(math.Float32frombits(rnd.Uint32()))
		check(float32(float64(rnd.IntN(20_000_000)-10_000_000) * math.Pow10(-rnd.IntN(24))))
		check(float32(math.Pow(10, 40*rnd.Float64()-20)))
	}
	for e := -30.0; e < 30; e++ {
		for _, base := range []float64{2, 10} {
			f := float32(math.Pow(base, e))
			for range 40 {
				check(f)
				f = math.Nextafter32(f, -1)
			}
			for range 80 {
				check(-f)
				f = math.Nextafter32(f, math.MaxFloat32)
			}
		}
	}
}

func TestDecimal(t *testing.T) {
	for _, want := range []float64{0, 5e-9, 22.5, 0.1, 0.12, 3.6e-12, 80, -70, 1e10, 16777215, 123456, math.MaxFloat32, math.Inf(1), math.Inf(-1), 1e-45} {
		if got := Decimal(float32(want)); got != want && float32(got) != float32(want) {
			t.Errorf("Decimal(float32(%g)) is %.17g", want, got)
		} else if want != math.MaxFloat32 && want != 1e-45 && got != want {
			t.Errorf("Decimal(float32(%g)) is %.17g", want, got)
		}
	}
	if got := Decimal(float32(math.NaN())); got == got {
		t.Errorf("Decimal(NaN) is %g", got)
	}
	if got := Decimal(float32(math.Copysign(0, -1))); got != 0 || !math.Signbit(got) {
		t.Errorf("Decimal(-0) is %g", got)
	}
	// It keeps order: neighbours stay apart and in place.
	for _, f := range []float32{5e-9, 1, 0.1, 22.5, 1e30} {
		if up := math.Nextafter32(f, 1e38); !(Decimal(f) < Decimal(up)) {
			t.Errorf("Decimal(%g) is not below its neighbour's", f)
		}
	}
}

func TestCelsius(t *testing.T) {
	for _, c := range []struct {
		text string
		want float64
		ok   bool
	}{
		{"25", 25, true}, {"25.0", 25, true}, {"-40", -40, true}, {"+125 C", 125, true}, {"25C", 25, true}, {"25 degC", 25, true},
		{" 25°C ", 25, true}, {"25.", 25, true}, {"300 K", 300 - 273.15, true}, {"77F", 25, true}, {"25\x00", 25, true},
		{"", 0, false}, {"room", 0, false}, {"NaN", 0, false}, {"inf", 0, false}, {"25 bar", 0, false}, {"1e9", 0, false},
	} {
		got, ok := Celsius(c.text)
		if ok != c.ok || math.Abs(got-c.want) > 1e-9 {
			t.Errorf("Celsius(%q) is %g, %v, want %g, %v", c.text, got, ok, c.want, c.ok)
		}
	}
}

func TestTime(t *testing.T) {
	if !Time(0).IsZero() {
		t.Errorf("Time(0) is %v", Time(0))
	}
	// 1,700,000,000 s after the epoch is 2023-11-14 22:13:20 UTC.
	if got := Time(1_700_000_000); !got.Equal(time.Date(2023, 11, 14, 22, 13, 20, 0, time.UTC)) {
		t.Errorf("Time is %v", got)
	}
}

func TestMillimetres(t *testing.T) {
	for _, c := range []struct {
		units uint8
		want  float64
		ok    bool
	}{{0, 0, false}, {1, 101.6, true}, {2, 40, true}, {3, 4, true}, {4, 0.1016, true}, {5, 0, false}} {
		d, _, _, ok := (&WCR{WaferSize: 4, Units: c.units}).Millimetres()
		if ok != c.ok || math.Abs(d-c.want) > 1e-12 {
			t.Errorf("4 of unit %d are %g mm, %v, want %g", c.units, d, ok, c.want)
		}
	}
}

// Bytes above ASCII are Latin-1 unless they are UTF-8.
func TestLatin1(t *testing.T) {
	for in, want := range map[string]string{"\xb5A": "µA", "µA": "µA", "25\xb0C": "25°C", "plain": "plain"} {
		if got := text([]byte(in)); got != want {
			t.Errorf("%q is %q, want %q", in, got, want)
		}
		if got := new(interner).get([]byte(in)); got != want {
			t.Errorf("interned %q is %q, want %q", in, got, want)
		}
	}
}

func TestFlags(t *testing.T) {
	for _, c := range []struct {
		flag        TestFlag
		parm        ParmFlag
		pass, known bool
		usable      bool
	}{
		{0, 0, true, true, true},
		{Failed, AboveLimit, false, true, true},
		{Failed | PassFailInvalid, 0, false, false, true},
		{Alarm, 0, true, true, false},
		{ResultInvalid, 0, true, true, false}, // executed, no value taken: passed
		{Unreliable, 0, true, true, false},
		{Timeout, 0, true, true, false},
		{NotExecuted, 0, true, false, false},
		{Aborted, 0, true, false, false},
		{0, ScaleError, true, true, false},
		{0, DriftError, true, true, false},
		{0, Oscillation, true, true, false},
		{0, PassedAlternate | LowEqualPasses | HighEqualPasses, true, true, true},
	} {
		pass, known := c.flag.Pass()
		if pass != c.pass || known != c.known || Usable(c.flag, c.parm) != c.usable {
			t.Errorf("flags %02x, %02x: pass %v, known %v, usable %v", c.flag, c.parm, pass, known, Usable(c.flag, c.parm))
		}
	}
	if Failed != 0x80 || PassFailInvalid != 0x40 || Aborted != 0x20 || NotExecuted != 0x10 || PartResultInvalid != 0x10 || PartFailed != 8 {
		t.Error("flag bits moved")
	}
	if RetestID != 1 || RetestXY != 2 || AbnormalEnd != 4 || NoHigh != 0x80 || DefaultLow != 0x10 || HighEqualPasses != 0x80 {
		t.Error("flag bits moved")
	}
}
