package config

// Product is what a product file says, after validation and with every
// physical value in SI units unless its name carries another unit (as the
// geometry keys of the file do: _um, _mm, _cm3).
//
// A number that the file does not give is NaN; a block that the file does not
// give is nil.
type Product struct {
	Name             string // part type; "" when not given
	File             string // as named by the user
	SHA256           string // of the file's bytes, hex
	Device           *Device
	Wafer            Wafer
	Columns          map[string]string // role (see Roles) -> header name in the data file
	Bins             Bins
	TestTemperatureC float64 // 25 when not given
	Tests            []Test
	Baseline         *Baseline
	Causes           []map[string]any // site causes, kept as written for the cause catalogue: every number a float64, a date its text; nil for none
}

// Quantity is a value that may carry its own spread.
type Quantity struct {
	Value float64
	Sigma float64 // NaN: exactly known or not given
}

// Spec is a target with limits; each may be NaN.
type Spec struct{ Target, Lower, Upper float64 }

// Device describes the transistor as the device model needs it.
type Device struct {
	Polarity string // "npn" or "pnp"
	Epi      struct {
		ThicknessUM       Spec // as grown, surface to the substrate's plateau
		ResistivityOhmCM  Spec
		UpDiffusionUM     Quantity
		SubstrateCM3      Quantity
		SiliconConsumedUM Quantity
	}
	Base struct {
		JunctionDepthUM         Quantity
		SurfaceConcentrationCM3 Quantity
		AreaUM2, PerimeterUM    Quantity
	}
	Emitter struct {
		DepthUM              Quantity
		AreaUM2, PerimeterUM Quantity
	}
	Edge struct {
		CornerRadiusUM Quantity
		FieldPlate     bool
	}
}

// Wafer is the wafer's geometry. Zero means not given.
type Wafer struct {
	DiameterMM      float64
	DieWidthMM      float64
	DieHeightMM     float64
	EdgeExclusionMM float64
	Notch           string // down, up, left, right; "" when not given
	ShotColumns     int    // dice per exposure shot, 0 when not given
	ShotRows        int
}

// Bins tells passing bins from failing ones.
type Bins struct {
	Pass  []int          // empty: not given
	Names map[int]string // may be nil
}

// PassBin reports whether a bin is a passing one under this file: a bin of
// Pass, or bin 1 when the file names none.
func (b Bins) PassBin(bin int) bool {
	if len(b.Pass) == 0 {
		return bin == 1
	}
	for _, p := range b.Pass {
		if p == bin {
			return true
		}
	}
	return false
}

// Test is one parametric test of the product file. Limits and clamp are SI.
type Test struct {
	Name         string
	Measures     string // a role of Measures, or "" for any other test
	Unit         Unit   // unit of limits, baseline and data in files; zero value: not given
	Lower, Upper float64
	At           []Condition
	AtText       string  // as written
	Clamp        float64 // largest value the tester can return
	Floor        float64 // smallest value the tester can tell from nothing
}

// Condition is one bias condition of a test, such as IC=10uA.
type Condition struct {
	Name  string  // IC, VCB, F ... as written
	Value float64 // SI: 1e-5 for 10uA
	Unit  Unit    // as written: uA; a ratio when there is none
}

// Baseline is the typical healthy lot. Medians and sigmas are SI.
type Baseline struct {
	Yield float64
	Tests map[string]BaselineTest
}

// BaselineTest is one test's healthy level and spread.
type BaselineTest struct {
	Median         float64
	Sigma          float64 // robust spread of passing dice pooled over healthy lots
	WithinLotSigma float64 // NaN when not given
	LotSigma       float64 // NaN when not given
}

// Measures lists what a test may measure; the device model knows each of them.
var Measures = []string{"bvceo", "bvcbo", "bvebo", "bvces", "icbo", "iceo", "iebo", "hfe",
	"vcesat", "vbesat", "rb", "rc", "rpinch", "cob", "ft"}

// Roles lists the column roles that the columns block can assign.
var Roles = []string{"lot", "wafer", "x", "y", "site", "touchdown", "hard_bin", "soft_bin", "pass",
	"test", "value", "unit", "lower", "upper", "time", "part"}
