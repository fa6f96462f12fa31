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

// windows are all windows of a scan over a padded raster, on which none is cut.
type windows struct {
	f      *field
	shapes []scanShape
	at     []window
	pad    int
	stride int
	prefix []int32 // running fails along the padded lines
	random []float64
}

type scanShape struct {
	a, b, angle float64 // radii
	spans       []scanSpan
}

// scanSpan is a stretch of a line of cells in a window, as offsets into prefix.
type scanSpan struct{ from, to int32 }

type window struct {
	shape int16
	base  int32   // of its centre in prefix
	n     float64 // dice
	e     float64 // expected fails
	scale float64 // 1 / (e (1-n/N) (1-p)): turns (o-e)^2 into z^2
}

func newWindows(f *field, options ScanOptions) *windows {
	w := &windows{f: f}
	cell := math.Max(f.du, math.Abs(f.dv))
	w.pad = 0
	type form struct {
		aspect float64
		angles int
	}
	forms := []form{{1, 1}, {2.5, 6}}
	if options.CirclesOnly {
		forms = forms[:1]
	}
	var sizes []float64 // geometric mean radii
	for size := 1.1 * cell; size < 1; size *= 1.38 {
		sizes = append(sizes, size)
	}
	for i, size := range sizes {
		for _, form := range forms {
			if form.aspect > 1 && i == 0 {
				continue
			}
			root := math.Sqrt(form.aspect)
			for k := range form.angles {
				w.shapes = append(w.shapes, scanShape{a: size * root, b: size / root, angle: math.Pi * float64(k) / float64(form.angles)})
				reach := size * root
				w.pad = max(w.pad, int(reach/f.du)+1, int(reach/math.Abs(f.dv))+1)
			}
		}
	}
	w.stride = f.cols + 2*w.pad + 1
	w.prefix = make([]int32, w.stride*(f.lines+2*w.pad))
	dice := make([]int32, len(w.prefix))
	w.load(dice, f.raster.n)
	for s := range w.shapes {
		w.place(int16(s), dice, options.MaxShare)
	}
	return w
}

// load fills running sums with counts by cell.
func (w *windows) load(prefix, count []int32) {
	for j := range w.f.lines {
		run := int32(0)
		row := prefix[(j+w.pad)*w.stride : (j+w.pad+1)*w.stride]
		for i := range w.f.cols {
			run += count[j*w.f.cols+i]
			row[w.pad+i+1] = run
		}
		for i := w.pad + w.f.cols + 1; i < w.stride; i++ {
			row[i] = run
		}
	}
}

// place lists the windows of one shape: centres lie not quite half the smaller radius apart.
func (w *windows) place(s int16, dice []int32, share float64) {
	f, shape := w.f, &w.shapes[s]
	sin, cos := math.Sincos(shape.angle)
	aa, bb := 1/(shape.a*shape.a), 1/(shape.b*shape.b)
	xx, xy, yy := cos*cos*aa+sin*sin*bb, sin*cos*(aa-bb), sin*sin*aa+cos*cos*bb
	half := math.Sqrt(sq(shape.a*sin) + sq(shape.b*cos))
	for j := -int(half / math.Abs(f.dv)); j <= int(half/math.Abs(f.dv)); j++ {
		dy := float64(j) * f.dv
		root := xy*xy*dy*dy - xx*(yy*dy*dy-1)
		if root < 0 {
			continue
		}
		root = math.Sqrt(root)
		from, to := int(math.Ceil((-xy*dy-root)/xx/f.du)), int(math.Floor((-xy*dy+root)/xx/f.du))
		if from <= to {
			shape.spans = append(shape.spans, scanSpan{int32(j*w.stride + from), int32(j*w.stride + to + 1)})
		}
	}
	stepX, stepY := max(1, int(0.45*shape.b/f.du)), max(1, int(0.45*shape.b/math.Abs(f.dv)))
	p := f.total.o / f.total.n
	for y := stepY / 2; y < f.lines; y += stepY {
		for x := stepX / 2; x < f.cols; x += stepX {
			base := int32((y+w.pad)*w.stride + x + w.pad)
			n := float64(held(dice, shape.spans, base))
			if n < 1 || n > share*f.total.n {
				continue
			}
			w.at = append(w.at, window{shape: s, base: base, n: n, e: n * p, scale: 1 / (n * p * (1 - n/f.total.n) * (1 - p))})
		}
	}
}

func held(prefix []int32, spans []scanSpan, base int32) (n int32) {
	for _, s := range spans {
		n += prefix[base+s.to] - prefix[base+s.from]
	}
	return n
}

// strongest is the highest log-likelihood ratio over all windows.
func (w *windows) strongest(fails []int32) float64 {
	w.load(w.prefix, fails)
	best := 0.0
	for i := range w.at {
		k := &w.at[i]
		o := float64(held(w.prefix, w.shapes[k.shape].spans, k.base))
		if d := o - k.e; d <= 0 || d*d*k.scale < 1.2*best { // z^2/2 is not far below the ratio
			continue
		}
		best = max(best, w.f.gain(tally{o, k.n, k.e}))
	}
	return best
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

// visit walks the cells of the raster in a window.
func (w *windows) visit(k int, cell func(c int)) {
	v := &w.at[k]
	for _, s := range w.shapes[v.shape].spans {
		for at := int(v.base + s.from); at < int(v.base+s.to); at++ {
			if i, j := at%w.stride-w.pad, at/w.stride-w.pad; uint(i) < uint(w.f.cols) && uint(j) < uint(w.f.lines) {
				cell(j*w.f.cols + i)
			}
		}
	}
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
