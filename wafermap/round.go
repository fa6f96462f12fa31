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

// blobCost grows with how long a blob is, and with how far it hangs over the edge.
func blobCost(cu, cv, a, b, angle float64) float64 {
	d := math.Hypot(cu, cv)
	s, c := 0.0, 1.0
	if d > 0 {
		s, c = cv/d, cu/d
	}
	sin, cos := math.Sincos(angle)
	reach := math.Hypot(a*(c*cos+s*sin), b*(s*cos-c*sin)) // half extent along the wafer's radius
	return math.Abs(math.Log(a/b)) + max(0, d+reach-1.1)*30
}

// findBlob looks for the ellipse away from the wafer's centre with the highest gain: discs
// of all sizes everywhere first, then the best few are fitted as ellipses.
func (f *field) findBlob() *pattern {
	list := shortlist{most: 8}
	near := func(a, b [6]float64) bool { return math.Hypot(a[0]-b[0], a[1]-b[1]) < 0.7*max(a[2], b[2]) }
	small := math.Max(f.du, math.Abs(f.dv))
	for r := 1.2 * small; r < 0.5; r *= 1.27 {
		f.scanDiscs(r, &list, near)
	}
	var best *pattern
	for _, s := range list.items {
		x := []float64{s.x[0], s.x[1], math.Log(s.x[2]), math.Log(s.x[2]), 0}
		step := []float64{0.3 * s.x[2], 0.3 * s.x[2], 0.25, 0.25, 0.5}
		var p pattern
		value := func(x []float64) float64 {
			a, b := math.Exp(x[2]), math.Exp(x[3])
			if a > 3*b || b > 3*a || math.Hypot(x[0], x[1]) > 0.9 || f.round && math.Hypot(x[0], x[1]) < centreReach || math.Min(a, b) < 0.8*small {
				return -1
			}
			t := f.ellipse(x[0], x[1], a, b, x[4])
			if t.n > 0.5*f.total.n {
				return -1
			}
			return f.gain(t) - sizeCost(t, f.total) - blobCost(x[0], x[1], a, b, x[4])
		}
		if f.round && math.Hypot(x[0], x[1]) < centreReach {
			d := math.Hypot(x[0], x[1]) + 1e-9
			x[0], x[1] = x[0]*centreReach/d*1.01, x[1]*centreReach/d*1.01
			if d < 1e-6 {
				x[0] = centreReach * 1.01
			}
		}
		v := climb(x, step, 4, value)
		if v <= 0 || best != nil && v <= best.gain-best.cost {
			continue
		}
		p = pattern{shape: shapeBlob, cu: x[0], cv: x[1], a: math.Exp(x[2]), b: math.Exp(x[3]), angle: x[4]}
		p.tally = f.ellipse(p.cu, p.cv, p.a, p.b, p.angle)
		p.gain, p.cost = f.gain(p.tally), sizeCost(p.tally, f.total)+blobCost(p.cu, p.cv, p.a, p.b, p.angle)
		best = &p
	}
	return best
}

