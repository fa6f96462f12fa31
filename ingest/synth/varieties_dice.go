package synth

import "math"

var edgeField = []variety{{"tail", 2, false, false, func(k *sketch) {
	k.shift(EdgeRadius, false, 0.03, 0.85, 0)
	k.cause.Share, k.cause.Scatter = k.d.between(max(1.2*k.loss, 0.05), max(1.2*k.loss, 0.6)), k.d.between(0.2, 0.5)
	k.localLeak()
}}, {"all", 1, false, false, func(k *sketch) {
	k.shift(EdgeRadius, false, 0.03, 0.85, 0)
	k.cause.Place = k.smooth(0.5)
}}, {"mask", 1, false, false, func(k *sketch) {
	k.shift(EdgeRadius, false, 0.03, 0.85, 0)
	k.repeating(min(1.2*k.loss, 0.5))
	k.cause.Share, k.cause.Scatter = k.d.between(0.8, 1), k.d.between(0.05, 0.3)
	k.localLeak()
}}}

// localLeak gives some lots leakage at the very defect that lowers the breakdown.
func (k *sketch) localLeak() {
	if k.d.chance(0.35) {
		k.cause.Leak = k.d.logBetween(2, 30)
	}
}

var surfaceCharge = []variety{{"charge", 1, false, false, func(k *sketch) {
	k.times(Process{OxideCharge: 1}, 1.5, 150)
	k.cause.Place = k.wholeOrEdge()
}}, {"velocity", 1, false, true, func(k *sketch) {
	// The size is that of the charge that would come with it: s0 goes with its 2.5th
	// power in the catalogue.
	k.times(Process{SurfaceVelocity: 2.5}, 1.5, 40)
	k.cause.Place = k.wholeOrEdge()
}}, {"both", 1, false, false, func(k *sketch) {
	k.times(Process{OxideCharge: 1, SurfaceVelocity: k.d.between(1, 3.5)}, 1.5, 60)
	k.cause.Place = k.wholeOrEdge()
}}}

func (k *sketch) wholeOrEdge() Place {
	if k.d.chance(0.35) {
		return k.rim()
	}
	return k.smooth(0.6)
}

var lifetime = []variety{{"smooth", 2, false, false, func(k *sketch) {
	k.times(Process{Lifetime: -1}, 2, 600)
	k.cause.Place = k.smooth(0.4)
}}, {"contact", 1, false, false, func(k *sketch) { // where something dirty touched the wafer
	k.times(Process{Lifetime: -1}, 2, 600)
	k.cause.Place = k.blob(0.15, 0.45)
}}, {"edge", 1, false, false, func(k *sketch) {
	k.times(Process{Lifetime: -1}, 2, 600)
	k.cause.Place = k.rim()
}}}

var pipes = []variety{{"random", 2, false, false, func(k *sketch) {
	k.share(Pipe)
}}, {"slip", 1, false, false, func(k *sketch) {
	k.share(Pipe)
	k.lo = 0.2
	k.cause.Place = Place{Shape: Chords, Angle: 45*float64(k.d.below(8)) + k.d.between(-5, 5), Inner: k.d.between(0.1, 0.4),
		Outer: k.d.between(0.1, 0.25), Width: max(k.d.between(0.015, 0.04), k.pitch()/2), Count: 2 + k.d.below(4)}
	k.grow = func(c *Cause) bool {
		c.Place.Count++
		c.Place.Inner -= c.Place.Outer / 2
		return c.Place.Count < 14
	}
}}}

// pitch is the distance of neighbouring dice, wafer radii.
func (k *sketch) pitch() float64 {
	_, w, h := k.spec.Grid.Dice()
	return max(w, h) / (k.spec.Grid.DiameterMM / 2)
}

var handling = []variety{{"scratch", 2, false, false, func(k *sketch) {
	k.share(oneOf(k.d, Wreck, Wreck, Short))
	k.lo = 0.6
	a, turn, r := k.d.between(0, 2*math.Pi), k.d.between(-0.9, 0.9), k.d.between(0.2, 0.9)
	long := k.d.between(0.5, 1.7)
	from := [2]float64{r * math.Cos(a), r * math.Sin(a)}
	to := [2]float64{from[0] - long*math.Cos(a+turn), from[1] - long*math.Sin(a+turn)}
	k.cause.Place = Place{Shape: Line, From: from, To: to, Bend: k.d.between(-0.15, 0.15), Width: max(k.d.between(0.02, 0.06), 0.5*k.pitch())}
	k.grow = func(c *Cause) bool {
		c.Place.Width *= 1.3
		return c.Place.Width < 0.16
	}
	k.elsewhere()
}}, {"blob", 1, false, false, func(k *sketch) {
	k.share(oneOf(k.d, Wreck, Wreck, Open))
	k.lo = 0.6
	k.cause.Place = k.blob(0.08, 0.2)
	k.grow = func(c *Cause) bool {
		c.Place.Width *= 1.3
		return c.Place.Width < 0.6
	}
	k.elsewhere()
}}}

