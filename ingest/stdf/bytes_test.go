package stdf

import (
	"bytes"
	"math"
	"testing"

	"github.com/google/go-cmp/cmp"
	"github.com/google/go-cmp/cmp/cmpopts"
)

// The records here are put together by hand, field by field, from the layout
// in the package's doc comment, and not by the Writer: they check both
// directions against something that shares no code with them. Numbers are
// written out in both byte orders; texts and single bytes are the same in both.

// field is one field: its bytes little-endian, big-endian ("" the same), and
// what it is.
type field struct{ little, big, what string }

// record is a record's hand-made bytes and what they mean.
type record struct {
	head   field // REC_LEN
	code   string
	fields []field
	want   Record
}

func (r record) bytes(big bool) []byte {
	var b []byte
	pick := func(f field) {
		if big && f.big != "" {
			b = append(b, f.big...)
		} else {
			b = append(b, f.little...)
		}
	}
	pick(r.head)
	b = append(b, r.code...)
	for _, f := range r.fields {
		pick(f)
	}
	return b
}

var handMade = []record{
	{field{"\x12\x00", "\x00\x12", "REC_LEN 18"}, "\x00\x14", []field{ // ATR 0, 20
		{"\x00\xf1\x53\x65", "\x65\x53\xf1\x00", "MOD_TIM 1700000000"},
		{"\x0dretest.cfg -a", "", "CMD_LINE"},
	}, &ATR{Modified: 1700000000, Command: "retest.cfg -a"}},

	{field{"\x46\x00", "\x00\x46", "REC_LEN 70"}, "\x01\x0a", []field{ // MIR 1, 10
		{"\x00\xf1\x53\x65", "\x65\x53\xf1\x00", "SETUP_T 1700000000"},
		{"\x64\xf1\x53\x65", "\x65\x53\xf1\x64", "START_T 1700000100"},
		{"\x03", "", "STAT_NUM 3"},
		{"P", "", "MODE_COD"},
		{"N", "", "RTST_COD"},
		{" ", "", "PROT_COD"},
		{"\x2c\x01", "\x01\x2c", "BURN_TIM 300"},
		{" ", "", "CMOD_COD"},
		{"\x05LOT-7", "", "LOT_ID"},
		{"\x06MP-N24", "", "PART_TYP"},
		{"\x06cell-3", "", "NODE_NAM"},
		{"\x01T", "", "TSTR_TYP"},
		{"\x05mpn24", "", "JOB_NAM"},
		{"\x01C", "", "JOB_REV"},
		{"\x00", "", "SBLOT_ID"},
		{"\x00", "", "OPER_NAM"},
		{"\x00", "", "EXEC_TYP"},
		{"\x00", "", "EXEC_VER"},
		{"\x02WS", "", "TEST_COD"},
		{"\x0225", "", "TST_TEMP"},
		{"\x00", "", "USER_TXT"},
		{"\x00", "", "AUX_FILE"},
		{"\x00", "", "PKG_TYP"},
		{"\x00", "", "FAMLY_ID"},
		{"\x00", "", "DATE_COD"},
		{"\x00", "", "FACIL_ID"},
		{"\x00", "", "FLOOR_ID"},
		{"\x00", "", "PROC_ID"},
		{"\x00", "", "OPER_FRQ"},
		{"\x00", "", "SPEC_NAM"},
		{"\x00", "", "SPEC_VER"},
		{"\x00", "", "FLOW_ID"},
		{"\x02S1", "", "SETUP_ID"},
		// DSGN_REV, ENG_ID, ROM_COD, SERL_NUM, SUPR_NAM left out
	}, &MIR{SetupTime: 1700000000, StartTime: 1700000100, Station: 3, Mode: 'P', Retest: 'N', Protection: ' ', BurnIn: 300,
		CommandMode: ' ', LotID: "LOT-7", PartType: "MP-N24", Node: "cell-3", TesterType: "T", Job: "mpn24", JobRevision: "C",
		TestCode: "WS", Temperature: "25", Setup: "S1"}},

	{field{"\x0b\x00", "\x00\x0b", "REC_LEN 11"}, "\x01\x14", []field{ // MRR 1, 20
		{"\xe8\xf4\x53\x65", "\x65\x53\xf4\xe8", "FINISH_T 1700001000"},
		{"H", "", "DISP_COD"},
		{"\x04held", "", "USR_DESC"},
		{"\x00", "", "EXC_DESC"},
	}, &MRR{FinishTime: 1700001000, Disposition: 'H', UserText: "held"}},

	{field{"\x16\x00", "\x00\x16", "REC_LEN 22"}, "\x01\x1e", []field{ // PCR 1, 30
		{"\x01", "", "HEAD_NUM"},
		{"\x02", "", "SITE_NUM"},
		{"\xe8\x03\x00\x00", "\x00\x00\x03\xe8", "PART_CNT 1000"},
		{"\x05\x00\x00\x00", "\x00\x00\x00\x05", "RTST_CNT 5"},
		{"\x00\x00\x00\x00", "", "ABRT_CNT 0"},
		{"\x8d\x03\x00\x00", "\x00\x00\x03\x8d", "GOOD_CNT 909"},
		{"\xff\xff\xff\xff", "", "FUNC_CNT missing"},
	}, &PCR{Head: 1, Site: 2, Parts: 1000, Retested: 5, Aborted: 0, Good: 909, Functional: NoCount}},

	{field{"\x0e\x00", "\x00\x0e", "REC_LEN 14"}, "\x01\x28", []field{ // HBR 1, 40
		{"\xff", "", "HEAD_NUM all"},
		{"\x00", "", "SITE_NUM"},
		{"\x05\x00", "\x00\x05", "HBIN_NUM 5"},
		{"\x2a\x00\x00\x00", "\x00\x00\x00\x2a", "HBIN_CNT 42"},
		{"F", "", "HBIN_PF"},
		{"\x04open", "", "HBIN_NAM"},
	}, &HBR{Head: 255, Site: 0, Number: 5, Count: 42, PassFail: 'F', Name: "open"}},

	{field{"\x0e\x00", "\x00\x0e", "REC_LEN 14"}, "\x01\x32", []field{ // SBR 1, 50
		{"\x01", "", "HEAD_NUM"},
		{"\x03", "", "SITE_NUM"},
		{"\x01\x02", "\x02\x01", "SBIN_NUM 513"},
		{"\x07\x00\x00\x00", "\x00\x00\x00\x07", "SBIN_CNT 7"},
		{"P", "", "SBIN_PF"},
		{"\x04good", "", "SBIN_NAM"},
	}, &SBR{Head: 1, Site: 3, Number: 513, Count: 7, PassFail: 'P', Name: "good"}},

	{field{"\x0f\x00", "\x00\x0f", "REC_LEN 15"}, "\x01\x3c", []field{ // PMR 1, 60
		{"\x03\x00", "\x00\x03", "PMR_INDX 3"},
		{"\x02\x01", "\x01\x02", "CHAN_TYP 258"},
		{"\x03ch7", "", "CHAN_NAM"},
		{"\x01B", "", "PHY_NAM"},
		{"\x03BAS", "", "LOG_NAM"},
		{"\x02", "", "HEAD_NUM"},
		// SITE_NUM left out: 1
	}, &PMR{Index: 3, ChannelType: 258, Channel: "ch7", Physical: "B", Logical: "BAS", Head: 2, Site: 1}},

	{field{"\x0d\x00", "\x00\x0d", "REC_LEN 13"}, "\x01\x3e", []field{ // PGR 1, 62
		{"\x01\x80", "\x80\x01", "GRP_INDX 32769"},
		{"\x04pins", "", "GRP_NAM"},
		{"\x02\x00", "\x00\x02", "INDX_CNT 2"},
		{"\x01\x00", "\x00\x01", "PMR_INDX 1"},
		{"\x03\x00", "\x00\x03", "PMR_INDX 3"},
	}, &PGR{Index: 32769, Name: "pins", Pins: []uint16{1, 3}}},

	{field{"\x06\x00", "\x00\x06", "REC_LEN 6"}, "\x01\x46", []field{ // RDR 1, 70
		{"\x02\x00", "\x00\x02", "NUM_BINS 2"},
		{"\x05\x00", "\x00\x05", "RTST_BIN 5"},
		{"\x09\x00", "\x00\x09", "RTST_BIN 9"},
	}, &RDR{Bins: []uint16{5, 9}}},

	{field{"\x13\x00", "\x00\x13", "REC_LEN 19"}, "\x01\x50", []field{ // SDR 1, 80
		{"\x01", "", "HEAD_NUM"},
		{"\x04", "", "SITE_GRP"},
		{"\x02", "", "SITE_CNT 2"},
		{"\x01\x02", "", "SITE_NUM 1, 2"},
		{"\x00", "", "HAND_TYP"},
		{"\x02P5", "", "HAND_ID"},
		{"\x01N", "", "CARD_TYP"},
		{"\x07PC-0012", "", "CARD_ID"},
		// LOAD_TYP and the rest left out
	}, &SDR{Head: 1, Group: 4, Sites: []byte{1, 2}, HandlerID: "P5", CardType: "N", CardID: "PC-0012"}},

	{field{"\x09\x00", "\x00\x09", "REC_LEN 9"}, "\x02\x0a", []field{ // WIR 2, 10
		{"\x01", "", "HEAD_NUM"},
		{"\xff", "", "SITE_GRP unknown"},
		{"\xc8\xf1\x53\x65", "\x65\x53\xf1\xc8", "START_T 1700000200"},
		{"\x0207", "", "WAFER_ID"},
	}, &WIR{Head: 1, Group: 255, StartTime: 1700000200, WaferID: "07"}},

	{field{"\x27\x00", "\x00\x27", "REC_LEN 39"}, "\x02\x14", []field{ // WRR 2, 20
		{"\x01", "", "HEAD_NUM"},
		{"\xff", "", "SITE_GRP"},
		{"\x84\xf4\x53\x65", "\x65\x53\xf4\x84", "FINISH_T 1700000900"},
		{"\x55\x05\x00\x00", "\x00\x00\x05\x55", "PART_CNT 1365"},
		{"\xff\xff\xff\xff", "", "RTST_CNT missing"},
		{"\x01\x00\x00\x00", "\x00\x00\x00\x01", "ABRT_CNT 1"},
		{"\xb0\x04\x00\x00", "\x00\x00\x04\xb0", "GOOD_CNT 1200"},
		{"\xff\xff\xff\xff", "", "FUNC_CNT missing"},
		{"\x0207", "", "WAFER_ID"},
		{"\x04F-77", "", "FABWF_ID"},
		{"\x00", "", "FRAME_ID"},
		{"\x01M", "", "MASK_ID"},
		{"\x00", "", "USR_DESC"},
		{"\x00", "", "EXC_DESC"},
	}, &WRR{Head: 1, Group: 255, FinishTime: 1700000900, Parts: 1365, Retested: NoCount, Aborted: 1, Good: 1200, Functional: NoCount,
		WaferID: "07", FabWaferID: "F-77", MaskID: "M"}},

	{field{"\x14\x00", "\x00\x14", "REC_LEN 20"}, "\x02\x1e", []field{ // WCR 2, 30
		{"\x00\x00\x80\x40", "\x40\x80\x00\x00", "WAFR_SIZ 4"},
		{"\x00\x00\x00\x3f", "\x3f\x00\x00\x00", "DIE_HT 0.5"},
		{"\x00\x00\x80\x3e", "\x3e\x80\x00\x00", "DIE_WID 0.25"},
		{"\x01", "", "WF_UNITS inch"},
		{"D", "", "WF_FLAT"},
		{"\xf6\xff", "\xff\xf6", "CENTER_X -10"},
		{"\x00\x80", "\x80\x00", "CENTER_Y missing"},
		{"R", "", "POS_X"},
		{"U", "", "POS_Y"},
	}, &WCR{WaferSize: 4, DieHeight: 0.5, DieWidth: 0.25, Units: 1, Flat: 'D', CenterX: -10, CenterY: NoCoordinate, PositiveX: 'R', PositiveY: 'U'}},

	{field{"\x02\x00", "\x00\x02", "REC_LEN 2"}, "\x05\x0a", []field{ // PIR 5, 10
		{"\x01", "", "HEAD_NUM"},
		{"\x04", "", "SITE_NUM"},
	}, &PIR{Head: 1, Site: 4}},

	{field{"\x1a\x00", "\x00\x1a", "REC_LEN 26"}, "\x05\x14", []field{ // PRR 5, 20
		{"\x01", "", "HEAD_NUM"},
		{"\x04", "", "SITE_NUM"},
		{"\x0a", "", "PART_FLG same X, Y again; failed"},
		{"\x09\x00", "\x00\x09", "NUM_TEST 9"},
		{"\x05\x00", "\x00\x05", "HARD_BIN 5"},
		{"\x33\x00", "\x00\x33", "SOFT_BIN 51"},
		{"\xfd\xff", "\xff\xfd", "X_COORD -3"},
		{"\x2c\x01", "\x01\x2c", "Y_COORD 300"},
		{"\x23\x00\x00\x00", "\x00\x00\x00\x23", "TEST_T 35 ms"},
		{"\x03117", "", "PART_ID"},
		{"\x01x", "", "PART_TXT"},
		{"\x02\x80\x01", "", "PART_FIX, two bytes"},
	}, &PRR{Head: 1, Site: 4, Flag: RetestXY | PartFailed, Tests: 9, HardBin: 5, SoftBin: 51, X: -3, Y: 300, TestTime: 35,
		PartID: []byte("117"), PartText: []byte("x"), Fix: []byte{0x80, 1}}},

	{field{"\x34\x00", "\x00\x34", "REC_LEN 52"}, "\x0a\x1e", []field{ // TSR 10, 30
		{"\xff", "", "HEAD_NUM all"},
		{"\x00", "", "SITE_NUM"},
		{"P", "", "TEST_TYP"},
		{"\xe8\x03\x00\x00", "\x00\x00\x03\xe8", "TEST_NUM 1000"},
		{"\x64\x00\x00\x00", "\x00\x00\x00\x64", "EXEC_CNT 100"},
		{"\x03\x00\x00\x00", "\x00\x00\x00\x03", "FAIL_CNT 3"},
		{"\x00\x00\x00\x00", "", "ALRM_CNT 0"},
		{"\x05BVCEO", "", "TEST_NAM"},
		{"\x03seq", "", "SEQ_NAME"},
		{"\x01L", "", "TEST_LBL"},
		{"\xc8", "", "OPT_FLAG all of the five count"},
		{"\x00\x00\x00\x3f", "\x3f\x00\x00\x00", "TEST_TIM 0.5 s"},
		{"\x00\x00\xa0\x41", "\x41\xa0\x00\x00", "TEST_MIN 20"},
		{"\x00\x00\xf0\x41", "\x41\xf0\x00\x00", "TEST_MAX 30"},
		{"\x00\x00\x1c\x45", "\x45\x1c\x00\x00", "TST_SUMS 2496"},
		{"\x00\x24\x74\x47", "\x47\x74\x24\x00", "TST_SQRS 62500"},
	}, &TSR{Head: 255, Type: 'P', Number: 1000, Executed: 100, Failed: 3, Alarmed: 0, Name: "BVCEO", Sequence: "seq", Label: "L",
		Optional: 0xc8, Time: 0.5, Min: 20, Max: 30, Sum: 2496, SumSquares: 62500}},

	{field{"\x3c\x00", "\x00\x3c", "REC_LEN 60"}, "\x0f\x0a", []field{ // PTR 15, 10
		{"\xe8\x03\x00\x00", "\x00\x00\x03\xe8", "TEST_NUM 1000"},
		{"\x01", "", "HEAD_NUM"},
		{"\x02", "", "SITE_NUM"},
		{"\x80", "", "TEST_FLG failed"},
		{"\x10", "", "PARM_FLG below the low limit"},
		{"\x00\x00\xa4\x41", "\x41\xa4\x00\x00", "RESULT 20.5"},
		{"\x05BVCEO", "", "TEST_TXT"},
		{"\x02A1", "", "ALARM_ID"},
		{"\x02", "", "OPT_FLAG all count"},
		{"\x03", "", "RES_SCAL 3"},
		{"\x00", "", "LLM_SCAL 0"},
		{"\xfd", "", "HLM_SCAL -3"},
		{"\x00\x00\xb4\x41", "\x41\xb4\x00\x00", "LO_LIMIT 22.5"},
		{"\x00\x00\xa0\x42", "\x42\xa0\x00\x00", "HI_LIMIT 80"},
		{"\x01V", "", "UNITS"},
		{"\x05%7.2f", "", "C_RESFMT"},
		{"\x04%.1f", "", "C_LLMFMT"},
		{"\x05%6.0f", "", "C_HLMFMT"},
		{"\x00\x00\xa0\x41", "\x41\xa0\x00\x00", "LO_SPEC 20"},
		{"\x00\x00\xc8\x42", "\x42\xc8\x00\x00", "HI_SPEC 100"},
	}, &PTR{Number: 1000, Head: 1, Site: 2, Flag: Failed, Parm: BelowLimit, Result: 20.5, Text: "BVCEO", Alarm: "A1",
		Optional: &Optional{Present: 12, Flag: optReserved, ResScale: 3, LoScale: 0, HiScale: -3, LoLimit: 22.5, HiLimit: 80,
			Units: "V", ResFormat: "%7.2f", LoFormat: "%.1f", HiFormat: "%6.0f", LoSpec: 20, HiSpec: 100}}},

	{field{"\x0c\x00", "\x00\x0c", "REC_LEN 12"}, "\x0f\x0a", []field{ // PTR 15, 10, as short as it gets with a result
		{"\x78\x56\x34\x12", "\x12\x34\x56\x78", "TEST_NUM 305419896"},
		{"\x01", "", "HEAD_NUM"},
		{"\x02", "", "SITE_NUM"},
		{"\x00", "", "TEST_FLG"},
		{"\xc0", "", "PARM_FLG equal to a limit passes"},
		{"\x5f\x70\x89\x30", "\x30\x89\x70\x5f", "RESULT 1e-9"},
	}, &PTR{Number: 305419896, Head: 1, Site: 2, Parm: LowEqualPasses | HighEqualPasses, Result: 1e-9}},

	{field{"\x3e\x00", "\x00\x3e", "REC_LEN 62"}, "\x0f\x0f", []field{ // MPR 15, 15
		{"\xd0\x07\x00\x00", "\x00\x00\x07\xd0", "TEST_NUM 2000"},
		{"\x01", "", "HEAD_NUM"},
		{"\x01", "", "SITE_NUM"},
		{"\x00", "", "TEST_FLG"},
		{"\x00", "", "PARM_FLG"},
		{"\x03\x00", "\x00\x03", "RTN_ICNT 3"},
		{"\x03\x00", "\x00\x03", "RSLT_CNT 3"},
		{"\x21\x04", "", "RTN_STAT 1, 2, 4: low half first"},
		{"\x00\x00\x80\x3f", "\x3f\x80\x00\x00", "RTN_RSLT 1"},
		{"\x00\x00\x00\xc0", "\xc0\x00\x00\x00", "RTN_RSLT -2"},
		{"\x00\x00\x40\x40", "\x40\x40\x00\x00", "RTN_RSLT 3"},
		{"\x04LEAK", "", "TEST_TXT"},
		{"\x00", "", "ALARM_ID"},
		{"\xc0", "", "OPT_FLAG no limits"},
		{"\x09", "", "RES_SCAL 9"},
		{"\x00", "", "LLM_SCAL"},
		{"\x00", "", "HLM_SCAL"},
		{"\x00\x00\x00\x00", "", "LO_LIMIT"},
		{"\x00\x00\x00\x00", "", "HI_LIMIT"},
		{"\x00\x00\xa0\x40", "\x40\xa0\x00\x00", "START_IN 5"},
		{"\x00\x00\x00\x3f", "\x3f\x00\x00\x00", "INCR_IN 0.5"},
		{"\x01\x00", "\x00\x01", "RTN_INDX 1"},
		{"\x03\x00", "\x00\x03", "RTN_INDX 3"},
		{"\x04\x01", "\x01\x04", "RTN_INDX 260"},
		{"\x01A", "", "UNITS"},
		{"\x01V", "", "UNITS_IN"},
		// the formats and specification limits left out
	}, &MPR{Number: 2000, Head: 1, Site: 1, States: Nibbles{3, []byte{0x21, 4}}, Results: []float32{1, -2, 3}, Text: "LEAK",
		Optional: &MPROptional{Optional: Optional{Present: 11, Flag: NoLow | NoHigh, ResScale: 9, Units: "A"},
			StartIn: 5, StepIn: 0.5, Pins: []uint16{1, 3, 260}, UnitsIn: "V"}}},

	{field{"\x4a\x00", "\x00\x4a", "REC_LEN 74"}, "\x0f\x14", []field{ // FTR 15, 20
		{"\xb8\x0b\x00\x00", "\x00\x00\x0b\xb8", "TEST_NUM 3000"},
		{"\x01", "", "HEAD_NUM"},
		{"\x01", "", "SITE_NUM"},
		{"\x80", "", "TEST_FLG failed"},
		{"\xc0", "", "OPT_FLAG all count"},
		{"\x39\x30\x00\x00", "\x00\x00\x30\x39", "CYCL_CNT 12345"},
		{"\x02\x01\x00\x00", "\x00\x00\x01\x02", "REL_VADR 258"},
		{"\x01\x00\x00\x00", "\x00\x00\x00\x01", "REPT_CNT 1"},
		{"\x02\x00\x00\x00", "\x00\x00\x00\x02", "NUM_FAIL 2"},
		{"\xff\xff\xff\xff", "", "XFAIL_AD -1"},
		{"\x07\x00\x00\x00", "\x00\x00\x00\x07", "YFAIL_AD 7"},
		{"\xfe\xff", "\xff\xfe", "VECT_OFF -2"},
		{"\x02\x00", "\x00\x02", "RTN_ICNT 2"},
		{"\x01\x00", "\x00\x01", "PGM_ICNT 1"},
		{"\x01\x00", "\x00\x01", "RTN_INDX 1"},
		{"\x02\x00", "\x00\x02", "RTN_INDX 2"},
		{"\x51", "", "RTN_STAT 1, 5"},
		{"\x03\x00", "\x00\x03", "PGM_INDX 3"},
		{"\x06", "", "PGM_STAT 6"},
		{"\x0a\x00\x41\x02", "\x00\x0a\x41\x02", "FAIL_PIN ten bits: 0, 6 and 9 set"},
		{"\x02v1", "", "VECT_NAM"},
		{"\x02t1", "", "TIME_SET"},
		{"\x00", "", "OP_CODE"},
		{"\x07CONTACT", "", "TEST_TXT"},
		{"\x00", "", "ALARM_ID"},
		{"\x01p", "", "PROG_TXT"},
		{"\x01r", "", "RSLT_TXT"},
		{"\x05", "", "PATG_NUM 5"},
		{"\x08\x00\xff", "\x00\x08\xff", "SPIN_MAP eight bits"},
	}, &FTR{Number: 3000, Head: 1, Site: 1, Flag: Failed, Optional: 0xc0, Cycles: 12345, Address: 258, Repeats: 1, FailingPins: 2,
		FailX: -1, FailY: 7, Offset: -2, ReturnPins: []uint16{1, 2}, ReturnStates: Nibbles{2, []byte{0x51}},
		ProgramPins: []uint16{3}, ProgramStates: Nibbles{1, []byte{6}}, FailPins: Bits{10, []byte{0x41, 2}},
		Vector: "v1", TimeSet: "t1", Text: "CONTACT", ProgramText: "p", ResultText: "r", PatternNumber: 5, SpinMap: Bits{8, []byte{0xff}}}},

	{field{"\x07\x00", "\x00\x07", "REC_LEN 7"}, "\x14\x0a", []field{ // BPS 20, 10
		{"\x06static", "", "SEQ_NAME"},
	}, &BPS{Sequence: "static"}},

	{field{"\x00\x00", "", "REC_LEN 0"}, "\x14\x14", nil, &EPS{}}, // EPS 20, 20

	{field{"\x36\x00", "\x00\x36", "REC_LEN 54"}, "\x32\x0a", []field{ // GDR 50, 10
		{"\x0c\x00", "\x00\x0c", "FLD_CNT 12"},
		{"\x01\x07", "", "U*1 7"},
		{"\x00", "", "B*0 pad"},
		{"\x02\x02\x01", "\x02\x01\x02", "U*2 258"},
		{"\x03\x04\x03\x02\x01", "\x03\x01\x02\x03\x04", "U*4 16909060"},
		{"\x04\xff", "", "I*1 -1"},
		{"\x05\xfe\xff", "\x05\xff\xfe", "I*2 -2"},
		{"\x06\xfd\xff\xff\xff", "\x06\xff\xff\xff\xfd", "I*4 -3"},
		{"\x07\x00\x00\x80\x3f", "\x07\x3f\x80\x00\x00", "R*4 1"},
		{"\x08\x00\x00\x00\x00\x00\x00\xf8\x3f", "\x08\x3f\xf8\x00\x00\x00\x00\x00\x00", "R*8 1.5"},
		{"\x0a\x04text", "", "C*n"},
		{"\x0b\x02\x00\xff", "", "B*n"},
		{"\x0c\x09\x00\x01\x01", "\x0c\x00\x09\x01\x01", "D*n nine bits: 0 and 8 set"},
		{"\x0d\x0b", "", "N*1 11"},
	}, NewGDR(Field{1, uint8(7)}, Field{2, uint16(258)}, Field{3, uint32(16909060)}, Field{4, int8(-1)}, Field{5, int16(-2)},
		Field{6, int32(-3)}, Field{7, float32(1)}, Field{8, 1.5}, Field{10, "text"}, Field{11, []byte{0, 0xff}},
		Field{12, Bits{9, []byte{1, 1}}}, Field{13, uint8(11)})},

	{field{"\x06\x00", "\x00\x06", "REC_LEN 6"}, "\x32\x1e", []field{ // DTR 50, 30
		{"\x05hello", "", "TEXT_DAT"},
	}, &DTR{Text: "hello"}},
}