// scanDiscs offers all discs of one radius with centres two fifths of it apart.
func (f *field) scanDiscs(r float64, list *shortlist, near func(a, b [6]float64) bool) {
	dv := math.Abs(f.dv)
	type span struct{ j, from, to int }
	var spans []span
	for j := -int(r / dv); j <= int(r/dv); j++ {
		half := int(math.Sqrt(max(0, r*r-sq(float64(j)*dv))) / f.du)
		spans = append(spans, span{j, -half, half + 1})
	}
	widest := 0.0
	for _, s := range spans {
		widest += float64(s.to - s.from)
	}
	// no window holds more dice than this, so none costs less
	least := max(0, math.Log(f.total.n/(widest*float64(f.fullest))))
	stepX, stepY := max(1, int(0.4*r/f.du)), max(1, int(0.4*r/dv))
	for y := stepY / 2; y < f.lines; y += stepY {
		cv := f.v0 + float64(y)*f.dv
		for x := stepX / 2; x < f.cols; x += stepX {
			cu := f.u0 + float64(x)*f.du
			if cu*cu+cv*cv > 1 {
				continue
			}
			var count uint64
			e := 0.0
			for _, s := range spans {
				j := y + s.j
				if uint(j) >= uint(f.lines) {
					continue
				}
				dc, de := f.along.span(j, max(0, x+s.from), min(f.cols, x+s.to))
				count += dc
				e += de
			}
			if count>>32 < 2 {
				continue
			}
			t := unpack(count, e)
			floor := max(0, list.floor())
			if f.hopeless(t, floor+least) {
				continue
			}
			cost := sizeCost(t, f.total)
			if v := f.gain(t) - cost; v > floor {
				list.offer(v, [6]float64{cu, cv, r}, near)
			}
		}
	}
}

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
	for k := range 9 {
		cu, cv := 0.0, 0.0
		if k > 0 {
			s, c := math.Sincos(float64(k) * math.Pi / 4)
			cu, cv = 0.11*c, 0.11*s
		}
		at := f.ringsRound(cu, cv)
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

// ringsRound tallies discs about a point, by radius in steps of 1/polarRings.
func (f *field) ringsRound(cu, cv float64) []tally {
	if cu == 0 && cv == 0 {
		return f.rings
	}
	at := make([]tally, polarRings+1)
	for j := range f.lines {
		v := f.v0 + float64(j)*f.dv - cv
		for i := range f.cols {
			c := j*f.cols + i
			if f.n[c] == 0 {
				continue
			}
			u := f.u0 + float64(i)*f.du - cu
			r := min(int(math.Sqrt(u*u+v*v)*polarRings), polarRings-1)
			at[r+1] = at[r+1].plus(tally{float64(f.o[c]), float64(f.n[c]), f.e[c]})
		}
	}
	for r := range polarRings {
		at[r+1] = at[r+1].plus(at[r])
	}
	return at
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

// findArc looks for a part of the edge ring, and findSector for a slice of the cake.
func (f *field) findArc() *pattern    { return f.findWedge(shapeArc, 32, 62, 5, 89) }
func (f *field) findSector() *pattern { return f.findWedge(shapeSector, 0, 0, 6, 50) }

func (f *field) findWedge(s shape, r0, r1, narrow, wide int) *pattern {
	top := 0.0
	var at [3]int
	value := func(r, start, width int) float64 {
		t := f.rectangle(r, polarRings, start, width)
		cost := math.Log(polarAngles / float64(width))
		if t.n < 1 || f.hopeless(t, top+cost) {
			return 0
		}
		return f.gain(t) - cost
	}
	for r := r0; r <= r1; r += 2 {
		for w := float64(narrow); w <= float64(wide); w *= 1.25 {
			width := int(w)
			for start := 0; start < polarAngles; start += max(1, width/6) {
				if v := value(r, start, width); v > top {
					top, at = v, [3]int{r, start, width}
				}
			}
		}
	}
	if top <= 0 {
		return nil
	}
	for moved := true; moved; {
		moved = false
		for _, d := range [][3]int{{1, 0, 0}, {-1, 0, 0}, {0, 1, 0}, {0, -1, 0}, {0, 0, 1}, {0, 0, -1}, {0, 1, -1}, {0, -1, 1}} {
			r, start, width := at[0]+d[0], (at[1]+d[1]+polarAngles)%polarAngles, at[2]+d[2]
			if r < r0 || r > r1 || width < narrow || width > wide {
				continue
			}
			if v := value(r, start, width); v > top {
				top, at, moved = v, [3]int{r, start, width}, true
			}
		}
	}
	const angle = 2 * math.Pi / polarAngles
	p := &pattern{shape: s, a: float64(at[0]) / polarRings, theta: (float64(at[1]) + float64(at[2])/2) * angle, width: float64(at[2]) * angle}
	p.tally = f.rectangle(at[0], polarRings, at[1], at[2])
	p.gain, p.cost = f.gain(p.tally), math.Log(polarAngles/float64(at[2]))
	return p
}

// findRamp looks for a fail rate that rises linearly across the wafer.
func (f *field) findRamp() *pattern {
	var s0, su, sv, v0, vu, vv, uu, uv, ww float64
	for j := range f.lines {
		v := f.v0 + float64(j)*f.dv
		for i := range f.cols {
			c := j*f.cols + i
			n := float64(f.n[c])
			if n == 0 {
				continue
			}
			u := f.u0 + float64(i)*f.du
			d, w := float64(f.o[c])-f.e[c], f.e[c]*(1-f.e[c]/n)
			s0 += d
			su += d * u
			sv += d * v
			v0 += w
			vu += w * u
			vv += w * v
			uu += w * u * u
			uv += w * u * v
			ww += w * v * v
		}
	}
	if !(v0 > 0) {
		return nil
	}
	mu, mv := vu/v0, vv/v0
	su -= s0 * mu
	sv -= s0 * mv
	uu -= v0 * mu * mu
	uv -= v0 * mu * mv
	ww -= v0 * mv * mv
	det := uu*ww - uv*uv
	if !(det > 1e-9*uu*ww) {
		return nil
	}
	p := &pattern{shape: shapeRamp, a: (ww*su - uv*sv) / det, b: (uu*sv - uv*su) / det}
	p.theta = math.Atan2(p.b, p.a)
	p.gain = (su*p.a + sv*p.b) / 2
	s, c := math.Sincos(p.theta)
	p.gain = max(p.gain, f.rampGain(c, s))
	p.tally = f.total
	return p
}

// rampGain is the gain of a fail rate that grows along a direction by the best of a
// few laws.
func (f *field) rampGain(c, s float64) float64 {
	const bins = 24
	var t [bins]tally
	for j := range f.lines {
		v := f.v0 + float64(j)*f.dv
		for i := range f.cols {
			k := j*f.cols + i
			if f.n[k] == 0 {
				continue
			}
			u := f.u0 + float64(i)*f.du
			b := min(max(int((u*c+v*s+1)/2*bins), 0), bins-1)
			t[b] = t[b].plus(tally{float64(f.o[k]), float64(f.n[k]), f.e[k]})
		}
	}
	best := 0.0
	for _, law := range []func(x, g float64) float64{
		func(x, g float64) float64 { return 1 + g*x },
		func(x, g float64) float64 { return math.Exp(g * x) },
	} {
		for _, g := range []float64{0.25, 0.5, 1, 1.5, 2, 3, 4.5, 7, 10, 15} {
			e, l := 0.0, 0.0
			for b := range t {
				e += t[b].e * law((float64(b)+0.5)/bins, g)
			}
			for b := range t {
				if t[b].n == 0 {
					continue
				}
				q := t[b]
				q.e = min(q.e*law((float64(b)+0.5)/bins, g)*f.total.o/e, 0.99*q.n)
				l += side(q)
				q.e = t[b].e
				l -= side(q)
			}
			best = max(best, -l)
		}
	}
	return best
}
