package causes

import (
	"math"
	"slices"
	"sort"
)

// Weights say how much each view counts, and how likely nothing, the unknown and
// pairs are beyond the catalogue's odds. Fit finds them.
type Weights struct {
	View    [numViews]float64 `json:"view"`
	Nothing float64           `json:"nothing"` // added to the log odds
	Unknown float64           `json:"unknown"`
	Pair    float64           `json:"pair"`
}

// UsualWeights are where fitting starts and what holds where there is no
// calibration: about what fits of several products gave.
func UsualWeights() Weights {
	return Weights{View: [numViews]float64{1.4, 0.55, 0.06, 0.28, 0.32, 0.72, 2.2}, Nothing: -0.3, Unknown: -0.2, Pair: -4.6}
}

// hypothesis is what may be true of a lot.
type hypothesis struct {
	causes  []int // of the catalogue; none: nothing, or the unknown
	dirs    []int
	unknown bool
	odds    float64 // log prior odds
	views   views
	sees    []*seen // by cause; nil for one that moves no level
}

func (h *hypothesis) score(w *Weights) float64 {
	s := h.odds
	for i, v := range h.views {
		s += w.View[i] * v
	}
	switch {
	case h.unknown:
		s += w.Unknown
	case h.nothing():
		s += w.Nothing
	case h.pair():
		s += w.Pair
	}
	return s
}

func (h *hypothesis) nothing() bool { return !h.unknown && len(h.causes) == 0 }

func (h *hypothesis) pair() bool { return len(h.causes) == 2 }

// judged is a lot with all its hypotheses.
type judged struct {
	e      *Evidence
	k      *Catalogue
	f      *frame
	s      *sample
	dice   diceTable
	maps   mapTable
	all    []*hypothesis
	unseen *seen // the unknown's levels
}

// pairsOf is how many of the likeliest single causes are tried in pairs.
const pairsOf = 7

// judge makes every hypothesis about a lot and its views.
func judge(e *Evidence, k *Catalogue) *judged {
	f := e.frame
	j := &judged{e: e, k: k, f: f, s: f.sample(f.null()), dice: e.diceTable(k), maps: e.mapTable(k)}
	nothing, loss := e.lossOf(&j.dice)

	h := &hypothesis{odds: math.Log(k.WithinBaseline.Odds * float64(len(k.Causes))), views: still}
	h.views[diceView] = -compress(j.dice.beyond)
	h.views[mapView] = min(0, j.maps.healthy())
	h.views[flagView] = e.flagsOf(k)
	h.views[lossView] = j.explained(nothing)
	j.all = append(j.all, h)

	var share float64
	j.unseen, share = f.seeUnknown(j.s)
	h = &hypothesis{unknown: true, odds: math.Log(k.Unexplained.Odds) + share, views: j.unseen.views()}
	h.views[flagView] = e.flagsOf(k)
	h.views[lossView] = j.explained(loss)
	j.all = append(j.all, h)

	j.singles(loss)
	j.pairs(loss)
	return j
}

// singles adds a hypothesis for every cause and direction, with its best variant
// of levels; the variants share the cause's odds.
func (j *judged) singles(loss float64) {
	best := map[[2]int]*seen{}
	fits := map[[2]int]*merits{}
	for _, v := range j.f.variants(j.k) {
		key := [2]int{v.cause, v.direction}
		x := j.s.see(v)
		if best[key] == nil {
			best[key], fits[key] = x, newMerits()
		}
		if fits[key].add(x) {
			best[key] = x
		}
	}
	// Zones tell that a parameter varies, not to which side the lot is off: where the
	// device answers unevenly, each direction fits one side of it better.
	for key, x := range best {
		if other := best[[2]int{key[0], 1 - key[1]}]; other != nil {
			x.zones = max(x.zones, other.zones)
		}
	}
	for c := range j.k.Causes {
		e := &j.k.Causes[c]
		directions := max(1, len(e.Directions))
		for d := range directions {
			h := &hypothesis{causes: []int{c}, dirs: []int{d}, odds: math.Log(e.Odds / float64(directions))}
			h.sees = []*seen{nil}
			h.views = still
			x := best[[2]int{c, d}]
			if x != nil {
				// one of the variants is true: the cause is as likely as their mean
				moves, share := fits[[2]int{c, d}].share(e.Levels)
				h.odds += share
				if moves {
					h.sees[0], h.views = x, x.views()
				} else {
					x = nil
				}
			}
			var share float64
			h.views[diceView], share = j.dice.of(j.k, e)
			h.odds += share
			h.views[mapView] = j.maps.of(j.k, e, &j.dice)
			h.views[flagView] = j.e.flagsOf(j.k, e) + x.smooth(e.Smooth)
			h.views[lossView] = j.explained(loss, e)
			j.all = append(j.all, h)
		}
	}
}

