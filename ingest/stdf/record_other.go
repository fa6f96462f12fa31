package stdf

import "math"

// TSR sums up a test: how often it ran and failed, by site or of all (Head
// AllSites). Counts are NoCount when missing; Optional says by the TSRNo bits
// which of the last five do not count.
type TSR struct {
	Head, Site uint8
	Type       byte    // TEST_TYP: P parametric, F functional, M multiple-result, ' ' unknown
	Number     uint32  // TEST_NUM
	Executed   uint32  // EXEC_CNT
	Failed     uint32  // FAIL_CNT
	Alarmed    uint32  // ALRM_CNT
	Name       string  // TEST_NAM
	Sequence   string  // SEQ_NAME
	Label      string  // TEST_LBL
	Optional   uint8   // OPT_FLAG; all bits set when missing
	Time       float32 // TEST_TIM: average execution time in seconds
	Min, Max   float32 // TEST_MIN, TEST_MAX of the results
	Sum        float32 // TST_SUMS
	SumSquares float32 // TST_SQRS
}

func (*TSR) Kind() Kind { return KindTSR }

func (m *TSR) layout(c *coder) {
	c.u1(&m.Head, 0)
	c.u1(&m.Site, 0)
	c.u1(&m.Type, ' ')
	c.u4(&m.Number, 0)
	c.u4(&m.Executed, NoCount)
	c.u4(&m.Failed, NoCount)
	c.u4(&m.Alarmed, NoCount)
	c.cn(&m.Name)
	c.cn(&m.Sequence)
	c.cn(&m.Label)
	c.u1(&m.Optional, 0xff)
	c.r4(&m.Time, 0)
	c.r4(&m.Min, 0)
	c.r4(&m.Max, 0)
	c.r4(&m.Sum, 0)
	c.r4(&m.SumSquares, 0)
}

// BPS opens a section of the test program.
type BPS struct {
	Sequence string // SEQ_NAME
}

func (*BPS) Kind() Kind        { return KindBPS }
func (m *BPS) layout(c *coder) { c.cn(&m.Sequence) }

// EPS closes the section opened last.
type EPS struct{}

func (*EPS) Kind() Kind      { return KindEPS }
func (*EPS) layout(c *coder) {}

// DTR is a line of text.
type DTR struct {
	Text string // TEXT_DAT
}

func (*DTR) Kind() Kind { return KindDTR }

func (m *DTR) layout(c *coder) {
	if c.writing {
		c.cn(&m.Text)
		return
	}
	var b []byte
	c.text(&b)
	m.Text = text(b) // not interned: each is its own
}

// GDR holds data of the user's own, each with its type. They are read when
// Fields asks for them.
type GDR struct {
	fields   []Field // of a record made by NewGDR
	count    int     // FLD_CNT
	data     []byte  // GEN_DATA as in the file
	big, vax bool
}

// Field is one datum of a GDR. Code is its type in the file, and Value its Go
// value: 0 B*0 nil (a pad, which readers pass over), 1 U*1 uint8, 2 U*2 uint16,
// 3 U*4 uint32, 4 I*1 int8, 5 I*2 int16, 6 I*4 int32, 7 R*4 float32, 8 R*8
// float64, 10 C*n string, 11 B*n []byte, 12 D*n Bits, 13 N*1 uint8.
type Field struct {
	Code  uint8
	Value any
}

// NewGDR makes a record of the fields.
func NewGDR(fields ...Field) *GDR { return &GDR{fields: fields} }

func (*GDR) Kind() Kind { return KindGDR }

func (m *GDR) layout(c *coder) {
	if c.writing {
		fields := m.Fields()
		n := len(fields)
		c.count2(&n)
		for _, f := range fields {
			c.u1(&f.Code, 0)
			f.write(c)
		}
		return
	}
	m.fields, m.big, m.vax = nil, c.big, c.vax
	c.count2(&m.count)
	m.data = c.body
	for n := 0; n < m.count && len(c.body) > 0 && !c.overrun; {
		if c.body[0] == 0 {
			// Whether FLD_CNT counts the pads is not settled by what is known
			// here: they are passed over, and the end of the record decides.
			c.body = c.body[1:]
			continue
		}
		genericField(c, false)
		n++
	}
	for len(c.body) > 0 && c.body[0] == 0 && !c.overrun {
		c.body = c.body[1:] // pads at the end
	}
	m.data = m.data[:len(m.data)-len(c.body)]
}

