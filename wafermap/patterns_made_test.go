package wafermap

import (
	"math"
	"math/rand/v2"
)

// Made maps with known patterns. This generator shares nothing with the search: shapes have
// wobbling, soft outlines and gaps, sizes and places are drawn evenly.

// madeWafer is a wafer to be tested, before anything fails.
type madeWafer struct {
	x, y        []int32
	u, v        []float64 // in radii from the true centre, v up
	w, h        float64   // of a die, in radii
	geo         Geometry
	site, order []int32 // nil: not recorded
	columns     int     // of the box
	lines       int
	about       string
}

func between(random *rand.Rand, lo, hi float64) float64 { return lo + (hi-lo)*random.Float64() }

func makeWafer(random *rand.Rand) madeWafer {
	n := between(random, 300, 20000)
	if random.IntN(2) == 0 {
		n = 300 * math.Exp(random.Float64()*math.Log(20000.0/300))
	}
	d := []float64{76.2, 100, 150, 200}[random.IntN(4)]
	exclusion := between(random, 1, 5)
	r := d/2 - exclusion
	aspect := math.Exp(between(random, -0.7, 0.7) * random.Float64())
	w := math.Sqrt(math.Pi * r * r / n * aspect)
	h := w / aspect
	cx, cy := between(random, -50, 50), between(random, -50, 50)
	m := madeWafer{w: w / r, h: h / r, about: "full"}
	down := random.IntN(2) == 0
	byCorner := random.IntN(2) == 0

	every, everyY, keep, cut := 1, 1, 1.0, 2.0
	switch random.IntN(10) {
	case 0:
		if n > 1500 {
			every, everyY, m.about = 2, 2, "every second row and column"
		}
	case 1:
		if n > 1200 {
			every, m.about = 2+random.IntN(2), "every few columns"
		}
	case 2:
		if n > 700 {
			keep, m.about = between(random, 0.4, 0.9), "a random part"
		}
	case 3:
		if n > 700 {
			cut, m.about = between(random, 0, 0.8), "cut off"
		}
	}
	cutAngle := 2 * math.Pi * random.Float64()
	siteX, siteY := 1, 1
	switch random.IntN(6) {
	case 0:
		siteX = 2 + random.IntN(3)
	case 1:
		siteY = 2 + random.IntN(3)
	case 2:
		siteX, siteY = 2, 2
	case 3:
		siteX, siteY = 4, 2
	case 4:
		siteX = 8
	}
	skew := random.IntN(2) * random.IntN(2) // sites along a diagonal
	recorded := random.IntN(5) < 3
	byColumn := random.IntN(3) == 0
	serpentine := random.IntN(2) == 0
	nx, ny := int(r/w)+2, int(r/h)+2
	x0, y0 := int(math.Round(cx)), int(math.Round(cy))
	if random.IntN(3) == 0 {
		random.Float64()
	}
	for y := y0 - ny; y <= y0+ny; y++ {
		for x := x0 - nx; x <= x0+nx; x++ {
			dx, dy := (float64(x)-cx)*w, (float64(y)-cy)*h
			switch {
			case byCorner && math.Hypot(math.Abs(dx)+w/2, math.Abs(dy)+h/2) > r:
				continue
			case !byCorner && math.Hypot(dx, dy) > r:
				continue
			case (x-x0+1000*every)%every != 0 || (y-y0+1000*everyY)%everyY != 0:
				continue
			case keep < 1 && random.Float64() > keep:
				continue
			case dx*math.Cos(cutAngle)+dy*math.Sin(cutAngle) > cut*r:
				continue
			}
			m.x, m.y = append(m.x, int32(x)), append(m.y, int32(y))
			u, v := dx/r, dy/r
			if down {
				v = -v
			}
			m.u, m.v = append(m.u, u), append(m.v, v)
			// places in spacings of the sampled map
			px, py := (x-x0+1000*every)/every, (y-y0+1000*everyY)/everyY
			tx, ty := px/siteX, (py+skew*px)/siteY
			s := px%siteX + siteX*((py+skew*px)%siteY)
			if byColumn {
				tx, ty = ty, tx
			}
			if serpentine && ty%2 == 1 {
				tx = 9999 - tx
			}
			m.site, m.order = append(m.site, int32(s+1)), append(m.order, int32(ty*10000+tx))
		}
	}
	m.columns, m.lines = 2*nx/every, 2*ny/everyY
	known := Known{DiameterMM: d, DieWidthMM: w, DieHeightMM: h, EdgeExclusionMM: exclusion, YDown: down}
	if cut > 1 && random.IntN(3) == 0 {
		known = Known{DieWidthMM: w, DieHeightMM: h, YDown: down}
	}
	m.geo = FindGeometry(m.x, m.y, known)
	if siteX*siteY == 1 || !recorded {
		m.site = nil
	}
	if !recorded {
		m.order = nil
	}
	return m
}

