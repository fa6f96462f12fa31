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
	var some [cellsAtOnce]int // cells that wait for others: four at a time take a quarter of the loads and stores
	n := 0
	for c := range s.w {
		if s.w[c] == 0 {
			continue
		}
		if some[n] = c; n < cellsAtOnce-1 {
			n++
			continue
		}
		w.addCells(data, rhs, s, some)
		n = 0
	}
	for _, c := range some[:n] {
		w.addCell(data, rhs, s, c)
	}
	return a, b
}

const cellsAtOnce = 4

// addCells adds some cells to normal equations.
func (w *surfaceWork) addCells(data, rhs []float64, s normal, some [cellsAtOnce]int) {
	terms := len(rhs)
	var z [cellsAtOnce][]float64
	for i, c := range some {
		z[i] = w.b.cells[c].z[:terms]
	}
	w0, w1, w2, w3 := s.w[some[0]], s.w[some[1]], s.w[some[2]], s.w[some[3]]
	y0, y1, y2, y3 := s.wy[some[0]], s.wy[some[1]], s.wy[some[2]], s.wy[some[3]]
	for j := range terms {
		a, b, c, d := z[0][j], z[1][j], z[2][j], z[3][j]
		rhs[j] += y0*a + y1*b + (y2*c + y3*d)
		a, b, c, d = w0*a, w1*b, w2*c, w3*d
		row := data[j*terms+j : (j+1)*terms]
		p, q, r, t := z[0][j:][:len(row)], z[1][j:][:len(row)], z[2][j:][:len(row)], z[3][j:][:len(row)]
		for k := range row {
			row[k] += a*p[k] + b*q[k] + (c*r[k] + d*t[k])
		}
	}
}

// addCell adds one.
func (w *surfaceWork) addCell(data, rhs []float64, s normal, c int) {
	terms := len(rhs)
	z := w.b.cells[c].z[:terms]
	for j, v := range z {
		rhs[j] += s.wy[c] * v
		row := data[j*terms+j : (j+1)*terms]
		for k := range row {
			row[k] += s.w[c] * v * z[j+k]
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