// Fields are the data, without pads.
func (m *GDR) Fields() []Field {
	if m.fields != nil || len(m.data) == 0 {
		return m.fields
	}
	c := coder{big: m.big, vax: m.vax}
	c.read(m.data)
	var fields []Field
	for len(c.body) > 0 && !c.overrun {
		if f := genericField(&c, true); f.Code != 0 && !c.overrun {
			fields = append(fields, f)
		}
	}
	return fields
}

// genericField reads one datum with its code. An unknown code is an overrun:
// what follows it cannot be found.
func genericField(c *coder, keep bool) Field {
	f := Field{Code: c.body[0]}
	c.body = c.body[1:]
	need := func(n int) []byte { return c.take(n) }
	switch f.Code {
	case 0:
	case 1, 4, 13:
		if b := need(1); b != nil && keep {
			switch f.Code {
			case 1:
				f.Value = b[0]
			case 4:
				f.Value = int8(b[0])
			case 13:
				f.Value = b[0] & 0xf
			}
		}
	case 2, 5:
		if b := need(2); b != nil && keep {
			if v := u2(b, c.big); f.Code == 2 {
				f.Value = v
			} else {
				f.Value = int16(v)
			}
		}
	case 3, 6, 7:
		if b := need(4); b != nil && keep {
			switch f.Code {
			case 3:
				f.Value = u4(b, c.big)
			case 6:
				f.Value = int32(u4(b, c.big))
			case 7:
				f.Value = c.float(b)
			}
		}
	case 8:
		if b := need(8); b != nil && keep {
			f.Value = c.double(b)
		}
	case 10, 11:
		if b := need(1); b != nil {
			if b = c.take(int(b[0])); b != nil && keep {
				if f.Code == 10 {
					f.Value = text(b)
				} else {
					f.Value = append([]byte{}, b...)
				}
			}
		}
	case 12:
		if b := need(2); b != nil {
			n := u2(b, c.big)
			if b = c.take((int(n) + 7) / 8); b != nil && keep {
				f.Value = Bits{N: n, Data: append([]byte{}, b...)}
			}
		}
	default:
		c.overrun, c.body = true, nil
	}
	return f
}

// write writes the datum without its code; a value that is not of the code's
// Go type is an error.
func (f Field) write(c *coder) {
	ok := true
	switch v := f.Value.(type) {
	case nil:
		ok = f.Code == 0
	case uint8:
		ok = f.Code == 1 || f.Code == 13
		c.u1(&v, 0)
	case int8:
		ok = f.Code == 4
		c.i1(&v)
	case uint16:
		ok = f.Code == 2
		c.u2(&v, 0)
	case int16:
		ok = f.Code == 5
		c.i2(&v, 0)
	case uint32:
		ok = f.Code == 3
		c.u4(&v, 0)
	case int32:
		ok = f.Code == 6
		c.i4(&v)
	case float32:
		ok = f.Code == 7
		c.r4(&v, 0)
	case float64:
		ok = f.Code == 8
		lo, hi := uint32(math.Float64bits(v)), uint32(math.Float64bits(v)>>32)
		if c.big {
			lo, hi = hi, lo
		}
		c.putU4(lo)
		c.putU4(hi)
	case string:
		ok = f.Code == 10
		c.cn(&v)
	case []byte:
		ok = f.Code == 11
		c.bytes(&v)
	case Bits:
		ok = f.Code == 12
		c.dn(&v)
	default:
		ok = false
	}
	if !ok {
		c.fail("stdf: GDR: a %T where code %d is given", f.Value, f.Code)
	}
}

// double reads the R*8 in b.
func (c *coder) double(b []byte) float64 {
	lo, hi := uint64(u4(b, c.big)), uint64(u4(b[4:], c.big))
	switch {
	case c.vax:
		// D_floating: F_floating with 32 more bits of fraction, in the same
		// order of words.
		swap := func(v uint64) uint64 { return v<<16&0xffff0000 | v>>16 }
		return vaxD(swap(lo)<<32 | swap(hi))
	case c.big:
		lo, hi = hi, lo
	}
	return math.Float64frombits(hi<<32 | lo)
}

// vaxD reads a D_floating number whose words are in order; see vaxF.
func vaxD(w uint64) float64 {
	e := int(w >> 55 & 0xff)
	if e == 0 {
		if w>>63 == 1 {
			return math.NaN()
		}
		return 0
	}
	m := math.Ldexp(float64(w&(1<<55-1)|1<<55), e-128-56)
	if w>>63 == 1 {
		m = -m
	}
	return m
}
