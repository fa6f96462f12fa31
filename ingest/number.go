package ingest

import (
	"math"
	"strconv"
)

// status says how a cell was understood.
type status uint8

const (
	cellNumber  status = iota
	cellEmpty          // nothing between the separators
	cellOdd            // not a plain number: the full reader decides
	cellMissing        // a word for "no reading": NA, NaN, -
	cellOver           // a word for "out of range": OVL, OVERFLOW
	cellInf            // too large for a number; parseNumber makes it cellOver or cellUnder
	cellBad            // text that means nothing in a column of numbers
)

// pow10 holds the powers of ten that are exact in float64.
var pow10 = [...]float64{1e0, 1e1, 1e2, 1e3, 1e4, 1e5, 1e6, 1e7, 1e8, 1e9, 1e10, 1e11,
	1e12, 1e13, 1e14, 1e15, 1e16, 1e17, 1e18, 1e19, 1e20, 1e21, 1e22}

// scanNumber reads the cell of b that starts at i and ends at the separator or
// the line's end, blanks around the number allowed. It gives the value, the
// place of the byte that ended the cell ('\n' or sep; a '\r' before '\n' is
// passed over) and cellNumber, cellEmpty or cellOdd. b must hold a '\n' at or
// after i.
//
// The value is the float64 nearest to the decimal number, as
// strconv.ParseFloat would give it. A significand of up to 2^53 and a power of
// ten up to 22 are both exact in float64, so that one multiplication or
// division rounds once (W. D. Clinger, "How to read floating point numbers
// accurately", PLDI 1990); everything else goes to strconv.
func scanNumber(b []byte, i int, sep, decimal byte) (float64, int, status) {
	for b[i] == ' ' {
		i++
	}
	start := i
	neg := false
	switch b[i] {
	case '-':
		neg = true
		i++
	case '+':
		i++
	}
	var m uint64
	digits := i
	c := b[i] - '0'
	for c <= 9 {
		m = m*10 + uint64(c)
		i++
		c = b[i] - '0'
	}
	n := i - digits
	exp := 0
	if b[i] == decimal {
		i++
		point := i
		c = b[i] - '0'
		for c <= 9 {
			m = m*10 + uint64(c)
			i++
			c = b[i] - '0'
		}
		exp = point - i
		n -= exp
	}
	if n == 0 {
		if i == start && (b[i] == sep || b[i] == '\n') {
			return math.NaN(), i, cellEmpty
		}
		if i == start && b[i] == '\r' && b[i+1] == '\n' {
			return math.NaN(), i + 1, cellEmpty
		}
		return 0, start, cellOdd
	}
	if b[i]|0x20 == 'e' {
		i++
		eneg := false
		switch b[i] {
		case '-':
			eneg = true
			i++
		case '+':
			i++
		}
		e, first := 0, i
		c = b[i] - '0'
		for c <= 9 {
			if e < 100000 {
				e = e*10 + int(c)
			}
			i++
			c = b[i] - '0'
		}
		if i == first {
			return 0, start, cellOdd
		}
		if eneg {
			e = -e
		}
		exp += e
	}
	end := i
	for b[i] == ' ' {
		i++
	}
	if b[i] == '\r' && b[i+1] == '\n' {
		i++
	}
	if b[i] != sep && b[i] != '\n' {
		return 0, start, cellOdd
	}
	if n <= 19 && m < 1<<53 {
		v := float64(m)
		if neg {
			v = -v // before scaling, so that -0 keeps its sign
		}
		switch {
		case exp == 0:
			return v, i, cellNumber
		case exp < 0 && exp >= -22:
			return v / pow10[-exp], i, cellNumber
		case exp > 0 && exp <= 22:
			return v * pow10[exp], i, cellNumber
		}
	}
	v, st := convert(b[start:end], decimal)
	if st != cellNumber {
		return 0, start, cellOdd
	}
	return v, i, cellNumber
}

// convert gives a text that is already known to be a decimal number to
// strconv. A number too large for float64 is cellInf.
func convert(t []byte, decimal byte) (float64, status) {
	if decimal != '.' {
		t = append([]byte(nil), t...)
		for i, c := range t {
			if c == decimal {
				t[i] = '.'
			}
		}
	}
	v, err := strconv.ParseFloat(string(t), 64)
	switch {
	case err == nil:
		return v, cellNumber
	case math.IsInf(v, 0):
		return v, cellInf
	}
	return 0, cellBad
}

// parseNumber reads a whole text, already free of blanks around it, as the
// full reader has it: a number, a word for a missing reading, a bound (see
// boundOf), or neither.
func parseNumber(t []byte, decimal byte) (float64, status) {
	if len(t) == 0 {
		return math.NaN(), cellEmpty
	}
	if isDecimal(t, decimal) {
		v, st := convert(t, decimal)
		if st == cellInf {
			st = cellOver
			if v < 0 {
				st = cellUnder
			}
		}
		return v, st
	}
	if v, ok := parseBound(t, decimal); ok {
		return v, cellBound
	}
	return math.NaN(), word(t)
}

