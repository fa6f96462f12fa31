package wafermap

import (
	"cmp"
	"slices"
)

// The outline of a lot is found from the dice that were tested on any wafer. The
// convex hull of their corners touches the circle they were chosen by at many
// places all round, and passes straight over missing dice, cut rows, the flat
// and the straight side of a half-tested map: such a side adds no corner but its
// ends. Strays would pull the hull out, so they go first.

// spot is a distinct die position and on how many rows it occurs.
type spot struct{ x, y, rows int32 }

// spots returns the distinct positions inside the bulk of the dice, by y, then x,
// and how many rows lie outside it.
func spots(x, y []int32) (out []spot, outside int) {
	box := bulk(x, y)
	ix := newIndex(x, y, 0)
	for i := range x {
		xi, yi := int(x[i]), int(y[i])
		if !placed(x[i], y[i]) {
			continue
		}
		if xi < box.X0 || xi > box.X1 || yi < box.Y0 || yi > box.Y1 {
			outside++
			continue
		}
		k := ix.get(xi, yi)
		if k < 0 {
			k = len(out)
			ix.put(xi, yi, int32(k))
			out = append(out, spot{x: x[i], y: y[i]})
		}
		out[k].rows++
	}
	slices.SortFunc(out, func(a, b spot) int { return cmp.Or(cmp.Compare(a.y, b.y), cmp.Compare(a.x, b.x)) })
	return out, outside
}

// withoutRare drops positions that far fewer wafers have than most positions, as
// long as they are few: wrong coordinates are seldom wrong twice. A lot with one
// fully tested wafer among sampled ones keeps it.
func withoutRare(p []spot) []spot {
	counts := make([]int32, len(p))
	for i := range p {
		counts[i] = p[i].rows
	}
	slices.Sort(counts)
	usual := counts[len(counts)/2]
	if usual < 5 {
		return p
	}
	kept := filter(p, func(s spot) bool { return 5*s.rows > usual })
	if 33*(len(p)-len(kept)) > len(p) {
		return p
	}
	return kept
}

func filter(p []spot, keep func(spot) bool) []spot {
	out := make([]spot, 0, len(p))
	for _, s := range p {
		if keep(s) {
			out = append(out, s)
		}
	}
	return out
}

// axis is the coordinates along one axis: how many distinct ones, the first, and
// the usual distance of neighbouring ones, which is more than 1 in a map that
// samples every few columns.
type axis struct {
	distinct, first, last, spacing int
}

func newAxis(p []spot, of func(spot) int32) axis {
	if len(p) == 0 {
		return axis{}
	}
	v := make([]int32, len(p))
	for i := range p {
		v[i] = of(p[i])
	}
	slices.Sort(v)
	v = slices.Compact(v)
	a := axis{distinct: len(v), first: int(v[0]), last: int(v[len(v)-1]), spacing: 1}
	gaps := make([]int, 0, len(v))
	for i := 1; i < len(v); i++ {
		gaps = append(gaps, int(v[i])-int(v[i-1]))
	}
	slices.Sort(gaps)
	if len(gaps) > 0 {
		a.spacing = gaps[len(gaps)/2]
	}
	return a
}

// steps is the number of sampled columns that the axis has room for, and step the
// one a coordinate falls into.
func (a axis) steps() int       { return (a.last-a.first)/a.spacing + 1 }
func (a axis) step(v int32) int { return (int(v) - a.first) / a.spacing }
func spotX(s spot) int32        { return s.x }
func spotY(s spot) int32        { return s.y }

// withoutLonely drops dice that have far fewer dice round them than the usual die:
// under a sixth in a square window that holds at least a dozen round the usual
// one. At the rim of a disc it is close to a half, in the corner of a quarter
// wafer a quarter.
func withoutLonely(p []spot) []spot {
	const fewest, usual, widest = 30, 12, 32
	if len(p) < fewest {
		return p
	}
	ax, ay := newAxis(p, spotX), newAxis(p, spotY)
	columns, rows := ax.steps()+1, ay.steps()+1
	if float64(columns)*float64(rows) > cellsAtMost {
		return p
	}
	sums := make([]int32, columns*rows) // dice in earlier columns and rows
	for _, s := range p {
		sums[(ay.step(s.y)+1)*columns+ax.step(s.x)+1]++
	}
	for r := 1; r < rows; r++ {
		for c := 1; c < columns; c++ {
			k := r*columns + c
			sums[k] += sums[k-1] + sums[k-columns] - sums[k-columns-1]
		}
	}
	around := make([]int32, len(p))
	for half := 1; half <= widest; half *= 2 {
		for i, s := range p {
			cx, cy := ax.step(s.x), ay.step(s.y)
			c0, c1 := max(0, cx-half), min(columns-1, cx+half+1)
			r0, r1 := max(0, cy-half), min(rows-1, cy+half+1)
			around[i] = sums[r1*columns+c1] - sums[r0*columns+c1] - sums[r1*columns+c0] + sums[r0*columns+c0] - 1
		}
		sorted := slices.Clone(around)
		slices.Sort(sorted)
		if typical := sorted[len(sorted)/2]; typical >= usual {
			i := -1
			return filter(p, func(spot) bool { i++; return 6*around[i] >= typical })
		}
	}
	return p
}

// corner is a die corner in half dice: twice the die coordinate, plus or minus 1.
type corner struct{ x, y int64 }

// hull returns the convex hull of the corners of dice sorted by y, counter-clockwise
// in die coordinates (Andrew's monotone chain; corners on a straight side are
// left out).
func hull(p []spot) []corner {
	var c []corner
	for i := 0; i < len(p); {
		j := i
		lo, hi := p[i].x, p[i].x
		for ; j < len(p) && p[j].y == p[i].y; j++ {
			lo, hi = min(lo, p[j].x), max(hi, p[j].x)
		}
		x0, x1, y := 2*int64(lo)-1, 2*int64(hi)+1, 2*int64(p[i].y)
		c = append(c, corner{x0, y - 1}, corner{x0, y + 1}, corner{x1, y - 1}, corner{x1, y + 1})
		i = j
	}
	slices.SortFunc(c, func(a, b corner) int { return cmp.Or(cmp.Compare(a.x, b.x), cmp.Compare(a.y, b.y)) })
	c = slices.Compact(c)
	chain := func(points []corner) []corner {
		var h []corner
		for _, q := range points {
			for len(h) >= 2 && turn(h[len(h)-2], h[len(h)-1], q) <= 0 {
				h = h[:len(h)-1]
			}
			h = append(h, q)
		}
		return h[:len(h)-1]
	}
	lower := chain(c)
	slices.Reverse(c)
	return append(lower, chain(c)...)
}

// turn is positive when a, b, c turn left.
func turn(a, b, c corner) int64 { return (b.x-a.x)*(c.y-a.y) - (b.y-a.y)*(c.x-a.x) }
