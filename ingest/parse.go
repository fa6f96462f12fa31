package ingest

import (
	"bytes"
	"encoding/binary"
	"math"

	"kneepoint/config"
)

// parser turns blocks into chunks. One goroutine uses it at a time.
type parser struct {
	l        *layout
	file     int
	values   int  // columns of values in a chunk
	careful  bool // every row through the full reader
	lastFull row
	interns  []interner // by text slot
	textOf   []int      // text slots that the file has
	columns  []column   // of the chunk at work, by column of the file
	wafer    int        // column of the wafer ids, -1 none
	// waferKnown says that a comment gives the wafer of rows that do not.
	waferKnown bool
	testField  int                 // column of the test names of a long table, -1 none
	unitField  int                 // and of the units
	units      map[int]config.Unit // of the columns of a wide table
	test, unit string              // of the row at work
}

// column is where the cells of a column go.
type column struct {
	ints   []int32
	values []float64
	shape  shape // of the last plain number
	end    byte  // that ends a cell: the separator, or the line's end
}

// newParser prepares for a layout. careful keeps the fast path out, which
// gives the same columns.
func newParser(l *layout, sch *schema, file int, careful bool) *parser {
	p := &parser{l: l, file: file, careful: careful || l.decimal == l.sep || headerParses(l), values: len(sch.tests)}
	if l.long {
		p.values = longColumns
	}
	p.interns = make([]interner, textAttributes+len(sch.attributes))
	p.columns, p.wafer, p.testField = make([]column, len(l.fields)), -1, -1
	p.unitField, p.units = -1, map[int]config.Unit{}
	for i := range l.columns {
		p.units[l.columns[i].field] = l.columns[i].unit
	}
	p.waferKnown = l.commented("wafer") != ""
	for k, f := range l.fields {
		if f.kind == textField {
			p.textOf = append(p.textOf, f.slot)
			if f.slot == textWafer {
				p.wafer = k
			} else if f.slot == textTest && l.long {
				p.testField = k
			} else if f.slot == textUnit && l.long {
				p.unitField = k
			}
		}
	}
	return p
}

// headerParses says whether the header itself could be read as a row of data:
// test names may be numbers. Then only the full reader knows it again.
func headerParses(l *layout) bool {
	for i, f := range l.fields {
		if f.kind == valueField || f.kind == intField {
			if _, st := parseNumber([]byte(l.names[i]), l.decimal); st != cellNumber && st != cellEmpty {
				return false
			}
		}
	}
	return true
}

// interner numbers the texts of a column within a chunk.
type interner struct {
	codes map[string]int32
	dict  []string
	last  []byte // raw bytes of the last cell seen
	code  int32
	fresh []fresh // what the row at work added

	// How the last cell is known again without looking for its end: length is
	// that of its text, 0 where that is not possible; word and mask, mask not 0,
	// are text and separator in a word.
	sep        byte
	length     int
	word, mask uint64
}

// fresh is a text, or a way to write one, that was new.
type fresh struct {
	raw, text string // text "" when it was known
}

// intern gives the code of a cell.
func (t *interner) intern(raw []byte) int32 {
	if t.last != nil && string(raw) == string(t.last) {
		return t.code
	}
	t.remember(raw)
	code, ok := t.codes[string(raw)]
	if !ok {
		code = t.add(string(raw), cellText(raw))
	}
	t.code = code
	return code
}

// remember takes a cell as the last one seen. A text that stood between quotes
// may hold what would end it without.
func (t *interner) remember(raw []byte) {
	t.last, t.length, t.mask = raw, 0, 0
	n := len(raw)
	if n == 0 || raw[0] == '"' || bytes.IndexByte(raw, t.sep) >= 0 || bytes.IndexByte(raw, '\n') >= 0 {
		return
	}
	t.length = n
	if n < 8 {
		var b [8]byte
		b[copy(b[:], raw)] = t.sep
		t.word, t.mask = binary.LittleEndian.Uint64(b[:]), 1<<(8*(n+1))-1
	}
}

// again says whether the cell at i is the same text as the last, and where it
// ends; it may say no where it is.
func (t *interner) again(b []byte, i int) (end int, ok bool) {
	end = i + t.length
	if end+8 > len(b) {
		return 0, false
	}
	if t.mask != 0 {
		return end, binary.LittleEndian.Uint64(b[i:])&t.mask == t.word
	}
	return end, t.length > 0 && b[end] == t.sep && string(b[i:end]) == string(t.last)
}

// add takes a way to write a text that was not seen before; the same text may
// be written in several ways, with blanks around it.
func (t *interner) add(raw, text string) int32 {
	f := fresh{raw: raw}
	code := int32(-1)
	if text != "" {
		known := false
		if code, known = t.codes[text]; !known {
			code = int32(len(t.dict))
			t.dict = append(t.dict, text)
			t.codes[text] = code
			f.text = text
		}
	}
	t.codes[raw] = code
	t.fresh = append(t.fresh, f)
	return code
}

