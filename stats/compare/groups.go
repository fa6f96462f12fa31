package compare

import (
	"math"
	"slices"

	"kneepoint/stats"
	"kneepoint/stats/internal/tail"
)

// sample is the readings of one group.
type sample struct {
	id     int32
	values []float64
}

// split sorts readings into groups, ascending by number; NaNs are left out and
// so are groups without a reading.
func split(y []float64, group []int32) []sample {
	if len(group) != len(y) {
		panic("stats/compare: slice length mismatch")
	}
	at := map[int32]int{}
	var parts []sample
	last := -1 // groups mostly come in runs
	for i, v := range y {
		if v != v {
			continue
		}
		if last < 0 || parts[last].id != group[i] {
			k, ok := at[group[i]]
			if !ok {
				k = len(parts)
				at[group[i]] = k
				parts = append(parts, sample{id: group[i]})
			}
			last = k
		}
		parts[last].values = append(parts[last].values, v)
	}
	slices.SortFunc(parts, func(a, b sample) int { return int(a.id) - int(b.id) })
	return parts
}

func total(parts []sample) (n int) {
	for _, p := range parts {
		n += len(p.values)
	}
	return n
}

// why says what keeps groups from being compared at all.
func why(parts []sample) string {
	n := total(parts)
	switch {
	case n == 0:
		return "no readings"
	case len(parts) < 2:
		return "one group only"
	case n <= len(parts):
		return "one reading a group"
	}
	return ""
}

func infinite(parts []sample) bool {
	for _, p := range parts {
		for _, v := range p.values {
			if math.IsInf(v, 0) {
				return true
			}
		}
	}
	return false
}

// ANOVA is a one-way analysis of variance, with its usual table.
type ANOVA struct {
	DFBetween, DFWithin int
	SSBetween, SSWithin float64 // sums of squares
	MSBetween, MSWithin float64 // mean squares, SS/DF
	F, P                float64
	// RSquared is SSBetween over the total: the share of this sample's variance
	// that the groups explain (eta squared). OmegaSquared estimates that share for
	// the population, and does not grow with the number of groups; it may come out
	// below 0, which means none.
	RSquared, OmegaSquared float64
	ResidualSD             float64 // root of MSWithin, in the readings' unit
	N, Groups              int
	Why                    string
}

// OneWay is the one-way fixed-effects analysis of variance of y by group,
//
//	F = (sum n_i (m_i - m)^2 / (k-1)) / (sum (y_ij - m_i)^2 / (n-k))
//
// for readings that are about normal with the same spread in every group.
//
// NaNs are skipped. There is no F, and Why says so, with fewer than two groups,
// one reading a group, an infinite reading or no spread within groups. It panics
// when lengths differ.
//
// Readings are taken relative to their mean first, so that many constant leading
// digits cost none of those that differ (the difficulty of NIST StRD SmLs01-09).
// Source: Fisher 1925; NIST/SEMATECH e-Handbook 7.4.3.
func OneWay(y []float64, group []int32) ANOVA {
	return oneWay(split(y, group))
}

func oneWay(parts []sample) ANOVA {
	nan := math.NaN()
	a := ANOVA{SSBetween: nan, SSWithin: nan, MSBetween: nan, MSWithin: nan, F: nan, P: nan,
		RSquared: nan, OmegaSquared: nan, ResidualSD: nan}
	a.Groups, a.N = len(parts), total(parts)
	if a.Why = why(parts); a.Why == "" && infinite(parts) {
		a.Why = "an infinite reading"
	}
	if a.Why != "" {
		return a
	}
	shift := grandMean(parts)
	means := make([]float64, len(parts))
	weighted := 0.0
	a.SSWithin = 0
	for i, p := range parts {
		m := stats.MomentsOf(minus(p.values, shift))
		means[i] = m.Mean
		weighted += float64(m.N) * m.Mean
		if m.N > 1 {
			a.SSWithin += m.Variance() * float64(m.N-1)
		}
	}
	centre := weighted / float64(a.N)
	a.SSBetween = 0
	for i, p := range parts {
		d := means[i] - centre
		a.SSBetween += float64(len(p.values)) * d * d
	}
	a.DFBetween, a.DFWithin = a.Groups-1, a.N-a.Groups
	a.MSBetween, a.MSWithin = a.SSBetween/float64(a.DFBetween), a.SSWithin/float64(a.DFWithin)
	a.ResidualSD = math.Sqrt(a.MSWithin)
	all := a.SSBetween + a.SSWithin
	if all > 0 {
		a.RSquared = a.SSBetween / all
		a.OmegaSquared = (a.SSBetween - float64(a.DFBetween)*a.MSWithin) / (all + a.MSWithin)
	}
	if !(a.MSWithin > 0) {
		a.Why = "no spread within groups"
		return a
	}
	a.F = a.MSBetween / a.MSWithin
	a.P = tail.F(a.F, float64(a.DFBetween), float64(a.DFWithin))
	return a
}

func grandMean(parts []sample) float64 {
	mean, n := 0.0, 0.0
	for _, p := range parts {
		n += float64(len(p.values))
		mean += (stats.Mean(p.values) - mean) * float64(len(p.values)) / n
	}
	return mean
}

