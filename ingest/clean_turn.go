package ingest

import (
	"fmt"
	"math"
)

const (
	turnFits   = 0.97 // share of positions in common at which two outlines are one
	turnMisfit = 0.95 // and below which they are not
	turnLeast  = 30   // dice of a wafer
	gapLeast   = 0.02 // share of the lot's positions that a wafer lacks and is told
)

// turnBox is the largest box of die positions that is looked at: strays far off
// would make it huge, and are told elsewhere.
const turnBox = 1 << 21

// positions is a set of die positions in a box.
type positions struct {
	x0, y0, w, h int
	has          []bool
	n            int
}

func (p *positions) like() *positions {
	return &positions{x0: p.x0, y0: p.y0, w: p.w, h: p.h, has: make([]bool, len(p.has))}
}

func (p *positions) add(x, y int) {
	if x -= p.x0; x < 0 || x >= p.w {
		return
	}
	if y -= p.y0; y < 0 || y >= p.h {
		return
	}
	if k := y*p.w + x; !p.has[k] {
		p.has[k] = true
		p.n++
	}
}

// outlines compares the die positions of each wafer with those that most wafers
// have. A wafer that lacks some is told; one whose positions fit those of the
// others only when turned by a quarter, half or three quarters was probed with
// its notch elsewhere: its map then does not lie on the others'. An outline
// that is the same after a turn cannot tell.
func (d *draft) outlines() {
	x, y := d.ints[intX], d.ints[intY]
	if x == nil || y == nil || len(d.wafers) < 3 {
		return
	}
	box := d.boxOf(x, y)
	if box == nil {
		return
	}
	own := make([]*positions, len(d.wafers))
	d.eachWafer(func(k int, w Wafer) {
		own[k] = box.like()
		for i := w.Lo; i < w.Hi; i++ {
			if x[i] != Missing && y[i] != Missing {
				own[k].add(int(x[i]), int(y[i]))
			}
		}
	})
	tested := make([]int32, len(box.has))
	for _, p := range own {
		for i, has := range p.has {
			if has {
				tested[i]++
			}
		}
	}
	usual := box.like()
	for i, n := range tested {
		if 2*int(n) > len(d.wafers) {
			usual.has[i] = true
			usual.n++
		}
	}
	if usual.n >= turnLeast {
		d.compareOutlines(own, usual)
	}
}

func (d *draft) compareOutlines(own []*positions, usual *positions) {
	var turned, gaps []string
	turnedDice, missing := 0, 0
	inBoth := make([]int, len(d.wafers))
	d.eachWafer(func(k int, _ Wafer) { inBoth[k] = common(own[k], usual) })
	for k, w := range d.wafers {
		both := inBoth[k]
		if own[k].n < turnLeast || jaccard(both, own[k], usual) >= turnMisfit && float64(usual.n-both) < gapLeast*float64(usual.n) {
			continue
		}
		if by := bestTurn(own[k], usual); by > 0 && jaccard(both, own[k], usual) < turnMisfit {
			turned = append(turned, fmt.Sprintf("%s by %d degrees", w.ID, 90*by))
			turnedDice += w.Hi - w.Lo
		} else if lacks := usual.n - both; float64(lacks) >= gapLeast*float64(usual.n) {
			gaps = append(gaps, fmt.Sprintf("%s (%d)", w.ID, lacks))
			missing += lacks
		}
	}
	if len(turned) > 0 {
		d.note(Warning, "wafer-turned", fmt.Sprintf("the outlines of %d wafers fit the others' only when turned: %s; the maps are shown as they are in the data",
			len(turned), list(turned, 8)), "check the notch of these wafers at the prober; stacked maps and rings of the lot mix orientations", turnedDice)
	}
	if len(gaps) > 0 {
		d.note(Info, "map-gaps", fmt.Sprintf("%d wafers lack die positions that most wafers have: %s", len(gaps), list(gaps, 8)), "", missing)
	}
}

// boxOf is the empty set over the box of all dice; nil without dice, or when
// the box is too large.
func (d *draft) boxOf(x, y []int32) *positions {
	type box struct{ x0, x1, y0, y1 int32 }
	none := box{math.MaxInt32, math.MinInt32, math.MaxInt32, math.MinInt32}
	by := make([]box, len(d.wafers))
	d.eachWafer(func(k int, w Wafer) {
		b := none
		for i := w.Lo; i < w.Hi; i++ {
			if x[i] != Missing && y[i] != Missing {
				b = box{min(b.x0, x[i]), max(b.x1, x[i]), min(b.y0, y[i]), max(b.y1, y[i])}
			}
		}
		by[k] = b
	})
	whole := none
	for _, b := range by {
		whole = box{min(whole.x0, b.x0), max(whole.x1, b.x1), min(whole.y0, b.y0), max(whole.y1, b.y1)}
	}
	x0, x1, y0, y1 := int(whole.x0), int(whole.x1), int(whole.y0), int(whole.y1)
	if x1 < x0 || x1-x0 >= turnBox || y1-y0 >= turnBox || (x1-x0+1)*(y1-y0+1) > turnBox {
		return nil
	}
	p := &positions{x0: x0, y0: y0, w: x1 - x0 + 1, h: y1 - y0 + 1}
	p.has = make([]bool, p.w*p.h)
	return p
}

func common(a, b *positions) int {
	n := 0
	for i, has := range a.has {
		if has && b.has[i] {
			n++
		}
	}
	return n
}

// jaccard is the share of the positions of two sets that are in both.
func jaccard(both int, a, b *positions) float64 { return float64(both) / float64(a.n+b.n-both) }

// bestTurn tries quarter turns, counter-clockwise, about the middle of the
// bounding box, and returns how many make the outlines one; 0 when none does.
func bestTurn(own, usual *positions) int {
	x0, x1, y0, y1 := usual.bounds()
	p0, p1, q0, q1 := own.bounds()
	best, fit := 0, turnFits
	for k := 1; k <= 3; k++ {
		turned := own.like()
		outside := 0
		for i, has := range own.has {
			if !has {
				continue
			}
			u, v := 2*(i%own.w)-p0-p1, 2*(i/own.w)-q0-q1 // from the middle, in half dice
			for range k {
				u, v = -v, u
			}
			before := turned.n
			turned.add((u+x0+x1)/2+own.x0, (v+y0+y1)/2+own.y0)
			if turned.n == before {
				outside++
			}
		}
		turned.n += outside
		if f := jaccard(common(turned, usual), turned, usual); f >= fit {
			best, fit = k, f
		}
	}
	return best
}

// bounds is the box of the positions that are there, from the set's own corner.
func (p *positions) bounds() (x0, x1, y0, y1 int) {
	x0, y0 = p.w, p.h
	for i, has := range p.has {
		if has {
			x0, x1 = min(x0, i%p.w), max(x1, i%p.w)
			y0, y1 = min(y0, i/p.w), max(y1, i/p.w)
		}
	}
	return x0, x1, y0, y1
}
