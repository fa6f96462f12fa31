package ingest

import (
	"encoding/binary"
	"math"
	"math/bits"
)

// Most cells of a table are short plain numbers. The functions here read one
// with eight bytes taken as one word and no loop over its digits, so that
// neither their number nor where the point stands costs a mispredicted jump.
// What they do not take goes to scanNumber and scanInt, which give the same
// value for what they do.

const (
	zeros = 0x3030303030303030 // '0' in every byte
	highs = 0x8080808080808080
	// overNine makes a byte above 9 one with the high bit.
	overNine = 0x7676767676767676
)

// notDigits marks, by the high bit of each byte, what is no digit in a word of
// text from which zeros were taken by exclusive or: a byte above 9. The sum in a
// byte is at most 0x7f+0x76, so that none reaches the next.
func notDigits(t uint64) uint64 { return (t&^highs + overNine | t) & highs }

// eightDigits is the number that the bytes 0 to 9 of t make, the first digit in
// the lowest byte: neighbours are joined to pairs, these to fours, these to
// eight, by a multiplication each that adds the lower half times ten, a
// hundred, ten thousand to the upper one.
func eightDigits(t uint64) uint64 {
	t = t * (10<<8 + 1) >> 8 & 0x00ff00ff00ff00ff
	t = t * (100<<16 + 1) >> 16 & 0x0000ffff0000ffff
	return t * (10000<<32 + 1) >> 32
}

// mostDigits is how many digits stay below 2^53 whatever they are.
const mostDigits = 15

// plainNumber is scanNumber for [-] digits [. digits] [e [+-] digits] with the
// point among the first eight bytes, or fewer than eight digits and none; ok is
// false for everything else, and near the end of b. end is the place of the byte
// that ended the cell.
func plainNumber(b []byte, i int, sep, decimal byte) (v float64, end int, ok bool) {
	if i+9 > len(b) {
		return 0, 0, false
	}
	sign := uint64(0)
	if b[i] == '-' {
		sign = 1 << 63
		i++
	}
	t := binary.LittleEndian.Uint64(b[i:]) ^ zeros
	stops := notDigits(t)
	if stops == 0 {
		return 0, 0, false
	}
	whole := bits.TrailingZeros64(stops) &^ 7 // bits of the digits before the point
	digits, fraction := whole, 0
	j := i + whole>>3
	if byte(t>>(whole&63)) == decimal^'0' {
		// The point is taken out of the word.
		stops &= stops - 1
		digits = bits.TrailingZeros64(stops)&^7 - 8
		below := uint64(1)<<(whole&63) - 1
		t = t&below | t>>8&^below
		fraction = (digits - whole) >> 3
		j += fraction + 1
	}
	if digits == 0 {
		return 0, 0, false
	}
	m := eightDigits(t << ((64 - digits) & 63))
	c := b[j]
	for n := digits >> 3; c-'0' <= 9 && n < mostDigits; n++ {
		m = m*10 + uint64(c-'0')
		fraction++
		j++
		c = b[j]
	}
	if c|0x20 == 'e' {
		e := 0
		if e, j = smallExponent(b, j+1); j < 0 {
			return 0, 0, false
		}
		fraction -= e
		c = b[j]
	}
	if c != sep && c != '\n' {
		if c != '\r' || b[j+1] != '\n' {
			return 0, 0, false
		}
		j++
	}
	v = float64(int64(m))
	switch {
	case uint(fraction) < uint(len(pow10)):
		v /= pow10[fraction] // exact operands, one rounding: see scanNumber
	case uint(-fraction) < uint(len(pow10)):
		v *= pow10[-fraction]
	default:
		return 0, 0, false
	}
	return math.Float64frombits(math.Float64bits(v) ^ sign), j, true
}

// smallExponent reads [+-] and up to three digits; end is -1 where there is none.
func smallExponent(b []byte, i int) (e, end int) {
	negative := b[i] == '-'
	if negative || b[i] == '+' {
		i++
	}
	first := i
	for ; b[i]-'0' <= 9 && i < first+3; i++ {
		e = e*10 + int(b[i]-'0')
	}
	if i == first {
		return 0, -1
	}
	if negative {
		e = -e
	}
	return e, i
}

// plainInt is scanInt for [-] and one to seven digits.
func plainInt(b []byte, i int, sep byte) (v int32, end int, ok bool) {
	if i+9 > len(b) {
		return 0, 0, false
	}
	sign := int32(0)
	if b[i] == '-' {
		sign = -1
		i++
	}
	t := binary.LittleEndian.Uint64(b[i:]) ^ zeros
	digits := bits.TrailingZeros64(notDigits(t)) &^ 7
	if digits == 0 || digits == 64 {
		return 0, 0, false
	}
	i += digits >> 3
	if c := b[i]; c != sep && c != '\n' {
		if c != '\r' || b[i+1] != '\n' {
			return 0, 0, false
		}
		i++
	}
	v = int32(eightDigits(t << ((64 - digits) & 63)))
	return v ^ sign - sign, i, true
}
