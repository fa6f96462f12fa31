package stdf

// PTR is one parametric result. Result, limits and specification limits are in
// the base unit that Units names; the scales only say how to show them.
//
// What OPT_FLAG and later fields say holds by default for the later PTRs of
// the test number: see Limits for what holds for this record.
type PTR struct {
	Number     uint32 // TEST_NUM
	Head, Site uint8
	Flag       TestFlag  // TEST_FLG
	Parm       ParmFlag  // PARM_FLG
	Result     float32   // RESULT; NaN when the record ends before it
	Text       string    // TEST_TXT of this record, "" when it gives none: see Test.Text
	Alarm      string    // ALARM_ID
	Optional   *Optional // what this record says of its own; nil nothing

	about
	textRaw, alarmRaw, optRaw []byte // views, between reading and taking the record over
}

// about is what the Reader knows of a result's test.
type about struct {
	Test   *Test // shared and owned by the Reader; nil in a record that no Reader made
	limits *Limits
	which  int // index of limits in Test.Limits; -1 none of them
}

// Limits are the unit, scale and limits that hold for the record: its own where
// it gives them, else the defaults of its test.
func (a *about) Limits() Limits {
	if a.limits == nil {
		return noLimits
	}
	return *a.limits
}

// LimitsIndex is where Limits stands in Test.Limits; -1 when it is not kept
// there, as the test has too many different ones.
func (a *about) LimitsIndex() int { return a.which }

// Usable says whether the standard lets the result be used; see Usable.
func (m *PTR) Usable() bool { return Usable(m.Flag, m.Parm) }

// Optional is the part of a PTR from OPT_FLAG on, as the record has it.
type Optional struct {
	// Present says how many of the fields are there, counted from Flag; the
	// others were left out at the end of the record. A Writer takes 0 for all.
	Present                       int
	Flag                          OptFlag // OPT_FLAG
	ResScale                      int8    // RES_SCAL: a result of 1 in the base unit shows as 10^ResScale
	LoScale, HiScale              int8    // LLM_SCAL, HLM_SCAL
	LoLimit, HiLimit              float32 // LO_LIMIT, HI_LIMIT
	Units                         string  // UNITS: base unit
	ResFormat, LoFormat, HiFormat string  // C_RESFMT, C_LLMFMT, C_HLMFMT
	LoSpec, HiSpec                float32 // LO_SPEC, HI_SPEC
}

func (*PTR) Kind() Kind { return KindPTR }

func (m *PTR) layout(c *coder) {
	resultHead(c, &m.Number, &m.Head, &m.Site, &m.Flag)
	parm := uint8(m.Parm)
	c.u1(&parm, 0)
	m.Parm = ParmFlag(parm)
	c.r4(&m.Result, none)
	if c.writing && m.Text == "" && m.Alarm == "" && m.Optional == nil {
		return
	}
	c.cn(&m.Text)
	c.cn(&m.Alarm)
	if c.writing && m.Optional != nil {
		m.Optional.layout(c)
	}
}

// resultHead is the head that PTR, MPR and FTR share.
func resultHead(c *coder, number *uint32, head, site *uint8, flag *TestFlag) {
	f := uint8(*flag)
	c.u4(number, 0)
	c.u1(head, 0)
	c.u1(site, 0)
	c.u1(&f, 0)
	*flag = TestFlag(f)
}

func (m *Optional) layout(c *coder) {
	start := c.fields
	if c.writing && m.Present > 0 {
		c.limit = start + m.Present
	}
	m.scales(c)
	c.cn(&m.Units)
	m.formats(c)
	if !c.writing {
		m.Present = c.fields - start
	}
}

func (m *Optional) scales(c *coder) {
	flag := uint8(m.Flag)
	c.u1(&flag, 0)
	m.Flag = OptFlag(flag)
	c.i1(&m.ResScale)
	c.i1(&m.LoScale)
	c.i1(&m.HiScale)
	c.r4(&m.LoLimit, 0)
	c.r4(&m.HiLimit, 0)
}

