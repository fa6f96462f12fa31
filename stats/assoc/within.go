package assoc

import (
	"fmt"
	"math"

	"gonum.org/v1/gonum/stat/distuv"
	"kneepoint/stats"
	"kneepoint/stats/compare"
	"kneepoint/stats/relate"
)

// withinNames judges a factor with names that varies within wafers: each wafer
// gives a level for each name, taken relative to the wafer's own, and the question
// is whether the same names are high or low on all wafers.
func (d *dice) withinNames(f *Finding, m *measured, v *view) {
	k := len(v.Labels)
	var s stats.Selector
	parts := make([][]float64, k)
	var level []float64 // of wafer and name, where both are known
	var group, block []int32
	dice := make([]int, k)
	for w, span := range d.wafers {
		for g := range parts {
			parts[g] = parts[g][:0]
		}
		for _, i := range d.rows[span.from:span.to] {
			if c := v.Codes[i]; c >= 0 && m.Values[i] == m.Values[i] {
				parts[c] = append(parts[c], m.Values[i])
			}
		}
		enough := 0
		for _, p := range parts {
			if len(p) >= fewestDice {
				enough++
			}
		}
		if enough < 2 {
			continue
		}
		f.N++
		for g, p := range parts {
			if len(p) >= fewestDice {
				level = append(level, m.levelOf(&s, p))
				group, block = append(group, int32(g)), append(block, int32(w))
				dice[g] += len(p)
			}
		}
	}
	group, used := renumber(group, k)
	switch {
	case len(used) < 2:
		f.Why = "too few dice of different kinds on a wafer"
		return
	case f.N == 1:
		d.oneWafer(f, m, v)
	default:
		t := rankGroups(level, group, len(used), block)
		f.P, f.Strength, f.Why = t.p, t.strength, t.why
	}
	f.nameEffect(level, group, block, used, v.Labels, dice, m)
}

// renumber leaves out codes that are not in use.
func renumber(group []int32, k int) (out []int32, used []int32) {
	number := make([]int32, k)
	for g := range number {
		number[g] = -1
	}
	for _, g := range group {
		number[g] = 0
	}
	for g := range number {
		if number[g] == 0 {
			number[g] = int32(len(used))
			used = append(used, int32(g))
		}
	}
	for _, g := range group {
		out = append(out, number[g])
	}
	return out, used
}

// nameEffect fills Groups and the effect of the name furthest from the others of its
// wafer: the mean over wafers, with Student's t.
func (f *Finding) nameEffect(level []float64, group, block, used []int32, labels []string, dice []int, m *measured) {
	var s stats.Selector
	furthest := -1.0
	for g, code := range used {
		var raw, off []float64
		for i := 0; i < len(level); {
			j := i
			own, others, n := math.NaN(), 0.0, 0
			for j < len(level) && block[j] == block[i] {
				if int(group[j]) == g {
					own = level[j]
				} else {
					others += level[j]
					n++
				}
				j++
			}
			if own == own {
				raw, off = append(raw, own), append(off, own-others/float64(n))
			}
			i = j
		}
		f.Groups = append(f.Groups, Group{Label: labels[code], Units: len(raw), Dice: dice[code], Level: m.levelOf(&s, raw)})
		mean, se, _ := oneSample(off)
		if math.Abs(mean) > furthest*(1+1e-12) {
			furthest = math.Abs(mean)
			f.Furthest = g
			f.Effect = overWafers(mean, se, len(off))
		}
	}
}

func overWafers(mean, se float64, n int) stats.Interval {
	iv := stats.Interval{Estimate: mean, Lower: math.NaN(), Upper: math.NaN(), Method: "mean over wafers, Student's t"}
	if n < 2 {
		iv.Why = "one wafer"
		return iv
	}
	t := distuv.StudentsT{Mu: 0, Sigma: 1, Nu: float64(n - 1)}.Quantile(0.5 + confidence/2)
	iv.Lower, iv.Upper = mean-t*se, mean+t*se
	return iv
}

// oneWafer has nothing but the dice of one wafer to judge by.
func (d *dice) oneWafer(f *Finding, m *measured, v *view) {
	f.Cases, f.N = "dice", 0
	var y, x []float64
	var g []int32
	for _, i := range d.rows {
		if m.Values[i] != m.Values[i] {
			continue
		}
		if v.numeric {
			if v.Values[i] == v.Values[i] {
				y, x = append(y, m.Values[i]), append(x, v.Values[i])
			}
		} else if v.Codes[i] >= 0 {
			y, g = append(y, m.Values[i]), append(g, v.Codes[i])
		}
	}
	f.N = len(y)
	if v.numeric {
		r := relate.Spearman(x, y)
		f.P, f.Why = r.P, r.Why
		f.Strength = r.Estimate.Estimate * r.Estimate.Estimate
		return
	}
	r := compare.KruskalWallis(y, g)
	f.P, f.Why, f.Strength = r.P, r.Why, r.Effect
}

// mostDice is how many dice of a wafer the rank correlation takes: more would not
// sharpen it, as wafers are the cases.
const mostDice = 2000

// withinNumbers judges a factor of numbers that varies within wafers: each wafer
// gives a rank correlation, and the question is whether it has one sign on all.
func (d *dice) withinNumbers(f *Finding, m *measured, v *view) {
	var s stats.Selector
	var rho, change []float64
	f.say.low, f.say.high = math.Inf(1), math.Inf(-1)
	for _, span := range d.wafers {
		var x, y []float64
		for _, i := range d.rows[span.from:span.to] {
			if v.Values[i] == v.Values[i] && m.Values[i] == m.Values[i] {
				x, y = append(x, v.Values[i]), append(y, m.Values[i])
			}
		}
		if len(x) < 4*fewestDice {
			continue
		}
		u, w := thin(x), thin(y)
		r := relate.Spearman(u, w).Estimate.Estimate
		if r != r {
			continue // this wafer has one value only
		}
		rho = append(rho, r)
		low, high := quarters(x, y)
		change = append(change, m.levelOf(&s, high)-m.levelOf(&s, low))
		a, b := extent(x)
		f.say.low, f.say.high = math.Min(f.say.low, a), math.Max(f.say.high, b)
	}
	f.N = len(rho)
	switch f.N {
	case 0:
		f.Why = fmt.Sprintf("no wafer has %d dice that differ", 4*fewestDice)
		return
	case 1:
		if len(d.wafers) == 1 {
			d.oneWafer(f, m, v)
		} else {
			f.Why = "one wafer only has readings"
		}
	default:
		mean, _, p := oneSample(rho)
		f.P, f.Strength = p, mean*mean
	}
	mean, se, _ := oneSample(change)
	f.Effect = overWafers(mean, se, len(change))
	f.Effect.Method = "last quarter less first, " + f.Effect.Method
}

// thin takes every so many values, so that mostDice at most are left.
func thin(x []float64) []float64 {
	step := (len(x) + mostDice - 1) / mostDice
	if step <= 1 {
		return x
	}
	out := make([]float64, 0, len(x)/step+1)
	for i := 0; i < len(x); i += step {
		out = append(out, x[i])
	}
	return out
}

// quarters are the y of the lowest and of the highest quarter of x.
func quarters(x, y []float64) (low, high []float64) {
	q := stats.Quantiles(x, []float64{0.25, 0.75}, stats.HyndmanFan8)
	for i, v := range x {
		if v <= q[0] {
			low = append(low, y[i])
		}
		if v >= q[1] {
			high = append(high, y[i])
		}
	}
	return low, high
}
