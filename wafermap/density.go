package wafermap

import "math"

// Density is the outcome of DensityClusters: by row, the cluster (from 0) or -1 for
// fails that are in none and for dice that pass or take no part; and whether the
// die is a core of its cluster.
type Density struct {
	Labels   []int32
	Core     []bool
	Clusters int
	Noise    int // fails in no cluster
}

// DensityClusters groups failing dice by local density (DBSCAN: Ester, Kriegel,
// Sander and Xu 1996). A fail with at least minimum fails within reach, itself
// included, is a core; cores within reach of each other are one cluster, and fails
// within reach of a core belong to it too. Width and height are those of a die in
// the unit of reach (1 and 1 to count in dice). Clusters are numbered by the first
// core among the rows; a fail within reach of two clusters goes to the lower
// number.
func (g *Grid) DensityClusters(fail []bool, reach, width, height float64, minimum int) Density {
	g.check(len(fail))
	d := Density{Labels: make([]int32, len(fail)), Core: make([]bool, len(fail))}
	for i := range d.Labels {
		d.Labels[i] = -1
	}
	if !(reach >= 0) || !(width > 0) || !(height > 0) {
		panic("wafermap: reach, width and height must be positive")
	}
	var steps []step // a die is within its own reach
	far := reach * (1 + 1e-12)
	for dy := -int(far / height); dy <= int(far/height); dy++ {
		for dx := -int(far / width); dx <= int(far/width); dx++ {
			if math.Hypot(float64(dx)*width, float64(dy)*height) <= far {
				steps = append(steps, step{dx, dy})
			}
		}
	}
	ways := g.ways(steps)
	takes := make([]bool, len(fail)) // failing rows that take part
	for _, r := range g.order {
		if takes[r] = fail[r]; !fail[r] {
			continue
		}
		near := 0
		for _, q := range ways.from(r) {
			if fail[q] {
				near++
			}
		}
		d.Core[r] = near >= minimum
	}
	var stack []int32
	for row := range fail {
		if !takes[row] || !d.Core[row] || d.Labels[row] >= 0 {
			continue
		}
		label := int32(d.Clusters)
		d.Clusters++
		d.Labels[row] = label
		stack = append(stack[:0], int32(row))
		for len(stack) > 0 {
			r := stack[len(stack)-1]
			stack = stack[:len(stack)-1]
			for _, q := range ways.from(r) {
				if !fail[q] || d.Labels[q] >= 0 {
					continue
				}
				if d.Labels[q] = label; d.Core[q] {
					stack = append(stack, q)
				}
			}
		}
	}
	for row, takes := range takes {
		if takes && d.Labels[row] < 0 {
			d.Noise++
		}
	}
	return d
}
