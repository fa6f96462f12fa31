package screen

import (
	"fmt"
	"math"
	"math/rand/v2"
	"slices"

	"gonum.org/v1/gonum/stat/distuv"
	"kneepoint/stats"
	"kneepoint/stats/internal/tail"
)

// Robust is the outcome of [RobustDistance]. Matrices are in the columns' units.
type Robust struct {
	// RawLocation and RawCovariance are mean and covariance (divisor H) of the H dice
	// whose covariance has the smallest determinant, RawDeterminant; RawSupport says
	// which they are.
	RawLocation    []float64
	RawCovariance  [][]float64
	RawDeterminant float64
	RawSupport     []bool
	H              int
	// Location and Covariance are those of the dice in Support: the dice within the
	// 97.5 % ellipse of the raw estimate. Covariance (divisor: their number) has been
	// multiplied by Factor, which makes it consistent for normal data.
	Location   []float64
	Covariance [][]float64
	Factor     float64
	Support    []bool
	// Squared are the squared robust distances, about chi-square with as many
	// degrees of freedom as columns for the majority; NaN for a die with a missing or
	// infinite reading.
	Squared []float64
	N       int // dice with all readings
	Columns int
	Why     string
}

// Cutoff is the squared distance that a share of a normal majority stays below.
func (r Robust) Cutoff(share float64) float64 {
	return distuv.ChiSquared{K: float64(r.Columns)}.Quantile(share)
}

// P is the probability of a squared distance as large in a normal majority.
func (r Robust) P(squared float64) float64 { return tail.ChiSquared(squared, float64(r.Columns)) }

// Flag says which dice are beyond the cutoff of a share.
func (r Robust) Flag(share float64) []bool {
	out := make([]bool, len(r.Squared))
	limit := r.Cutoff(share)
	for i, d := range r.Squared {
		out[i] = d > limit
	}
	return out
}

// RobustDistance finds how far each die is from the majority in several tests
// together, by the minimum covariance determinant: location and covariance of the
// h = (n+p+1)/2 dice of n that lie closest together, which the other half cannot
// move, and then of all dice within the 97.5 % ellipse of these. columns holds the
// p tests, one slice each, of the same length.
//
// The search is Rousseeuw and Van Driessen's, from 500 starts of p+1 dice drawn
// with a fixed seed and one from the coordinate-wise medians, so that the same
// data give the same result. Above 1,500 dice starts are tried on an even sample
// of so many, and only the best is carried to an end on all (on an even sample of
// 20,000 when there are more). The raw covariance is
// scaled so that its median squared distance is that of chi-square.
//
// Dice with a NaN or an infinite reading in any column are left out (their distance is NaN).
// Give readings on a scale on which they are about symmetric: leakages as
// logarithms. With fewer than 5p dice, a column without a spread, or a majority
// that lies in a plane (one test computed from others), nothing is computed and
// Why says so. It panics without a column and when lengths differ.
//
// Sources: Rousseeuw 1985; Rousseeuw and Van Driessen 1999, Technometrics 41,
// 212-223; consistency factor: Croux and Haesbroeck 1999, J. Multivar. Anal. 71,
// 161-190.
func RobustDistance(columns [][]float64) Robust {
	if len(columns) == 0 {
		panic("stats/screen: no column")
	}
	for _, c := range columns {
		if len(c) != len(columns[0]) {
			panic("stats/screen: slice length mismatch")
		}
	}
	m, why := newMCD(columns)
	r := Robust{N: len(m.rows), Columns: m.p, RawDeterminant: math.NaN(), Factor: math.NaN(), Why: why,
		RawSupport: make([]bool, len(columns[0])), Support: make([]bool, len(columns[0])), Squared: make([]float64, len(columns[0]))}
	for i := range r.Squared {
		r.Squared[i] = math.NaN()
	}
	if why != "" {
		return r
	}
	r.H = (r.N + m.p + 1) / 2
	best, ok := m.search(r.H)
	if !ok {
		r.Why = "most dice lie in a plane: a test is computed from others, or has few different values"
		return r
	}
	d := m.distances(best, m.rows)
	picked := smallest(d, r.H)
	for _, k := range picked {
		r.RawSupport[m.rows[k]] = true
	}
	raw, _ := m.ellipse(m.pick(picked))
	r.RawLocation, r.RawCovariance = m.inUnits(raw)
	r.RawDeterminant = math.Exp(raw.logDet)
	for _, s := range m.scale {
		r.RawDeterminant *= s * s
	}
	// Reweighting.
	d = m.distances(raw, m.rows)
	limit := r.Cutoff(0.975) * stats.Median(d) / r.Cutoff(0.5)
	var within []int32
	for k, v := range d {
		if v < limit {
			within = append(within, m.rows[k])
			r.Support[m.rows[k]] = true
		}
	}
	final, ok := m.ellipse(within)
	if !ok {
		r.Why = "most dice lie in a plane: a test is computed from others, or has few different values"
		return r
	}
	r.Factor = consistency(limit*math.Exp((raw.logDet-final.logDet)/float64(m.p)), float64(m.p))
	r.Location, r.Covariance = m.inUnits(final)
	for _, row := range r.Covariance {
		for j := range row {
			row[j] *= r.Factor
		}
	}
	for k, v := range m.distances(final, m.rows) {
		r.Squared[m.rows[k]] = v / r.Factor
	}
	return r
}

