package ingest

import (
	"container/heap"
	"fmt"
	"math"
	"slices"

	"gonum.org/v1/gonum/mathext"
)

// pile is a pile-up at the extreme value of a column.
type pile struct {
	value    float64
	n        int
	expected float64 // copies that the values next to it would put there
}

const (
	pileLeast  = 5    // copies below which nothing is called a pile
	pileFactor = 3    // how many times the expected copies
	pileChance = 1e-6 // and how improbable by chance
	pileLevels = 10   // distinct other values below which data are discrete
	pileWindow = 1000 // most neighbours looked at
)

// findPile looks whether more copies stand at the largest (sign 1) or smallest
// (sign -1) value of a column than a continuous quantity, written with this
// file's resolution, would put there.
//
// The values next to the extreme tell what to expect. Let the nearest m of them
// lie within h of it. Were the extreme one more level of the same kind, it would
// hold about m times the step between levels divided by h. The step is the 10 %
// quantile of the gaps between the distinct levels, which for data on a grid is
// the grid and for sparse data is far below the mean gap; of several m the one
// that expects most is taken, and if neighbours have copies too, no fewer than
// the fullest of them. A tail gets thinner outwards, so all this is too many
// rather than too few. A pile is a count that is at least three times that, at
// least five, and has a probability below 1e-6 under a Poisson law with that
// mean. Coarse resolution raises the expectation with the count; small n fails
// the probability; data on fewer than ten levels are taken for discrete and
// never judged. The rule is this house's own, checked by simulation in its
// tests.
func findPile(v []float64, e extremes, sign float64) (pile, bool) {
	extreme, n := e.most, e.nMost
	if sign < 0 {
		extreme, n = -e.least, e.nLeast
	}
	rest := e.n - n
	if n < pileLeast || rest < pileLevels {
		return pile{}, false
	}
	from := extreme
	for _, x := range largestBelow(v, sign, extreme, min(rest, max(20, min(n, pileWindow)))) {
		from = math.Min(from, x)
	}
	var near []float64
	for _, x := range v {
		if x *= sign; x >= from && x < extreme {
			near = append(near, x)
		}
	}
	slices.Sort(near)
	p := pile{value: sign * extreme, n: n, expected: expectedCopies(near, extreme)}
	if float64(n) < pileFactor*p.expected || distinct(v, p.value) < pileLevels {
		return p, false
	}
	return p, mathext.GammaIncReg(float64(n), p.expected) < pileChance // P(X >= n)
}

// expectedCopies is the count that the sorted neighbours of an extreme let
// expect on it.
func expectedCopies(near []float64, extreme float64) float64 {
	most := float64(fullest(near))
	levels := slices.Compact(slices.Clone(near))
	if len(levels) < pileLevels {
		return most
	}
	gaps := make([]float64, 0, len(levels))
	for i := 1; i < len(levels); i++ {
		gaps = append(gaps, levels[i]-levels[i-1])
	}
	slices.Sort(gaps)
	step := gaps[len(gaps)/10]
	if 5*len(levels) >= 4*len(near) {
		most = 0 // few copies, as chance makes them: as good as continuous
	}
	for m := pileLeast; ; m *= 2 {
		i := max(len(near)-m, 0)
		for i > 0 && near[i-1] == near[i] {
			i--
		}
		most = math.Max(most, float64(len(near)-i+1)*step/(extreme-near[i]))
		if i == 0 {
			return most
		}
	}
}

// fullest is the largest number of copies of one value among sorted values.
func fullest(sorted []float64) int {
	most, run := 0, 0
	for i, x := range sorted {
		if i == 0 || x != sorted[i-1] {
			run = 0
		}
		run++
		most = max(most, run)
	}
	return most
}

// largestBelow gives the k largest values below the extreme, in no order.
func largestBelow(v []float64, sign, extreme float64, k int) []float64 {
	h := make(minHeap, 0, k)
	for _, x := range v {
		x *= sign
		if !(x < extreme) {
			continue
		}
		if len(h) < k {
			heap.Push(&h, x)
		} else if x > h[0] {
			h[0] = x
			heap.Fix(&h, 0)
		}
	}
	return h
}

type minHeap []float64

func (h minHeap) Len() int           { return len(h) }
func (h minHeap) Less(i, j int) bool { return h[i] < h[j] }
func (h minHeap) Swap(i, j int)      { h[i], h[j] = h[j], h[i] }
func (h *minHeap) Push(x any)        { *h = append(*h, x.(float64)) }
func (h *minHeap) Pop() any          { x := (*h)[len(*h)-1]; *h = (*h)[:len(*h)-1]; return x }

// distinct counts different values other than not, and stops at pileLevels.
func distinct(v []float64, not float64) int {
	var seen []float64
	for _, x := range v {
		if x != x || x == not || slices.Contains(seen, x) {
			continue
		}
		if seen = append(seen, x); len(seen) == pileLevels {
			break
		}
	}
	return len(seen)
}

// clamps marks the values of one test that are bounds only. The product file's
// clamp and floor count first; where it gives none, or the data contradict it,
// a pile-up at the extreme value does.
func (d *draft) clamps(test int) ([]int8, []Finding) {
	c := clamping{v: d.values[test], e: d.seen[test], info: &d.tests[test]}
	if bounds := d.marks[test]; bounds != nil {
		return c.beside(bounds)
	}
	c.all()
	return c.mark, c.findings
}

