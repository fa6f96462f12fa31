package wafermap

import (
	"cmp"
	"fmt"
	"math"
	"math/rand/v2"
	"slices"
)

// ScanOptions says how the scan statistic is computed; the zero value is a good choice.
type ScanOptions struct {
	Simulations int     // random wafers at most; 999 when 0
	MaxShare    float64 // largest window, as a share of the dice; 0.5 when 0
	Level       float64 // clusters with a p-value up to it are returned; 0.05 when 0
	CirclesOnly bool
}

// ScanCluster is a window in which fails are more frequent than outside. Lengths are in
// the geometry's unit from the wafer's centre; in die widths from the middle of the
// dice's box when the geometry is not known.
type ScanCluster struct {
	CentreX, CentreY     float64
	SemiMajor, SemiMinor float64
	Angle                float64 // of the major axis, degrees counter-clockwise from +x, 0 to 180
	Dice, Fails          int
	Expected             float64 // fails, at the wafer's rate
	Risk                 float64 // fail rate inside over that outside; +Inf when there are none outside
	LogRatio             float64 // log-likelihood ratio
	// PValue is the share of random wafers whose strongest window is as strong, (r+1)/(s+1)
	// with r of s. Where none is, PTail says how small the chance is about, from a Gumbel
	// law fitted to the random wafers; else it is PValue.
	PValue, PTail float64
	Rows          []int32 // failing rows inside, by y, then x
}

// Scan is the outcome of the scan statistic.
type Scan struct {
	Clusters    []ScanCluster // strongest first; none overlaps a stronger one
	LogRatio    float64       // of the strongest window, significant or not
	PValue      float64       // its p-value
	Simulations int           // random wafers made
	Windows     int           // looked at on each
	Method      string
	Why         string
}

// scanCells is how many cells the scan's raster has at most (of the dice's box).
const scanCells = 900

// Scan looks for clusters of fails with the spatial scan statistic for the Bernoulli model
// (Kulldorff 1997, Commun. Stat. Theory Methods 26, 1481), with circular and elliptical
// windows (Kulldorff and others 2006, Stat. Med. 25, 3929): of all windows that hold more
// fails than their share, the one with the highest likelihood ratio
//
//	o ln(o/e) + (n-o) ln((n-o)/(n-e)) + the same outside, e = n fails/dice
//
// Its p-value compares it with the strongest windows of wafers on which the same number of
// fails is placed on the tested dice at random; weaker windows that overlap no stronger one
// are compared with the same (which is conservative). Where the wafer turns out to be
// ordinary the simulation stops once twenty random wafers have done as well (Besag and
// Clifford 1991, Biometrika 78, 301), and where none of 199 comes anywhere near. Seeds are
// fixed.
//
// Dice are counted in cells of a raster of up to 900, so that a wafer of 88,000 dice
// takes a fraction of a second; a cluster smaller than a cell is seen as one cell. Fewer
// than two fails, or no passing die, give no clusters and a Why.
func (g *Grid) Scan(geometry Geometry, fail []bool, options ScanOptions) Scan {
	g.check(len(fail))
	if options.Simulations <= 0 {
		options.Simulations = 999
	}
	if !(options.MaxShare > 0) {
		options.MaxShare = 0.5
	}
	if !(options.Level > 0) {
		options.Level = 0.05
	}
	s := Scan{LogRatio: nan, PValue: nan}
	f := newFieldOf(SignatureInput{Grid: g, Geometry: geometry, Fail: fail}, scanCells)
	switch {
	case f.total.n < 4:
		s.Why = fmt.Sprintf("%g dice on the wafer are too few", f.total.n)
	case f.total.o < 2:
		s.Why = fmt.Sprintf("%g fails: a cluster needs at least 2", f.total.o)
	case f.total.o == f.total.n:
		s.Why = "all dice fail"
	}
	if s.Why != "" {
		return s
	}
	w := newWindows(f, options)
	s.Windows = len(w.at)
	s.LogRatio = w.strongest(f.raster.o)
	limit := w.simulate(&s, options)
	for _, k := range w.apart(f.raster.o, limit) {
		s.Clusters = append(s.Clusters, w.cluster(k, &s))
	}
	return s
}

