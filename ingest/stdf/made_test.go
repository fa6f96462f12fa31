package stdf

import (
	"bytes"
	"math"
	"math/rand/v2"
	"strconv"
	"testing"
)

// optReserved is what a PTR has in the bit of OPT_FLAG that is reserved for it.
const optReserved = NoStart

// madeFile describes a made-up wafer-test file: invented values, for the
// structure of files only.
type madeFile struct {
	order     Order
	wafers    int
	parts     int // a wafer
	sites     int
	leaveOut  bool // PTRs after the first of a test leave text and optional part out
	textOnly  bool // later PTRs give the text, not the optional part
	plainOnly bool // no FTR, MPR
	seed      uint64
}

var madeTests = []struct {
	number uint32
	text   string
	units  string
	scale  int8
	lo, hi float32
	mean   float64
}{
	{1000, "BVCBO", "V", 0, 35, 80, 42},
	{1010, "BVCEO", "V", 0, 22.5, 80, 25},
	{1020, "BVEBO", "V", 0, 6, 12, 7.5},
	{1030, "ICBO", "A", 9, float32(math.NaN()), 5e-9, 1e-9},
	{1040, "HFE1", "", 0, 70, 250, 130},
	{1050, "HFE2", "", 0, 80, 250, 150},
	{1060, "VCESAT", "V", 3, float32(math.NaN()), 0.12, 0.08},
	{1070, "COB", "F", 12, float32(math.NaN()), 3.6e-12, 3e-12},
}

func (m madeFile) optional(i int) *Optional {
	t := madeTests[i]
	o := &Optional{Present: 12, Flag: optReserved | NoLowSpec | NoHighSpec, ResScale: t.scale, LoScale: t.scale, HiScale: t.scale,
		LoLimit: t.lo, HiLimit: t.hi, Units: t.units, ResFormat: "%9.3f", LoFormat: "%9.3f", HiFormat: "%9.3f"}
	if t.lo != t.lo {
		o.LoLimit = 0
		o.Flag |= NoLow
	}
	return o
}

// bytes writes the file.
func (m madeFile) bytes(tb testing.TB) []byte {
	tb.Helper()
	var buf bytes.Buffer
	w := NewWriter(&buf, m.order)
	w.LeaveOut = m.leaveOut
	rnd := rand.New(rand.NewPCG(m.seed, 7))
	put := func(rec Record) {
		if err := w.Write(rec); err != nil {
			tb.Fatal(err)
		}
	}
	put(&FAR{})
	put(&ATR{Modified: 1_700_000_000, Command: "made for a test"})
	put(&MIR{SetupTime: 1_700_000_000, StartTime: 1_700_000_100, Station: 1, Mode: 'P', Retest: ' ', Protection: ' ', BurnIn: 65535,
		CommandMode: ' ', LotID: "LOT-7", PartType: "MP-N24", Node: "cell-3", Job: "mpn24_ws", JobRevision: "C", Temperature: "25"})
	sites := make([]byte, m.sites)
	for i := range sites {
		sites[i] = byte(i + 1)
	}
	put(&SDR{Head: 1, Group: 255, Sites: sites, CardType: "needle", CardID: "PC-12"})
	for i := range 2 {
		put(&PMR{Index: uint16(i + 1), Channel: "ch" + strconv.Itoa(i), Logical: "PIN" + strconv.Itoa(i), Head: 1, Site: 1})
	}
	good := uint32(0)
	id := 0
	for wafer := range m.wafers {
		name := "LOT-7-" + strconv.Itoa(wafer+1)
		put(&WIR{Head: 1, Group: 255, StartTime: 1_700_000_200, WaferID: name})
		goodHere := uint32(0)
		for done := 0; done < m.parts; {
			n := min(m.sites, m.parts-done)
			for s := range n {
				put(&PIR{Head: 1, Site: uint8(s + 1)})
			}
			failed := make([]bool, n)
			for i, t := range madeTests {
				for s := range n {
					v := float32(t.mean * (1 + 0.1*rnd.NormFloat64()))
					rec := &PTR{Number: t.number, Head: 1, Site: uint8(s + 1), Result: v, Text: t.text, Optional: m.optional(i)}
					if m.textOnly && id > 0 {
						rec.Optional = nil
					}
					if v < t.lo || v > t.hi {
						rec.Flag |= Failed
						failed[s] = true
					}
					put(rec)
				}
			}
			for s := range n {
				if m.plainOnly {
					break
				}
				put(&MPR{Number: 2000, Head: 1, Site: uint8(s + 1), Results: []float32{1, 2}, Text: "LEAK", Optional: &MPROptional{
					Optional: Optional{Present: 16, Flag: NoStart | NoLowSpec | NoHighSpec | NoLow, HiLimit: 3, Units: "A"}, Pins: []uint16{1, 2}}})
				put(&FTR{Number: 3000, Head: 1, Site: uint8(s + 1), Optional: 0xff, Text: "CONTACT"})
			}
			for s := range n {
				id++
				rec := &PRR{Head: 1, Site: uint8(s + 1), Tests: uint16(len(madeTests)), HardBin: 1, SoftBin: 1, X: int16(id % 97),
					Y: int16(id / 97 % 97), TestTime: 35, PartID: strconv.AppendInt(nil, int64(id), 10)}
				if failed[s] {
					rec.Flag, rec.HardBin, rec.SoftBin = PartFailed, 5, 51
				} else {
					goodHere++
				}
				put(rec)
			}
			done += n
		}
		good += goodHere
		put(&WRR{Head: 1, Group: 255, FinishTime: 1_700_000_900, Parts: uint32(m.parts), Retested: 0, Aborted: 0, Good: goodHere,
			Functional: NoCount, WaferID: name})
	}
	put(&WCR{WaferSize: 100, DieHeight: 0.45, DieWidth: 0.45, Units: 3, Flat: 'D', CenterX: 48, CenterY: 48, PositiveX: 'R', PositiveY: 'U'})
	for _, t := range madeTests {
		put(&TSR{Head: AllSites, Type: 'P', Number: t.number, Executed: uint32(id), Failed: NoCount, Alarmed: 0, Name: t.text, Optional: 0xff})
	}
	put(&HBR{Head: AllSites, Number: 1, Count: good, PassFail: 'P', Name: "gain grade A"})
	put(&HBR{Head: AllSites, Number: 5, Count: uint32(id) - good, PassFail: 'F', Name: "breakdown"})
	put(&SBR{Head: AllSites, Number: 1, Count: good, PassFail: 'P', Name: "good"})
	put(&PCR{Head: AllSites, Parts: uint32(id), Retested: 0, Aborted: 0, Good: good, Functional: NoCount})
	put(&MRR{FinishTime: 1_700_001_000, Disposition: ' '})
	if err := w.Flush(); err != nil {
		tb.Fatal(err)
	}
	return buf.Bytes()
}
