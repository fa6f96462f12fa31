package wafermap

import (
	"cmp"
	"math"
	"slices"
)

// Sets of shapes to look for.
const (
	roundShapes = 1<<shapeRing | 1<<shapeArc | 1<<shapeCentre | 1<<shapeAnnulus | 1<<shapeSector | 1<<shapeRamp | 1<<shapeBlob
	allShapes   = 1<<shapes_ - 1
	dearShapes  = 1<<shapeLine | 1<<shapeShot | 1<<shapeComb
	lineLike    = 1<<shapeArc | 1<<shapeSector | 1<<shapeBlob | 1<<shapeBand | 1<<shapeOrder
)

// candidates looks for shapes of a set and returns the best of each, best first.
func (f *field) candidates(set int) []*pattern {
	var all []*pattern
	add := func(s shape, find func() *pattern) {
		if set>>s&1 == 0 {
			return
		}
		if p := find(); p != nil && p.gain > 0 {
			p.judge(f)
			all = append(all, p)
		}
	}
	if f.round {
		add(shapeRing, f.findRing)
		add(shapeArc, f.findArc)
		add(shapeCentre, f.findCentre)
		add(shapeAnnulus, f.findAnnulus)
		add(shapeSector, f.findSector)
	}
	add(shapeRamp, f.findRamp)
	add(shapeBlob, f.findBlob)
	add(shapeLine, f.findLine)
	if set&(1<<shapeShot|1<<shapeComb) != 0 {
		shot, comb := f.findRepeats()
		add(shapeShot, func() *pattern { return shot })
		if f.in.Site == nil {
			add(shapeComb, func() *pattern { return comb })
		}
	}
	add(shapeSite, f.findSite)
	add(shapeOrder, f.findOrder)
	add(shapeBand, f.findBand)
	slices.SortStableFunc(all, func(a, b *pattern) int { return cmp.Compare(b.score, a.score) })
	return all
}

func (p *pattern) judge(f *field) {
	p.score = (p.gain - p.cost - nullLevel[p.shape] - 0.6*(math.Log10(max(f.total.o, 3))-2)*nullSlope[p.shape]) / 1.2
	p.p = 0
}

var nullLevel = [shapes_]float64{.9, 2.7, 1.1, 4.9, 4.0, 2.9, .4, 1.1, -2.4, -2, 1.4, -1.2, 1.8}
var nullSlope = [shapes_]float64{.2, .2, .2, .4, 1, 1, 0, 0, 0, 0, .3, 0, .3}
var freedom = [shapes_]float64{1, 3, 2, 3, 4, 5, 1, 2, 0, 0, 2, 0, 2}

const enoughScore = 7

// choose names the pattern: of the candidates whose evidence comes near the best, the
// one that explains most for what it is free to fit.
func (f *field) choose(found []*explained, c []*pattern) *explained {
	return f.rank(found, c)[0]
}

func (f *field) rank(found []*explained, c []*pattern) []*explained {
	var all []*explained
	before := 0.0
	if len(found) > 0 {
		before = f.fitMixture(f.mix(found)).likelihood
	}
	for _, p := range c {
		if p.score < 0.6*c[0].score || p.score < enoughScore {
			break
		}
		x := f.explain(p)
		gain := p.gain
		if p.shape != shapeRamp {
			gain = max(gain, f.depthGain(x)-1)
		}
		if len(found) > 0 {
			gain += f.fitMixture(f.mix(append(slices.Clone(found), x))).likelihood - before - f.depthGain(x)
		}
		p.named = p.score + (gain-p.gain-freedom[p.shape]/2*math.Log(2*max(gain, 1)))/1.2
		all = append(all, x)
	}
	slices.SortStableFunc(all, func(a, b *explained) int { return cmp.Compare(b.named, a.named) })
	return all
}

const mostPatterns = 8

// grow adds patterns of a set of shapes to a model until no more are found. Lines and
// repeats take longest to look for, so they come last, each as long as it is found.
func (f *field) grow(found []*explained, set int) []*explained {
	for len(found) < mostPatterns {
		f.refit(found)
		c := f.candidates(set &^ dearShapes)
		if len(c) == 0 || c[0].score < enoughScore {
			if c = f.candidates(set & dearShapes); len(c) == 0 || c[0].score < enoughScore {
				break
			}
		} else if set>>shapeLine&1 == 1 && lineLike>>c[0].shape&1 == 1 {
			c = merge(c, f.candidates(1<<shapeLine))
		}
		found = append(found, f.choose(found, c))
	}
	return found
}

