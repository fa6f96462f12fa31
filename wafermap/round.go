package wafermap

import "math"

const (
	centreReach  = 0.18 // a disc whose centre is nearer to the wafer's is a centre, else a blob
	annulusReach = 0.22 // farthest that the centre of an annulus may lie from the wafer's
	ringReach    = 0.06 // and that of the inside of an edge ring
	widestCentre = 0.62 // largest radius of a centre
	deepestRing  = 0.58 // smallest inner radius of an edge ring
)

func sizeCost(t, total tally) float64 { return math.Log(total.n / max(t.n, 1)) }

// offCentreCost grows from 0 with the number of centres within a distance.
func offCentreCost(cu, cv float64) float64 { return math.Log1p((cu*cu + cv*cv) / (0.06 * 0.06)) }

// findCentre looks for the ellipse about the wafer's centre.
func (f *field) findCentre() *pattern {
	best, r0 := -1.0, 0
	for r := 4; float64(r) < widestCentre*polarRings; r++ {
		if v := f.gain(f.ring(0, r)); v > best {
			best, r0 = v, r
		}
	}
	if best <= 0 {
		return nil
	}
	r := float64(r0) / polarRings
	x := []float64{0, 0, math.Log(r), math.Log(r), 0}
	step := []float64{0.06, 0.06, 0.2, 0.2, 0.5}
	climb(x, step, 4, func(x []float64) float64 {
		a, b := math.Exp(x[2]), math.Exp(x[3])
		if a > 2*b || b > 2*a || math.Hypot(x[0], x[1]) > centreReach || max(a, b) > widestCentre || min(a, b) < 0.05 {
			return -1
		}
		return f.gain(f.ellipse(x[0], x[1], a, b, x[4])) - offCentreCost(x[0], x[1])
	})
	p := &pattern{shape: shapeCentre, cu: x[0], cv: x[1], a: math.Exp(x[2]), b: math.Exp(x[3]), angle: x[4]}
	p.tally = f.ellipse(p.cu, p.cv, p.a, p.b, p.angle)
	p.gain, p.cost = f.gain(p.tally), offCentreCost(p.cu, p.cv)
	return p
}

// findAnnulus looks for the ring inside the wafer, its centre at or near the wafer's.
func (f *field) findAnnulus() *pattern {
	var best *pattern
	for k := range offCentres {
		cu, cv := offCentre(k)
		at := f.ringsRound(k)
		top, r0, r1 := 0.0, 0, 0
		for a := 6; a < 54; a++ {
			for b := a + 2; b <= 60; b++ {
				t := at[b].minus(at[a])
				if f.hopeless(t, top) {
					continue
				}
				if v := f.gain(t); v > top {
					top, r0, r1 = v, a, b
				}
			}
		}
		if top <= 0 || best != nil && top-offCentreCost(cu, cv)+4 < best.gain-best.cost {
			continue
		}
		x := []float64{cu, cv, float64(r0) / polarRings, float64(r1) / polarRings}
		step := []float64{0.05, 0.05, 0.05, 0.05}
		ring := func(x []float64) tally {
			return f.ellipse(x[0], x[1], x[3], x[3], 0).minus(f.ellipse(x[0], x[1], x[2], x[2], 0))
		}
		climb(x, step, 4, func(x []float64) float64 {
			if x[2] < 0.1 || x[3] < x[2]+0.03 || x[3] > 0.95 || x[2] < 0.25*x[3] || math.Hypot(x[0], x[1]) > annulusReach {
				return -1
			}
			return f.gain(ring(x)) - offCentreCost(x[0], x[1])
		})
		p := &pattern{shape: shapeAnnulus, cu: x[0], cv: x[1], a: x[2], b: x[3], tally: ring(x)}
		p.gain, p.cost = f.gain(p.tally), offCentreCost(p.cu, p.cv)
		if best == nil || p.gain-p.cost > best.gain-best.cost {
			best = p
		}
	}
	return best
}

// offCentres are the centres that annuli are looked for about.
const offCentres = 9

func offCentre(k int) (cu, cv float64) {
	if k == 0 {
		return 0, 0
	}
	s, c := math.Sincos(float64(k) * math.Pi / 4)
	return 0.11 * c, 0.11 * s
}

// ringsRound tallies discs about a centre, by radius in steps of 1/polarRings.
func (f *field) ringsRound(k int) []tally {
	if k == 0 {
		return f.rings
	}
	f.cells.once.Do(f.cells.measure)
	at, apart := f.aside[k], f.apart[k]
	if at == nil {
		at = make([]tally, polarRings+1)
		for c, r := range apart {
			at[r].o += float64(f.o[c])
			at[r].n += float64(f.n[c])
		}
		for r := range polarRings {
			at[r+1].o += at[r].o
			at[r+1].n += at[r].n
		}
		f.aside[k] = at
	}
	var e [256]float64
	for c, r := range apart {
		e[r] += f.e[c]
	}
	at[0].e = 0
	for r := range polarRings {
		at[r+1].e = e[r+1] + at[r].e
	}
	return at
}

// measure finds how far each cell lies from the centres: 1 for the innermost ring.
func (c *cells) measure() {
	for k := 1; k < offCentres; k++ {
		cu, cv := offCentre(k)
		c.apart[k] = make([]uint8, len(c.n))
		for i := range c.apart[k] {
			u, v := c.u0+float64(i%c.cols)*c.du-cu, c.v0+float64(i/c.cols)*c.dv-cv
			c.apart[k][i] = uint8(min(int(math.Sqrt(u*u+v*v)*polarRings), polarRings-1)) + 1
		}
	}
}

// findRing looks for the ring from a radius out to the edge.
func (f *field) findRing() *pattern {
	best, r0 := 0.0, 0
	for r := 37; r < polarRings; r++ {
		if v := f.gain(f.ring(r, polarRings)); v > best {
			best, r0 = v, r
		}
	}
	if best <= 0 {
		return nil
	}
	x := []float64{0, 0, float64(r0) / polarRings}
	step := []float64{0.04, 0.04, 0.02}
	ring := func(x []float64) tally { return f.total.minus(f.ellipse(x[0], x[1], x[2], x[2], 0)) }
	v := climb(x, step, 4, func(x []float64) float64 {
		off := math.Hypot(x[0], x[1])
		if off > ringReach || x[2]+off > 1 || x[2] < deepestRing {
			return -1
		}
		return f.gain(ring(x)) - offCentreCost(x[0], x[1])
	})
	p := &pattern{shape: shapeRing, cu: x[0], cv: x[1], a: x[2], b: farOut, tally: ring(x)}
	if v < best { // the raster is coarser than the rings
		p.cu, p.cv, p.a, p.tally = 0, 0, float64(r0)/polarRings, f.ring(r0, polarRings)
	}
	p.gain, p.cost = f.gain(p.tally), offCentreCost(p.cu, p.cv)
	return p
}
