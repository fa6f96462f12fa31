package variance

import (
	"cmp"
	"math"
	"slices"
)

// Level assigns readings to the groups of one level.
type Level struct {
	Name string // lot, wafer, zone ...
	// Code numbers each reading's group within its group of the level above: wafer
	// 1 of one lot and wafer 1 of another are two groups. A negative code is
	// unknown, and the reading is left out.
	Code []int32
	// Repeats: a code means the same in every group above, as a zone is the same
	// place on all wafers. For the innermost level only.
	Repeats bool
}

// Cell is what a set of readings tells of its level and spread.
type Cell struct {
	N    int
	Mean float64
	SS   float64 // sum of squared deviations from Mean
}

// merge joins two sets of readings (Chan, Golub and LeVeque 1983, The American
// Statistician 37, 242-247).
func (c Cell) merge(d Cell) Cell {
	if c.N == 0 {
		return d
	}
	if d.N == 0 {
		return c
	}
	n := c.N + d.N
	delta := d.Mean - c.Mean
	share := float64(d.N) / float64(n)
	return Cell{N: n, Mean: c.Mean + delta*share, SS: c.SS + d.SS + delta*delta*share*float64(c.N)}
}

// maxLevels is how many levels of groups a design may have.
const maxLevels = 4

// Design is a set of readings in nested groups. Make it with [New] or
// [FromCells]; it does not change afterwards.
type Design struct {
	// N counts the readings used; Missing the NaNs; Unplaced readings that have no
	// group at some level.
	N, Missing, Unplaced int
	infinite             bool

	names   []string // of the levels, outermost first
	repeats bool     // the innermost level's codes mean the same everywhere
	cells   []Cell
	zone    []int32   // code of each cell at the innermost level
	parent  [][]int32 // parent[k][g]: group of level k-1 that group g of level k is in
}

// New summarises readings y, with the levels of their groups from the outermost
// in. Readings need not be sorted; the result does not depend on their order
// beyond rounding. NaNs are skipped and counted.
//
// It panics without levels, with more than four, when lengths differ, or when a
// level other than the innermost repeats.
func New(levels []Level, y []float64) *Design {
	checkLevels(levels, len(y))
	d := &Design{}
	place := make([]int32, len(y)) // group of each reading, level by level
	for i, v := range y {
		if v != v {
			d.Missing++
			place[i] = -1
		} else if math.IsInf(v, 0) {
			d.infinite = true
		}
	}
	paths := descend(levels, place)
	for i, v := range y {
		if place[i] < 0 && v == v {
			d.Unplaced++
		}
	}
	d.N = len(y) - d.Missing - d.Unplaced
	d.arrange(levels, paths, summarise(y, place, len(paths[len(paths)-1])))
	return d
}

// FromCells makes a design of readings that were summarised before: codes of
// levels belong to cells. Cells of the same groups are joined; empty ones are
// left out. Panics as [New].
func FromCells(levels []Level, cells []Cell) *Design {
	checkLevels(levels, len(cells))
	d := &Design{}
	place := make([]int32, len(cells))
	for i, c := range cells {
		if c.N <= 0 {
			place[i] = -1
		}
	}
	paths := descend(levels, place)
	joined := make([]Cell, len(paths[len(paths)-1]))
	for i, c := range cells {
		switch {
		case place[i] >= 0:
			joined[place[i]] = joined[place[i]].merge(c)
			d.N += c.N
			d.infinite = d.infinite || math.IsInf(c.Mean, 0) || math.IsInf(c.SS, 0) || c.Mean != c.Mean || c.SS != c.SS
		case c.N > 0:
			d.Unplaced += c.N
		}
	}
	d.arrange(levels, paths, joined)
	return d
}

func checkLevels(levels []Level, n int) {
	if len(levels) == 0 || len(levels) > maxLevels {
		panic("stats/variance: a design has one to four levels")
	}
	for i, l := range levels {
		if len(l.Code) != n {
			panic("stats/variance: slice length mismatch")
		}
		if l.Repeats && i < len(levels)-1 {
			panic("stats/variance: only the innermost level repeats")
		}
	}
}

