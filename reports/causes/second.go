package causes

import "math"

// A lot may have a main cause and, on other wafers, a second one: a scratch on two
// wafers of a lot with thin epi. Weighed over the whole lot, the second hardly
// counts. So wafers that have single dice beyond what the lot's others have are
// weighed once more by themselves, for the causes that make such dice.

// Bounds of the second look. Common practice, no source.
const (
	secondDice  = 8   // fewest dice beyond the usual on a wafer
	secondShare = 0.1 // of the lot's excess that a cause must carry to be named
	secondSure  = 0.6 // least probability on a wafer
	secondMost  = 0.9 // most that a second look alone gives
)

// secondLook raises the probability of causes that hold on wafers which the likely
// causes do not explain.
func (v *Verdict) secondLook() {
	j := v.j
	if len(j.e.Wafers) < 4 {
		return
	}
	likely := map[int]bool{}
	for _, g := range v.Causes {
		if g.entry >= 0 && g.Probability >= 0.5 {
			likely[g.entry] = true
		}
	}
	if len(likely) == 0 {
		return // nothing, the unknown, or not decided: no second without a first
	}
	carried, sure := make([]float64, len(j.k.Causes)), make([]float64, len(j.k.Causes))
	for w := range j.e.Wafers {
		d, ok := j.ownDice(w)
		if !ok {
			continue
		}
		p := j.weighWafer(w, &d, &v.weigh)
		best := -1
		for c := range p {
			if best < 0 || p[c] > p[best] {
				best = c
			}
		}
		if best < 0 || likely[best] || p[best] < secondSure {
			continue
		}
		explained := 0.0
		for c := range likely {
			explained += p[c]
		}
		if explained < 0.2 {
			carried[best] += d.sum
			sure[best] = max(sure[best], p[best])
		}
	}
	excess := max(j.dice.sum, float64(j.e.Failing)-j.e.healthyLoss()*float64(j.e.Dice))
	for i := range v.Causes {
		g := &v.Causes[i]
		if g.entry >= 0 && carried[max(g.entry, 0)] >= secondShare*excess {
			g.Probability = max(g.Probability, min(secondMost, sure[g.entry])*(1-v.Nothing-v.Unknown))
		}
	}
}

// ownDice are the single dice of wafer w beyond what the lot's typical wafer has; ok
// says whether they are enough and form a pattern, or are many.
func (j *judged) ownDice(w int) (d diceTable, ok bool) {
	e := j.e
	d = diceTable{classes: j.dice.classes, excess: make([]float64, j.dice.classes)}
	for c := range d.excess {
		usual := e.usualSingle(c)
		d.excess[c] = max(0, e.Wafers[w].Single[c]-usual-2*math.Sqrt(usual))
		d.sum += d.excess[c]
	}
	n := float64(e.Wafers[w].Dice)
	if d.sum < secondDice || d.sum < 0.01*n {
		return d, false
	}
	d.share = d.sum / n
	d.strength = 12 * -math.Expm1(-d.sum/12)
	for _, p := range e.Wafers[w].Patterns {
		if p.Kind != "none" && p.Kind != "random" {
			return d, true
		}
	}
	return d, d.share > 0.1
}

// weighWafer is the probability of each cause that makes single dice on one wafer.
func (j *judged) weighWafer(w int, d *diceTable, weights *Weights) []float64 {
	one := Evidence{cols: j.e.cols, Wafers: j.e.Wafers[w : w+1], Dice: j.e.Wafers[w].Dice}
	maps := one.mapTable(j.k)
	p := make([]float64, len(j.k.Causes))
	sum, top := 0.0, math.Inf(-1)
	for c := range p {
		e := &j.k.Causes[c]
		p[c] = math.Inf(-1)
		if len(e.Dice) > 0 {
			view, share := d.of(j.k, e)
			p[c] = math.Log(e.Odds) + share + weights.View[diceView]*view + weights.View[mapView]*maps.of(j.k, e, d)
		}
		top = max(top, p[c])
	}
	for c := range p {
		p[c] = math.Exp(p[c] - top)
		sum += p[c]
	}
	for c := range p {
		p[c] /= sum
	}
	return p
}
