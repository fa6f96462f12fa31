package wafermap

import "gonum.org/v1/gonum/mat"

// normal are weighted sums over cells.
type normal struct{ w, wy []float64 }

func (b *SurfaceBasis) newNormal() normal {
	return normal{make([]float64, len(b.cells)), make([]float64, len(b.cells))}
}

func (w *surfaceWork) sums() normal {
	s := w.b.newNormal()
	for i, p := range w.at {
		c := w.b.cell[p]
		s.w[c] += w.weight[i]
		s.wy[c] += w.weight[i] * w.near[i]
	}
	return s
}

// equations are the normal equations of some terms.
func (w *surfaceWork) equations(s normal, terms int) (a *mat.SymDense, b *mat.VecDense) {
	a, b = mat.NewSymDense(terms, nil), mat.NewVecDense(terms, nil)
	data, rhs := a.RawSymmetric().Data, b.RawVector().Data
	last := -1 // a cell that waits for another: two at a time take half the loads and stores
	for c := range s.w {
		if s.w[c] == 0 {
			continue
		}
		if last < 0 {
			last = c
			continue
		}
		addPair(data, rhs, w.b.cells[last].z[:terms], w.b.cells[c].z[:terms], s.w[last], s.w[c], s.wy[last], s.wy[c])
		last = -1
	}
	if last >= 0 {
		z := w.b.cells[last].z[:terms]
		addPair(data, rhs, z, z, s.w[last], 0, s.wy[last], 0)
	}
	return a, b
}

// addPair adds two cells to normal equations.
func addPair(data, rhs, p, q []float64, wp, wq, yp, yq float64) {
	terms := len(rhs)
	for j, pj := range p {
		qj := q[j]
		rhs[j] += yp*pj + yq*qj
		fp, fq := wp*pj, wq*qj
		row := data[j*terms+j : (j+1)*terms]
		p, q := p[j:][:len(row)], q[j:][:len(row)]
		for k := range row {
			row[k] += fp*p[k] + fq*q[k]
		}
	}
}

// tells reports whether the first terms of a can be told apart: no term may be almost a
// sum of those before it.
func tells(a *mat.SymDense, terms int) bool {
	var c mat.Cholesky
	if !c.Factorize(a.SliceSym(0, terms)) {
		return false
	}
	var l mat.TriDense
	c.LTo(&l)
	for j := range terms {
		if l.At(j, j)*l.At(j, j) < 1e-3*a.At(j, j) {
			return false
		}
	}
	return true
}

func solve(a *mat.SymDense, b *mat.VecDense, terms int) (x []float64, ok bool) {
	var c mat.Cholesky
	if !c.Factorize(a.SliceSym(0, terms)) {
		return nil, false
	}
	x = make([]float64, terms)
	return x, c.SolveVecTo(mat.NewVecDense(terms, x), b.SliceVec(0, terms).(*mat.VecDense)) == nil
}
