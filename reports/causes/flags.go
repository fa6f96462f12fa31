package causes

import (
	"math"
	"slices"

	"gonum.org/v1/gonum/stat/distuv"

	"kneepoint/stats"
	"kneepoint/stats/junction"
	"kneepoint/wafermap"
)

// flags are the yes-or-no observations. A flag that cannot be told from these data
// is left out.
func (o *observer) flags() map[string]bool {
	f := map[string]bool{}
	for _, name := range o.c.Raised {
		f[name] = true
	}
	for _, name := range []string{"limits-differ", "unit-conflict"} {
		f[name] = slices.Contains(o.c.Raised, name)
	}
	o.siteFlag(f)
	o.retestFlags(f)
	o.orderFlag(f)
	o.pileUp(f)
	o.repeatFlag(f)
	o.fewWafers(f)
	o.stepFlag(f)
	o.reasonFlag(f)
	return f
}

// siteFlag: single dice lie at one site far more often than at the others, or the
// levels of one site stand apart by more than the scatter of dice.
func (o *observer) siteFlag(f map[string]bool) {
	c := o.c
	if c.Site == nil {
		return
	}
	sites := map[int32]tally{}
	for i, s := range c.Site[:o.e.Dice] {
		t := sites[s]
		t.dice++
		if o.e.class[i] >= 0 {
			t.hit++
		}
		sites[s] = t
	}
	if len(sites) < 2 {
		return
	}
	f["one-site"] = false
	var all tally
	for _, t := range sites {
		all.dice, all.hit = all.dice+t.dice, all.hit+t.hit
	}
	for _, s := range siteNames(sites) {
		t := sites[s]
		rest := tally{all.dice - t.dice, all.hit - t.hit}
		expected := t.dice * (rest.hit + 0.5) / (rest.dice + 1)
		if t.hit >= 6 && t.hit > 2*expected && o.poissonTail(t.hit, expected) < 1e-5/float64(len(sites)) {
			f["one-site"] = true
		}
	}
	if o.siteLevel(sites) {
		f["one-site"] = true
	}
}

// tally counts dice and those of them that stand alone.
type tally struct{ dice, hit float64 }

func siteNames[V any](m map[int32]V) []int32 {
	names := make([]int32, 0, len(m))
	for s := range m {
		names = append(names, s)
	}
	slices.Sort(names)
	return names
}

// poissonTail is the chance of at least n where expected are.
func (o *observer) poissonTail(n, expected float64) float64 {
	if expected <= 0 {
		return 0
	}
	return 1 - distuv.Poisson{Lambda: expected}.CDF(n-1)
}

// siteLevel: the median of one site is off those of the others by more than the
// scatter of dice, in any test that is not a leakage.
func (o *observer) siteLevel(sites map[int32]tally) bool {
	c := o.c
	names := siteNames(sites)
	if len(names) > 64 {
		return false
	}
	for t := range c.Tests {
		if kind(c.Tests[t].Measures) == leakage || !(o.e.Scatter[t] > 0) {
			continue
		}
		by := make(map[int32][]float64, len(names))
		for w, s := range c.Wafers {
			level := o.e.Wafers[w].Level[t]
			if math.IsNaN(level) {
				continue
			}
			for i := s.Lo; i < s.Hi; i++ {
				if v := c.Tests[t].Values[i]; v > 0 && !o.hard[i] {
					by[c.Site[i]] = append(by[c.Site[i]], o.ratio(t, v)-level)
				}
			}
		}
		var levels []float64
		for _, s := range names {
			if v := by[s]; len(v) >= 20 {
				levels = append(levels, stats.Median(v))
			}
		}
		if len(levels) < 2 {
			continue
		}
		middle := stats.Median(slices.Clone(levels))
		for _, l := range levels {
			if len(levels) > 2 && math.Abs(l-middle) > max(1.2*o.e.Scatter[t], 0.02) || len(levels) == 2 && math.Abs(levels[0]-levels[1]) > max(1.5*o.e.Scatter[t], 0.03) {
				return true
			}
		}
	}
	return false
}

// retestFlags: what became of the dice that failed and were measured again.
func (o *observer) retestFlags(f map[string]bool) {
	n, recovered := 0, 0
	for j, i := range o.c.Retest.Of {
		if !o.c.Retest.Failed[j] {
			continue
		}
		n++
		if o.c.Pass[i] {
			recovered++
		}
	}
	if n < 5 {
		return
	}
	f["recovers"] = 2*recovered >= n
	f["stays"] = 5*recovered < n
}

