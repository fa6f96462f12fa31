package wafermap

import "math"

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
	s, next := f.countSplit(m, x)
	s.kind = make([]int32, len(m.kind))
	depth := x.depth[:len(m.kind)]
	for i, c := range m.kind {
		s.kind[i] = next[c*layers+int32(depth[i])]
	}
	return s
}

// countSplit is such a mixture without the dice's kinds, which next has for each old kind
// and depth.
func (f *field) countSplit(m *mixture, x *explained) (s *mixture, next []int32) {
	next = make([]int32, len(m.n)*layers)
	depth := x.depth[:len(m.kind)]
	for i, c := range m.kind {
		next[c*layers+int32(depth[i])]++
	}
	s = &mixture{}
	var from []int32
	var own []uint8
	for c, n := range next {
		if n > 0 {
			next[c] = int32(len(from))
			from, own = append(from, int32(c/layers)), append(own, uint8(c%layers))
			s.n = append(s.n, float64(n))
		}
	}
	s.o = make([]float64, len(from))
	for _, i := range f.failing {
		s.o[next[m.kind[i]*layers+int32(depth[i])]]++
	}
	for _, old := range m.depth {
		moved := make([]uint8, len(from))
		for c, q := range from {
			moved[c] = old[q]
		}
		s.depth = append(s.depth, moved)
	}
	s.depth = append(s.depth, own)
	return s, next
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

// rates are those of all kinds of dice.
func (t *fit) rates(m *mixture, skip int) []float64 {
	p := make([]float64, len(m.n))
	for c := range p {
		p[c] = t.rate(m, c, skip)
	}
	return p
}

func (t *fit) judge(m *mixture) {
	var l logs
	for c := range m.n {
		p := t.rate(m, c, -1)
		l.add(m.o[c], p)
		l.add(m.n[c]-m.o[c], 1-p)
	}
	t.likelihood = l.total()
}

// logs sums logarithms of chances, one for the product of several dice.
type logs struct {
	sum, product float64
	n            int
}

func (l *logs) add(dice, chance float64) {
	switch dice {
	case 0:
		return
	case 1:
		const most = 16 // chances are far above 1e-19
		if l.n == 0 {
			l.product = 1
		}
		l.product *= chance
		if l.n++; l.n == most {
			l.sum += math.Log(l.product)
			l.n = 0
		}
	default:
		l.sum += dice * math.Log(chance)
	}
}

func (l *logs) total() float64 {
	if l.n > 0 {
		return l.sum + math.Log(l.product)
	}
	return l.sum
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

// refreshRounds is after how many rounds products are made anew, so that rounding does not
// pile up.
const refreshRounds = 8

// kept is a product over the patterns by kind of die. A factor of one pattern's depths may
// wait for the next pass over the kinds.
type kept struct {
	value  []float64
	depth  []uint8 // by which waits
	factor [16]float64
	none   []uint8 // depths of 0
}

func newKept(kinds int) kept { return kept{value: make([]float64, kinds), none: make([]uint8, kinds)} }

// start sets all to a value times the factors of all patterns.
func (p *kept) start(value float64, m *mixture, factor func(k int) [layers]float64) {
	for c := range p.value {
		p.value[c] = value
	}
	p.depth = nil
	for k := range m.depth {
		p.multiply(m.depth[k], factor(k))
	}
	p.settle()
}

// multiply changes the product by a factor of a pattern's depths.
func (p *kept) multiply(depth []uint8, factor [layers]float64) {
	p.settle()
	p.depth = depth
	copy(p.factor[:], factor[:])
}

func (p *kept) settle() {
	if p.depth == nil {
		return
	}
	for c, d := range p.depth[:len(p.value)] {
		p.value[c] *= p.factor[d&15] // an index of four bits needs no check
	}
	p.depth = nil
}

// pass is what a pass over the kinds has to multiply by: by a depth, 1 where nothing waits.
func (p *kept) pass() (depth []uint8, factor [16]float64) {
	if depth, factor = p.depth, p.factor; depth == nil {
		depth = p.none
		factor[0] = 1
	}
	p.depth = nil
	return depth[:len(p.value)], factor
}

// perLayer sums n over the dice of each depth.
func perLayer(n []float64, depth []uint8) (sum [layers]float64) {
	for c, d := range depth {
		sum[d] += n[c]
	}
	return sum
}

func (f *field) fitProduct(m *mixture) *fit {
	t := &fit{base: f.mean, level: make([][layers]float64, len(m.depth))}
	fails := make([][layers]float64, len(m.depth))
	for k := range t.level {
		for d := range t.level[k] {
			t.level[k][d] = 1
		}
		fails[k] = perLayer(m.o, m.depth[k])
	}
	rate := newKept(len(m.n))
	for round := range refitRounds {
		if round%refreshRounds == 0 {
			rate.start(t.base, m, func(k int) [layers]float64 { return t.level[k] })
		}
		moved := 0.0
		for k := range t.level {
			var e [16]float64
			depth := m.depth[k][:len(m.n)]
			by, factor := rate.pass()
			for c, v := range rate.value[:len(depth)] {
				v *= factor[by[c]&15]
				rate.value[c] = v
				e[depth[c]&15] += min(v, surestFail) * m.n[c]
			}
			level := &t.level[k]
			old, base := *level, t.base
			for d := range level {
				e[d] /= level[d]
			}
			*level = falling(fails[k], [layers]float64(e[:layers]))
			last := level[layers-1]
			t.base = min(t.base*last, surestFail)
			var change [layers]float64
			for d := range level {
				level[d] = min(level[d]/last, 1e4)
				moved = max(moved, math.Abs(level[d]-old[d])/old[d])
				change[d] = t.base / base * level[d] / old[d]
			}
			rate.multiply(depth, change)
		}
		sum := 0.0
		by, factor := rate.pass()
		for c, n := range m.n[:len(by)] {
			v := rate.value[c] * factor[by[c]&15]
			rate.value[c] = v
			sum += min(v, surestFail) * n
		}
		if scale := f.total.o / sum; sum > 0 {
			base := t.base
			t.base = min(t.base*scale, surestFail)
			moved = max(moved, math.Abs(scale-1))
			for c := range rate.value {
				rate.value[c] *= t.base / base
			}
		}
		if moved < 0.003 || len(t.level) == 0 {
			break
		}
	}
	t.judge(m)
	return t
}

// chainFit is the fitting of causes that act one after the other. The chance to pass all of
// them is a product, which is kept up as levels change: no exponential a kind of die.
type chainFit struct {
	*fit
	m      *mixture
	usual  float64           // -log(1-rate) of the wafer
	pass   kept              // chance by kind of die
	dice   [][layers]float64 // by pattern and depth; of all dice, at depth 0, at the end
	passed [][layers]float64 // of these, dice that do
}

// fitChain steps by Fisher scoring in h = -log(1-rate), to which patterns add.
func (f *field) fitChain(m *mixture) *fit {
	h := -math.Log1p(-min(f.mean, surestFail))
	t := chainFit{m: m, usual: h, pass: newKept(len(m.n))}
	t.fit = &fit{chained: true, base: -math.Expm1(-0.8 * h), level: make([][layers]float64, len(m.depth))}
	good := make([]float64, len(m.n))
	var all, allGood [layers]float64
	for c, n := range m.n {
		good[c] = n - m.o[c]
		all[0] += n
		allGood[0] += good[c]
	}
	for _, depth := range m.depth {
		t.dice, t.passed = append(t.dice, perLayer(m.n, depth)), append(t.passed, perLayer(good, depth))
	}
	t.dice, t.passed = append(t.dice, all), append(t.passed, allGood)
	var best *fit
	for round := range refitRounds / 2 {
		if round%refreshRounds == 0 {
			t.pass.start(1-t.base, m, t.passing)
		}
		moved := t.stepBase()
		for k := range t.level {
			moved = max(moved, t.step(k))
		}
		t.likely()
		if best == nil || t.likelihood > best.likelihood {
			best = &fit{true, t.base, append([][layers]float64(nil), t.level...), t.likelihood}
		}
		if moved < 0.003 {
			break
		}
	}
	return best
}

// passing are the chances to pass a pattern by depth.
func (t *chainFit) passing(k int) (q [layers]float64) {
	for d, h := range t.level[k] {
		q[d] = math.Exp(-h)
	}
	return q
}

// stepBase moves the background and says by how much.
func (t *chainFit) stepBase() float64 {
	t.pass.settle()
	score, weight := 0.0, 0.0
	for c, n := range t.m.n {
		p := 1 / min(1-t.pass.value[c], surestFail)
		score += t.m.o[c] * p
		weight += n * p
	}
	dice := t.dice[len(t.level)][0]
	h := -math.Log1p(-t.base)
	next := min(max(h+(score-dice)/max(weight-dice, 1e-9), 0.3*h, 1e-7), 4)
	t.base = -math.Expm1(-next)
	factor := math.Exp(h - next)
	for c := range t.pass.value {
		t.pass.value[c] *= factor
	}
	return math.Abs(next-h) / h
}

// step moves the levels of a pattern and says by how much.
func (t *chainFit) step(k int) float64 {
	var score, weight [16]float64
	depth := t.m.depth[k][:len(t.m.n)]
	by, waiting := t.pass.pass()
	o, n, value := t.m.o[:len(depth)], t.m.n[:len(depth)], t.pass.value[:len(depth)]
	for c, q := range value {
		q *= waiting[by[c]&15]
		value[c] = q
		p := 1 / min(1-q, surestFail)
		d := depth[c] & 15
		weight[d] += n[c] * p
		score[d] += o[c] * p
	}
	level := &t.level[k]
	var target, weights [layers]float64
	for d := range layers - 1 {
		if t.dice[k][d] == 0 {
			continue
		}
		weights[d] = max(0, weight[d]-t.dice[k][d])
		target[d] = max(0, level[d]*weights[d]+score[d]-t.dice[k][d])
	}
	next := falling(target, weights)
	next[layers-1] = 0
	moved := 0.0
	var factor [layers]float64
	factor[layers-1] = 1
	for d := range layers - 1 {
		if weights[d] == 0 && d > 0 {
			next[d] = next[d-1]
		}
		next[d] = min(next[d], 4)
		moved = max(moved, math.Abs(next[d]-level[d])/(t.usual+level[d]))
		factor[d] = math.Exp(level[d] - next[d])
	}
	*level = next
	t.pass.multiply(depth, factor)
	return moved
}

// sureToPass is the logarithm of the least chance to pass.
var sureToPass = math.Log1p(-surestFail)

// likely sets the likelihood. The logarithm of the chance to pass is a sum of levels.
func (t *chainFit) likely() {
	sum := math.Log1p(-t.base) * t.passed[len(t.level)][0]
	for k := range t.level {
		for d, h := range t.level[k] {
			sum -= h * t.passed[k][d]
		}
	}
	t.pass.settle()
	var l logs
	for c, o := range t.m.o {
		p := 1 - t.pass.value[c]
		if p > surestFail {
			p = surestFail
			if good := t.m.n[c] - o; good > 0 {
				sum += good * (sureToPass - math.Log(t.pass.value[c]))
			}
		}
		l.add(o, p)
	}
	sum += l.total()
	t.likelihood = sum
}

// refit makes the dice's fail rates those of a model and returns it.
func (f *field) refit(found []*explained) *fit {
	m := f.mix(found)
	t := f.fitMixture(m)
	p := t.rates(m, -1)
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
