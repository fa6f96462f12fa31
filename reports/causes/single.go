package causes

import (
	"math"
	"slices"

	"kneepoint/stats"
)

// diceTable is what the single dice of a lot say, ready to be held against causes.
type diceTable struct {
	classes  int
	excess   []float64 // by class: dice beyond what healthy lots have
	sum      float64
	share    float64 // of the lot's dice
	beyond   float64 // how unlikely they are in a healthy lot, nats
	strength float64 // how many dice's worth of evidence there is, at most a dozen
}

// healthyLoss is the yield loss of a healthy lot when nothing is known of it.
const healthyLoss = 0.05

func (e *Evidence) healthyLoss() float64 {
	if y := e.cols.BaselineYield; y > 0 && y < 1 {
		return max(1-y, 0.002)
	}
	return healthyLoss
}

// healthyCap is how large a part of a healthy lot's loss may lie in a class: point
// defects, edge dice, pipes. What lines have differs, so the parts sum to more than
// one. Common practice, no source.
var healthyCap = map[string]float64{"short": 0.6, "emitter-short": 0.5, "leaky": 0.45, "wreck": 0.3, "open": 0.3, "pipe": 0.35,
	"edge-low": 0.15, "single": 0.3, "gain": 0.15, "resistive": 0.12}

func (e *Evidence) diceTable(k *Catalogue) diceTable {
	d := diceTable{classes: len(k.Classes), excess: make([]float64, len(k.Classes))}
	counts := e.single(d.classes)
	n, all := float64(e.Dice), 0.0
	for c := range counts {
		expected := n * (2e-4 + e.healthyLoss()*healthyCap[k.Classes[c].Class])
		d.excess[c] = max(0, counts[c]-expected-2*math.Sqrt(expected))
		d.sum += d.excess[c]
		all += counts[c]
		d.beyond = max(d.beyond, beyondHealthy(counts[c], expected))
	}
	// beyond the healthy loss altogether, though in no class by itself
	healthy := n * e.healthyLoss()
	if beyond := all - 1.2*healthy - 2*math.Sqrt(healthy); d.sum < 0.3*beyond {
		for c := range counts {
			d.excess[c] += counts[c] / all * (beyond - d.sum)
		}
		d.sum = beyond
	}
	d.beyond = max(d.beyond, beyondHealthy(all, 1.1*healthy))
	d.addWafers(e)
	d.addPatterns(e, k)
	d.sum = 0
	for _, x := range d.excess {
		d.sum += x
	}
	if n > 0 {
		d.share = d.sum / n
	}
	const most, small = 12, 0.004
	d.strength = most * -math.Expm1(-d.sum/most) * -math.Expm1(-d.share/small) * -math.Expm1(-d.beyond)
	return d
}

// usualSingle is how many single dice of a class the typical wafer has.
func (e *Evidence) usualSingle(class int) float64 {
	counts := make([]float64, len(e.Wafers))
	for w := range e.Wafers {
		counts[w] = e.Wafers[w].Single[class]
	}
	return stats.Median(counts)
}

// addWafers takes in what single wafers have beyond the others of the lot: a lot may
// be as good as any and still have three wafers that are not.
func (d *diceTable) addWafers(e *Evidence) {
	if len(e.Wafers) < 4 {
		return
	}
	counts := make([]float64, len(e.Wafers))
	for c := range d.excess {
		for w := range e.Wafers {
			counts[w] = e.Wafers[w].Single[c]
		}
		usual := stats.Median(slices.Clone(counts))
		excess, beyond := 0.0, 0.0
		for _, n := range counts {
			const factor, clear = 0.35, 3 // how wafers of a healthy lot differ; nats that some wafer has by chance
			x := math.Log((n+0.5)/(usual+0.5)) / math.Sqrt(factor*factor+1/(usual+1))
			if x > 0 && x*x/2 > clear {
				excess += n - usual - math.Sqrt(usual)
				beyond += x*x/2 - clear
			}
		}
		d.excess[c] = max(d.excess[c], excess)
		d.beyond = max(d.beyond, beyond)
	}
}

// unhealthy are the patterns that a healthy lot's dice do not form, with the nats that
// one of them on one wafer counts against such a lot: a search that finds one in two
// of a hundred random maps leaves ln 50.
var unhealthy = map[string]float64{"line": 3, "blob": 3, "shot-repeat": 3, "stripe": 2, "site": 3, "sector": 2, "edge-arc": 1.5, "annulus": 2, "centre": 2}

// addPatterns takes in the dice of patterns, however few they are beside the healthy
// loss.
func (d *diceTable) addPatterns(e *Evidence, k *Catalogue) {
	counts := e.single(d.classes)
	nats := 0.0
	for g := range groups {
		inGroup, inPatterns := 0.0, 0.0
		for c := range counts {
			if k.group(int8(c)) == g {
				inGroup += counts[c]
			}
		}
		for w := range e.Wafers {
			for _, p := range e.Wafers[w].Patterns {
				if n, ok := unhealthy[p.Kind]; ok && p.Group == groups[g].name {
					inPatterns += p.Loss * float64(e.Wafers[w].Dice)
					nats += n
				}
			}
		}
		if inGroup == 0 {
			continue
		}
		for c := range counts {
			if k.group(int8(c)) == g {
				d.excess[c] = max(d.excess[c], min(1, inPatterns/inGroup)*counts[c])
			}
		}
	}
	d.beyond = max(d.beyond, nats)
}

