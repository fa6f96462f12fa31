package stdf

// WIR opens a wafer on a head.
type WIR struct {
	Head      uint8
	Group     uint8  // SITE_GRP, 255 unknown
	StartTime uint32 // START_T
	WaferID   string // WAFER_ID
}

func (*WIR) Kind() Kind { return KindWIR }

func (m *WIR) layout(c *coder) {
	c.u1(&m.Head, 0)
	c.u1(&m.Group, 255)
	c.u4(&m.StartTime, 0)
	c.cn(&m.WaferID)
}

// WRR closes a wafer and counts its parts. Counts are NoCount when missing.
type WRR struct {
	Head       uint8
	Group      uint8  // SITE_GRP, 255 unknown
	FinishTime uint32 // FINISH_T
	Parts      uint32 // PART_CNT
	Retested   uint32 // RTST_CNT
	Aborted    uint32 // ABRT_CNT
	Good       uint32 // GOOD_CNT
	Functional uint32 // FUNC_CNT
	WaferID    string // WAFER_ID
	FabWaferID string // FABWF_ID
	FrameID    string // FRAME_ID
	MaskID     string // MASK_ID
	UserText   string // USR_DESC
	ExecText   string // EXC_DESC
}

func (*WRR) Kind() Kind { return KindWRR }

func (m *WRR) layout(c *coder) {
	c.u1(&m.Head, 0)
	c.u1(&m.Group, 255)
	c.u4(&m.FinishTime, 0)
	c.u4(&m.Parts, NoCount)
	c.u4(&m.Retested, NoCount)
	c.u4(&m.Aborted, NoCount)
	c.u4(&m.Good, NoCount)
	c.u4(&m.Functional, NoCount)
	c.cn(&m.WaferID)
	c.cn(&m.FabWaferID)
	c.cn(&m.FrameID)
	c.cn(&m.MaskID)
	c.cn(&m.UserText)
	c.cn(&m.ExecText)
}

// WCR is the geometry of all wafers of the run. Lengths are in Units; see
// Millimetres.
type WCR struct {
	WaferSize float32 // WAFR_SIZ: diameter, 0 missing
	DieHeight float32 // DIE_HT, 0 missing
	DieWidth  float32 // DIE_WID, 0 missing
	Units     uint8   // WF_UNITS: 0 unknown, 1 inch, 2 cm, 3 mm, 4 mil
	Flat      byte    // WF_FLAT: where the flat is, U D L R; ' ' unknown
	CenterX   int16   // CENTER_X of the centre die, NoCoordinate missing
	CenterY   int16   // CENTER_Y
	PositiveX byte    // POS_X: where X grows to, L or R; ' ' unknown
	PositiveY byte    // POS_Y: where Y grows to, U or D; ' ' unknown
}

func (*WCR) Kind() Kind { return KindWCR }

func (m *WCR) layout(c *coder) {
	c.r4(&m.WaferSize, 0)
	c.r4(&m.DieHeight, 0)
	c.r4(&m.DieWidth, 0)
	c.u1(&m.Units, 0)
	c.u1(&m.Flat, ' ')
	c.i2(&m.CenterX, NoCoordinate)
	c.i2(&m.CenterY, NoCoordinate)
	c.u1(&m.PositiveX, ' ')
	c.u1(&m.PositiveY, ' ')
}

// Millimetres gives diameter, die height and die width in mm, 0 where missing;
// not ok when the unit is unknown.
func (m *WCR) Millimetres() (diameter, dieHeight, dieWidth float64, ok bool) {
	if m.Units < 1 || m.Units > 4 {
		return 0, 0, 0, false
	}
	mm := [...]float64{1: 25.4, 2: 10, 3: 1, 4: 0.0254}[m.Units]
	return Decimal(m.WaferSize) * mm, Decimal(m.DieHeight) * mm, Decimal(m.DieWidth) * mm, true
}

// PIR opens a part on a site.
type PIR struct {
	Head, Site uint8
}

func (*PIR) Kind() Kind { return KindPIR }

