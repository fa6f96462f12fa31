package ingest

import (
	"encoding/binary"
	"math"
)

// shape is how a plain number of up to eight bytes is written: its quotes, its
// sign, its length and where its point stands. The cells of a column have few shapes, and
// one has nearly always that of the cell above it. So a cell is first tried by
// that shape: whether it fits is one comparison, its digits are where the shape
// says, and where the next cell starts does not wait for this one to be read.
type shape struct {
	length int
	reach  int    // how much of the buffer is looked at
	mark   uint64 // what is no digit where it stands, '0' elsewhere
	exact  uint64 // the bytes of that
	among  uint64 // the high bits of the bytes of the cell
	whole  uint64 // the bytes before the point, all when there is none
	shift  uint64 // that leaves the digits in a word and nothing behind them
	sign   uint64 // the high bit when it is negative
	scale  float64
}

// noShape fits no cell that ends where it says.
var noShape = shape{reach: 9, mark: zeros, exact: math.MaxUint64, scale: 1}

// shapeOf is the shape of a cell that was read as a number, the carriage return
// of a line's end included; noShape when it has none. Without decimal sign, 0, it
// is that of a whole number.
func shapeOf(cell []byte, decimal byte) shape {
	n := len(cell)
	if n == 0 || n > 8 {
		return noShape
	}
	s := shape{length: n, reach: 9, mark: zeros, among: highs >> (64 - 8*n), whole: math.MaxUint64, scale: 1}
	first, last := 0, n
	if cell[last-1] == '\r' {
		last--
	}
	if last > 2 && cell[0] == '"' && cell[last-1] == '"' {
		first, last = 1, last-1
	}
	digits, point := 0, -1
	for i, c := range cell {
		at := 8 * i
		switch {
		case i < first || i >= last:
		case c-'0' <= 9:
			digits++
			continue
		case c == '-' && i == first:
			s.sign = 1 << 63
		case c == decimal && point < 0:
			point = i
			s.whole = 1<<at - 1
		default:
			return noShape
		}
		s.mark ^= uint64(c^'0') << at
		s.exact |= 0xff << at
	}
	if digits == 0 {
		return noShape
	}
	s.shift = uint64(64 - 8*last)
	if point >= 0 {
		s.shift += 8
		s.scale = pow10[last-1-point]
	}
	return s
}

// shapeOfText is the shape of a text that is to be the same, of which it shows
// the first eight bytes.
func shapeOfText(cell []byte) shape {
	n := len(cell)
	var b [8]byte
	shown := copy(b[:], cell)
	return shape{length: n, reach: max(n, 8) + 1, mark: binary.LittleEndian.Uint64(b[:]), exact: math.MaxUint64 >> (64 - 8*shown)}
}

// word is the text at i with the shape's marks taken out.
func (s *shape) word(b []byte, i int) uint64 {
	return binary.LittleEndian.Uint64(b[i:i+8:i+8]) ^ s.mark
}

// fits says whether such a word starts with a cell of the shape.
func (s *shape) fits(t uint64) bool { return (t&^highs+overNine|t)&s.among|t&s.exact == 0 }

// digits gives the digits of such a word as one number, the point left out.
func (s *shape) digits(t uint64) uint64 {
	u := t >> 8 // without the point, which left a zero
	return eightDigits((u ^ (u^t)&s.whole) << (s.shift & 63))
}

// float gives the value of a number: exact operands, one rounding, see
// scanNumber.
func (s *shape) float(t uint64) float64 {
	return math.Float64frombits(math.Float64bits(float64(int64(s.digits(t)))/s.scale) ^ s.sign)
}

// int gives the value of a number without a point.
func (s *shape) int(t uint64) int32 {
	sign := -int32(s.sign >> 63)
	return int32(s.digits(t)) ^ sign - sign
}
