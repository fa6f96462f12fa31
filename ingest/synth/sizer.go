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
	z.adjust(k, d, want.Size, loss, max(0.7*o.LossMin, 0.2*loss), &made)
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

// loss is about what a cause costs, as a share of the lot's dice.
func (z *sizer) loss(k *sketch) float64 {
	c := &k.cause
	if k.setLoss {
		return z.damageLoss(c)
	}
	return z.shiftLoss(c)
}

// damageLoss is what a damage costs on average: the chance of each die to be hit,
// to fail from it, and not to recover.
func (z *sizer) damageLoss(c *Cause) float64 {
	fails := z.lethal(c.Damage)
	if c.Recover > 0 {
		fails *= 1 - z.spec.Retest*c.Recover
	}
	sum := 0.0
	sizes := make([]float64, 0, z.spec.Wafers)
	for w := range z.spec.Wafers {
		if s := c.size(z.seed, 0, w); s != 0 {
			sizes = append(sizes, s)
		}
	}
	for i := range z.dice {
		if at := c.Place.strength(&z.dice[i]); at > 0 {
			for _, s := range sizes {
				sum += min(c.Share*at*s, 1)
			}
		}
	}
	yield := z.maker.yield
	if !(yield > 0) {
		yield = 0.95
	}
	return sum * fails * yield / float64(len(z.dice)*z.spec.Wafers)
}

// lethal is the chance that a damaged die of typical readings fails.
func (z *sizer) lethal(kind Damage) float64 {
	const tries = 64
	vals, fails := make([]float64, len(z.spec.Tests)), 0
	for i := range tries {
		for t := range vals {
			vals[t] = z.spec.Tests[t].Typical
		}
		damage(vals, z.spec.Tests, kind, root(uint64(i)))
		for t := range vals {
			test := &z.spec.Tests[t]
			if v := min(vals[t], or(test.Clamp, math.Inf(1))); v < test.Lower || v > test.Upper {
				fails++
				break
			}
		}
	}
	return float64(fails) / tries
}

// shiftLoss makes a few dice of some of the cause's wafers with and without it.
func (z *sizer) shiftLoss(c *Cause) float64 {
	on := c.Wafers
	if on == nil {
		on = span(0, z.spec.Wafers)
	}
	all := len(on)
	if most := 10; all > most {
		few := make([]int, most)
		for i := range few {
			few[i] = on[i*all/most]
		}
		on = few
	}
	spec := *z.base.spec
	spec.Causes = []Cause{*c}
	f := *z.base
	f.spec = &spec
	f.faults = f.faultTests()
	if z.few == nil {
		z.few = z.sample(max(judged/len(on), 20))
	}
	f.dice = z.few
	lost := 0
	for _, w := range on {
		clean, ok := z.wafers[w]
		if !ok {
			bare := *z.base
			bare.dice = z.few
			clean = bare.passing(w)
			z.wafers[w] = clean
		}
		lost += clean - f.passing(w)
	}
	return float64(lost) / float64(len(on)*len(z.few)) * float64(all) / float64(z.spec.Wafers)
}

// sample picks n dice by chance, in the order of test.
func (z *sizer) sample(n int) []place {
	if n >= len(z.dice) {
		return z.dice
	}
	var out []place
	for _, i := range newDraws(root(z.seed).at(branchSpec).at(1)).some(n, len(z.dice)) {
		out = append(out, z.dice[i])
	}
	return out
}

// passing counts the dice of a wafer that pass when first measured.
func (f *fab) passing(wafer int) int {
	d, n := f.newDie(wafer), 0
	for i := range f.dice {
		d.take(&f.dice[i])
		d.measure(0)
		if f.spec.PassBin(int(d.hard)) {
			n++
		}
	}
	return n
}

// visible is how far a cause moves the test that it moves most, in the test's usual
// spread, on the dice that it hits.
func (z *sizer) visible(c *Cause) float64 {
	strength := 1.0
	if c.Share == 0 {
		strength = meanStrength(&c.Place, z.dice)
	}
	var p Process
	for q := range p {
		p[q] = c.Shift[q] * strength
	}
	vals := make([]float64, len(z.spec.Tests))
	z.base.forward.values(vals, &p)
	most := 0.0
	for t := range vals {
		test := &z.spec.Tests[t]
		v := vals[t]
		for i := range c.Faults {
			f := &c.Faults[i]
			if f.Test == test.Name {
				v = f.apply(v)
				if f.WrongLower != 0 || f.WrongUpper != 0 {
					v *= 1 + 3*z.sigma[t] // a wrong limit is seen as such
				}
			}
		}
		v = min(max(v, test.Floor/2), or(test.Clamp, math.Inf(1)))
		if z.sigma[t] > 0 && v > 0 {
			most = max(most, math.Abs(math.Log(v/test.Typical))/z.sigma[t])
		}
	}
	return most
}

// describe says what happened, in one sentence.
func (k *sketch) describe(size float64) string {
	e := catalogue[slices.IndexFunc(catalogue, func(e Entry) bool { return e.ID == k.cause.ID })]
	what := e.SizeIs
	if k.text != "" {
		what = k.text
	}
	if k.fixed {
		return what
	}
	if k.text != "" {
		return fmt.Sprintf("%s, size %.3g", what, size)
	}
	return fmt.Sprintf("%s %.3g", what, size)
}
