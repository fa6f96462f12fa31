package wafermap

import "math"

// What chance reaches. On a wafer without patterns the best gain less cost among the
// places of one shape has a distribution with an exponential tail, which depends
// hardly at all on the dice and little on the number of fails: cost takes the
// number of places out. chanceTable holds its level and scale (of Gumbel's law) for each
// shape and some numbers of fails. It is made by simulation:
//
//	go test ./wafermap -run TestChanceTable -update

// knots are the numbers of fails of the columns of chanceTable.
var knots = [...]float64{4, 10, 30, 100, 300, 1000, 5000}

// gumbel is a distribution 1 - exp(-exp(-(x-level)/scale)).
type gumbel struct{ level, scale float64 }

// chance is the distribution for a shape and a number of fails, between the knots linear
// in its logarithm.
func chance(s shape, fails float64) gumbel {
	k := 1
	for k < len(knots)-1 && fails > knots[k] {
		k++
	}
	t := math.Log(fails/knots[k-1]) / math.Log(knots[k]/knots[k-1])
	t = min(max(t, 0), 1)
	a, b := chanceTable[s][k-1], chanceTable[s][k]
	return gumbel{a.level + t*(b.level-a.level), a.scale + t*(b.scale-a.scale)}
}

// allowance shares the chance of a false alarm out over the shapes (they add up to 1): more
// to those of which there are many places, where evidence is dearest.
var allowance = [shapes_]float64{shapeRing: 0.05, shapeArc: 0.09, shapeCentre: 0.05, shapeAnnulus: 0.12, shapeLine: 0.2, shapeBlob: 0.18,
	shapeRamp: 0.04, shapeSector: 0.05, shapeShot: 0.1, shapeComb: 0.03, shapeBand: 0.03, shapeSite: 0.03, shapeOrder: 0.03}

// falseAlarm is the chance that a wafer without patterns is told one.
const falseAlarm = 0.01

// judge sets what a pattern's evidence is worth.
func (f *field) judge(p *pattern) {
	g := chance(p.shape, f.total.o)
	z := (p.gain - p.cost - g.level) / g.scale
	p.p = min(1, -math.Expm1(-math.Exp(-z))/allowance[p.shape])
	p.told = p.p <= falseAlarm
	p.net = p.gain - f.price(p)
}

// needed is the gain less cost from which a shape is told.
func (f *field) needed(s shape) float64 {
	g := chance(s, f.total.o)
	return g.level - g.scale*math.Log(-math.Log1p(-falseAlarm*allowance[s]))
}

// price is the gain that a pattern needs to be told from chance at about even odds.
func (f *field) price(p *pattern) float64 {
	g := chance(p.shape, f.total.o)
	return p.cost + g.level - g.scale*math.Log(allowance[p.shape])
}
