package build

import (
	"math"

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
	rate, tested, positions := s.rate()
	if tested == 0 {
		return nil
	}
	often := s.often(rate)
	in := wafermap.SignatureInput{Geometry: w.geo}
	in.Grid, in.Fail, in.Site = w.gridOf(p, s, often, positions)
	if product := w.in.Product; product != nil {
		in.ShotColumns, in.ShotRows = product.Wafer.ShotColumns, product.Wafer.ShotRows
	}
	found := wafermap.Signatures(in)
	box := w.geo.Box(p.x, p.y)
	out := make([]reports.Signature, len(found))
	members := make([][]bool, len(found))
	for i := range found {
		out[i] = w.signature(&found[i], box)
		members[i] = w.members(p, &found[i], &out[i])
	}
	w.weighStack(p, s, rate, out, members)
	for i := range out {
		if members[i] != nil {
			out[i].Wafers = w.onWafers(p, s, members[i], fails)
		}
	}
	return out
}

// gridOf is the stacked map of the positions that were tested.
func (w *lotwork) gridOf(p *places, s *stack, often []bool, positions int) (*wafermap.Grid, []bool, []int32) {
	x, y, fail := make([]int32, 0, positions), make([]int32, 0, positions), make([]bool, 0, positions)
	var site []int32
	for k, n := range s.tested {
		if n == 0 {
			continue
		}
		x, y, fail = append(x, p.x[k]), append(y, p.y[k]), append(fail, often[k])
		if p.site != nil {
			site = append(site, p.site[k])
		}
	}
	return wafermap.NewGrid(x, y), fail, site
}

// members says which positions lie inside a pattern; nil where its outline does not
// say.
func (w *lotwork) members(p *places, s *wafermap.Signature, r *reports.Signature) []bool {
	inside, known := w.within(s, r)
	if s.Kind == "site" && len(s.Outline.Sites) > 0 && p.site != nil {
		of := map[int32]bool{}
		for _, n := range s.Outline.Sites {
			of[n] = true
		}
		out := make([]bool, len(p.x))
		for k, n := range p.site {
			out[k] = of[n]
		}
		return out
	}
	if !known {
		return nil
	}
	out := make([]bool, len(p.x))
	for k := range out {
		out[k] = inside(p.x[k], p.y[k])
	}
	return out
}

// weighStack gives the patterns of a stack their rates and losses in dice. The
// search knows positions that fail often only; what they cost is the fails inside an
// outline beyond the rate outside of all.
func (w *lotwork) weighStack(p *places, s *stack, rate float64, out []reports.Signature, members [][]bool) {
	tested := sumOver(s.tested, nil)
	outside := make([]bool, len(p.x))
	for k := range outside {
		outside[k] = true
		for _, m := range members {
			if m != nil && m[k] {
				outside[k] = false
			}
		}
	}
	background := rate
	if n := sumOver(s.tested, outside); n > 0 {
		background = sumOver(s.failing, outside) / n
	}
	for i := range out {
		r := &out[i]
		switch {
		case members[i] != nil:
			n := sumOver(s.tested, members[i])
			r.Rate, r.Background, r.Cover = num(sumOver(s.failing, members[i])/n), num(background), num(n/tested)
			r.Loss = num(math.Max(0, sumOver(s.failing, members[i])-n*background) / tested)
		case structured(r.Kind) && r.Kind != "near-total":
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
// outline than outside to be named with it.
const clearlyMore = 3

// onWafers are the wafers of a stack that have a pattern: more fails inside than
// outside, beyond chance.
func (w *lotwork) onWafers(p *places, s *stack, member []bool, fails func(row int) bool) []string {
	var out []string
	for _, i := range s.wafers {
		wafer := w.lot.Wafers()[i]
		var n, o [2]float64
		for row := wafer.Lo; row < wafer.Hi; row++ {
			k := p.of[row]
			if k < 0 {
				continue
			}
			in := 0
			if member[k] {
				in = 1
			}
			n[in]++
			if fails(row) {
				o[in]++
			}
		}
		if n[0] == 0 || n[1] == 0 {
			continue
		}
		pooled := (o[0] + o[1]) / (n[0] + n[1])
		sigma := math.Sqrt(pooled * (1 - pooled) * (1/n[0] + 1/n[1]))
		if o[1]/n[1]-o[0]/n[0] > clearlyMore*sigma && o[1] >= 2 {
			out = append(out, wafer.ID)
		}
	}
	return out
}
