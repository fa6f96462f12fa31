package variance

import (
	"math"
	"slices"

	"gonum.org/v1/gonum/mat"
)

// line ties the variances to fewer free ones: tau = start + basis * free, all
// free ones at least zero. A profile interval holds one variance, or one ratio,
// and lets the others go.
type line struct {
	start []float64
	basis [][]float64 // [variance][free]
}

// letting leaves the variances in free to go, out of n.
func letting(n int, free []int) line {
	l := line{start: make([]float64, n), basis: make([][]float64, n)}
	for i := range n {
		l.basis[i] = make([]float64, len(free))
	}
	for j, i := range free {
		l.basis[i][j] = 1
	}
	return l
}

// holding leaves those in free to go except variance k, which stays at c plus
// ratio times the sum of the others.
func holding(n int, free []int, k int, c, ratio float64) line {
	var others []int
	for _, i := range free {
		if i != k {
			others = append(others, i)
		}
	}
	l := letting(n, others)
	l.start[k] = c
	for j := range others {
		l.basis[k][j] = ratio
	}
	return l
}

func (l line) at(free []float64) []float64 {
	tau := append([]float64{}, l.start...)
	for i, row := range l.basis {
		for j, b := range row {
			tau[i] += b * free[j]
		}
	}
	return tau
}

// smallest keeps the dice's variance off zero; readings have variance one.

const smallest = 1e-14

// minimise finds the free variances with the greatest likelihood, from a start
// that is replaced by them, and returns its value.
//
// Newton's method with exact derivatives. Where the likelihood is not yet
// rounded like a bowl the curvature is raised until it is, steps that do not help
// are shortened, and variances that would go below zero stay there until the
// slope calls them back (Bertsekas 1982, SIAM J. Control Optim. 20, 221-246).
func (m *model) minimise(l line, free []float64) float64 {
	n := len(free)
	value := func(u []float64) (float64, jet) {
		tau := l.at(u)
		if tau[m.levels] < smallest {
			return math.Inf(1), jet{}
		}
		f, _, _ := m.walk(tau)
		return f.v, f
	}
	best, f := value(free)
	if n == 0 {
		return best
	}
	for range 200 {
		g, h := l.derivatives(f, m.levels+1)
		var open []int
		for i := range n {
			if free[i] > 0 || g[i] < 0 {
				open = append(open, i)
			}
		}
		step, fall := newtonStep(g, h, open)
		for k := 0; k < len(open); k++ { // pushed against zero: hold, and try again
			if free[open[k]] <= 0 && step[k] < 0 {
				open = slices.Delete(open, k, k+1)
				step, fall = newtonStep(g, h, open)
				k = -1
			}
		}
		noise := 1e-14 * math.Abs(best)
		if fall <= 0 {
			break
		}
		moved := false
		for s := 1.0; s*fall > noise || s == 1; s /= 2 {
			next := append([]float64{}, free...)
			for k, i := range open {
				next[i] = math.Max(0, free[i]+s*step[k])
			}
			// Close in, the value no longer tells steps apart but the slope does.
			if v, j := value(next); v < best || v <= best+noise && fall < 1e-6 {
				copy(free, next)
				best, f, moved = v, j, true
				break
			}
		}
		if !moved || fall < 1e-9 {
			break
		}
	}
	return best
}

// derivatives are those of the likelihood by the free variances.
func (l line) derivatives(f jet, n int) (g []float64, h *mat.SymDense) {
	k := len(l.basis[0]) // free ones
	g = make([]float64, k)
	h = mat.NewSymDense(k, nil)
	for a := range k {
		for i := range n {
			g[a] += l.basis[i][a] * f.g[i]
		}
		for b := a; b < k; b++ {
			sum := 0.0
			for i := range n {
				for j := range n {
					sum += l.basis[i][a] * l.basis[j][b] * f.second(i, j)
				}
			}
			h.SetSym(a, b, sum)
		}
	}
	return g, h
}

// newtonStep solves for the step of the open variables, and gives twice the fall
// that it promises. The curvature is raised along each variable's own scale.
func newtonStep(g []float64, h *mat.SymDense, open []int) (step []float64, fall float64) {
	n := len(open)
	if n == 0 {
		return nil, 0
	}
	b := mat.NewVecDense(n, nil)
	for k, i := range open {
		b.SetVec(k, -g[i])
	}
	raise := 0.0
	for range 60 {
		a := mat.NewSymDense(n, nil)
		for k, i := range open {
			for j := k; j < n; j++ {
				a.SetSym(k, j, h.At(i, open[j]))
			}
			size := math.Abs(h.At(i, i)) + 1e-8
			a.SetSym(k, k, h.At(i, i)+raise*size)
		}
		var chol mat.Cholesky
		var x mat.VecDense
		if chol.Factorize(a) && chol.SolveVecTo(&x, b) == nil {
			for k := range n {
				step = append(step, x.AtVec(k))
				fall += x.AtVec(k) * b.AtVec(k)
			}
			return step, fall
		}
		raise = math.Max(1e-3, 4*raise)
	}
	return make([]float64, n), 0
}
