package dist

import (
	"errors"
	"math"
	"slices"
)

// Part is a normal part of a mixture. Weights add up to 1.
type Part struct{ Weight, Mean, SD float64 }

// Mixture is a mixture of normal parts fitted by maximum likelihood, parts in
// order of their means.
type Mixture struct {
	Parts  []Part
	LogLik float64
	N      int // readings, bounds included
}

// Parameters is the number of free ones, 3k-1.
func (m Mixture) Parameters() int { return 3*len(m.Parts) - 1 }

// BIC is the Bayesian criterion, parameters times ln N less 2 LogLik; smaller is
// better.
func (m Mixture) BIC() float64 { return float64(m.Parameters())*math.Log(float64(m.N)) - 2*m.LogLik }

// Density is the fitted probability density at x.
func (m Mixture) Density(x float64) float64 {
	s := 0.0
	for _, p := range m.Parts {
		s += p.Weight * phi((x-p.Mean)/p.SD) / p.SD
	}
	return s
}

// CDF is the fitted share below x.
func (m Mixture) CDF(x float64) float64 {
	s := 0.0
	for _, p := range m.Parts {
		s += p.Weight * 0.5 * math.Erfc((p.Mean-x)/(p.SD*math.Sqrt2))
	}
	return s
}

// Survival is the fitted share above x.
func (m Mixture) Survival(x float64) float64 {
	s := 0.0
	for _, p := range m.Parts {
		s += p.Weight * 0.5 * math.Erfc((x-p.Mean)/(p.SD*math.Sqrt2))
	}
	return s
}

// ErrFewForParts is why a mixture of that many parts cannot be fitted.
var ErrFewForParts = errors.New("too few different values for so many parts")

// The narrowest part that is sought, in standard deviations of all readings: a
// likelihood grows without end as a part closes in on a single reading.
const narrowest = 0.02

// mixing is the data of a mixture fit, in units of the search.
type mixing struct {
	cells  []cell
	bounds []counted
	n      float64
	floor  float64 // of a part's SD
	steps  int     // most that a climb takes, and
	enough float64 // the gain in log likelihood a reading at which it ends
}

// newMixing reduces readings marked as in [FitNormal] to cells of mean 0 and
// standard deviation 1; it returns these two of the readings.
func newMixing(x []float64, censor []int8) (m mixing, centre, unit float64, err error) {
	if censor != nil && len(censor) != len(x) {
		panic("stats/dist: slice length mismatch")
	}
	only := x
	if censor != nil {
		only = make([]float64, 0, len(x))
		limits := map[bound]int{}
		for i, v := range x {
			switch {
			case v != v:
			case censor[i] == 0:
				only = append(only, v)
			case censor[i] > 0:
				limits[bound{v, math.Inf(1)}]++
			default:
				limits[bound{math.Inf(-1), v}]++
			}
		}
		for b, n := range limits {
			if !math.IsInf(b.lo, 0) || !math.IsInf(b.hi, 0) {
				m.bounds = append(m.bounds, counted{b, float64(n)})
			}
		}
		slices.SortFunc(m.bounds, byBound)
	}
	m.cells = cells(only)
	switch k := len(m.cells); {
	case k == 0:
		return m, 0, 0, ErrNoValues
	case math.IsInf(m.cells[0].mean, 0) || math.IsInf(m.cells[k-1].mean, 0):
		return m, 0, 0, ErrInfinite
	case k < 2:
		return m, 0, 0, ErrTooFew
	}
	m.n, centre, unit = momentsOf(m.cells)
	for i, c := range m.cells {
		m.cells[i] = cell{c.n, (c.mean - centre) / unit, c.spread / (unit * unit)}
	}
	for i, b := range m.bounds {
		if math.IsInf(b.lo, 1) || math.IsInf(b.hi, -1) {
			return m, 0, 0, ErrInfinite
		}
		m.bounds[i].bound = bound{(b.lo - centre) / unit, (b.hi - centre) / unit}
		m.n += b.n
	}
	m.floor = narrowest
	return m, centre, unit, nil
}