func (m *PIR) layout(c *coder) {
	c.u1(&m.Head, 0)
	c.u1(&m.Site, 0)
}

// PRR closes the part that is open on its head and site.
type PRR struct {
	Head, Site uint8
	Flag       PartFlag // PART_FLG
	Tests      uint16   // NUM_TEST: tests executed
	HardBin    uint16   // HARD_BIN
	SoftBin    uint16   // SOFT_BIN, NoBin missing
	X, Y       int16    // X_COORD, Y_COORD, NoCoordinate missing
	TestTime   uint32   // TEST_T in ms, 0 missing
	PartID     []byte   // PART_ID
	PartText   []byte   // PART_TXT
	Fix        []byte   // PART_FIX: repair information
}

func (*PRR) Kind() Kind { return KindPRR }

func (m *PRR) layout(c *coder) {
	flag := uint8(m.Flag)
	c.u1(&m.Head, 0)
	c.u1(&m.Site, 0)
	c.u1(&flag, 0)
	c.u2(&m.Tests, 0)
	c.u2(&m.HardBin, NoBin)
	c.u2(&m.SoftBin, NoBin)
	c.i2(&m.X, NoCoordinate)
	c.i2(&m.Y, NoCoordinate)
	c.u4(&m.TestTime, 0)
	c.bytes(&m.PartID)
	c.bytes(&m.PartText)
	c.bytes(&m.Fix)
	m.Flag = PartFlag(flag)
}

// read is layout for reading, quick for the usual record; it says whether the
// fields end where the body does.
func (m *PRR) read(c *coder, b []byte) fit {
	if len(b) < 17 {
		c.read(b)
		m.layout(c)
		return c.fit()
	}
	m.Head, m.Site, m.Flag = b[0], b[1], PartFlag(b[2])
	m.Tests = u2(b[3:], c.big)
	m.HardBin = u2(b[5:], c.big)
	m.SoftBin = u2(b[7:], c.big)
	m.X = int16(u2(b[9:], c.big))
	m.Y = int16(u2(b[11:], c.big))
	m.TestTime = u4(b[13:], c.big)
	if len(b) == 17 {
		m.PartID, m.PartText, m.Fix = nil, nil, nil
		return exact
	}
	var ok bool
	b = b[17:]
	if m.PartID, b, ok = cutText(b); !ok {
		m.PartText, m.Fix = nil, nil
		return overrun
	}
	if m.PartText, b, ok = cutText(b); !ok {
		m.Fix = nil
		return overrun
	}
	if m.Fix, b, ok = cutText(b); !ok {
		return overrun
	}
	switch {
	case len(b) > 0:
		return extra
	case !clean(m.PartID) || !clean(m.PartText):
		return doubtful
	}
	return exact
}

// cutText takes a C*n or B*n off b, nil when the record has ended; not ok when
// it runs over the end.
func cutText(b []byte) (text, rest []byte, ok bool) {
	if len(b) == 0 {
		return nil, nil, true
	}
	n := int(b[0]) + 1
	if n > len(b) {
		return nil, nil, false
	}
	return b[1:n:n], b[n:], true
}

// fit says how the fields of a record lie in its length.
type fit uint8

const (
	exact    fit = iota // they end together
	doubtful            // they end together, but a text holds bytes that no text has
	extra               // bytes are left over
	overrun             // a field is cut by the end
)

// clean says whether b looks like a text: no control characters but white space,
// and zero bytes at the end only. A record that swallows its neighbours because
// its length is wrong shows here, as its texts hold their headers.
func clean(b []byte) bool {
	for i, c := range b {
		if c < ' ' && c != '\t' && c != '\r' && c != '\n' {
			if c != 0 {
				return false
			}
			for _, c := range b[i:] {
				if c != 0 {
					return false
				}
			}
			return true
		}
	}
	return true
}

// fit says how the fields that were read lie in the body.
func (c *coder) fit() fit {
	switch {
	case c.overrun:
		return overrun
	case len(c.body) > 0:
		return extra
	case c.unclean:
		return doubtful
	}
	return exact
}