// consistency is by how much the covariance of a normal population cut off at an
// ellipse falls short, from the squared radius b of that ellipse in the cut-off
// covariance's own metric. With rho the squared radius in the true one,
//
//	factor = F(rho; p) / F(rho; p+2),  b = rho factor,  F chi-square
//
// Taking b as it came out, rather than the 97.5 % that was aimed at, keeps the
// factor right when a large share of outliers has inflated the raw estimate.
func consistency(b, p float64) float64 {
	factor := func(rho float64) float64 { return (1 - tail.ChiSquared(rho, p)) / (1 - tail.ChiSquared(rho, p+2)) }
	lo, hi := 1e-3, b
	if !(lo*factor(lo) < b) { // cut off to next to nothing, which no ellipse of half the dice is
		return 1
	}
	for range 100 {
		mid := lo + (hi-lo)/2
		if mid*factor(mid) < b {
			lo = mid
		} else {
			hi = mid
		}
	}
	return factor(lo)
}

// mcd is the data, seen in units of each column's median and spread.
type mcd struct {
	columns       [][]float64
	centre, scale []float64
	rows          []int32 // with all readings
	p             int
	slot          []int32   // by die: 1 + its place in seen, 0 for none
	seen          []float64 // dice looked at often, in these units, p values each
}

func newMCD(columns [][]float64) (*mcd, string) {
	m := &mcd{columns: columns, p: len(columns)}
	for i := range columns[0] {
		whole := true
		for _, c := range columns {
			whole = whole && !math.IsInf(c[i], 0) && c[i] == c[i]
		}
		if whole {
			m.rows = append(m.rows, int32(i))
		}
	}
	if len(m.rows) < 5*m.p {
		return m, fmt.Sprintf("%d dice with all readings; %d tests together need %d", len(m.rows), m.p, 5*m.p)
	}
	var s stats.Selector
	only := make([]float64, len(m.rows))
	for j, c := range columns {
		for k, i := range m.rows {
			only[k] = c[i]
		}
		med, mad := s.MedianMADSigma(only)
		if mad == 0 { // half of the values are equal: any spread will do as a unit
			mad = stats.SD(only)
		}
		if !(mad > 0) {
			return m, fmt.Sprintf("test %d of %d has no spread", j+1, m.p)
		}
		m.centre, m.scale = append(m.centre, med), append(m.scale, mad)
	}
	return m, ""
}

// remember makes rows ready that will be gathered many times.
func (m *mcd) remember(rows []int32) {
	seen := make([]float64, len(rows)*m.p)
	for k, i := range rows {
		m.gather(i, seen[k*m.p:(k+1)*m.p])
	}
	if m.slot == nil {
		m.slot = make([]int32, len(m.columns[0]))
	}
	clear(m.slot)
	for k, i := range rows {
		m.slot[i] = int32(k) + 1
	}
	m.seen = seen
}

