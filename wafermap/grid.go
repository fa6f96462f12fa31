package wafermap

import (
	"cmp"
	"fmt"
	"math"
	"slices"
	"sync"
)

// Neighbours says which dice count as neighbours of a die: Rook, Queen, or what Within
// returns.
type Neighbours int

const (
	Rook  Neighbours = iota // the up to 4 dice that share a side
	Queen                   // the up to 8 dice that share a side or a corner
)

// farthestNeighbour is the largest distance of neighbours, in dice.
const farthestNeighbour = 6

// Within makes all dice neighbours whose centres are no more than a distance apart,
// counted in dice along either axis: Within(1) is Rook, Within(1.5) is Queen, Within(2)
// has 12 neighbours, Within(3) has 28. Distances below 1 or above 6 panic.
func Within(dice float64) Neighbours {
	if !(dice >= 1 && dice <= farthestNeighbour) {
		panic("wafermap: neighbours must lie within 1 to 6 dice")
	}
	switch square := int(dice * dice * (1 + 1e-12)); {
	case square < 2:
		return Rook
	case square < 4:
		return Queen
	default:
		return Neighbours(square) // of the distance
	}
}

func (n Neighbours) String() string {
	switch n {
	case Rook:
		return "rook"
	case Queen:
		return "queen"
	}
	return fmt.Sprintf("within %.3g dice", math.Sqrt(float64(n)))
}

// step is the way from a die to a neighbour.
type step struct{ dx, dy int }

// later lists the neighbours that come after a die in raster order: one of each
// pair of neighbours, so that walking them meets every join once.
func (n Neighbours) later() []step {
	switch n {
	case Rook:
		return []step{{1, 0}, {0, 1}}
	case Queen:
		return []step{{1, 0}, {-1, 1}, {0, 1}, {1, 1}}
	}
	var steps []step
	for dy := range farthestNeighbour + 1 {
		for dx := -farthestNeighbour; dx <= farthestNeighbour; dx++ {
			if dx*dx+dy*dy <= int(n) && (dy > 0 || dx > 0) {
				steps = append(steps, step{dx, dy})
			}
		}
	}
	return steps
}

// all lists all neighbours.
func (n Neighbours) all() []step {
	half := n.later()
	for _, s := range half {
		half = append(half, step{-s.dx, -s.dy})
	}
	return half
}

// Grid is one wafer's dice, indexed by position. Slices that go with it (fail
// flags, values) have one element a row of the x and y it was made from.
type Grid struct {
	// Missing counts rows without coordinates and Duplicates rows whose position
	// a later row has too; both take no part.
	Missing, Duplicates int

	x, y  []int32 // as given
	ix    *index
	order []int32 // rows that take part, by y, then x

	mu     sync.Mutex
	places []*places // see placesFor
}

// NewGrid indexes the dice of one wafer. It keeps x and y, which must not change
// while the grid is used. Memory is bounded by the number of dice whatever their
// coordinates.
func NewGrid(x, y []int32) *Grid {
	g := &Grid{x: x, y: y, ix: newIndex(x, y, 0)}
	n := 0
	for i := range x {
		if !placed(x[i], y[i]) {
			g.Missing++
			continue
		}
		if g.ix.put(int(x[i]), int(y[i]), int32(i)) >= 0 {
			g.Duplicates++
			continue
		}
		n++
	}
	g.order = make([]int32, 0, n)
	for _, row := range g.ix.table { // the table is in raster order already
		if row >= 0 {
			g.order = append(g.order, row)
		}
	}
	for _, row := range g.ix.far {
		g.order = append(g.order, row)
	}
	if len(g.ix.far) > 0 {
		slices.SortFunc(g.order, func(a, b int32) int {
			return cmp.Or(cmp.Compare(y[a], y[b]), cmp.Compare(x[a], x[b]))
		})
	}
	return g
}

// Len is the number of positions with a die.
func (g *Grid) Len() int { return len(g.order) }

// Index returns the row of the die at a position, -1 when there is none.
func (g *Grid) Index(x, y int) int { return g.ix.get(x, y) }

// Bounds returns the closed ranges of x and y that hold all dice; zeros for an
// empty grid.
func (g *Grid) Bounds() (minX, maxX, minY, maxY int32) {
	for k, r := range g.order {
		if k == 0 {
			minX, maxX, minY, maxY = g.x[r], g.x[r], g.y[r], g.y[r]
		}
		minX, maxX = min(minX, g.x[r]), max(maxX, g.x[r])
		minY, maxY = min(minY, g.y[r]), max(maxY, g.y[r])
	}
	return
}

// Rows returns the rows that take part, by y, then x. It is a view.
func (g *Grid) Rows() []int32 { return g.order }

// at returns the row of the neighbour of row r by step s, -1 when there is none.
func (g *Grid) at(r int32, s step) int { return g.ix.get(int(g.x[r])+s.dx, int(g.y[r])+s.dy) }

// check panics when a slice that goes with the grid has another length.
func (g *Grid) check(n int) {
	if n != len(g.x) {
		panic("wafermap: slice and grid differ in length")
	}
}