// isDecimal says whether t is [+-] digits [. digits] [e [+-] digits] with at
// least one digit before the exponent. (strconv alone would also take
// hexadecimal floats and underscores.)
func isDecimal(t []byte, decimal byte) bool {
	i, n := 0, 0
	if i < len(t) && (t[i] == '-' || t[i] == '+') {
		i++
	}
	for ; i < len(t) && t[i]-'0' <= 9; i++ {
		n++
	}
	if i < len(t) && t[i] == decimal {
		for i++; i < len(t) && t[i]-'0' <= 9; i++ {
			n++
		}
	}
	if n == 0 {
		return false
	}
	if i < len(t) && t[i]|0x20 == 'e' {
		i++
		if i < len(t) && (t[i] == '-' || t[i] == '+') {
			i++
		}
		first := i
		for ; i < len(t) && t[i]-'0' <= 9; i++ {
		}
		if i == first {
			return false
		}
	}
	return i == len(t)
}

// words that stand in a cell of numbers. What they say is common practice, no
// source.
var words = map[string]status{
	"na": cellMissing, "n/a": cellMissing, "#n/a": cellMissing, "nan": cellMissing, "null": cellMissing,
	"none": cellMissing, "nil": cellMissing, "-": cellMissing, "--": cellMissing, "---": cellMissing,
	".": cellMissing, "?": cellMissing, "*": cellMissing, "missing": cellMissing, "blank": cellMissing,
	"not tested": cellMissing, "nt": cellMissing, "untested": cellMissing, "skip": cellMissing,
	"skipped": cellMissing, "1.#qnan": cellMissing, "-1.#ind": cellMissing, "#num!": cellMissing,
	"#value!": cellMissing, "#div/0!": cellMissing, "fail": cellMissing, "err": cellMissing,
	"error": cellMissing, "invalid": cellMissing, "-nan": cellMissing, "+nan": cellMissing,
	"nan(ind)": cellMissing, "-nan(ind)": cellMissing,

	"ovl": cellOver, "ovr": cellOver, "overflow": cellOver, "over": cellOver, "ol": cellOver, "o.l": cellOver,
	"o/l": cellOver, "ovld": cellOver, "overload": cellOver, "overrange": cellOver, "over range": cellOver,
	"ovflw": cellOver, "+ol": cellOver, "+ovl": cellOver, "+over": cellOver, "out of range": cellOver,
	"udf": cellUnder, "underflow": cellUnder, "under": cellUnder, "underrange": cellUnder, "under range": cellUnder,
	"-ol": cellUnder, "-ovl": cellUnder, "-over": cellUnder, "unfl": cellUnder,
	"compliance": cellOver, "comp": cellOver, "clamp": cellOver, "clamped": cellOver, "sat": cellOver,

	"inf": cellOver, "+inf": cellOver, "-inf": cellUnder, "infinity": cellOver, "+infinity": cellOver,
	"-infinity": cellUnder, "1.#inf": cellOver, "-1.#inf": cellUnder, "∞": cellOver, "+∞": cellOver, "-∞": cellUnder,
}

// word tells what a text that is no number means.
func word(t []byte) status {
	if len(t) > 16 {
		return cellBad
	}
	var low [16]byte
	for i, c := range t {
		if 'A' <= c && c <= 'Z' {
			c |= 0x20
		}
		low[i] = c
	}
	if st, ok := words[string(low[:len(t)])]; ok {
		return st
	}
	return cellBad
}

// scanInt reads a cell that holds a whole number in plain digits; everything
// else, "1.0" among it, is cellOdd and left to the full reader. See scanNumber.
func scanInt(b []byte, i int, sep byte) (int32, int, status) {
	for b[i] == ' ' {
		i++
	}
	start := i
	neg := false
	if b[i] == '-' {
		neg = true
		i++
	}
	first := i
	v := int32(0)
	c := b[i] - '0'
	for c <= 9 && i < first+9 {
		v = v*10 + int32(c)
		i++
		c = b[i] - '0'
	}
	n := i - first
	for b[i] == ' ' {
		i++
	}
	if b[i] == '\r' && b[i+1] == '\n' {
		i++
	}
	if b[i] != sep && b[i] != '\n' {
		return 0, start, cellOdd
	}
	if n == 0 {
		if neg {
			return 0, start, cellOdd
		}
		return Missing, i, cellEmpty
	}
	if neg {
		v = -v
	}
	return v, i, cellNumber
}

// parseInt is the full reader's scanInt: whole numbers however written ("1.0",
// "+3", "2e1").
func parseInt(t []byte, decimal byte) (int32, status) {
	v, st := parseNumber(t, decimal)
	if st != cellNumber {
		return Missing, st
	}
	return wholeNumber(v)
}

func wholeNumber(v float64) (int32, status) {
	if v != math.Trunc(v) || v <= Missing || v > math.MaxInt32 {
		return Missing, cellBad
	}
	return int32(v), cellNumber
}
