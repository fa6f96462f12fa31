package ingest

import (
	"bytes"
	"math"

	"kneepoint/config"
)

// lines finds line numbers within a block, counting on from the last place.
type lines struct {
	b    *block
	at   int
	line int
}

func newLines(b *block) *lines { return &lines{b: b, line: b.line} }

func (l *lines) of(i int) int {
	l.line += bytes.Count(l.b.buf[l.at:i], []byte{'\n'})
	l.at = i
	return l.line
}

// fullRow reads the row at i whatever it holds, and counts what is odd in it.
func (p *parser) fullRow(b *block, i int, c *chunk, where *lines) (next int) {
	r := &p.lastFull
	splitRow(b.buf, i, p.l.sep, len(p.l.fields), true, r)
	next = r.next
	fields := r.fields
	if len(fields) == 1 && len(bytes.TrimSpace(fields[0])) == 0 {
		return next
	}
	here := func() place { return place{line: where.of(i)} }
	c.rows.read++
	want := len(p.l.fields)
	unused := func(o rowOddity) int {
		c.rows.count(o, here())
		return next
	}
	switch {
	case b.nul && bytes.IndexByte(b.buf[i:next], 0) >= 0:
		return unused(binaryRow)
	case b.cut && next == len(b.buf) && p.broken(b, i, fields):
		return unused(cutRow)
	case blank(fields):
		return unused(blankRow)
	case len(fields) > want && !blank(fields[want:]):
		return unused(longRow)
	case p.isHeader(fields):
		return unused(headerAgain)
	case p.wafer >= 0 && !p.waferKnown && (p.wafer >= len(fields) || len(bytes.TrimSpace(fields[p.wafer])) == 0):
		return unused(noWaferRow)
	}
	if r.unclosed {
		c.rows.count(unclosedRow, here())
	}
	if len(fields) < want {
		c.rows.count(shortRow, here())
	}
	p.test = ""
	if k := p.testField; k >= 0 && k < len(fields) {
		p.test = cellText(fields[k])
	}
	p.unit = ""
	if k := p.unitField; k >= 0 && k < len(fields) {
		p.unit = cellText(fields[k])
	}
	for k := range p.l.fields {
		var cell []byte
		if k < len(fields) {
			cell = fields[k]
		}
		p.store(c, k, cell, here)
	}
	c.n++
	return next
}

func blank(fields [][]byte) bool {
	for _, f := range fields {
		if len(bytes.TrimSpace(f)) > 0 {
			return false
		}
	}
	return true
}

// Missing values tell by the bits of their NaN why they are missing, until
// cleaning has counted them by test.
var oddNaN = [...]float64{cellMissing: nanWith(1), cellOver: nanWith(2), cellBad: nanWith(4), cellInvalid: nanWith(5), cellUnder: nanWith(6), cellBound: nanWith(4)}

const oddNaNBits = 0x7ff8_0000_0000_0010

func nanWith(k uint64) float64 { return math.Float64frombits(oddNaNBits | k<<8) }

// nanStatus gives the status that a NaN was made with; cellEmpty for others.
func nanStatus(v float64) status {
	bits := math.Float64bits(v)
	if bits&^0xf00 != oddNaNBits {
		if _, _, ok := asBound(v); ok {
			return cellBound
		}
		return cellEmpty
	}
	return [16]status{1: cellMissing, 2: cellOver, 4: cellBad, 5: cellInvalid, 6: cellUnder}[bits>>8&0xf]
}

// store puts one cell of the full reader into row c.n.
func (p *parser) store(c *chunk, k int, cell []byte, here func() place) {
	f, n := p.l.fields[k], c.n
	t := bytes.TrimSpace(cell)
	count := func(st status) {
		key := oddKey{field: k, kind: st}
		if f.kind == valueField && p.testField >= 0 {
			key.test = p.test
		}
		o := c.odd[key]
		if o.n++; o.n == 1 {
			o.first = here()
			o.first.text = cellText(t)
		}
		if st == cellBad && p.l.decimal == '.' && isDecimal(t, ',') {
			o.comma++
		}
		c.odd[key] = o
	}
	switch f.kind {
	case textField:
		c.text[f.slot].codes[n] = p.interns[f.slot].intern(cell)
	case passField:
		c.pass[n] = passFlag(t)
		if c.pass[n] < 0 && len(t) > 0 && word(t) != cellMissing {
			count(cellBad)
		}
	case intField:
		v, st := parseInt(t, p.l.decimal)
		c.ints[f.slot][n] = v
		if st != cellNumber && st != cellEmpty && st != cellMissing {
			count(cellBad)
		}
	case valueField:
		if p.l.long && f.slot != longValue {
			v, ok := p.limit(t, f.slot == longUpper)
			if !ok {
				count(cellBad)
			}
			c.values[f.slot][n] = v
			return
		}
		v, st := parseNumber(t, p.l.decimal)
		if st == cellBad {
			v, st = p.quantity(k, string(t))
		}
		if st != cellNumber && st != cellEmpty {
			if st != cellBound && st != cellThousands {
				v = oddNaN[st]
			}
			count(st)
		}
		c.values[f.slot][n] = v
	}
}

