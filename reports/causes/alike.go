package causes

import "math"

// Alike are causes that these tests cannot tell apart by levels: their whitened
// directions have a cosine of at least 0.95, or both move no test at all.
type Alike struct {
	A, B   string
	Cosine float64
}

const alikeCosine = 0.95

// alike compares the directions of all causes that shift levels, at a middle size,
// in the spread of healthy lots.
func (j *judged) alike() []Alike {
	type direction struct {
		cause int
		moves []float64
	}
	var all []direction
	for c := range j.k.Causes {
		e := &j.k.Causes[c]
		for s := range e.Shifts {
			v := j.f.shiftVariant(&e.Shifts[s], 1)
			if len(v.moves) == 0 {
				continue
			}
			all = append(all, direction{c, j.f.whiten(v.moves[len(v.moves)/2])})
		}
	}
	var out []Alike
	best := map[[2]int]float64{}
	for a := range all {
		for b := range a {
			if all[a].cause == all[b].cause {
				continue
			}
			c := math.Abs(cosine(all[a].moves, all[b].moves))
			key := [2]int{all[b].cause, all[a].cause}
			best[key] = max(best[key], c)
		}
	}
	for a := range j.k.Causes {
		for b := range j.k.Causes {
			if c, ok := best[[2]int{a, b}]; ok && c >= alikeCosine {
				out = append(out, Alike{j.k.Causes[a].Cause, j.k.Causes[b].Cause, c})
			}
		}
	}
	return out
}

// whiten divides moves by the healthy spread, correlation taken out.
func (f *frame) whiten(moves []float64) []float64 {
	d := f.newDensity(f.lot, nil, nil)
	out := make([]float64, d.n)
	for i := range out {
		v := moves[i]
		for k := range i {
			v -= d.low[i*d.n+k] * out[k]
		}
		out[i] = v * d.inv[i]
	}
	return out
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
