package causes

import (
	"context"
	"math"
	"runtime"

	"golang.org/x/sync/errgroup"

	"kneepoint/stats"
)

// leastDice is the fewest dice that a zone's level is taken from.
const leastDice = 5

// Observe looks at a lot's columns and says what can be seen of causes. Wafers
// are looked at in parallel; the evidence does not depend on how many cores there
// are. It fails only when ctx is cancelled.
func Observe(ctx context.Context, c *Columns, k *Catalogue) (*Evidence, error) {
	n, tests := c.dice(), len(c.Tests)
	e := &Evidence{cols: c, Dice: n, Reference: make([]float64, tests), Scatter: make([]float64, tests),
		Lot: make([]float64, tests), Wafers: make([]WaferEvidence, len(c.Wafers)),
		class: make([]int8, n), zone: make([]int8, n)}
	o := &observer{c: c, k: k, e: e, majority: make([]float64, tests), hard: make([]bool, n), odd: make([]uint64, n), spread: make([][]float64, len(c.Wafers)),
		sound: make([][zones + 1][]int32, len(c.Wafers))}
	o.findMajority()
	// Levels are taken twice: the second time without the readings that stood alone
	// the first time.
	for _, step := range []func(w int){o.place, o.levels, o.singles, o.levels, o.singles} {
		if err := each(ctx, len(c.Wafers), step); err != nil {
			return nil, err
		}
		o.settle()
	}
	o.typical()
	if err := o.findPatterns(ctx); err != nil {
		return nil, err
	}
	e.Flags = o.flags()
	e.frame = newFrame(e)
	if raised, known := e.frame.scaledFlag(); known {
		e.Flags["one-test-scaled"] = raised
	}
	e.Stacked = o.stacked()
	return e, ctx.Err()
}

// each runs f(0) to f(n-1) on all cores.
func each(ctx context.Context, n int, f func(i int)) error {
	group, ctx := errgroup.WithContext(ctx)
	group.SetLimit(runtime.GOMAXPROCS(0))
	for i := range n {
		group.Go(func() error {
			if err := ctx.Err(); err != nil {
				return err
			}
			f(i)
			return nil
		})
	}
	return group.Wait()
}

type observer struct {
	c        *Columns
	k        *Catalogue
	e        *Evidence
	majority []float64            // by test: median of the wafers' medians, SI
	hard     []bool               // by row: a reading that no shift of a level explains
	odd      []uint64             // by row: tests (of the first 64) whose reading stands alone
	sound    [][zones + 1][]int32 // by wafer and zone (the first without a place): rows that are not hard
	spread   [][]float64          // by wafer and test
}

// findMajority takes the level that most wafers have, and with it the healthy
// level where nothing better is known.
func (o *observer) findMajority() {
	medians := make([][]float64, len(o.c.Wafers))
	_ = each(context.Background(), len(o.c.Wafers), func(w int) {
		s := o.c.Wafers[w]
		medians[w] = make([]float64, len(o.c.Tests))
		buf := make([]float64, 0, s.Hi-s.Lo)
		for t := range o.c.Tests {
			buf = buf[:0]
			for _, v := range o.c.Tests[t].Values[s.Lo:s.Hi] {
				if !math.IsNaN(v) {
					buf = append(buf, v)
				}
			}
			medians[w][t] = median(buf)
		}
	})
	for t := range o.c.Tests {
		col := make([]float64, 0, len(medians))
		for w := range medians {
			if m := medians[w][t]; !math.IsNaN(m) {
				col = append(col, m)
			}
		}
		o.majority[t] = median(col)
		o.e.Reference[t] = o.c.Tests[t].Median
		if !(o.e.Reference[t] > 0) {
			o.e.Reference[t] = o.majority[t]
		} else if o.nearReference(t) {
			o.majority[t] = o.e.Reference[t] // most wafers may be ruined
		}
	}
}

// nearReference says whether one die in seven reads about the healthy level.
func (o *observer) nearReference(t int) bool {
	step, n, near := steps[kind(o.c.Tests[t].Measures)], 0, 0
	ref := o.e.Reference[t]
	for _, v := range o.c.Tests[t].Values {
		if math.IsNaN(v) {
			continue
		}
		n++
		if v > ref*math.Exp(step.collapse) && v < ref*math.Exp(step.extreme) {
			near++
		}
	}
	return 7*near >= n
}

