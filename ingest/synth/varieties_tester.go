package synth

import (
	"math"
)

var probeContact = []variety{{"site", 2, false, false, func(k *sketch) {
	k.share(Open)
	k.cause.Place = Place{Sites: k.oneSite()}
	k.contact()
}}, {"burst", 2, false, false, func(k *sketch) {
	k.share(Open)
	k.lo = 0.1
	from := k.d.between(0, 0.7)
	k.cause.Place = Place{Between: [2]float64{from, from + k.d.between(0.1, 0.3)}}
	if k.d.chance(0.5) {
		k.cause.Place.Sites = k.oneSite()
	}
	k.contact()
	k.vary = func(p Place) Place {
		long := p.Between[1] - p.Between[0]
		from := k.d.between(0, max(1-long, 0))
		p.Between = [2]float64{from, from + long}
		return p
	}
	k.grow = func(c *Cause) bool {
		b := &c.Place.Between
		b[0], b[1] = max(b[0]-0.05, 0), min(b[1]+0.1, 1)
		return b[0] > 0 || b[1] < 1
	}
}}, {"resistance", 1, false, true, func(k *sketch) { // a bad contact adds its resistance
	k.cause.Place = Place{Sites: k.oneSite()}
	t := k.testOf("vcesat")
	if t == nil {
		k.share(Open)
		k.contact()
		return
	}
	k.lo, k.hi = 0.05, 20
	k.set = func(c *Cause, size float64) { c.Faults = []Fault{{Test: t.Name, Offset: size * t.Typical}} }
	k.cause.Share, k.cause.Scatter = k.d.between(0.5, 1), 0
}}}

// oneSite is a site of the prober, nil where it has only one.
func (k *sketch) oneSite() []int {
	if n := k.spec.Grid.SiteColumns * max(k.spec.Grid.SiteRows, 1); n > 1 {
		return []int{1 + k.d.below(n)}
	}
	return nil
}

// contact says whether a second touchdown makes contact.
func (k *sketch) contact() {
	if k.d.chance(0.75) {
		k.cause.Recover = k.d.between(0.7, 0.98)
	}
}

// testOf is the first test of a role, nil without.
func (k *sketch) testOf(measures string) *Test {
	for i := range k.spec.Tests {
		if k.spec.Tests[i].Measures == measures {
			return &k.spec.Tests[i]
		}
	}
	return nil
}

var testSetup = []variety{{"temperature", 2, true, false, func(k *sketch) {
	k.lo, k.hi = 5, 80
	k.set = func(c *Cause, size float64) { c.Shift = Process{Temperature: k.sign * size} }
}}, {"light", 1, false, true, func(k *sketch) {
	// Light on the die generates the same current in all of them.
	var faults []Fault
	for i := range k.spec.Tests {
		if t := &k.spec.Tests[i]; t.Measures == "icbo" || t.Measures == "iceo" {
			faults = append(faults, Fault{Test: t.Name, Offset: t.Typical})
		}
	}
	if faults == nil {
		k.scale()
		return
	}
	k.text = "light on the chuck"
	k.lo, k.hi = 0.5, 1000
	k.set = func(c *Cause, size float64) {
		c.Faults = append([]Fault(nil), faults...)
		for i := range c.Faults {
			c.Faults[i].Offset *= size
		}
	}
}}, {"scale", 1, false, true, (*sketch).scale}, {"offset", 1, false, true, func(k *sketch) {
	t, sign := k.limited()
	k.text = "offset on " + t.Name
	k.lo, k.hi = 0.005, 0.9
	k.set = func(c *Cause, size float64) { c.Faults = []Fault{{Test: t.Name, Offset: sign * size * t.Typical}} }
}}, {"range", 1, false, true, func(k *sketch) {
	// The range ends in the distribution: above the limit it costs nothing, below it
	// every reading ends there and fails.
	t := k.lowerLimited()
	if t == nil {
		k.scale()
		return
	}
	k.fixed = true
	k.text = "range too low on " + t.Name
	top := t.Lower + (t.Typical-t.Lower)*k.d.between(0.1, 1)
	if k.d.chance(0.4) {
		top = t.Lower * k.d.between(0.9, 0.998)
	}
	k.set = func(c *Cause, _ float64) { c.Faults = []Fault{{Test: t.Name, Top: top}} }
}}, {"limit", 1, false, true, func(k *sketch) {
	t, sign := k.limited()
	k.text = "wrong limit on " + t.Name
	k.lo, k.hi = 0.001, 0.9
	k.set = func(c *Cause, size float64) {
		// From where every die passes towards the other side of the distribution.
		f := Fault{Test: t.Name}
		if sign < 0 {
			f.WrongLower = t.Lower * math.Pow(1.3*t.Typical/t.Lower, size)
		} else {
			f.WrongUpper = t.Upper * math.Pow(0.7*t.Typical/t.Upper, size)
		}
		c.Faults = []Fault{f}
	}
}}, {"crossed", 1, false, true, func(k *sketch) {
	ceo, cbo := k.testOf("bvceo"), k.testOf("bvcbo")
	if ceo == nil || cbo == nil {
		k.scale()
		return
	}
	k.fixed = true
	k.text = "BVceo reads above BVcbo"
	f := Fault{Test: ceo.Name, Factor: cbo.Typical / ceo.Typical * k.d.between(1.06, 1.4)}
	if k.d.chance(0.4) { // the other way round: the wrong terminal pair
		f = Fault{Test: cbo.Name, Factor: ceo.Typical / cbo.Typical * k.d.between(0.7, 0.94)}
	}
	k.set = func(c *Cause, _ float64) { c.Faults = []Fault{f} }
}}}

// scale is a wrong factor on one test, towards its limit.
func (k *sketch) scale() {
	t, sign := k.limited()
	k.text = "scale of " + t.Name
	k.lo, k.hi = 0.005, 0.9
	k.set = func(c *Cause, size float64) { c.Faults = []Fault{{Test: t.Name, Factor: 1 + sign*size}} }
}

// limited picks a test with a limit, and the sign of the change that fails dice.
func (k *sketch) limited() (*Test, float64) {
	var with []int
	for i := range k.spec.Tests {
		if t := &k.spec.Tests[i]; t.Lower > 0 || t.Upper > 0 {
			with = append(with, i)
		}
	}
	if with == nil {
		return &k.spec.Tests[k.d.below(len(k.spec.Tests))], -1
	}
	t := &k.spec.Tests[with[k.d.below(len(with))]]
	if t.Lower > 0 && (!(t.Upper > 0) || k.d.chance(0.5)) {
		return t, -1
	}
	return t, 1
}

// lowerLimited picks a test with a lower limit, nil without.
func (k *sketch) lowerLimited() *Test {
	var with []int
	for i := range k.spec.Tests {
		if t := &k.spec.Tests[i]; t.Lower > 0 && t.Typical > t.Lower {
			with = append(with, i)
		}
	}
	if with == nil {
		return nil
	}
	return &k.spec.Tests[with[k.d.below(len(with))]]
}