// step is one step of EM: from parts to better ones, and the log-likelihood of
// the parts that came in. A bound shares itself out by its probabilities and
// counts with the moments of the normal tail behind it.
func (m mixing) step(parts, next []Part) (logLik float64) {
	k := len(parts)
	var work [6 * 8]float64
	sums := work[:3*k]     // weight, first and second moment about the old mean
	share := work[24:][:k] // of the cell at hand
	logs, inverse := work[32:][:k], work[40:][:k]
	for j, p := range parts {
		logs[j] = math.Log(p.Weight) - math.Log(p.SD) - 0.5*math.Log(2*math.Pi)
		inverse[j] = 1 / p.SD
	}
	product, factors := 1.0, 0 // of totals, each 1 to k: one logarithm for many
	for _, c := range m.cells {
		top := math.Inf(-1)
		for j, p := range parts {
			z := (c.mean - p.Mean) * inverse[j]
			share[j] = logs[j] - 0.5*z*z
			if share[j] > top {
				top = share[j]
			}
		}
		total := 0.0
		for j := range share {
			switch d := share[j] - top; {
			case d == 0:
				share[j] = 1
				total++
			case d > -40:
				share[j] = math.Exp(d)
				total += share[j]
			default:
				share[j] = 0
			}
		}
		logLik += c.n * top
		if c.n <= 4 {
			for n := c.n; n > 0; n-- {
				product *= total
				factors++
			}
			if factors >= 64 { // 8^68 is far from the largest number
				logLik += math.Log(product)
				product, factors = 1, 0
			}
		} else {
			logLik += c.n * math.Log(total)
		}
		scale := c.n / total
		for j, p := range parts {
			if w := scale * share[j]; w > 0 {
				d := c.mean - p.Mean
				sums[3*j] += w
				sums[3*j+1] += w * d
				sums[3*j+2] += w * (d*d + c.spread)
			}
		}
	}
	logLik += math.Log(product)
	for _, b := range m.bounds {
		top := math.Inf(-1)
		for j, p := range parts {
			l, _, _ := normalKernel.between((b.lo-p.Mean)/p.SD, (b.hi-p.Mean)/p.SD)
			share[j] = math.Log(p.Weight) + l
			top = math.Max(top, share[j])
		}
		total := 0.0
		for j := range share {
			share[j] = math.Exp(share[j] - top)
			total += share[j]
		}
		logLik += b.n * (top + math.Log(total))
		for j, p := range parts {
			w := b.n * share[j] / total
			lo, hi := (b.lo-p.Mean)/p.SD, (b.hi-p.Mean)/p.SD
			_, ha, hb := normalKernel.between(lo, hi)
			first, second := ha-hb, 1.0
			if !math.IsInf(lo, 0) {
				second += lo * ha
			}
			if !math.IsInf(hi, 0) {
				second -= hi * hb
			}
			sums[3*j] += w
			sums[3*j+1] += w * p.SD * first
			sums[3*j+2] += w * p.SD * p.SD * second
		}
	}
	for j, p := range parts {
		w := sums[3*j]
		d := sums[3*j+1] / w
		v := sums[3*j+2]/w - d*d
		next[j] = Part{w / m.n, p.Mean + d, math.Max(m.floor, math.Sqrt(math.Max(0, v)))}
		if !(w > 0) {
			next[j] = Part{0, p.Mean, p.SD}
		}
	}
	return logLik
}

// climb runs EM until the likelihood rises by less than a part `enough` of n, or
// for so many steps. Every third step leaps along the line of the last two
// (Varadhan and Roland 2008, Scand. J. Statist. 35, 335-353, scheme S3), and is
// taken back when the likelihood falls.
func (m mixing) climb(parts []Part, steps int, enough float64) ([]Part, float64) {
	k := len(parts)
	a := slices.Clone(parts)
	b, c, leap, after := make([]Part, k), make([]Part, k), make([]Part, k), make([]Part, k)
	last := math.Inf(-1)
	for range steps {
		l := m.step(a, b)
		if l-last < enough*m.n && !math.IsInf(last, -1) {
			return b, l
		}
		last = l
		l = m.step(b, c)
		if extrapolate(a, b, c, leap, m.floor) {
			if m.step(leap, after) >= l { // at least as good as where it came from
				copy(a, after)
				continue
			}
		}
		copy(a, c)
	}
	return a, m.step(a, b)
}

// extrapolate follows the line from a over b and c, in means, logarithms of SD
// and logarithms of weight.
func extrapolate(a, b, c, leap []Part, floor float64) bool {
	var rr, vv float64
	for j := range a {
		for _, t := range [3][3]float64{
			{a[j].Mean, b[j].Mean, c[j].Mean},
			{math.Log(a[j].SD), math.Log(b[j].SD), math.Log(c[j].SD)},
			{math.Log(a[j].Weight), math.Log(b[j].Weight), math.Log(c[j].Weight)},
		} {
			r := t[1] - t[0]
			v := t[2] - t[1] - r
			rr += r * r
			vv += v * v
		}
	}
	if !(vv > 0) || !(rr > 0) || math.IsInf(rr, 0) {
		return false
	}
	s := -math.Sqrt(rr / vv)
	if s > -1 {
		s = -1
	}
	line := func(x, y, z float64) float64 { return x - 2*s*(y-x) + s*s*(z-2*y+x) }
	total := 0.0
	for j := range a {
		leap[j] = Part{
			Weight: math.Exp(line(math.Log(a[j].Weight), math.Log(b[j].Weight), math.Log(c[j].Weight))),
			Mean:   line(a[j].Mean, b[j].Mean, c[j].Mean),
			SD:     math.Max(floor, math.Exp(line(math.Log(a[j].SD), math.Log(b[j].SD), math.Log(c[j].SD)))),
		}
		if !(leap[j].SD < 100) || !(math.Abs(leap[j].Mean) < 1e6) {
			return false
		}
		total += leap[j].Weight
	}
	for j := range leap {
		leap[j].Weight /= total
	}
	return true
}
