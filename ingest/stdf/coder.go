package stdf

import (
	"encoding/binary"
	"fmt"
	"math"
)

// coder walks the fields of a record's body in the order of its layout, reading
// or writing. Each record type has one layout method, which serves both
// directions: there is one place where a layout is written down.
//
// Reading: a record may end after any field; the fields left out take the value
// that stands for missing. A field that runs over the end sets overrun. Byte
// fields are views of the body. Nothing is allocated by what a count or a
// length byte claims: it is first checked against the bytes that are there.
type coder struct {
	body     []byte // reading: what is left
	out      []byte // writing
	writing  bool
	big, vax bool
	overrun  bool // reading: a field is cut by the end of the record
	unclean  bool // reading: a text does not look like one
	fields   int  // met so far
	limit    int  // writing: stop after so many; 0 none
	err      error
	strings  *interner
}

// read starts reading a body.
func (c *coder) read(body []byte) {
	c.body, c.overrun, c.unclean, c.fields = body, false, false, 0
}

// write starts writing a body.
func (c *coder) write() {
	c.out, c.fields, c.limit, c.err = c.out[:0], 0, 0, nil
}

// next says whether the record has one more field.
func (c *coder) next() bool {
	if c.writing {
		if c.limit > 0 && c.fields >= c.limit {
			return false
		}
	} else if len(c.body) == 0 || c.overrun {
		return false
	}
	c.fields++
	return true
}

// take cuts n bytes off the body; nil and overrun when they are not there.
func (c *coder) take(n int) []byte {
	if n > len(c.body) {
		c.overrun, c.body = true, nil
		return nil
	}
	b := c.body[:n:n]
	c.body = c.body[n:]
	return b
}

func (c *coder) fail(format string, args ...any) {
	if c.err == nil {
		c.err = fmt.Errorf(format, args...)
	}
}

func u2(b []byte, big bool) uint16 {
	if big {
		return binary.BigEndian.Uint16(b)
	}
	return binary.LittleEndian.Uint16(b)
}

func u4(b []byte, big bool) uint32 {
	if big {
		return binary.BigEndian.Uint32(b)
	}
	return binary.LittleEndian.Uint32(b)
}

func (c *coder) putU2(v uint16) {
	if c.big {
		c.out = binary.BigEndian.AppendUint16(c.out, v)
	} else {
		c.out = binary.LittleEndian.AppendUint16(c.out, v)
	}
}

func (c *coder) putU4(v uint32) {
	if c.big {
		c.out = binary.BigEndian.AppendUint32(c.out, v)
	} else {
		c.out = binary.LittleEndian.AppendUint32(c.out, v)
	}
}

// u1 is a U*1.
func (c *coder) u1(p *uint8, missing uint8) {
	if !c.next() {
		if !c.writing {
			*p = missing
		}
		return
	}
	if c.writing {
		c.out = append(c.out, *p)
		return
	}
	*p, c.body = c.body[0], c.body[1:]
}

// i1 is an I*1; missing is 0.
func (c *coder) i1(p *int8) {
	v := uint8(*p)
	c.u1(&v, 0)
	*p = int8(v)
}

// u2 is a U*2.
func (c *coder) u2(p *uint16, missing uint16) {
	if !c.next() {
		if !c.writing {
			*p = missing
		}
		return
	}
	if c.writing {
		c.putU2(*p)
	} else if b := c.take(2); b != nil {
		*p = u2(b, c.big)
	} else {
		*p = missing
	}
}

// i2 is an I*2.
func (c *coder) i2(p *int16, missing int16) {
	v := uint16(*p)
	c.u2(&v, uint16(missing))
	*p = int16(v)
}

// u4 is a U*4.
func (c *coder) u4(p *uint32, missing uint32) {
	if !c.next() {
		if !c.writing {
			*p = missing
		}
		return
	}
	if c.writing {
		c.putU4(*p)
	} else if b := c.take(4); b != nil {
		*p = u4(b, c.big)
	} else {
		*p = missing
	}
}

// i4 is an I*4; missing is 0.
func (c *coder) i4(p *int32) {
	v := uint32(*p)
	c.u4(&v, 0)
	*p = int32(v)
}

// r4 is an R*4.
func (c *coder) r4(p *float32, missing float32) {
	if !c.next() {
		if !c.writing {
			*p = missing
		}
		return
	}
	if c.writing {
		c.putU4(math.Float32bits(*p))
	} else if b := c.take(4); b != nil {
		*p = c.float(b)
	} else {
		*p = missing
	}
}

// float reads the R*4 at the head of b.
func (c *coder) float(b []byte) float32 {
	v := u4(b, c.big)
	if c.vax {
		return vaxF(v)
	}
	return math.Float32frombits(v)
}

// bytes is a C*n or B*n (the layout is the same: a length byte, then the
// bytes), as a view of the body.
func (c *coder) bytes(p *[]byte) {
	if !c.next() {
		if !c.writing {
			*p = nil
		}
		return
	}
	if c.writing {
		if len(*p) > 255 {
			c.fail("stdf: a field of %d bytes: C*n and B*n hold 255", len(*p))
			return
		}
		c.out = append(append(c.out, uint8(len(*p))), *p...)
		return
	}
	n := int(c.body[0])
	c.body = c.body[1:]
	*p = c.take(n)
}