// quantity reads a number with thousands apart, or with a unit behind it, which
// is converted to the unit of the column or of the row.
func (p *parser) quantity(k int, t string) (float64, status) {
	if v, ok := p.l.thousands(t); ok {
		return v, cellThousands
	}
	unit := p.units[k]
	if p.l.long {
		unit, _ = config.ParseUnit(p.unit)
		if p.unit == "" {
			unit = config.Unit{}
		}
	}
	return quantity(t, p.l.decimal, unit)
}

// quantity reads a number with thousands apart, or with a unit behind it.
func quantity(t string, decimal byte, unit config.Unit) (float64, status) {
	v, text, ok := splitQuantity(t, decimal)
	if !ok || text == "" {
		if ok {
			return v, cellNumber
		}
		return math.NaN(), cellBad
	}
	u, err := config.ParseUnit(text)
	if err != nil || !unit.Given() || !u.Compatible(unit) {
		return math.NaN(), cellBad
	}
	return convertUnit(v, u, unit), cellNumber
}

// limit reads a limit of a row of a long table, in the row's unit.
func (p *parser) limit(t []byte, upper bool) (float64, bool) {
	l, ok := parseLimit(string(t), p.l.decimal, upper)
	if !ok || !l.unit.Given() {
		return l.value, ok
	}
	u, err := config.ParseUnit(p.unit)
	if err != nil || p.unit == "" {
		return math.NaN(), false
	}
	return l.in(u)
}

// isHeader says whether a row repeats the header, as when files were joined.
func (p *parser) isHeader(fields [][]byte) bool {
	if len(fields) < len(p.l.header) {
		return false
	}
	for i, h := range p.l.header {
		if !bytes.Equal(bytes.TrimSpace(fields[i]), bytes.TrimSpace(h)) {
			return false
		}
	}
	return true
}

// broken judges a last line without a line end. Many writers leave the last
// line end out, so a whole row is taken for whole, unless its last cell looks
// cut against those of the rows before it: shorter where they are all of one
// length, with fewer decimals where they all have the same number, or empty
// where they never are.
func (p *parser) broken(b *block, i int, fields [][]byte) bool {
	if b.torn || len(fields) < len(p.l.fields) {
		return true
	}
	const enough, most = 5, 50
	shape := func(c []byte) (length, decimals int) {
		if d := bytes.LastIndexByte(c, p.l.decimal); d >= 0 {
			decimals = len(c) - d - 1
		}
		return len(c), decimals
	}
	lastCell := func(line []byte) []byte { return bytes.TrimSpace(line[bytes.LastIndexByte(line, p.l.sep)+1:]) }
	length, decimals := shape(lastCell(bytes.TrimRight(b.buf[i:], "\r\n")))
	seen, sameLength, sameDecimals := 0, true, true
	firstLength, firstDecimals := 0, 0
	text := lastOf(tailSize, b.before, b.buf[:i])
	for seen < most {
		start := bytes.LastIndexByte(text[:max(len(text)-1, 0)], '\n') + 1
		if start == 0 && (len(text) == 0 || len(text) == tailSize) {
			break // perhaps not the whole line
		}
		line := dropCR(text[start : len(text)-1])
		text = text[:start]
		if len(line) == 0 || line[0] == '#' {
			continue
		}
		n, d := shape(lastCell(line))
		if seen == 0 {
			firstLength, firstDecimals = n, d
		}
		sameLength = sameLength && n == firstLength
		sameDecimals = sameDecimals && d == firstDecimals
		seen++
	}
	return seen >= enough && (sameLength && length < firstLength || sameDecimals && decimals < firstDecimals)
}
