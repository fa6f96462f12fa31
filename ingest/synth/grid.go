package synth

import (
	"cmp"
	"math"
	"slices"
)

// Grid lays dice on a round wafer. Die (0, 0) is centred on the wafer; x grows
// to the right, y upwards, in dice.
type Grid struct {
	DiameterMM      float64
	DieWidthMM      float64
	DieHeightMM     float64
	EdgeExclusionMM float64

	// DicePerWafer, when not 0, sets the die size instead: square dice of the
	// largest size with at least so many whole ones inside the edge exclusion;
	// what is over is left out from the rim.
	DicePerWafer int

	// SiteColumns by SiteRows dice are probed at one touchdown; 0 counts as 1.
	// Sites are numbered from 1, along the row first.
	SiteColumns, SiteRows int

	// ShotColumns by ShotRows dice share one exposure; 0: no shots.
	ShotColumns, ShotRows int
}

// place is one die of the grid.
type place struct {
	x, y       int32
	u, v       float64 // centre, in wafer radii
	r          float64 // distance from the wafer's centre, in wafer radii
	site       int32   // from 1
	touchdown  int32   // from 1; the dice of one touchdown share it
	sx, sy     int32   // position within the exposure shot, 0 without shots
	touchShare float64 // touchdown as a share of all, 0 to 1
	bowl       float64 // height of the lot's bowl here, see Smooth
}

// Dice returns how many dice the grid has, with the die size in millimetres
// that gives them.
func (g Grid) Dice() (n int, widthMM, heightMM float64) {
	p, w, h := g.layout()
	return len(p), w, h
}

// layout returns the dice in the order of test: touchdowns in a serpentine
// from the top row down, the dice of a touchdown by site.
func (g Grid) layout() (dice []place, widthMM, heightMM float64) {
	w, h := g.DieWidthMM, g.DieHeightMM
	radius := g.DiameterMM / 2
	usable := radius - g.EdgeExclusionMM
	if g.DicePerWafer > 0 {
		w = pitchFor(usable, g.DicePerWafer)
		h = w
	}
	if !(w > 0 && h > 0 && usable > 0) {
		panic("synth: grid needs a diameter and a die size, or a number of dice")
	}
	dice = whole(usable, w, h)
	if n := g.DicePerWafer; n > 0 && len(dice) > n {
		slices.SortStableFunc(dice, func(a, b place) int { return cmp.Compare(a.r, b.r) })
		dice = dice[:n]
	}
	nx, ny := max(g.SiteColumns, 1), max(g.SiteRows, 1)
	for i := range dice {
		d := &dice[i]
		d.u, d.v, d.r = d.u/radius, d.v/radius, d.r/radius
		d.site = mod(d.x, nx) + int32(nx)*mod(d.y, ny) + 1
		if g.ShotColumns > 0 && g.ShotRows > 0 {
			d.sx, d.sy = mod(d.x, g.ShotColumns), mod(d.y, g.ShotRows)
		}
	}
	// Blocks of sites, serpentine: rows of blocks downwards, every other one
	// from right to left.
	block := func(d place) (int32, int32) {
		by := (d.y - mod(d.y, ny)) / int32(ny)
		bx := (d.x - mod(d.x, nx)) / int32(nx)
		if mod(by, 2) == 1 {
			bx = -bx
		}
		return -by, bx
	}
	slices.SortFunc(dice, func(a, b place) int {
		ay, ax := block(a)
		by, bx := block(b)
		return cmp.Or(cmp.Compare(ay, by), cmp.Compare(ax, bx), cmp.Compare(a.site, b.site))
	})
	touch := int32(0)
	for i := range dice {
		if i == 0 {
			touch = 1
		} else {
			ay, ax := block(dice[i-1])
			if by, bx := block(dice[i]); by != ay || bx != ax {
				touch++
			}
		}
		dice[i].touchdown = touch
	}
	for i := range dice {
		dice[i].touchShare = (float64(dice[i].touchdown) - 0.5) / float64(touch)
	}
	return dice, w, h
}

// whole returns the dice that lie with all four corners within the radius;
// u, v and r in millimetres.
func whole(usable, w, h float64) []place {
	dice := make([]place, 0, countWhole(usable, w, h))
	eachRow(usable, w, h, func(y, right int32) {
		for x := -right; x <= right; x++ {
			u, v := float64(x)*w, float64(y)*h
			dice = append(dice, place{x: x, y: y, u: u, v: v, r: math.Hypot(u, v)})
		}
	})
	return dice
}

// countWhole is len(whole) without making the dice.
func countWhole(usable, w, h float64) int {
	n := 0
	eachRow(usable, w, h, func(_, right int32) { n += int(2*right + 1) })
	return n
}

// eachRow calls do for each row of dice with the last column that is whole.
func eachRow(usable, w, h float64, do func(y, right int32)) {
	top := int32(usable / h)
	for y := -top; y <= top; y++ {
		corner := (math.Abs(float64(y)) + 0.5) * h
		half := usable*usable - corner*corner
		if half < 0 {
			continue
		}
		if right := math.Floor(math.Sqrt(half)/w - 0.5); right >= 0 {
			do(y, int32(right))
		}
	}
}

// pitchFor finds the largest square die of which n whole ones fit, to 0.1 %.
func pitchFor(usable float64, n int) float64 {
	hi := usable * math.Sqrt(math.Pi/float64(n))
	lo := hi / 2
	for countWhole(usable, lo, lo) < n { // a handful of dice wastes most of the wafer
		lo /= 2
	}
	for hi/lo > 1.001 {
		if mid := (lo + hi) / 2; countWhole(usable, mid, mid) >= n {
			lo = mid
		} else {
			hi = mid
		}
	}
	return lo
}

// mod is the remainder that is never negative.
func mod(a int32, n int) int32 {
	m := a % int32(n)
	if m < 0 {
		m += int32(n)
	}
	return m
}