// cn is a C*n.
func (c *coder) cn(p *string) {
	if c.writing {
		if len(*p) > 255 {
			c.fail("stdf: a text of %d bytes: C*n holds 255", len(*p))
		} else if c.next() {
			c.out = append(append(c.out, uint8(len(*p))), *p...)
		}
		return
	}
	var b []byte
	c.text(&b)
	*p = c.strings.get(b)
}

// text is a C*n as a view of the body.
func (c *coder) text(p *[]byte) {
	c.bytes(p)
	if !c.writing && !clean(*p) {
		c.unclean = true
	}
}

// count2 is a U*2 that says how many items follow: read into n, written from it.
func (c *coder) count2(n *int) {
	v := uint16(*n)
	if c.writing && (*n < 0 || *n > 0xffff) {
		c.fail("stdf: %d items: a count of U*2 holds 65535", *n)
	}
	c.u2(&v, 0)
	*n = int(v)
}

// items says whether an array of n items of the given bytes is there to be
// read, and how many bytes it takes.
func (c *coder) items(n, size int) []byte {
	if !c.next() || n == 0 {
		return nil
	}
	return c.take(n * size)
}

// u2s is a kxU*2 of n items.
func (c *coder) u2s(p *[]uint16, n int) {
	if c.writing {
		c.check(len(*p), n)
		if c.next() {
			for _, v := range *p {
				c.putU2(v)
			}
		}
		return
	}
	*p = (*p)[:0]
	b := c.items(n, 2)
	for ; len(b) > 0; b = b[2:] {
		*p = append(*p, u2(b, c.big))
	}
}

// r4s is a kxR*4 of n items.
func (c *coder) r4s(p *[]float32, n int) {
	if c.writing {
		c.check(len(*p), n)
		if c.next() {
			for _, v := range *p {
				c.putU4(math.Float32bits(v))
			}
		}
		return
	}
	*p = (*p)[:0]
	b := c.items(n, 4)
	for ; len(b) > 0; b = b[4:] {
		*p = append(*p, c.float(b))
	}
}

// u1s is a kxU*1 of n items, as a view.
func (c *coder) u1s(p *[]byte, n int) {
	if c.writing {
		c.check(len(*p), n)
		if c.next() {
			c.out = append(c.out, *p...)
		}
		return
	}
	*p = c.items(n, 1)
}

// n1s is a kxN*1 of n items, as a view.
func (c *coder) n1s(p *Nibbles, n int) {
	if c.writing {
		c.check(p.N, n)
		c.check(len(p.Data), (n+1)/2)
		if c.next() {
			c.out = append(c.out, p.Data...)
		}
		return
	}
	*p = Nibbles{}
	if b := c.items((n+1)/2, 1); b != nil {
		*p = Nibbles{N: n, Data: b}
	}
}

// dn is a D*n: a U*2 count of bits, then the bits, as a view.
func (c *coder) dn(p *Bits) {
	if !c.next() {
		if !c.writing {
			*p = Bits{}
		}
		return
	}
	if c.writing {
		c.check(len(p.Data), (int(p.N)+7)/8)
		c.putU2(p.N)
		c.out = append(c.out, p.Data...)
		return
	}
	*p = Bits{}
	if b := c.take(2); b != nil {
		n := u2(b, c.big)
		if b := c.take((int(n) + 7) / 8); b != nil {
			*p = Bits{N: n, Data: b}
		}
	}
}

func (c *coder) check(have, want int) {
	if have != want {
		c.fail("stdf: an array of %d items where its count says %d", have, want)
	}
}

// Nibbles is a kxN*1: N items of four bits, the first in the low half of the
// first byte.
type Nibbles struct {
	N    int
	Data []byte
}

// At is item i.
func (n Nibbles) At(i int) uint8 { return n.Data[i/2] >> (4 * uint(i&1)) & 0xf }

// Bits is a D*n: N bits, the first in the lowest bit of the first byte.
type Bits struct {
	N    uint16
	Data []byte
}

// At is bit i.
func (b Bits) At(i int) bool { return b.Data[i/8]>>uint(i&7)&1 == 1 }

// vaxF reads a VAX F_floating number, which CPU_TYPE 0 promises: two 16-bit
// words, the one with sign, exponent (excess 128) and the upper seven bits of
// the fraction first; a hidden bit of one half. A zero exponent is zero, or,
// with the sign set, the reserved operand, read here as NaN. (VAX Architecture
// Reference Manual; from memory, held by the known pattern 4080 for 1.0.)
func vaxF(v uint32) float32 {
	w := v<<16 | v>>16
	e := int(w >> 23 & 0xff)
	if e == 0 {
		if w>>31 == 1 {
			return none
		}
		return 0
	}
	m := math.Ldexp(float64(w&0x7fffff|0x800000), e-128-24)
	if w>>31 == 1 {
		m = -m
	}
	return float32(m)
}
