package ingest

import (
	"fmt"
	"math"
	"slices"
)

// places looks at the dice's coordinates: dice without any, and dice that
// cannot be on the wafer. They stay in the lot, as they were tested; findings
// count them.
func (d *draft) places() {
	x, y := d.ints[intX], d.ints[intY]
	if x == nil || y == nil {
		if x != nil || y != nil {
			d.note(Warning, "no-coordinates", "only one of the two die coordinates has a column; maps need both", "name the other under columns in the product file", d.n)
		} else {
			d.note(Warning, "no-coordinates", "the data have no die coordinates; what needs a map is left out", "export die x and y to get maps", d.n)
		}
		return
	}
	none, _ := d.countDice(func(i int) bool { return x[i] == Missing || y[i] == Missing })
	if none == len(x) {
		d.ints[intX], d.ints[intY] = nil, nil
		d.note(Warning, "no-coordinates", "the columns of die coordinates are empty; what needs a map is left out", "export die x and y to get maps", len(x))
		return
	}
	if none > 0 {
		d.note(Warning, "die-without-coordinates", fmt.Sprintf("%d of %d dice have no coordinates; they count in yields and are not on the maps", none, len(x)), "", none)
	}
	p := places{x: x, y: y}
	off, rule := p.offWafer(d)
	if off > 0 {
		d.note(Warning, "off-wafer", fmt.Sprintf("%d of %d dice lie off the wafer (%s), %s first; they count as they are", off, len(x), rule, p.example),
			"check the coordinates, and wafer diameter and die size in the product file", off)
	}
}

type places struct {
	x, y    []int32
	example string
}

// offWafer counts dice off the wafer. With diameter and die size, those are
// dice whose centre is outside the wafer's radius by more than a die, where
// the wafer's centre is that of the smallest circle around all dice that can be
// on one wafer. Without, dice more than two radii from the middle of the
// outline, which the quartiles tell: on a disc they lie 0.40 radii from it.
func (p *places) offWafer(d *draft) (int, string) {
	if d.product != nil {
		if g := d.product.Wafer; g.DiameterMM > 0 && g.DieWidthMM > 0 && g.DieHeightMM > 0 {
			limit := g.DiameterMM/2 + math.Max(g.DieWidthMM, g.DieHeightMM)
			cx, cy := p.centre(g.DieWidthMM, g.DieHeightMM, g.DiameterMM/2)
			n := p.count(d, func(x, y int32) bool {
				return math.Hypot((float64(x)-cx)*g.DieWidthMM, (float64(y)-cy)*g.DieHeightMM) > limit
			})
			return n, fmt.Sprintf("more than a die beyond its radius of %g mm", g.DiameterMM/2)
		}
	}
	return p.count(d, p.farOutline()), "far off the outline of the others"
}

func (p *places) count(d *draft, off func(x, y int32) bool) int {
	n, i := d.countDice(func(i int) bool { return p.x[i] != Missing && p.y[i] != Missing && off(p.x[i], p.y[i]) })
	for _, w := range d.wafers {
		if i >= w.Lo && i < w.Hi {
			p.example = fmt.Sprintf("wafer %s die %d, %d", w.ID, p.x[i], p.y[i])
		}
	}
	return n
}

// countDice counts the dice of which something is true, and gives the first of
// them, -1 when there is none.
func (d *draft) countDice(is func(i int) bool) (n, first int) {
	type found struct{ n, first int }
	by := make([]found, len(d.wafers))
	d.eachWafer(func(k int, w Wafer) {
		f := found{first: -1}
		for i := w.Lo; i < w.Hi; i++ {
			if is(i) {
				if f.n++; f.n == 1 {
					f.first = i
				}
			}
		}
		by[k] = f
	})
	first = -1
	for _, f := range by {
		if n += f.n; first < 0 {
			first = f.first
		}
	}
	return n, first
}

// farOutline gives the rule for a wafer of unknown size; it calls nothing off
// where the quartiles say too little (few dice, or dice on few columns or rows).
func (p *places) farOutline() func(x, y int32) bool {
	fence := func(c []int32) (float64, float64) {
		s := sampleInts(c)
		if len(s) < 40 {
			return math.Inf(-1), math.Inf(1)
		}
		q1, q2, q3 := float64(s[len(s)/4]), float64(s[len(s)/2]), float64(s[len(s)*3/4])
		if q3-q1 < 2 {
			return math.Inf(-1), math.Inf(1)
		}
		reach := 2 / 0.808 * (q3 - q1) // two radii of a disc with these quartiles
		return q2 - reach, q2 + reach
	}
	x0, x1 := fence(p.x)
	y0, y1 := fence(p.y)
	return func(x, y int32) bool {
		return float64(x) < x0 || float64(x) > x1 || float64(y) < y0 || float64(y) > y1
	}
}

