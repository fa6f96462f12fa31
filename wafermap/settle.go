package wafermap

import (
	"math"
	"math/bits"
	"slices"
)

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
			c := f.candidates(set, false)
			if (len(c) == 0 || !c[0].told) && dearShapes>>found[k].shape&1 == 1 {
				c = f.candidates(set, true)
			}
			if len(c) == 0 || !c[0].told {
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
	f.close(found)
	for k, x := range found {
		for j, y := range found {
			if j != k && x.shape == y.shape && x.gain < mending[x.shape]*y.gain && touches(x, []*explained{y}) {
				if !x.hidden || y.gain > found[x.mends].gain {
					x.hidden, x.mends = true, j
				}
			}
		}
	}
	return found
}

// close tries whole rings for arcs: where another pattern covers the rest of a ring, an arc
// explains no less than the ring.
func (f *field) close(found []*explained) {
	if len(found) < 2 {
		return
	}
	for k, x := range found {
		if x.shape != shapeArc {
			continue
		}
		p := *x.pattern
		p.shape, p.b, p.cost = shapeRing, farOut, 0
		try := slices.Clone(found)
		try[k] = f.explain(&p)
		if f.worth(try) > f.worth(found) {
			f.judge(&p)
			found[k] = try[k]
		}
	}
}

// mending is the share of the gain of a pattern below which another of the same shape on or
// beside it is taken for a mending of its outline. Some shapes a wafer has only once.
var mending = [shapes_]float64{shapeRing: 1, shapeCentre: 1, shapeRamp: 1, shapeAnnulus: 0.5, shapeArc: 0.25, shapeSector: 0.25, shapeBlob: 0.25, shapeLine: 0.25, shapeBand: 0.25, shapeOrder: 0.25}

const nearLayers = 7 // up to which a die counts as on a pattern or next to it

// touches reports whether a pattern lies on or next to another.
func touches(x *explained, others []*explained) bool {
	for _, y := range others {
		both := 0
		for k, near := range x.near {
			both += bits.OnesCount64(near & y.near[k])
		}
		if x.shape == shapeRamp || y.shape == shapeRamp || float64(both) > 0.05*float64(min(x.dice, y.dice)) {
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
	w := f.fitMixture(f.mix(found)).likelihood
	for _, x := range found {
		w -= f.price(x.pattern) + x.freedom()/2*math.Log(2*max(x.gain, 1))
	}
	return w
}
