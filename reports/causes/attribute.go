package causes

import (
	"context"
	"math"

	"kneepoint/stats/yield"
)

// Amount is a number of something with its 95 % interval.
type Amount struct{ Value, Lower, Upper float64 }

// attribution is what one cause cost.
type attribution struct {
	lost     []float64 // by wafer: dice that would pass without the cause
	saved    []float64 // by wafer: of them, those that levels cost
	odds     []float64 // by wafer: log odds that the cause's levels are there; nil when it moves none
	total    Amount    // dice of the lot
	affected []bool    // by wafer
}

// attributor shares the failing dice of a lot among its causes.
//
// Causes that move levels: the size of the move is estimated by wafer, smoothly over
// the wafer's face, along the direction in which the cause moves the tests; every
// die's readings are then judged again with that move taken out. Dice that fail and
// would pass count for the cause, dice that pass and would fail against it.
//
// Causes that ruin single dice: failing dice of a class and a map pattern count as
// far as there are more of them than healthy lots have, shared among causes by how
// often each makes such dice in such patterns. What a healthy lot has is what the
// typical wafer of this lot has, as long as it is no more than the healthy loss.
//
// A die that several causes claim is shared among them by their probability. The
// interval has the counting of what healthy lots have, the uncertainty of the size,
// and that of the sharing.
type attributor struct {
	v      *Verdict
	list   []Judged
	levels []*levelCause // by cause of the list; nil when it moves no level
	like   [][][]float64 // by cause, class and pattern: how often beside any cause; nil when it makes no single dice
	cells  [][]float64   // by wafer: failing single dice by class and pattern
	usual  []float64     // healthy share of dice by class and pattern
	setup  int           // test-setup in the list when dice fail for no reason, -1
}

// Causes below leastLevels in probability are not asked what their levels cost: it
// would take as long again for every one of them. leastClaim is the least probability
// with which a cause shares single dice: what is improbable for the lot may still be
// what ruined one wafer.
const leastLevels, leastClaim = 0.01, 0.02

// claim is how much stronger a die that would pass without a cause speaks for it
// than a die of which nothing is known.
const claim = 10

// attribute shares the failing dice among the causes of the list.
func (v *Verdict) attribute(list []Judged) []attribution {
	a := &attributor{v: v, list: list, setup: -1, levels: make([]*levelCause, len(list)), like: make([][][]float64, len(list))}
	for i := range list {
		if list[i].entry < 0 {
			continue
		}
		e := &v.j.k.Causes[list[i].entry]
		if i == 0 || list[i].Probability >= leastLevels {
			a.levels[i] = v.j.levelCause(list[i].see, &v.weigh)
		}
		a.like[i] = v.j.likeness(e)
		if e.Setup && v.j.e.Flags["fails-without-reason"] {
			a.setup = i
		}
	}
	wafers := len(v.j.e.Wafers)
	a.cells = make([][]float64, wafers)
	kinds := make([][]int8, wafers)
	_ = each(context.Background(), wafers, func(w int) { a.cells[w], kinds[w] = v.j.cellsOf(w) })
	a.usual = a.usualCells()
	shares := make([]*waferLoss, wafers)
	_ = each(context.Background(), wafers, func(w int) { shares[w] = a.wafer(w, kinds[w]) })
	return a.sum(shares)
}

// waferLoss are one wafer's dice by cause of the list.
type waferLoss struct {
	levels, single        []float64
	less, more            []float64 // levels with the size off by two sigmas
	background, undecided []float64 // dice of healthy lots among those counted; sum of share x (1 - share)
}

func (a *attributor) wafer(w int, kinds []int8) *waferLoss {
	n := len(a.list)
	s := &waferLoss{make([]float64, n), make([]float64, n), make([]float64, n), make([]float64, n), make([]float64, n), make([]float64, n)}
	span := a.v.j.e.cols.Wafers[w]
	saved := make([][]int8, n)
	logs := a.v.j.logs(w)
	chance := make([]float64, n)
	for c, l := range a.levels {
		if l == nil {
			continue
		}
		var sums [3]float64
		chance[c] = logistic(l.odds[w])
		saved[c], sums = l.without(w, logs)
		s.less[c], s.more[c] = chance[c]*sums[1], chance[c]*sums[2]
	}
	weight := make([]float64, n)
	for i := range span.Hi - span.Lo {
		row := span.Lo + i
		if a.levelShares(i, saved, chance, weight) {
			sum := a.rest()
			for _, x := range weight {
				sum += math.Abs(x)
			}
			for c, x := range weight {
				s.levels[c] += x / sum
				s.undecided[c] += math.Abs(x) / sum * (1 - math.Abs(x)/sum)
			}
			continue
		}
		class := a.v.j.e.class[row]
		if a.v.j.e.cols.Pass[row] {
			continue
		}
		if class < 0 {
			if a.setup >= 0 && a.withoutReason(row) {
				s.single[a.setup]++
			}
			continue
		}
		a.single(s, w, int(class), int(kinds[i]), weight)
	}
	return s
}

