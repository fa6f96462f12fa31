package dist

import (
	"cmp"
	"math"
	"slices"
)

// Mixtures are fits of 1, 2, ... parts to the same readings.
type Mixtures struct {
	// ByParts[k-1] has k parts. It ends where more could not be fitted.
	ByParts []Mixture
	// Best is the number of parts with the smallest BIC.
	Best int
}

// FitMixtures fits mixtures of 1 to most (at most 4) normal parts to readings
// marked as in [FitNormal], to find lots of two or more populations.
//
// EM runs from a fixed set of starts (the best cut into k stretches, quantiles,
// and the fit of k-1 parts with each of its parts split and with a wide or a
// distant one added), so that the same readings give the same fit. A part is
// never narrower than 0.02 standard deviations of all readings, and one that
// holds only a handful of readings is not taken: a likelihood can be raised
// without end by parts closing in on single readings. Above 2,048 different
// values the readings are gathered into cells of neighbours, which costs nothing
// that a fit could show.
//
// NaNs are skipped. It fails without two different exact values or with an
// infinite one, and panics when lengths differ or most is outside 1..4.
//
// Sources: Dempster, Laird and Rubin 1977, J. R. Statist. Soc. B 39, 1-38;
// Schwarz 1978, Ann. Statist. 6, 461-464; Fraley and Raftery 2002, J. Amer.
// Statist. Assoc. 97, 611-631.
func FitMixtures(x []float64, censor []int8, most int) (Mixtures, error) {
	if most < 1 || most > 4 {
		panic("stats/dist: number of parts outside 1..4")
	}
	return fitMixtures(x, censor, most, 1000, 1e-10)
}

// fitMixtures is FitMixtures with the most steps that a climb takes and the gain in
// log likelihood a reading at which it ends.
func fitMixtures(x []float64, censor []int8, most, steps int, enough float64) (Mixtures, error) {
	m, centre, unit, err := newMixing(x, censor)
	if err != nil {
		return Mixtures{}, err
	}
	m.steps, m.enough = steps, enough
	coarse := m.coarser()
	var all Mixtures
	var found []Part
	for k := 1; k <= most; k++ {
		if len(m.cells) < 3*k {
			break
		}
		best, logLik := m.search(coarse, found, k)
		if best == nil {
			break
		}
		found = best
		fit := Mixture{N: int(m.n), LogLik: logLik - (m.n-m.bounded())*math.Log(unit)}
		for _, p := range best {
			fit.Parts = append(fit.Parts, Part{p.Weight, centre + unit*p.Mean, unit * p.SD})
		}
		all.ByParts = append(all.ByParts, fit)
		if all.Best == 0 || fit.BIC() < all.ByParts[all.Best-1].BIC() {
			all.Best = k
		}
	}
	if all.Best == 0 {
		return all, ErrFewForParts
	}
	return all, nil
}

func (m mixing) bounded() (n float64) {
	for _, b := range m.bounds {
		n += b.n
	}
	return n
}

// coarser is the same data in about 500 cells, for trying out starts.
func (m mixing) coarser() mixing {
	if len(m.cells) <= 600 {
		return m
	}
	out := m
	out.cells = nil
	each := m.n / 500
	var c cell
	flush := func() {
		if c.n > 0 {
			c.spread = math.Max(0, c.spread/c.n-c.mean*c.mean/(c.n*c.n))
			c.mean /= c.n
			out.cells = append(out.cells, c)
		}
		c = cell{}
	}
	first := math.Inf(-1)
	for _, d := range m.cells {
		if c.n+d.n > each || d.mean-first > 0.02 {
			flush()
			first = d.mean
		}
		c.n += d.n
		c.mean += d.n * d.mean
		c.spread += d.n * (d.spread + d.mean*d.mean)
	}
	flush()
	return out
}

// search runs EM from all starts, shortly on coarse data, and the best of them to
// the end. nil when none gives k sound parts.
//
// Where there are fewer populations than parts, EM creeps along plateaus towards
// parts on a few readings. So there is one more candidate: from quantiles, and
// stopped on the plateau, while its parts are still broad. It is taken when it is
// clearly better than what runs to an end in sound parts.
func (m mixing) search(coarse mixing, fewer []Part, k int) ([]Part, float64) {
	type try struct {
		parts  []Part
		logLik float64
	}
	var tries []try
	for _, s := range coarse.starts(fewer, k) {
		parts, l := coarse.climb(s, 40, 1e-9)
		if sound(parts, m.n, m.floor, 10) {
			tries = append(tries, try{parts, l})
		}
	}
	slices.SortStableFunc(tries, func(a, b try) int { return cmp.Compare(b.logLik, a.logLik) })
	var best []Part
	bestLik := math.Inf(-1)
	last, done := math.Inf(1), 0
	for _, t := range tries {
		if done == 4 || last-t.logLik < 1e-7*m.n { // the same top again, from another start
			continue
		}
		last = t.logLik
		done++
		parts, l := m.climb(t.parts, m.steps, m.enough)
		if l > bestLik && sound(parts, m.n, m.floor, 10) {
			best, bestLik = parts, l
		}
	}
	if k > 1 {
		parts, l := m.plateau(m.stretches(m.evenCuts(k)))
		if l > bestLik+0.3 && sound(parts, m.n, m.floor, 5) {
			best, bestLik = parts, l
		}
	}
	slices.SortFunc(best, func(a, b Part) int { return cmp.Compare(a.Mean, b.Mean) })
	return best, bestLik
}

