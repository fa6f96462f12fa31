package synth

import "math"

// die is the bench on which one die after another is made and measured.
type die struct {
	fab    *fab
	wafer  int
	smooth [NumLatents]smooth
	causes []acting // the causes that act on this wafer

	at      *place
	key     key
	process Process
	ideal   []float64 // after damage that stays
	spoiled []float64 // after damage that may recover
	top     []float64 // where the tester's readings end
	reading []float64
	moved   []moved // limits that a fault has the tester use on this die
	hard    int32
	soft    int32
}

// acting is a cause with its size on one wafer.
type acting struct {
	cause  *Cause
	number int
	size   float64
	place  *Place
	faults []int // index of each fault's test
}

// moved are wrong limits of one test.
type moved struct {
	test         int
	lower, upper float64
}

func (f *fab) newDie(wafer int) *die {
	n := len(f.spec.Tests)
	d := &die{fab: f, wafer: wafer, ideal: make([]float64, n), spoiled: make([]float64, n), top: make([]float64, n), reading: make([]float64, n)}
	for q := range d.smooth {
		d.smooth[q] = f.smooth(wafer, q)
	}
	for i := range f.spec.Causes {
		c := &f.spec.Causes[i]
		if size := c.size(f.seed, i, wafer); size != 0 {
			d.causes = append(d.causes, acting{c, i, size, c.place(wafer), f.faults[i]})
		}
	}
	return d
}

// hit reports how strongly a cause acts on this die, 0 when not.
func (d *die) hit(a *acting) float64 {
	strength := a.place.strength(d.at) * a.size
	if strength == 0 || a.cause.Share <= 0 {
		return strength
	}
	k := d.key.at(dieCause + uint64(a.number))
	if k.uniform() >= a.cause.Share*strength {
		return 0
	}
	if a.cause.Scatter > 0 {
		return math.Exp(a.cause.Scatter * k.at(9).normal())
	}
	return 1
}

// take makes the die at a place: its process and its ideal readings.
func (d *die) take(at *place) {
	f := d.fab
	d.at = at
	d.key = dieKey(f.seed, d.wafer, at.x, at.y)
	saddle := f.spec.Smooth.Saddle != 0
	for q := range d.process {
		sm := &d.smooth[q]
		v := sm.level + sm.bowl*at.bowl + sm.tiltX*at.u + sm.tiltY*at.v
		if saddle {
			v += sm.saddle[0]*(at.u*at.u-at.v*at.v) + sm.saddle[1]*2*at.u*at.v
		}
		if sd := f.spec.Spread[q].Die; sd > 0 {
			v += sd * d.key.at(dieLatent+uint64(q)).normal()
		}
		d.process[q] = v
	}
	for i := range d.causes {
		a := &d.causes[i]
		if a.cause.Shift == (Process{}) {
			continue
		}
		if h := d.hit(a); h != 0 {
			for q := range d.process {
				d.process[q] += a.cause.Shift[q] * h
			}
		}
	}
	f.forward.values(d.ideal, &d.process)
	for i := range d.causes {
		if a := &d.causes[i]; a.cause.Leak > 0 {
			d.leak(a)
		}
		if a := &d.causes[i]; a.cause.Recover == 0 && a.cause.Damage != NoDamage && d.hit(a) != 0 {
			damage(d.ideal, f.spec.Tests, a.cause.Damage, d.key.at(dieCause+uint64(a.number)))
		}
	}
}

// leak raises the leakage of a hit die.
func (d *die) leak(a *acting) {
	h := d.hit(a)
	if h == 0 {
		return
	}
	for t := range d.ideal {
		if m := d.fab.spec.Tests[t].Measures; m == "icbo" || m == "iceo" {
			d.ideal[t] *= math.Pow(a.cause.Leak, h)
		}
	}
}

