package ingest

import "kneepoint/config"

// Lot is one lot's dice in columns: sorted by wafer, then touchdown (the order
// in which they were tested). Row i of every column is the same die, in its
// last valid measurement.
//
// Values are SI, NaN where missing. Integer columns hold Missing where the file
// has nothing. Slices that methods return are views: read, never write.
type Lot struct {
	id, product string
	attributes  map[string]string
	wafers      []Wafer
	tests       []Test
	inputs      []Input
	findings    []Finding
	earlier     Earlier
	first       FirstPass
	// ... Arrow columns (see columns.go)
}

// Missing stands in integer columns where the file has nothing.
const Missing = -1 << 31

// Wafer is one wafer of a lot: rows [Lo, Hi) of every column.
type Wafer struct {
	ID         string // as in the file; sorted in natural order (2 before 10)
	Lo, Hi     int
	Attributes map[string]string
}

// Test is what is known of one test. Limits, clamp and floor are SI, NaN when
// there is none; the product file's where it gives its own, else the data file's.
type Test struct {
	Name         string
	Measures     string // from the product file; "" unknown
	Unit         config.Unit
	Lower, Upper float64
	LimitsFrom   string // "product file", "data file", ""
	Condition    string
	Clamp, Floor float64
	Number       int // test number of the file, Missing when it has none
}

// Input is one file that was read.
type Input struct {
	File, SHA256, Format string
	Bytes, Rows          int64
}

// Severity ranks findings.
type Severity string

const (
	Info    Severity = "info"
	Warning Severity = "warning"
	Severe  Severity = "severe"
)

// Finding is one thing found in the data that a reader of the report must know.
// Every die or row that is not used as it stands is counted in some finding.
type Finding struct {
	Code     string // kebab-case, stable: "clamped", "sentinel", "retest" ...
	Severity Severity
	Text     string // one sentence with its numbers, file and line where there is one
	Remedy   string
	Dice     int
}

// Earlier holds the readings of retested dice that a later one replaced, in
// test order: row Of[i] of the lot had Values[test][i] before.
type Earlier struct {
	Of      []int32
	HardBin []int32
	SoftBin []int32
	Pass    []int8
	Values  [][]float64 // [test][i]
}

// FirstPass describes each die's first measurement; nil slices when no die was
// measured twice.
type FirstPass struct {
	Index []int32 // by row: index into Earlier of the first measurement, -1 when the row itself is it
}

// The columns and accessors that the other rooms use:
//
//	func (l *Lot) ID() string
//	func (l *Lot) Product() string                  // part type as the file says, "" unknown
//	func (l *Lot) Len() int                         // dice
//	func (l *Lot) Wafers() []Wafer
//	func (l *Lot) Tests() []Test
//	func (l *Lot) TestIndex(name string) int        // -1 when absent
//	func (l *Lot) Values(test int) []float64        // SI, NaN missing
//	func (l *Lot) Censor(test int) []int8           // nil when nothing is censored; -1 at most, 0, +1 at least
//	func (l *Lot) HasCoordinates() bool
//	func (l *Lot) X() []int32                       // nil when the file has none; Missing for single dice
//	func (l *Lot) Y() []int32
//	func (l *Lot) Site() []int32                    // nil when absent
//	func (l *Lot) Touchdown() []int32               // order of test, always present
//	func (l *Lot) HardBin() []int32                 // nil when absent
//	func (l *Lot) SoftBin() []int32                 // nil when absent
//	func (l *Lot) Pass() []int8                     // the file's own flag: 1, 0, -1 unknown; nil when absent
//	func (l *Lot) Earlier() *Earlier
//	func (l *Lot) FirstPass() FirstPass
//	func (l *Lot) Findings() []Finding
//	func (l *Lot) Inputs() []Input
//	func (l *Lot) Attributes() map[string]string
