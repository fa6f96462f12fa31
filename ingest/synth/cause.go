package synth

import (
	"math"
	"slices"
)

// Cause is one thing that went wrong, or that always goes a little wrong.
//
// It acts on the dice of its wafers in any of three ways: it shifts latents by
// Shift, in proportion to its strength at the die; it does Damage to the die; or
// a Fault of the tester distorts one reading. With Share 0 every die in place feels the shift; with a Share,
// only the dice that chance picks are shifted or damaged.
type Cause struct {
	ID        string // of the catalogue: epi-thickness, handling-damage, edge-dice ...
	Direction string // low, high, deep, shallow, or ""
	Text      string // what happened, one sentence

	// Background marks what a healthy lot has too; [Spec.Healthy] keeps it.
	Background bool
	// Off switches the cause off and leaves every other random number as it is.
	Off bool

	Wafers []int     // by index from 0; nil: all
	Sizes  []float64 // by position in Wafers; nil: all 1
	Jitter float64   // spread of the size from wafer to wafer (lognormal sigma)

	Place   Place
	Places  []Place // by position in Wafers, in place of Place; nil: Place on all
	Shift   Process // at strength 1
	Share   float64 // chance that a die at strength 1 is hit; above 1 counts as 1
	Scatter float64 // spread of the shift from hit die to hit die (lognormal sigma)
	Damage  Damage

	// Leak multiplies the collector's leakage of hit dice: a local defect, on top
	// of what the shift does. 0 counts as 1.
	Leak float64

	// Faults distort tests' readings on the dice in place.
	Faults []Fault

	// Recover is the chance that the damage is gone when the die is measured
	// again: a bad contact recovers, a scratch does not.
	Recover float64
}

// Damage is what happens to a hit die's readings.
type Damage int

const (
	NoDamage     Damage = iota
	Short               // collector to base: no breakdown, leakage without end
	EmitterShort        // emitter to base: no BVebo, no gain
	Pipe                // emitter to collector through the base: BVceo near nothing, BVcbo intact
	Open                // no contact: passes breakdown and leakage, has no gain
	Defect              // a point defect: Short, EmitterShort or heavy leakage by chance
	Wreck               // Short, EmitterShort or Open by chance
)

// Fault is a tester that reads one test wrongly: a wrong range, scale or offset.
type Fault struct {
	Test   string
	Factor float64 // 0 counts as 1
	Offset float64 // in the test's unit
	Top    float64 // readings end here; 0: no end of its own

	// The limits that the tester judges by instead of the test's; 0: the test's own.
	WrongLower, WrongUpper float64
}

func (f *Fault) apply(v float64) float64 {
	if f.Factor != 0 {
		v *= f.Factor
	}
	return v + f.Offset
}

// Shape is the pattern of a Place.
type Shape int

const (
	Everywhere Shape = iota
	Centre           // 1 in the middle, falling as r^2 to 0 at Outer
	Rim              // 0 in the middle, rising as r^2 to 1 at the wafer's edge
	Ring             // 0 inside Inner, rising linearly to 1 at Outer and beyond
	Annulus          // bell of width Width around Inner
	Tilt             // 0 to 1 across the wafer towards Angle
	Line             // 1 within Width of the segment From-To, which may have a Bend
	Blob             // bell of width Width around From
	Sector           // 1 within Width degrees either side of Angle, outside Inner
	ShotCell         // 1 on the die at Shot, or at one of Shots, within each exposure
	Chords           // 1 within Width of Count parallel lines across Angle: the first at Inner, the next Outer further
	Positions        // 1 on a share Width of the die positions, the same on all wafers; Salt picks them
)

// Place is where on the wafer a cause acts, and how strongly. Lengths are in
// wafer radii, angles in degrees from the x axis anticlockwise.
type Place struct {
	Shape        Shape
	Inner, Outer float64
	Width, Angle float64
	From, To     [2]float64
	Bend         float64 // of a Line: its middle lies so far aside
	Shot         [2]int
	Shots        [][2]int
	Count        int
	Salt         uint64

	// The filters hold on top of any shape. Sites: only these (from 1); nil all.
	// Between: only touchdowns within this share of the wafer's; zero value all.
	Sites   []int
	Between [2]float64
}

// strength is 0 to 1 at a die.
func (p *Place) strength(d *place) float64 {
	if p.Between != [2]float64{} && (d.touchShare < p.Between[0] || d.touchShare >= p.Between[1]) {
		return 0
	}
	if p.Sites != nil {
		ours := false
		for _, s := range p.Sites {
			ours = ours || int32(s) == d.site
		}
		if !ours {
			return 0
		}
	}
	switch p.Shape {
	case Centre:
		outer := p.Outer
		if outer == 0 {
			outer = 1
		}
		return max(1-d.r*d.r/(outer*outer), 0)
	case Rim:
		return d.r * d.r
	case Ring:
		if p.Outer <= p.Inner {
			return step(d.r >= p.Inner)
		}
		return min(max((d.r-p.Inner)/(p.Outer-p.Inner), 0), 1)
	case Annulus:
		return bell((d.r - p.Inner) / p.Width)
	case Tilt:
		a := p.Angle * math.Pi / 180
		return (1 + d.u*math.Cos(a) + d.v*math.Sin(a)) / 2
	case Line:
		return step(fromSegment(d.u, d.v, p.From, p.To, p.Bend) <= p.Width)
	case Blob:
		return bell(math.Hypot(d.u-p.From[0], d.v-p.From[1]) / p.Width)
	case Sector:
		off := math.Remainder(math.Atan2(d.v, d.u)*180/math.Pi-p.Angle, 360)
		return step(math.Abs(off) <= p.Width && d.r >= p.Inner)
	case ShotCell:
		at := [2]int{int(d.sx), int(d.sy)}
		return step(at == p.Shot || slices.Contains(p.Shots, at))
	case Chords:
		a := p.Angle * math.Pi / 180
		across := d.u*math.Cos(a) + d.v*math.Sin(a)
		k := math.Round((across - p.Inner) / p.Outer)
		return step(k >= 0 && int(k) < p.Count && math.Abs(across-p.Inner-k*p.Outer) <= p.Width)
	case Positions:
		return step(root(p.Salt).at(uint64(uint32(d.x))<<32|uint64(uint32(d.y))).uniform() < p.Width)
	}
	return 1
}