// simulate finds the p-value of the strongest window and returns the ratio that a
// window needs to be significant.
func (w *windows) simulate(s *Scan, options ScanOptions) (limit float64) {
	const enough, plenty = 20, 199
	f := w.f
	random := rand.New(rand.NewPCG(0x7363616e, uint64(f.total.n)<<32|uint64(f.total.o)))
	dice, fails := len(f.rows), int(f.total.o)
	rare := min(fails, dice-fails)
	counts := make([]int32, len(f.raster.o))
	chosen := make([]int32, dice)
	extreme := 0
	for draw := int32(1); int(draw) <= options.Simulations && extreme < enough; draw++ {
		clear(counts)
		for done := 0; done < rare; {
			die := random.IntN(dice)
			if chosen[die] != draw {
				chosen[die] = draw
				counts[f.cell[die]]++
				done++
			}
		}
		if rare < fails { // the passing dice were chosen
			for c, n := range f.raster.n {
				counts[c] = n - counts[c]
			}
		}
		best := w.strongest(counts)
		w.random = append(w.random, best)
		if best >= s.LogRatio {
			extreme++
		}
		if draw == plenty && extreme == 0 && gumbelTail(w.random, s.LogRatio) < 1e-6 {
			break
		}
	}
	s.Simulations = len(w.random)
	s.Method = fmt.Sprintf("Monte Carlo, %d random wafers", s.Simulations)
	s.PValue = float64(extreme+1) / float64(s.Simulations+1)
	if extreme == enough {
		s.PValue = float64(extreme) / float64(s.Simulations)
	}
	if s.Simulations < options.Simulations {
		s.Method += ", stopped early"
	}
	slices.Sort(w.random)
	if s.PValue > options.Level {
		return math.Inf(1)
	}
	// the smallest ratio whose rank still gives a p-value of the level
	rank := int(options.Level*float64(s.Simulations+1)) - 1
	return math.Nextafter(w.random[s.Simulations-1-max(0, rank)], math.Inf(1))
}

// apart lists the windows of at least a ratio that overlap no stronger one.
func (w *windows) apart(fails []int32, limit float64) (chosen []int) {
	if math.IsInf(limit, 1) {
		return nil
	}
	w.load(w.prefix, fails)
	type ranked struct {
		k    int
		gain float64
	}
	var all []ranked
	for i := range w.at {
		k := &w.at[i]
		o := float64(held(w.prefix, w.shapes[k.shape].spans, k.base))
		if gain := w.f.gain(tally{o, k.n, k.e}); gain >= limit {
			all = append(all, ranked{i, gain})
		}
	}
	slices.SortStableFunc(all, func(a, b ranked) int { return cmp.Compare(b.gain, a.gain) })
	taken := make([]bool, len(w.f.raster.n))
	for _, r := range all {
		free := true
		w.visit(r.k, func(c int) { free = free && !taken[c] })
		if free {
			w.visit(r.k, func(c int) { taken[c] = true })
			chosen = append(chosen, r.k)
		}
	}
	return chosen
}

func (w *windows) cluster(k int, s *Scan) ScanCluster {
	f, v := w.f, &w.at[k]
	shape := w.shapes[v.shape]
	o := float64(held(w.prefix, shape.spans, v.base))
	x, y := int(v.base)%w.stride-w.pad, int(v.base)/w.stride-w.pad
	c := ScanCluster{CentreX: (f.u0 + float64(x)*f.du) * f.radius, CentreY: (f.v0 + float64(y)*f.dv) * f.radius,
		SemiMajor: shape.a * f.radius, SemiMinor: shape.b * f.radius, Angle: shape.angle * 180 / math.Pi,
		Dice: int(v.n), Fails: int(o), Expected: v.e, LogRatio: f.gain(tally{o, v.n, v.e})}
	c.Risk = o / v.n / ((f.total.o - o) / (f.total.n - v.n))
	stronger := len(w.random) - fewer(w.random, c.LogRatio)
	c.PValue = float64(stronger+1) / float64(len(w.random)+1)
	c.PTail = c.PValue
	if stronger == 0 {
		c.PTail = min(c.PValue, gumbelTail(w.random, c.LogRatio))
	}
	inside := make([]bool, len(f.raster.o))
	w.visit(k, func(c int) { inside[c] = true })
	for i, r := range f.rows {
		if f.fail[i] && inside[f.cell[i]] {
			c.Rows = append(c.Rows, r)
		}
	}
	return c
}

// fewer finds how many of the sorted values are below x.
func fewer(sorted []float64, x float64) int {
	i, _ := slices.BinarySearch(sorted, x)
	return i
}

// gumbelTail is the chance of at least x by the Gumbel law with the mean and standard
// deviation of a sample (Abrams, Kleinman and Kulldorff 2010, Int. J. Health Geogr. 9, 61).
func gumbelTail(sample []float64, x float64) float64 {
	mean, square := 0.0, 0.0
	for i, v := range sample {
		d := v - mean
		mean += d / float64(i+1)
		square += d * (v - mean)
	}
	scale := math.Sqrt(6*square/float64(len(sample)-1)) / math.Pi
	if !(scale > 0) {
		return 1 / float64(len(sample)+1)
	}
	return -math.Expm1(-math.Exp(-(x-mean)/scale - 0.5772156649015329))
}
