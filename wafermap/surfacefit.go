package wafermap

import (
	"fmt"
	"math"

	"gonum.org/v1/gonum/mat"

	"kneepoint/stats"
)

const (
	tukeyTuning   = 4.685  // of the biweight: 95 % as efficient as least squares on normal data
	madFactor     = 1.4826 // from a median absolute deviation to the standard deviation of normal data
	surfaceRounds = 12
	surfaceFolds  = 5
	scaleSample   = 4000 // dice that the scale is taken from on the way
)

// Fit fits a smooth surface to a value, robustly. value has one element a row of the
// coordinates; NaN and infinite values take no part. site, if not nil, names each row's test
// site (Missing where not known).
//
// The fit is that of Zernike terms by iterated weighted least squares with Tukey's
// biweight (Beaton and Tukey 1974, Technometrics 16, 147), started from medians of
// zones, the scale being 1.4826 times the median absolute deviation. Orders up to six are
// compared by five-fold cross-validation with the weights of the highest; the lowest order
// whose error is within one standard error of the least is kept (Breiman and others 1984,
// Classification and Regression Trees). Folds follow from the coordinates, so that the
// order of rows does not matter.
//
// Intervals are t intervals with a covariance clustered by 16 to 64 blocks of the wafer (Liang
// and Zeger 1986, Biometrika 73, 13); that of Tilt, which cannot be negative, comes from the
// noncentral chi-squared distribution of its square.
//
// Fewer than 12 dice with a value, or dice that do not tell even a tilt from a constant,
// give a surface of NaN with a Why.
func (b *SurfaceBasis) Fit(value []float64, site []int32) Surface {
	if len(value) != b.slots || site != nil && len(site) != b.slots {
		panic("wafermap: value or site and coordinates differ in length")
	}
	if b.why != "" {
		return b.failed(0, b.why)
	}
	w := b.work(value)
	switch {
	case len(w.y) < fewestSurface:
		return b.failed(len(w.y), fmt.Sprintf("%d dice with a value: at least %d are needed", len(w.y), fewestSurface))
	case !(w.scale0 > 0):
		return b.failed(len(w.y), "the value is the same on most dice")
	}
	if !w.robust() {
		return b.failed(len(w.y), "the dice do not tell a tilt from a constant")
	}
	s := b.failed(len(w.y), "")
	w.compareOrders(&s)
	w.keep(&s)
	w.shape(&s)
	w.variances(&s, value, site)
	return s
}

// surfaceWork is one fit under way.
type surfaceWork struct {
	b        *SurfaceBasis
	at       []int32 // places in b.rows with a value
	y        []float64
	weight   []float64
	near     []float64 // y less what the surface changes from the cell's mean to the die
	mean     float64   // taken off y
	scale0   float64   // robust scale of y
	scale    float64   // robust scale about the surface
	terms    int       // that the dice can tell
	selector stats.Selector
	beta     [monomials]float64
}

func (b *SurfaceBasis) work(value []float64) *surfaceWork {
	w := &surfaceWork{b: b, at: make([]int32, 0, len(b.rows)), y: make([]float64, 0, len(b.rows))}
	for i, r := range b.rows {
		if v := value[r]; !math.IsNaN(v) && !math.IsInf(v, 0) {
			w.at, w.y = append(w.at, int32(i)), append(w.y, v)
		}
	}
	if len(w.y) == 0 {
		return w
	}
	w.mean, w.scale0 = w.selector.MedianMADSigma(w.y)
	for i := range w.y {
		w.y[i] -= w.mean
	}
	w.weight, w.near = make([]float64, len(w.y)), make([]float64, len(w.y))
	return w
}

func termsOf(order int) int { return (order + 1) * (order + 2) / 2 }

