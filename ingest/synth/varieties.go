package synth

import (
	"fmt"
	"math"
	"slices"
	"strings"
)

// variety is one way in which a cause shows.
type variety struct {
	name     string
	weight   float64
	directed bool // only it has the entry's directions, of an entry that has others without
	own      bool // its size is not what the catalogue says: not picked for a size that is given
	draw     func(k *sketch)
}

// sketch is a cause being drawn.
type sketch struct {
	d       *draws
	spec    *Spec
	dice    []place
	loss    float64 // what it should cost, as a share of the dice of its wafers
	wafers  int     // of the lot
	sign    float64 // 1 for the entry's first direction, -1 for the second
	cause   Cause
	text    string
	fixed   bool    // has no size to adjust
	lo, hi  float64 // sizes
	set     func(c *Cause, size float64)
	grow    func(c *Cause) bool // makes the place larger; false when it is as large as it gets
	vary    func(p Place) Place // the place on another wafer; nil: the same on all
	setLoss bool                // set takes a share: its loss follows from the place
}

// Varieties lists the ways of a cause of the catalogue; each is a value of
// [Wanted].Variety.
func Varieties(id string) []string {
	var names []string
	for _, v := range varieties[id] {
		names = append(names, v.name)
	}
	return names
}

func pickVariety(id, name, direction string, sized bool, d *draws) (*variety, error) {
	list := varieties[id]
	mixed := slices.ContainsFunc(list, func(v variety) bool { return v.directed })
	weights := make([]float64, len(list))
	names := make([]string, len(list))
	for i, v := range list {
		names[i] = v.name
		if (name == v.name || name == "" && !(sized && v.own)) && (!mixed || direction == "" || v.directed) {
			weights[i] = v.weight
		}
	}
	if slices.Max(weights) == 0 {
		what := fmt.Sprintf("no variety %q", name)
		if direction != "" {
			what += " with direction " + direction
		}
		return nil, fmt.Errorf("cause %s has %s; it has %s", id, what, strings.Join(names, ", "))
	}
	return &list[d.weighted(weights...)], nil
}

var varieties = map[string][]variety{
	"epi-thickness": {{"smooth", 1, false, false, func(k *sketch) {
		k.shift(EpiThickness, k.sign < 0, 0.02, 0.5, 0.8)
		k.cause.Place = k.smooth(0.25)
	}}},
	"epi-doping": {{"smooth", 1, false, false, func(k *sketch) {
		k.shift(EpiDoping, k.sign > 0, 0.03, 0.65, 1.5)
		k.cause.Place = k.smooth(0.25)
	}}},
	"base-profile": {{"wafer", 1, false, false, func(k *sketch) {
		k.shift(BaseDose, k.sign < 0, 0.03, 0.75, 3)
		k.cause.Place = k.smooth(0.6)
	}}, {"smooth", 1, false, false, func(k *sketch) {
		k.shift(BaseDose, k.sign < 0, 0.03, 0.75, 3)
		k.cause.Place = k.smooth(0)
	}}},
	"emitter-depth": {{"emitter", 1, false, false, func(k *sketch) {
		dev := &k.spec.Device
		deepest := 0.88*dev.BaseDepthUM/or(dev.EmitterDepthUM, dev.BaseDepthUM/3) - 1
		k.shift(EmitterDepth, k.sign > 0, 0.02, 0.6, min(deepest, 1.5))
		k.cause.Place = k.smooth(0.4)
	}}, {"base", 1, false, false, func(k *sketch) {
		// A shallower base drive narrows the base as a deeper emitter does.
		dev := &k.spec.Device
		shallowest := 1 - 1.15*or(dev.EmitterDepthUM, dev.BaseDepthUM/3)/dev.BaseDepthUM
		k.shift(BaseDepth, k.sign < 0, 0.01, min(max(shallowest, 0.05), 0.5), 0.6)
		k.cause.Place = k.smooth(0.4)
		k.text = "base drive"
	}}},
	"emitter-efficiency": {{"wafer", 2, false, false, func(k *sketch) {
		k.shift(EmitterGummel, k.sign < 0, 0.03, 0.8, 2)
		k.cause.Place = k.smooth(0.8)
	}}, {"smooth", 1, false, false, func(k *sketch) {
		k.shift(EmitterGummel, k.sign < 0, 0.03, 0.8, 2)
		k.cause.Place = k.smooth(0)
	}}},
	"edge-field":             edgeField,
	"surface-charge":         surfaceCharge,
	"lifetime":               lifetime,
	"emitter-collector-pipe": pipes,
	"series-resistance": {{"wafer", 1, false, false, func(k *sketch) {
		k.times(Process{SeriesResistance: 1}, 1.2, 60)
	}}, {"pattern", 1, false, false, func(k *sketch) {
		k.times(Process{SeriesResistance: 1}, 1.2, 100)
		k.cause.Place = k.backside()
	}}},
	"handling-damage": handling,
	"edge-dice":       edgeDice,
	"shot-repeat":     shotRepeat,
	"probe-contact":   probeContact,
	"test-setup":      testSetup,
	"random-defects": {{"random", 1, false, false, func(k *sketch) {
		k.share(Defect)
	}}},
}

