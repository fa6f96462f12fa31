package wafermap

import (
	"math"

	"gonum.org/v1/gonum/mat"
	"gonum.org/v1/gonum/stat/distuv"
)

// shapeTerms are those of the fit behind Bowl, Tilt and RollOff: terms 1 to 6 and the edge.
const shapeTerms = 7

// shape fits parabola, tilt and roll-off with the weights of the surface.
func (w *surfaceWork) shape(s *Surface) {
	sums := w.sums()
	row := func(c int) (z [shapeTerms]float64) {
		copy(z[:], w.b.cells[c].z[:shapeTerms-1])
		z[shapeTerms-1] = w.b.cells[c].edge
		return z
	}
	a, b := mat.NewSymDense(shapeTerms, nil), mat.NewVecDense(shapeTerms, nil)
	for c := range sums.w {
		z := row(c)
		for j := range z {
			b.SetVec(j, b.AtVec(j)+sums.wy[c]*z[j])
			for k := j; k < shapeTerms; k++ {
				a.SetSym(j, k, a.At(j, k)+sums.w[c]*z[j]*z[k])
			}
		}
	}
	terms := shapeTerms
	for terms > 0 && (!tells(a, terms) || 3*terms > len(w.y)) {
		terms--
	}
	if terms < 3 {
		return
	}
	var chol mat.Cholesky
	if !chol.Factorize(a.SliceSym(0, terms)) {
		return
	}
	x := make([]float64, terms)
	if chol.SolveVecTo(mat.NewVecDense(terms, x), b.SliceVec(0, terms).(*mat.VecDense)) != nil {
		return
	}
	cov, blocks := w.clustered(&chol, x, row)
	freedom := float64(max(2, blocks-terms))
	t := distuv.StudentsT{Mu: 0, Sigma: 1, Nu: freedom}.Quantile(0.975)
	estimate := func(j int, factor float64) Estimate {
		v, half := factor*x[j], t*factor*math.Sqrt(cov.At(j, j))
		return Estimate{v, v - half, v + half}
	}
	if terms > 3 {
		s.Bowl = estimate(3, 2*math.Sqrt(3)) // sqrt(3) (2 rho^2 - 1)
	}
	if terms == shapeTerms {
		s.RollOff = estimate(6, 1)
	}
	// terms 2 and 3 are 2 rho cos, 2 rho sin: 4 from edge to edge
	size := 4 * math.Hypot(x[1], x[2])
	sigma := 4 * math.Sqrt((cov.At(1, 1)+cov.At(2, 2))/2)
	s.Tilt.Value = size
	s.Tilt.Lower, s.Tilt.Upper = lengthInterval(size, sigma*t/1.959964)
	s.TiltDirection.Value = math.Atan2(x[2], x[1]) * 180 / math.Pi
	half := 180.0
	if across := t * 4 * math.Sqrt(directionVariance(x[1], x[2], cov)); across < size {
		half = math.Asin(across/size) * 180 / math.Pi
	}
	s.TiltDirection.Lower, s.TiltDirection.Upper = s.TiltDirection.Value-half, s.TiltDirection.Value+half
}

// directionVariance is the variance across a tilt.
func directionVariance(x, y float64, cov *mat.SymDense) float64 {
	r := math.Hypot(x, y)
	if r == 0 {
		return math.Max(cov.At(1, 1), cov.At(2, 2))
	}
	c, s := x/r, y/r
	return max(0, s*s*cov.At(1, 1)-2*s*c*cov.At(1, 2)+c*c*cov.At(2, 2))
}

// clustered is the sandwich covariance with blocks of the wafer as clusters, for a
// Tukey estimate.
func (w *surfaceWork) clustered(chol *mat.Cholesky, x []float64, row func(int) [shapeTerms]float64) (*mat.SymDense, int) {
	terms := len(x)
	scores := make([][shapeTerms]float64, blocksAcross*blocksAcross)
	used := make([]bool, len(scores))
	fitted := make([]float64, len(w.b.cells))
	rows := make([][shapeTerms]float64, len(w.b.cells))
	for c := range fitted {
		rows[c] = row(c)
		for j, v := range x {
			fitted[c] += v * rows[c][j]
		}
	}
	sumWeight, sumSlope := 0.0, 0.0
	for i, p := range w.at {
		c := w.b.cell[p]
		block := w.b.cells[c].block
		used[block] = true
		score := w.weight[i] * (w.near[i] - fitted[c])
		for j := range terms {
			scores[block][j] += score * rows[c][j]
		}
		sumWeight += w.weight[i]
		if w.weight[i] > 0 { // of r (1-t^2)^2: (1-t^2) (1-5 t^2)
			tt := 1 - math.Sqrt(w.weight[i])
			sumSlope += (1 - tt) * (1 - 5*tt)
		}
	}
	blocks := 0
	meat := mat.NewSymDense(terms, nil)
	for k, u := range used {
		if !u {
			continue
		}
		blocks++
		meat.SymRankOne(meat, 1, mat.NewVecDense(terms, append([]float64(nil), scores[k][:terms]...)))
	}
	var inverse mat.SymDense
	if err := chol.InverseTo(&inverse); err != nil {
		inverse = *mat.NewSymDense(terms, nil)
	}
	var half, full mat.Dense
	half.Mul(&inverse, meat)
	full.Mul(&half, &inverse)
	scale := sq(sumWeight/max(sumSlope, 0.1*sumWeight)) * float64(blocks) / float64(max(1, blocks-1))
	cov := mat.NewSymDense(terms, nil)
	for j := range terms {
		for k := j; k < terms; k++ {
			cov.SetSym(j, k, scale*(full.At(j, k)+full.At(k, j))/2)
		}
	}
	return cov, blocks
}