// centre finds the wafer's centre in die coordinates: the centre of the
// smallest circle around the dice, those left out that are too far from the
// others to share a wafer with them. Only the outline matters, so that the
// first and last die of each row stand for all.
func (p *places) centre(w, h, radius float64) (float64, float64) {
	ends := map[int32][2]int32{}
	for i := range p.x {
		if p.x[i] == Missing || p.y[i] == Missing {
			continue
		}
		e, ok := ends[p.y[i]]
		if !ok {
			e = [2]int32{p.x[i], p.x[i]}
		}
		ends[p.y[i]] = [2]int32{min(e[0], p.x[i]), max(e[1], p.x[i])}
	}
	mx, my := medianOf(p.x), medianOf(p.y)
	var points []point
	for yy, e := range ends {
		for _, xx := range e {
			q := point{float64(xx) * w, float64(yy) * h}
			if math.Hypot(q.x-mx*w, q.y-my*h) <= 2.5*radius {
				points = append(points, q)
			}
		}
	}
	slices.SortFunc(points, func(a, b point) int {
		if a.x != b.x {
			return compareFloat(a.x, b.x)
		}
		return compareFloat(a.y, b.y)
	})
	points = slices.Compact(points)
	for len(points) > 0 {
		c, r := smallestCircle(points)
		if r <= radius {
			return c.x / w, c.y / h
		}
		// Too wide for one wafer: the point farthest from the middle of all
		// dice goes.
		far := 0
		for i, q := range points {
			if math.Hypot(q.x-mx*w, q.y-my*h) > math.Hypot(points[far].x-mx*w, points[far].y-my*h) {
				far = i
			}
		}
		points = slices.Delete(points, far, far+1)
	}
	return mx, my
}

func medianOf(c []int32) float64 {
	s := sampleInts(c)
	if len(s) == 0 {
		return 0
	}
	return float64(s[len(s)/2])
}

// sampleInts is an even sample of a column, sorted, Missing left out. It is
// large enough for quartiles to be good to a percent of a wafer.
func sampleInts(c []int32) []int32 {
	const most = 40_000
	step := max(1, len(c)/most)
	s := make([]int32, 0, len(c)/step+1)
	for i := 0; i < len(c); i += step {
		if c[i] != Missing {
			s = append(s, c[i])
		}
	}
	slices.Sort(s)
	return s
}

type point struct{ x, y float64 }

// smallestCircle is the smallest circle that holds all points, by the
// incremental construction of Welzl (1991), in the order given.
func smallestCircle(p []point) (c point, r float64) {
	inside := func(q point) bool { return math.Hypot(q.x-c.x, q.y-c.y) <= r*(1+1e-12)+1e-12 }
	two := func(a, b point) {
		c = point{(a.x + b.x) / 2, (a.y + b.y) / 2}
		r = math.Hypot(a.x-c.x, a.y-c.y)
	}
	for i := range p {
		if i > 0 && inside(p[i]) {
			continue
		}
		c, r = p[i], 0
		for j := range i {
			if inside(p[j]) {
				continue
			}
			two(p[i], p[j])
			for k := range j {
				if !inside(p[k]) {
					c = circumcentre(p[i], p[j], p[k])
					r = math.Hypot(p[i].x-c.x, p[i].y-c.y)
				}
			}
		}
	}
	return c, r
}

// circumcentre of three points; the middle of the two outer ones when they are
// on a line.
func circumcentre(a, b, c point) point {
	bx, by, cx, cy := b.x-a.x, b.y-a.y, c.x-a.x, c.y-a.y
	d := 2 * (bx*cy - by*cx)
	if d == 0 {
		lo, hi := a, a
		for _, q := range []point{b, c} {
			if q.x < lo.x || q.x == lo.x && q.y < lo.y {
				lo = q
			}
			if q.x > hi.x || q.x == hi.x && q.y > hi.y {
				hi = q
			}
		}
		return point{(lo.x + hi.x) / 2, (lo.y + hi.y) / 2}
	}
	b2, c2 := bx*bx+by*by, cx*cx+cy*cy
	return point{a.x + (cy*b2-by*c2)/d, a.y + (bx*c2-cx*b2)/d}
}