func (m *mcd) gather(i int32, x []float64) {
	if m.slot != nil && m.slot[i] > 0 {
		at := (int(m.slot[i]) - 1) * m.p
		copy(x, m.seen[at:at+m.p])
		return
	}
	for j, c := range m.columns {
		x[j] = (c[i] - m.centre[j]) / m.scale[j]
	}
}

// ellipse is a mean and a covariance with its Cholesky factor.
type ellipse struct {
	mean       []float64
	cov, lower []float64 // p x p by rows
	logDet     float64
}

// ellipse computes mean and covariance (divisor n) of rows; false when these lie
// in a plane.
func (m *mcd) ellipse(rows []int32) (ellipse, bool) {
	p, n := m.p, float64(len(rows))
	e := ellipse{mean: make([]float64, p), cov: make([]float64, p*p)}
	x := make([]float64, p)
	for _, i := range rows {
		m.gather(i, x)
		for j, v := range x {
			e.mean[j] += v
		}
	}
	for j := range e.mean {
		e.mean[j] /= n
	}
	for _, i := range rows {
		m.gather(i, x)
		for j := range x {
			x[j] -= e.mean[j]
			for k := 0; k <= j; k++ {
				e.cov[j*p+k] += float64(x[j] * x[k])
			}
		}
	}
	for j := range p {
		for k := 0; k <= j; k++ {
			e.cov[j*p+k] /= n
			e.cov[k*p+j] = e.cov[j*p+k]
		}
	}
	return e, e.factor()
}

// factor finds the Cholesky factor of the covariance.
func (e *ellipse) factor() bool {
	p := len(e.mean)
	e.lower = make([]float64, p*p)
	e.logDet = 0
	for j := range p {
		for k := 0; k <= j; k++ {
			s := e.cov[j*p+k]
			for l := range k {
				s -= float64(e.lower[j*p+l] * e.lower[k*p+l])
			}
			if k < j {
				e.lower[j*p+k] = s / e.lower[k*p+k]
				continue
			}
			if !(s > 1e-12*e.cov[j*p+j]) { // all of it explained by the columns before
				return false
			}
			e.lower[j*p+j] = math.Sqrt(s)
			e.logDet += math.Log(s)
		}
	}
	return true
}

// distances are the squared distances of rows.
func (m *mcd) distances(e ellipse, rows []int32) []float64 {
	p := m.p
	out := make([]float64, len(rows))
	x := make([]float64, p)
	inverse := make([]float64, p)
	for j := range p {
		inverse[j] = 1 / e.lower[j*p+j]
	}
	for k, i := range rows {
		m.gather(i, x)
		sum := 0.0
		for j := range p {
			s := x[j] - e.mean[j]
			row := e.lower[j*p : j*p+j]
			for l, v := range row {
				s -= float64(v * x[l])
			}
			s *= inverse[j]
			x[j] = s
			sum += float64(s * s)
		}
		out[k] = sum
	}
	return out
}

// smallest returns the places of the h smallest values, in order of place; of
// equal ones the first.
func smallest(d []float64, h int) []int {
	limit := kth(d, h)
	out := make([]int, 0, h)
	below := 0
	for _, v := range d {
		if v < limit {
			below++
		}
	}
	equal := h - below
	for k, v := range d {
		if v < limit {
			out = append(out, k)
		} else if v == limit && equal > 0 {
			out = append(out, k)
			equal--
		}
	}
	return out
}

// kth is the h-th smallest value.
func kth(d []float64, h int) float64 {
	if len(d) < 2000 {
		v := slices.Clone(d)
		slices.Sort(v)
		return v[h-1]
	}
	// Type 7 puts the order statistic h at (h-1)/(n-1).
	return stats.Quantiles(d, []float64{float64(h-1) / float64(len(d)-1)}, stats.HyndmanFan7)[0]
}

func (m *mcd) pick(places []int) []int32 {
	out := make([]int32, len(places))
	for i, k := range places {
		out[i] = m.rows[k]
	}
	return out
}

