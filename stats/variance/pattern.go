package variance

import (
	"math"
	"slices"

	"gonum.org/v1/gonum/mat"
	"gonum.org/v1/gonum/mathext"
	"gonum.org/v1/gonum/stat/distuv"
	"kneepoint/stats"
)

// maxPlaces is how many places a pattern may have; the cost of a fit grows with
// their square.
const maxPlaces = 16

// addPattern gives the model a fixed column for each place of a repeating level
// but the first, centred over the readings. It returns the number of places, or 0
// and why there is no pattern.
func (m *model) addPattern(d *Design) (places int, why string) {
	if !d.repeats {
		return 0, ""
	}
	codes := slices.Clone(d.zone)
	slices.Sort(codes)
	codes = slices.Compact(codes)
	last := len(d.parent) - 1
	name := d.names[last]
	groups, above := d.groups(last), d.groups(last-1)
	switch {
	case len(codes) < 2:
		return 0, "one " + name + " only"
	case above < 2:
		return 0, "one group of " + name + "s only: what repeats cannot be told from what does not"
	case groups-above-(len(codes)-1) < 1:
		return 0, "too few " + name + "s repeat"
	case len(codes) > maxPlaces:
		return 0, "too many places for a pattern"
	}
	share := d.shares(codes)
	m.columns = len(codes) - 1
	for c, z := range d.zone {
		for j := range m.columns {
			x := -share[j+1]
			if z == codes[j+1] {
				x++
			}
			m.value[c] = append(m.value[c], x)
		}
	}
	return len(codes), ""
}

// shares is each place's part of the readings.
func (d *Design) shares(codes []int32) []float64 {
	share := make([]float64, len(codes))
	for c, z := range d.zone {
		i, _ := slices.BinarySearch(codes, z)
		share[i] += float64(d.cells[c].N) / float64(d.N)
	}
	return share
}

// pattern is the variance over readings of what all groups above share, in scaled
// units: the weighted variance of the fitted places less what their errors add.
//
// Limits come from the chi-square statistic of the places, whose noncentrality is
// the pattern's variance in units of its error; for uneven designs as if
// errors were alike in all directions. 95 % limits held 93 to 97 % of patterns in
// this package's simulation.
func (m *model) pattern(d *Design, tau []float64, confidence float64) stats.Interval {
	beta, cov, ok := m.effects(tau)
	if !ok {
		return stats.NoInterval("places cannot be told from the groups above")
	}
	codes := slices.Clone(d.zone)
	slices.Sort(codes)
	codes = slices.Compact(codes)
	share := d.shares(codes)[1:]
	q := m.columns
	raw, bias := 0.0, 0.0
	for i := range q {
		for j := range q {
			w := -share[i] * share[j]
			if i == j {
				w += share[i]
			}
			raw += w * beta.AtVec(i) * beta.AtVec(j)
			bias += w * cov.At(i, j)
		}
	}
	iv := stats.Interval{Estimate: math.Max(0, raw-bias), Method: "noncentral chi-square"}
	var chol mat.Cholesky
	var x mat.VecDense
	if !chol.Factorize(cov) || chol.SolveVecTo(&x, beta) != nil {
		return stats.NoInterval("places cannot be told from the groups above")
	}
	wald := mat.Dot(beta, &x)
	if !(wald > 0) {
		return iv
	}
	alpha := (1 - confidence) / 2
	iv.Lower = noncentrality(wald, float64(q), 1-alpha) * raw / wald
	iv.Upper = noncentrality(wald, float64(q), alpha) * raw / wald
	return iv
}

// noncentrality is the one at which a noncentral chi-square has w as its
// p-quantile; 0 when even none makes w that large.
func noncentrality(w, q, p float64) float64 {
	cdf := func(lambda float64) float64 { return noncentralChiSquared(w, q, lambda) }
	if cdf(0) <= p {
		return 0
	}
	lo, hi := 0.0, 2*w+10
	for cdf(hi) > p {
		hi *= 2
	}
	for range 80 {
		mid := (lo + hi) / 2
		if cdf(mid) > p {
			lo = mid
		} else {
			hi = mid
		}
	}
	return (lo + hi) / 2
}

// noncentralChiSquared is a distribution function: a Poisson mixture of central
// ones (Johnson, Kotz and Balakrishnan 1995, Continuous Univariate Distributions
// 2, ch. 29), or where that has many terms Sankaran's approximation (1963,
// Biometrika 50, 199-204).
func noncentralChiSquared(x, q, lambda float64) float64 {
	if lambda <= 0 {
		return mathext.GammaIncReg(q/2, x/2)
	}
	if lambda > 2000 {
		h := 1 - 2.0/3*(q+lambda)*(q+3*lambda)/((q+2*lambda)*(q+2*lambda))
		p := (q + 2*lambda) / ((q + lambda) * (q + lambda))
		m := (h - 1) * (1 - 3*h)
		z := (math.Pow(x/(q+lambda), h) - (1 + h*p*(h-1-0.5*(2-h)*m*p))) / (h * math.Sqrt(2*p) * (1 + 0.5*m*p))
		return 0.5 * math.Erfc(-z/math.Sqrt2)
	}
	poisson := distuv.Poisson{Lambda: lambda / 2}
	middle := math.Floor(lambda / 2)
	sum := 0.0
	add := func(j float64) bool {
		w := poisson.Prob(j)
		sum += w * mathext.GammaIncReg(q/2+j, x/2)
		return w > 1e-14
	}
	for j := middle; j >= 0 && add(j); j-- {
	}
	for j := middle + 1; add(j); j++ {
	}
	return math.Min(1, sum)
}
