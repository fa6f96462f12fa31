package wafermap

import (
	"math"

	"gonum.org/v1/gonum/mat"
)

// compareOrders chooses the order by cross-validation.
func (w *surfaceWork) compareOrders(s *Surface) {
	orders := 0
	for termsOf(orders+1) <= w.terms {
		orders++
	}
	var loss [surfaceOrder + 1][surfaceFolds]float64
	var held [surfaceFolds]normal
	var square [surfaceFolds]float64
	for fold := range held {
		held[fold] = w.b.newNormal()
	}
	total := 0.0
	for i, p := range w.at {
		c, fold := w.b.cell[p], w.b.fold[p]
		wy := w.weight[i] * w.near[i]
		held[fold].w[c] += w.weight[i]
		held[fold].wy[c] += wy
		square[fold] += wy * w.near[i]
		total += w.weight[i]
	}
	for fold, out := range held {
		in := w.b.newNormal()
		for other := range held {
			if other != fold {
				for c := range in.w {
					in.w[c] += held[other].w[c]
					in.wy[c] += held[other].wy[c]
				}
			}
		}
		a, b := w.equations(in, w.terms)
		for order := range orders + 1 {
			x, ok := solve(a, b, termsOf(order))
			if !ok {
				loss[order][fold] = math.Inf(1)
				continue
			}
			l := square[fold]
			for c := range out.w {
				if out.w[c] == 0 {
					continue
				}
				fitted := 0.0
				for j, v := range x {
					fitted += v * w.b.cells[c].z[j]
				}
				l += fitted * (fitted*out.w[c] - 2*out.wy[c])
			}
			loss[order][fold] = l
		}
	}
	var sum [surfaceOrder + 1]float64
	best := 0
	for order := range orders + 1 {
		for _, l := range loss[order] {
			sum[order] += l
		}
		s.CV = append(s.CV, math.Sqrt(max(0, sum[order])/total))
		if sum[order] < sum[best] {
			best = order
		}
	}
	for order := range best + 1 {
		var d, dd float64
		for fold := range surfaceFolds {
			x := loss[order][fold] - loss[best][fold]
			d += x
			dd += x * x
		}
		// standard error of a sum of five differences
		if order == best || d <= math.Sqrt(max(0, (dd-d*d/surfaceFolds)*surfaceFolds/(surfaceFolds-1))) {
			s.Order, s.Terms = order, termsOf(order)
			break
		}
	}
}

// keep fits the chosen order with the weights of the highest.
func (w *surfaceWork) keep(s *Surface) {
	a, b := w.equations(w.sums(), s.Terms)
	x, _ := solve(a, b, s.Terms)
	s.Coefficients = x
	var c mat.Cholesky
	c.Factorize(a)
	var l mat.TriDense
	c.LTo(&l)
	sum := 0.0
	for i := range w.weight {
		sum += w.weight[i]
	}
	x[0] += w.mean
	s.Orthogonal = make([]float64, s.Terms)
	for j := range s.Terms { // the terms are the rows of L times orthogonal ones
		for i := j; i < s.Terms; i++ {
			s.Orthogonal[j] += l.At(i, j) * x[i] / math.Sqrt(sum)
		}
	}
	for t, v := range x {
		for j, p := range zernikePowers[t] {
			s.coefficients[j] += v * p
		}
	}
	away := make([]float64, 0, len(w.y))
	v := nan
	var row [surfaceOrder + 1]float64
	for i, p := range w.at {
		if w.b.v[p] != v { // dice of a row mostly come together
			v = w.b.v[p]
			row = alongRow(&s.coefficients, v)
		}
		u := w.b.u[p]
		r := w.y[i] + w.mean - ((((((row[6]*u+row[5])*u+row[4])*u+row[3])*u+row[2])*u+row[1])*u + row[0])
		s.Residual[w.b.rows[p]] = r
		away = append(away, math.Abs(r))
		if w.weight[i] == 0 {
			s.Outliers++
		}
	}
	s.Noise = madFactor * w.selector.Median(away)
}
