package ingest

import (
	"strings"
)

// schema is the set of columns over all files of a batch: fixed ones by role,
// then tests and attributes by name.
type schema struct {
	attributes []string       // names of the text columns from textAttributes on
	tests      []string       // names of the tests
	testSlot   map[string]int // small letters -> test
	attrSlot   map[string]int
	levels     map[int]level // text slots whose level a file of convert gives
}

func newSchema() *schema {
	return &schema{testSlot: map[string]int{}, attrSlot: map[string]int{}, levels: map[int]level{}}
}

// test gives the slot of a test, a new one for a new name.
func (s *schema) test(name string) int {
	key := strings.ToLower(name)
	if i, ok := s.testSlot[key]; ok {
		return i
	}
	s.testSlot[key] = len(s.tests)
	s.tests = append(s.tests, name)
	return len(s.tests) - 1
}

// attribute gives the text slot of an attribute.
func (s *schema) attribute(name string) int {
	key := strings.ToLower(name)
	if i, ok := s.attrSlot[key]; ok {
		return textAttributes + i
	}
	s.attrSlot[key] = len(s.attributes)
	s.attributes = append(s.attributes, name)
	return textAttributes + len(s.attributes) - 1
}

// adopt renumbers the layout's own slots into the schema's.
func (s *schema) adopt(l *layout) {
	for i := range l.fields {
		f := &l.fields[i]
		switch {
		case f.kind == textField && f.slot >= textAttributes:
			f.slot = s.attribute(l.names[i])
		case f.kind == valueField && !l.long:
			f.slot = s.test(l.columns[f.slot].name)
		}
	}
}

// chunk is a run of rows in columns, as read: no unit applied, nothing cleaned.
// In a chunk of a wide table values has a column by test of the schema; of a
// long one, longValue, longLower and longUpper. Columns may be nil.
type chunk struct {
	n      int
	file   int // index of the input
	text   []textColumn
	ints   [intColumns][]int32
	pass   []int8
	values [][]float64
	odd    map[oddKey]oddCells
	rows   rowCount
	weight []int32 // rows of the files in each row, nil: one
	files  []int32 // file of each row, nil: all are of file
}

// textColumn holds a text as codes into its own dictionary; -1 is an empty cell.
type textColumn struct {
	codes []int32
	dict  []string
}

func (t *textColumn) at(i int) string {
	if t.codes == nil || t.codes[i] < 0 {
		return ""
	}
	return t.dict[t.codes[i]]
}

// place is where something was first seen.
type place struct {
	line int
	text string
}

// oddKey is one kind of cell that is no plain number: its column in the file,
// its test in a long table, and what it is.
type oddKey struct {
	field int
	test  string
	kind  status
}

// oddCells counts cells of one kind.
type oddCells struct {
	n     int
	comma int // of cellBad: numbers with a decimal comma
	first place
}

// rowOddity is what can be odd about a whole row.
type rowOddity int

const (
	// Rows that are not used.
	blankRow    rowOddity = iota // all cells empty
	headerAgain                  // the header again
	longRow                      // more fields than the header
	binaryRow                    // zero bytes in it
	cutRow                       // the last line broke off
	noWaferRow                   // no wafer id
	// Rows that are used.
	shortRow    // fewer fields than the header
	unclosedRow // a quote without its partner was taken as text
	rowOddities

	unusedRows = shortRow // those below are not used
)

// rowReasons name the unused ones in Tally.Discarded.
var rowReasons = [unusedRows]string{"blank-row", "repeated-header", "long-row", "binary-row", "cut-short", "no-wafer"}

// rowCount counts the data rows of a file, and the odd ones among them.
type rowCount struct {
	read int
	odd  [rowOddities]struct {
		n     int
		first place
	}
}

func (c *rowCount) count(o rowOddity, at place) {
	c.odd[o].n++
	c.odd[o].first.keep(at)
}

// keep takes o unless there is an earlier one.
func (p *place) keep(o place) {
	if p.line == 0 {
		*p = o
	}
}

// add sums the counts of a later chunk.
func (c *rowCount) add(o *rowCount) {
	c.read += o.read
	for i := range c.odd {
		c.odd[i].n += o.odd[i].n
		c.odd[i].first.keep(o.odd[i].first)
	}
}

// addOdd does so for cells.
func addOdd(c, o map[oddKey]oddCells) {
	for k, v := range o {
		sum := c[k]
		sum.n += v.n
		sum.comma += v.comma
		sum.first.keep(v.first)
		c[k] = sum
	}
}
