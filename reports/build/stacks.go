package build

import (
	"math"
	"slices"

	"kneepoint/ingest"
	"kneepoint/reports"
	"kneepoint/wafermap"
)

// places are the die positions of a lot, over all its wafers.
type places struct {
	x, y []int32
	site []int32 // by position; nil unless all wafers agree
	of   []int32 // by row of the lot: its position; -1 without coordinates, or where a later row of the wafer has the same
}

// newPlaces finds the positions; they are sorted by y, then x.
func (w *lotwork) newPlaces() *places {
	x, y := w.lot.X(), w.lot.Y()
	grid := wafermap.NewGrid(x, y)
	rows := grid.Rows()
	p := &places{x: make([]int32, len(rows)), y: make([]int32, len(rows)), of: make([]int32, len(x))}
	at := make([]int32, len(x)) // by the row that stands for a position
	for k, row := range rows {
		p.x[k], p.y[k], at[row] = x[row], y[row], int32(k)
	}
	seen := make([]int32, len(rows)) // 1 + the wafer that had it last
	for i, wafer := range w.lot.Wafers() {
		for row := wafer.Hi - 1; row >= wafer.Lo; row-- {
			p.of[row] = -1
			if !placed(x[row], y[row]) {
				continue
			}
			if k := at[grid.Index(int(x[row]), int(y[row]))]; seen[k] != int32(i)+1 {
				seen[k], p.of[row] = int32(i)+1, k
			}
		}
	}
	p.findSites(w.lot.Site())
	return p
}

// findSites takes over the test sites where every wafer has the same at each position.
func (p *places) findSites(site []int32) {
	if site == nil {
		return
	}
	out := make([]int32, len(p.x))
	for k := range out {
		out[k] = ingest.Missing
	}
	for row, k := range p.of {
		if k < 0 || site[row] == ingest.Missing {
			continue
		}
		if out[k] != ingest.Missing && out[k] != site[row] {
			return
		}
		out[k] = site[row]
	}
	p.site = out
}

// stack is wafers laid on each other: by position, on how many it was tested and
// failed.
type stack struct {
	wafers          []int
	tested, failing []int32
}

func (w *lotwork) stack(p *places, wafers []int, fails func(row int) bool) *stack {
	s := &stack{wafers: wafers, tested: make([]int32, len(p.x)), failing: make([]int32, len(p.x))}
	for _, i := range wafers {
		wafer := w.lot.Wafers()[i]
		for row := wafer.Lo; row < wafer.Hi; row++ {
			if k := p.of[row]; k >= 0 {
				s.tested[k]++
				if fails(row) {
					s.failing[k]++
				}
			}
		}
	}
	return s
}

// rate is the share of dice that fail, and how many were tested at how many
// positions.
func (s *stack) rate() (rate float64, tested, positions int) {
	failing := 0
	for k, n := range s.tested {
		tested += int(n)
		failing += int(s.failing[k])
		if n > 0 {
			positions++
		}
	}
	return float64(failing) / float64(tested), tested, positions
}

// oftenShare is how many of the positions of a stack without patterns may count as
// failing often.
const oftenShare = 0.1

// often says which positions fail on more wafers than the stack's rate lets a tenth
// of them by chance: the fails of the stacked map that patterns are looked for in.
func (s *stack) often(rate float64) []bool {
	least := map[int32]int32{}
	out := make([]bool, len(s.tested))
	for k, n := range s.tested {
		if n == 0 {
			continue
		}
		c, ok := least[n]
		if !ok {
			c = leastOften(int(n), rate)
			least[n] = c
		}
		out[k] = s.failing[k] >= c
	}
	return out
}

// leastOften is the smallest count of n that chance reaches with a probability of no
// more than oftenShare, n at most.
func leastOften(n int, rate float64) int32 {
	if rate >= 1 {
		return int32(n)
	}
	term := math.Pow(1-rate, float64(n)) // of k fails
	tail := 1.0
	for k := 0; k < n; k++ {
		if tail <= oftenShare && k > 0 {
			return int32(k)
		}
		tail -= term
		term *= float64(n-k) / float64(k+1) * rate / (1 - rate)
	}
	return int32(n)
}

// patterns looks for patterns in a stack.
func (w *lotwork) patterns(p *places, s *stack, fails func(row int) bool) []reports.Signature {
	rate, tested, _ := s.rate()
	if tested == 0 {
		return nil
	}
	in := wafermap.SignatureInput{Geometry: w.geo}
	in.Grid, in.Fail, in.Site = s.sample(p, s.often(rate))
	if product := w.in.Product; product != nil {
		in.ShotColumns, in.ShotRows = product.Wafer.ShotColumns, product.Wafer.ShotRows
	}
	found := wafermap.Signatures(in)
	box := w.geo.Box(p.x, p.y)
	out := make([]reports.Signature, len(found))
	members := make([][]bool, len(found))
	for i := range found {
		out[i] = w.signature(&found[i], box)
		members[i] = w.members(ground{p.x, p.y, p.site, nil}, &found[i], &out[i])
	}
	inside := overlaps(len(p.x), members)
	weighStack(s, rate, out, members, inside, false)
	for i := range out {
		if members[i] != nil {
			out[i].Wafers = w.onWafers(p, s, members[i], inside, fails)
		}
	}
	return out
}