// robust fits the highest order that the dice can tell.
func (w *surfaceWork) robust() bool {
	for i := range w.weight {
		w.weight[i], w.near[i] = 1, w.y[i]
	}
	a, _ := w.equations(w.sums(), monomials)
	for order := surfaceOrder; order > 0; order-- {
		if t := termsOf(order); 5*t <= len(w.y) && tells(a, t) {
			w.terms = t
			break
		}
	}
	if w.terms == 0 && tells(a, 3) {
		w.terms = 3
	}
	if w.terms == 0 {
		return false
	}
	w.start()
	for range surfaceRounds {
		w.weigh()
		a, b := w.equations(w.sums(), w.terms)
		x, ok := solve(a, b, w.terms)
		if !ok {
			return false
		}
		moved := 0.0
		for j := range x {
			moved += sq(x[j] - w.beta[j])
		}
		copy(w.beta[:], x)
		if moved < sq(3e-4*w.scale) { // a tenth of a standard error even with 150,000 dice
			break
		}
	}
	w.weigh()
	return true
}

// start fits six terms to the medians of zones: half the dice of a zone may be outliers.
func (w *surfaceWork) start() {
	const rings, sectors = 5, 8
	var zone [rings * sectors][]float64
	var u, v [rings * sectors]float64
	for k := range zone {
		zone[k] = make([]float64, 0, 2*len(w.at)/len(zone)+8)
	}
	of := make([]int, len(w.b.cells))
	for c := range of {
		cell := &w.b.cells[c]
		of[c] = ring(cell.u, cell.v, 1, rings)*sectors + sector(cell.u, cell.v, sectors)
	}
	for i, p := range w.at {
		k := of[w.b.cell[p]]
		zone[k] = append(zone[k], w.y[i])
		u[k] += w.b.u[p]
		v[k] += w.b.v[p]
	}
	terms := min(w.terms, 6)
	a, b := mat.NewSymDense(terms, nil), mat.NewVecDense(terms, nil)
	for k, values := range zone {
		if len(values) == 0 {
			continue
		}
		var m [monomials]float64
		n := float64(len(values))
		powers(&m, u[k]/n, v[k]/n)
		middle := w.selector.Median(values)
		n = min(n, 20)
		z := make([]float64, terms)
		for t := range z {
			for j, p := range zernikePowers[t] {
				z[t] += p * m[j]
			}
		}
		for j := range z {
			b.SetVec(j, b.AtVec(j)+n*z[j]*middle)
			for i := j; i < terms; i++ {
				a.SetSym(j, i, a.At(j, i)+n*z[j]*z[i])
			}
		}
	}
	for ; terms > 0; terms-- {
		if tells(a, terms) {
			if x, ok := solve(a, b, terms); ok {
				copy(w.beta[:], x)
				break
			}
		}
	}
}

// weigh sets the weights from the distances to the surface.
func (w *surfaceWork) weigh() {
	type plane struct{ s, su, sv, mid float64 }
	planes := make([]plane, len(w.b.cells))
	for c := range w.b.cells {
		cell := &w.b.cells[c]
		for j := range w.terms {
			planes[c].s += w.beta[j] * cell.z[j]
			planes[c].su += w.beta[j] * cell.zu[j]
			planes[c].sv += w.beta[j] * cell.zv[j]
		}
	}
	stride := max(1, len(w.y)/scaleSample)
	sample := make([]float64, 0, scaleSample+1)
	for c := range planes { // from the cell's middle to the wafer's
		planes[c].mid = planes[c].su*w.b.cells[c].u + planes[c].sv*w.b.cells[c].v
	}
	weight, near, y := w.weight[:len(w.at)], w.near[:len(w.at)], w.y[:len(w.at)]
	for i, p := range w.at {
		c := &planes[w.b.cell[p]]
		near[i] = y[i] - (c.su*w.b.u[p] + c.sv*w.b.v[p] - c.mid)
		weight[i] = near[i] - c.s // for now the residual
	}
	for i := 0; i < len(weight); i += stride {
		sample = append(sample, math.Abs(weight[i]))
	}
	w.scale = max(madFactor*w.selector.Median(sample), 1e-6*w.scale0)
	reach := 1 / sq(tukeyTuning*w.scale)
	for i, r := range weight {
		weight[i] = sq(max(0, 1-r*r*reach))
	}
}
