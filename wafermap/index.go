package wafermap

import "slices"

// index maps die positions to small integers. The bulk of the dice lies in a
// dense table over their common box; positions outside (stray coordinates, or all
// of them when the dice lie too thinly for a table) go to a hash table, so that
// memory follows the number of dice and not the coordinate range.
type index struct {
	x0, y0, columns, rows int
	table                 []int32 // by (y-y0)*columns + x-x0; -1 nothing there
	far                   map[uint64]int32
}

// A table over all dice may hold cellsPerDie cells for each die. Where stray
// dice would make it larger it is laid over the bulk of them, and may then be
// thinnerCells a die: sampled maps of one die in 64 still get one. Small tables
// are allowed in any case, and none is larger than cellsAtMost (32 MB).
const (
	cellsPerDie  = 4
	thinnerCells = 64
	cellsAnyway  = 1 << 14
	cellsAtMost  = 1 << 23
)

// newIndex lays out the table for the placed dice of x and y without filling it.
func newIndex(x, y []int32, margin int) *index {
	box, n := span(x, y)
	ix := &index{}
	if n == 0 {
		return ix
	}
	limit := func(perDie int) float64 { return min(float64(perDie)*float64(n)+cellsAnyway, cellsAtMost) }
	if box.grown(margin).area() > limit(cellsPerDie) {
		box = bulk(x, y)
	}
	if box = box.grown(margin); box.area() > limit(thinnerCells) {
		return ix
	}
	ix.x0, ix.y0 = box.X0, box.Y0
	ix.columns, ix.rows = box.X1-box.X0+1, box.Y1-box.Y0+1
	ix.table = make([]int32, ix.columns*ix.rows)
	for i := range ix.table {
		ix.table[i] = -1
	}
	return ix
}

func key(x, y int) uint64 { return uint64(uint32(int32(x))) | uint64(uint32(int32(y)))<<32 }

// get returns what is stored at a position, -1 when nothing is.
func (ix *index) get(x, y int) int {
	column, row := x-ix.x0, y-ix.y0
	if uint(column) < uint(ix.columns) && uint(row) < uint(ix.rows) {
		return int(ix.table[row*ix.columns+column])
	}
	if ix.far != nil && int(int32(x)) == x && int(int32(y)) == y {
		if v, ok := ix.far[key(x, y)]; ok {
			return int(v)
		}
	}
	return -1
}

// put stores v at a position and returns what was there before, -1 when nothing.
func (ix *index) put(x, y int, v int32) int {
	column, row := x-ix.x0, y-ix.y0
	if uint(column) < uint(ix.columns) && uint(row) < uint(ix.rows) {
		cell := &ix.table[row*ix.columns+column]
		old := *cell
		*cell = v
		return int(old)
	}
	if ix.far == nil {
		ix.far = map[uint64]int32{}
	}
	old, ok := ix.far[key(x, y)]
	ix.far[key(x, y)] = v
	if !ok {
		return -1
	}
	return int(old)
}

// extent is a closed box of die positions.
type extent struct{ X0, X1, Y0, Y1 int }

func (e extent) grown(by int) extent { return extent{e.X0 - by, e.X1 + by, e.Y0 - by, e.Y1 + by} }

// area is a float64 because the whole range of int32 squared overflows an int64.
func (e extent) area() float64 { return float64(e.X1-e.X0+1) * float64(e.Y1-e.Y0+1) }

// span returns the box of all placed dice and their number.
func span(x, y []int32) (extent, int) {
	if len(x) != len(y) {
		panic("wafermap: x and y differ in length")
	}
	e := extent{}
	n := 0
	for i := range x {
		if !placed(x[i], y[i]) {
			continue
		}
		xi, yi := int(x[i]), int(y[i])
		if n == 0 {
			e = extent{xi, xi, yi, yi}
		}
		e.X0, e.X1 = min(e.X0, xi), max(e.X1, xi)
		e.Y0, e.Y1 = min(e.Y0, yi), max(e.Y1, yi)
		n++
	}
	return e, n
}

// bulk returns the box that holds the dice but for coordinates far away from all
// others: those more than three times the 75 % distance from the median away, along
// either axis. On a disc the 75 % point of |x - median| lies at 0.64 radii, on half
// a disc at a third of its width, so that no die of a wafer is cut off; and up to a
// quarter of the coordinates may be wrong.
func bulk(x, y []int32) extent {
	n := 0
	for i := range x {
		if placed(x[i], y[i]) {
			n++
		}
	}
	// 20,000 dice tell the bulk as well as two million do
	stride := max(1, n/20000)
	xs, ys := make([]int, 0, n/stride+1), make([]int, 0, n/stride+1)
	k := 0
	for i := range x {
		if !placed(x[i], y[i]) {
			continue
		}
		if k%stride == 0 {
			xs, ys = append(xs, int(x[i])), append(ys, int(y[i]))
		}
		k++
	}
	xlo, xhi := bulkRange(xs)
	ylo, yhi := bulkRange(ys)
	e, found := extent{}, false
	for i := range x {
		xi, yi := int(x[i]), int(y[i])
		if !placed(x[i], y[i]) || xi < xlo || xi > xhi || yi < ylo || yi > yhi {
			continue
		}
		if !found {
			e, found = extent{xi, xi, yi, yi}, true
		}
		e.X0, e.X1 = min(e.X0, xi), max(e.X1, xi)
		e.Y0, e.Y1 = min(e.Y0, yi), max(e.Y1, yi)
	}
	return e
}

// bulkRange gives the range along one axis; it sorts v.
func bulkRange(v []int) (lo, hi int) {
	if len(v) == 0 {
		return 0, 0
	}
	sortInts(v)
	median := v[len(v)/2]
	away := make([]int, len(v))
	for i := range v {
		if away[i] = v[i] - median; away[i] < 0 {
			away[i] = -away[i]
		}
	}
	sortInts(away)
	reach := 3*away[min(len(away)-1, len(away)*3/4)] + 3
	return median - reach, median + reach
}

// sortInts sorts; where values lie as thickly as coordinates do, by counting them.
func sortInts(v []int) {
	lo, hi := slices.Min(v), slices.Max(v)
	if uint(hi)-uint(lo) > uint(4*len(v)) {
		slices.Sort(v)
		return
	}
	count := make([]int32, hi-lo+1)
	for _, x := range v {
		count[x-lo]++
	}
	i := 0
	for k, n := range count {
		for range n {
			v[i] = lo + k
			i++
		}
	}
}
