package stdf

// TestFlag is TEST_FLG of PTR, MPR and FTR.
type TestFlag uint8

const (
	Alarm           TestFlag = 1 << iota // bit 0: an alarm was detected during the test
	ResultInvalid                        // bit 1: no value was taken, RESULT means nothing
	Unreliable                           // bit 2: the result is unreliable
	Timeout                              // bit 3: a timeout occurred
	NotExecuted                          // bit 4: the test was not executed
	Aborted                              // bit 5: the test was aborted
	PassFailInvalid                      // bit 6: bit 7 means nothing
	Failed                               // bit 7: the test failed
)

// Pass says whether the test passed, and whether the record knows: a test that
// was not executed or aborted, or whose pass/fail indication is invalid, has
// neither passed nor failed.
func (f TestFlag) Pass() (pass, known bool) {
	return f&Failed == 0, f&(PassFailInvalid|NotExecuted|Aborted) == 0
}

// ParmFlag is PARM_FLG of PTR and MPR.
type ParmFlag uint8

const (
	ScaleError      ParmFlag = 1 << iota // bit 0
	DriftError                           // bit 1: unstable measurement
	Oscillation                          // bit 2
	AboveLimit                           // bit 3: measured value above the high limit
	BelowLimit                           // bit 4: measured value below the low limit
	PassedAlternate                      // bit 5: passed alternate limits
	LowEqualPasses                       // bit 6: a result equal to the low limit passes
	HighEqualPasses                      // bit 7: a result equal to the high limit passes
)

// Usable is the standard's rule on a result: it is to be used only when none
// of alarm, invalid result, unreliable, timeout, not executed, aborted, scale
// error, drift error and oscillation is flagged.
func Usable(t TestFlag, p ParmFlag) bool {
	return t&(Alarm|ResultInvalid|Unreliable|Timeout|NotExecuted|Aborted) == 0 &&
		p&(ScaleError|DriftError|Oscillation) == 0
}

// PartFlag is PART_FLG of PRR.
type PartFlag uint8

const (
	RetestID          PartFlag = 1 << iota // bit 0: stands in for an earlier part of the same PART_ID
	RetestXY                               // bit 1: stands in for an earlier part of the same X and Y
	AbnormalEnd                            // bit 2: testing ended abnormally
	PartFailed                             // bit 3: the part failed
	PartResultInvalid                      // bit 4: bit 3 means nothing
)

// Pass says whether the part passed, and whether the record knows.
func (f PartFlag) Pass() (pass, known bool) {
	return f&PartFailed == 0, f&PartResultInvalid == 0
}

// Retest says whether the part stands in for an earlier one of the same
// identity or the same place.
func (f PartFlag) Retest() bool { return f&(RetestID|RetestXY) != 0 }

// OptFlag is OPT_FLAG of PTR and MPR: which optional fields do not count. A set
// bit takes a field away.
type OptFlag uint8

const (
	NoResScale  OptFlag = 1 << iota // bit 0: RES_SCAL is invalid, the default holds
	NoStart                         // bit 1: MPR: START_IN and INCR_IN are invalid; PTR: reserved, 1
	NoLowSpec                       // bit 2: there is no low specification limit
	NoHighSpec                      // bit 3: there is no high specification limit
	DefaultLow                      // bit 4: LO_LIMIT and LLM_SCAL are invalid, the default holds
	DefaultHigh                     // bit 5: HI_LIMIT and HLM_SCAL are invalid, the default holds
	NoLow                           // bit 6: there is no low limit
	NoHigh                          // bit 7: there is no high limit
)

// Bits of OPT_FLAG in FTR; a set bit takes the field away. Bits 6 and 7 are 1.
const (
	FTRNoCycles   = 1 << iota // bit 0: CYCL_CNT
	FTRNoAddress              // bit 1: REL_VADR
	FTRNoRepeats              // bit 2: REPT_CNT
	FTRNoFailures             // bit 3: NUM_FAIL
	FTRNoFailAt               // bit 4: XFAIL_AD, YFAIL_AD
	FTRNoOffset               // bit 5: VECT_OFF
)

// Bits of OPT_FLAG in TSR; a set bit takes the field away. Bits 3, 6 and 7 are 1.
const (
	TSRNoMin  = 1 << 0 // TEST_MIN
	TSRNoMax  = 1 << 1 // TEST_MAX
	TSRNoTime = 1 << 2 // TEST_TIM
	TSRNoSum  = 1 << 4 // TST_SUMS
	TSRNoSqrs = 1 << 5 // TST_SQRS
)
