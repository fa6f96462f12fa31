package wafermap

import (
	"math"
	"math/rand/v2"
	"slices"

	"gonum.org/v1/gonum/mat"
)

// Groups are the wafers of a lot by likeness of their maps.
type Groups struct {
	Group []int // by wafer: 0, 1, 2 ... in order of their first wafers; -1 for a wafer without dice
	Count int
	// Distance of two wafers is in standard deviations of what the number of their dice lets
	// chance do, over the features that differ between wafers at all.
	Distance [][]float64
	// Silhouette says how well the groups keep apart, from -1 to 1; NaN for one group.
	Silhouette float64
	Gap        []float64 // gap statistic of 1, 2, ... groups; empty when wafers differ by chance only
	Why        string    // why there is one group, "" when there are more
}

// groupCells are the sectors of four rings: 27 cells of equal area.
var groupCells = [...]int{1, 6, 8, 12}

const (
	mostGroups     = 8
	gapSets        = 60
	fewestToGroup  = 4 // wafers
	wholeWaferNear = 1e-9
)

// GroupWafers groups wafers by their maps: by the fail rates of 27 cells of equal area, and
// by the loss to each kind of signature, which brings in what cells do not see
// (signatures may be nil, else has one list a wafer).
//
// Rates and losses are taken as arcsine of the square root (Anscombe 1948, Biometrika 35,
// 246), in units of their binomial standard deviation. Principal components with a
// variance that noise alone does not reach (Marchenko and Pastur 1967, Math. USSR Sb. 1, 457) are
// kept; where there is none, the wafers differ by chance only. Otherwise they are joined
// from the bottom up by least growth of the sum of squares (Ward 1963, J. Am. Stat. Assoc.
// 58, 236), and the number of groups is the smallest whose gap statistic comes within a
// standard error of the highest (Tibshirani, Walther and Hastie 2001, J. R. Stat. Soc. B 63,
// 411, with reference sets drawn evenly along the components, seeded; their own rule stops
// before three groups of which no two are nearer). One group is a possible outcome. Wafers without
// dice on the disc belong to no group.
func GroupWafers(g Geometry, wafers []WaferFails, signatures [][]Signature) Groups {
	if signatures != nil && len(signatures) != len(wafers) {
		panic("wafermap: wafers and signatures differ in length")
	}
	out := Groups{Group: make([]int, len(wafers)), Distance: make([][]float64, len(wafers)), Silhouette: nan, Count: 1}
	for i := range out.Distance {
		out.Group[i] = -1
		out.Distance[i] = make([]float64, len(wafers))
		for j := range out.Distance[i] {
			out.Distance[i][j] = nan
		}
	}
	features, use := mapFeatures(g, wafers, signatures)
	for _, w := range use {
		out.Group[w] = 0
	}
	switch {
	case len(use) == 0:
		out.Count = 0
		out.Why = "no wafer has dice on the disc"
		return out
	case len(use) < fewestToGroup:
		out.Why = "fewer than four wafers are not grouped"
		return out
	}
	points := components(features)
	for a, i := range use {
		for b, j := range use {
			out.Distance[i][j] = math.Sqrt(distance2(points[a], points[b]))
		}
	}
	if len(points[0]) == 0 {
		out.Why = "the wafers differ by no more than chance"
		return out
	}
	tree := ward(points)
	k := 0
	k, out.Gap = gapChoice(points, tree)
	if k == 1 {
		out.Why = "the wafers differ, but do not fall into groups"
		return out
	}
	labels := cutTree(tree, len(points), k)
	out.Count = k
	for a, w := range use {
		out.Group[w] = labels[a]
	}
	out.Silhouette = silhouette(points, labels, k)
	return out
}

// mapFeatures returns a row of features for each wafer that has dice on the disc, and which
// wafers those are.
func mapFeatures(g Geometry, wafers []WaferFails, signatures [][]Signature) (features [][]float64, use []int) {
	total := 0
	for _, n := range groupCells {
		total += n
	}
	radius := g.testedRadius()
	cell := func(x, y int32) int {
		mmX, mmY := g.Position(x, y)
		share := (mmX*mmX + mmY*mmY) / (radius * radius)
		if math.IsNaN(share) { // no disc: one cell
			return 0
		}
		at, below := min(share, 1-wholeWaferNear)*float64(total), 0
		for _, n := range groupCells {
			if at < float64(below+n) {
				return below + max(0, sector(mmX, mmY, n))
			}
			below += n
		}
		return total - 1
	}
	var kinds []string
	for _, list := range signatures {
		for _, s := range list {
			if s.Kind != "random" && s.Kind != "none" && !slices.Contains(kinds, s.Kind) {
				kinds = append(kinds, s.Kind)
			}
		}
	}
	slices.Sort(kinds)
	var dice [][]float64
	for w, wafer := range wafers {
		if len(wafer.X) != len(wafer.Y) || len(wafer.X) != len(wafer.Fail) {
			panic("wafermap: X, Y and Fail differ in length")
		}
		n, o := make([]float64, total), make([]float64, total)
		all := 0.0
		for i := range wafer.X {
			if !placed(wafer.X[i], wafer.Y[i]) {
				continue
			}
			c := cell(wafer.X[i], wafer.Y[i])
			n[c]++
			all++
			if wafer.Fail[i] {
				o[c]++
			}
		}
		if all == 0 {
			continue
		}
		row := make([]float64, total+len(kinds))
		for c := range n {
			row[c] = math.Asin(math.Sqrt((o[c] + 0.375) / (n[c] + 0.75)))
		}
		for k, kind := range kinds {
			for _, s := range signatures[w] {
				if s.Kind == kind {
					row[total+k] += max(0, s.Loss)
				}
			}
			row[total+k] = math.Asin(math.Sqrt(min(1, row[total+k])))
			n = append(n, all)
		}
		features, dice, use = append(features, row), append(dice, n), append(use, w)
	}
	// into units of the standard deviation, 1/sqrt(4n+2); cells without dice say nothing
	for c := range total + len(kinds) {
		mean, weight := 0.0, 0.0
		for w := range features {
			mean += dice[w][c] * features[w][c]
			weight += dice[w][c]
		}
		for w := range features {
			if weight == 0 || dice[w][c] == 0 {
				features[w][c] = 0
				continue
			}
			features[w][c] = (features[w][c] - mean/weight) * math.Sqrt(4*dice[w][c]+2)
		}
	}
	return features, use
}

// components projects features on the principal components that are more than noise of
// variance 1.
func components(features [][]float64) [][]float64 {
	rows, cols := len(features), len(features[0])
	x := mat.NewDense(rows, cols, nil)
	for i, row := range features {
		x.SetRow(i, row)
	}
	for c := range cols { // equal weights for the wafers
		mean := 0.0
		for i := range rows {
			mean += x.At(i, c) / float64(rows)
		}
		for i := range rows {
			x.Set(i, c, x.At(i, c)-mean)
		}
	}
	points := make([][]float64, rows)
	var svd mat.SVD
	if !svd.Factorize(x, mat.SVDThin) {
		return points
	}
	values := svd.Values(nil)
	var u mat.Dense
	svd.UTo(&u)
	// the edge of the Marchenko-Pastur law, and a little for its spread with few wafers
	edge := sq(1+math.Sqrt(float64(cols)/float64(rows-1))) * 1.25
	for k, s := range values {
		if s*s/float64(rows-1) <= edge {
			break
		}
		for i := range points {
			points[i] = append(points[i], u.At(i, k)*s)
		}
	}
	return points
}

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
