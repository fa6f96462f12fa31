package wafermap

import (
	"math"
	"slices"
)

// layers is how many depths of a pattern are told apart, from its core to the rest of the
// wafer, which is the last.
const layers = 12

// explained is a pattern that is part of the model, with the depth of every die in it.
type explained struct {
	*pattern
	depth  []uint8  // by die
	near   []uint64 // dice on it or next to it, a bit each
	dice   int      // their number
	hidden bool     // a remainder of another pattern's outline, not worth a name
	mends  int      // that pattern's place in the model
}

// layerEdges are the outer edges of layers in units of the outline's reach: 1 is the
// outline.
var layerEdges = [layers - 1]float64{0.35, 0.55, 0.7, 0.82, 0.92, 1, 1.1, 1.25, 1.45, 1.7, 2}

func layer(q float64) uint8 {
	if q > 2 {
		return layers - 1
	}
	for i, e := range layerEdges {
		if q <= e {
			return uint8(i)
		}
	}
	return layers - 1
}

// reach says how deep a die lies in a pattern: 0 in its core, 1 on its outline,
// more outside. Patterns without depth have 0 inside and infinity outside.
func (f *field) reach(p *pattern) func(i int) float64 {
	switch p.shape {
	case shapeAnnulus:
		return func(i int) float64 {
			r := math.Sqrt(sq(f.u[i]-p.cu) + sq(f.v[i]-p.cv))
			return math.Abs(r-(p.a+p.b)/2) / ((p.b - p.a) / 2)
		}
	case shapeRing:
		return func(i int) float64 {
			r := math.Sqrt(sq(f.u[i]-p.cu) + sq(f.v[i]-p.cv))
			return max(0, 1-(r-p.a)/(1-p.a))
		}
	case shapeArc:
		depth := 1 - p.a
		return func(i int) float64 {
			past := math.Abs(halfTurn(f.turn[i]-p.theta)) - p.width/2
			return max(0, 1+max((p.a-f.far[i])/depth, past*f.far[i]/depth))
		}
	case shapeSector:
		return func(i int) float64 {
			return math.Abs(halfTurn(f.turn[i]-p.theta)) / (p.width / 2)
		}
	case shapeRamp:
		s, c := math.Sincos(p.theta)
		return func(i int) float64 { return 1 - (f.u[i]*c + f.v[i]*s) } // 0 to 2
	case shapeShot, shapeComb:
		in := make([]bool, p.periodX*p.periodY)
		for _, c := range p.cells {
			in[c] = true
		}
		return f.inside(func(r int32) bool {
			return in[(int(f.in.Grid.y[r])-f.y0)%p.periodY*p.periodX+(int(f.in.Grid.x[r])-f.x0)%p.periodX]
		})
	case shapeBand:
		along := f.in.Grid.y
		if p.axis == 1 {
			along = f.in.Grid.x
		}
		return f.inside(func(r int32) bool { return int(along[r]) >= p.from && int(along[r]) < p.to })
	case shapeSite:
		return f.inside(func(r int32) bool { return slices.Contains(p.sites, f.in.Site[r]) })
	case shapeOrder:
		return f.inside(func(r int32) bool {
			return f.in.Order[r] != Missing && int(f.in.Order[r]) >= p.from && int(f.in.Order[r]) < p.to
		})
	}
	panic("wafermap: shape without a reach")
}

func (f *field) inside(in func(r int32) bool) func(i int) float64 {
	return func(i int) float64 {
		if in(f.rows[i]) {
			return 0
		}
		return math.Inf(1)
	}
}

// pathReach measures how far a cell lies from a line, in half widths.
func (f *field) pathReach(p *path, c int) float64 {
	x, y := c%f.cols, c/f.cols
	if p.turned {
		x, y = y, x
	}
	past := max(float64(p.from-x), float64(x-p.to+1), 0)
	away := math.Abs(float64(y) - p.at(float64(x)))
	half := max(p.thick/2, 0.5)
	return max(away/half, 0) + past/(half+1)
}

// halfTurn brings an angle to -pi ... pi.
func halfTurn(a float64) float64 {
	for a > math.Pi {
		a -= 2 * math.Pi
	}
	for a < -math.Pi {
		a += 2 * math.Pi
	}
	return a
}

func (f *field) explain(p *pattern) *explained {
	x := &explained{pattern: p, depth: make([]uint8, len(f.rows)), near: make([]uint64, (len(f.rows)+63)/64)}
	switch p.shape {
	case shapeCentre, shapeBlob:
		f.ellipseDepths(p, x.depth)
	case shapeLine: // by cell, which are fewer than dice
		cell := make([]uint8, len(f.raster.n))
		for c := range cell {
			cell[c] = layer(f.pathReach(&p.line, c))
		}
		for i, c := range f.cell {
			x.depth[i] = cell[c]
		}
	case shapeRamp:
		reach := f.reach(p)
		for i := range x.depth {
			x.depth[i] = uint8(min(max(reach(i)/2*layers, 0), layers-1))
		}
	default:
		reach := f.reach(p)
		for i := range x.depth {
			x.depth[i] = layer(reach(i))
		}
	}
	for i, d := range x.depth {
		if d <= nearLayers {
			x.near[i/64] |= 1 << (i % 64)
			x.dice++
		}
	}
	return x
}

// ellipseDepths fills in how deep dice lie in an ellipse.
func (f *field) ellipseDepths(p *pattern, depth []uint8) {
	s, c := math.Sincos(p.angle)
	for i := range depth {
		u, v := f.u[i]-p.cu, f.v[i]-p.cv
		q := sq((u*c+v*s)/p.a) + sq((v*c-u*s)/p.b)
		if q > 4.000001 { // well outside: no root is needed
			depth[i] = layers - 1
			continue
		}
		depth[i] = layer(math.Sqrt(q))
	}
}

// depthGain is the gain of a pattern whose rate falls with depth, not just by a step.
func (f *field) depthGain(x *explained) float64 {
	var t [layers]tally
	var n [256]int32
	var expected [256]float64
	for i, k := range x.depth {
		n[k]++
		expected[k] += f.p[i]
	}
	for _, i := range f.failing {
		t[x.depth[i]].o++
	}
	var o, e [layers]float64
	for k := range t {
		t[k].n, t[k].e = float64(n[k]), expected[k]
	}
	for k := range t {
		o[k], e[k] = t[k].o, t[k].e
	}
	factor := falling(o, e)
	sum := 0.0
	for k := range t {
		sum += e[k] * factor[k]
	}
	gain := 0.0
	for k := range t {
		if t[k].n == 0 {
			continue
		}
		alt := t[k]
		alt.e = min(t[k].e*factor[k]*f.total.o/sum, 0.999*t[k].n)
		gain += side(t[k]) - side(alt)
	}
	return gain
}