// wobble is a smooth random function of the angle with values mostly in -1 ... 1.
func wobble(random *rand.Rand) func(t float64) float64 {
	var a, q [5]float64
	for k := range a {
		a[k], q[k] = random.NormFloat64()/float64(k+2), 2*math.Pi*random.Float64()
	}
	return func(t float64) float64 {
		s := 0.0
		for k := range a {
			s += a[k] * math.Cos(float64(k+1)*t+q[k])
		}
		return s
	}
}

// soft is a step from 1 to 0 at 0 that is about width wide.
func soft(x, width float64) float64 {
	if width <= 0 {
		if x <= 0 {
			return 1
		}
		return 0
	}
	return 1 / (1 + math.Exp(4*x/width))
}

func angleApart(a, b float64) float64 {
	return math.Abs(math.Remainder(a-b, 2*math.Pi))
}

var madeKinds = []string{"edge-ring", "edge-arc", "centre", "annulus", "line", "blob", "gradient", "sector", "shot-repeat", "site", "stripe"}

// madePattern is how strongly a pattern takes each die, from 0 to 1.
type madePattern struct {
	kind   string
	weight []float64
	misses float64 // share of its dice that it spares at random, as a scratch does
	shot   [2]int  // period, for shot-repeat
	given  bool
	area   float64
	parts  int // stretches it was drawn in
}

