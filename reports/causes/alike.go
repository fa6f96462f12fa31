package causes

import "math"

// Alike are causes that these tests cannot tell apart by the direction in which levels
// move: whitened, the directions have a cosine of at least 0.95, or both causes move no
// test at all.
type Alike struct {
	A, B   string
	Cosine float64
	// Told says that this lot tells them apart all the same, ten to one: by single
	// dice, maps or flags, or because its shift is so large that a small angle counts.
	Told bool
}

const (
	alikeCosine = 0.95
	toldApart   = 2.3 // nats between two causes: ten to one
)

// alike compares the directions of all causes that shift levels, at a middle size, in
// the spread of healthy lots. A cause that can move levels in several ways is taken
// by the one that fits the lot best where the lot shows one, else by its usual one,
// if it usually moves any.
func (j *judged) alike(w *Weights) []Alike {
	moves, scores := make([][]float64, len(j.k.Causes)), j.scores(w)
	for c := range j.k.Causes {
		e := &j.k.Causes[c]
		if len(e.Shifts) == 0 {
			continue
		}
		v := j.supported(c)
		if v == nil && e.Levels > 0 {
			continue
		}
		if v == nil {
			v = j.f.shiftVariant(&e.Shifts[0], 1)
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
				told := math.Abs(scores[a]-scores[b]) >= toldApart
				out = append(out, Alike{j.k.Causes[a].Cause, j.k.Causes[b].Cause, c, told})
			}
		}
	}
	return out
}

// scores are each cause's log odds, alone and in its better direction.
func (j *judged) scores(w *Weights) []float64 {
	out := make([]float64, len(j.k.Causes))
	for c := range out {
		out[c] = math.Inf(-1)
	}
	for _, h := range j.all {
		if len(h.causes) == 1 {
			out[h.causes[0]] = max(out[h.causes[0]], h.score(w))
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
