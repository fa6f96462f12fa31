package causes

import (
	"math"
	"slices"

	"gonum.org/v1/gonum/blas"
	"gonum.org/v1/gonum/blas/blas64"
	"gonum.org/v1/gonum/lapack/lapack64"
)

// Error of a predicted move: a share of the move itself, and a share of the
// whole shift's size in every test (in its own sigmas). Reputable device models
// differ by as much.
const (
	moveError   = 0.2
	spillError  = 0.04
	tail        = 8.0 // degrees of freedom: real spreads have heavier tails than Gaussian ones
	sizesOnGrid = 9
)

// variant is one way in which a hypothesis moves levels: moves[i] is the vector
// over the frame's tests at the i-th size.
type variant struct {
	cause     int // index into the catalogue; -1 for the unknown
	direction int
	test      int // the only test that is off, -1
	moves     [][]float64
	lot       []*density // of levels at each size
	wafer     []*density
	zone      []*density
}

// density is a multivariate t about a centre, as its whitening.
type density struct {
	low   []float64 // lower triangle of the Cholesky factor, row by row
	inv   []float64 // one over its diagonal
	log   float64   // log of the normalising factor, but for what all have in common
	n     int
	shift []float64 // centre; nil: 0
}

// newDensity makes the density of correlated spreads sigma, with further
// independent sigmas extra.
func (f *frame) newDensity(sigma, extra, centre []float64) *density {
	n := len(sigma)
	if n == 0 {
		return &density{}
	}
	s := make([]float64, n*n) // row by row, lower triangle
	for i := range n {
		for j := range i {
			s[i*n+j] = f.correlation.At(i, j) * sigma[i] * sigma[j]
		}
		s[i*n+i] = sigma[i] * sigma[i]
		if extra != nil {
			s[i*n+i] += extra[i] * extra[i]
		}
	}
	if _, ok := lapack64.Potrf(blas64.Symmetric{N: n, Stride: n, Data: s, Uplo: blas.Lower}); !ok {
		clear(s) // cannot be: a correlation drawn towards none
		for i := range n {
			s[i*n+i] = sigma[i]
			if extra != nil {
				s[i*n+i] = math.Hypot(sigma[i], extra[i])
			}
		}
	}
	d := &density{n: n, shift: centre, low: s, inv: make([]float64, n)}
	for i := range n {
		d.inv[i] = 1 / s[i*n+i]
		d.log += math.Log(d.inv[i])
	}
	return d
}

// at is the log density of y; missing tests (NaN) are taken as expected.
func (d *density) at(y []float64) float64 {
	var buf [64]float64
	w := buf[:0]
	q, seen := 0.0, 0
	for i := range d.n {
		v := 0.0
		if !math.IsNaN(y[i]) {
			v = y[i]
			if d.shift != nil {
				v -= d.shift[i]
			}
			seen++
		} else {
			w = append(w, 0)
			continue
		}
		row := d.low[i*d.n : i*d.n+i]
		for j, x := range w {
			v -= row[j] * x
		}
		v *= d.inv[i]
		w = append(w, v)
		q += v * v
	}
	return d.log - (tail+float64(seen))/2*math.Log1p(q/tail)
}

// null are the densities when nothing is wrong.
type null struct{ lot, wafer, zone *density }

func (f *frame) null() null {
	return null{f.newDensity(f.lot, nil, nil), f.newDensity(f.wafer, nil, nil), f.newDensity(f.zone, nil, nil)}
}

// variants lists every way in which the catalogue's causes move levels.
func (f *frame) variants(k *Catalogue) []*variant {
	var out []*variant
	for c := range k.Causes {
		e := &k.Causes[c]
		directions := max(1, len(e.Directions))
		for d := range directions {
			for s := range e.Shifts {
				signs := []float64{1 - 2*float64(d)}
				if e.Shifts[s].Both {
					signs = []float64{1, -1}
				}
				for _, sign := range signs {
					v := f.shiftVariant(&e.Shifts[s], sign)
					v.cause, v.direction, v.test = c, d, -1
					out = append(out, f.complete(v))
				}
			}
		}
		if e.Setup {
			for i := range f.tests {
				for _, sign := range []float64{1, -1} {
					v := &variant{cause: c, test: f.tests[i], moves: f.scaled(i, sign)}
					out = append(out, f.complete(v))
				}
			}
		}
	}
	return out
}

// sizes are evenly spread over the logarithm.
func sizes(from, to float64) []float64 {
	out := make([]float64, sizesOnGrid)
	for i := range out {
		out[i] = from * math.Pow(to/from, float64(i)/(sizesOnGrid-1))
	}
	return out
}

func (f *frame) shiftVariant(s *Shift, sign float64) *variant {
	v := &variant{}
	for _, size := range sizes(s.From, s.To) {
		move := make([]float64, len(f.tests))
		sound := true
		for i, t := range f.tests {
			move[i] = f.slope.move(t, s, sign*size)
			sound = sound && !math.IsNaN(move[i])
		}
		if sound { // beyond it the transistor does not work at all
			v.moves = append(v.moves, move)
		}
	}
	return v
}

// scaled are the moves of one test that is read wrongly.
func (f *frame) scaled(i int, sign float64) [][]float64 {
	to := 1.5
	if kind(f.e.cols.Tests[f.tests[i]].Measures) == leakage {
		to = 7
	}
	var out [][]float64
	for _, size := range sizes(max(0.03, 1.5*f.lot[i]), to) {
		move := make([]float64, len(f.tests))
		move[i] = sign * size
		out = append(out, move)
	}
	return out
}

// complete makes a variant's densities.
func (f *frame) complete(v *variant) *variant {
	for _, move := range v.moves {
		v.lot = append(v.lot, f.about(f.lot, move))
		v.wafer = append(v.wafer, f.about(f.wafer, move))
		v.zone = append(v.zone, f.about(f.zone, move))
	}
	return v
}

// about is the density of levels that spread by sigma about a predicted move.
func (f *frame) about(sigma, move []float64) *density {
	size := 0.0
	for i, m := range move {
		size += m * m / (sigma[i] * sigma[i])
	}
	size = math.Sqrt(size)
	extra := make([]float64, len(move))
	for i, m := range move {
		extra[i] = math.Hypot(moveError*m, spillError*size*sigma[i])
	}
	return f.newDensity(sigma, extra, move)
}

// unknown are the densities of levels of which the given tests (nil: all) are off in
// no known direction.
func (f *frame) unknown(sigma []float64, tests []int) []*density {
	var out []*density
	for _, times := range []float64{4, 10, 30} {
		extra := make([]float64, len(sigma))
		for i, s := range sigma {
			if tests == nil || slices.Contains(tests, i) {
				extra[i] = times * s
			}
		}
		out = append(out, f.newDensity(sigma, extra, nil))
	}
	return out
}