// forget takes back what a row added that is left to the full reader, which may
// not use it.
func (t *interner) forget() {
	for i := len(t.fresh) - 1; i >= 0; i-- {
		f := t.fresh[i]
		delete(t.codes, f.raw)
		if f.text != "" {
			delete(t.codes, f.text)
			t.dict = t.dict[:len(t.dict)-1]
		}
	}
	t.fresh, t.last, t.length, t.mask = t.fresh[:0], nil, 0, 0
}

// block parses one block into c, whose columns have room for its rows.
func (p *parser) block(b *block, c *chunk) {
	p.begin(c)
	buf := b.buf
	careful := p.careful || b.nul
	i, slow := 0, newLines(b)
	lastLine := len(buf)
	if b.cut {
		lastLine = bytes.LastIndexByte(buf[:len(buf)-1], '\n') + 1
	}
	for i < len(buf) {
		switch {
		case buf[i] == '\n':
			i++
			continue
		case buf[i] == '#':
			i += bytes.IndexByte(buf[i:], '\n') + 1
			continue
		}
		next, ok := 0, false
		if !careful && i < lastLine {
			if next, ok = p.fastRow(buf, i, c); !ok {
				for _, s := range p.textOf {
					p.interns[s].forget()
				}
			}
		}
		if !ok {
			next = p.fullRow(b, i, c, slow)
			for _, s := range p.textOf {
				p.interns[s].fresh = p.interns[s].fresh[:0]
			}
		}
		i = next
	}
	for _, s := range p.textOf {
		c.text[s].dict = p.interns[s].dict
	}
}

// begin prepares for a chunk. Every cell of a row is written, so that what its
// columns held before does no harm.
func (p *parser) begin(c *chunk) {
	for k, f := range p.l.fields {
		to := &p.columns[k]
		to.shape, to.end = noShape, p.l.sep
		if k == len(p.l.fields)-1 {
			to.end = '\n'
		}
		switch f.kind {
		case textField:
			to.ints = c.text[f.slot].codes
			p.interns[f.slot] = interner{codes: map[string]int32{}, sep: p.l.sep}
		case intField:
			to.ints = c.ints[f.slot]
		case valueField:
			to.values = c.values[f.slot]
		}
	}
}

// like is a chunk without rows that has the columns of the file.
func (p *parser) like() *chunk {
	c := &chunk{file: p.file, text: make([]textColumn, len(p.interns)), values: make([][]float64, p.values)}
	for _, f := range p.l.fields {
		switch f.kind {
		case textField:
			c.text[f.slot].codes = []int32{}
		case intField:
			c.ints[f.slot] = []int32{}
		case passField:
			c.pass = []int8{}
		case valueField:
			c.values[f.slot] = []float64{}
		}
	}
	return c
}

// trim cuts the columns to the rows used.
func (c *chunk) trim() {
	for i := range c.text {
		if c.text[i].codes != nil {
			c.text[i].codes = c.text[i].codes[:c.n]
		}
	}
	for i := range c.ints {
		if c.ints[i] != nil {
			c.ints[i] = c.ints[i][:c.n]
		}
	}
	if c.pass != nil {
		c.pass = c.pass[:c.n]
	}
	for i := range c.values {
		if c.values[i] != nil {
			c.values[i] = c.values[i][:c.n]
		}
	}
}

