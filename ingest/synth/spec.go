package synth

// Spec says what lot to make. The zero value makes nothing; start from [DemoSpec],
// [BenchSpec] or [FromProduct].
type Spec struct {
	Product string
	Lot     string
	Wafers  int
	Grid    Grid
	Device  Device
	Laws    Laws
	Physics *Physics // in place of Laws for readings; nil: Laws
	Smooth  Smooth   // shape of the smooth part within a wafer
	Spread  [NumLatents]Spread
	Tests   []Test // in the order of the program

	// Grades sorts passing dice into bins by GradeTest; without grades they get
	// bin 1.
	Grades    []Grade
	GradeTest string

	Causes  []Cause
	History []History // by wafer; may be shorter or nil

	StopOnFail bool    // later tests are blank after the first fail
	Retest     float64 // share of failing dice measured once more at the wafer's end
	Repeat     float64 // share of passing dice measured once more all the same
	Missing    float64 // share of readings lost on the way to the file

	// KeepProcess keeps every die's latents in the lot (13 numbers a die).
	KeepProcess bool
}

// Device holds the product's target process, as the laws need it.
type Device struct {
	EpiThicknessUM      float64 // as grown, surface to the substrate's plateau
	EpiResistivityOhmCM float64
	SiliconConsumedUM   float64 // by oxidation, from the surface
	BaseDepthUM         float64
	UpDiffusionUM       float64 // length of the substrate's exponential tail
	SubstrateCM3        float64
	EmitterDepthUM      float64
	EmitterAreaUM2      float64
}

// Latent is one process quantity that a die's readings depend on.
type Latent int

// The latents. A [Process] holds each as the natural logarithm of its ratio to
// target, except Temperature, which is in kelvin above the test temperature.
const (
	EpiThickness Latent = iota
	EpiDoping
	BaseDose // surface concentration of the base at unchanged depth
	BaseDepth
	EmitterDepth
	UpDiffusion
	EdgeRadius // of the base junction: what limits BVcbo
	OxideCharge
	Lifetime
	SurfaceVelocity // surface recombination
	EmitterGummel   // emitter efficiency
	SeriesResistance
	Temperature
	NumLatents
)

// Process is what one die got.
type Process [NumLatents]float64

// Spread says how far a latent strays from target, each as a standard
// deviation in the latent's own scale (0.01 is one percent).
//
// The smooth part is bowl (r^2 - 0.43) + tilt_x u + tilt_y v with r, u, v in wafer
// radii: it leaves the mean over a wafer's dice about alone.
type Spread struct {
	Lot, Wafer, Die float64
	Bowl            float64 // of the bowl's depth from wafer to wafer
	Tilt            float64 // of each tilt from wafer to wafer
	MeanBowl        float64 // the bowl all wafers share, high at the rim when positive
}

// Smooth is the shape of the smooth part within a wafer. The zero value is a
// paraboloid.
type Smooth struct {
	Power  float64 // of the bowl: r^Power; 0 counts as 2
	Saddle float64 // depth of a saddle, in bowls, its axes turned from wafer to wafer
}

// Test is one test of the program. Levels, limits, clamp, floor and resolution
// are in Unit; Bias is SI.
type Test struct {
	Name         string
	Measures     string  // role of config.Measures, "" for a test no law knows
	Unit         string  // as printed, "" for a ratio
	At           string  // condition as printed
	Bias         float64 // the voltage of a leakage or capacitance test, else the collector current
	Lower, Upper float64 // NaN: none
	Typical      float64 // healthy level
	Noise        float64 // of one reading, in Unit
	Gauge        float64 // of one reading, as a share of the value
	SiteOffset   float64 // standard deviation of a site's offset, as a share of the value
	Resolution   float64 // step of the tester's reading
	Clamp        float64 // the most the tester can return, NaN: no end
	Floor        float64 // the least it can return, NaN: no end
	HardBin      int     // of a die that fails here first
	SoftBin      int     // below the lower limit; SoftBin+1 above the upper
}

// Grade is one class of passing dice: values of the grade test from Lower up
// to but not including Upper.
type Grade struct {
	Bin          int
	Lower, Upper float64
}

// History is what the fab recorded of a wafer, in the order of its columns.
type History []Attribute

// Attribute is one recorded value.
type Attribute struct{ Name, Value string }