// measure reads the die: attempt 0 is the first time, 1 the retest.
func (d *die) measure(attempt uint64) {
	f := d.fab
	copy(d.spoiled, d.ideal)
	d.moved = d.moved[:0]
	for t := range d.top {
		d.top[t] = f.spec.Tests[t].Clamp
	}
	for i := range d.causes {
		a := &d.causes[i]
		if len(a.cause.Faults) > 0 && d.hit(a) != 0 {
			d.distort(a)
		}
		if a.cause.Recover == 0 || a.cause.Damage == NoDamage || d.hit(a) == 0 {
			continue
		}
		k := d.key.at(dieCause + uint64(a.number))
		if attempt == 0 || k.at(100+attempt).uniform() >= a.cause.Recover {
			damage(d.spoiled, f.spec.Tests, a.cause.Damage, k)
		}
	}
	noise := d.key.at(dieNoise + attempt)
	for t := range f.spec.Tests {
		d.reading[t] = read(&f.spec.Tests[t], d.spoiled[t], d.top[t], f.offset[d.at.site-1][t], f.scale[t], noise.at(f.names[t]))
	}
	d.bin()
	if f.spec.Missing > 0 {
		lost := d.key.at(dieMissing + attempt)
		for t := range d.reading {
			if lost.at(f.names[t]).uniform() < f.spec.Missing {
				d.reading[t] = math.NaN()
			}
		}
	}
}

// distort has the tester read wrongly what a cause's faults say.
func (d *die) distort(a *acting) {
	for i := range a.cause.Faults {
		f, t := &a.cause.Faults[i], a.faults[i]
		d.spoiled[t] = f.apply(d.spoiled[t])
		if f.Top != 0 && !(d.top[t] < f.Top) {
			d.top[t] = f.Top
		}
		if f.WrongLower != 0 || f.WrongUpper != 0 {
			d.moved = append(d.moved, moved{t, f.WrongLower, f.WrongUpper})
		}
	}
}

// limits are those that the tester judges the die by.
func (d *die) limits(t int) (lower, upper float64) {
	test := &d.fab.spec.Tests[t]
	lower, upper = test.Lower, test.Upper
	for _, m := range d.moved {
		if m.test == t {
			lower, upper = wrong(lower, m.lower), wrong(upper, m.upper)
		}
	}
	return lower, upper
}

// wrong is a limit that a fault replaces, unless by 0.
func wrong(limit, by float64) float64 {
	if by != 0 {
		return by
	}
	return limit
}

// read is what the tester returns for an ideal value: the float64 nearest to the
// decimal that is printed, so that a reader of the text holds the same value
// against the limits.
func read(t *Test, v, top, offset, scale float64, k key) float64 {
	if !math.IsInf(v, 0) {
		v *= 1 + offset
		v += math.Hypot(t.Noise, t.Gauge*v) * k.normal()
	} else if math.IsNaN(top) {
		v = 10 * t.Typical // no end is known: read something far beyond
	}
	if v > top {
		v = top
	}
	if v < t.Floor {
		v = t.Floor
	}
	if t.Resolution > 0 {
		v = math.Round(v/t.Resolution) * t.Resolution
		if scale > 0 {
			v = math.Round(v*scale) / scale
		}
	}
	return v
}

// bin sorts the die by its first failing test, else by its grade.
func (d *die) bin() {
	s := d.fab.spec
	for t := range s.Tests {
		test, v := &s.Tests[t], d.reading[t]
		lower, upper := d.limits(t)
		low, high := v < lower, v > upper
		if !low && !high {
			continue
		}
		d.hard, d.soft = int32(test.HardBin), int32(test.SoftBin)
		if high {
			d.soft++
		}
		if s.StopOnFail {
			for u := t + 1; u < len(d.reading); u++ {
				d.reading[u] = math.NaN()
			}
		}
		return
	}
	d.hard, d.soft = 1, 1
	if d.fab.grade >= 0 {
		v := d.reading[d.fab.grade]
		for _, g := range s.Grades {
			if v >= g.Lower && v < g.Upper {
				d.hard, d.soft = int32(g.Bin), int32(g.Bin)
			}
		}
	}
}