// median reorders v; NaN when it is empty.
func median(v []float64) float64 {
	if len(v) == 0 {
		return math.NaN()
	}
	return stats.Median(v)
}

// place finds each die's zone on wafer w and marks the dice that are hard.
func (o *observer) place(w int) {
	s := o.c.Wafers[w]
	for i := s.Lo; i < s.Hi; i++ {
		o.e.zone[i] = o.zoneOf(i)
		o.e.class[i] = -1
		for t := range o.c.Tests {
			if o.isHard(t, o.c.Tests[t].Values[i]) {
				o.hard[i] = true
				break
			}
		}
		if z := o.e.zone[i] + 1; !o.hard[i] {
			o.sound[w][z] = append(o.sound[w][z], int32(i))
		}
	}
}

func (o *observer) zoneOf(i int) int8 {
	c := o.c
	if c.X == nil || c.Y == nil || c.X[i] == c.Missing || c.Y[i] == c.Missing {
		return -1
	}
	r := c.Geometry.Radius()
	x, y := c.Geometry.Position(c.X[i], c.Y[i])
	if !(r > 0) || math.IsNaN(x) {
		return -1
	}
	d := math.Hypot(x, y) / r
	if d < innerEdge {
		return 0
	}
	quarter := int8(0)
	switch { // turned by 45 degrees against the axes
	case math.Abs(x) >= math.Abs(y) && x > 0:
	case math.Abs(y) > math.Abs(x) && y > 0:
		quarter = 1
	case math.Abs(x) >= math.Abs(y):
		quarter = 2
	default:
		quarter = 3
	}
	if d < outerEdge {
		return 1 + quarter
	}
	return 5 + quarter
}

// isHard says whether a reading is farther from the lot's majority than any
// shift of a level goes. Leakage may rise without end by contamination, so only
// its absence is hard.
func (o *observer) isHard(t int, v float64) bool {
	ref := o.majority[t]
	if math.IsNaN(v) || !(ref > 0) {
		return false
	}
	r := v / ref
	switch kind(o.c.Tests[t].Measures) {
	case voltage:
		return r < 0.5 || r > 1.7
	case gain:
		return r < 0.2 || r > 5
	case leakage:
		return false
	case capacitance:
		return r < 0.45 || r > 2.2
	case saturation:
		return r < 0.1 || r > 10
	}
	return r < 0.05 || r > 20
}

// levels takes the zones' medians of wafer w, over the dice that are not hard.
func (o *observer) levels(w int) {
	s, c := o.c.Wafers[w], o.c
	e := &o.e.Wafers[w]
	*e = WaferEvidence{ID: s.ID, Dice: s.Hi - s.Lo, Single: e.Single}
	for _, p := range c.Pass[s.Lo:s.Hi] {
		if !p {
			e.Failing++
		}
	}
	tests := len(c.Tests)
	e.Level, e.Sampling = nans(tests), nans(tests)
	whole := s.Hi - s.Lo
	for i := s.Lo; i < s.Hi; i++ {
		if z := o.e.zone[i]; z >= 0 {
			e.ZoneDice[z]++
			whole--
		}
	}
	spread := nans(tests)
	buf := make([]float64, 0, 2*(s.Hi-s.Lo))
	for t := range c.Tests {
		var sum, weight, errors float64
		var sigmas []float64
		for z := int8(-1); z < zones; z++ {
			have := whole
			if z >= 0 {
				have = e.ZoneDice[z]
			}
			if have == 0 {
				continue
			}
			m, sigma, n := o.zoneLevel(t, w, z, buf)
			if n < leastDice || 10*n < 3*have && n < 40 {
				continue
			}
			share := float64(have)
			sum, weight = sum+share*m, weight+share
			errors += share * share * sigma * sigma / float64(n) * math.Pi / 2
			sigmas = append(sigmas, sigma)
			if z >= 0 {
				if e.Zone[z] == nil {
					e.Zone[z] = nans(tests)
				}
				e.Zone[z][t] = m
			}
		}
		if weight < 0.3*float64(e.Dice) || weight == 0 {
			for z := range e.Zone {
				if e.Zone[z] != nil {
					e.Zone[z][t] = math.NaN()
				}
			}
			continue
		}
		e.Level[t], e.Sampling[t] = sum/weight, math.Sqrt(errors)/weight
		for z := range e.Zone {
			if e.Zone[z] != nil {
				e.Zone[z][t] -= e.Level[t]
			}
		}
		spread[t] = median(sigmas)
	}
	o.spread[w] = spread
}