func step(in bool) float64 {
	if in {
		return 1
	}
	return 0
}

func bell(z float64) float64 { return math.Exp(-z * z / 2) }

// fromSegment is the distance of (u, v) from the segment a-b, or from a parabola
// whose middle lies bend to the left of it.
func fromSegment(u, v float64, a, b [2]float64, bend float64) float64 {
	du, dv := b[0]-a[0], b[1]-a[1]
	t := 0.0
	if l := du*du + dv*dv; l > 0 {
		t = min(max(((u-a[0])*du+(v-a[1])*dv)/l, 0), 1)
	}
	if l := math.Hypot(du, dv); bend != 0 && l > 0 {
		aside := bend * 4 * t * (1 - t) / l
		u, v = u+aside*dv, v-aside*du
	}
	return math.Hypot(u-a[0]-t*du, v-a[1]-t*dv)
}

// place is where the cause acts on a wafer.
func (c *Cause) place(wafer int) *Place {
	if c.Places != nil {
		if i := slices.Index(c.Wafers, wafer); i >= 0 {
			return &c.Places[i]
		}
	}
	return &c.Place
}

// size is how strongly the cause acts on a wafer, 0 when not at all.
func (c *Cause) size(seed uint64, number, wafer int) float64 {
	if c.Off {
		return 0
	}
	size := 1.0
	if c.Wafers != nil {
		size = 0
		for i, w := range c.Wafers {
			if w == wafer {
				size = 1
				if c.Sizes != nil {
					size = c.Sizes[i]
				}
			}
		}
	}
	if size != 0 && c.Jitter > 0 {
		size *= math.Exp(c.Jitter * root(seed).at(branchCause).at(uint64(number)).at(uint64(wafer)).normal())
	}
	return size
}

// damage spoils the ideal readings of a hit die. pick is the die's own number
// for this cause.
func damage(vals []float64, tests []Test, kind Damage, pick key) {
	choose := pick.at(1).uniform()
	switch kind {
	case Defect:
		switch {
		case choose < 0.45:
			kind = Short
		case choose < 0.7:
			kind = EmitterShort
		default:
			leaky(vals, tests, math.Exp(6+1.5*pick.at(2).normal()))
			return
		}
	case Wreck:
		switch {
		case choose < 0.5:
			kind = Short
		case choose < 0.8:
			kind = EmitterShort
		default:
			kind = Open
		}
	}
	inf := math.Inf(1)
	a, b := pick.at(3).uniform(), pick.at(4).uniform()
	for i := range tests {
		v, typical := &vals[i], tests[i].Typical
		switch m := tests[i].Measures; kind {
		case Short:
			switch m {
			case "bvcbo", "bvceo", "bvces":
				*v = min(*v, typical*0.3*a)
			case "icbo", "iceo":
				*v = inf
			case "hfe":
				*v *= 0.4 * b
			case "cob":
				*v *= 1 + 2*b
			}
		case EmitterShort:
			switch m {
			case "bvebo":
				*v = typical * 0.2 * a
			case "iebo", "vcesat":
				*v = inf
			case "hfe":
				*v *= 0.05 * b
			case "bvceo":
				*v *= 1.1 // without gain the junction holds more
			}
		case Pipe:
			switch m {
			case "bvceo":
				*v = min(*v, typical*0.25*a*a)
			case "iceo":
				*v = inf
			case "hfe":
				*v *= 1 + 0.3*b
			}
		case Open:
			switch m {
			case "icbo", "iceo", "iebo", "hfe":
				*v = 0
			case "cob":
				*v *= 0.02
			default:
				*v = inf
			}
		}
	}
	capByBVCBO(vals, tests)
}

// leaky multiplies the leakage, with the loss of gain at low current that
// generation centres bring, and softens the breakdown a little.
func leaky(vals []float64, tests []Test, times float64) {
	for i := range tests {
		switch tests[i].Measures {
		case "icbo", "iceo", "iebo":
			vals[i] *= times
		case "hfe":
			vals[i] /= 1 + 0.0005*times*math.Sqrt(10e-6/tests[i].Bias)
		case "bvcbo", "bvces":
			vals[i] /= 1 + 0.01*math.Log1p(times/100)
		}
	}
	capByBVCBO(vals, tests)
}

// capByBVCBO keeps BVceo at or below BVcbo: the open-base transistor breaks
// down with its collector junction at the latest.
func capByBVCBO(vals []float64, tests []Test) {
	for i := range tests {
		if tests[i].Measures == "bvcbo" {
			for j := range tests {
				if tests[j].Measures == "bvceo" {
					vals[j] = min(vals[j], vals[i])
				}
			}
		}
	}
}