// lengthInterval is the 95 % interval of the length of a plane vector that was measured
// as length, with standard error sigma along each axis: the lengths for which a
// measurement as extreme has a chance of 2.5 % on either side.
func lengthInterval(length, sigma float64) (lower, upper float64) {
	if !(sigma > 0) {
		return length, length
	}
	x := length / sigma
	root := func(p float64) float64 { // of below(x, l) = p, falling in l
		lo, hi := 0.0, x+8
		for range 60 {
			if mid := (lo + hi) / 2; below(x, mid) > p {
				lo = mid
			} else {
				hi = mid
			}
		}
		return (lo + hi) / 2
	}
	return root(0.975) * sigma, root(0.025) * sigma
}

// below is the chance that a plane normal vector with mean length l and unit errors is
// shorter than x (Rice's distribution): the sum over Poisson counts of gamma laws.
func below(x, l float64) float64 {
	if l > 30 { // nearly normal
		return 0.5 * math.Erfc(-(x-math.Sqrt(l*l+1))/math.Sqrt2)
	}
	a, b := l*l/2, x*x/2
	// P = sum_k Poisson(k; a) P(Gamma(k+1) < b) and P(Gamma(k+1) < b) = P(Poisson(b) > k)
	weight, term, tail := math.Exp(-a), math.Exp(-b), 1-math.Exp(-b)
	sum := 0.0
	for k := range 2000 {
		sum += weight * tail
		if float64(k) > a && weight < 1e-15 {
			break
		}
		weight *= a / float64(k+1)
		term *= b / float64(k+1)
		tail = max(0, tail-term)
	}
	return sum
}

// variances splits the variance over dice without the outliers.
func (w *surfaceWork) variances(s *Surface, value []float64, site []int32) {
	type group struct{ n, sum float64 }
	sites := map[int32]*group{}
	var order []int32
	var n, mean, square, smoothMean, smooth, within float64
	for i, p := range w.at {
		if w.weight[i] == 0 {
			continue
		}
		r := w.b.rows[p]
		fit := value[r] - s.Residual[r]
		n++
		d := value[r] - mean
		mean += d / n
		square += d * (value[r] - mean)
		d = fit - smoothMean
		smoothMean += d / n
		smooth += d * (fit - smoothMean)
		within += sq(s.Residual[r])
		if site != nil && site[r] != Missing {
			g := sites[site[r]]
			if g == nil {
				g = &group{}
				sites[site[r]] = g
				order = append(order, site[r])
			}
			g.n++
			g.sum += s.Residual[r]
		}
	}
	if n < 2 {
		return
	}
	s.Variance = square / (n - 1)
	noise := within / max(1, n-float64(s.Terms))
	smooth = max(0, smooth/(n-1)-noise*float64(s.Terms-1)/n) // the fit follows the noise a little
	between := nan
	if len(sites) > 1 {
		// one-way analysis of variance of the residual, method of moments
		var all, count, squares, explained float64
		for _, k := range order {
			g := sites[k]
			all += g.sum
			count += g.n
			squares += g.n * g.n
		}
		for _, k := range order {
			g := sites[k]
			explained += sq(g.sum-g.n*all/count) / g.n
		}
		k := float64(len(sites))
		if free := n - k - float64(s.Terms) + 1; free > 0 {
			rest := max(0, within-explained) / free
			between = max(0, (explained/(k-1)-rest)/((count-squares/count)/(k-1)))
			noise = rest
		}
	}
	total := smooth + noise
	if between > 0 {
		total += between
	}
	if total > 0 {
		s.SmoothShare, s.DieShare, s.SiteShare = smooth/total, noise/total, between/total
	}
}
