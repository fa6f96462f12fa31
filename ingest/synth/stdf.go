package synth

import (
	"io"
	"math"
	"strconv"

	"kneepoint/ingest/stdf"
)

// WriteSTDF writes the lot as a tester would log it: STDF V4, a WIR to WRR for
// each wafer, the sites of a touchdown mixed, retests at the wafer's end. A blank
// reading is a test that was not executed. Results are float32 in the base unit;
// readings of up to six digits, as the demo's are, come back as they were.
func (l *Lot) WriteSTDF(w io.Writer, bigEndian bool) error {
	f := &stdfFile{out: stdf.NewWriter(w, stdf.Order(bigEndian)), spec: &l.Spec}
	f.out.LeaveOut = true
	f.optional = make([]stdf.Optional, len(l.Spec.Tests))
	for i := range l.Spec.Tests {
		t := l.Spec.Tests[i]
		t.Lower, t.Upper = l.Spec.Limits(i)
		f.optional[i] = optional(&t)
	}
	f.put(&stdf.FAR{})
	f.put(&stdf.MIR{Mode: ' ', Retest: ' ', Protection: ' ', BurnIn: 65535, CommandMode: ' ', LotID: l.ID, PartType: l.Product})
	good := uint32(0)
	for i := range l.Wafers {
		good += f.wafer(&l.Wafers[i])
	}
	if g := l.Spec.Grid; g.DieWidthMM > 0 {
		f.put(&stdf.WCR{WaferSize: float32(g.DiameterMM), DieHeight: float32(g.DieHeightMM), DieWidth: float32(g.DieWidthMM), Units: 3, Flat: 'D',
			CenterX: stdf.NoCoordinate, CenterY: stdf.NoCoordinate, PositiveX: 'R', PositiveY: 'U'})
	}
	f.put(&stdf.PCR{Head: stdf.AllSites, Parts: uint32(l.Rows()), Retested: stdf.NoCount, Aborted: stdf.NoCount, Good: good, Functional: stdf.NoCount})
	f.put(&stdf.MRR{Disposition: ' '})
	if f.err != nil {
		return f.err
	}
	return f.out.Flush()
}

type stdfFile struct {
	out      *stdf.Writer
	spec     *Spec
	optional []stdf.Optional
	err      error
}

// put writes a record; the first error stays.
func (f *stdfFile) put(rec stdf.Record) {
	if f.err == nil {
		f.err = f.out.Write(rec)
	}
}

// baseUnits are the powers of ten of the prefixes and the units behind them.
var baseUnits = map[string]struct {
	unit  string
	scale int8
}{"V": {"V", 0}, "mV": {"V", 3}, "A": {"A", 0}, "mA": {"A", 3}, "uA": {"A", 6}, "nA": {"A", 9}, "pA": {"A", 12}, "pF": {"F", 12}, "ohm": {"ohm", 0}}

// base gives a value in the base unit, rounded once to float32.
func base(v float64, scale int8) float32 {
	if scale == 0 {
		return float32(v)
	}
	f, err := strconv.ParseFloat(strconv.FormatFloat(v, 'e', 12, 64), 64)
	if err != nil {
		return float32(math.NaN())
	}
	// Dividing by the exact power of ten keeps the decimal to the last bit that a
	// float32 can tell.
	return float32(f / math.Pow10(int(scale)))
}

func optional(t *Test) stdf.Optional {
	u := baseUnits[t.Unit]
	if _, ok := baseUnits[t.Unit]; !ok {
		u.unit = t.Unit
	}
	o := stdf.Optional{Present: 7, Flag: stdf.NoStart | stdf.NoLowSpec | stdf.NoHighSpec, ResScale: u.scale, LoScale: u.scale, HiScale: u.scale, Units: u.unit}
	if t.Lower == t.Lower {
		o.LoLimit = base(t.Lower, u.scale)
	} else {
		o.Flag |= stdf.NoLow
	}
	if t.Upper == t.Upper {
		o.HiLimit = base(t.Upper, u.scale)
	} else {
		o.Flag |= stdf.NoHigh
	}
	return o
}

// wafer writes one wafer and counts its good parts.
func (f *stdfFile) wafer(w *Wafer) (good uint32) {
	f.put(&stdf.WIR{Head: 1, Group: 255, WaferID: w.ID})
	for lo := 0; lo < len(w.X); {
		hi := lo + 1
		for hi < len(w.X) && w.Touchdown[hi] == w.Touchdown[lo] {
			hi++
		}
		good += f.touchdown(w, lo, hi)
		lo = hi
	}
	f.put(&stdf.WRR{Head: 1, Group: 255, Parts: uint32(len(w.X)), Retested: uint32(len(w.X) - w.Dice), Aborted: stdf.NoCount, Good: good,
		Functional: stdf.NoCount, WaferID: w.ID})
	return good
}

// touchdown writes the parts that are tested at once, test by test.
func (f *stdfFile) touchdown(w *Wafer, lo, hi int) (good uint32) {
	for i := lo; i < hi; i++ {
		f.put(&stdf.PIR{Head: 1, Site: uint8(w.Site[i])})
	}
	for t := range f.spec.Tests {
		x := &f.spec.Tests[t]
		for i := lo; i < hi; i++ {
			rec := &stdf.PTR{Number: uint32(1000 + 10*t), Head: 1, Site: uint8(w.Site[i]), Text: x.Name, Optional: &f.optional[t]}
			v := w.Values[t][i]
			if v != v {
				rec.Flag = stdf.NotExecuted
			} else {
				rec.Result = base(v, f.optional[t].ResScale)
			}
			if v < x.Lower || v > x.Upper {
				rec.Flag |= stdf.Failed
			}
			f.put(rec)
		}
	}
	for i := lo; i < hi; i++ {
		rec := &stdf.PRR{Head: 1, Site: uint8(w.Site[i]), Tests: uint16(len(f.spec.Tests)), HardBin: uint16(w.HardBin[i]), SoftBin: uint16(w.SoftBin[i]),
			X: int16(w.X[i]), Y: int16(w.Y[i])}
		if i >= w.Dice {
			rec.Flag |= stdf.RetestXY
		}
		if f.spec.PassBin(int(w.HardBin[i])) {
			good++
		} else {
			rec.Flag |= stdf.PartFailed
		}
		f.put(rec)
	}
	return good
}
