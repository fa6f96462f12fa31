package synth

import (
	"fmt"
	"math"
	"slices"
)

// sizer draws causes for a lot and adjusts their sizes on a few of its dice.
type sizer struct {
	spec   *Spec
	seed   uint64
	maker  *Maker
	dice   []place // all
	few    []place // that sizes are judged on
	base   *fab
	judged float64     // how many those are, over all wafers
	wafers map[int]int // passing dice of few on a wafer without causes
	sigma  []float64   // of each test, as a share of its level
}

// judged are so many dice in all that a size is judged on.
const judged = 280

func newSizer(s *Spec, seed uint64, m *Maker) *sizer {
	z := &sizer{spec: s, seed: seed, maker: m, wafers: map[int]int{}}
	clean := *s
	clean.Causes, clean.Missing = nil, 0
	z.base = newFab(&clean, seed)
	z.dice = z.base.dice
	slopes := s.slopes()
	for t := range s.Tests {
		v := math.Pow(s.Tests[t].Noise/s.Tests[t].Typical, 2) + math.Pow(s.Tests[t].Gauge, 2)
		for q := range s.Spread {
			v += math.Pow(slopes[t][q]*s.Spread[q].sigma(), 2)
		}
		z.sigma = append(z.sigma, math.Sqrt(v))
	}
	return z
}

// draw makes one wanted cause for the lot.
func (z *sizer) draw(d *draws, want Wanted, o RandomOptions) (Cause, MadeCause, error) {
	e, direction, err := entryOf(want.ID, want.Direction, d)
	if err != nil {
		return Cause{}, MadeCause{}, err
	}
	v, err := pickVariety(want.ID, want.Variety, want.Direction, want.Size > 0, d)
	if err != nil {
		return Cause{}, MadeCause{}, err
	}
	if slices.ContainsFunc(varieties[e.ID], func(v variety) bool { return v.directed }) && !v.directed {
		direction = ""
	}
	if want.Size < 0 || math.IsNaN(want.Size) || math.IsInf(want.Size, 0) {
		return Cause{}, MadeCause{}, fmt.Errorf("cause %s: size %v is no size; it is %s", e.ID, want.Size, e.SizeIs)
	}
	k := &sketch{d: d.under(1), spec: z.spec, dice: z.dice, wafers: z.spec.Wafers, sign: 1}
	if len(e.Directions) > 1 && direction == e.Directions[1] {
		k.sign = -1
	}
	k.cause = Cause{ID: e.ID, Direction: direction}
	loss := o.LossMin * math.Pow(max(o.LossMax/o.LossMin, 1), d.uniform())
	if k.cause.Wafers, err = affected(d, want, z.spec.Wafers, loss); err != nil {
		return Cause{}, MadeCause{}, fmt.Errorf("cause %s: %w", e.ID, err)
	}
	part := 1.0
	if k.cause.Wafers != nil {
		part = float64(len(k.cause.Wafers)) / float64(z.spec.Wafers)
	}
	loss = min(loss, 0.85*part)
	k.loss = loss / part
	if n := len(k.cause.Wafers); n > 1 && d.chance(0.5) {
		sigma := d.between(0.1, 0.4)
		for range n {
			k.cause.Sizes = append(k.cause.Sizes, d.factor(sigma))
		}
	}
	v.draw(k)
	made := MadeCause{ID: e.ID, Direction: direction, Variety: v.name}
	z.few, z.wafers = nil, map[int]int{}
	if z.judged = judged; loss < 0.08 { // few fails: more dice tell as much
		z.judged = 1.6 * judged
	}
	z.adjust(k, d, want.Size, loss, max(0.7*o.LossMin, 0.2*loss), &made)
	if k.fixed && want.Wafers == nil && made.Loss > o.LossMax {
		z.fewer(k, o.LossMax*d.between(0.4, 1), &made)
	}
	k.cause.Text = k.describe(made.Size)
	k.spread()
	return k.cause, made, nil
}

// spread gives each affected wafer a place of its own, where the cause has one.
func (k *sketch) spread() {
	if k.vary == nil {
		return
	}
	c := &k.cause
	if c.Wafers == nil {
		c.Wafers = span(0, k.wafers)
	}
	for range c.Wafers {
		c.Places = append(c.Places, k.vary(c.Place))
	}
}