// elsewhere has some lots damaged at another place on each wafer: by hand, not by a
// machine.
func (k *sketch) elsewhere() {
	if !k.d.chance(0.4) {
		return
	}
	k.vary = func(p Place) Place {
		sin, cos := math.Sincos(k.d.between(0, 2*math.Pi))
		turn := func(v [2]float64) [2]float64 { return [2]float64{cos*v[0] - sin*v[1], sin*v[0] + cos*v[1]} }
		p.From, p.To = turn(p.From), turn(p.To)
		return p
	}
}

var edgeDice = []variety{{"ring", 3, false, false, func(k *sketch) {
	k.share(Wreck)
	k.lo = 0.3
	k.cause.Place = k.edgeRing(1)
	k.grow = k.widen
}}, {"arc", 1, false, false, func(k *sketch) {
	k.share(Wreck)
	k.lo = 0.3
	ring := k.edgeRing(1 + k.d.below(2))
	k.cause.Place = Place{Shape: Sector, Inner: ring.Inner, Angle: k.d.between(0, 360), Width: k.d.between(50, 130)}
	k.grow = k.widen
}}}

// edgeRing is the outermost dice, some rows deep.
func (k *sketch) edgeRing(rows int) Place {
	outer := 0.0
	for i := range k.dice {
		outer = max(outer, k.dice[i].r)
	}
	return Place{Shape: Ring, Inner: outer - float64(rows)*k.pitch(), Outer: 0}
}

// widen takes one more row of dice at the edge, up to three.
func (k *sketch) widen(c *Cause) bool {
	c.Place.Inner -= k.pitch()
	return c.Place.Inner > k.edgeRing(3).Inner-k.pitch()/2
}

var shotRepeat = []variety{{"cell", 1, false, false, func(k *sketch) {
	k.share(oneOf(k.d, Short, EmitterShort, Open))
	k.lo = 0.6
	if k.spec.Grid.ShotColumns*k.spec.Grid.ShotRows < 2 {
		k.repeating(1.1 * k.loss)
		return
	}
	k.cause.Place = k.shots(1)
	k.grow = func(c *Cause) bool {
		most := max(k.spec.Grid.ShotColumns*k.spec.Grid.ShotRows/4, 1)
		if len(c.Place.Shots) >= most {
			return false
		}
		c.Place = k.shots(len(c.Place.Shots) + 1)
		return true
	}
}}, {"mask", 1, false, false, func(k *sketch) { // a full-field mask: the same dice on every wafer
	k.share(oneOf(k.d, Short, EmitterShort, Open))
	k.lo = 0.6
	k.repeating(1.1 * k.loss)
	k.grow = func(c *Cause) bool {
		c.Place.Width *= 1.2
		return c.Place.Shape == Positions && c.Place.Width < 0.5
	}
}}}

// shots are n cells of the exposure, the first ones the same whatever n is.
func (k *sketch) shots(n int) Place {
	d := k.d.under(7)
	p := Place{Shape: ShotCell}
	for range n {
		p.Shots = append(p.Shots, [2]int{d.below(k.spec.Grid.ShotColumns), d.below(k.spec.Grid.ShotRows)})
	}
	p.Shot = p.Shots[0]
	return p
}

// repeating is a place that repeats: cells of the exposure that are about a share of
// the dice, or that share of the die positions.
func (k *sketch) repeating(share float64) {
	if cells := k.spec.Grid.ShotColumns * k.spec.Grid.ShotRows; cells > 1 && k.d.chance(0.5) {
		k.cause.Place = k.shots(max(1, int(math.Ceil(share*float64(cells)))))
		return
	}
	k.cause.Place = Place{Shape: Positions, Width: max(share, 0.02), Salt: uint64(k.d.below(1 << 30))}
}
