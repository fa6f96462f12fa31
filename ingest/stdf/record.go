package stdf

// Record is one record of a file: a pointer to one of the record types of this
// package. A record that a Reader delivers belongs to the Reader, with all its
// slices, and is overwritten by the next Scan; Clone makes one to keep.
type Record interface {
	Kind() Kind
	// layout walks the fields of the record's body in their order.
	layout(c *coder)
}

// Values that stand for missing in the fields of the given type. Where the
// standard gives a field no such value, a field left out reads as 0 or "".
const (
	NoCoordinate = -32768    // I*2 coordinates
	NoBin        = 65535     // SOFT_BIN
	NoCount      = 1<<32 - 1 // U*4 counts
)

// AllSites in HEAD_NUM says that a PCR, HBR, SBR or TSR sums over all heads and
// sites.
const AllSites = 255

// FAR is the file attributes record, the first of each file: it tells the byte
// order. A Writer fills it in.
type FAR struct {
	CPUType uint8 // CPU_TYPE: 1 big-endian, 2 little-endian, 0 little-endian with VAX floats
	Version uint8 // STDF_VER: 4
}

func (*FAR) Kind() Kind { return KindFAR }

func (m *FAR) layout(c *coder) {
	c.u1(&m.CPUType, 0)
	c.u1(&m.Version, 0)
}

// ATR is the audit trail record: a program that changed the file.
type ATR struct {
	Modified uint32 // MOD_TIM, seconds since 1970
	Command  string // CMD_LINE
}

func (*ATR) Kind() Kind { return KindATR }

func (m *ATR) layout(c *coder) {
	c.u4(&m.Modified, 0)
	c.cn(&m.Command)
}

// MIR is the master information record: what is known of the lot and the
// program before the first part. Times are seconds since 1970, 0 missing; see
// Time.
type MIR struct {
	SetupTime    uint32 // SETUP_T, when the job was set up
	StartTime    uint32 // START_T, when the first part was tested
	Station      uint8  // STAT_NUM, tester station
	Mode         byte   // MODE_COD: P production, E engineering, D development, M maintenance, Q quality ...; ' ' missing
	Retest       byte   // RTST_COD: Y, N, 0-9 times; ' ' missing
	Protection   byte   // PROT_COD
	BurnIn       uint16 // BURN_TIM in minutes, 65535 missing
	CommandMode  byte   // CMOD_COD
	LotID        string // LOT_ID
	PartType     string // PART_TYP
	Node         string // NODE_NAM, the computer that made the data
	TesterType   string // TSTR_TYP
	Job          string // JOB_NAM, the test program
	JobRevision  string // JOB_REV
	SublotID     string // SBLOT_ID
	Operator     string // OPER_NAM
	ExecType     string // EXEC_TYP, the tester's own software
	ExecVersion  string // EXEC_VER
	TestCode     string // TEST_COD: phase or step of test
	Temperature  string // TST_TEMP, as text; see Celsius
	UserText     string // USER_TXT
	AuxFile      string // AUX_FILE
	PackageType  string // PKG_TYP
	Family       string // FAMLY_ID
	DateCode     string // DATE_COD
	Facility     string // FACIL_ID
	Floor        string // FLOOR_ID
	Process      string // PROC_ID
	Frequency    string // OPER_FRQ
	SpecName     string // SPEC_NAM
	SpecVersion  string // SPEC_VER
	Flow         string // FLOW_ID
	Setup        string // SETUP_ID
	Design       string // DSGN_REV
	Engineering  string // ENG_ID
	ROMCode      string // ROM_COD
	TesterSerial string // SERL_NUM
	Supervisor   string // SUPR_NAM
}

func (*MIR) Kind() Kind { return KindMIR }

func (m *MIR) layout(c *coder) {
	c.u4(&m.SetupTime, 0)
	c.u4(&m.StartTime, 0)
	c.u1(&m.Station, 0)
	c.u1(&m.Mode, ' ')
	c.u1(&m.Retest, ' ')
	c.u1(&m.Protection, ' ')
	c.u2(&m.BurnIn, 65535)
	c.u1(&m.CommandMode, ' ')
	for _, s := range m.texts() {
		c.cn(s)
	}
}

// texts are the thirty C*n fields in their order.
func (m *MIR) texts() [30]*string {
	return [30]*string{
		&m.LotID, &m.PartType, &m.Node, &m.TesterType, &m.Job, &m.JobRevision, &m.SublotID, &m.Operator,
		&m.ExecType, &m.ExecVersion, &m.TestCode, &m.Temperature, &m.UserText, &m.AuxFile, &m.PackageType,
		&m.Family, &m.DateCode, &m.Facility, &m.Floor, &m.Process, &m.Frequency, &m.SpecName, &m.SpecVersion,
		&m.Flow, &m.Setup, &m.Design, &m.Engineering, &m.ROMCode, &m.TesterSerial, &m.Supervisor,
	}
}

// MRR is the master results record, the last of a run: a file without one was
// not closed.
type MRR struct {
	FinishTime  uint32 // FINISH_T, when the last part was tested
	Disposition byte   // DISP_COD, ' ' missing
	UserText    string // USR_DESC
	ExecText    string // EXC_DESC
}

func (*MRR) Kind() Kind { return KindMRR }

