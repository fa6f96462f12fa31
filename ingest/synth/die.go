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
	reading []float64
	hard    int32
	soft    int32
}

// acting is a cause with its size on one wafer.
type acting struct {
	cause  *Cause
	number int
	size   float64
}

func (f *fab) newDie(wafer int) *die {
	n := len(f.spec.Tests)
	d := &die{fab: f, wafer: wafer, ideal: make([]float64, n), spoiled: make([]float64, n), reading: make([]float64, n)}
	for q := range d.smooth {
		d.smooth[q] = f.smooth(wafer, q)
	}
	for i := range f.spec.Causes {
		c := &f.spec.Causes[i]
		if size := c.size(f.seed, i, wafer); size != 0 {
			d.causes = append(d.causes, acting{c, i, size})
		}
	}
	return d
}

// hit reports how strongly a cause acts on this die, 0 when not.
func (d *die) hit(a *acting) float64 {
	strength := a.cause.Place.strength(d.at) * a.size
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
	for q := range d.process {
		sm := &d.smooth[q]
		v := sm.level + sm.bowl*(at.r*at.r-bowlMiddle) + sm.tiltX*at.u + sm.tiltY*at.v
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
	f.model.values(d.ideal, &d.process)
	for i := range d.causes {
		if a := &d.causes[i]; a.cause.Recover == 0 && a.cause.Damage != NoDamage && d.hit(a) != 0 {
			damage(d.ideal, f.spec.Tests, a.cause.Damage, d.key.at(dieCause+uint64(a.number)))
		}
	}
}

// measure reads the die: attempt 0 is the first time, 1 the retest.
func (d *die) measure(attempt uint64) {
	f := d.fab
	copy(d.spoiled, d.ideal)
	for i := range d.causes {
		a := &d.causes[i]
		if f := a.cause.Fault; f != nil && d.hit(a) != 0 {
			for t := range d.spoiled {
				if d.fab.spec.Tests[t].Name == f.Test {
					d.spoiled[t] = f.apply(d.spoiled[t])
				}
			}
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
		d.reading[t] = read(&f.spec.Tests[t], d.spoiled[t], f.offset[d.at.site-1][t], f.scale[t], noise.at(f.names[t]))
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

// read is what the tester returns for an ideal value: the float64 nearest to the
// decimal that is printed, so that a reader of the text holds the same value
// against the limits.
func read(t *Test, v, offset, scale float64, k key) float64 {
	if !math.IsInf(v, 0) {
		v *= 1 + offset
		v += math.Hypot(t.Noise, t.Gauge*v) * k.normal()
	} else if math.IsNaN(t.Clamp) {
		v = 10 * t.Typical // no end is known: read something far beyond
	}
	if v > t.Clamp {
		v = t.Clamp
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
		low, high := v < test.Lower, v > test.Upper
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
