package ingest

import (
	"bytes"

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
	texts    []int      // columns of the file that are texts
	interned bool       // the row at work has a text that is not that of the row above
	columns  []column   // of the chunk at work, by column of the file
	wafer    int        // column of the wafer ids, -1 none
	// waferKnown says that a comment gives the wafer of rows that do not.
	waferKnown bool
	testField  int                 // column of the test names of a long table, -1 none
	unitField  int                 // and of the units
	units      map[int]config.Unit // of the columns of a wide table
	test, unit string              // of the row at work
}

// column is where the cells of a column go, and how the last one was written.
type column struct {
	kind   fieldKind
	end    byte // that ends a cell: the separator, or the line's end
	ints   []int32
	values []float64
	shape  shape
	code   int32  // of a text, a pass flag
	text   []byte // the cell, where it is longer than a shape shows
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
			p.texts = append(p.texts, k)
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
				p.forget()
			}
		}
		if !ok {
			next = p.fullRow(b, i, c, slow)
			p.settle()
		}
		i = next
	}
	for _, k := range p.texts {
		s := p.l.fields[k].slot
		c.text[s].dict = p.interns[s].dict
	}
}

// settle keeps the texts of a row that is used.
func (p *parser) settle() {
	for _, k := range p.texts {
		t := &p.interns[p.l.fields[k].slot]
		t.fresh = t.fresh[:0]
	}
	p.interned = false
}

// forget takes back the texts of a row that is left to the full reader.
func (p *parser) forget() {
	for _, k := range p.texts {
		p.interns[p.l.fields[k].slot].forget()
		p.columns[k].shape = noShape
	}
	p.interned = false
}

// begin prepares for a chunk. Every cell of a row is written, so that what its
// columns held before does no harm.
func (p *parser) begin(c *chunk) {
	for k, f := range p.l.fields {
		to := &p.columns[k]
		to.kind, to.shape, to.end = f.kind, noShape, p.l.sep
		if k == len(p.l.fields)-1 {
			to.end = '\n'
		}
		switch f.kind {
		case textField:
			to.ints = c.text[f.slot].codes
			p.interns[f.slot] = interner{codes: map[string]int32{}}
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