// makePattern returns nil where the wafer has no room for the kind.
func makePattern(random *rand.Rand, m madeWafer, kind string) *madePattern {
	p := &madePattern{kind: kind, weight: make([]float64, len(m.x))}
	die := math.Max(m.w, m.h)
	fill := func(weight func(u, v, r, t float64) float64) {
		for i := range p.weight {
			p.weight[i] = weight(m.u[i], m.v[i], math.Hypot(m.u[i], m.v[i]), math.Atan2(m.v[i], m.u[i]))
		}
	}
	wave := wobble(random)
	amplitude := between(random, 0, 0.2)
	edge := between(random, 0, 0.35) // softness as a share of size
	style := random.IntN(4)
	switch kind {
	case "edge-ring", "edge-arc":
		depth := math.Max(between(random, 0.04, 0.25), 1.5*die)
		cu, cv := between(random, -0.02, 0.02), between(random, -0.02, 0.02)
		t0, half := between(random, 0, 2*math.Pi), between(random, 30, 200)/2*math.Pi/180
		fill(func(u, v, r, t float64) float64 {
			r = math.Hypot(u-cu, v-cv)
			f := soft((1-depth*(1+amplitude*wave(t)))-r, edge*depth)
			if style == 0 { // rises to the edge
				f = math.Min(math.Max((r-1+2*depth)/(2*depth), 0), 1)
			}
			if kind == "edge-arc" {
				f *= soft(angleApart(t, t0)-half, edge*half)
			}
			return f
		})
	case "centre":
		radius := between(random, 0.15, 0.45)
		cu, cv := between(random, -0.05, 0.05), between(random, -0.05, 0.05)
		fill(func(u, v, r, t float64) float64 {
			t = math.Atan2(v-cv, u-cu)
			if style == 0 {
				return math.Exp(-(sq(u-cu) + sq(v-cv)) / sq(0.8*radius))
			}
			return soft(math.Hypot(u-cu, v-cv)-radius*(1+amplitude*wave(t)), edge*2*radius)
		})
	case "annulus":
		half := math.Max(between(random, 0.05, 0.13), 0.8*die)
		middle := between(random, 0.25+half, 0.85-half)
		cu, cv := between(random, -0.08, 0.08), between(random, -0.08, 0.08)
		fill(func(u, v, r, t float64) float64 {
			r = math.Hypot(u-cu, v-cv)
			return soft(math.Abs(r-middle*(1+0.2*amplitude*wave(t)))-half, edge*half)
		})
	case "blob":
		a := math.Max(between(random, 0.08, 0.3), 1.5*die)
		b := a * between(random, 0.5, 1)
		turned := between(random, 0, math.Pi)
		d, t0 := between(random, 0.3, 0.75), between(random, 0, 2*math.Pi)
		cu, cv := d*math.Cos(t0), d*math.Sin(t0)
		s, c := math.Sincos(turned)
		fill(func(u, v, r, t float64) float64 {
			u, v = u-cu, v-cv
			q := math.Hypot((u*c+v*s)/a, (v*c-u*s)/b)
			if style == 0 {
				return math.Exp(-q * q / 0.7)
			}
			return soft(q-1-amplitude*wave(math.Atan2(v, u)), 2*edge)
		})
	case "line":
		length := math.Max(between(random, 0.4, 1.6), 8*die)
		bow := between(random, -0.12, 0.12) * length * float64(random.IntN(2))
		width := die * between(random, 0.7, 3)
		t0 := between(random, 0, math.Pi)
		s, c := math.Sincos(t0)
		mu, mv := 0.0, 0.0
		for {
			mu, mv = between(random, -1, 1), between(random, -1, 1)
			if math.Hypot(mu, mv) < 0.8 && math.Hypot(mu+c*length/2, mv+s*length/2) < 1 && math.Hypot(mu-c*length/2, mv-s*length/2) < 1 {
				break
			}
			length *= 0.97
		}
		if length < 7*die {
			return nil
		}
		p.misses = between(random, 0, 0.25)
		sway := 0.0
		if style == 0 { // not a parabola
			sway = between(random, -1, 1) * 1.2 * die
		}
		fill(func(u, v, r, t float64) float64 {
			along, away := (u-mu)*c+(v-mv)*s, (v-mv)*c-(u-mu)*s
			k := 2 * along / length
			if math.Abs(k) > 1 {
				return 0
			}
			if math.Abs(away-bow*(1-k*k)-sway*math.Sin(4*k)) > width/2 {
				return 0
			}
			return 1
		})
	case "gradient":
		t0 := between(random, 0, 2*math.Pi)
		s, c := math.Sincos(t0)
		bent := random.IntN(3) == 0
		fill(func(u, v, r, t float64) float64 {
			x := (u*c + v*s + 1) / 2
			if bent {
				return soft(0.55-x, 0.9)
			}
			return math.Min(math.Max(x, 0), 1)
		})
	case "sector":
		t0, half := between(random, 0, 2*math.Pi), between(random, 25, 100)/2*math.Pi/180
		inner := 0.0
		if style == 0 {
			inner = between(random, 0, 0.25)
		}
		fill(func(u, v, r, t float64) float64 {
			if r < inner {
				return 0
			}
			return soft(angleApart(t, t0+0.1*amplitude*wave(3*r))-half, edge*half)
		})
	case "shot-repeat":
		mx, my := min(14, m.columns/5), min(14, m.lines/5)
		if mx < 3 || my < 3 {
			return nil
		}
		px, py := 3+random.IntN(mx-2), 3+random.IntN(my-2)
		cells := 1 + random.IntN(2)*random.IntN(3)
		a, b := random.IntN(px), random.IntN(py)
		p.shot, p.given = [2]int{px, py}, random.IntN(2) == 0
		hit := map[int]bool{}
		if style == 0 && px > 4 && py > 4 { // a block of the shot
			cells = 0
			w, h := 1+random.IntN(3), 1+random.IntN(3)
			for i := range w {
				for j := range h {
					hit[(a+i)%px+px*((b+j)%py)] = true
				}
			}
		}
		for k := range cells {
			hit[(a+k%2)%px+px*((b+k/2)%py)] = true
		}
		for i := range p.weight {
			if hit[((int(m.x[i])%px)+px)%px+px*(((int(m.y[i])%py)+py)%py)] {
				p.weight[i] = 1
			}
		}
	case "site":
		if m.site == nil {
			return nil
		}
		most := int32(0)
		for _, s := range m.site {
			most = max(most, s)
		}
		bad := 1 + int32(random.IntN(int(most)))
		also := bad
		if most >= 4 && random.IntN(4) == 0 {
			also = 1 + int32(random.IntN(int(most)))
		}
		for i, s := range m.site {
			if s == bad || s == also {
				p.weight[i] = 1
			}
		}
	case "stripe":
		share := between(random, 0.03, 0.25)
		from := between(random, 0, 1-share)
		if m.order == nil { // whole rows or columns
			along, all := m.y, m.lines
			if random.IntN(2) == 0 {
				along, all = m.x, m.columns
			}
			lo := along[0]
			hi := lo
			for _, k := range along {
				lo, hi = min(lo, k), max(hi, k)
			}
			_ = all
			from = between(random, 0.1, 0.9-share)
			for i, k := range along {
				q := (float64(k-lo) + 0.5) / (float64(hi-lo) + 1)
				if q >= from && q < from+share {
					p.weight[i] = 1
				}
			}
			break
		}
		rank := ranks(m.order)
		if style == 0 { // two stretches
			share /= 2
			second := between(random, 0, 1-share)
			p.parts = 2
			for i, k := range rank {
				if k >= second && k < second+share {
					p.weight[i] = 1
				}
			}
		}
		for i, k := range rank {
			if k >= from && k < from+share {
				p.weight[i] = 1
			}
		}
	}
	for _, w := range p.weight {
		p.area += w
	}
	if p.area < 3 || p.area > 0.8*float64(len(m.x)) {
		return nil
	}
	return p
}