func (m *Optional) formats(c *coder) {
	c.cn(&m.ResFormat)
	c.cn(&m.LoFormat)
	c.cn(&m.HiFormat)
	c.r4(&m.LoSpec, 0)
	c.r4(&m.HiSpec, 0)
}

// read reads what is of fixed length and cuts the rest into views; it touches
// nothing but the record, as the record may yet turn out to be no record.
func (m *PTR) read(c *coder, b []byte) fit {
	if len(b) < 12 {
		m.Optional, m.Test, m.limits = nil, nil, nil
		m.textRaw, m.alarmRaw, m.optRaw = nil, nil, nil
		c.read(b)
		m.layout(c)
		return c.fit()
	}
	if !m.cut(c, b) {
		return overrun
	}
	f := fitOptional(m.optRaw)
	if !clean(m.textRaw) || !clean(m.alarmRaw) {
		f = max(f, doubtful)
	}
	return f
}

// cut is read for 12 bytes and more without a look at what is in the texts and
// the optional part; false when a text runs over the end.
func (m *PTR) cut(c *coder, b []byte) (ok bool) {
	m.Number = u4(b, c.big)
	m.Head, m.Site, m.Flag, m.Parm = b[4], b[5], TestFlag(b[6]), ParmFlag(b[7])
	m.Result = c.float(b[8:])
	m.alarmRaw, m.optRaw = nil, nil
	if m.textRaw, b, ok = cutText(b[12:]); !ok || len(b) == 0 {
		return ok
	}
	if b[0] == 0 {
		m.optRaw = b[1:]
		return true
	}
	m.alarmRaw, m.optRaw, ok = cutText(b)
	return ok
}

// fitOptional says how the fields of an Optional lie in b.
func fitOptional(b []byte) fit {
	// OPT_FLAG and three scales of a byte each, two limits of four
	if len(b) < 12 {
		if len(b) <= 4 || len(b) == 8 {
			return exact
		}
		return overrun
	}
	b = b[12:]
	f := exact
	for range 4 {
		text, rest, ok := cutText(b)
		if !ok {
			return overrun
		}
		if !clean(text) {
			f = doubtful
		}
		b = rest
	}
	switch {
	case len(b) == 0, len(b) == 4, len(b) == 8:
		return f
	case len(b) < 8:
		return overrun
	}
	return extra
}

// MPR is one test with several results, one for each pin. A Writer writes zero
// states and no-pins (index 0) where States or Pins are empty and the other is
// not.
type MPR struct {
	Number     uint32 // TEST_NUM
	Head, Site uint8
	Flag       TestFlag     // TEST_FLG
	Parm       ParmFlag     // PARM_FLG
	States     Nibbles      // RTN_STAT, of the RTN_ICNT pins
	Results    []float32    // RTN_RSLT
	Text       string       // TEST_TXT
	Alarm      string       // ALARM_ID
	Optional   *MPROptional // what this record says of its own; nil nothing

	about
	pins    int // RTN_ICNT
	textRaw []byte
}

// Usable says whether the standard lets the results be used; see Usable.
func (m *MPR) Usable() bool { return Usable(m.Flag, m.Parm) }

// MPROptional is the part of an MPR from OPT_FLAG on. Present counts its own
// fields: those of Optional up to the limits, StartIn, StepIn, Pins, Units,
// UnitsIn, and the rest of Optional.
type MPROptional struct {
	Optional
	StartIn, StepIn float32  // START_IN, INCR_IN: the stimulus of the first result, and its step
	Pins            []uint16 // RTN_INDX: PMR index of each of the RTN_ICNT pins
	UnitsIn         string   // UNITS_IN of the stimulus
}

func (*MPR) Kind() Kind { return KindMPR }