func minus(x []float64, shift float64) []float64 {
	out := make([]float64, len(x))
	for i, v := range x {
		out[i] = v - shift
	}
	return out
}

// WelchANOVA compares the means of groups whose spreads may differ. Statistic is
// Welch's F on DF1 = k-1 and the approximate DF2; Effect is eta squared as in
// [ANOVA].
//
// Groups of one reading have no spread of their own and are left out; a group of
// two or more readings that are all equal leaves no F, and Why says so. NaNs are
// skipped; it panics when lengths differ. Source: Welch 1951, Biometrika 38,
// 330-336.
func WelchANOVA(y []float64, group []int32) Result {
	parts := slices.DeleteFunc(split(y, group), func(p sample) bool { return len(p.values) < 2 })
	if w := why(parts); w != "" {
		return no(w + " (groups of one reading left out)")
	}
	if infinite(parts) {
		return no("an infinite reading")
	}
	k := float64(len(parts))
	shift := grandMean(parts)
	means, weights := make([]float64, len(parts)), make([]float64, len(parts))
	var sum, centre float64
	for i, p := range parts {
		m := stats.MomentsOf(minus(p.values, shift))
		if !(m.Variance() > 0) {
			return no("a group without spread")
		}
		means[i], weights[i] = m.Mean, float64(m.N)/m.Variance()
		sum += weights[i]
		centre += weights[i] * m.Mean
	}
	centre /= sum
	var between, lack float64
	for i, p := range parts {
		d := means[i] - centre
		between += weights[i] * d * d
		share := 1 - weights[i]/sum
		lack += share * share / float64(len(p.values)-1)
	}
	lack /= k*k - 1
	r := Result{DF1: k - 1, DF2: 1 / (3 * lack), Groups: len(parts), N: total(parts)}
	r.Statistic = between / ((k - 1) * (1 + 2*(k-2)*lack))
	r.P = tail.F(r.Statistic, r.DF1, r.DF2)
	r.Effect = oneWay(parts).RSquared
	return r
}

// Levene tests for equal spread: a one-way analysis of variance of |y - m_i|
// with m_i the group's mean. Statistic is F, Effect its eta squared. NaNs, Why
// and panics as for [OneWay]. Source: Levene 1960, in Contributions to
// Probability and Statistics, 278-292.
func Levene(y []float64, group []int32) Result { return deviations(y, group, stats.Mean) }

// BrownForsythe is [Levene] with the deviations from the group's median, which
// keeps its level for skewed and long-tailed readings. Source: Brown and
// Forsythe 1974, J. Amer. Statist. Assoc. 69, 364-367.
func BrownForsythe(y []float64, group []int32) Result { return deviations(y, group, stats.Median) }

func deviations(y []float64, group []int32, centre func([]float64) float64) Result {
	parts := split(y, group)
	if infinite(parts) {
		return no("an infinite reading")
	}
	for i, p := range parts {
		d := minus(p.values, centre(p.values))
		for j := range d {
			d[j] = math.Abs(d[j])
		}
		parts[i].values = d
	}
	a := oneWay(parts)
	return Result{Statistic: a.F, DF1: float64(a.DFBetween), DF2: float64(a.DFWithin), P: a.P, Effect: a.RSquared,
		N: a.N, Groups: a.Groups, Why: a.Why}
}

// Bartlett tests for equal variances of groups with normal readings. Statistic
// is his K squared on DF1 = k-1; Effect the ratio of the largest to the smallest
// standard deviation. Groups of one reading are left out; one without spread
// leaves no statistic, and Why says so. NaNs and panics as for [OneWay].
// Source: Bartlett 1937, Proc. R. Soc. A 160, 268-282; NIST/SEMATECH e-Handbook
// 1.3.5.7.
func Bartlett(y []float64, group []int32) Result {
	parts := slices.DeleteFunc(split(y, group), func(p sample) bool { return len(p.values) < 2 })
	if w := why(parts); w != "" {
		return no(w + " (groups of one reading left out)")
	}
	if infinite(parts) {
		return no("an infinite reading")
	}
	k := float64(len(parts))
	vars := make([]float64, len(parts))
	var df, pooled, logs, reciprocal float64
	for i, p := range parts {
		vars[i] = stats.MomentsOf(p.values).Variance()
		if !(vars[i] > 0) {
			return no("a group without spread")
		}
		d := float64(len(p.values) - 1)
		df += d
		pooled += d * vars[i]
		reciprocal += 1 / d
	}
	pooled /= df
	for i, p := range parts {
		logs += float64(len(p.values)-1) * math.Log(vars[i]/pooled)
	}
	r := Result{DF1: k - 1, DF2: math.NaN(), Groups: len(parts), N: total(parts)}
	r.Statistic = -logs / (1 + (reciprocal-1/df)/(3*(k-1)))
	r.P = tail.ChiSquared(r.Statistic, r.DF1)
	r.Effect = math.Sqrt(slices.Max(vars) / slices.Min(vars))
	return r
}
