package config

// Unit is a unit of measurement as written in a file: an SI prefix on one of
// V, A, ohm, F, s, Hz, m, W, or a ratio.
//
// The prefix is kept as a power of ten so that conversion divides or
// multiplies by an exactly representable power: 4.2 nA reads as the float64
// nearest to 4.2/1e9, and shows as 4.2 again.
type Unit struct {
	Text string // as written, for showing: "nA", "uA", "ohm", "" for a ratio
	Base string // "V", "A", "ohm", "F", "s", "Hz", "m", "W", "ratio"; "" for the zero value (not given)
	Exp  int    // value in Base = value in Unit * 10^Exp
}
