package synth

import (
	_ "embed"
	"fmt"
	"math"
)

// DemoProductYAML is the product file that goes with [Demo]. Its baseline was
// computed from healthy lots of the demo; a test holds the two together.
//
//go:embed demo.yaml
var DemoProductYAML string

// DemoSeed is the seed of the demo lot that is shown.
const DemoSeed = 20417

var none = math.NaN()

// reachThrough is the device of the demo: about 25 V BVceo, its depletion layer
// reaching the substrate before it breaks down.
func reachThrough() Device {
	return Device{EpiThicknessUM: 3.3, EpiResistivityOhmCM: 1.72, BaseDepthUM: 0.75,
		UpDiffusionUM: 0.05, SubstrateCM3: 1e19, EmitterDepthUM: 0.25, EmitterAreaUM2: 20000}
}

// typicalSpread is how far a well-kept line strays. Common practice, no source.
func typicalSpread() (s [NumLatents]Spread) {
	s[EpiThickness] = Spread{Lot: 0.008, Wafer: 0.007, Die: 0.003, Bowl: 0.012, Tilt: 0.012, MeanBowl: 0.02}
	s[EpiDoping] = Spread{Lot: 0.018, Wafer: 0.015, Die: 0.005, Bowl: 0.02, Tilt: 0.02, MeanBowl: -0.02}
	s[BaseDose] = Spread{Lot: 0.02, Wafer: 0.015, Die: 0.012, Bowl: 0.01, Tilt: 0.012}
	s[BaseDepth] = Spread{Lot: 0.007, Wafer: 0.006, Die: 0.004, Bowl: 0.006, Tilt: 0.006}
	s[EmitterDepth] = Spread{Lot: 0.01, Wafer: 0.01, Die: 0.006, Bowl: 0.008, Tilt: 0.008}
	s[UpDiffusion] = Spread{Lot: 0.02, Wafer: 0.02}
	s[EdgeRadius] = Spread{Lot: 0.012, Wafer: 0.01, Die: 0.04}
	s[OxideCharge] = Spread{Lot: 0.1, Wafer: 0.1, Die: 0.05, Tilt: 0.05}
	s[Lifetime] = Spread{Lot: 0.12, Wafer: 0.1, Die: 0.18, Bowl: 0.06, Tilt: 0.05}
	s[SurfaceVelocity] = Spread{Lot: 0.1, Wafer: 0.1, Die: 0.1}
	s[EmitterGummel] = Spread{Lot: 0.03, Wafer: 0.025, Die: 0.03, Bowl: 0.02, Tilt: 0.02}
	s[SeriesResistance] = Spread{Lot: 0.05, Wafer: 0.05, Die: 0.05}
	return s
}

// demoTests is the program of the demo: the order in which a tester would run
// it, breakdown first.
func demoTests() []Test {
	return []Test{
		{Name: "BVCBO", Measures: "bvcbo", Unit: "V", At: "IC=10uA", Bias: 10e-6, Lower: 35, Upper: none, Typical: 41.9,
			Noise: 0.03, Gauge: 0.001, SiteOffset: 0.0005, Resolution: 0.02, Clamp: 80, Floor: 0, HardBin: 5, SoftBin: 51},
		{Name: "BVCEO", Measures: "bvceo", Unit: "V", At: "IC=1mA", Bias: 1e-3, Lower: 22.5, Upper: none, Typical: 24.8,
			Noise: 0.03, Gauge: 0.001, SiteOffset: 0.0005, Resolution: 0.02, Clamp: 60, Floor: 0, HardBin: 5, SoftBin: 53},
		{Name: "BVEBO", Measures: "bvebo", Unit: "V", At: "IE=10uA", Bias: 10e-6, Lower: 6, Upper: none, Typical: 6.74,
			Noise: 0.01, Gauge: 0.001, SiteOffset: 0.0005, Resolution: 0.005, Clamp: 20, Floor: 0, HardBin: 5, SoftBin: 55},
		{Name: "ICBO", Measures: "icbo", Unit: "nA", At: "VCB=20V", Bias: 20, Lower: none, Upper: 5, Typical: 0.15,
			Noise: 0.004, Gauge: 0.02, SiteOffset: 0.01, Resolution: 0.001, Clamp: 1000, Floor: 0.001, HardBin: 6, SoftBin: 61},
		{Name: "HFE1", Measures: "hfe", At: "IC=10uA, VCE=5V", Bias: 10e-6, Lower: 70, Upper: 250, Typical: 121,
			Noise: 0.2, Gauge: 0.004, SiteOffset: 0.001, Resolution: 0.1, Clamp: 999, Floor: 0, HardBin: 7, SoftBin: 71},
		{Name: "HFE2", Measures: "hfe", At: "IC=2mA, VCE=5V", Bias: 2e-3, Lower: 80, Upper: 250, Typical: 129,
			Noise: 0.1, Gauge: 0.002, SiteOffset: 0.001, Resolution: 0.1, Clamp: 999, Floor: 0, HardBin: 7, SoftBin: 73},
		{Name: "VCESAT", Measures: "vcesat", Unit: "V", At: "IC=50mA, IB=5mA", Bias: 50e-3, Lower: none, Upper: 0.12, Typical: 0.084,
			Noise: 0.0004, Gauge: 0.002, SiteOffset: 0.003, Resolution: 0.0001, Clamp: 2, Floor: 0, HardBin: 8, SoftBin: 81},
		{Name: "COB", Measures: "cob", Unit: "pF", At: "VCB=10V, F=1MHz", Bias: 10, Lower: none, Upper: 3.6, Typical: 3.0,
			Noise: 0.006, Gauge: 0.001, SiteOffset: 0.001, Resolution: 0.001, Clamp: 100, Floor: 0, HardBin: 9, SoftBin: 91},
		{Name: "COB30", Measures: "cob", Unit: "pF", At: "VCB=30V, F=1MHz", Bias: 30, Lower: none, Upper: 3.1, Typical: 2.68,
			Noise: 0.006, Gauge: 0.001, SiteOffset: 0.001, Resolution: 0.001, Clamp: 100, Floor: 0, HardBin: 9, SoftBin: 93},
	}
}

