package synth

import (
	"fmt"
	"math"
	"slices"
	"strings"
)

// Entry is one cause that can be made, by the name that kneepoint's cause
// catalogue gives it.
type Entry struct {
	ID         string
	Directions []string // the first is the usual one; empty: has none
	Size       float64  // usual size
	SizeIs     string   // what the size is

	build func(sign, size float64) Cause
}

// Catalogue lists what [NewCause] can make, in the order of the cause catalogue.
func Catalogue() []Entry { return slices.Clone(catalogue) }

// NewCause makes a cause of the catalogue at its usual place on every wafer;
// Wafers, Place and the rest are then the caller's to change. Direction ""
// and size 0 mean the usual ones. The error lists what there is.
func NewCause(id, direction string, size float64) (Cause, error) {
	i := slices.IndexFunc(catalogue, func(e Entry) bool { return e.ID == id })
	if i < 0 {
		ids := make([]string, len(catalogue))
		for i, e := range catalogue {
			ids[i] = e.ID
		}
		return Cause{}, fmt.Errorf("no cause %q to make; there are %s", id, strings.Join(ids, ", "))
	}
	e := catalogue[i]
	which := slices.Index(e.Directions, direction)
	if direction == "" {
		which = 0
	}
	if which < 0 {
		return Cause{}, fmt.Errorf("cause %s has no direction %q; it has %s", id, direction,
			strings.Join(append(slices.Clone(e.Directions), `""`), ", "))
	}
	if !(size >= 0) || math.IsInf(size, 0) {
		return Cause{}, fmt.Errorf("cause %s: size %v is no size; it is %s, usually %g", id, size, e.SizeIs, e.Size)
	}
	if size == 0 {
		size = e.Size
	}
	sign := 1.0
	if which == 1 {
		sign = -1
	}
	c := e.build(sign, size)
	c.ID, c.Text = e.ID, fmt.Sprintf("%s %g", e.SizeIs, size)
	if len(e.Directions) > 0 {
		c.Direction = e.Directions[which]
	}
	return c, nil
}

// by is the logarithmic change of a quantity that becomes 1 + d of itself, held
// above a hundredth.
func by(d float64) float64 { return math.Log(max(1+d, 0.01)) }

var (
	lowHigh   = []string{"low", "high"}
	relative  = "relative change where it is strongest"
	diceShare = "share of the dice in place"
)

// Usual sizes are plain to see in the data; what they cost depends on the
// product's limits. Places and sizes are common practice, no source.
var catalogue = []Entry{
	{"epi-thickness", lowHigh, 0.16, relative, func(sign, size float64) Cause {
		return Cause{Shift: Process{EpiThickness: by(-sign * size)}, Place: Place{Shape: Centre, Outer: 1.1}}
	}},
	{"epi-doping", []string{"high", "low"}, 0.3, relative, func(sign, size float64) Cause {
		return Cause{Shift: Process{EpiDoping: by(sign * size)}, Place: Place{Shape: Tilt, Angle: 30}}
	}},
	{"base-profile", lowHigh, 0.5, relative, func(sign, size float64) Cause {
		return Cause{Shift: Process{BaseDose: by(-sign * size)}, Jitter: 0.1}
	}},
	{"emitter-depth", []string{"deep", "shallow"}, 0.15, relative, func(sign, size float64) Cause {
		return Cause{Shift: Process{EmitterDepth: by(sign * size)}, Jitter: 0.1}
	}},
	{"emitter-efficiency", lowHigh, 0.35, relative, func(sign, size float64) Cause {
		return Cause{Shift: Process{EmitterGummel: by(-sign * size)}, Jitter: 0.1}
	}},
	{"edge-field", nil, 0.4, "relative loss of edge radius on three dice in ten", func(_, size float64) Cause {
		return Cause{Shift: Process{EdgeRadius: by(-size)}, Share: 0.3, Scatter: 0.3}
	}},
	{"surface-charge", nil, 10, "times the usual oxide charge and surface recombination at the rim", func(_, size float64) Cause {
		return Cause{Shift: Process{OxideCharge: math.Log(size), SurfaceVelocity: 2.5 * math.Log(size)},
			Place: Place{Shape: Rim}}
	}},
	{"lifetime", nil, 40, "times shorter lifetime", func(_, size float64) Cause {
		return Cause{Shift: Process{Lifetime: -math.Log(size)},
			Place: Place{Shape: Blob, From: [2]float64{0.25, -0.3}, Width: 0.45}}
	}},
	{"emitter-collector-pipe", nil, 0.08, diceShare, func(_, size float64) Cause {
		return Cause{Share: size, Damage: Pipe}
	}},
	{"series-resistance", nil, 5, "times the fixed resistance", func(_, size float64) Cause {
		return Cause{Shift: Process{SeriesResistance: math.Log(size)}, Place: Place{Shape: Annulus, Inner: 0.55, Width: 0.25}}
	}},
	{"handling-damage", nil, 0.85, diceShare, func(_, size float64) Cause {
		return Cause{Share: size, Damage: Wreck,
			Place: Place{Shape: Line, From: [2]float64{-0.6, -0.7}, To: [2]float64{0.65, 0.4}, Width: 0.05}}
	}},
	{"edge-dice", nil, 0.7, diceShare, func(_, size float64) Cause {
		return Cause{Share: size, Damage: Wreck, Place: Place{Shape: Ring, Inner: 0.78, Outer: 0.9}}
	}},
	{"shot-repeat", nil, 0.8, diceShare, func(_, size float64) Cause {
		return Cause{Share: size, Damage: Short, Place: Place{Shape: ShotCell, Shot: [2]int{1, 1}}}
	}},
	{"probe-contact", nil, 0.4, diceShare, func(_, size float64) Cause {
		return Cause{Share: size, Damage: Open, Recover: 0.9, Place: Place{Sites: []int{1}, Between: [2]float64{0.3, 0.8}}}
	}},
	{"test-setup", []string{"hot", "cold"}, 30, "kelvin off the test temperature", func(sign, size float64) Cause {
		return Cause{Shift: Process{Temperature: sign * size}}
	}},
	{"random-defects", nil, 0.08, diceShare, func(_, size float64) Cause {
		return Cause{Share: size, Damage: Defect}
	}},
}
