package causes

import (
	"math"

	"gonum.org/v1/gonum/mat"
)

// levelCause is a cause's move of levels, ready to be taken out of readings. Its size
// is told in sigmas of the healthy spread of wafers, along the curve of moves: the
// one by which the size is known is then 1, whatever the cause.
type levelCause struct {
	j        *judged
	healthy  *density    // of a wafer's levels about the healthy ones
	at       []float64   // sizes, from 0
	moves    [][]float64 // by size and test of the frame
	variants []*density  // of levels at each size but 0
	odds     []float64   // by wafer: log odds that the move is there
	size     []float64   // by wafer
}

// levelCause prepares a variant; nil when it moves nothing.
func (j *judged) levelCause(x *seen, weights *Weights) *levelCause {
	if x == nil || len(x.v.moves) == 0 || len(j.f.tests) == 0 {
		return nil
	}
	f := j.f
	sigma := make([]float64, len(f.tests))
	for i := range sigma {
		sigma[i] = f.wafer[i]
		if j.s.hasLot {
			sigma[i] = math.Hypot(sigma[i], f.lot[i])
		}
	}
	l := &levelCause{j: j, healthy: f.newDensity(sigma, nil, nil), at: []float64{0}, moves: [][]float64{make([]float64, len(sigma))}}
	step := make([]float64, len(sigma))
	for _, m := range x.v.moves {
		last := l.moves[len(l.moves)-1]
		for i := range step {
			step[i] = m[i] - last[i]
		}
		length := norm(l.healthy.white(step))
		if !(length > 1e-6) || math.IsInf(length, 0) {
			continue
		}
		l.at = append(l.at, l.at[len(l.at)-1]+length)
		l.moves = append(l.moves, m)
		l.variants = append(l.variants, f.about(sigma, m))
	}
	if len(l.at) < 2 {
		return nil
	}
	l.odds, l.size = make([]float64, len(j.e.Wafers)), make([]float64, len(j.e.Wafers))
	for w := range l.odds {
		l.odds[w], l.size[w] = l.judge(w, x, weights)
	}
	return l
}

// priorShare is the share of wafers that a cause hits, before any is seen.
const priorShare = 0.3

// judge finds the log odds that wafer w has the move, and the move's size.
func (l *levelCause) judge(w int, x *seen, weights *Weights) (odds, size float64) {
	y := l.wafer(w)
	usual := l.healthy.at(y)
	ratios := make([]float64, len(l.variants))
	for i, d := range l.variants {
		ratios[i] = d.at(y) - usual
	}
	odds = weights.View[waferView]*logMean(ratios) + math.Log(priorShare/(1-priorShare))
	if w < len(x.inZones) && !math.IsInf(x.inZones[w], 0) {
		odds += weights.View[zoneView] * x.inZones[w]
	}
	const steps = 60
	best := math.Inf(1)
	top := l.at[len(l.at)-1]
	r := make([]float64, len(y))
	for s := range steps + 1 {
		a := top * float64(s) / steps
		m := l.move(a)
		for i := range r {
			if r[i] = y[i] - m[i]; math.IsNaN(r[i]) {
				r[i] = 0
			}
		}
		if q := norm(l.healthy.white(r)); q < best {
			best, size = q, a
		}
	}
	return odds, size
}

// wafer is a wafer's levels over the frame's tests.
func (l *levelCause) wafer(w int) []float64 {
	y := make([]float64, len(l.j.f.tests))
	for i, t := range l.j.f.tests {
		y[i] = l.j.e.Wafers[w].Level[t]
	}
	return y
}

// move is the move of a size, between those of the grid; beyond it the last goes on.
func (l *levelCause) move(a float64) []float64 {
	k := 1
	for k < len(l.at)-1 && a > l.at[k] {
		k++
	}
	by := (a - l.at[k-1]) / (l.at[k] - l.at[k-1])
	out := make([]float64, len(l.moves[k]))
	for i := range out {
		out[i] = l.moves[k-1][i] + by*(l.moves[k][i]-l.moves[k-1][i])
	}
	return out
}

