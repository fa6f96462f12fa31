package config

import (
	"math"
	"strconv"
	"strings"
)

// Unit is a unit of measurement as written in a file: an SI prefix on one of
// V, A, ohm, F, s, Hz, m, W, a temperature in degrees Celsius, or a ratio.
//
// The prefix is kept as a power of ten so that conversion moves the decimal
// point exactly: 4.2 nA reads as the float64 nearest to 4.2e-9, and shows as 4.2
// again. Convert with ToSI and FromSI, never with a factor of one's own: two
// ways of rounding would part a reading from the limit that it equals.
type Unit struct {
	Text string // as written, for showing: "nA", "uA", "ohm", "" for a ratio
	Base string // "V", "A", "ohm", "F", "s", "Hz", "m", "W", "degC", "ratio"; "" for the zero value (not given)
	Exp  int    // value in Base = value in Unit * 10^Exp
}

// Given reports whether there is a unit at all. A ratio is a unit.
func (u Unit) Given() bool { return u.Base != "" }

// Compatible reports whether values in u and o convert into one another: the
// bases are the same, whatever the prefixes. A unit that is not given fits any.
func (u Unit) Compatible(o Unit) bool {
	return u.Base == o.Base || !u.Given() || !o.Given()
}

// String returns the unit as it was written; "" for a ratio written as nothing
// and for a unit that is not given.
func (u Unit) String() string { return u.Text }

// ToSI converts a value in u to the base unit: v times 10^Exp.
//
// Rule: the decimal point moves. A v that is a decimal of up to 15 significant
// digits, which is what files hold, becomes the float64 nearest to the shifted
// decimal, so that 0.01 nA, 10 pA and 1e-11 A are one and the same number and a
// reading at a limit is at it in any unit. (0.01/1e9 is the float64 above 1e-11.)
// Any other v is multiplied or divided by an exact power of ten, one rounding.
//
// NaN and infinities pass through. A unit that is not given leaves v as it is;
// degrees Celsius stay degrees Celsius.
func (u Unit) ToSI(v float64) float64 {
	if u.Exp == 0 {
		return v
	}
	// Most readings have at most six decimals: n has up to 15 digits, n/1e6 is v, so
	// the one operation on n is correctly rounded and is the decimal shifted.
	if n := math.Round(v * 1e6); n/1e6 == v && math.Abs(n) < 1e15 && u.Exp >= -16 {
		return scale10(n, u.Exp-6)
	}
	return shiftDecimal(v, u.Exp)
}

// FromSI converts a value in the base unit to u: v times 10^-Exp.
//
// Rule: of the float64 values next to that product whose ToSI is v exactly, it
// returns the one of at most 15 significant digits if there is one, else the
// product itself or its neighbour; if no value has v as its ToSI, the product.
// So FromSI(ToSI(x)) is x for every decimal x of up to 15 significant digits
// (float64 holds each of those apart), and what a file said is what is shown.
func (u Unit) FromSI(v float64) float64 {
	if u.Exp == 0 || v == 0 || math.IsNaN(v) || math.IsInf(v, 0) {
		return v
	}
	r := scale10(v, -u.Exp)
	if t := round15(r); u.ToSI(t) == v {
		return t
	}
	for _, t := range [...]float64{r, math.Nextafter(r, math.Inf(1)), math.Nextafter(r, math.Inf(-1))} {
		if u.ToSI(t) == v {
			return t
		}
	}
	return r
}

// pow10 holds the powers of ten that float64 represents exactly.
var pow10 = [...]float64{1, 1e1, 1e2, 1e3, 1e4, 1e5, 1e6, 1e7, 1e8, 1e9, 1e10, 1e11,
	1e12, 1e13, 1e14, 1e15, 1e16, 1e17, 1e18, 1e19, 1e20, 1e21, 1e22}

// scale10 returns v * 10^e with one rounding as long as |e| <= 22.
func scale10(v float64, e int) float64 {
	switch {
	case e == 0:
		return v
	case e < 0 && -e < len(pow10):
		return v / pow10[-e]
	case e > 0 && e < len(pow10):
		return v * pow10[e]
	}
	return v * math.Pow10(e)
}

// digits15 splits v into an integer of 15 digits and the power of ten that
// divides it: v is about n / 10^e. ok is false outside 1e-7 to 1e36, where the
// power would not be exact.
func digits15(v float64) (n float64, e int, ok bool) {
	a := math.Abs(v)
	if !(a > 1e-7 && a < 1e36) {
		return 0, 0, false
	}
	e = 14 - int(math.Floor(math.Log10(a)))
	return math.Round(scale10(v, e)), e, true
}

// round15 rounds to 15 significant decimal digits, the most that every float64
// keeps. Scaling the integer back is correctly rounded, so the result is what
// parsing the decimal would give; where it is not, the decimal is parsed.
func round15(v float64) float64 {
	if n, e, ok := digits15(v); ok {
		return scale10(n, -e)
	}
	t, err := strconv.ParseFloat(strconv.FormatFloat(v, 'e', 14, 64), 64)
	if err != nil {
		return v
	}
	return t
}

// shiftDecimal is ToSI for values that need more care than six decimals do.
func shiftDecimal(v float64, shift int) float64 {
	if v == 0 || math.IsNaN(v) || math.IsInf(v, 0) {
		return v
	}
	if n, e, ok := digits15(v); ok {
		if scale10(n, -e) != v {
			return scale10(v, shift) // more than 15 digits
		}
		for e-shift >= len(pow10) && math.Mod(n, 10) == 0 {
			n, e = n/10, e-1
		}
		if shift-e < len(pow10) && e-shift < len(pow10) {
			return scale10(n, shift-e)
		}
	}
	s := strconv.FormatFloat(v, 'e', -1, 64)
	mantissa, exp, _ := strings.Cut(s, "e")
	if e, err := strconv.Atoi(exp); err == nil && len(strings.TrimLeft(mantissa, "-")) <= 16 { // 15 digits and a point
		if t, err := strconv.ParseFloat(mantissa+"e"+strconv.Itoa(e+shift), 64); err == nil {
			return t
		}
	}
	return scale10(v, shift)
}