// withoutReason is what it counts against a cause that part of the loss are dice
// which fail though they pass every limit: nothing on the wafer does that.
const withoutReason = 4

// explained is the view of the loss for causes that hold together; none: for nothing,
// or the unknown.
func (j *judged) explained(loss float64, causes ...*Entry) float64 {
	if !j.e.Flags["fails-without-reason"] || slices.ContainsFunc(causes, func(e *Entry) bool { return e.Setup }) {
		return loss
	}
	return loss - withoutReason
}

// merits are how well the variants of a cause fit the levels.
type merits struct {
	most           float64
	shifts, scales []float64 // of process parameters; of one test read wrongly
}

func newMerits() *merits { return &merits{most: math.Inf(-1)} }

// add takes in a variant and says whether it is the best so far.
func (m *merits) add(x *seen) bool {
	merit := usualLevels(x.views())
	if x.v.test >= 0 {
		m.scales = append(m.scales, merit)
	} else {
		m.shifts = append(m.shifts, merit)
	}
	if merit > m.most {
		m.most = merit
		return true
	}
	return false
}

// share is the log of the mean likelihood over the best one's. That any one of many
// tests is read wrongly is as likely as that all of them shift. A cause that moves
// levels in some lots only, with the given chance, may be better without: moves says.
func (m *merits) share(chance float64) (moves bool, share float64) {
	var kinds []float64
	for _, v := range [][]float64{m.shifts, m.scales} {
		if len(v) > 0 {
			kinds = append(kinds, logMean(v))
		}
	}
	mean := logMean(kinds)
	if chance == 0 {
		return true, mean - m.most
	}
	without := usualLevels(still)
	both := logSum(math.Log(chance)+mean, math.Log(1-chance)+without)
	if m.most > without {
		return true, both - m.most
	}
	return false, both - without
}

// still are the views of a cause that moves no level.
var still = views{lotView: -math.Ln2, waferView: -math.Ln2, zoneView: -math.Ln2}

// pairs adds the pairs of the likeliest single causes.
func (j *judged) pairs(loss float64) {
	w := UsualWeights()
	single := append([]*hypothesis(nil), j.all[2:]...)
	sort.SliceStable(single, func(a, b int) bool { return single[a].score(&w) > single[b].score(&w) })
	single = j.spanning(single)
	for a := range single {
		for b := range a {
			if single[a].causes[0] != single[b].causes[0] {
				j.all = append(j.all, j.pair(single[b], single[a], loss))
			}
		}
	}
}

// spanning takes the likeliest causes, and the likeliest by levels alone and by
// single dice alone: of a pair one often shows in one view only.
func (j *judged) spanning(sorted []*hypothesis) []*hypothesis {
	out := append([]*hypothesis(nil), sorted[:min(4, len(sorted))]...)
	top := func(value func(h *hypothesis) float64, n int) {
		list := append([]*hypothesis(nil), sorted...)
		sort.SliceStable(list, func(a, b int) bool { return value(list[a]) > value(list[b]) })
		for _, h := range list {
			if n == 0 || len(out) == pairsOf {
				return
			}
			if !slices.Contains(out, h) {
				out = append(out, h)
				n--
			}
		}
	}
	top(func(h *hypothesis) float64 { return h.views[lotView] + h.views[waferView] + h.views[zoneView] }, 2)
	top(func(h *hypothesis) float64 { return h.views[diceView] + h.views[mapView] + h.views[flagView] }, 2)
	return out
}