// sample is the stacked map of the positions that were tested, or of some of very many:
// what many wafers have in common shows in a part of their dice.
func (s *stack) sample(p *places, often []bool) (*wafermap.Grid, []bool, []int32) {
	var rows []int
	for _, k := range thin(p.x, p.y, 0, len(p.x), stackedDice) {
		if s.tested[k] > 0 {
			rows = append(rows, k)
		}
	}
	fail := make([]bool, len(rows))
	for i, k := range rows {
		fail[i] = often[k]
	}
	return wafermap.NewGrid(pickInts(p.x, rows), pickInts(p.y, rows)), fail, pickInts(p.site, rows)
}

// ground is where dice or die positions are; site and order may be nil.
type ground struct{ x, y, site, order []int32 }

// members says which dice lie inside a pattern; nil where its outline does not say.
func (w *lotwork) members(g ground, s *wafermap.Signature, r *reports.Signature) []bool {
	inside, known := w.within(s, r)
	in := func(k int) bool { return inside(g.x[k], g.y[k]) }
	switch o := &s.Outline; {
	case s.Kind == "site" && len(o.Sites) > 0 && g.site != nil:
		in = func(k int) bool { return slices.Contains(o.Sites, g.site[k]) }
	case o.Along == "touchdown" && g.order != nil:
		in = func(k int) bool { return o.First <= int(g.order[k]) && int(g.order[k]) <= o.Last }
	case !known:
		return nil
	}
	out := make([]bool, len(g.x))
	for k := range out {
		out[k] = in(k)
	}
	return out
}

// overlaps counts for each position the patterns that it lies in.
func overlaps(positions int, members [][]bool) []uint8 {
	out := make([]uint8, positions)
	for _, m := range members {
		for k, in := range m {
			if in {
				out[k]++
			}
		}
	}
	return out
}

// weighStack gives the patterns of a stack their rates and losses in dice. The
// search knows positions that fail often only; what they cost is the fails inside an
// outline beyond the rate outside of all. Patterns that overlap share. With own, patterns
// whose outline does not say which dice are inside keep what the search found.
func weighStack(s *stack, rate float64, out []reports.Signature, members [][]bool, inside []uint8, own bool) {
	tested := sumOver(s.tested, nil)
	outside := make([]bool, len(inside))
	for k, n := range inside {
		outside[k] = n == 0
	}
	background := rate
	if n := sumOver(s.tested, outside); n > 0 {
		background = sumOver(s.failing, outside) / n
	}
	for i := range out {
		r := &out[i]
		switch m := members[i]; {
		case m != nil:
			n, lost := sumOver(s.tested, m), 0.0
			for k, in := range m {
				if in {
					lost += (float64(s.failing[k]) - background*float64(s.tested[k])) / float64(inside[k])
				}
			}
			r.Rate, r.Background, r.Cover = num(sumOver(s.failing, m)/n), num(background), num(n/tested)
			r.Loss = num(math.Max(0, lost) / tested)
		case structured(r.Kind) && r.Kind != "near-total":
			if own { // as the search has it
				continue
			}
			r.Rate, r.Background, r.Cover, r.Loss = reports.NaN, reports.NaN, reports.NaN, reports.NaN
		default:
			r.Rate, r.Cover, r.Loss = num(rate), 1, num(rate)
		}
		r.Strength = reports.NaN
		if rate > 0 {
			r.Strength = num(math.Min(1, float64(r.Loss)/rate))
		}
	}
}

// sumOver adds up counts over the positions of a set, all when nil.
func sumOver(counts []int32, set []bool) float64 {
	sum := 0
	for k, n := range counts {
		if set == nil || set[k] {
			sum += int(n)
		}
	}
	return float64(sum)
}

// clearlyMore is how many standard errors more fails a wafer must have inside an
// outline than outside of all to be named with it, and stillMore how many in the part
// where no other pattern lies.
const (
	clearlyMore = 3
	stillMore   = 1.5
)

// onWafers are the wafers of a stack that have a pattern: more fails inside than
// outside of all, beyond chance, and not by what other patterns do there.
func (w *lotwork) onWafers(p *places, s *stack, member []bool, inside []uint8, fails func(row int) bool) []string {
	var out []string
	for _, i := range s.wafers {
		wafer := w.lot.Wafers()[i]
		var n, o [3]float64 // outside, inside it alone, inside it and others
		for row := wafer.Lo; row < wafer.Hi; row++ {
			k := p.of[row]
			if k < 0 || inside[k] > 0 && !member[k] {
				continue
			}
			at := min(inside[k], 2)
			n[at]++
			if fails(row) {
				o[at]++
			}
		}
		if moreBy(o[1]+o[2], n[1]+n[2], o[0], n[0]) > clearlyMore && (n[1] == 0 || moreBy(o[1], n[1], o[0], n[0]) > stillMore) && o[1]+o[2] >= 2 {
			out = append(out, wafer.ID)
		}
	}
	return out
}

// moreBy is the difference of the rates o of n and p of m in standard errors; NaN
// where either has no dice.
func moreBy(o, n, p, m float64) float64 {
	pooled := (o + p) / (n + m)
	return (o/n - p/m) / math.Sqrt(pooled*(1-pooled)*(1/n+1/m))
}
