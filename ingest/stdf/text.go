package stdf

import (
	"math"
	"strconv"
	"strings"
	"time"
	"unicode/utf8"
)

// interner keeps one string for each text met, so that a unit or test name that
// comes a million times is made once. It is bounded: a file of a million
// different texts makes a million strings, and keeps the first ones.
type interner struct {
	m     map[string]string
	bytes int
}

const (
	maxInterned      = 1 << 15
	maxInternedBytes = 1 << 20
)

// get gives the text of b.
func (n *interner) get(b []byte) string {
	if len(b) == 0 {
		return ""
	}
	if s, ok := n.m[string(b)]; ok {
		return s
	}
	s := text(b)
	if len(n.m) < maxInterned && n.bytes < maxInternedBytes {
		if n.m == nil {
			n.m = make(map[string]string)
		}
		n.m[string(b)] = s
		n.bytes += len(b)
	}
	return s
}

// text makes a string of a C*n. The standard says ASCII; older testers write
// the letters above it (µ, °, Ω's neighbours) as Latin-1, which is turned into
// UTF-8 here, so that no invalid text gets further.
func text(b []byte) string { return Text(b) }

// Text makes UTF-8 of a text of the file: taken as it is where it is UTF-8, else
// as Latin-1.
func Text(b []byte) string {
	if utf8.Valid(b) {
		return string(b)
	}
	var s strings.Builder
	s.Grow(len(b) + 8)
	for _, c := range b {
		s.WriteRune(rune(c))
	}
	return s.String()
}

// trim takes off what fixed-width writers pad texts with.
func trim(s string) string { return strings.Trim(s, " \x00\t\r\n") }

// Time turns a time of a file into a time.Time; the zero Time when it is
// missing (0). The standard counts the seconds of the tester's local clock and
// does not say its zone: what comes back is that clock's reading, labelled UTC.
func Time(seconds uint32) time.Time {
	if seconds == 0 {
		return time.Time{}
	}
	return time.Unix(int64(seconds), 0).UTC()
}

// Decimal is the float64 whose decimal form is the shortest that gives f: a
// limit written as 5e-9 and stored in an R*4 comes back as 5e-9, not as
// 4.999999969612645e-9. It keeps order, so values and limits compare alike when
// both went through it, and NaN and infinities as they are.
func Decimal(f float32) float64 {
	if i := float32(int32(f)); i == f && i != 0 && i < 1<<24 && i > -1<<24 {
		return float64(i)
	}
	if d, ok := fewDigits(f); ok {
		return d
	}
	var buf [32]byte
	d, err := strconv.ParseFloat(string(strconv.AppendFloat(buf[:0], float64(f), 'g', -1, 32)), 64)
	if err != nil {
		return float64(f)
	}
	return d
}

// fewDigits is Decimal where six or seven digits are enough, which they are for
// what had no more when it was filed. Decimals of six digits stand further apart
// than float32 anywhere, so that the nearest one is the shortest decimal that gives
// f, if any of up to six digits does; if none does, the nearest of seven digits is,
// if it gives f. Powers of ten up to 1e22 are exact, so the division rounds once.
// Not ok within a millionth of where f ends, which is for the exact decimal to
// decide.
func fewDigits(f float32) (d float64, ok bool) {
	v := float64(f)
	a := math.Abs(v)
	if !(a > 1e-15 && a < 1e6) {
		return 0, false
	}
	exponent := int(math.Float32bits(f)>>23&0xff) - 127 // of two
	k := 5 - exponent*1233>>12                          // 1233/4096 is the decimal logarithm of 2
	if a*powersOfTen[k] >= 1e6 {
		k--
	}
	for ; k < len(powersOfTen); k++ {
		d = math.Copysign(math.Floor(a*powersOfTen[k]+0.5)/powersOfTen[k], v)
		if float32(d) == f && float32(d+(d-v)*1e-6) == f {
			return d, true
		}
		if a*powersOfTen[k] >= 1e6 {
			break
		}
	}
	return 0, false
}

var powersOfTen = [...]float64{1, 1e1, 1e2, 1e3, 1e4, 1e5, 1e6, 1e7, 1e8, 1e9, 1e10, 1e11,
	1e12, 1e13, 1e14, 1e15, 1e16, 1e17, 1e18, 1e19, 1e20, 1e21, 1e22}

// prefixes are the powers of ten that RES_SCAL and its like name. A scale s
// means that a value in the base unit times 10^s is the number to show.
var prefixes = map[int8]string{15: "f", 12: "p", 9: "n", 6: "u", 3: "m", 0: "", -3: "k", -6: "M", -9: "G", -12: "T"}

// DisplayUnit is the unit to show values in: the base unit with the prefix that
// the scale stands for. Units "A" and RES_SCAL 9 give "nA". Scale 2 is percent:
// "%" when the base unit is none or itself percent. A scale without a prefix is
// spelled as a power, "1e-4 V", as is one before a unit that has another prefix.
// A unit that already bears the prefix of its
// scale ("nA" with 9), as some testers write it, stays as it is.
func DisplayUnit(units string, scale int8) string {
	if scale == 0 {
		return units
	}
	if scale == 2 && (units == "" || units == "%") {
		return "%"
	}
	p, known := prefixes[scale]
	switch {
	case known && units != "" && bearsPrefix(units, p):
		return units
	case known && units != "" && !bearsAny(units):
		return p + units
	}
	return strings.TrimSpace("1e" + strconv.Itoa(-int(scale)) + " " + units)
}

// DisplayFactor is what a value in the base unit is multiplied by to be shown
// in DisplayUnit.
func DisplayFactor(units string, scale int8) float64 {
	if p, known := prefixes[scale]; known && scale != 0 && bearsPrefix(units, p) {
		return 1
	}
	f, err := strconv.ParseFloat("1e"+strconv.Itoa(int(scale)), 64)
	if err != nil {
		return 1
	}
	return f
}

// bearsAny says whether the unit has a prefix already.
func bearsAny(units string) bool {
	for _, p := range prefixes {
		if bearsPrefix(units, p) {
			return true
		}
	}
	return false
}

// bearsPrefix says whether the unit is a common electrical one with the prefix.
func bearsPrefix(units, prefix string) bool {
	base, ok := strings.CutPrefix(units, prefix)
	if !ok && prefix == "u" {
		if base, ok = strings.CutPrefix(units, "µ"); !ok {
			base, ok = strings.CutPrefix(units, "μ")
		}
	}
	if !ok || prefix == "" {
		return false
	}
	switch strings.ToLower(base) {
	case "a", "v", "w", "f", "h", "s", "hz", "ohm", "ohms", "ω", "amp", "amps", "volt", "volts", "sec":
		return true
	}
	return false
}

// Celsius reads MIR's TST_TEMP, a text without a fixed form: a number, in °C
// unless it says K or F.
func Celsius(temperature string) (float64, bool) {
	s := strings.TrimSpace(strings.ToLower(trim(temperature)))
	number := strings.TrimRight(s, "abcdefghijklmnopqrstuvwxyz°º. \t")
	// the full stop of "25." is part of neither
	v, err := strconv.ParseFloat(strings.TrimSpace(number), 64)
	if err != nil || v != v || v > 1e4 || v < -1e4 {
		return 0, false
	}
	switch unit := strings.Trim(s[len(number):], "°º. \t"); unit {
	case "", "c", "degc", "deg", "deg c", "celsius", "degrees", "degrees c":
		return v, true
	case "k", "kelvin":
		return v - 273.15, true
	case "f", "degf", "deg f", "fahrenheit":
		return (v - 32) / 1.8, true
	}
	return 0, false
}
