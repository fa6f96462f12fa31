package causes

import (
	"math"

	"kneepoint/stats/junction"
)

// states is the number of steps in which a die's reading is told.
const states = 5

// The steps.
const (
	collapsed = iota
	low
	usual
	high
	extreme
)

// physical is what kind of quantity a test reads.
type physical int

const (
	otherKind physical = iota
	voltage            // a breakdown voltage
	leakage
	gain
	saturation // voltage or resistance of the on-state
	capacitance
)

func kind(measures string) physical {
	switch measures {
	case junction.BVceo, junction.BVcbo, junction.BVebo, junction.BVces:
		return voltage
	case junction.Icbo, junction.Iceo, junction.Iebo:
		return leakage
	case junction.HFE:
		return gain
	case junction.Vcesat, junction.Vbesat, junction.Rc, junction.Rb, junction.Rpinch:
		return saturation
	case junction.Cob:
		return capacitance
	}
	return otherKind
}

// steps are a quantity's log ratios at which a die's reading is no longer usual
// (at least, beside the scatter) and at which it has collapsed or is extreme.
// Common practice, no source.
var steps = map[physical]struct{ least, collapse, extreme float64 }{
	voltage:     {0.03, math.Log(0.55), math.Log(1.25)},
	leakage:     {math.Log(4), math.Log(0.05), math.Log(100)},
	gain:        {0.12, math.Log(0.3), math.Log(2.5)},
	saturation:  {0.10, math.Log(0.4), math.Log(2.5)},
	capacitance: {0.03, math.Log(0.5), math.Log(2)},
	otherKind:   {0.05, math.Log(0.3), math.Log(3)},
}

// standsAlone is how many sigmas from its zone a reading is no longer usual.
const standsAlone = 5.5

// readError is the usual sigma of a level's log that measurement leaves.
func readError(measures string) float64 { return junction.UsualSigma(measures) }

// singles finds the dice of wafer w that stand alone, and their classes and maps.
func (o *observer) singles(w int) {
	s, c, e := o.c.Wafers[w], o.c, &o.e.Wafers[w]
	e.Single = make([]float64, len(o.k.Classes))
	limits := o.stateLimits(w)
	die := make([]int8, len(c.Tests))
	weights := make([]float64, len(o.k.Classes))
	tables := o.chances()
	for i := s.Lo; i < s.Hi; i++ {
		odd := false
		o.e.class[i], o.odd[i] = -1, 0
		z := o.e.zone[i]
		for t := range c.Tests {
			die[t] = usual
			v := c.Tests[t].Values[i]
			if math.IsNaN(v) {
				die[t] = -1
				continue
			}
			at := &limits[z+1][t]
			die[t] = at.state(v)
			if die[t] != usual && die[t] >= 0 {
				odd = true
				if t < 64 {
					o.odd[i] |= 1 << t
				}
			}
		}
		if !odd {
			continue
		}
		best, sum := 0, 0.0
		for k := range weights {
			ll := 0.0
			for t, s := range die {
				if s >= 0 {
					ll += tables[k][t][s]
				}
			}
			weights[k] = ll
			if ll > weights[best] {
				best = k
			}
		}
		top := weights[best]
		for k, ll := range weights {
			weights[k] = math.Exp(ll - top)
			sum += weights[k]
		}
		for k := range weights {
			e.Single[k] += weights[k] / sum
		}
		o.e.class[i] = int8(best)
	}
}

// reach is where one test's steps lie in one zone, SI.
type reach struct {
	collapse, low, high, extreme float64
	top, bottom                  float64 // the tester's ends
}

func (r *reach) state(v float64) int8 {
	switch {
	case math.IsNaN(r.low):
		return -1
	case v <= r.collapse || v <= r.bottom && v < r.low:
		return collapsed
	case v < r.low:
		return low
	case v >= r.extreme || v >= r.top && v > r.high:
		return extreme
	case v > r.high:
		return high
	}
	return usual
}

// stateLimits returns the steps by zone (the first for dice without a place)
// and test of wafer w. A zone without a level takes its wafer's, that without the
// lot's majority's.
func (o *observer) stateLimits(w int) [zones + 1][]reach {
	var out [zones + 1][]reach
	e := &o.e.Wafers[w]
	for z := range out {
		out[z] = make([]reach, len(o.c.Tests))
		for t := range o.c.Tests {
			test := &o.c.Tests[t]
			level := e.Level[t]
			if z > 0 && e.Zone[z-1] != nil && !math.IsNaN(e.Zone[z-1][t]) {
				level += e.Zone[z-1][t]
			}
			if math.IsNaN(level) {
				level = math.Log(o.majority[t] / o.e.Reference[t])
			}
			step := steps[kind(test.Measures)]
			wide := max(step.least, standsAlone*max(o.e.Scatter[t], o.zoneScatter(w, t)))
			ref := o.e.Reference[t]
			r := reach{low: ref * math.Exp(level-wide), high: ref * math.Exp(level+wide),
				collapse: ref * math.Exp(level+min(step.collapse, -wide)), extreme: ref * math.Exp(level+max(step.extreme, wide)),
				top: math.Inf(1), bottom: math.Inf(-1)}
			if !math.IsNaN(test.Clamp) {
				r.top = test.Clamp
			}
			if !math.IsNaN(test.Floor) {
				r.bottom = test.Floor
			}
			out[z][t] = r
		}
	}
	return out
}

// zoneScatter is the scatter of a die about its zone on wafer w.
func (o *observer) zoneScatter(w, t int) float64 {
	s := o.spread[w][t]
	if math.IsNaN(s) {
		return 0
	}
	return min(s, 4*o.e.Scatter[t]) // a wafer of ruined dice must not hide them
}

// chances returns the log chance of each step by class and test.
func (o *observer) chances() [][][states]float64 {
	tables := make([][][states]float64, len(o.k.Classes))
	for k := range o.k.Classes {
		tables[k] = make([][states]float64, len(o.c.Tests))
		for t := range o.c.Tests {
			tables[k][t] = o.k.Classes[k].logChances(o.c.Tests[t].Measures)
		}
	}
	return tables
}

// logChances are the logs of a class's chances for a test, drawn a little towards
// equal ones, so that no single reading excludes a class.
func (k *Class) logChances(measures string) [states]float64 {
	p, ok := k.States[measures]
	if !ok && kind(measures) == otherKind {
		p, ok = k.States["other"]
	}
	if !ok {
		p = [states]float64{0.005, 0.02, 0.95, 0.02, 0.005}
		if k.Default != nil {
			p = *k.Default
		}
	}
	const blur = 0.03
	for s := range p {
		p[s] = math.Log((p[s] + blur/states) / (1 + blur))
	}
	return p
}