// shift makes the size a relative change of a latent where the place is strongest:
// down to most below, or up to most above, target.
func (k *sketch) shift(q Latent, up bool, least, mostDown, mostUp float64) {
	sign, most := -1.0, mostDown
	if up {
		sign, most = 1, mostUp
	}
	k.lo, k.hi = least, most
	k.set = func(c *Cause, size float64) { c.Shift[q] = by(sign * size) }
}

// times makes the size a factor: each latent moves by its slope on the factor's
// logarithm.
func (k *sketch) times(slope Process, least, most float64) {
	k.lo, k.hi = least, most
	k.set = func(c *Cause, size float64) {
		for q := range slope {
			c.Shift[q] = slope[q] * math.Log(size)
		}
	}
}

// share makes the size the chance that a die in place is hit.
func (k *sketch) share(damage Damage) {
	k.cause.Damage = damage
	k.lo, k.hi = 0.002, 0.97
	k.setLoss = true
	k.set = func(c *Cause, size float64) { c.Share = size }
}

// smooth draws a place without sharp ends; everywhere is the chance of the whole
// wafer alike.
func (k *sketch) smooth(everywhere float64) Place {
	d := k.d
	if d.chance(everywhere) {
		return Place{}
	}
	switch d.weighted(3, 3, 3, 2, 1) {
	case 0:
		return Place{Shape: Centre, Outer: d.between(0.8, 1.4)}
	case 1:
		return Place{Shape: Rim}
	case 2:
		return Place{Shape: Tilt, Angle: d.between(0, 360)}
	case 3:
		return Place{Shape: Annulus, Inner: d.between(0.3, 0.8), Width: d.between(0.2, 0.4)}
	}
	return k.blob(0.35, 0.6)
}

func (k *sketch) blob(narrow, wide float64) Place {
	a, r := k.d.between(0, 2*math.Pi), math.Sqrt(k.d.uniform())*0.8
	return Place{Shape: Blob, From: [2]float64{r * math.Cos(a), r * math.Sin(a)}, Width: k.d.between(narrow, wide)}
}

// backside draws what back metal and contact leave: rings, sectors, spots.
func (k *sketch) backside() Place {
	d := k.d
	switch d.weighted(2, 1, 2, 1, 1, 1) {
	case 0:
		return Place{Shape: Annulus, Inner: d.between(0.2, 0.8), Width: d.between(0.12, 0.3)}
	case 1:
		return Place{Shape: Sector, Angle: d.between(0, 360), Width: d.between(25, 80), Inner: d.between(0, 0.4)}
	case 2:
		return k.blob(0.2, 0.5)
	case 3:
		return Place{Shape: Centre, Outer: d.between(0.7, 1.2)}
	case 4:
		return Place{Shape: Tilt, Angle: d.between(0, 360)}
	}
	return Place{Shape: Ring, Inner: d.between(0.5, 0.75), Outer: d.between(0.8, 1)}
}

// rim draws a place at the wafer's edge.
func (k *sketch) rim() Place {
	if k.d.chance(0.4) {
		return Place{Shape: Rim}
	}
	in := k.d.between(0.5, 0.8)
	return Place{Shape: Ring, Inner: in, Outer: k.d.between(in, 1)}
}