// fastRow reads a row of plain cells into row c.n: quotes around a cell or none,
// numbers in plain digits, as many fields as the header. Where anything else stands it gives up
// and leaves the row to fullRow, which takes the same cells for the same
// values.
func (p *parser) fastRow(b []byte, i int, c *chunk) (next int, ok bool) {
	sep, decimal, n := p.l.sep, p.l.decimal, c.n
	fields := p.l.fields
	columns := p.columns[:len(fields)]
	interned := false
	for k := range fields {
		switch fields[k].kind {
		case valueField:
			to := &columns[k]
			if m, ok := to.shape.number(b, i, to.end); ok {
				to.values[n] = to.shape.float(m)
				i += to.shape.length
				break
			}
			v, j, ok := plainNumber(b, i, sep, decimal)
			if !ok {
				if v, j, ok = otherNumber(b, i, sep, decimal); !ok {
					return 0, false
				}
			}
			to.values[n] = v
			to.shape = shapeOf(b[i:j], decimal)
			i = j
		case intField:
			to := &columns[k]
			if m, ok := to.shape.number(b, i, to.end); ok {
				to.ints[n] = to.shape.int(m)
				i += to.shape.length
				break
			}
			v, j, ok := plainInt(b, i, sep)
			if !ok {
				if v, j, ok = otherInt(b, i, sep, decimal); !ok {
					return 0, false
				}
			}
			to.ints[n] = v
			to.shape = shapeOf(b[i:j], sep) // no point
			i = j
		case textField:
			// Nearly always the same text as in the row before.
			t := &p.interns[fields[k].slot]
			if end, ok := t.again(b, i); ok {
				columns[k].ints[n] = t.code
				i = end
				break
			}
			raw, j := plainCell(b, i, sep)
			if raw == nil {
				return 0, false
			}
			columns[k].ints[n] = t.intern(raw)
			interned = true
			i = j
		default:
			raw, j := plainCell(b, i, sep)
			if raw == nil {
				return 0, false
			}
			i = j
			if fields[k].kind != passField {
				break
			}
			v := int8(-1)
			if len(raw) > 0 {
				if v = passFlag(raw); v < 0 {
					return 0, false
				}
			}
			c.pass[n] = v
		}
		if k == len(fields)-1 {
			break
		}
		if b[i] != sep {
			return 0, false
		}
		i++
	}
	if b[i] == sep && (b[i+1] == '\n' || b[i+1] == '\r' && b[i+2] == '\n') {
		i = bytes.IndexByte(b[i:], '\n') + i // one empty field more, at the end of every row
	}
	if b[i] != '\n' || p.wafer >= 0 && columns[p.wafer].ints[n] < 0 || p.wafer < 0 && p.allEmpty(c, n) {
		return 0, false
	}
	if interned {
		for _, s := range p.textOf {
			p.interns[s].fresh = p.interns[s].fresh[:0]
		}
	}
	c.n++
	c.rows.read++
	return i + 1, true
}

// plainCell gives the cell at i and where it ends; nil for one whose quotes are
// not just around it.
func plainCell(b []byte, i int, sep byte) ([]byte, int) {
	if b[i] == '"' {
		return quotedCell(b, i, sep)
	}
	j := i
	for b[j] != sep && b[j] != '\n' {
		j++
	}
	if b[j] == '\n' {
		return dropCR(b[i:j]), j
	}
	return b[i:j], j
}

// quotedCell is plainCell for a cell between quotes, without others within.
func quotedCell(b []byte, i int, sep byte) ([]byte, int) {
	j := i + 1
	for b[j] != '"' {
		if b[j] == '\n' {
			return nil, 0
		}
		j++
	}
	if j >= i+maxQuoted {
		return nil, 0
	}
	end := j + 1
	if b[end] == '\r' && b[end+1] == '\n' {
		end++
	}
	if b[end] != sep && b[end] != '\n' {
		return nil, 0
	}
	return b[i+1 : j : j], end
}

// otherNumber reads the numbers that plainNumber does not: with many digits, with
// blanks around, none, between quotes.
func otherNumber(b []byte, i int, sep, decimal byte) (float64, int, bool) {
	if v, end, st := scanNumber(b, i, sep, decimal); st != cellOdd {
		return v, end, true
	}
	return quotedNumber(b, i, sep, decimal)
}

// quotedNumber reads a number between quotes; ok is false for anything else.
func quotedNumber(b []byte, i int, sep, decimal byte) (v float64, end int, ok bool) {
	if b[i] != '"' {
		return 0, 0, false
	}
	v, j, st := scanNumber(b, i+1, '"', decimal)
	if st == cellOdd || b[j] != '"' {
		return 0, 0, false
	}
	end = j + 1
	if b[end] == '\r' && b[end+1] == '\n' {
		end++
	}
	return v, end, b[end] == sep || b[end] == '\n'
}

// otherInt reads a whole number that plainInt does not: with many digits, with a
// point ("1.0"), none, between quotes.
func otherInt(b []byte, i int, sep, decimal byte) (int32, int, bool) {
	if v, end, st := scanInt(b, i, sep); st != cellOdd {
		return v, end, true
	}
	v, end, st := scanNumber(b, i, sep, decimal)
	if st == cellOdd {
		var ok bool
		if v, end, ok = quotedNumber(b, i, sep, decimal); !ok {
			return 0, 0, false
		}
	}
	if v != v {
		return Missing, end, true
	}
	n, st := wholeNumber(v)
	return n, end, st == cellNumber
}

// allEmpty says whether row n holds nothing at all. Nearly every row is told
// by its first column.
func (p *parser) allEmpty(c *chunk, n int) bool {
	for k := range p.l.fields {
		f := &p.l.fields[k]
		switch f.kind {
		case textField:
			if c.text[f.slot].codes[n] >= 0 {
				return false
			}
		case intField:
			if c.ints[f.slot][n] != Missing {
				return false
			}
		case passField:
			if c.pass[n] >= 0 {
				return false
			}
		case valueField:
			if !math.IsNaN(c.values[f.slot][n]) {
				return false
			}
		}
	}
	return true
}