// without judges the dice of wafer w again with the move taken out: by die +1 for one
// that fails and would pass, -1 for the reverse. The sums are of the size as found, and
// of two sigmas less and more.
func (l *levelCause) without(w int, logs [][]float64) (saved []int8, sums [3]float64) {
	span := l.j.e.cols.Wafers[w]
	saved = make([]int8, span.Hi-span.Lo)
	const negligible = -8 // log odds
	if l.odds[w] < negligible {
		return saved, sums
	}
	sizes := l.sizes(w, logs)
	const steps = 64
	top := 1.5 * l.at[len(l.at)-1]
	factors := make([][]float64, steps+1)
	for s := range factors {
		factors[s] = l.move(top * float64(s) / steps)
		for i, m := range factors[s] {
			factors[s][i] = math.Exp(-m)
		}
	}
	error := math.Hypot(1, moveError*l.size[w])
	for i := range saved {
		row := span.Lo + i
		pass := l.j.e.cols.Pass[row]
		was := !pass && l.breaks(row, nil)
		if !pass && !was {
			continue // it does not fail by a reading of these
		}
		for k, off := range [3]float64{0, -z95 * error, z95 * error} {
			a := min(max(0, sizes[i]+off), top)
			is := l.breaks(row, factors[int(math.Round(a/top*steps))])
			var d int8
			switch {
			case was && !is && !l.otherBreaks(row):
				d = 1
			case pass && is && !l.breaks(row, nil):
				d = -1
			}
			if k == 0 {
				saved[i] = d
			}
			sums[k] += float64(d)
		}
	}
	return saved, sums
}

// breaks says whether one of the frame's tests breaks a limit with its reading
// multiplied by factors (nil: as read).
func (l *levelCause) breaks(row int, factors []float64) bool {
	for i, t := range l.j.f.tests {
		test := &l.j.e.cols.Tests[t]
		v := test.Values[row]
		if math.IsNaN(v) {
			continue
		}
		if factors != nil {
			v *= factors[i]
		}
		if low, high := test.breaks(row, v); low || high {
			return true
		}
	}
	return false
}

// otherBreaks says whether a test outside of the frame breaks a limit.
func (l *levelCause) otherBreaks(row int) bool {
	c := l.j.e.cols
	for t := range c.Tests {
		if l.j.f.index(t) >= 0 {
			continue
		}
		if low, high := c.Tests[t].breaks(row, c.Tests[t].Values[row]); low || high {
			return true
		}
	}
	return false
}

// Terms of the smooth size over a wafer, and the fewest dice that it is fitted to.
const (
	sizeTerms = 7
	leastFit  = 40
)

// sizes are the move's size at each die of wafer w: of every die that does not stand
// alone the size along the move's direction, fitted by a surface of second order with
// a term for a steeper bowl. Dice without a place take the wafer's size.
func (l *levelCause) sizes(w int, logs [][]float64) []float64 {
	span, e := l.j.e.cols.Wafers[w], l.j.e
	out := make([]float64, span.Hi-span.Lo)
	for i := range out {
		out[i] = l.size[w]
	}
	x, y := e.cols.places(span)
	if x == nil {
		return out
	}
	along, slope := l.direction(l.size[w])
	base := l.move(l.size[w])
	var normal [sizeTerms][sizeTerms]float64
	var right [sizeTerms]float64
	n := 0
	for i := range out {
		row := span.Lo + i
		if e.class[row] >= 0 || math.IsNaN(x[i]) {
			continue
		}
		s, ok := l.sizeOf(i, logs, along, slope, base)
		if !ok {
			continue
		}
		terms := smoothTerms(x[i], y[i])
		for a := range terms {
			for b := range a + 1 {
				normal[a][b] += terms[a] * terms[b]
			}
			right[a] += terms[a] * s
		}
		n++
	}
	if n < leastFit {
		return out
	}
	c, ok := solve(&normal, &right)
	if !ok {
		return out
	}
	for i := range out {
		if !math.IsNaN(x[i]) {
			s := 0.0
			for a, t := range smoothTerms(x[i], y[i]) {
				s += c[a] * t
			}
			out[i] = l.size[w] + s
		}
	}
	return out
}