func merge(a, b []*pattern) []*pattern {
	all := append(a, b...)
	slices.SortStableFunc(all, func(a, b *pattern) int { return cmp.Compare(b.score, a.score) })
	return all
}

// search finds the patterns of a wafer. A first pattern that is the best
// compromise between two that overlap leads on to a crowd of small repairs; so where
// patterns overlap, other first patterns are tried, and at the end each pattern is
// looked for and named again with the others known.
func (f *field) search() []*explained {
	c := f.candidates(allShapes)
	if len(c) == 0 || c[0].score < enoughScore {
		return nil
	}
	starts := f.rank(nil, c)
	if roundShapes>>starts[0].shape&1 == 0 {
		return f.settle(f.grow(starts[:1:1], allShapes))
	}
	found := f.grow(starts[:1:1], allShapes)
	if touching(found) {
		best := f.worth(found)
		for k := 1; k < len(starts) && k < 4; k++ {
			if roundShapes>>starts[k].shape&1 == 0 {
				continue
			}
			other := f.grow(starts[k:k+1:k+1], allShapes&^dearShapes)
			if w := f.worth(other); w > best {
				best, found = w, other
			}
		}
	}
	return f.settle(f.grow(found, allShapes))
}

// settle looks for each pattern again with the others known, drops those that are
// then not needed, and hides those that only mend another one's outline.
func (f *field) settle(found []*explained) []*explained {
	for range 2 {
		changed := false
		for k := 0; k < len(found); k++ {
			others := slices.Delete(slices.Clone(found), k, k+1)
			if !touches(found[k], others) {
				continue
			}
			f.refit(others)
			set := roundShapes
			if roundShapes>>found[k].shape&1 == 0 {
				set = lineLike | 1<<found[k].shape
			}
			c := f.candidates(set)
			if len(c) == 0 || c[0].score < enoughScore {
				found, changed = others, true
				k--
				continue
			}
			x := f.choose(others, c)
			changed = changed || x.shape != found[k].shape
			found[k] = x
		}
		if !changed {
			break
		}
	}
	for k := 0; k < len(found) && len(found) > 1; {
		others := slices.Delete(slices.Clone(found), k, k+1)
		if touches(found[k], others) && f.worth(others) >= f.worth(found) {
			found, k = others, 0
			continue
		}
		k++
	}
	for _, x := range found {
		x.hidden = false
		for _, y := range found {
			if x != y && x.shape == y.shape && x.gain < mending[x.shape]*y.gain && touches(x, []*explained{y}) {
				x.hidden = true
			}
		}
	}
	return found
}

// mending is the share of the gain of a pattern below which another of the same shape on or
// beside it is taken for a mending of its outline. Some shapes a wafer has only once.
var mending = [shapes_]float64{shapeRing: 1, shapeCentre: 1, shapeRamp: 1, shapeAnnulus: 0.5, shapeArc: 0.25, shapeSector: 0.25, shapeBlob: 0.25, shapeLine: 0.25, shapeBand: 0.25, shapeOrder: 0.25}

// touches reports whether a pattern lies on or next to another.
func touches(x *explained, others []*explained) bool {
	const near = 7 // layers
	for _, y := range others {
		var both, inX, inY int
		for i, d := range x.depth {
			switch e := y.depth[i]; {
			case d <= near && e <= near:
				both++
				fallthrough
			case d <= near:
				inX++
			case e <= near:
				inY++
			}
		}
		if x.shape == shapeRamp || y.shape == shapeRamp || float64(both) > 0.05*float64(min(inX, inY+both)) {
			return true
		}
	}
	return false
}

func touching(found []*explained) bool {
	for k, x := range found {
		if touches(x, found[k+1:]) {
			return true
		}
	}
	return false
}

func (f *field) worth(found []*explained) float64 {
	w := f.refit(found).likelihood
	for _, x := range found {
		w -= x.cost + nullLevel[x.shape] + freedom[x.shape]/2*math.Log(2*max(x.gain, 1)) + 3
	}
	return w
}