// plateau runs EM until a step brings next to nothing.
func (m mixing) plateau(parts []Part) ([]Part, float64) {
	for j := range parts {
		parts[j].SD = math.Max(parts[j].SD, m.floor)
	}
	next := make([]Part, len(parts))
	last := math.Inf(-1)
	for range 1000 {
		l := m.step(parts, next)
		if l-last < 2.5e-5*m.n {
			return parts, l
		}
		last = l
		copy(parts, next)
	}
	return parts, m.step(parts, next)
}

// sound rejects parts that live on a handful of readings, more so when narrow.
func sound(parts []Part, n, floor, few float64) bool {
	for _, p := range parts {
		least := few
		switch {
		case p.SD <= floor:
			least = 50
		case p.SD < 0.1:
			least = 20
		}
		if len(parts) > 1 && !(p.Weight*n >= least) {
			return false
		}
	}
	return true
}

// starts are where EM begins.
func (m mixing) starts(fewer []Part, k int) [][]Part {
	if k == 1 {
		return [][]Part{{{1, 0, 1}}}
	}
	out := [][]Part{m.stretches(m.bestCuts(k)), m.stretches(m.evenCuts(k))}
	for j := range fewer {
		p := fewer[j]
		for _, d := range []float64{0.6, 1.2} { // in two, apart
			s := slices.Clone(fewer)
			s[j] = Part{p.Weight / 2, p.Mean - d*p.SD, 0.7 * p.SD}
			out = append(out, append(s, Part{p.Weight / 2, p.Mean + d*p.SD, 0.7 * p.SD}))
		}
		s := slices.Clone(fewer) // in two, a wide one around a narrow one
		s[j] = Part{0.7 * p.Weight, p.Mean, 0.6 * p.SD}
		out = append(out, append(s, Part{0.3 * p.Weight, p.Mean, 1.8 * p.SD}))
	}
	for _, end := range []float64{0.02, 0.1} { // a part for either tail
		for _, high := range []bool{false, true} {
			s := slices.Clone(fewer)
			for j := range s {
				s[j].Weight *= 1 - end
			}
			tail := m.tail(end, high)
			tail.Weight = end
			out = append(out, append(s, tail))
		}
	}
	for _, s := range out {
		for j := range s {
			s[j].SD = math.Max(s[j].SD, 2*m.floor)
		}
	}
	return out
}

// tail gives mean and SD of an outer share of the cells.
func (m mixing) tail(share float64, high bool) Part {
	cs := slices.Clone(m.cells)
	if high {
		slices.Reverse(cs)
	}
	count := 0.0
	for i, c := range cs {
		if count += c.n; count >= share*m.n {
			_, mean, sd := momentsOf(cs[:i+1])
			return Part{0, mean, sd}
		}
	}
	return Part{0, 0, 1}
}

// stretches makes a part of each stretch of cells that begins at a cut.
func (m mixing) stretches(cuts []int) []Part {
	var out []Part
	for j, from := range cuts {
		to := len(m.cells)
		if j+1 < len(cuts) {
			to = cuts[j+1]
		}
		n, mean, sd := momentsOf(m.cells[from:to])
		out = append(out, Part{n / m.n, mean, sd})
	}
	total := 0.0
	for _, p := range out {
		total += p.Weight
	}
	for j := range out {
		out[j].Weight /= total
	}
	return out
}

// evenCuts gives each part the same number of readings.
func (m mixing) evenCuts(k int) []int {
	cuts := []int{0}
	count := 0.0
	for i, c := range m.cells {
		if len(cuts) < k && i > cuts[len(cuts)-1] && count >= float64(len(cuts))*m.n/float64(k) {
			cuts = append(cuts, i)
		}
		count += c.n
	}
	return cuts
}

// bestCuts are the cuts with the least sum of squares within the parts, by
// dynamic programming (Fisher 1958, J. Amer. Statist. Assoc. 53, 789-798).
func (m mixing) bestCuts(k int) []int {
	n := len(m.cells)
	w, s, q := make([]float64, n+1), make([]float64, n+1), make([]float64, n+1)
	for i, c := range m.cells {
		w[i+1], s[i+1], q[i+1] = w[i]+c.n, s[i]+c.n*c.mean, q[i]+c.n*c.mean*c.mean
	}
	cost := func(i, j int) float64 { // of cells i..j-1
		d := s[j] - s[i]
		return q[j] - q[i] - d*d/(w[j]-w[i])
	}
	best, from := make([]float64, n+1), make([][]int, k)
	for j := 1; j <= n; j++ {
		best[j] = cost(0, j)
	}
	for part := 1; part < k; part++ {
		from[part] = make([]int, n+1)
		next := make([]float64, n+1)
		for j := n; j > part; j-- {
			next[j] = math.Inf(1)
			for i := part; i < j; i++ {
				if c := best[i] + cost(i, j); c < next[j] {
					next[j], from[part][j] = c, i
				}
			}
		}
		best = next
	}
	cuts := make([]int, k)
	at := n
	for part := k - 1; part > 0; part-- {
		at = from[part][at]
		cuts[part] = at
	}
	return cuts
}
