package assoc

import (
	"fmt"
	"math"

	"kneepoint/stats"
	"kneepoint/stats/compare"
	"kneepoint/stats/relate"
)

// confidence of all intervals.
const confidence = 0.95

// judge tries a response against a factor.
func (d *dice) judge(m *measured, v *view) Finding {
	f := Finding{Of: m.Name, With: v.Name, Within: v.within, P: math.NaN(), Adjusted: math.NaN(), Strength: math.NaN(),
		Effect: stats.NoInterval(""), InSigmas: math.NaN(), Slope: stats.NoInterval(""), Groups: []Group{}, Furthest: -1, Cases: "wafers"}
	f.Dice = m.total
	f.say = words{unit: m.Unit, scale: m.Scale, yield: m.Yield, order: v.Order, numeric: v.numeric}
	switch {
	case m.total == 0:
		f.Why = "no readings"
	case v.why != "":
		f.Why = v.why
	case v.within && v.numeric:
		d.withinNumbers(&f, m, v)
	case v.within:
		d.withinNames(&f, m, v)
	default:
		d.between(&f, m, v)
	}
	if m.sigma > 0 {
		f.InSigmas = f.Effect.Estimate / m.sigma
	}
	return f
}

// cases are wafers, or lots, with a level and a value of the factor.
type cases struct {
	level, value []float64
	code         []int32
	block        []int32 // lots of wafers, nil with one lot
	count        []int
}

func (d *dice) cases(m *measured, v *view) cases {
	var c cases
	lot := d.lot()
	for i := range d.wafers {
		if v.unknown(i) || m.level[i] != m.level[i] {
			continue
		}
		c.level, c.value = append(c.level, m.level[i]), append(c.value, v.value[i])
		c.code, c.count = append(c.code, v.code[i]), append(c.count, m.count[i])
		c.block = append(c.block, lot[i])
	}
	if v.byLot {
		return c.byLot(m)
	}
	if d.lots == 1 {
		c.block = nil
	}
	return c
}

// byLot takes the middle of each lot's wafers.
func (c cases) byLot(m *measured) (out cases) {
	var s stats.Selector
	for i := 0; i < len(c.level); {
		j, dice := i, 0
		for j < len(c.level) && c.block[j] == c.block[i] {
			dice += c.count[j]
			j++
		}
		out.level = append(out.level, m.levelOf(&s, c.level[i:j]))
		out.value, out.code = append(out.value, c.value[i]), append(out.code, c.code[i])
		out.count = append(out.count, dice)
		i = j
	}
	return out
}

// between judges a factor that is the same for all dice of a wafer or lot.
func (d *dice) between(f *Finding, m *measured, v *view) {
	c := d.cases(m, v)
	if v.byLot {
		f.Cases = "lots"
	}
	f.N = len(c.level)
	if f.N == 0 {
		f.Why = "no readings where it is known"
		return
	}
	f.say.low, f.say.high = extent(c.value)
	if v.numeric {
		f.numbers(c, m)
	} else {
		f.names(c, v.Labels, m)
	}
}

// names judges a factor with names by its cases.
func (f *Finding) names(c cases, labels []string, m *measured) {
	number := map[int32]int32{} // of the labels in use, in their order
	var used []int32
	for code := range int32(len(labels)) {
		for _, x := range c.code {
			if x == code {
				number[code] = int32(len(used))
				used = append(used, code)
				break
			}
		}
	}
	k := len(used)
	switch {
	case k < 2:
		f.Why = "it is the same for all"
		return
	case f.N < k+2:
		f.Why = fmt.Sprintf("%d %s of %d kinds: too few to tell kinds from %s", f.N, f.Cases, k, f.Cases)
		return
	}
	group := make([]int32, f.N)
	for i, x := range c.code {
		group[i] = number[x]
	}
	t := rankGroups(c.level, group, k, c.block)
	f.P, f.Strength, f.Why = t.p, t.strength, t.why
	f.group(c, group, func(g int) string { return labels[used[g]] }, k, m)
}

