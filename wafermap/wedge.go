package wafermap

import "math"

// findArc looks for a part of the edge ring, and findSector for a slice of the cake.
func (f *field) findArc() *pattern { return f.findWedge(shapeArc, 32, 62, 5, 89) }

func (f *field) findSector() *pattern { return f.findWedge(shapeSector, 0, 0, 6, 50) }

func (f *field) findWedge(s shape, r0, r1, narrow, wide int) *pattern {
	top := 0.0
	var at [3]int
	var costs [polarAngles]float64 // by width
	for width := narrow; width <= wide; width++ {
		costs[width] = math.Log(polarAngles / float64(width))
	}
	value := func(r, start, width int) float64 {
		t := f.rectangle(r, polarRings, start, width)
		cost := costs[width]
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
