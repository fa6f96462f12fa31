package wafermap

import (
	"math"
	"slices"

	"gonum.org/v1/gonum/mat"
)

// ratioSigma is how surely dice are expected to be square, as a standard deviation
// of log(height/width): 2.7:1 is two sigmas off.
const ratioSigma = 0.5

// independent is how many points count as independent. How far the hull stays
// inside the circle depends on how rows and columns happen to fall, which is
// alike for neighbouring points and does not average out over their number;
// found by trial on made maps, so that CentreSigma is about right.
const independent = 6

// refine improves a circle by reweighted least squares (Gauss-Newton steps on
// cx, cy, rho and log h).
func (f *fitter) refine(c circle) (circle, bool) {
	n, k := len(f.x), 3
	if f.h == 0 {
		k = 4
	}
	residual := make([]float64, n)
	c.weights = make([]float64, n)
	var normal mat.SymDense
	for iteration := range 60 {
		for i := range residual {
			residual[i] = c.distance(f.x[i], f.y[i]) - c.rho
		}
		grain := f.grain
		if f.h == 0 {
			grain *= math.Sqrt(c.h / c.w)
		}
		scale := max(medianAbs(residual)*1.4826, 0.1*grain)
		if iteration < 5 {
			scale = max(scale, 0.5*grain)
		}
		scale = min(scale, grain)
		say := f.say(residual, 4.685*scale)
		normal = *mat.NewSymDense(k, nil)
		right := mat.NewVecDense(k, nil)
		add := func(j []float64, r, weight float64) {
			for a := range j {
				for b := a; b < k; b++ {
					normal.SetSym(a, b, normal.At(a, b)+weight*j[a]*j[b])
				}
				right.SetVec(a, right.AtVec(a)-weight*j[a]*r)
			}
		}
		for i := range residual {
			c.weights[i] = f.biweight(i, residual[i]/(4.685*scale))
			d := residual[i] + c.rho
			if c.weights[i] == 0 || d == 0 {
				continue
			}
			u, v := (f.x[i]-c.cx)*c.w, (f.y[i]-c.cy)*c.h
			// lengths along cx and cy in the unit, not in dice, keep the system even
			add([]float64{-u / d, -v / d, -1, v * v / d}[:k], residual[i], say*c.weights[i]/sq(scale))
		}
		if f.rhoSigma > 0 {
			add([]float64{0, 0, 1, 0}[:k], c.rho-f.rho0, 1/sq(f.rhoSigma))
		}
		if c.rho > f.rhoMax {
			add([]float64{0, 0, 1, 0}[:k], c.rho-f.rhoMax, 1/sq(f.grain/4))
		}
		if f.h == 0 {
			add([]float64{0, 0, 0, 1}, math.Log(c.h/c.w), 1/sq(ratioSigma))
		}
		var move mat.VecDense
		if move.SolveVec(&normal, right) != nil {
			return c, false
		}
		cap := 0.2 * c.rho // no step runs away
		limit := func(v float64) float64 { return max(-cap, min(cap, v)) }
		c.cx += limit(move.AtVec(0)) / c.w
		c.cy += limit(move.AtVec(1)) / c.h
		c.rho += limit(move.AtVec(2))
		size := math.Abs(move.AtVec(0)) + math.Abs(move.AtVec(1)) + math.Abs(move.AtVec(2))
		if k == 4 {
			c.h *= math.Exp(max(-0.2, min(0.2, move.AtVec(3))))
			size += math.Abs(move.AtVec(3)) * c.rho
		}
		if iteration > 8 && size < 1e-10*c.rho {
			break
		}
	}
	var covariance mat.Dense
	if covariance.Inverse(&normal) != nil || !f.sound(c) {
		return c, false
	}
	c.sigma = math.Sqrt(max(covariance.At(0, 0), covariance.At(1, 1)))
	c.rhoSE = math.Sqrt(covariance.At(2, 2))
	if k == 4 {
		c.ratioSE = math.Sqrt(covariance.At(3, 3))
	}
	return c, true
}

// biweight is Tukey's weight of point i, t in units of where it ends.
func (f *fitter) biweight(i int, t float64) float64 {
	if f.out != nil && f.out[i] || t*t >= 1 {
		return 0
	}
	return sq(1 - t*t)
}

// say is the factor that makes the points together count as independent ones.
func (f *fitter) say(residual []float64, end float64) float64 {
	n := 0.0
	for i, r := range residual {
		n += f.biweight(i, r/end)
	}
	return min(1, independent/n)
}

// medianAbs is the median of |v|.
func medianAbs(v []float64) float64 {
	a := make([]float64, len(v))
	for i := range v {
		a[i] = math.Abs(v[i])
	}
	slices.Sort(a)
	return a[len(a)/2]
}