// sizeOf is a die's size less its wafer's, by projection of its readings.
func (l *levelCause) sizeOf(die int, logs [][]float64, along, slope, base []float64) (size float64, ok bool) {
	have := 0.0
	for i := range along {
		v := logs[i][die]
		if math.IsNaN(v) {
			continue
		}
		have += along[i] * slope[i]
		size += along[i] * (v - base[i])
	}
	if have < 0.5 {
		return 0, false
	}
	const far = 12 // a reading far off by itself is no place on a smooth surface
	return min(max(size/have, -far), far+l.at[len(l.at)-1]), true
}

// logs are the log ratios of the readings of wafer w, by test of the frame and die; NaN
// for one that is missing or not above zero.
func (j *judged) logs(w int) [][]float64 {
	span := j.e.cols.Wafers[w]
	out := make([][]float64, len(j.f.tests))
	for i, t := range j.f.tests {
		out[i] = make([]float64, span.Hi-span.Lo)
		base := math.Log(j.e.Reference[t])
		for k, v := range j.e.cols.Tests[t].Values[span.Lo:span.Hi] {
			out[i][k] = math.NaN()
			if v > 0 {
				out[i][k] = math.Log(v) - base
			}
		}
	}
	return out
}

// direction is the move's slope at a size and the weights of tests that project onto
// it, which make 1 of the slope itself.
func (l *levelCause) direction(a float64) (along, slope []float64) {
	k := 1
	for k < len(l.at)-1 && a > l.at[k] {
		k++
	}
	slope = make([]float64, len(l.moves[k]))
	for i := range slope {
		slope[i] = (l.moves[k][i] - l.moves[k-1][i]) / (l.at[k] - l.at[k-1])
	}
	along = l.healthy.back(l.healthy.white(slope))
	sum := 0.0
	for i := range along {
		sum += along[i] * slope[i]
	}
	for i := range along {
		along[i] /= sum
	}
	return along, slope
}

// places are the positions of a span's dice over the wafer's radius, NaN without; nil
// when none has one.
func (c *Columns) places(s Span) (x, y []float64) {
	r := c.Geometry.Radius()
	if c.X == nil || c.Y == nil || !(r > 0) {
		return nil, nil
	}
	x, y = make([]float64, s.Hi-s.Lo), make([]float64, s.Hi-s.Lo)
	for i := range x {
		x[i], y[i] = math.NaN(), math.NaN()
		if row := s.Lo + i; c.X[row] != c.Missing && c.Y[row] != c.Missing {
			px, py := c.Geometry.Position(c.X[row], c.Y[row])
			x[i], y[i] = px/r, py/r
		}
	}
	return x, y
}

func smoothTerms(x, y float64) [sizeTerms]float64 {
	r := x*x + y*y
	return [sizeTerms]float64{1, x, y, r, x*x - y*y, x * y, r * r}
}

func solve(normal *[sizeTerms][sizeTerms]float64, right *[sizeTerms]float64) ([sizeTerms]float64, bool) {
	var out [sizeTerms]float64
	s := mat.NewSymDense(sizeTerms, nil)
	for a := range sizeTerms {
		for b := range a + 1 {
			v := normal[a][b]
			if a == b {
				v *= 1 + 1e-9
			}
			s.SetSym(a, b, v)
		}
	}
	var chol mat.Cholesky
	if !chol.Factorize(s) {
		return out, false
	}
	var x mat.VecDense
	if chol.SolveVecTo(&x, mat.NewVecDense(sizeTerms, right[:])) != nil {
		return out, false
	}
	copy(out[:], x.RawVector().Data)
	return out, true
}

// white is a vector in units of the density's spread, correlation taken out.
func (d *density) white(v []float64) []float64 {
	out := make([]float64, d.n)
	for i := range out {
		x := v[i]
		for k := range i {
			x -= d.low[i*d.n+k] * out[k]
		}
		out[i] = x * d.inv[i]
	}
	return out
}

// back solves with the transpose of the density's factor: after white it is the
// inverse of the covariance.
func (d *density) back(v []float64) []float64 {
	out := make([]float64, d.n)
	for i := d.n - 1; i >= 0; i-- {
		x := v[i]
		for k := i + 1; k < d.n; k++ {
			x -= d.low[k*d.n+i] * out[k]
		}
		out[i] = x * d.inv[i]
	}
	return out
}

func norm(v []float64) float64 {
	s := 0.0
	for _, x := range v {
		s += x * x
	}
	return math.Sqrt(s)
}