// farBytes is a file attributes record: REC_LEN 2, FAR 0, 10; CPU_TYPE, STDF_VER.
func farBytes(big bool) []byte {
	if big {
		return []byte("\x00\x02\x00\x0a\x01\x04")
	}
	return []byte("\x02\x00\x00\x0a\x02\x04")
}

var sameRecord = cmp.Options{
	cmpopts.EquateNaNs(),
	cmpopts.EquateEmpty(),
	cmpopts.IgnoreFields(PTR{}, "about", "textRaw", "alarmRaw", "optRaw"),
	cmpopts.IgnoreFields(MPR{}, "about", "pins", "textRaw"),
	cmpopts.IgnoreFields(FTR{}, "Test", "textRaw"),
	cmp.Transformer("GDR", func(g *GDR) []Field { return g.Fields() }),
}

func TestHandMadeRecords(t *testing.T) {
	seen := map[Kind]bool{KindFAR: true}
	for _, big := range []bool{false, true} {
		for _, rec := range handMade {
			file := append(farBytes(big), rec.bytes(big)...)
			r := NewReader(bytes.NewReader(file))
			if !r.Scan() {
				t.Fatalf("%v: no FAR: %v", rec.want.Kind(), r.Err())
			}
			far := r.Record().(*FAR)
			if far.Version != 4 || (far.CPUType == 1) != big || r.BigEndian() != big {
				t.Errorf("FAR %+v, big-endian %v", far, r.BigEndian())
			}
			if !r.Scan() {
				t.Errorf("%v big-endian %v: not read: %v, %v", rec.want.Kind(), big, r.Err(), r.Damages())
				continue
			}
			if diff := cmp.Diff(rec.want, r.Record(), sameRecord); diff != "" {
				t.Errorf("%v big-endian %v (want -, got +):\n%s", rec.want.Kind(), big, diff)
			}
			if r.Offset() != 6 || r.Position() != int64(len(file)) {
				t.Errorf("%v at %d up to %d, want 6 and %d", rec.want.Kind(), r.Offset(), r.Position(), len(file))
			}
			if r.Scan() || r.Err() != nil || len(r.Damages()) > 0 {
				t.Errorf("%v big-endian %v: after it: %v, %v", rec.want.Kind(), big, r.Err(), r.Damages())
			}
			seen[rec.want.Kind()] = true
		}
	}
	for k := KindFAR; k <= delivered; k++ {
		if !seen[k] {
			t.Errorf("there is no hand-made %v", k)
		}
	}
}