// beyondHealthy is how unlikely a count is in a healthy lot, in nats: lots differ in
// their defects by a factor (lognormal, common practice, no source) on top of chance.
func beyondHealthy(count, expected float64) float64 {
	const factor = 0.45
	if count <= expected {
		return 0
	}
	x := math.Log(count/expected) / math.Sqrt(factor*factor+1/max(expected, 1))
	return x * x / 2
}

// against is the log likelihood of the excess under chances of classes (nil: none),
// against equal chances, with what is left of them spread over all classes.
func (d *diceTable) against(chances []float64, blur float64) float64 {
	if d.sum == 0 {
		return 0
	}
	ll, covered := 0.0, 0.0
	for c, n := range d.excess {
		if chances != nil && chances[c] > supported {
			covered += n / d.sum
		}
	}
	for c, n := range d.excess {
		p := blur / float64(d.classes)
		if chances != nil {
			// a cause does not always make its classes in the same ratio: part of the
			// chance is as given, part as seen among those that it makes often
			own := 0.6 * chances[c]
			if chances[c] > supported && covered > 0 {
				own += 0.4 * n / d.sum / covered * min(1, chances[c]/0.15)
			}
			p += (1 - blur) * own
		}
		ll += n / d.sum * math.Log(p*float64(d.classes))
	}
	return d.strength * ll
}

// supported is the least chance of a class that a cause is said to make.
const supported = 0.03

// chances are a cause's chances of the classes, nil when it makes no single dice.
func (k *Catalogue) chances(e *Entry) []float64 {
	if len(e.Dice) == 0 {
		return nil
	}
	p, sum := make([]float64, len(k.Classes)), 0.0
	for c := range k.Classes {
		p[c] = e.Dice[k.Classes[c].Class]
		sum += p[c]
	}
	for c := range p {
		p[c] /= sum
	}
	return p
}

// of is the view of the single dice for a cause, and the log odds that its dice are of
// the kind that the view takes them for: see mixed.
func (d *diceTable) of(k *Catalogue, e *Entry) (view, odds float64) {
	chances := k.chances(e)
	switch {
	case chances == nil:
		return d.against(nil, 0.4), 0 // a strong shift may leave some
	case len(e.Shifts) > 0:
		return d.mixed(chances, e.OneClass, 0.2)
	}
	// a cause that lives by single dice must show them
	view, odds = d.mixed(chances, e.OneClass, 0.1)
	return view - 4*math.Exp(-d.share/0.003), odds
}

// mixed is against, for a cause that in so many lots of one hits all of its dice in
// the same way, as a mask's defect does. The view is that of the likeliest way; odds
// is the log of the mean over all ways by that one, which is prior and not evidence:
// no weight of the view tempers it.
func (d *diceTable) mixed(chances []float64, oneClass, blur float64) (view, odds float64) {
	ways := []float64{d.against(chances, blur)}
	if oneClass == 0 {
		return ways[0], 0
	}
	prior := []float64{1 - oneClass}
	p := make([]float64, len(chances))
	for c, chance := range chances {
		if chance == 0 {
			continue
		}
		for i := range p {
			p[i] = 0.15 * chances[i]
		}
		p[c] += 0.85
		ways, prior = append(ways, d.against(p, blur)), append(prior, oneClass*chance)
	}
	view = slices.Max(ways)
	weight := UsualWeights().View[diceView]
	sum := math.Inf(-1)
	for i := range ways {
		sum = logSum(sum, math.Log(prior[i])+weight*(ways[i]-view))
	}
	return view, sum
}

// mapTable is how much of a lot's patterns are of each kind, by group.
type mapTable struct {
	share    [][]float64 // by group and pattern
	strength []float64   // by group: maps' worth of evidence, at most four
	part     []float64   // by group: share of the lot's single dice
}

func (e *Evidence) mapTable(k *Catalogue) mapTable {
	m := mapTable{share: make([][]float64, len(groups)), strength: make([]float64, len(groups)), part: make([]float64, len(groups))}
	for g := range m.share {
		m.share[g] = make([]float64, len(patterns))
		maps := 0.0
		add := func(list []Pattern, weight float64) {
			sum := 0.0
			for _, p := range list {
				if p.Group == groups[g].name && p.Kind != "none" {
					sum += p.Loss
				}
			}
			if sum <= 0 {
				return
			}
			for _, p := range list {
				if p.Group == groups[g].name && p.Kind != "none" {
					m.share[g][slices.Index(patterns, p.Kind)] += weight * p.Loss / sum
				}
			}
			maps += weight
		}
		weights, n := e.mapWeights(k, g)
		for w := range e.Wafers {
			add(e.Wafers[w].Patterns, weights[w])
		}
		add(e.Stacked, 2)
		for p := range m.share[g] {
			m.share[g][p] /= max(maps, 1e-9)
		}
		m.strength[g] = 4 * -math.Expm1(-maps/4)
		m.part[g] = n
	}
	all := 0.0
	for _, n := range m.part {
		all += n
	}
	for g := range m.part {
		m.part[g] /= max(all, 1)
	}
	return m
}

