package dist

import "math"

// Population is one or more parts of a mixture that overlap too much to be told
// apart by their readings.
type Population struct {
	Parts    []int   // indexes into Mixture.Parts
	Weight   float64 // share of the readings
	Mean, SD float64
	// From and To are the ends of the stretch of readings that goes to this
	// population: where its density equals its neighbour's. Infinite at the ends.
	From, To float64
	// Astray is the share of this population's readings that fall outside From and
	// To, and so go to another.
	Astray float64
}

// valley is how deep the density must fall between two peaks, in parts of the
// lower one, for these to be two populations: for two equal parts, at a distance
// of 3.4 standard deviations. Common practice, no source; the criterion is the
// ridgeline ratio of Hennig 2010, Advances in Data Analysis and Classification
// 4, 3-34, which also shows why parts by BIC must be merged: a skewed population
// of many readings takes several normal parts.
const valley = 0.5

// Populations merges the parts of a mixture that overlap, in order of their
// means: two neighbours are one unless the density between their peaks falls
// below half of the lower peak. The pair with the shallowest valley goes first.
func (m Mixture) Populations() []Population {
	groups := make([]Mixture, len(m.Parts))
	at := make([][]int, len(m.Parts))
	for i, p := range m.Parts {
		groups[i], at[i] = Mixture{Parts: []Part{p}}, []int{i}
	}
	for len(groups) > 1 {
		shallow, which := valley, -1
		for i := range groups[1:] {
			if r := ridge(groups[i], groups[i+1]); r > shallow {
				shallow, which = r, i
			}
		}
		if which < 0 {
			break
		}
		groups[which].Parts = append(groups[which].Parts, groups[which+1].Parts...)
		at[which] = append(at[which], at[which+1]...)
		groups = append(groups[:which+1], groups[which+2:]...)
		at = append(at[:which+1], at[which+2:]...)
	}
	out := make([]Population, len(groups))
	for i, g := range groups {
		p := Population{Parts: at[i], From: math.Inf(-1), To: math.Inf(1)}
		for _, q := range g.Parts {
			p.Weight += q.Weight
			p.Mean += q.Weight * q.Mean
		}
		p.Mean /= p.Weight
		for _, q := range g.Parts {
			d := q.Mean - p.Mean
			p.SD += q.Weight / p.Weight * (q.SD*q.SD + d*d)
		}
		p.SD = math.Sqrt(p.SD)
		if i > 0 {
			p.From = border(groups[i-1], g)
			out[i-1].To = p.From
		}
		out[i] = p
	}
	for i, g := range groups {
		p := &out[i]
		p.Astray = (g.CDF(p.From) + g.Survival(p.To)) / p.Weight
	}
	return out
}

// Split returns the population of each reading, by number, -1 for NaN. A bound
// goes where its value lies.
func Split(x []float64, populations []Population) []int8 {
	out := make([]int8, len(x))
	for i, v := range x {
		out[i] = -1
		for k, p := range populations {
			if v >= p.From && v < p.To || v >= p.From && math.IsInf(p.To, 1) {
				out[i] = int8(k)
			}
		}
	}
	return out
}

// peak is where the density of a mixture is largest, on a grid.
func peak(m Mixture) (at, height float64) {
	for _, p := range m.Parts {
		for i := -20; i <= 20; i++ {
			x := p.Mean + float64(i)/10*p.SD
			if d := m.Density(x); d > height {
				at, height = x, d
			}
		}
	}
	return at, height
}

// ridge is how deep the density of two neighbours falls between their peaks: the
// least ratio of the density to the lower of the highest points on its two
// sides. 1 where it only falls or only rises.
func ridge(a, b Mixture) float64 {
	both := Mixture{Parts: append(append([]Part{}, a.Parts...), b.Parts...)}
	u, _ := peak(a)
	v, _ := peak(b)
	const steps = 400
	var d, after [steps + 1]float64
	for i := range d {
		d[i] = both.Density(u + (v-u)*float64(i)/steps)
	}
	high := 0.0
	for i := steps; i >= 0; i-- {
		high = math.Max(high, d[i])
		after[i] = high
	}
	least, before := 1.0, 0.0
	for i := range d {
		before = math.Max(before, d[i])
		least = math.Min(least, d[i]/math.Min(before, after[i]))
	}
	return least
}

// border is where the densities of two neighbours are equal, between their peaks.
func border(a, b Mixture) float64 {
	lo, _ := peak(a)
	hi, _ := peak(b)
	for range 100 {
		mid := lo + (hi-lo)/2
		if !(mid > lo && mid < hi) {
			break
		}
		if a.Density(mid) > b.Density(mid) {
			lo = mid
		} else {
			hi = mid
		}
	}
	return lo + (hi-lo)/2
}