// concentrate takes a step: the h rows closest to an ellipse, and theirs. The
// determinant never rises.
func (m *mcd) concentrate(e ellipse, rows []int32, h int) (ellipse, bool) {
	picked := smallest(m.distances(e, rows), h)
	chosen := make([]int32, h)
	for i, k := range picked {
		chosen[i] = rows[k]
	}
	return m.ellipse(chosen)
}

// thinned takes at most so many rows, evenly spread, and as large a part of them as h is
// of all.
func (m *mcd) thinned(most, h int) (rows []int32, part int) {
	if len(m.rows) <= most {
		return m.rows, h
	}
	rows = make([]int32, most)
	for i := range rows {
		rows[i] = m.rows[i*len(m.rows)/most]
	}
	return rows, (most*h + len(m.rows) - 1) / len(m.rows)
}

// search finds the ellipse of the smallest determinant.
func (m *mcd) search(h int) (ellipse, bool) {
	const sample, starts, kept = 1500, 500, 10
	rows, part := m.thinned(sample, h)
	m.remember(rows)
	r := rand.New(rand.NewPCG(1999, 41))
	var best []ellipse
	keep := func(e ellipse) {
		i, _ := slices.BinarySearchFunc(best, e, func(a, b ellipse) int {
			if a.logDet <= b.logDet {
				return -1
			}
			return 1
		})
		best = slices.Insert(best, i, e)
		best = best[:min(len(best), kept)]
	}
	begin := func(e ellipse, ok bool) {
		for range 2 {
			if ok {
				e, ok = m.concentrate(e, rows, part)
			}
		}
		if ok {
			keep(e)
		}
	}
	begin(m.spherical(), true)
	for range starts {
		begin(m.drawn(r, rows))
	}
	if len(best) == 0 {
		return ellipse{}, false
	}
	for i := range best {
		best[i] = m.settle(best[i], rows, part, 100, 1e-10)
	}
	slices.SortStableFunc(best, func(a, b ellipse) int {
		switch {
		case a.logDet < b.logDet:
			return -1
		case a.logDet > b.logDet:
			return 1
		}
		return 0
	})
	if len(m.rows) > len(rows) {
		const end = 20000
		rows, part = m.thinned(end, h)
		m.remember(rows)
		return m.settle(best[0], rows, part, 30, 1e-6), true
	}
	return best[0], true
}

// settle takes steps until the logarithm of the determinant stands still.
func (m *mcd) settle(e ellipse, rows []int32, h, steps int, still float64) ellipse {
	for range steps {
		next, ok := m.concentrate(e, rows, h)
		if !ok {
			return e
		}
		done := !(next.logDet < e.logDet-still)
		e = next
		if done {
			break
		}
	}
	return e
}

// spherical is the unit sphere about the medians.
func (m *mcd) spherical() ellipse {
	p := m.p
	e := ellipse{mean: make([]float64, p), cov: make([]float64, p*p)}
	for j := range p {
		e.cov[j*p+j] = 1
	}
	e.factor()
	return e
}

// drawn is the ellipse of p+1 rows drawn at random, more where these lie in a
// plane.
func (m *mcd) drawn(r *rand.Rand, rows []int32) (ellipse, bool) {
	chosen := make([]int32, 0, m.p+1)
	for len(chosen) < len(rows) && len(chosen) < 4*m.p+20 {
		i := rows[r.IntN(len(rows))]
		if slices.Contains(chosen, i) {
			continue
		}
		if chosen = append(chosen, i); len(chosen) > m.p {
			if e, ok := m.ellipse(chosen); ok {
				return e, true
			}
		}
	}
	return ellipse{}, false
}

// inUnits gives mean and covariance in the columns' units.
func (m *mcd) inUnits(e ellipse) (mean []float64, cov [][]float64) {
	mean, cov = make([]float64, m.p), make([][]float64, m.p)
	for j := range m.p {
		mean[j] = m.centre[j] + m.scale[j]*e.mean[j]
		cov[j] = make([]float64, m.p)
		for k := range m.p {
			cov[j][k] = e.cov[j*m.p+k] * m.scale[j] * m.scale[k]
		}
	}
	return mean, cov
}