// pair is the hypothesis that two causes hold at once.
func (j *judged) pair(a, b *hypothesis, loss float64) *hypothesis {
	h := &hypothesis{causes: []int{a.causes[0], b.causes[0]}, dirs: []int{a.dirs[0], b.dirs[0]},
		odds:  a.odds + b.odds + math.Log(j.k.Pairs.Odds),
		sees:  []*seen{a.sees[0], b.sees[0]},
		views: a.views}
	ea, eb := &j.k.Causes[a.causes[0]], &j.k.Causes[b.causes[0]]
	x, y := a.sees[0], b.sees[0]
	switch {
	case x == nil && y == nil:
	case x == nil:
		h.views[lotView], h.views[waferView], h.views[zoneView] = b.views[lotView], b.views[waferView], b.views[zoneView]
	case y == nil:
	default:
		both := j.s.seePair(j.f, x, y)
		v := both.views()
		h.views[lotView], h.views[waferView], h.views[zoneView] = v[lotView], v[waferView], v[zoneView]
	}
	h.views[diceView] = j.dice.ofPair(j.k, ea, eb, max(a.views[diceView], b.views[diceView]))
	h.views[mapView] = j.maps.ofPair(j.k, ea, eb, &j.dice)
	h.views[flagView] = j.e.flagsOf(j.k, ea, eb) + x.smooth(ea.Smooth) + y.smooth(eb.Smooth)
	h.views[lossView] = j.explained(loss, ea, eb)
	return h
}

// ofPair shares the single dice between two causes in one of three ratios, or
// leaves them to one of them alone.
func (d *diceTable) ofPair(k *Catalogue, a, b *Entry, alone float64) float64 {
	pa, pb := k.chances(a), k.chances(b)
	if pa == nil || pb == nil {
		return alone
	}
	var all []float64
	for _, share := range []float64{0.2, 0.5, 0.8} {
		p := make([]float64, len(pa))
		for c := range p {
			p[c] = share*pa[c] + (1-share)*pb[c]
		}
		all = append(all, d.against(p, 0.1))
	}
	return logMean(all)
}

// ofPair lets each map be made by either cause.
func (m *mapTable) ofPair(k *Catalogue, a, b *Entry, d *diceTable) float64 {
	pa, pb := k.chances(a), k.chances(b)
	switch {
	case pa == nil && pb == nil:
		return 0
	case pa == nil:
		return m.of(k, b, d)
	case pb == nil:
		return m.of(k, a, d)
	}
	joint := &Entry{Cause: a.Cause, Dice: map[string]float64{}, Maps: map[string]float64{}}
	for c := range k.Classes {
		joint.Dice[k.Classes[c].Class] = pa[c] + pb[c]
	}
	for _, e := range []*Entry{a, b} {
		sum := totalOf(e.Maps)
		for _, p := range patterns {
			if w := e.Maps[p]; w > 0 {
				joint.Maps[p] += w / sum
			}
		}
	}
	return m.of(k, joint, d)
}

// seePair is how two variants together do in the views of levels. Each keeps its
// own wafers and zones; the typical wafer may have both.
func (s *sample) seePair(f *frame, a, b *seen) *seen {
	x := &seen{lot: max(a.lot, b.lot)}
	if s.hasLot && len(a.bySize) > 0 && len(b.bySize) > 0 {
		if both := s.lotPair(f, a, b); both > x.lot {
			x.lot = both
		}
	}
	x.wafers = max(s.waferPair(a, b), a.wafers, b.wafers)
	x.zones = max(s.zonePair(a, b), a.zones, b.zones)
	return x
}

// lotPair tries the sum of both moves at the sizes that do best one by one and
// their neighbours.
func (s *sample) lotPair(f *frame, a, b *seen) float64 {
	var all []float64
	step := 2
	for i := 0; i < len(a.v.moves); i += step {
		for k := 0; k < len(b.v.moves); k += step {
			sum := make([]float64, len(f.tests))
			for t := range sum {
				sum[t] = a.v.moves[i][t] + b.v.moves[k][t]
			}
			all = append(all, f.about(f.lot, sum).at(s.lot)-s.lotNull)
		}
	}
	return logMean(all)
}