// ranks are shares of rows with a lower value.
func ranks(order []int32) []float64 {
	count := map[int32]int{}
	lo, hi := order[0], order[0]
	for _, o := range order {
		count[o]++
		lo, hi = min(lo, o), max(hi, o)
	}
	before := map[int32]int{}
	n := 0
	for o := lo; o <= hi; o++ {
		if c := count[o]; c > 0 {
			before[o] = n
			n += c
		}
	}
	out := make([]float64, len(order))
	for i, o := range order {
		out[i] = float64(before[o]) / float64(len(order))
	}
	return out
}

// fails draws fails: background, raised by each pattern up to its contrast.
func makeFails(random *rand.Rand, n int, background float64, patterns []*madePattern, contrast []float64, chained bool) []bool {
	fail := make([]bool, n)
	for i := range fail {
		rate := background
		if chained { // causes act one after the other on what is still good
			good := 1 - background
			for k, p := range patterns {
				if p.misses > 0 && random.Float64() < p.misses {
					continue
				}
				extra := background * (contrast[k] - 1) / (1 - background)
				good *= 1 - math.Min(1, extra)*p.weight[i]
			}
			rate = 1 - good
		} else {
			for k, p := range patterns {
				if p.misses > 0 && random.Float64() < p.misses {
					continue
				}
				rate *= 1 + (contrast[k]-1)*p.weight[i]
			}
		}
		fail[i] = random.Float64() < math.Min(rate, 0.97)
	}
	return fail
}

// oracle is the likelihood-ratio statistic, as z, of pattern k with its known weights, the
// other patterns being known too.
func oracle(fail []bool, patterns []*madePattern, k int) float64 {
	others := append([]*madePattern{}, patterns[:k]...)
	others = append(others, patterns[k+1:]...)
	gain := likelihood(fail, append([]*madePattern{patterns[k]}, others...)) - likelihood(fail, others)
	return math.Sqrt(2 * math.Max(0, gain))
}

// likelihood is the highest log-likelihood of a background rate raised by a factor for
// each pattern, by its known weights: one parameter after the other by golden section.
func likelihood(fail []bool, patterns []*madePattern) float64 {
	const steps = 20 // weights are rounded to a twentieth
	type kind struct{ o, n float64 }
	cells := map[[2]int]*kind{}
	var keys [][2]int
	total := kind{}
	for i, f := range fail {
		var key [2]int
		for k, p := range patterns {
			key[k] = int(math.Round(p.weight[i] * steps))
		}
		c := cells[key]
		if c == nil {
			c = &kind{}
			cells[key] = c
			keys = append(keys, key)
		}
		c.n++
		total.n++
		if f {
			c.o++
			total.o++
		}
	}
	if total.o == 0 || total.o == total.n {
		return 0
	}
	x := make([]float64, len(patterns)+1)
	x[0] = math.Log(total.o / total.n)
	like := func() float64 {
		l := 0.0
		for _, key := range keys {
			rate := math.Exp(x[0])
			for k := range patterns {
				rate *= 1 + (math.Exp(x[k+1])-1)*float64(key[k])/steps
			}
			rate = math.Min(rate, 0.97)
			l += cells[key].o*math.Log(rate) + (cells[key].n-cells[key].o)*math.Log(1-rate)
		}
		return l
	}
	best := like()
	for range 30 {
		before := best
		for k := range x {
			lo, hi := x[k]-1.5, x[k]+1.5
			if k > 0 {
				lo = math.Max(lo, 0)
			}
			const g = 0.6180339887498949
			a, b := hi-g*(hi-lo), lo+g*(hi-lo)
			old := x[k]
			x[k] = a
			fa := like()
			x[k] = b
			fb := like()
			for hi-lo > 1e-3 {
				if fa > fb {
					hi, b, fb = b, a, fa
					a = hi - g*(hi-lo)
					x[k] = a
					fa = like()
				} else {
					lo, a, fa = a, b, fb
					b = lo + g*(hi-lo)
					x[k] = b
					fb = like()
				}
			}
			x[k] = (lo + hi) / 2
			if v := like(); v > best {
				best = v
			} else {
				x[k] = old
			}
		}
		if best < before+1e-4 {
			break
		}
	}
	return best
}
