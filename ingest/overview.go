package ingest

import (
	"math"
	"slices"
	"strings"
)

// Overview is what a batch holds, before any statistics: for a person who has
// a file and wants to know whether it was understood.
type Overview struct {
	Files    []FileOverview
	Lots     []LotOverview
	Findings []Finding // about the files; those about single lots stand with the lots
	Tally    Tally
}

// FileOverview says how a file was read.
type FileOverview struct {
	Input
	Long         bool // a row per die and test
	Separator    string
	DecimalComma bool
	HeaderLine   int
	Columns      []ColumnOverview // in the order of the file
	Comments     [][2]string      // key and value lines above the table
}

// ColumnOverview says what a column was taken for.
type ColumnOverview struct {
	Name string
	As   string // a role (config.Roles), "test", "attribute" or "not used"
}

// LotOverview is one lot in numbers.
type LotOverview struct {
	ID, Product string
	Dice        int
	Retested    int // dice with further measurements
	Wafers      []WaferOverview
	Sites       []int32 // different test sites, sorted; empty when the file has none
	Coordinates bool
	X, Y        [2]int32 // smallest and largest die index, when there are coordinates
	Geometry    Geometry // what the file says of the wafers
	HardBins    []BinCount
	Attributes  map[string]string
	DieColumns  []string // text columns that differ within a wafer
	Tests       []TestOverview
	Findings    []Finding
}

// WaferOverview is one wafer in numbers.
type WaferOverview struct {
	ID         string
	Dice       int
	Attributes map[string]string
}

// BinCount is the number of dice in a hard bin.
type BinCount struct {
	Bin, Dice int
	Name      string // in the file, "" when it has none
}

// TestOverview is one test in numbers; values are SI, NaN where there is none.
type TestOverview struct {
	Test
	N, Missing      int
	AtLeast, AtMost int // censored at the clamp, at the floor
	Min, Max        float64
	Spark           []int // readings in twenty classes of equal width from Min to Max; empty without readings or when all are the same
}

// Overview describes the batch.
func (b *Batch) Overview() Overview {
	o := Overview{Findings: b.Findings, Tally: b.Tally}
	for i, in := range b.Inputs {
		f := FileOverview{Input: in}
		if l := b.layouts[i]; l != nil {
			f.Long, f.DecimalComma, f.HeaderLine, f.Comments = l.long, l.decimal == ',', l.headerLine, l.attributes
			f.Separator = separatorNames[l.sep]
			for k, fd := range l.fields {
				f.Columns = append(f.Columns, ColumnOverview{strings.TrimPrefix(l.names[k], markPrefix), fd.as()})
			}
		}
		o.Files = append(o.Files, f)
	}
	for _, l := range b.Lots {
		o.Lots = append(o.Lots, l.overview())
	}
	return o
}

func (f field) as() string {
	switch {
	case f.kind == skipField:
		return "not used"
	case f.role != "":
		return f.role
	case f.kind == textField:
		return "attribute"
	}
	return "test"
}

func (l *Lot) overview() LotOverview {
	o := LotOverview{ID: l.id, Product: l.product, Dice: l.Len(), Coordinates: l.HasCoordinates(), Attributes: l.attributes,
		DieColumns: l.DieAttributes(), Geometry: l.Geometry(), Findings: l.findings[l.shared:]}
	again := map[int32]bool{}
	for _, r := range l.earlier.Of {
		again[r] = true
	}
	o.Retested = len(again)
	for _, w := range l.wafers {
		o.Wafers = append(o.Wafers, WaferOverview{w.ID, w.Hi - w.Lo, w.Attributes})
	}
	for v := range countInts(l.Site()) {
		o.Sites = append(o.Sites, v)
	}
	slices.Sort(o.Sites)
	for v, n := range countInts(l.HardBin()) {
		o.HardBins = append(o.HardBins, BinCount{int(v), n, l.about.hardNames[int(v)]})
	}
	slices.SortFunc(o.HardBins, func(a, b BinCount) int { return a.Bin - b.Bin })
	if o.Coordinates {
		o.X, o.Y = rangeOf(l.X()), rangeOf(l.Y())
	}
	for t := range l.tests {
		o.Tests = append(o.Tests, l.testOverview(t))
	}
	return o
}

// countInts counts the different values of a column, Missing apart.
func countInts(c []int32) map[int32]int {
	m := map[int32]int{}
	for _, v := range c {
		if v != Missing {
			m[v]++
		}
	}
	return m
}

func rangeOf(c []int32) [2]int32 {
	r := [2]int32{math.MaxInt32, math.MinInt32}
	for _, v := range c {
		if v != Missing {
			r[0], r[1] = min(r[0], v), max(r[1], v)
		}
	}
	return r
}

func (l *Lot) testOverview(t int) TestOverview {
	const classes = 20
	o := TestOverview{Test: l.tests[t], Min: math.NaN(), Max: math.NaN()}
	v := l.Values(t)
	for _, x := range v {
		if x != x {
			o.Missing++
			continue
		}
		o.N++
		if !(x >= o.Min) {
			o.Min = x
		}
		if !(x <= o.Max) {
			o.Max = x
		}
	}
	for _, c := range l.Censor(t) {
		switch c {
		case 1:
			o.AtLeast++
		case -1:
			o.AtMost++
		}
	}
	if o.N == 0 || o.Min == o.Max {
		return o
	}
	o.Spark = make([]int, classes)
	for _, x := range v {
		if x == x {
			// Halves, so that the range of two huge values does not overflow.
			at := (x/2 - o.Min/2) / (o.Max/2 - o.Min/2)
			o.Spark[min(int(at*classes), classes-1)]++
		}
	}
	return o
}