func (m *MRR) layout(c *coder) {
	c.u4(&m.FinishTime, 0)
	c.u1(&m.Disposition, ' ')
	c.cn(&m.UserText)
	c.cn(&m.ExecText)
}

// PCR counts the parts of a site, or of all when Head is AllSites. Counts are
// NoCount when missing.
type PCR struct {
	Head, Site uint8
	Parts      uint32 // PART_CNT
	Retested   uint32 // RTST_CNT
	Aborted    uint32 // ABRT_CNT
	Good       uint32 // GOOD_CNT
	Functional uint32 // FUNC_CNT
}

func (*PCR) Kind() Kind { return KindPCR }

func (m *PCR) layout(c *coder) {
	c.u1(&m.Head, 0)
	c.u1(&m.Site, 0)
	c.u4(&m.Parts, NoCount)
	c.u4(&m.Retested, NoCount)
	c.u4(&m.Aborted, NoCount)
	c.u4(&m.Good, NoCount)
	c.u4(&m.Functional, NoCount)
}

// HBR names and counts a hardware bin, of a site or of all (Head AllSites).
type HBR struct {
	Head, Site uint8
	Number     uint16 // HBIN_NUM
	Count      uint32 // HBIN_CNT
	PassFail   byte   // HBIN_PF: P, F, ' ' unknown
	Name       string // HBIN_NAM
}

func (*HBR) Kind() Kind { return KindHBR }

func (m *HBR) layout(c *coder) {
	c.u1(&m.Head, 0)
	c.u1(&m.Site, 0)
	c.u2(&m.Number, 0)
	c.u4(&m.Count, NoCount)
	c.u1(&m.PassFail, ' ')
	c.cn(&m.Name)
}

// SBR names and counts a software bin; the fields are those of HBR.
type SBR HBR

func (*SBR) Kind() Kind        { return KindSBR }
func (m *SBR) layout(c *coder) { (*HBR)(m).layout(c) }

// PMR names a pin or channel; results of MPR and FTR refer to it by Index.
type PMR struct {
	Index       uint16 // PMR_INDX
	ChannelType uint16 // CHAN_TYP
	Channel     string // CHAN_NAM
	Physical    string // PHY_NAM
	Logical     string // LOG_NAM
	Head, Site  uint8  // 1 when missing
}

func (*PMR) Kind() Kind { return KindPMR }

func (m *PMR) layout(c *coder) {
	c.u2(&m.Index, 0)
	c.u2(&m.ChannelType, 0)
	c.cn(&m.Channel)
	c.cn(&m.Physical)
	c.cn(&m.Logical)
	c.u1(&m.Head, 1)
	c.u1(&m.Site, 1)
}

// PGR names a group of pins.
type PGR struct {
	Index uint16   // GRP_INDX
	Name  string   // GRP_NAM
	Pins  []uint16 // PMR_INDX
}

func (*PGR) Kind() Kind { return KindPGR }

func (m *PGR) layout(c *coder) {
	n := len(m.Pins)
	c.u2(&m.Index, 0)
	c.cn(&m.Name)
	c.count2(&n)
	c.u2s(&m.Pins, n)
}

// RDR says that the run retests the parts of the bins; no bins: all parts.
type RDR struct {
	Bins []uint16 // RTST_BIN
}

func (*RDR) Kind() Kind { return KindRDR }

func (m *RDR) layout(c *coder) {
	n := len(m.Bins)
	c.count2(&n)
	c.u2s(&m.Bins, n)
}

// SDR describes the hardware of a group of sites.
type SDR struct {
	Head, Group                      uint8  // HEAD_NUM, SITE_GRP
	Sites                            []byte // SITE_NUM
	HandlerType, HandlerID           string // HAND_TYP, HAND_ID: handler or prober
	CardType, CardID                 string // CARD_TYP, CARD_ID: probe card
	LoadBoardType, LoadBoardID       string // LOAD_TYP, LOAD_ID
	DIBType, DIBID                   string // DIB_TYP, DIB_ID
	CableType, CableID               string // CABL_TYP, CABL_ID
	ContactorType, ContactorID       string // CONT_TYP, CONT_ID
	LaserType, LaserID               string // LASR_TYP, LASR_ID
	ExtraEquipType, ExtraEquipmentID string // EXTR_TYP, EXTR_ID
}

func (*SDR) Kind() Kind { return KindSDR }

func (m *SDR) layout(c *coder) {
	n := uint8(len(m.Sites))
	if c.writing && len(m.Sites) > 255 {
		c.fail("stdf: %d sites: SITE_CNT holds 255", len(m.Sites))
	}
	c.u1(&m.Head, 0)
	c.u1(&m.Group, 0)
	c.u1(&n, 0)
	c.u1s(&m.Sites, int(n))
	for _, s := range [...]*string{
		&m.HandlerType, &m.HandlerID, &m.CardType, &m.CardID, &m.LoadBoardType, &m.LoadBoardID, &m.DIBType, &m.DIBID,
		&m.CableType, &m.CableID, &m.ContactorType, &m.ContactorID, &m.LaserType, &m.LaserID,
		&m.ExtraEquipType, &m.ExtraEquipmentID,
	} {
		c.cn(s)
	}
}
