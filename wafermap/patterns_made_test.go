package wafermap

import (
	"math"
	"math/rand/v2"
)

// Made maps with known patterns. This generator shares nothing with the search: shapes have
// wobbling, soft outlines and gaps, sizes and places are drawn evenly.

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
		fill(func(u, v, _, t float64) float64 {
			r := math.Hypot(u-cu, v-cv)
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
		fill(func(u, v, _, _ float64) float64 {
			t := math.Atan2(v-cv, u-cu)
			if style == 0 {
				return math.Exp(-(sq(u-cu) + sq(v-cv)) / sq(0.8*radius))
			}
			return soft(math.Hypot(u-cu, v-cv)-radius*(1+amplitude*wave(t)), edge*2*radius)
		})
	case "annulus":
		half := math.Max(between(random, 0.05, 0.13), 0.8*die)
		middle := between(random, 0.25+half, 0.85-half)
		cu, cv := between(random, -0.08, 0.08), between(random, -0.08, 0.08)
		fill(func(u, v, _, t float64) float64 {
			r := math.Hypot(u-cu, v-cv)
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