// beside looks at the readings that are not bounds from the first: these say
// nothing of where the tester clamps.
func (c *clamping) beside(bounds []int8) ([]int8, []Finding) {
	column, some := c.v, false
	c.v = slices.Clone(column)
	for i, m := range bounds {
		if m != 0 {
			c.v[i], some = math.NaN(), true
		}
	}
	c.e = survey(c.v, nil)
	c.all()
	if some {
		c.need()
	}
	for i, m := range bounds {
		if m != 0 {
			c.mark[i] = m
		} else {
			column[i] = c.v[i]
		}
	}
	return c.mark, c.findings
}

func (c *clamping) all() {
	c.known(1, c.info.clamp, "clamp")
	c.known(-1, c.info.floor, "floor")
	if c.up == 0 {
		c.found(1)
	}
	if c.down == 0 {
		c.found(-1)
	}
	if c.up == 0 && c.down == 0 {
		c.stuck()
	}
}

type clamping struct {
	v        []float64
	e        extremes
	info     *testInfo
	mark     []int8
	up, down int
	findings []Finding
}

// near is how close to the product file's clamp a reading is at it, relative.
const near = 1e-6

// known marks the values at or beyond a bound of the product file. Values below
// a floor are set to it, as it is the floor that they are at most.
func (c *clamping) known(sign int8, bound float64, what string) {
	if bound != bound || sign > 0 && bound == 0 {
		return // a clamp at zero would be no tester; it is a zero value
	}
	s := float64(sign)
	tolerance := near * math.Abs(bound)
	if sign > 0 && c.e.most-bound < -tolerance || sign < 0 && c.e.least-bound > tolerance {
		return
	}
	at, beyond := 0, 0
	for _, x := range c.v {
		if s*(x-bound) >= -tolerance {
			at++
		}
		if sign > 0 && x > bound*1.01 {
			beyond++
		}
	}
	if at == 0 {
		return
	}
	if beyond > 0 {
		c.findings = append(c.findings, Finding{Code: "above-clamp", Severity: Warning, Dice: beyond,
			Text:   fmt.Sprintf("test %s: %d %s above the product file's clamp of %s, which cannot be; the clamp is not used", c.info.name, beyond, plural(beyond, "reading is", "readings are"), show(bound, c.info.unit)),
			Remedy: "correct the clamp of the test in the product file"})
		return
	}
	c.need()
	for i, x := range c.v {
		if s*(x-bound) < -tolerance || x != x {
			continue
		}
		c.mark[i] = sign
		if sign < 0 {
			c.v[i] = bound
		}
	}
	c.report(sign, at, bound, fmt.Sprintf("the %s of the product file", what))
}

func (c *clamping) need() {
	if c.mark == nil {
		c.mark = make([]int8, len(c.v))
	}
}

// found marks a pile-up.
func (c *clamping) found(sign int8) {
	p, ok := findPile(c.v, c.e, float64(sign))
	if !ok {
		return
	}
	c.need()
	for i, x := range c.v {
		if x == p.value {
			c.mark[i] = sign
		}
	}
	where := "the largest value of the lot"
	if sign > 0 {
		c.info.clamp, c.info.pile[0] = p.value, true
	} else {
		where, c.info.floor, c.info.pile[1] = "the smallest value of the lot", p.value, true
	}
	c.report(sign, p.n, p.value, fmt.Sprintf("%s, where the readings next to it let expect %.2g", where, p.expected))
}

func (c *clamping) report(sign int8, n int, value float64, why string) {
	code, bound := "clamped", "at least"
	if sign < 0 {
		code, bound = "at-floor", "at most"
		c.down += n
	} else {
		c.up += n
	}
	c.findings = append(c.findings, Finding{Code: code, Severity: Info, Dice: n,
		Text: fmt.Sprintf("test %s: %d %s at %s, %s; they count as %s that", c.info.name, n, plural(n, "reading stands", "readings stand"), show(value, c.info.unit), why, bound)})
}

// mostlyOne looks at an even sample of the column, whether it may be mostly one
// value.
func (c *clamping) mostlyOne() bool {
	const looks = 200
	counts := map[float64]int{}
	n, most := 0, 0
	for i := 0; i < len(c.v); i += max(1, len(c.v)/looks) {
		if x := c.v[i]; x == x {
			n++
			counts[x]++
			most = max(most, counts[x])
		}
	}
	return 2*most > n
}

// stuck notes a column in which nearly all readings are one value.
func (c *clamping) stuck() {
	const least, share = 20, 0.9
	if c.e.nLeast < c.e.n/2 && c.e.nMost < c.e.n/2 && !c.mostlyOne() {
		return
	}
	var one float64
	lead, n := 0, 0
	for _, x := range c.v { // majority vote of Boyer and Moore (1981)
		if x != x {
			continue
		}
		n++
		switch {
		case lead == 0:
			one, lead = x, 1
		case x == one:
			lead++
		default:
			lead--
		}
	}
	same := 0
	for _, x := range c.v {
		if x == one {
			same++
		}
	}
	if n >= least && float64(same) >= share*float64(n) {
		c.findings = append(c.findings, Finding{Code: "one-value", Severity: Warning, Dice: same,
			Text:   fmt.Sprintf("test %s: %d of %d readings are %s", c.info.name, same, n, show(one, c.info.unit)),
			Remedy: "if the tester cannot read beyond it, give it as clamp or floor in the product file"})
	}
}
