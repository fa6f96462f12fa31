package ingest

import (
	"strings"

	"kneepoint/config"
)

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
	shared      int // the first findings, which are about the files
	earlier     Earlier
	first       FirstPass
	cols        columns
	about       lotFacts
	after       []bool    // by measurement of earlier: it came after the one that counts
	given       [][]int8  // by test: marks of Censor that the file itself gives; nil none
	piles       [][2]bool // by test: its clamp, its floor is a pile-up found in the data
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
	Place        int // in the order of the data file, from 0
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

// Earlier holds the readings of retested dice that do not count, in the order
// of test within each die: row Of[i] of the lot also had Values[test][i]. Under
// the usual policy (RetestLast) they came before the row; under the others some
// came after it. Bins hold Missing, Pass -1 where the file has nothing.
type Earlier struct {
	Of      []int32
	HardBin []int32
	SoftBin []int32
	Pass    []int8
	Values  [][]float64 // [test][i]
}

// FirstPass describes each die's first valid measurement; nil slices when no
// die was measured twice.
type FirstPass struct {
	Index []int32 // by row: index into Earlier of the first measurement, -1 when the row itself is it
}

// ID is the lot's name as the file gives it.
func (l *Lot) ID() string { return l.id }

// Product is the part type as the file gives it, "" when it gives none.
func (l *Lot) Product() string { return l.product }

// Len is the number of dice.
func (l *Lot) Len() int { return l.cols.n }

// Wafers are the lot's wafers in natural order of their ids.
func (l *Lot) Wafers() []Wafer { return l.wafers }

// Tests are the lot's tests: those of the product file in its order, then the
// others in the order of the data file.
func (l *Lot) Tests() []Test { return l.tests }

// TestIndex finds a test by name, without regard to case; -1 when absent.
func (l *Lot) TestIndex(name string) int {
	for i := range l.tests {
		if strings.EqualFold(l.tests[i].Name, name) {
			return i
		}
	}
	return -1
}

// Values is one test's column: SI, NaN where missing.
func (l *Lot) Values(test int) []float64 { return l.cols.values[test].Float64Values() }

// Censor marks the values that are bounds only: +1 at least the value (at the
// tester's clamp), -1 at most it (at its floor), 0 as measured. Nil when no
// value of the test is a bound.
func (l *Lot) Censor(test int) []int8 { return view8(l.cols.censor[test]) }

// HasCoordinates says whether any die has both coordinates.
func (l *Lot) HasCoordinates() bool { return l.cols.x != nil }

// X is the die column index; nil when the file has no coordinates, Missing for
// single dice without.
func (l *Lot) X() []int32 { return view32(l.cols.x) }

// Y is the die row index; see X.
func (l *Lot) Y() []int32 { return view32(l.cols.y) }

// Site is the test site; nil when the file has none.
func (l *Lot) Site() []int32 { return view32(l.cols.site) }

// Touchdown is the order of test: the file's own numbers where it has them,
// else the place of the row within its wafer, from 1. Never nil, never
// decreasing within a wafer.
func (l *Lot) Touchdown() []int32 { return view32(l.cols.touchdown) }

// HardBin is nil when the file has none.
func (l *Lot) HardBin() []int32 { return view32(l.cols.hardBin) }

// SoftBin is nil when the file has none.
func (l *Lot) SoftBin() []int32 { return view32(l.cols.softBin) }

// Pass is the file's own pass flag: 1 pass, 0 fail, -1 unknown; nil when the
// file has none.
func (l *Lot) Pass() []int8 { return view8(l.cols.pass) }

// Earlier holds the readings of retested dice that do not count.
func (l *Lot) Earlier() *Earlier { return &l.earlier }

// FirstPass says where each die's first measurement stands.
func (l *Lot) FirstPass() FirstPass { return l.first }

// Findings are what was found in the data, in a fixed order.
func (l *Lot) Findings() []Finding { return l.findings }

// Inputs are the files that the lot's rows came from.
func (l *Lot) Inputs() []Input { return l.inputs }

// Attributes are what the file says of the whole lot.
func (l *Lot) Attributes() map[string]string { return l.attributes }

// DieAttributes names the text columns that differ within a wafer.
func (l *Lot) DieAttributes() []string {
	names := make([]string, len(l.cols.attributes))
	for i, a := range l.cols.attributes {
		names[i] = a.name
	}
	return names
}

// DieAttribute is one column of DieAttributes: codes[i] indexes labels, -1
// where the die has none.
func (l *Lot) DieAttribute(i int) (codes []int32, labels []string) {
	a := l.cols.attributes[i]
	return view32(a.codes), a.labels
}