// branch is a group: the group above it and its code there.
type branch struct{ parent, code int32 }

// descend numbers the groups of all levels. On return place holds each item's
// group of the innermost level, or -1. Groups are numbered as they come.
func descend(levels []Level, place []int32) [][]branch {
	for _, l := range levels { // first, so that no group is left without readings
		for i, c := range l.Code {
			if c < 0 {
				place[i] = -1
			}
		}
	}
	all := make([][]branch, len(levels))
	for k, l := range levels {
		seen := map[branch]int32{}
		var groups []branch
		var recent [64]struct { // rows of one group often follow each other, or take turns
			branch
			id int32
		}
		for i := range recent {
			recent[i].code = -1
		}
		for i, p := range place {
			if p < 0 {
				continue
			}
			b := branch{p, l.Code[i]}
			r := &recent[uint32(b.parent*31+b.code)%64]
			if r.branch != b {
				id, ok := seen[b]
				if !ok {
					id = int32(len(groups))
					seen[b] = id
					groups = append(groups, b)
				}
				r.branch, r.id = b, id
			}
			place[i] = r.id
		}
		all[k] = groups
	}
	return all
}

// summarise takes means and sums of squares in two passes, sums being of
// deviations from each cell's first reading.
func summarise(y []float64, place []int32, n int) []Cell {
	cells := make([]Cell, n)
	first := make([]float64, n)
	sum := make([]float64, n)
	for i, p := range place {
		if p < 0 {
			continue
		}
		c := &cells[p]
		if c.N == 0 {
			first[p] = y[i]
		}
		c.N++
		sum[p] += y[i] - first[p]
	}
	for p := range cells {
		cells[p].Mean = first[p] + sum[p]/float64(cells[p].N)
		sum[p] = 0
	}
	for i, p := range place {
		if p < 0 {
			continue
		}
		e := y[i] - cells[p].Mean
		sum[p] += e
		cells[p].SS += float64(e * e)
	}
	for p := range cells {
		c := &cells[p]
		c.SS = math.Max(0, c.SS-sum[p]*sum[p]/float64(c.N)) // the mean was rounded
	}
	return cells
}

// arrange sorts the groups of each level by group above, then code.
func (d *Design) arrange(levels []Level, paths [][]branch, cells []Cell) {
	rank := []int32{0} // of the groups of the level above; the root is group 0
	for k, groups := range paths {
		order := make([]int32, len(groups))
		for i := range order {
			order[i] = int32(i)
		}
		slices.SortFunc(order, func(a, b int32) int {
			x, y := groups[a], groups[b]
			return cmp.Or(cmp.Compare(rank[x.parent], rank[y.parent]), cmp.Compare(x.code, y.code))
		})
		parent := make([]int32, len(order))
		next := make([]int32, len(order))
		for to, from := range order {
			parent[to] = rank[groups[from].parent]
			next[from] = int32(to)
		}
		d.parent = append(d.parent, parent)
		d.names = append(d.names, levels[k].Name)
		if k == len(paths)-1 {
			d.repeats = levels[k].Repeats
			d.cells = make([]Cell, len(cells))
			d.zone = make([]int32, len(cells))
			for to, from := range order {
				d.cells[to] = cells[from]
				d.zone[to] = groups[from].code
			}
		}
		rank = next
	}
}

// groups is the number of groups of level k; of the whole for k = -1, of
// readings for k = the number of levels.
func (d *Design) groups(k int) int {
	switch {
	case k < 0:
		return 1
	case k == len(d.parent):
		return d.N
	}
	return len(d.parent[k])
}

// Groups is the number of groups of each level, outermost first.
func (d *Design) Groups() []int {
	out := make([]int, len(d.parent))
	for k := range out {
		out[k] = d.groups(k)
	}
	return out
}

// total joins all cells.
func (d *Design) total() (all Cell, within float64) {
	for _, c := range d.cells {
		all = all.merge(c)
		within += c.SS
	}
	return all, within
}
