package causes

import (
	"kneepoint/stats/junction"
	"kneepoint/wafermap"
)

// Columns are a lot's dice, one row a die, sorted by wafer. Slices are read,
// never written; nil where the data have no such column.
type Columns struct {
	Tests  []Test
	Wafers []Span
	X, Y   []int32 // die position
	Site   []int32
	Order  []int32 // touchdown, ascending within a wafer; dice tested at once share one
	Pass   []bool
	Retest Retest

	Geometry              wafermap.Geometry
	ShotColumns, ShotRows int

	// Model is the device model; Test.Model are indexes into its tests. Nil without
	// one: the catalogue's own slopes then stand in for it.
	Model *junction.Model
	// Spread is how process parameters vary between healthy lots.
	Spread junction.Prior

	Baseline      string  // where the levels come from: "product file", "ledger", "lot majority", "none"
	BaselineYield float64 // NaN when not known
	Missing       int32   // what Site and Order hold where a die has none

	// Raised are flags that the reading of the files raised, by the names of the
	// catalogue's flags.
	Raised []string
}

// Span is one wafer: rows [Lo, Hi).
type Span struct {
	ID     string
	Lo, Hi int
}

// Test is one test's column with what is known of it. Values are SI, NaN where
// missing; NaN for limits, ends and baseline values that there are not.
type Test struct {
	Name     string
	Measures string
	Current  float64 // collector current of the test, A; 0 not known
	Values   []float64
	Censor   []int8 // +1 at least, -1 at most, 0 as read; nil: all as read

	Lower, Upper float64
	Clamp, Floor float64

	Median, Sigma float64 // of healthy lots, pooled
	Within, Lot   float64 // sigma inside a lot, and of lots' levels

	Model int // index into Columns.Model.Tests, -1 without
}

// Retest lists dice that were measured again: row Of[i] failed at first when
// Failed[i], and passes in the measurement that counts when Columns.Pass says so.
type Retest struct {
	Of     []int32
	Failed []bool
}

// dice is the number of rows.
func (c *Columns) dice() int {
	if len(c.Wafers) == 0 {
		return 0
	}
	return c.Wafers[len(c.Wafers)-1].Hi
}