// waferPair lets every wafer be as usual or have either cause.
func (s *sample) waferPair(a, b *seen) float64 {
	if len(a.affected) != len(s.wafers) || len(b.affected) != len(s.wafers) || a.reversed || b.reversed {
		return math.Inf(-1)
	}
	sum := 0.0
	for w := range s.wafers {
		// affected are log odds at each cause's own best share
		sum += logSum(math.Log(0.6), math.Log(0.4)+logSum(a.affected[w], b.affected[w]))
	}
	return compress(sum - 3)
}

func (s *sample) zonePair(a, b *seen) float64 {
	if len(a.inZones) != len(s.zones) || len(b.inZones) != len(s.zones) {
		return math.Inf(-1)
	}
	sum := 0.0
	for w := range s.zones {
		sum += logSum(math.Log(0.5), math.Log(0.25)+logSum(a.inZones[w], b.inZones[w]))
	}
	return compress(sum - 3)
}

// Verdict is the posterior of a lot.
type Verdict struct {
	Causes  []Judged // by falling probability; never empty
	Nothing float64
	Unknown float64
	Alike   []Alike

	j     *judged
	weigh Weights
}

// Judged is one cause's probability.
type Judged struct {
	Cause       string // of the catalogue, Nothing or Unknown
	Direction   string
	Probability float64

	entry, dir int // -1 for Nothing and Unknown
	see        *seen
	single     *hypothesis // the cause alone
}

// Weigh holds every hypothesis against the evidence.
func Weigh(e *Evidence, k *Catalogue, w Weights) *Verdict {
	return judge(e, k).verdict(w)
}

func (j *judged) verdict(w Weights) *Verdict {
	v := &Verdict{j: j, weigh: w}
	p := j.posterior(&w)
	sum := make([][2]float64, len(j.k.Causes))
	single := make([][2]*hypothesis, len(j.k.Causes))
	for i, h := range j.all {
		switch {
		case h.unknown:
			v.Unknown = p[i]
		case len(h.causes) == 0:
			v.Nothing = p[i]
		}
		for n, c := range h.causes {
			sum[c][h.dirs[n]] += p[i]
			if len(h.causes) == 1 {
				single[c][h.dirs[n]] = h
			}
		}
	}
	for c := range j.k.Causes {
		e := &j.k.Causes[c]
		d := 0
		if sum[c][1] > sum[c][0] {
			d = 1
		}
		g := Judged{Cause: e.Cause, Probability: sum[c][0] + sum[c][1], entry: c, dir: d, single: single[c][d]}
		if len(e.Directions) > 0 {
			g.Direction = e.Directions[d]
		}
		if h := single[c][d]; h != nil {
			g.see = h.sees[0]
		}
		v.Causes = append(v.Causes, g)
	}
	v.Causes = append(v.Causes, Judged{Cause: Nothing, Probability: v.Nothing, entry: -1},
		Judged{Cause: Unknown, Probability: v.Unknown, entry: -1})
	v.secondLook()
	sort.SliceStable(v.Causes, func(a, b int) bool { return v.Causes[a].Probability > v.Causes[b].Probability })
	v.Alike = j.alike(&w)
	return v
}

// keptBack is the probability that is kept for lots which are like no model: it is
// shared by all hypotheses alike. Of lots made with other physics than that of the
// calibration about so many are told wrongly however sure the model is.
const keptBack = 0.03

// posterior is each hypothesis's probability.
func (j *judged) posterior(w *Weights) []float64 {
	p := make([]float64, len(j.all))
	top := math.Inf(-1)
	for i, h := range j.all {
		p[i] = h.score(w)
		top = max(top, p[i])
	}
	sum := 0.0
	for i := range p {
		p[i] = math.Exp(p[i] - top)
		sum += p[i]
	}
	for i := range p {
		p[i] = (1-keptBack)*p[i]/sum + keptBack/float64(len(p))
	}
	return p
}
