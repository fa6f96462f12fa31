package ingest

import (
	"context"
	"fmt"
	"slices"

	"kneepoint/config"
)

// Table is one lot in slices, for programs that have the readings in memory:
// made-up lots, tests. One row is one measurement of one die, in any order of
// wafers and in the order of test within a wafer. A nil slice is an absent
// column; every other has a value for each row.
type Table struct {
	Lot, Product string
	Wafer        []string
	X, Y         []int32 // die indices, Missing where a die has none
	Site         []int32
	Touchdown    []int32
	HardBin      []int32
	SoftBin      []int32
	Pass         []int8   // 1 pass, 0 fail, -1 unknown
	Part         []string // part id, tells dice without coordinates apart
	Tests        []Test   // limits, clamp and floor SI, NaN when there is none
	Values       [][]float64
	Attributes   map[string]string   // of the lot
	Columns      map[string][]string // further text columns; they become attributes of lot, wafer or die
	Inputs       []Input             // files it came from, for the report
}

// NewTable starts a table of the given tests without rows. A Test whose limits
// are left zero has limits at zero; use math.NaN() for none.
func NewTable(lot string, tests ...Test) *Table {
	return &Table{Lot: lot, Tests: tests, Values: make([][]float64, len(tests))}
}

// Die is one row of a table.
type Die struct {
	Wafer   string
	X, Y    int32
	HardBin int32
	Values  []float64 // by test, SI
}

// Add appends a die; all rows of a table that is filled so have coordinates and
// a hard bin.
func (t *Table) Add(d Die) {
	if len(d.Values) != len(t.Tests) {
		panic(fmt.Sprintf("ingest: die with %d values in a table of %d tests", len(d.Values), len(t.Tests)))
	}
	t.Wafer = append(t.Wafer, d.Wafer)
	t.X, t.Y = append(t.X, d.X), append(t.Y, d.Y)
	t.HardBin = append(t.HardBin, d.HardBin)
	for i, v := range d.Values {
		t.Values[i] = append(t.Values[i], v)
	}
}

// Build makes a lot of a table with the same cleaning that files get. Options
// give the product file and the retest policy. The lot does not share memory
// with the table. Columns of unequal length panic.
func Build(t *Table, opt Options) (*Lot, error) {
	if len(t.Wafer) == 0 {
		return nil, &Error{File: "lot " + quote(t.Lot), What: "has no dice", Remedy: "give at least one"}
	}
	if opt.Retest == "" {
		opt.Retest = RetestLast
	}
	opt.Workers, opt.Lot = max(opt.Workers, 1), ""
	r := &readings{sch: newSchema()}
	n := len(t.Wafer)
	c := &chunk{n: n, text: make([]textColumn, textAttributes)}
	c.text[textWafer] = codesOf(t.Wafer, n)
	if t.Part != nil {
		c.text[textPart] = codesOf(t.Part, n)
	}
	for slot, column := range [][]int32{intX: t.X, intY: t.Y, intSite: t.Site, intTouchdown: t.Touchdown, intHardBin: t.HardBin, intSoftBin: t.SoftBin} {
		checkLength(len(column), n, column != nil)
		c.ints[slot] = slices.Clone(column)
	}
	checkLength(len(t.Pass), n, t.Pass != nil)
	c.pass = slices.Clone(t.Pass)
	for _, name := range sortedKeys(t.Columns) {
		r.sch.attribute(name)
		c.text = append(c.text, codesOf(t.Columns[name], n))
	}
	checkLength(len(t.Values), len(t.Tests), true)
	for i := range t.Tests {
		checkLength(len(t.Values[i]), n, true)
		if r.sch.test(t.Tests[i].Name) != i {
			panic("ingest: test " + t.Tests[i].Name + " is twice in the table")
		}
		c.values = append(c.values, slices.Clone(t.Values[i]))
		r.given = append(r.given, infoOf(&t.Tests[i], opt.Product))
	}
	f := &fileData{rows: rowCount{read: n}, lot: t.Lot}
	for _, k := range sortedKeys(t.Attributes) {
		f.attributes = append(f.attributes, [2]string{k, t.Attributes[k]})
	}
	if t.Product != "" {
		f.attributes = append(f.attributes, [2]string{roleProduct, t.Product})
	}
	f.data = c
	r.files = []*fileData{f}
	b, err := r.lots(context.Background(), &opt)
	if err != nil {
		return nil, err
	}
	l := b.Lots[0]
	l.inputs = slices.Clone(t.Inputs)
	return l, nil
}

func checkLength(got, want int, given bool) {
	if given && got != want {
		panic(fmt.Sprintf("ingest: column length mismatch: %d, want %d", got, want))
	}
}

func codesOf(texts []string, n int) textColumn {
	checkLength(len(texts), n, true)
	var g globalText
	t := textColumn{codes: make([]int32, n)}
	for i, s := range texts {
		if t.codes[i] = -1; s != "" {
			t.codes[i] = g.code(s)
		}
	}
	t.dict = g.dict
	return t
}

func infoOf(t *Test, product *config.Product) testInfo {
	i := testInfo{name: t.Name, product: productTest(product, t.Name), unit: t.Unit, lower: t.Lower, upper: t.Upper,
		condition: t.Condition, measures: t.Measures, clamp: t.Clamp, floor: t.Floor, number: t.Number, declared: true}
	if t.Lower == t.Lower || t.Upper == t.Upper {
		i.limitsFrom = "data file"
	}
	return i
}