// The Writer must make the same bytes, where the record leaves nothing out.
func TestWriterMakesHandMadeBytes(t *testing.T) {
	for _, order := range []Order{LittleEndian, BigEndian} {
		for _, rec := range handMade {
			switch rec.want.Kind() {
			case KindMIR, KindPMR, KindSDR: // leave fields out at their end, which the Writer does not
				continue
			case KindGDR: // has a pad
				continue
			}
			var buf bytes.Buffer
			w := NewWriter(&buf, order)
			if err := w.Write(&FAR{}); err != nil {
				t.Fatal(err)
			}
			if err := w.Write(rec.want); err != nil {
				t.Fatal(err)
			}
			w.Flush()
			want := append(farBytes(bool(order)), rec.bytes(bool(order))...)
			if !bytes.Equal(buf.Bytes(), want) {
				t.Errorf("%v: wrote\n% x, want\n% x", rec.want.Kind(), buf.Bytes(), want)
			}
			if w.Bytes() != int64(len(want)) {
				t.Errorf("%v: Bytes is %d, want %d", rec.want.Kind(), w.Bytes(), len(want))
			}
		}
	}
}

// Codes of the record types as the layout table has them, from memory of the
// V4 specification.
func TestKindCodes(t *testing.T) {
	for kind, code := range map[Kind][2]uint8{
		KindFAR: {0, 10}, KindATR: {0, 20}, KindMIR: {1, 10}, KindMRR: {1, 20}, KindPCR: {1, 30}, KindHBR: {1, 40}, KindSBR: {1, 50},
		KindPMR: {1, 60}, KindPGR: {1, 62}, KindPLR: {1, 63}, KindRDR: {1, 70}, KindSDR: {1, 80}, KindWIR: {2, 10}, KindWRR: {2, 20},
		KindWCR: {2, 30}, KindPIR: {5, 10}, KindPRR: {5, 20}, KindTSR: {10, 30}, KindPTR: {15, 10}, KindMPR: {15, 15}, KindFTR: {15, 20},
		KindBPS: {20, 10}, KindEPS: {20, 20}, KindGDR: {50, 10}, KindDTR: {50, 30},
	} {
		if typ, sub := kind.Code(); typ != code[0] || sub != code[1] {
			t.Errorf("%v is %d, %d, want %v", kind, typ, sub, code)
		}
		if kindOf[codeOf(code[0], code[1])] != kind {
			t.Errorf("%v is not found by its code", kind)
		}
	}
}

