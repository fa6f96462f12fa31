package wafermap

import (
	"math"
	"math/rand/v2"
	"slices"
)

func distance2(a, b []float64) (d float64) {
	for k := range a {
		d += sq(a[k] - b[k])
	}
	return d
}

// join is one step of a hierarchy: clusters a and b become one, the next after all before.
type join struct{ a, b int }

// ward joins points from the bottom up, those first whose union adds least to the sum of
// squares; ties go to the earliest.
func ward(points [][]float64) (tree []join) {
	type cluster struct {
		id     int
		n      float64
		centre []float64
	}
	var live []cluster
	for i, p := range points {
		live = append(live, cluster{i, 1, slices.Clone(p)})
	}
	for next := len(points); len(live) > 1; next++ {
		bestA, bestB, best := 0, 1, math.Inf(1)
		for a := range live {
			for b := a + 1; b < len(live); b++ {
				if d := live[a].n * live[b].n / (live[a].n + live[b].n) * distance2(live[a].centre, live[b].centre); d < best {
					bestA, bestB, best = a, b, d
				}
			}
		}
		a, b := live[bestA], live[bestB]
		tree = append(tree, join{a.id, b.id})
		c := cluster{next, a.n + b.n, make([]float64, len(a.centre))}
		for k := range c.centre {
			c.centre[k] = (a.n*a.centre[k] + b.n*b.centre[k]) / c.n
		}
		live[bestA] = c
		live = slices.Delete(live, bestB, bestB+1)
	}
	return tree
}

// cutTree undoes the last joins until there are k groups, and numbers them by their
// first points.
func cutTree(tree []join, n, k int) []int {
	parent := make([]int, n+len(tree))
	for i := range parent {
		parent[i] = i
	}
	for t, j := range tree[:n-k] {
		parent[j.a], parent[j.b] = n+t, n+t
	}
	labels := make([]int, n)
	var roots []int
	for i := range labels {
		r := i
		for parent[r] != r {
			r = parent[r]
		}
		at := slices.Index(roots, r)
		if at < 0 {
			at = len(roots)
			roots = append(roots, r)
		}
		labels[i] = at
	}
	return labels
}

// spread is the sum of squares within groups.
func spread(points [][]float64, labels []int, k int) float64 {
	centre, n := make([][]float64, k), make([]float64, k)
	for i, p := range points {
		l := labels[i]
		if centre[l] == nil {
			centre[l] = make([]float64, len(p))
		}
		n[l]++
		for d, v := range p {
			centre[l][d] += v
		}
	}
	sum := 0.0
	for i, p := range points {
		for d, v := range p {
			sum += sq(v - centre[labels[i]][d]/n[labels[i]])
		}
	}
	return sum
}

// gapChoice is the number of groups by the gap statistic.
func gapChoice(points [][]float64, tree []join) (k int, gap []float64) {
	n, dims := len(points), len(points[0])
	most := min(mostGroups, n-1)
	lo, hi := slices.Clone(points[0]), slices.Clone(points[0])
	for _, p := range points {
		for d, v := range p {
			lo[d], hi[d] = min(lo[d], v), max(hi[d], v)
		}
	}
	random := rand.New(rand.NewPCG(0x67726f7570, uint64(n)))
	mean, square := make([]float64, most+1), make([]float64, most+1)
	set := make([][]float64, n)
	for range gapSets {
		for i := range set {
			set[i] = make([]float64, dims)
			for d := range set[i] {
				set[i][d] = lo[d] + (hi[d]-lo[d])*random.Float64()
			}
		}
		t := ward(set)
		for k := 1; k <= most; k++ {
			l := math.Log(spread(set, cutTree(t, n, k), k))
			mean[k] += l / gapSets
			square[k] += l * l / gapSets
		}
	}
	slack := make([]float64, most+1)
	for k := 1; k <= most; k++ {
		// what chance alone leaves within groups: nearer than that, wafers are alike
		within := max(spread(points, cutTree(tree, n, k), k), float64((n-k)*dims))
		gap = append(gap, mean[k]-math.Log(within))
		slack[k] = math.Sqrt(max(0, square[k]-mean[k]*mean[k]) * (1 + 1.0/gapSets))
	}
	best := 0
	for k := range gap {
		if gap[k] > gap[best] {
			best = k
		}
	}
	for k := range gap {
		if gap[k] >= gap[best]-slack[best+1] {
			return k + 1, gap
		}
	}
	return most, gap
}

// silhouette is the mean over points of (b-a)/max(a, b), a being the mean distance to the
// own group and b to the nearest other (Rousseeuw 1987, J. Comput. Appl. Math. 20, 53);
// points alone in their group count 0.
func silhouette(points [][]float64, labels []int, k int) float64 {
	total := 0.0
	for i, p := range points {
		sum, n := make([]float64, k), make([]float64, k)
		for j, q := range points {
			if i != j {
				sum[labels[j]] += math.Sqrt(distance2(p, q))
				n[labels[j]]++
			}
		}
		own := labels[i]
		if n[own] == 0 {
			continue
		}
		a, b := sum[own]/n[own], math.Inf(1)
		for l := range sum {
			if l != own {
				b = min(b, sum[l]/n[l])
			}
		}
		if top := max(a, b); top > 0 {
			total += (b - a) / top
		}
	}
	return total / float64(len(points))
}