// background is what every lot has a little of.
func background() []Cause {
	return []Cause{
		{ID: "random-defects", Text: "point defects", Background: true, Share: 0.020, Damage: Defect},
		{ID: "emitter-collector-pipe", Text: "pipes through the base", Background: true, Share: 0.005, Damage: Pipe},
		{ID: "random-defects", Text: "single dice with generation centres", Background: true, Share: 0.007,
			Shift: Process{Lifetime: -3.6}, Scatter: 0.25},
		{ID: "edge-dice", Text: "dice at the wafer's edge", Background: true, Share: 0.12, Damage: Wreck,
			Place: Place{Shape: Ring, Inner: 0.80, Outer: 0.92}},
	}
}

// Demo makes the demo lot: DemoSpec with DemoSeed.
func Demo() *Lot { return DemoSpec().Generate(DemoSeed) }

// DemoSpec describes the invented lot that kneepoint shows what it does on: 25 wafers
// of 100 mm of the reach-through array chip MP-N24. One load of the epi reactor
// came out thin in the middle, two wafers were scratched, three have a strong
// edge ring, and one prober site had contact trouble for a while.
func DemoSpec() Spec {
	s := Spec{
		Product: "MP-N24", Lot: "KP5T-0417", Wafers: 25,
		Grid: Grid{DiameterMM: 100, DieWidthMM: 2.2, DieHeightMM: 2.2, EdgeExclusionMM: 3,
			SiteColumns: 4, SiteRows: 1, ShotColumns: 8, ShotRows: 8},
		Device: reachThrough(), Laws: DefaultLaws(reachThrough()), Spread: typicalSpread(), Tests: demoTests(),
		Grades:    []Grade{{1, 115, 145}, {2, 80, 115}, {3, 145, 250.05}},
		GradeTest: "HFE2",
		Retest:    0.3, Repeat: 0.002, Missing: 0.0006,
		History: demoHistory(25),
	}
	s.Causes = append(background(),
		Cause{ID: "epi-thickness", Direction: "low", Text: "one reactor load thin in the middle",
			Wafers: []int{6, 7, 8, 9, 10, 11}, Sizes: []float64{0.8, 1, 1.1, 1.05, 0.95, 0.85},
			Place: Place{Shape: Centre, Outer: 1.1}, Shift: Process{EpiThickness: -0.165}},
		Cause{ID: "handling-damage", Text: "a scratch across two wafers", Wafers: []int{3, 4}, Share: 0.85, Damage: Wreck,
			Place: Place{Shape: Line, From: [2]float64{-0.60, -0.72}, To: [2]float64{0.66, 0.42}, Width: 0.05}},
		Cause{ID: "edge-dice", Text: "edge ring of three wafers", Wafers: []int{17, 18, 22}, Share: 0.8, Damage: Wreck,
			Place: Place{Shape: Ring, Inner: 0.76, Outer: 0.88}},
		Cause{ID: "probe-contact", Text: "site 3 without contact for part of four wafers", Wafers: []int{13, 14, 15, 16},
			Share: 0.45, Damage: Open, Recover: 0.9, Place: Place{Sites: []int{3}, Between: [2]float64{0.3, 0.8}}},
	)
	return s
}

// demoHistory is the fab's record: epi reactor, load and pocket (loads of six
// wafers), and the boat position of the base diffusion.
func demoHistory(wafers int) []History {
	h := make([]History, wafers)
	for i := range h {
		load := i / 6
		h[i] = History{
			{"reactor", fmt.Sprintf("E%d", load%2+1)},
			{"load", fmt.Sprintf("E%d-%d", load%2+1, 311+load/2)},
			{"pocket", fmt.Sprint(i%6 + 1)},
			{"boat_position", fmt.Sprint(wafers - i)},
		}
	}
	return h
}

// BenchSpec returns the lot that speed is measured on: 25 wafers of 150 mm with
// 88,000 dice each and 8 tests, 2.2 million rows and about 195 MB as wide text.
func BenchSpec() Spec {
	s := DemoSpec()
	s.Lot = "KP5T-9000-FULL"
	s.Grid = Grid{DiameterMM: 150, EdgeExclusionMM: 3, DicePerWafer: 88000, SiteColumns: 4, SiteRows: 1}
	s.Tests = s.Tests[:8]
	for i, resolution := range map[int]float64{3: 1e-4, 6: 1e-5, 7: 1e-4} {
		s.Tests[i].Resolution = resolution
	}
	s.Retest, s.Repeat, s.Missing = 0, 0, 0
	return s
}