// F_floating and D_floating of 1.0 are the words 4080 0000 ..., of -0.5 C000,
// of 0.1 3ECC CCCD: published patterns of the VAX architecture; from memory.
func TestVAXFloats(t *testing.T) {
	for _, c := range []struct {
		bytes string
		want  float32
	}{
		{"\x80\x40\x00\x00", 1},
		{"\x00\xc0\x00\x00", -0.5},
		{"\xcc\x3e\xcd\xcc", 0.1},
		{"\x00\x00\x00\x00", 0},
		{"\xff\x7f\xff\xff", 1.7014117e38},
		{"\x00\x80\x00\x00", float32(math.NaN())}, // reserved operand
	} {
		if got := vaxF(u4([]byte(c.bytes), false)); got != c.want && (got == got || c.want == c.want) {
			t.Errorf("% x is %g, want %g", c.bytes, got, c.want)
		}
	}
	c := coder{vax: true}
	if got := c.double([]byte("\x80\x40\x00\x00\x00\x00\x00\x00")); got != 1 {
		t.Errorf("D_floating 1 is %g", got)
	}
	if got := c.double([]byte("\xcc\x3e\xcc\xcc\xcc\xcc\xcd\xcc")); math.Abs(got-0.1) > 1e-17 {
		t.Errorf("D_floating 0.1 is %.18g", got)
	}
}
