package causes

import "math"

// Alike are causes that these tests cannot tell apart by levels: their whitened
// directions have a cosine of at least 0.95, or both move no test at all.
type Alike struct {
	A, B   string
	Cosine float64
}

const alikeCosine = 0.95

// alike compares the directions of all causes that shift levels, at a middle size, in
// the spread of healthy lots. A cause that can move levels in several ways is taken
// by the one that fits the lot best where the lot shows one, else by its usual one.
func (j *judged) alike() []Alike {
	moves := make([][]float64, len(j.k.Causes))
	for c := range j.k.Causes {
		e := &j.k.Causes[c]
		if len(e.Shifts) == 0 {
			continue
		}
		v := j.f.shiftVariant(&e.Shifts[0], 1)
		if own := j.supported(c); own != nil {
			v = own
		}
		if len(v.moves) > 0 {
			moves[c] = j.f.whiten(v.moves[len(v.moves)/2])
		}
	}
	var out []Alike
	for a := range moves {
		for b := a + 1; b < len(moves); b++ {
			if moves[a] == nil || moves[b] == nil {
				continue
			}
			if c := math.Abs(cosine(moves[a], moves[b])); c >= alikeCosine {
				out = append(out, Alike{j.k.Causes[a].Cause, j.k.Causes[b].Cause, c})
			}
		}
	}
	return out
}

// supported is the variant of a cause that the lot's levels speak for, nil when they
// do for none.
func (j *judged) supported(cause int) *variant {
	var best *seen
	top := 2.0 // nats
	for _, h := range j.all {
		if len(h.causes) != 1 || h.causes[0] != cause || h.sees[0] == nil || h.sees[0].v.test >= 0 {
			continue
		}
		if v := h.views[lotView] + h.views[waferView] + h.views[zoneView]; v > top {
			best, top = h.sees[0], v
		}
	}
	if best == nil {
		return nil
	}
	return best.v
}

// whiten divides moves by the healthy spread, correlation taken out.
func (f *frame) whiten(moves []float64) []float64 {
	return f.newDensity(f.lot, nil, nil).white(moves)
}

func cosine(a, b []float64) float64 {
	var ab, aa, bb float64
	for i := range a {
		ab, aa, bb = ab+a[i]*b[i], aa+a[i]*a[i], bb+b[i]*b[i]
	}
	const still = 1 // sigma: a shift that moves no test is alike to any other such
	if aa < still && bb < still {
		return 1
	}
	if aa == 0 || bb == 0 {
		return 0
	}
	return ab / math.Sqrt(aa*bb)
}
