package config

import (
	"math"
	"strconv"
)

// Unit is a unit of measurement as written in a file: an SI prefix on one of
// V, A, ohm, F, s, Hz, m, W, a temperature in degrees Celsius, or a ratio.
//
// The prefix is kept as a power of ten so that conversion divides or
// multiplies by an exactly representable power: 4.2 nA reads as the float64
// nearest to 4.2/1e9, and shows as 4.2 again.
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
// Rule: a negative Exp divides by 10^-Exp, a positive one multiplies by 10^Exp.
// Powers of ten up to 10^22 are exact in float64 and 10^-9 is not, so this is
// one correctly rounded operation, where v*1e-9 would be rounded twice.
//
// NaN and infinities pass through. A unit that is not given leaves v as it is;
// degrees Celsius stay degrees Celsius.
func (u Unit) ToSI(v float64) float64 { return scale10(v, u.Exp) }

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

// round15 rounds to 15 significant decimal digits, the most that every float64
// keeps. The digits are made an integer below 2^53, so the one division or
// multiplication that scales it back is correctly rounded and gives the same
// float64 as parsing the decimal would. Below about 1e-8 and above 1e36 it
// would take a power of ten that is not exact; the decimal is parsed there,
// which is slower.
func round15(v float64) float64 {
	a := math.Abs(v)
	if !(a > 1e-7 && a < 1e36) {
		t, err := strconv.ParseFloat(strconv.FormatFloat(v, 'e', 14, 64), 64)
		if err != nil {
			return v
		}
		return t
	}
	e := 14 - int(math.Floor(math.Log10(a)))
	return scale10(math.Round(scale10(v, e)), -e)
}
