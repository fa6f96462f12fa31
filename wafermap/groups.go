package wafermap

import (
	"math"
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
