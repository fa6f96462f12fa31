package wafermap

import (
	"cmp"
	"slices"
)

// Cluster is one group of failing dice that hang together neighbour by neighbour.
type Cluster struct {
	Dice                   int
	CentreX, CentreY       float64 // mean position, die coordinates
	MinX, MaxX, MinY, MaxY int32
	Rows                   []int32 // its dice, by y, then x
}

// Labels numbers the connected groups of failing dice: 0 for dice that pass or
// take no part, else 1, 2, ... by the group's first die in raster order (y, then
// x). It returns one label a row, and the number of groups.
func (g *Grid) Labels(fail []bool, n Neighbours) (labels []int32, groups int) {
	g.check(len(fail))
	labels = make([]int32, len(fail))
	ways := g.ways(n.all())
	var stack []int32
	for _, seed := range g.order {
		if !fail[seed] || labels[seed] != 0 {
			continue
		}
		groups++
		labels[seed] = int32(groups)
		stack = append(stack[:0], seed)
		for len(stack) > 0 {
			r := stack[len(stack)-1]
			stack = stack[:len(stack)-1]
			for _, q := range ways.from(r) {
				if fail[q] && labels[q] == 0 {
					labels[q] = int32(groups)
					stack = append(stack, q)
				}
			}
		}
	}
	return labels, groups
}

// Clusters returns the connected groups of at least minimum failing dice, largest
// first, equal ones by their first die in raster order. Whether a cluster is
// more than chance is a question for the join counts: at a fail rate of a
// tenth and queen neighbours, clusters of five are everyday.
func (g *Grid) Clusters(fail []bool, n Neighbours, minimum int) []Cluster {
	labels, groups := g.Labels(fail, n)
	sizes := make([]int, groups)
	for _, r := range g.order {
		if l := labels[r]; l > 0 {
			sizes[l-1]++
		}
	}
	place := make([]int, groups) // 1 + position in out, 0 for groups too small
	var out []Cluster
	for l, size := range sizes {
		if size >= minimum {
			out = append(out, Cluster{Rows: make([]int32, 0, size)})
			place[l] = len(out)
		}
	}
	for _, r := range g.order {
		l := labels[r]
		if l == 0 || place[l-1] == 0 {
			continue
		}
		c := &out[place[l-1]-1]
		x, y := g.x[r], g.y[r]
		if c.Dice == 0 {
			c.MinX, c.MaxX, c.MinY, c.MaxY = x, x, y, y
		}
		c.MinX, c.MaxX = min(c.MinX, x), max(c.MaxX, x)
		c.MinY, c.MaxY = min(c.MinY, y), max(c.MaxY, y)
		c.CentreX += float64(x)
		c.CentreY += float64(y)
		c.Dice++
		c.Rows = append(c.Rows, r)
	}
	for i := range out {
		out[i].CentreX /= float64(out[i].Dice)
		out[i].CentreY /= float64(out[i].Dice)
	}
	slices.SortStableFunc(out, func(a, b Cluster) int { return cmp.Compare(b.Dice, a.Dice) })
	return out
}