// mapWeights are how much each wafer's map of a group counts: wafers that have
// more of its dice than the others count most. n is the number of dice.
func (e *Evidence) mapWeights(k *Catalogue, g int) (weights []float64, n float64) {
	weights = make([]float64, len(e.Wafers))
	for w := range e.Wafers {
		for c, x := range e.Wafers[w].Single {
			if k.group(int8(c)) == g {
				weights[w] += x
			}
		}
		n += weights[w]
	}
	if len(weights) == 0 {
		return weights, n
	}
	usual, most := 0.8*stats.Median(slices.Clone(weights)), slices.Max(weights)
	for w := range weights {
		weights[w] = min(1, max(0.05, (weights[w]-usual)/max(most-usual, 1)))
	}
	return weights, n
}

// healthyMaps are the patterns of a healthy lot's single dice. Common practice, no
// source.
var healthyMaps = map[string]float64{"random": 10, "none": 2, "edge-ring": 4, "edge-arc": 0.8, "gradient": 0.6, "annulus": 0.2, "sector": 0.2,
	"centre": 0.2, "blob": 0.2, "stripe": 0.2, "line": 0.15, "site": 0.1, "shot-repeat": 0.1}

// totalOf sums the weights of patterns, in their fixed order.
func totalOf(maps map[string]float64) float64 {
	sum := 0.0
	for _, p := range patterns {
		sum += maps[p]
	}
	return sum
}

// healthy is the view of the maps when nothing is wrong: all groups count, as far
// as the single dice are in them.
func (m *mapTable) healthy() float64 {
	total := totalOf(healthyMaps)
	ll := 0.0
	for g := range groups {
		for p, share := range m.share[g] {
			if share > 0 {
				ll += m.part[g] * m.strength[g] * share * math.Log((healthyMaps[patterns[p]]/total+0.002)*float64(len(patterns)))
			}
		}
	}
	return ll
}

// of is the view of the maps for a cause: by group, as far as the excess lies in the
// group and the cause makes such dice.
func (m *mapTable) of(k *Catalogue, e *Entry, d *diceTable) float64 {
	chances := k.chances(e)
	if chances == nil || d.sum == 0 || len(e.Maps) == 0 {
		return 0
	}
	total := totalOf(e.Maps)
	ll := 0.0
	for g := range groups {
		weight := 0.0
		for c := range chances {
			if k.group(int8(c)) == g && chances[c] > supported {
				weight += d.excess[c] / d.sum
			}
		}
		for p, share := range m.share[g] {
			if share > 0 {
				const blur = 0.06
				chance := (1-blur)*e.Maps[patterns[p]]/total + blur/float64(len(patterns))
				ll += weight * m.strength[g] * share * math.Log(chance*float64(len(patterns)))
			}
		}
	}
	return ll
}

// flagView is the view of the flags for causes that hold together.
func (e *Evidence) flagsOf(k *Catalogue, causes ...*Entry) float64 {
	ll := 0.0
	for _, f := range k.Flags {
		raised, known := e.Flags[f.Flag]
		if !known {
			continue
		}
		p := f.Usual
		if len(causes) > 0 {
			not := 1.0
			named := false
			for _, c := range causes {
				if own, ok := c.Flags[f.Flag]; ok {
					not *= 1 - own
					named = true
				}
			}
			if named {
				p = 1 - not
			}
		}
		if raised {
			ll += math.Log(p / f.Usual)
		} else {
			ll += math.Log((1 - p) / (1 - f.Usual))
		}
	}
	return ll
}

// lossOf is the view of the yield: nothing wrong means nothing lost beyond what
// healthy lots lose; a cause worth naming costs something.
//
// Dice that stand alone beyond what healthy lots have, on single wafers or in
// patterns, are a loss even in a lot that is as good as any.
func (e *Evidence) lossOf(d *diceTable) (nothing, cause float64) {
	usual := e.healthyLoss()
	spread := 0.015 + 0.3*usual
	if !(e.cols.BaselineYield > 0) {
		spread += 0.03
	}
	excess := 0.0
	if e.Dice > 0 {
		excess = 1 - e.yield() - usual
	}
	z := max(0, excess-0.5*spread) / spread
	excess = max(excess, d.share*-math.Expm1(-d.beyond))
	return -compress(z * z / 2), -2.5 * math.Exp(-max(0, excess)/0.012)
}
