package causes

import (
	"math"
	"slices"
)

// The views in which a hypothesis is judged.
const (
	lotView = iota
	waferView
	zoneView
	diceView
	mapView
	flagView
	lossView
	numViews
)

// views are the log likelihood ratios of a hypothesis against nothing.
type views [numViews]float64

// compress draws in what is large: many dice and wafers repeat the same evidence,
// and no density is right that far out. It keeps the order.
func compress(x float64) float64 {
	const c = 25
	return math.Copysign(c*math.Log1p(math.Abs(x)/c), x)
}

// mix is the log of a ratio that holds with chance one half and is 1 otherwise.
func mix(x float64) float64 { return logSum(x, 0) - math.Ln2 }

func logSum(a, b float64) float64 {
	if a < b {
		a, b = b, a
	}
	if math.IsInf(a, -1) {
		return a
	}
	return a + math.Log1p(math.Exp(b-a))
}

// logMean is the log of the mean of exponentials.
func logMean(v []float64) float64 {
	if len(v) == 0 {
		return math.Inf(-1)
	}
	s := math.Inf(-1)
	for _, x := range v {
		s = logSum(s, x)
	}
	return s - math.Log(float64(len(v)))
}

// sample is a lot's levels in the frame, with their log densities when nothing is
// wrong.
type sample struct {
	lot     []float64
	lotNull float64
	hasLot  bool // the healthy level is known
	wafers  [][]float64
	waferL0 []float64
	zones   [][][]float64 // by wafer
	zoneL0  [][]float64
}

func (f *frame) sample(n null) *sample {
	e := f.e
	pick := func(v []float64) []float64 {
		out := make([]float64, len(f.tests))
		for i, t := range f.tests {
			out[i] = v[t]
		}
		return out
	}
	s := &sample{lot: pick(e.Lot), hasLot: e.cols.Baseline != "lot majority" && e.cols.Baseline != "none"}
	s.lotNull = n.lot.at(s.lot)
	for w := range e.Wafers {
		y := pick(e.Wafers[w].Level)
		for i := range y {
			y[i] -= s.lot[i]
		}
		s.wafers = append(s.wafers, y)
		s.waferL0 = append(s.waferL0, n.wafer.at(y))
		var zs [][]float64
		var l0 []float64
		for _, v := range e.Wafers[w].Zone {
			if v != nil {
				y := pick(v)
				zs = append(zs, y)
				l0 = append(l0, n.zone.at(y))
			}
		}
		s.zones = append(s.zones, zs)
		s.zoneL0 = append(s.zoneL0, l0)
	}
	return s
}

// seen is how a variant does in the views of levels.
type seen struct {
	v        *variant
	lot      float64   // log ratio
	wafers   float64   // of wafers against the typical one, compressed
	reversed bool      // the typical wafer is affected, and single ones are not
	zones    float64   // compressed
	bySize   []float64 // lot log ratio at each size
	affected []float64 // by wafer: log odds that it stands out by this variant
	inZones  []float64 // by wafer: log ratio of its zones
}

func (x *seen) views() views {
	var v views
	v[lotView], v[waferView], v[zoneView] = mix(compress(x.lot)), mix(x.wafers), mix(x.zones)
	return v
}

// Nats of a view of levels from which on they are off, and vary over the wafer: healthy
// wafers vary a little in many directions.
const (
	shows  = 4
	varies = 12
)

// smooth says for a cause whose size varies over the wafer with a given chance what it
// counts that this lot's does or does not, once its levels show at all.
func (x *seen) smooth(chance float64) float64 {
	switch {
	case x == nil || chance == 0:
		return 0
	case x.zones > varies:
		return math.Log(2 * chance)
	case x.lot > shows || x.wafers > shows:
		return math.Log(2 * (1 - chance))
	}
	return 0
}

func (s *sample) see(v *variant) *seen {
	x := &seen{v: v, affected: make([]float64, len(s.wafers)), inZones: make([]float64, len(s.wafers))}
	if len(v.moves) == 0 {
		x.lot, x.wafers, x.zones = math.Inf(-1), math.Inf(-1), math.Inf(-1)
		return x
	}
	if s.hasLot {
		for _, d := range v.lot {
			x.bySize = append(x.bySize, d.at(s.lot)-s.lotNull)
		}
		x.lot = logMean(x.bySize)
	}
	s.seeWafers(v, x)
	s.seeZones(v, x)
	return x
}

// shares of affected wafers that are tried.
var sharesTried = []float64{0.04, 0.15, 0.4, 0.8}

// seeWafers asks which wafers stand out in the variant's direction, by sizes that
// are alike within a grid step or two; or whether single wafers lack what the
// typical one has.
func (s *sample) seeWafers(v *variant, x *seen) {
	if len(s.wafers) < 3 {
		return
	}
	forward, r := s.waferMixture(v.wafer, 1)
	backward := math.Inf(-1)
	if x.lot > 3 {
		backward, _ = s.waferMixture(v.wafer, -1)
	}
	x.wafers, x.affected = compress(forward), r
	if backward > forward {
		x.wafers, x.reversed = compress(backward), true
	}
}

