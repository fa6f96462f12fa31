package ingest

import (
	"strings"
)

// schema is the set of columns over all files of a batch: fixed ones by role,
// then tests and attributes by name.
type schema struct {
	attributes []string // names of the text columns from textAttributes on
	tests      []string // names of the tests
	inProduct  []bool
	testSlot   map[string]int // small letters -> test
	attrSlot   map[string]int
}

func newSchema() *schema {
	return &schema{testSlot: map[string]int{}, attrSlot: map[string]int{}}
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
	cells  []cellCount // by column of the file
	rows   rowCount
	weight []int32 // rows of the file in each row, nil: one
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

// cellCount counts the cells of a column that are not plain numbers.
type cellCount struct {
	numbers, missing, over, inf, bad int
	comma                            int // bad ones that would be numbers with a decimal comma
	firstOver, firstInf, firstBad    place
}

// rowCount counts rows, and those that are used in part or not at all.
type rowCount struct {
	read                                                                     int // data rows, used or not
	blank                                                                    int // all cells empty
	header                                                                   int // the header again
	long                                                                     int // more fields than the header
	binary                                                                   int // zero bytes in it
	cut                                                                      int // the last line broke off
	short                                                                    int // used as far as it goes
	unclosed                                                                 int // a quote without its partner was taken as text
	firstLong, firstShort, firstBinary, firstCut, firstUnclosed, firstHeader place
}

// discarded is the number of rows that are not used.
func (c *rowCount) discarded() int { return c.blank + c.header + c.long + c.binary + c.cut }

func (p *place) first(o place) {
	if p.line == 0 {
		*p = o
	}
}

// add sums the counts of a later chunk.
func (c *rowCount) add(o *rowCount) {
	c.read += o.read
	c.blank += o.blank
	c.header += o.header
	c.long += o.long
	c.binary += o.binary
	c.cut += o.cut
	c.short += o.short
	c.unclosed += o.unclosed
	c.firstLong.first(o.firstLong)
	c.firstShort.first(o.firstShort)
	c.firstBinary.first(o.firstBinary)
	c.firstCut.first(o.firstCut)
	c.firstUnclosed.first(o.firstUnclosed)
	c.firstHeader.first(o.firstHeader)
}

func (c *cellCount) add(o *cellCount) {
	c.numbers += o.numbers
	c.missing += o.missing
	c.over += o.over
	c.inf += o.inf
	c.bad += o.bad
	c.comma += o.comma
	c.firstOver.first(o.firstOver)
	c.firstInf.first(o.firstInf)
	c.firstBad.first(o.firstBad)
}
