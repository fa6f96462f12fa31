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
	depth  []uint8 // by die
	hidden bool    // a remainder of another pattern's outline, not worth a name
	mends  int     // that pattern's place in the model
}

// layerEdges are the outer edges of layers in units of the outline's reach: 1 is the
// outline.
var layerEdges = [layers - 1]float64{0.35, 0.55, 0.7, 0.82, 0.92, 1, 1.1, 1.25, 1.45, 1.7, 2}

func layer(q float64) uint8 {
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
	case shapeCentre, shapeBlob:
		s, c := math.Sincos(p.angle)
		return func(i int) float64 {
			u, v := f.u[i]-p.cu, f.v[i]-p.cv
			return math.Sqrt(sq((u*c+v*s)/p.a) + sq((v*c-u*s)/p.b))
		}
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
	case shapeLine:
		return f.pathReach(&p.line)
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

// pathReach measures how far a die lies from a line, in half widths.
func (f *field) pathReach(p *path) func(i int) float64 {
	return func(i int) float64 {
		c := int(f.cell[i])
		x, y := c%f.cols, c/f.cols
		if p.turned {
			x, y = y, x
		}
		past := max(float64(p.from-x), float64(x-p.to+1), 0)
		away := math.Abs(float64(y) - p.at(float64(x)))
		half := max(p.thick/2, 0.5)
		return max(away/half, 0) + past/(half+1)
	}
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
	x := &explained{pattern: p, depth: make([]uint8, len(f.rows))}
	reach := f.reach(p)
	if p.shape == shapeRamp {
		for i := range x.depth {
			x.depth[i] = uint8(min(max(reach(i)/2*layers, 0), layers-1))
		}
	} else {
		for i := range x.depth {
			x.depth[i] = layer(reach(i))
		}
	}
	return x
}

const (
	refitRounds = 40
	surestFail  = 0.98 // no die is expected to fail more surely
)

// mixture is the dice of a wafer counted by their depths in all patterns of a model:
// dice of equal depths are alike to it.
type mixture struct {
	kind  []int32   // by die
	depth [][]uint8 // by pattern, by kind of die
	o, n  []float64 // by kind of die
}

// link is a pattern of a model and the mixture up to it.
type link struct {
	*explained
	*mixture
}

// mix counts the dice for a model. It goes on from what this model and the last one begin
// with alike.
func (f *field) mix(found []*explained) *mixture {
	same := 0
	for same < len(found) && same < len(f.chain) && f.chain[same].explained == found[same] {
		same++
	}
	f.chain = f.chain[:same]
	m := &mixture{kind: make([]int32, len(f.rows)), o: []float64{f.total.o}, n: []float64{f.total.n}}
	if same > 0 {
		m = f.chain[same-1].mixture
	}
	for _, x := range found[same:] {
		m = f.split(m, x)
		f.chain = append(f.chain, link{x, m})
	}
	return m
}

// split tells the dice of a mixture apart by their depth in one more pattern too.
func (f *field) split(m *mixture, x *explained) *mixture {
	next := make([]int32, len(m.n)*layers)
	for i, d := range x.depth {
		next[int(m.kind[i])*layers+int(d)] = 1
	}
	var from []int32
	var depth []uint8
	for c, used := range next {
		if used == 1 {
			next[c] = int32(len(from))
			from, depth = append(from, int32(c/layers)), append(depth, uint8(c%layers))
		}
	}
	s := &mixture{kind: make([]int32, len(m.kind)), o: make([]float64, len(from)), n: make([]float64, len(from))}
	for i, d := range x.depth {
		c := next[int(m.kind[i])*layers+int(d)]
		s.kind[i] = c
		s.n[c]++
		if f.fail[i] {
			s.o[c]++
		}
	}
	for _, old := range m.depth {
		moved := make([]uint8, len(from))
		for c, q := range from {
			moved[c] = old[q]
		}
		s.depth = append(s.depth, moved)
	}
	s.depth = append(s.depth, depth)
	return s
}

// fit is a model fitted to a mixture: a background and what each pattern adds by depth.
type fit struct {
	chained    bool    // causes act one after the other; else they multiply rates
	base       float64 // background rate
	level      [][layers]float64
	likelihood float64 // logarithm, up to a constant of the data
}

// rate is the fail rate of dice of a kind, without pattern skip (-1: with all).
func (t *fit) rate(m *mixture, c, skip int) float64 {
	if t.chained {
		h := -math.Log1p(-t.base)
		for k := range t.level {
			if k != skip {
				h += t.level[k][m.depth[k][c]]
			}
		}
		return min(-math.Expm1(-h), surestFail)
	}
	p := t.base
	for k := range t.level {
		if k != skip {
			p *= t.level[k][m.depth[k][c]]
		}
	}
	return min(p, surestFail)
}

func (t *fit) judge(m *mixture) {
	t.likelihood = 0
	for c := range m.n {
		p := t.rate(m, c, -1)
		if m.o[c] > 0 {
			t.likelihood += m.o[c] * math.Log(p)
		}
		if m.n[c] > m.o[c] {
			t.likelihood += (m.n[c] - m.o[c]) * math.Log1p(-p)
		}
	}
}

// fitMixture finds the fail rate of every kind of die as a background raised by
// each pattern by its depth, falling from the core outwards: maximum likelihood under that
// order, one pattern after the other until nothing moves (isotonic regression by pooling
// adjacent violators: Ayer and others 1955, Ann. Math. Stat. 26, 641). Where patterns
// overlap, either their factors multiply or the causes act one after the other, each
// on the dice still good (their rates add up as -log(1-rate)): whichever fits better.
func (f *field) fitMixture(m *mixture) *fit {
	t := f.fitProduct(m)
	if len(m.depth) > 1 {
		if chain := f.fitChain(m); chain.likelihood > t.likelihood {
			return chain
		}
	}
	return t
}

func (f *field) fitProduct(m *mixture) *fit {
	t := &fit{base: f.mean, level: make([][layers]float64, len(m.depth))}
	for k := range t.level {
		for d := range t.level[k] {
			t.level[k][d] = 1
		}
	}
	for range refitRounds {
		moved := 0.0
		for k := range t.level {
			var o, e [layers]float64
			level := &t.level[k]
			for c, d := range m.depth[k] {
				e[d] += t.rate(m, c, -1) * m.n[c]
				o[d] += m.o[c]
			}
			old := *level
			for d := range level {
				e[d] /= level[d]
			}
			*level = falling(o, e)
			last := level[layers-1]
			for d := range level {
				level[d] = min(level[d]/last, 1e4)
				moved = max(moved, math.Abs(level[d]-old[d])/old[d])
			}
			t.base = min(t.base*last, surestFail)
		}
		sum := 0.0
		for c := range m.n {
			sum += t.rate(m, c, -1) * m.n[c]
		}
		if scale := f.total.o / sum; sum > 0 {
			t.base = min(t.base*scale, surestFail)
			moved = max(moved, math.Abs(scale-1))
		}
		if moved < 0.003 || len(t.level) == 0 {
			break
		}
	}
	t.judge(m)
	return t
}

// fitChain steps by Fisher scoring in h = -log(1-rate), to which patterns add.
func (f *field) fitChain(m *mixture) *fit {
	h := -math.Log1p(-min(f.mean, surestFail))
	t := &fit{chained: true, base: -math.Expm1(-0.8 * h), level: make([][layers]float64, len(m.depth))}
	var best *fit
	for range refitRounds / 2 {
		moved := 0.0
		for k := -1; k < len(t.level); k++ {
			var score, weight [layers]float64
			for c := range m.n {
				d := uint8(0)
				if k >= 0 {
					d = m.depth[k][c]
				}
				p := t.rate(m, c, -1)
				score[d] += (m.o[c] - m.n[c]*p) / p
				weight[d] += m.n[c] * (1 - p) / p
			}
			if k < 0 {
				h := -math.Log1p(-t.base)
				next := min(max(h+score[0]/max(weight[0], 1e-9), 0.3*h, 1e-7), 4)
				moved = max(moved, math.Abs(next-h)/h)
				t.base = -math.Expm1(-next)
				continue
			}
			level := &t.level[k]
			var target [layers]float64
			for d := range layers - 1 {
				target[d] = max(0, level[d]*weight[d]+score[d])
			}
			target[layers-1], weight[layers-1] = 0, 0
			next := falling(target, weight)
			next[layers-1] = 0
			for d := range layers - 1 {
				if weight[d] == 0 && d > 0 {
					next[d] = next[d-1]
				}
				next[d] = min(next[d], 4)
				moved = max(moved, math.Abs(next[d]-level[d])/(h+level[d]))
			}
			*level = next
		}
		t.judge(m)
		if best == nil || t.likelihood > best.likelihood {
			best = &fit{true, t.base, append([][layers]float64(nil), t.level...), t.likelihood}
		}
		if moved < 0.003 {
			break
		}
	}
	return best
}

// refit makes the dice's fail rates those of a model and returns it.
func (f *field) refit(found []*explained) *fit {
	m := f.mix(found)
	t := f.fitMixture(m)
	p := make([]float64, len(m.n))
	for c := range p {
		p[c] = t.rate(m, c, -1)
	}
	for i, c := range m.kind {
		f.p[i] = p[c]
	}
	f.expect()
	return t
}

// falling is the isotonic regression of o/e with weights e, not rising from layer to
// layer. Layers without expectation take the value of the layer outside of them.
func falling(o, e [layers]float64) (out [layers]float64) {
	type block struct{ o, e float64 }
	var blocks [layers]block
	var size [layers]int
	n := 0
	for k := range o {
		blocks[n], size[n] = block{o[k], e[k]}, 1
		n++
		for n > 1 && (blocks[n-2].e == 0 || blocks[n-1].e > 0 && blocks[n-2].o*blocks[n-1].e <= blocks[n-1].o*blocks[n-2].e) {
			blocks[n-2].o += blocks[n-1].o
			blocks[n-2].e += blocks[n-1].e
			size[n-2] += size[n-1]
			n--
		}
	}
	k := 0
	for b := range n {
		v := 1.0
		if blocks[b].e > 0 {
			v = max(blocks[b].o, 0.1) / blocks[b].e
		}
		for range size[b] {
			out[k] = v
			k++
		}
	}
	return out
}

// depthGain is the gain of a pattern whose rate falls with depth, not just by a step.
func (f *field) depthGain(x *explained) float64 {
	var t [layers]tally
	for i, k := range x.depth {
		t[k].n++
		t[k].e += f.p[i]
		if f.fail[i] {
			t[k].o++
		}
	}
	var o, e [layers]float64
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