// rest is the weight of what is in no cause of the list.
func (a *attributor) rest() float64 { return 0.02 + a.v.Unknown }

// levelShares weighs the causes whose move the die would do without; a negative
// weight is a die that passes only because of it.
func (a *attributor) levelShares(i int, saved [][]int8, chance, weight []float64) bool {
	any := false
	for c := range weight {
		weight[c] = 0
		if saved[c] != nil && saved[c][i] != 0 {
			weight[c] = float64(saved[c][i]) * claim * a.list[c].Probability * chance[c]
			any = any || weight[c] != 0
		}
	}
	return any
}

// single shares a failing die that stands alone.
func (a *attributor) single(s *waferLoss, w, class, kind int, weight []float64) {
	cell := class*len(patterns) + kind
	n := a.cells[w][cell]
	healthy := min(1, a.usual[cell]*float64(a.v.j.e.Wafers[w].Dice)/max(n, 1))
	sum := a.rest()
	for c := range weight {
		weight[c] = 0
		if a.like[c] != nil {
			weight[c] = max(leastClaim, a.list[c].Probability) * a.like[c][class][kind]
			sum += weight[c]
		}
	}
	for c, x := range weight {
		share := x / sum
		s.single[c] += (1 - healthy) * share
		s.background[c] += healthy * share
		s.undecided[c] += (1 - healthy) * share * (1 - share)
	}
}

// withoutReason says whether a failing die reads inside every limit.
func (a *attributor) withoutReason(row int) bool {
	for t := range a.v.j.e.cols.Tests {
		test := &a.v.j.e.cols.Tests[t]
		if low, high := test.breaks(row, test.Values[row]); low || high {
			return false
		}
	}
	return true
}

// breaks says which limits a reading in place of a row's breaks.
func (t *Test) breaks(row int, value float64) (low, high bool) {
	var mark int8
	if t.Censor != nil {
		mark = t.Censor[row]
	}
	return yield.Breaks(value, mark, t.Lower, t.Upper)
}

// sum adds the wafers' shares and finds the intervals and the affected wafers.
func (a *attributor) sum(shares []*waferLoss) []attribution {
	failing := float64(a.v.j.e.Failing)
	out := make([]attribution, len(a.list))
	for c := range out {
		x := &out[c]
		var size [3]float64
		var counting, sharing, single float64
		for _, s := range shares {
			x.lost = append(x.lost, max(0, s.levels[c]+s.single[c]))
			x.saved = append(x.saved, s.levels[c])
			size[0], size[1], size[2] = size[0]+s.levels[c], size[1]+s.less[c], size[2]+s.more[c]
			counting += s.background[c]
			single += s.single[c]
			sharing += s.undecided[c]
		}
		bySize := 0.0
		if l := a.levels[c]; l != nil {
			x.odds = l.odds
			bySize = math.Abs(size[2]-size[1]) / (2 * z95)
			bySize *= min(1, a.list[c].Probability+0.2)
		}
		total := max(0, size[0]+single)
		healthy := counting + lotsDiffer*counting*lotsDiffer*counting
		sd := math.Sqrt(healthy + 0.1*total + bySize*bySize + sharing*sharing)
		x.total = Amount{total, max(0, total-z95*sd), min(failing, total+z95*sd)}
		if failing < total {
			x.total.Value = failing
		}
		x.affected = a.affected(c, x, shares)
	}
	return out
}

const z95 = 1.959964

// lotsDiffer is the log sigma by which healthy lots differ in a kind of defect, as
// beyondHealthy takes it.
const lotsDiffer = 0.45

// affected are the wafers on which a cause is likelier there than not: by its levels,
// or by dice beyond what chance and healthy lots make.
func (a *attributor) affected(c int, x *attribution, shares []*waferLoss) []bool {
	out := make([]bool, len(shares))
	most := 0.0
	for w := range shares {
		most = max(most, shares[w].single[c]/max(1, float64(a.v.j.e.Wafers[w].Dice)))
	}
	for w, s := range shares {
		dice := float64(a.v.j.e.Wafers[w].Dice)
		if x.odds != nil && x.odds[w] > 0 {
			out[w] = true
		}
		if n := s.single[c]; n >= 3 && n > 2.5*math.Sqrt(s.background[c]+1) && n/max(1, dice) > 0.15*most {
			out[w] = true
		}
	}
	return out
}

func logistic(x float64) float64 { return 1 / (1 + math.Exp(-x)) }