// waferMixture is the log ratio of a mixture of affected and other wafers, over
// shares and sizes, with each wafer's own log odds at the best of them.
func (s *sample) waferMixture(at []*density, sign float64) (total float64, odds []float64) {
	n, g := len(s.wafers), len(at)
	ratio := make([][]float64, n)
	y := make([]float64, 0, 64)
	for w := range ratio {
		ratio[w] = make([]float64, g)
		y = append(y[:0], s.wafers[w]...)
		if sign < 0 {
			for i := range y {
				y[i] = -y[i]
			}
		}
		for a, d := range at {
			ratio[w][a] = d.at(y) - s.waferL0[w]
		}
	}
	var all []float64
	best := math.Inf(-1)
	odds = make([]float64, n)
	own := make([]float64, n)
	for a := range g {
		for w := range own {
			own[w] = logMean(ratio[w][max(0, a-2):min(g, a+3)])
		}
		for _, share := range sharesTried {
			sum := 0.0
			for w := range own {
				sum += logSum(math.Log1p(-share), math.Log(share)+own[w])
			}
			all = append(all, sum)
			if sum > best {
				best = sum
				for w := range own {
					odds[w] = own[w] + math.Log(share/(1-share))
				}
			}
		}
	}
	return logMean(all), odds
}

// seeZones asks whether zones of wafers vary in the variant's direction, either
// way.
func (s *sample) seeZones(v *variant, x *seen) {
	n, g := len(s.zones), len(v.zone)
	ratio := make([][]float64, n) // by wafer and size
	y := make([]float64, 0, 64)
	for w := range ratio {
		ratio[w] = make([]float64, g)
		for a, d := range v.zone {
			sum := 0.0
			for z, dev := range s.zones[w] {
				y = append(y[:0], dev...)
				plus := d.at(y) - s.zoneL0[w][z]
				for i := range y {
					y[i] = -y[i]
				}
				minus := d.at(y) - s.zoneL0[w][z]
				// a zone is as it should be, or off by as much either way
				sum += logSum(math.Log(0.4), math.Log(0.3)+logSum(plus, minus))
			}
			ratio[w][a] = sum
		}
		x.inZones[w] = logMean(ratio[w])
	}
	var all []float64
	for a := range g {
		for _, share := range sharesTried {
			sum := 0.0
			for w := range ratio {
				own := logMean(ratio[w][max(0, a-1):min(g, a+2)])
				sum += logSum(math.Log1p(-share), math.Log(share)+own)
			}
			all = append(all, sum)
		}
	}
	x.zones = compress(logMean(all))
}

// seeUnknown does the same for levels that are off in no known direction: in all
// tests by any amounts, or in those of two kinds, which costs less where the others
// stand still. One kind alone is a matter of the tester. It gives the best of these, and
// the log of their mean likelihood over its own.
func (f *frame) seeUnknown(s *sample) (best *seen, share float64) {
	best = s.see(f.offIn(nil))
	most := usualLevels(best.views())
	ways := []float64{most}
	var pairs []float64
	kinds := f.kinds()
	for a := range kinds {
		for b := range a {
			x := s.see(f.offIn(append(slices.Clone(kinds[a]), kinds[b]...)))
			merit := usualLevels(x.views())
			pairs = append(pairs, merit)
			if merit > most {
				best, most = x, merit
			}
		}
	}
	if len(pairs) > 0 {
		ways = append(ways, logMean(pairs))
	}
	return best, logMean(ways) - most
}

// usualLevels weighs the views of levels as the usual weights do.
func usualLevels(v views) float64 {
	w := UsualWeights()
	return w.View[lotView]*v[lotView] + w.View[waferView]*v[waferView] + w.View[zoneView]*v[zoneView]
}

// kinds groups the frame's tests by what they measure.
func (f *frame) kinds() [][]int {
	var out [][]int
	at := map[string]int{}
	for i, t := range f.tests {
		m := f.e.cols.Tests[t].Measures
		k, ok := at[m]
		if !ok || m == "" || m == "other" {
			at[m] = len(out)
			out = append(out, []int{i})
			continue
		}
		out[k] = append(out[k], i)
	}
	return out
}

// offIn is a variant in which the given tests of the frame are off, by any amounts;
// nil: all of them.
func (f *frame) offIn(tests []int) *variant {
	v := &variant{cause: -1, test: -1, lot: f.unknown(f.lot, tests), wafer: f.unknown(f.wafer, tests), zone: f.unknown(f.zone, tests)}
	v.moves = make([][]float64, len(v.lot))
	for i := range v.moves {
		v.moves[i] = make([]float64, len(f.tests))
	}
	return v
}