// orderFlag: BVceo cannot exceed BVcbo; three measurement sigmas are left to it.
func (o *observer) orderFlag(f map[string]bool) {
	ceo, cbo := o.find(junction.BVceo), o.find(junction.BVcbo)
	if ceo < 0 || cbo < 0 {
		return
	}
	bound := math.Exp(3 * math.Hypot(readError(junction.BVceo), readError(junction.BVcbo)))
	n, above := 0, 0
	a, b := &o.c.Tests[ceo], &o.c.Tests[cbo]
	for i, v := range a.Values {
		u := b.Values[i]
		if math.IsNaN(v) || math.IsNaN(u) || !(u > 0) || b.bound(i) || a.bound(i) || o.hard[i] {
			continue
		}
		n++
		if v > u*bound {
			above++
		}
	}
	if n >= 20 {
		f["bvceo-above-bvcbo"] = above >= 5 && float64(above) > 0.01*float64(n)
	}
}

func (t *Test) bound(i int) bool { return t.Censor != nil && t.Censor[i] != 0 }

// find returns the first test that measures something, -1 for none.
func (o *observer) find(measures string) int {
	return slices.IndexFunc(o.c.Tests, func(t Test) bool { return t.Measures == measures })
}

// pileUp: the readings of a wafer end at a value that is not the tester's known end
// and is near the test's level.
func (o *observer) pileUp(f map[string]bool) {
	f["pile-up"] = false
	for t := range o.c.Tests {
		test := &o.c.Tests[t]
		if kind(test.Measures) == leakage {
			continue
		}
		piled := 0
		for _, s := range o.c.Wafers {
			if o.pile(t, test.Values[s.Lo:s.Hi]) {
				piled++
			}
		}
		if piled > 0 && 20*piled >= len(o.c.Wafers) && !o.coarse(t, o.e.Dice) {
			f["pile-up"] = true
		}
	}
}

// pile says whether one in ten readings is the very highest or lowest of them.
func (o *observer) pile(t int, values []float64) bool {
	test := &o.c.Tests[t]
	lo, hi := math.Inf(1), math.Inf(-1)
	n := 0
	wide := max(8*o.e.Scatter[t], 0.25)
	near := func(v float64) bool { return v > 0 && math.Abs(math.Log(v/o.majority[t])) < wide }
	for _, v := range values {
		if !math.IsNaN(v) && near(v) {
			lo, hi, n = min(lo, v), max(hi, v), n+1
		}
	}
	atLo, atHi := 0, 0
	for _, v := range values {
		if v == lo {
			atLo++
		}
		if v == hi {
			atHi++
		}
	}
	enough := max(8, n/10)
	return hi > lo && (atHi > enough && hi != test.Clamp || atLo > enough && lo != test.Floor) || n > 20 && hi == lo
}

// coarse says whether a test reads in so few steps that its ends hold many dice
// anyhow.
func (o *observer) coarse(t, n int) bool {
	seen := map[float64]struct{}{}
	for _, v := range o.c.Tests[t].Values {
		if !math.IsNaN(v) {
			if seen[v] = struct{}{}; len(seen) > 30 {
				return false
			}
		}
	}
	return n > 60
}

// repeatFlag: positions fail on more wafers than chance allows.
func (o *observer) repeatFlag(f map[string]bool) {
	c := o.c
	if c.X == nil || c.Y == nil || len(c.Wafers) < 4 {
		return
	}
	fails := make([]wafermap.WaferFails, len(c.Wafers))
	for w, s := range c.Wafers {
		hit := make([]bool, s.Hi-s.Lo)
		for i := range hit {
			hit[i] = o.e.class[s.Lo+i] >= 0
		}
		fails[w] = wafermap.WaferFails{X: c.X[s.Lo:s.Hi], Y: c.Y[s.Lo:s.Hi], Fail: hit}
	}
	found, _ := wafermap.Repeaters(c.Geometry, fails, 0.01)
	f["repeats"] = len(found) >= 1
	at, singles := 0, 0.0
	for _, p := range found {
		at += p.Failing
	}
	for w := range o.e.Wafers {
		for _, n := range o.e.Wafers[w].Single {
			singles += n
		}
	}
	f["repeats-mostly"] = at >= 10 && float64(at) > 0.4*singles || o.overlap() > 0.4
}

// overlap is how alike the single dice of wafers lie, beyond chance: the mean over
// pairs of wafers that have some of (common - expected) / (fewest - expected).
func (o *observer) overlap() float64 {
	c := o.c
	type die struct{ x, y int32 }
	var maps []map[die]bool
	var dice []float64
	for _, s := range c.Wafers {
		m := map[die]bool{}
		for i := s.Lo; i < s.Hi; i++ {
			if o.e.class[i] >= 0 {
				m[die{c.X[i], c.Y[i]}] = true
			}
		}
		if n := s.Hi - s.Lo; len(m) >= 10 && 10*len(m) > n {
			maps, dice = append(maps, m), append(dice, float64(n))
		}
	}
	sum, pairs := 0.0, 0.0
	for a := range maps {
		for b := range a {
			common := 0.0
			for d := range maps[a] {
				if maps[b][d] {
					common++
				}
			}
			na, nb := float64(len(maps[a])), float64(len(maps[b]))
			expected := na * nb / dice[a]
			if fewest := min(na, nb); fewest > expected {
				sum += (common - expected) / (fewest - expected)
				pairs++
			}
		}
	}
	if pairs == 0 {
		return 0
	}
	return sum / pairs
}