// group fills Groups and the effect of the one furthest from the others.
func (f *Finding) group(c cases, group []int32, label func(int) string, k int, m *measured) {
	var s stats.Selector
	level := c.level
	if c.block != nil {
		level, _ = align(c.level, c.block)
	}
	rank, _ := stats.Ranks(level)
	furthest := -1.0
	for g := range k {
		var own, raw, others []float64
		dice, sum := 0, 0.0
		for i := range level {
			if int(group[i]) == g {
				own, raw = append(own, level[i]), append(raw, c.level[i])
				dice += c.count[i]
				sum += rank[i] - float64(len(level)+1)/2
			} else {
				others = append(others, level[i])
			}
		}
		f.Groups = append(f.Groups, Group{Label: label(g), Units: len(own), Dice: dice, Level: m.levelOf(&s, raw)})
		n, a := float64(len(level)), float64(len(own))
		if away := math.Abs(sum) / math.Sqrt(a*(n-a)); away > furthest*(1+1e-12) && len(others) > 0 {
			furthest = away
			f.Furthest = g
			f.Effect = compare.MannWhitney(own, others, confidence).Shift
			f.Effect.Method = "Hodges-Lehmann shift by " + f.Cases
			if len(own) < 3 {
				f.Effect.Lower, f.Effect.Upper = math.NaN(), math.NaN()
				f.Effect.Why = fmt.Sprintf("rests on %d %s", len(own), f.Cases)
			}
		}
	}
}

// bins is how many stretches of a factor of numbers are shown for a bend, and
// fewestForBend how many cases one is looked for in.
const bins, fewestForBend = 4, 12

// numbers judges a factor of numbers by its cases: does the response rise or fall
// along it, or else differ between its middle and its ends, as along the boat of a
// furnace? Two looks at one question: p is twice the smaller. Both are Spearman's
// correlation, the second with the distance in rank from the middle.
func (f *Finding) numbers(c cases, m *measured) {
	if f.N < fewestCases {
		f.Why = fmt.Sprintf("%d %s; %d are needed", f.N, f.Cases, fewestCases)
		return
	}
	x, y, blocks := c.value, c.level, 1
	if c.block != nil {
		x, blocks = align(c.value, c.block)
		y, _ = align(c.level, c.block)
	}
	r := relate.Spearman(x, y)
	if r.Why != "" && r.Estimate.Estimate != r.Estimate.Estimate {
		f.Why = "all cases are equal"
		return
	}
	df := float64(f.N - blocks - 1)
	f.P, f.Strength = correlated(r, blocks, df)
	s := relate.TheilSen(x, y, confidence)
	f.Slope = s.Slope
	low, high := extent(x)
	f.Effect = stats.Interval{Estimate: s.Slope.Estimate * (high - low), Lower: s.Slope.Lower * (high - low), Upper: s.Slope.Upper * (high - low),
		Method: "Theil-Sen slope over the range, by " + f.Cases}
	if f.N < fewestForBend {
		return
	}
	rank, _ := stats.Ranks(x)
	for i := range rank {
		rank[i] = math.Abs(rank[i] - float64(f.N+1)/2)
	}
	if p, strength := correlated(relate.Spearman(rank, y), blocks, df); p < f.P {
		f.P, f.Strength, f.Bend = p, strength, true
		group, label, k := stretches(c.value)
		f.group(c, group, label, k, m)
	}
	f.P = math.Min(1, 2*f.P)
}

// correlated is the p of a rank correlation and the share of variance that it
// explains beyond chance: exact where that is known, else by Student's t with what
// degrees of freedom the blocks leave.
func correlated(r relate.Correlation, blocks int, df float64) (p, strength float64) {
	rho := r.Estimate.Estimate
	p = r.PExact
	if blocks > 1 || p != p {
		p = upperF(rho*rho*df/(1-rho*rho), 1, df)
	}
	return p, math.Max(0, 1-(1-rho*rho)*(df+1)/df)
}

func extent(x []float64) (low, high float64) {
	low, high = x[0], x[0]
	for _, v := range x {
		low, high = math.Min(low, v), math.Max(high, v)
	}
	return low, high
}

// stretches cuts values into bins of about as many cases, equal values together.
func stretches(x []float64) (group []int32, label func(int) string, k int) {
	order := stats.Order(x)
	group = make([]int32, len(x))
	var ends [][2]float64
	last := -1
	for i := 0; i < len(order); {
		j := i
		for j < len(order) && x[order[j]] == x[order[i]] {
			j++
		}
		v := x[order[i]]
		// The stretch that the middle of equal values belongs to.
		if g := (i + j) * bins / (2 * len(order)); g != last {
			ends = append(ends, [2]float64{v, v})
			last = g
		}
		ends[len(ends)-1][1] = v
		for _, at := range order[i:j] {
			group[at] = int32(len(ends) - 1)
		}
		i = j
	}
	label = func(g int) string {
		if ends[g][0] == ends[g][1] {
			return fmt.Sprintf("%.4g", ends[g][0])
		}
		return fmt.Sprintf("%.4g to %.4g", ends[g][0], ends[g][1])
	}
	return group, label, len(ends)
}
