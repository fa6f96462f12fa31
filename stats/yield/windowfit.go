package yield

import "math"

// windowFit is a fit to windows of all sizes.
type windowFit struct {
	yield float64    // of single dice
	terms [3]float64 // l, e, s
	used  [10]bool
}

// basis is how the three terms act on windows of a size.
func basis(size [2]int) [3]float64 {
	a, b := float64(size[0]), float64(size[1])
	return [3]float64{a*b - 1, a + b - 2, 1 - math.Pow(0.5, a*b-1)}
}

// at is minus the logarithm of a size's yield over that of single dice.
func (f *windowFit) at(size [2]int) float64 {
	s := 0.0
	for i, b := range basis(size) {
		s += f.terms[i] * b
	}
	return s
}

// loss is l, no more than all that is lost.
func (f *windowFit) loss() float64 { return math.Min(f.terms[0], -math.Log(f.yield)) }

func (f *windowFit) systematic() float64 { return math.Max(0, 1-f.yield*math.Exp(f.loss())) }
func (f *windowFit) random() float64     { return f.yield * math.Expm1(f.loss()) }
func (f *windowFit) rate() float64       { return -math.Expm1(-f.loss()) }

// fitWindows fits the windows of wafers, each counted so many times.
func fitWindows(wafers []waferWindows, times []float64) (f windowFit, ok bool) {
	var all, good [10]float64
	for i := range wafers {
		if times[i] == 0 {
			continue
		}
		for k := range all {
			all[k] += times[i] * wafers[i].all[k]
			good[k] += times[i] * wafers[i].good[k]
		}
	}
	if !(good[0] > 0) {
		return f, false
	}
	f.yield = good[0] / all[0]
	f.used[0] = true
	var normal [3][3]float64
	var right [3]float64
	sizes := 0
	for k := 1; k < len(windowSizes); k++ {
		if good[k] < enoughGood {
			continue
		}
		f.used[k] = true
		sizes++
		y := good[k] / all[k]
		dice := float64(windowSizes[k][0] * windowSizes[k][1])
		// The variance of ln Y for as many windows as do not overlap.
		weight := all[k] / dice * y / math.Max(1-y, dice/all[k])
		d := math.Log(f.yield / y)
		b := basis(windowSizes[k])
		for i := range b {
			right[i] += weight * b[i] * d
			for j := range b {
				normal[i][j] += weight * b[i] * b[j]
			}
		}
	}
	if sizes < 3 {
		return f, false
	}
	f.terms = notNegative(normal, right)
	return f, true
}

// notNegative solves least squares with three terms that must not be negative: of
// all choices of terms in use, the solution that is allowed and explains most.
func notNegative(normal [3][3]float64, right [3]float64) (best [3]float64) {
	most := 0.0
	for choice := 1; choice < 8; choice++ {
		var in []int
		for i := range 3 {
			if choice&(1<<i) != 0 {
				in = append(in, i)
			}
		}
		t, ok := solveChosen(normal, right, in)
		if !ok {
			continue
		}
		explained := 0.0 // by how much the squares fall
		for _, i := range in {
			explained += t[i] * right[i]
			ok = ok && t[i] >= 0
		}
		if ok && explained > most*(1+1e-12) {
			most, best = explained, t
		}
	}
	return best
}

// solveChosen solves the normal equations of the terms in use by elimination.
func solveChosen(normal [3][3]float64, right [3]float64, in []int) (t [3]float64, ok bool) {
	var a [3][4]float64
	n := len(in)
	for i, p := range in {
		for j, q := range in {
			a[i][j] = normal[p][q]
		}
		a[i][3] = right[p]
	}
	for i := range n {
		if !(a[i][i] > 1e-10*normal[in[i]][in[i]]) {
			return t, false
		}
		for j := i + 1; j < n; j++ {
			f := a[j][i] / a[i][i]
			for c := i; c < 4; c++ {
				a[j][c] -= f * a[i][c]
			}
		}
	}
	for i := n - 1; i >= 0; i-- {
		v := a[i][3]
		for j := i + 1; j < n; j++ {
			v -= a[i][j] * t[in[j]]
		}
		t[in[i]] = v / a[i][i]
	}
	return t, true
}