// fewer leaves a cause that spoils whole wafers on as many as its loss may cost.
func (z *sizer) fewer(k *sketch, loss float64, made *MadeCause) {
	on := k.cause.Wafers
	if on == nil {
		on = span(0, z.spec.Wafers)
	}
	keep := max(int(float64(len(on))*loss/made.Loss), 1)
	k.cause.Wafers, k.cause.Sizes = slices.Clone(on[len(on)-keep:]), nil
	made.Loss *= float64(keep) / float64(len(on))
}

// entryOf finds a cause of the catalogue and its direction, drawn when not given.
func entryOf(id, direction string, d *draws) (Entry, string, error) {
	c, err := NewCause(id, direction, 0)
	if err != nil {
		return Entry{}, "", err
	}
	e := catalogue[slices.IndexFunc(catalogue, func(e Entry) bool { return e.ID == id })]
	if at := d.uniform(); direction == "" && len(e.Directions) > 0 {
		return e, e.Directions[int(at*float64(len(e.Directions)))], nil
	}
	return e, c.Direction, nil
}

// affected draws which wafers a cause acts on, by index; nil for all. They are
// enough for the loss.
func affected(d *draws, want Wanted, n int, loss float64) ([]int, error) {
	for _, w := range want.Wafers {
		if w < 0 || w >= n {
			return nil, fmt.Errorf("there is no wafer %d among %d", w+1, n)
		}
	}
	d = d.under(2)
	if want.Wafers != nil {
		out := slices.Clone(want.Wafers)
		slices.Sort(out)
		return slices.Compact(out), nil
	}
	least := min(int(math.Ceil(loss/0.8*float64(n))), n)
	if want.AllWafers || n < 3 || least >= n-1 {
		return nil, nil
	}
	count := least + d.below(n-least)
	switch d.weighted(4, 2, 2, 1, 1) {
	case 1:
		return d.some(count, n), nil
	case 2: // a run: a boat's end, a reactor load, some hours of a tester
		from := d.below(n - count + 1)
		return span(from, from+count), nil
	case 3: // from some wafer on
		return span(n-count, n), nil
	case 4:
		if 2*least < n {
			var out []int
			for i := d.below(2); i < n; i += 2 {
				out = append(out, i)
			}
			return out, nil
		}
	}
	return nil, nil
}

func span(from, to int) []int {
	out := make([]int, 0, to-from)
	for i := from; i < to; i++ {
		out = append(out, i)
	}
	return out
}

// adjust gives the cause its size: the one asked for, or else the one that costs
// about the loss, or at least can be seen.
func (z *sizer) adjust(k *sketch, d *draws, size, loss, least float64, made *MadeCause) {
	cost := func(size float64) float64 {
		k.set(&k.cause, size)
		return z.loss(k)
	}
	made.Reached = true
	switch {
	case k.fixed:
		made.Loss = cost(0)
	case size > 0: // as it is asked for
		made.Size, made.Loss = size, cost(size)
		return
	default:
		for k.grow != nil && cost(k.hi) < loss && k.grow(&k.cause) {
		}
		made.Size, made.Loss = z.bisect(k, cost, loss)
	}
	if made.Loss >= least {
		return
	}
	made.Reached = false
	made.Note = fmt.Sprintf("no believable size costs %.3g %% of the dice", 100*loss)
	if k.fixed || k.setLoss {
		made.Loss = cost(made.Size)
		return
	}
	// A shift that the limits do not see is made one that the eye sees.
	wanted := d.under(3).between(2, 6)
	lo, hi := k.lo, k.hi
	for range 12 {
		mid := math.Sqrt(lo * hi)
		k.set(&k.cause, mid)
		if z.visible(&k.cause) < wanted {
			lo = mid
		} else {
			hi = mid
		}
	}
	made.Size, made.Loss = hi, cost(hi)
	made.Note += fmt.Sprintf("; the size moves a test by %.2g of its usual spread", z.visible(&k.cause))
}

// bisect finds the size at which a cause costs a loss, in the logarithm; the
// largest when none does.
func (z *sizer) bisect(k *sketch, cost func(float64) float64, loss float64) (size, at float64) {
	lo, hi := k.lo, k.hi
	size, at = hi, cost(hi)
	if at <= loss {
		return size, at
	}
	for range 7 {
		mid := math.Sqrt(lo * hi)
		c := cost(mid)
		if math.Abs(c-loss) < math.Abs(at-loss) {
			size, at = mid, c
		}
		if c < loss {
			lo = mid
		} else {
			hi = mid
		}
	}
	return size, cost(size)
}
