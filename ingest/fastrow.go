package ingest

import (
	"bytes"
	"math"
)

// fastRow reads a row of plain cells into row c.n: quotes around a cell or none,
// numbers in plain digits, as many fields as the header. Where anything else
// stands it gives up and leaves the row to fullRow, which takes the same cells
// for the same values.
//
// A cell is nearly always written as the one above it: a number of the same
// shape, the same text. That is tried first, see shape.
func (p *parser) fastRow(b []byte, i int, c *chunk) (next int, ok bool) {
	n, columns := c.n, p.columns
	for k := range columns {
		to := &columns[k]
		s := &to.shape
		if end := i + s.length; i+s.reach <= len(b) {
			if t := s.word(b, i); s.fits(t) && b[end] == to.end {
				switch to.kind {
				case valueField:
					to.values[n] = s.float(t)
					i = end + 1
					continue
				case intField:
					to.ints[n] = s.int(t)
					i = end + 1
					continue
				case textField:
					if s.length <= 8 || bytes.Equal(b[i:end], to.text) {
						to.ints[n] = to.code
						i = end + 1
						continue
					}
				case passField:
					c.pass[n] = int8(to.code)
					i = end + 1
					continue
				}
			}
		}
		if i, ok = p.plain(b, i, k, c); !ok {
			return 0, false
		}
		if k < len(columns)-1 {
			if b[i] != p.l.sep {
				return 0, false
			}
		} else if b[i] == p.l.sep && (b[i+1] == '\n' || b[i+1] == '\r' && b[i+2] == '\n') {
			i += bytes.IndexByte(b[i:], '\n') // one empty field more, at the end of every row
		} else if b[i] != '\n' {
			return 0, false
		}
		i++
	}
	if p.wafer >= 0 && columns[p.wafer].ints[n] < 0 || p.wafer < 0 && p.allEmpty(c, n) {
		return 0, false
	}
	if p.interned {
		p.settle()
	}
	c.n++
	c.rows.read++
	return i, true
}

// plain reads one plain cell of column k into row c.n, and gives the place of the
// byte that ended it; ok is false for a cell that is not plain.
func (p *parser) plain(b []byte, i, k int, c *chunk) (end int, ok bool) {
	sep, decimal, n := p.l.sep, p.l.decimal, c.n
	to := &p.columns[k]
	switch to.kind {
	case valueField:
		v, j, ok := plainNumber(b, i, sep, decimal)
		if !ok {
			if v, j, ok = otherNumber(b, i, sep, decimal); !ok {
				return 0, false
			}
		}
		to.values[n] = v
		if b[j] == to.end && j > i {
			to.shape = shapeOf(b[i:j], decimal)
		}
		return j, true
	case intField:
		v, j, ok := plainInt(b, i, sep)
		if !ok {
			if v, j, ok = otherInt(b, i, sep, decimal); !ok {
				return 0, false
			}
		}
		to.ints[n] = v
		if b[j] == to.end && j > i {
			to.shape = shapeOf(b[i:j], 0)
		}
		return j, true
	}
	raw, j := plainCell(b, i, sep)
	if raw == nil {
		return 0, false
	}
	switch to.kind {
	case textField:
		to.code, p.interned = p.interns[p.l.fields[k].slot].intern(raw), true
		to.ints[n] = to.code
	case passField:
		v := int8(-1)
		if len(raw) > 0 {
			if v = passFlag(raw); v < 0 {
				return 0, false // code stays that of the shape
			}
		}
		to.code, c.pass[n] = int32(v), v
	default:
		return j, true
	}
	if to.shape = noShape; b[j] == to.end && j > i {
		to.text, to.shape = b[i:j], shapeOfText(b[i:j])
	}
	return j, true
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
