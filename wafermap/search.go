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
	compromise  = 1<<shapeArc | 1<<shapeBlob | 1<<shapeSector // that two others together may look like
	lineLike    = 1<<shapeArc | 1<<shapeSector | 1<<shapeBlob | 1<<shapeBand | 1<<shapeOrder
)

// candidates looks for shapes of a set and returns the best of each, ranked. The
// shapes that take longest are looked for anew only when fresh, else among what was
// found the last time.
func (f *field) candidates(set int, fresh bool) []*pattern {
	var all []*pattern
	add := func(s shape, find func() *pattern) {
		if set>>s&1 == 0 {
			return
		}
		f.pending &^= 1 << s
		if p := find(); p != nil && p.gain > 0 {
			f.judge(p)
			all = append(all, p)
			if dearShapes>>s&1 == 1 && p.told {
				f.pending |= 1 << s
			}
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
	add(shapeLine, func() *pattern { return f.findLine(fresh) })
	if set&(1<<shapeShot|1<<shapeComb) != 0 {
		shot, comb := f.findRepeats(fresh)
		add(shapeShot, func() *pattern { return shot })
		add(shapeComb, func() *pattern { return comb })
	}
	add(shapeSite, f.findSite)
	add(shapeOrder, f.findOrder)
	add(shapeBand, f.findBand)
	return ranked(all)
}

// ranked sorts patterns: those beyond chance first, then by net evidence.
func ranked(all []*pattern) []*pattern {
	slices.SortStableFunc(all, func(a, b *pattern) int {
		if a.told != b.told {
			if a.told {
				return -1
			}
			return 1
		}
		return cmp.Compare(b.net, a.net)
	})
	return all
}

// choose names the pattern: of the candidates whose evidence comes near the best, the
// one that explains most for what it is free to fit.
func (f *field) choose(found []*explained, c []*pattern) *explained {
	x := f.rank(found, c)[0]
	f.keep(x)
	return x
}

// keep remembers what a pattern of the dear shapes was fitted from, to find it again.
func (f *field) keep(x *explained) {
	switch x.shape {
	case shapeLine:
		f.keptStarts = append(f.keptStarts, x.start)
	case shapeShot, shapeComb:
		f.keptPeriods = append(f.keptPeriods, x.start)
	}
}

// rank explains the fails by each of the candidates that come near the first, and sorts
// them by what that is worth.
func (f *field) rank(found []*explained, c []*pattern) []*explained {
	rivals := 1
	for rivals < len(c) && c[rivals].told && c[rivals].net >= 0.6*c[0].net {
		rivals++
	}
	if rivals == 1 {
		return []*explained{f.explain(c[0])}
	}
	var all []*explained
	var before float64
	var m *mixture
	if len(found) > 0 {
		m = f.mix(found)
		before = f.fitMixture(m).likelihood
	}
	for _, p := range c[:rivals] {
		x := f.explain(p)
		depth := f.depthGain(x)
		gain := p.gain
		if p.shape != shapeRamp {
			gain = max(gain, depth-1)
		}
		if len(found) > 0 { // what it adds to the others, overlap and all
			both, _ := f.countSplit(m, x)
			gain += f.fitMixture(both).likelihood - before - depth
		}
		p.named = p.net + gain - p.gain - p.freedom()/4*math.Log(2*max(gain, 1))
		all = append(all, x)
	}
	slices.SortStableFunc(all, func(a, b *explained) int { return cmp.Compare(b.named, a.named) })
	return all
}

// freedom is the number of continuous parameters of a shape: each costs half the
// logarithm of the evidence when models are compared (Schwarz 1978, Ann. Stat. 6, 461),
// because the better the evidence, the more finely it tells them. When shapes are
// compared that have also paid for the number of places looked at, it is half of that.
var freedom = [shapes_]float64{shapeRing: 1, shapeArc: 3, shapeCentre: 2, shapeAnnulus: 3, shapeLine: 4, shapeBlob: 5, shapeRamp: 1, shapeSector: 2, shapeBand: 2, shapeOrder: 2}

func (p *pattern) freedom() float64 {
	k := freedom[p.shape]
	if (p.shape == shapeRing || p.shape == shapeAnnulus) && math.Hypot(p.cu, p.cv) > 0.02 {
		k += 2
	}
	return k
}

const mostPatterns = 8

// grow adds patterns of a set of shapes to a model until no more are found.
func (f *field) grow(found []*explained, set int) []*explained {
	searched := false // lines and repeats, when the last pattern was found
	for len(found) < mostPatterns {
		f.refit(found)
		c := f.candidates(set&^dearShapes|set&f.pending, false)
		switch {
		case len(c) == 0 || !c[0].told:
			if searched && found[len(found)-1].shape == shapeLine && !f.crowded {
				return found // the other starts were tried just now
			}
			c, searched = f.candidates(set&dearShapes, true), true
		case lineLike>>c[0].shape&1 == 1 && set>>shapeLine&1 == 1 && f.pending>>shapeLine&1 == 0:
			c, searched = ranked(append(c, f.candidates(1<<shapeLine, false)...)), false
		default:
			searched = false
		}
		if len(c) == 0 || !c[0].told {
			break
		}
		found = append(found, f.choose(found, c))
	}
	return found
}

// search finds the patterns of a wafer. A first pattern that is the best
// compromise between two that overlap leads on to a crowd of small repairs; so where
// patterns overlap, other first patterns are tried, and at the end each pattern is
// looked for and named again with the others known. Where nothing is found, p is that of
// the strongest place.
func (f *field) search() (found []*explained, p float64) {
	c := f.candidates(allShapes, true)
	if len(c) == 0 {
		return nil, 1
	}
	if !c[0].told {
		p = 1
		for _, x := range c {
			p = min(p, x.p)
		}
		return nil, p
	}
	starts := f.rank(nil, c)
	f.keep(starts[0])
	if roundShapes>>starts[0].shape&1 == 0 {
		return f.settle(f.grow(starts[:1:1], allShapes)), 0
	}
	found = f.grow(starts[:1:1], allShapes)
	if touching(found) || len(found) == 1 && compromise>>starts[0].shape&1 == 1 {
		best, replaced := f.worth(found), false
		for k := 1; k < len(starts) && k < 4; k++ {
			if roundShapes>>starts[k].shape&1 == 0 {
				continue
			}
			other := f.grow(starts[k:k+1:k+1], allShapes&^dearShapes)
			if w := f.worth(other); w > best {
				best, found, replaced = w, other, true
			}
		}
		if replaced {
			found = f.grow(found, allShapes)
		}
	}
	return f.settle(found), 0
}
