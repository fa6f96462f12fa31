package dist

import (
	"math"
	"slices"
)

// Grouped is a normal distribution with a mean of its own for each group (wafer)
// and one spread within all of them, fitted by maximum likelihood.
type Grouped struct {
	Groups []int32   // the groups used, ascending
	Mu     []float64 // their means
	Each   []int     // their readings
	// Sigma is the spread within groups. It carries the correction n/(n-groups)
	// on its square, which makes it the pooled standard deviation when no reading
	// is censored.
	Sigma float64
	// SELogSigma is the standard error of ln Sigma.
	SELogSigma float64
	N          int
	// Dropped counts readings of groups without a single exact one, which do not
	// say where their mean is.
	Dropped int
}

// FitNormalGroups fits [Grouped] to x with censoring as in [FitNormal]; group[i]
// is the group of reading i. NaNs are skipped. It panics when lengths differ and
// fails when no group holds two different exact values.
func FitNormalGroups(x []float64, censor []int8, group []int32) (Grouped, error) {
	if len(group) != len(x) || censor != nil && len(censor) != len(x) {
		panic("stats/dist: slice length mismatch")
	}
	var g Grouped
	var parts []*sample
	spread := false
	for _, p := range split(x, censor, group) {
		p.sample.exact.finish()
		n := p.sample.exact.n
		for b, c := range p.sample.bounds {
			p.sample.list = append(p.sample.list, counted{b, float64(c)})
			n += c
		}
		if p.sample.exact.n == 0 {
			g.Dropped += n
			continue
		}
		if err := p.sample.check(); err == ErrInfinite {
			return g, err
		}
		slices.SortFunc(p.sample.list, byBound)
		spread = spread || p.sample.exact.ss > 0
		g.Groups = append(g.Groups, p.group)
		g.Each = append(g.Each, n)
		g.N += n
		parts = append(parts, p.sample)
	}
	switch {
	case g.N == 0:
		return g, ErrNoValues
	case !spread || g.N <= len(parts):
		return g, ErrTooFew
	}
	return g, g.climb(parts)
}

type part struct {
	group  int32
	sample *sample
}

// split sorts the readings into groups, ascending.
func split(x []float64, censor []int8, group []int32) []part {
	count := map[int32]int{}
	last, run := int32(0), 0 // groups mostly come in runs
	for i, v := range x {
		if v != v {
			continue
		}
		if group[i] != last {
			count[last] += run
			last, run = group[i], 0
		}
		run++
	}
	count[last] += run
	ids := make([]int32, 0, len(count))
	for id, n := range count {
		if n > 0 {
			ids = append(ids, id)
		}
	}
	slices.Sort(ids)
	at := map[int32]int{}
	values := make([][]float64, len(ids))
	marks := make([][]int8, len(ids))
	for k, id := range ids {
		at[id] = k
		values[k] = make([]float64, 0, count[id])
		if censor != nil {
			marks[k] = make([]int8, 0, count[id])
		}
	}
	k := -1
	for i, v := range x {
		if v != v {
			continue
		}
		if k < 0 || ids[k] != group[i] {
			k = at[group[i]]
		}
		values[k] = append(values[k], v)
		if censor != nil {
			marks[k] = append(marks[k], censor[i])
		}
	}
	out := make([]part, len(ids))
	for k, id := range ids {
		out[k] = part{id, newSample(values[k], marks[k])}
	}
	return out
}

// climb maximises the likelihood over theta = 1/sigma and one delta = mu/sigma a
// group. Only theta ties the groups together, so that Newton's equations are
// solved group by group.
func (g *Grouped) climb(parts []*sample) error {
	centre, unit := pooledScale(parts)
	k := len(parts)
	points := make([]point, k)
	deltas := make([]float64, k)
	theta := 1.0
	for i, s := range parts {
		deltas[i] = (s.exact.mean - centre) / unit
	}
	total := func(theta float64, deltas []float64, points []point) float64 {
		l := 0.0
		for i, s := range parts {
			points[i] = s.at(theta, deltas[i], centre, unit)
			l += points[i].l
		}
		return l
	}
	l := total(theta, deltas, points)
	step := make([]float64, k)
	next := make([]float64, k)
	trial := make([]point, k)
	var curvature float64
	for range 200 {
		var slope float64
		curvature = 0
		for _, p := range points {
			slope += p.lt - p.ltd*p.ld/p.ldd
			curvature += p.ltt - p.ltd*p.ltd/p.ldd
		}
		if !(curvature < 0) {
			return ErrNoFit
		}
		dt := -slope / curvature
		gain := slope * dt
		for i, p := range points {
			step[i] = -(p.ld + p.ltd*dt) / p.ldd
			gain += p.ld * p.ld / -p.ldd
		}
		done := gain < 1e-17*math.Max(1, math.Abs(l))
		part, moved := 1.0, false
		for range 60 {
			if t := theta + part*dt; t > 0 {
				for i := range next {
					next[i] = deltas[i] + part*step[i]
				}
				if m := total(t, next, trial); m >= l-1e-13*math.Abs(l) {
					theta, l, moved = t, m, true
					copy(deltas, next)
					points, trial = trial, points
					break
				}
			}
			part /= 2
		}
		if done || !moved {
			break
		}
		if theta > 1e9 {
			return ErrNoFit
		}
	}
	n := float64(g.N)
	g.Sigma = unit / theta * math.Sqrt(n/(n-float64(k)))
	for i := range parts {
		g.Mu = append(g.Mu, centre+unit*deltas[i]/theta)
	}
	// The variance of ln sigma = -ln theta, group means taken out, with the
	// same correction for them as Sigma has.
	g.SELogSigma = math.Sqrt(-1/curvature) / theta * math.Sqrt(n/(n-float64(k)))
	return nil
}

// pooledScale gives the units of the search from the exact readings.
func pooledScale(parts []*sample) (centre, unit float64) {
	var n, sum, ss float64
	for _, s := range parts {
		n += float64(s.exact.n)
		sum += float64(s.exact.n) * s.exact.mean
		ss += s.exact.ss
	}
	return sum / n, math.Sqrt(ss / n)
}
