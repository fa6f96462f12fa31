package reports

import (
	"math"
	"strconv"
)

// Number is a float64 that JSON can hold: NaN and infinities are written as
// null (and null is read back as NaN), and other values are rounded to twelve
// significant digits, beyond which no reading of a tester means anything and
// the last bits of unit conversion would show.
type Number float64

// NaN is the Number that stands for "not computed".
var NaN = Number(math.NaN())

// Valid reports whether the number is a finite value.
func (n Number) Valid() bool { return !math.IsNaN(float64(n)) && !math.IsInf(float64(n), 0) }

// MarshalJSON writes the number as the package comment says.
func (n Number) MarshalJSON() ([]byte, error) {
	if !n.Valid() {
		return []byte("null"), nil
	}
	v, err := strconv.ParseFloat(strconv.FormatFloat(float64(n), 'e', 11, 64), 64)
	if err != nil {
		return nil, err
	}
	if v == 0 {
		return []byte("0"), nil // no negative zero
	}
	abs := math.Abs(v)
	format := byte('f')
	if abs < 1e-6 || abs >= 1e21 {
		format = 'e'
	}
	return strconv.AppendFloat(nil, v, format, -1, 64), nil
}

// UnmarshalJSON reads what MarshalJSON wrote.
func (n *Number) UnmarshalJSON(b []byte) error {
	if string(b) == "null" {
		*n = NaN
		return nil
	}
	v, err := strconv.ParseFloat(string(b), 64)
	*n = Number(v)
	return err
}