// zoneLevel is the median log ratio of a test to its reference over the dice of
// zone z (-1: those without a place) that are not hard, with the robust sigma of a
// die and how many there are. NaN where
// the median is only a bound that healthy dice keep as well.
func (o *observer) zoneLevel(t, w int, z int8, buf []float64) (level, sigma float64, n int) {
	test := &o.c.Tests[t]
	buf = buf[:0]
	bounds := 0
	for _, i := range o.sound[w][z+1] {
		if t < 64 && o.odd[i]>>t&1 == 1 {
			continue
		}
		v := test.Values[i]
		if math.IsNaN(v) {
			continue
		}
		if test.Censor != nil && test.Censor[i] != 0 {
			bounds++
		}
		buf = append(buf, o.ratio(t, v))
	}
	n = len(buf)
	if n == 0 {
		return math.NaN(), math.NaN(), 0
	}
	level = median(buf)
	if 2*bounds > n {
		// the level is a bound: it counts where it is off already, and tells nothing
		// where it may be healthy
		within := o.within(t)
		if math.IsInf(within, 1) || math.Abs(level) < 4*within {
			return math.NaN(), math.NaN(), 0
		}
		return level, max(within, spreadAbout(buf, level)), n
	}
	sigma = spreadAbout(buf, level)
	// Where dice are of two kinds, the level is that of the healthy kind as long as a
	// quarter of them is: the others then stand alone.
	if within := o.within(t); sigma > 2.5*within {
		near := buf[:0]
		for _, v := range buf {
			if math.Abs(v) < 3.5*within {
				near = append(near, v)
			}
		}
		if 4*len(near) >= n && len(near) >= leastDice {
			level = median(near)
			return level, spreadAbout(near, level), len(near)
		}
	}
	return level, sigma, n
}

// spreadAbout is the robust sigma of v about a level.
func spreadAbout(v []float64, level float64) float64 {
	d := append(v[len(v):], v...) // in what room is left behind v
	for i, x := range v {
		d[i] = math.Abs(x - level)
	}
	return 1.4826 * median(d)
}

// within is the log sigma of dice of a healthy lot, +Inf when not known.
func (o *observer) within(t int) float64 {
	test := &o.c.Tests[t]
	if !(test.Median > 0) {
		return math.Inf(1)
	}
	if s := firstAbove(relative(test.Within, test.Median), relative(test.Sigma, test.Median), 0); s > 0 {
		return s
	}
	return math.Inf(1)
}

// ratio is the log of a reading over its healthy level; readings at or below zero
// count as a thousandth of it.
func (o *observer) ratio(t int, v float64) float64 {
	const least = 1e-3
	ref := o.e.Reference[t]
	if !(ref > 0) {
		return math.NaN()
	}
	return math.Log(max(v/ref, least))
}

// settle takes each test's scatter over all zones and the lot's level.
func (o *observer) settle() {
	for t := range o.c.Tests {
		var sigmas []float64
		for w := range o.spread {
			if o.spread[w] == nil {
				continue // before the first levels
			}
			if s := o.spread[w][t]; !math.IsNaN(s) {
				sigmas = append(sigmas, s)
			}
		}
		o.e.Scatter[t] = max(median(sigmas), 0.1*readError(o.c.Tests[t].Measures))
	}
}

// typical is the lot's level: the median over wafers.
func (o *observer) typical() {
	for t := range o.c.Tests {
		var col []float64
		for w := range o.e.Wafers {
			if l := o.e.Wafers[w].Level[t]; !math.IsNaN(l) {
				col = append(col, l)
			}
		}
		o.e.Lot[t] = median(col)
	}
	for w := range o.e.Wafers {
		o.e.Failing += o.e.Wafers[w].Failing
	}
}

func nans(n int) []float64 {
	v := make([]float64, n)
	for i := range v {
		v[i] = math.NaN()
	}
	return v
}
