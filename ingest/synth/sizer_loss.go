package synth

import (
	"fmt"
	"math"
	"slices"
)

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
		z.few = z.sample(max(int(z.judged)/len(on), 20))
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
