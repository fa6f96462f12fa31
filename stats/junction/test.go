package junction

import (
	"fmt"
	"math"
	"strings"
)

// What a test may measure. The first fifteen are the product file's words; the
// last four are monitors that a fab may add to see what the standard tests can't.
const (
	BVceo  = "bvceo"
	BVcbo  = "bvcbo"
	BVebo  = "bvebo"
	BVces  = "bvces"
	Icbo   = "icbo"
	Iceo   = "iceo"
	Iebo   = "iebo"
	HFE    = "hfe"
	Vcesat = "vcesat"
	Vbesat = "vbesat"
	Rb     = "rb"
	Rc     = "rc"
	Rpinch = "rpinch"
	Cob    = "cob"
	FT     = "ft"

	PlaneBV        = "bv-plane"       // a plane-limited (guarded) base-collector diode
	Multiplication = "multiplication" // M-1 at a collector voltage
	AreaLeakage    = "icbo-area"      // leakage of an area monitor, without perimeter
	EarlyVoltage   = "early-voltage"
)

// Level is a test's reading on a typical healthy lot, in the base SI unit. Sigmas
// are relative or absolute, whatever the caller uses alike; only Median is read
// by the model.
type Level struct {
	Median, Sigma, WithinLot, Lot float64
}

// Test is one electrical test and its bias. A bias of zero means the usual one,
// which the comment gives.
type Test struct {
	Name        string
	Measures    string
	Voltage     float64 // V: VCB (Icbo, Cob: 10), VCE (hFE: 5), VEB (Iebo: 5)
	Current     float64 // A: collector current (hFE 2 mA, BVceo 1 mA, saturation 50 mA)
	BaseCurrent float64 // A, in saturation: a tenth of Current
	Baseline    Level
}

// biased fills in the usual bias.
func (t Test) biased() Test {
	set := func(v *float64, usual float64) {
		if *v == 0 {
			*v = usual
		}
	}
	t.Measures = strings.ToLower(t.Measures)
	switch t.Measures {
	case Icbo, Cob, Iceo, Multiplication, AreaLeakage:
		set(&t.Voltage, 10)
	case HFE, Iebo, FT, EarlyVoltage, Rpinch, Rb:
		set(&t.Voltage, 5)
	case Vcesat, Vbesat:
		set(&t.Current, 50e-3)
		set(&t.BaseCurrent, t.Current/10)
	}
	switch t.Measures {
	case HFE:
		set(&t.Current, 2e-3)
	case BVceo:
		set(&t.Current, 1e-3)
	case FT:
		set(&t.Current, 10e-3)
	}
	return t
}

// known reports whether the model computes what a test measures.
func known(measures string) bool {
	switch measures {
	case BVceo, BVcbo, BVebo, BVces, Icbo, Iceo, Iebo, HFE, Vcesat, Vbesat, Rb, Rc, Rpinch, Cob, FT,
		PlaneBV, Multiplication, AreaLeakage, EarlyVoltage:
		return true
	}
	return false
}

func (t Test) check() error {
	if !known(t.Measures) {
		return fmt.Errorf("junction: test %q measures %q, which the device model does not know", t.Name, t.Measures)
	}
	for _, v := range []float64{t.Voltage, t.Current, t.BaseCurrent} {
		if v < 0 || math.IsNaN(v) || math.IsInf(v, 0) {
			return fmt.Errorf("junction: test %q: bias %g, want a finite magnitude above 0", t.Name, v)
		}
	}
	return nil
}