func (m *MPR) layout(c *coder) {
	if c.writing {
		m.pins = m.States.N
		if o := m.Optional; o != nil && len(o.Pins) > 0 {
			m.pins = len(o.Pins)
		}
	}
	results := len(m.Results)
	resultHead(c, &m.Number, &m.Head, &m.Site, &m.Flag)
	parm := uint8(m.Parm)
	c.u1(&parm, 0)
	m.Parm = ParmFlag(parm)
	c.count2(&m.pins)
	c.count2(&results)
	states := m.States
	if c.writing && states.N == 0 {
		states = Nibbles{N: m.pins, Data: make([]byte, (m.pins+1)/2)}
	}
	c.n1s(&states, m.pins)
	if !c.writing {
		m.States = states
	}
	c.r4s(&m.Results, results)
	if c.writing && m.Text == "" && m.Alarm == "" && m.Optional == nil {
		return
	}
	if c.writing {
		c.cn(&m.Text)
	} else {
		c.text(&m.textRaw)
	}
	c.cn(&m.Alarm)
	if m.Optional != nil {
		m.Optional.layout(c, m.pins)
	}
}

func (m *MPROptional) layout(c *coder, pins int) {
	start := c.fields
	if c.writing && m.Present > 0 {
		c.limit = start + m.Present
	}
	m.scales(c)
	c.r4(&m.StartIn, 0)
	c.r4(&m.StepIn, 0)
	list := m.Pins
	if c.writing && len(list) == 0 {
		list = make([]uint16, pins)
	}
	c.u2s(&list, pins)
	if !c.writing {
		m.Pins = list
	}
	c.cn(&m.Units)
	c.cn(&m.UnitsIn)
	m.formats(c)
	if !c.writing {
		m.Present = c.fields - start
	}
}

// FTR is one functional result: pass or fail, and where it failed. Optional
// says by the FTRNo bits which of the fields after it do not count.
type FTR struct {
	Number        uint32 // TEST_NUM
	Head, Site    uint8
	Flag          TestFlag // TEST_FLG
	Optional      uint8    // OPT_FLAG; all bits set when missing
	Cycles        uint32   // CYCL_CNT
	Address       uint32   // REL_VADR: vector address
	Repeats       uint32   // REPT_CNT
	FailingPins   uint32   // NUM_FAIL
	FailX, FailY  int32    // XFAIL_AD, YFAIL_AD: logical device failure address
	Offset        int16    // VECT_OFF
	ReturnPins    []uint16 // RTN_INDX
	ReturnStates  Nibbles  // RTN_STAT
	ProgramPins   []uint16 // PGM_INDX
	ProgramStates Nibbles  // PGM_STAT
	FailPins      Bits     // FAIL_PIN
	Vector        string   // VECT_NAM
	TimeSet       string   // TIME_SET
	OpCode        string   // OP_CODE
	Text          string   // TEST_TXT
	Alarm         string   // ALARM_ID
	ProgramText   string   // PROG_TXT
	ResultText    string   // RSLT_TXT
	PatternNumber uint8    // PATG_NUM, 255 missing
	SpinMap       Bits     // SPIN_MAP

	Test    *Test // as in PTR
	textRaw []byte
}

func (*FTR) Kind() Kind { return KindFTR }

func (m *FTR) layout(c *coder) {
	returns, programs := len(m.ReturnPins), len(m.ProgramPins)
	resultHead(c, &m.Number, &m.Head, &m.Site, &m.Flag)
	c.u1(&m.Optional, 0xff)
	c.u4(&m.Cycles, 0)
	c.u4(&m.Address, 0)
	c.u4(&m.Repeats, 0)
	c.u4(&m.FailingPins, 0)
	c.i4(&m.FailX)
	c.i4(&m.FailY)
	c.i2(&m.Offset, 0)
	c.count2(&returns)
	c.count2(&programs)
	c.u2s(&m.ReturnPins, returns)
	c.n1s(&m.ReturnStates, returns)
	c.u2s(&m.ProgramPins, programs)
	c.n1s(&m.ProgramStates, programs)
	c.dn(&m.FailPins)
	c.cn(&m.Vector)
	c.cn(&m.TimeSet)
	c.cn(&m.OpCode)
	if c.writing {
		c.cn(&m.Text)
	} else {
		c.text(&m.textRaw)
	}
	c.cn(&m.Alarm)
	c.cn(&m.ProgramText)
	c.cn(&m.ResultText)
	c.u1(&m.PatternNumber, 255)
	c.dn(&m.SpinMap)
}