// fewWafers: nine in ten of the single dice beyond the usual number lie on at most
// one wafer in five.
func (o *observer) fewWafers(f map[string]bool) {
	n := len(o.e.Wafers)
	if n < 5 {
		return
	}
	rates := make([]float64, n)
	for w := range o.e.Wafers {
		sum := 0.0
		for _, k := range o.e.Wafers[w].Single {
			sum += k
		}
		rates[w] = sum / max(1, float64(o.e.Wafers[w].Dice))
	}
	usual := stats.Median(slices.Clone(rates))
	excess := 0.0
	for w, r := range rates {
		rates[w] = max(0, r-usual)
		excess += rates[w] * float64(o.e.Wafers[w].Dice)
	}
	if excess < 10 {
		return
	}
	slices.Sort(rates)
	total, top := 0.0, 0.0
	for i, r := range rates {
		total += r
		if i >= n-max(1, n/5) {
			top += r
		}
	}
	f["few-wafers"] = top > 0.85*total
}

// stepFlag: from one wafer on, a test's level is another one, by far more than the
// wafers of either side differ.
func (o *observer) stepFlag(f map[string]bool) {
	n := len(o.e.Wafers)
	if n < 6 {
		return
	}
	f["step"] = false
	level := make([]float64, n)
	for t := range o.c.Tests {
		for w := range level {
			level[w] = o.e.Wafers[w].Level[t]
		}
		for at := 2; at <= n-2; at++ {
			a, b := level[:at], level[at:]
			ma, mb := stats.Median(present(a)), stats.Median(present(b))
			noise := max(spreadOf(a, ma), spreadOf(b, mb), 0.2*o.e.Scatter[t], 0.3*readError(o.c.Tests[t].Measures))
			if math.Abs(ma-mb) > 6*noise && math.Abs(ma-mb) > o.e.Scatter[t] {
				f["step"] = true
			}
		}
	}
}

func present(v []float64) []float64 {
	out := make([]float64, 0, len(v))
	for _, x := range v {
		if !math.IsNaN(x) {
			out = append(out, x)
		}
	}
	return out
}

// spreadOf is the largest distance from m: a step has none that lie between.
func spreadOf(v []float64, m float64) float64 {
	d := 0.0
	for _, x := range v {
		if !math.IsNaN(x) {
			d = max(d, math.Abs(x-m))
		}
	}
	return d / 2
}

// reasonFlag: dice fail though every reading is inside its limits.
// Not known where limits are not, or where no product file says which bins pass.
func (o *observer) reasonFlag(f map[string]bool) {
	c := o.c
	limited := 0
	for t := range c.Tests {
		if !math.IsNaN(c.Tests[t].Lower) && !math.IsInf(c.Tests[t].Lower, 0) || !math.IsNaN(c.Tests[t].Upper) && !math.IsInf(c.Tests[t].Upper, 0) {
			limited++
		}
	}
	if 5*limited < 4*len(c.Tests) || limited == 0 || c.Baseline == "none" {
		return
	}
	without, failing := 0, 0
	for i, p := range c.Pass {
		if p {
			continue
		}
		failing++
		breaks, read := false, 0
		for t := range c.Tests {
			v := c.Tests[t].Values[i]
			if math.IsNaN(v) {
				continue
			}
			read++
			if v < c.Tests[t].Lower || v > c.Tests[t].Upper {
				breaks = true
				break
			}
		}
		if !breaks && read == len(c.Tests) {
			without++
		}
	}
	f["fails-without-reason"] = without > 5 && 5*without > failing && float64(without) > 0.01*float64(o.e.Dice)
}

// scaledFlag: the typical wafer is off in one test alone, and by the same factor on
// every wafer and zone, as no process does it.
func (f *frame) scaledFlag() (raised, known bool) {
	if c := f.e.cols; c.Baseline == "lot majority" || c.Baseline == "none" || len(f.tests) < 4 {
		return false, false
	}
	off := -1
	for i, t := range f.tests {
		switch z := math.Abs(f.e.Lot[t]) / f.lot[i]; {
		case z > 5 && off >= 0:
			return false, true // two tests are off
		case z > 5:
			off = i
		}
	}
	if off < 0 {
		return false, true
	}
	t := f.tests[off]
	for i, u := range f.tests {
		if i != off && math.Abs(f.e.Lot[u])/f.lot[i] > 2.5 {
			return false, true
		}
	}
	var levels, zones []float64
	for w := range f.e.Wafers {
		levels = append(levels, f.e.Wafers[w].Level[t])
		for _, z := range f.e.Wafers[w].Zone {
			if z != nil {
				zones = append(zones, z[t])
			}
		}
	}
	const even = 0.12 // of the shift: what wafers and zones of a real one differ by at least
	shift := math.Abs(f.e.Lot[t])
	return stats.MADSigma(present(levels)) < even*shift && stats.MADSigma(present(zones)) < even*shift, true
}
