package wafermap

import (
	"cmp"
	"math"
	"slices"
)

const (
	longestPeriod = 32 // spacings of dice
	fewestPeriods = 3  // repeats along each axis that a period needs
	mostCells     = 16 // places of a period that one pattern may hold
)

// folder sums what exceeds the model over dice that agree in place modulo two
// periods. Places count in spacings of the sampled map.
type folder struct {
	f              *field
	cols, lines    int
	col, line      []int32 // by die
	spaceX, spaceY int
	over           []float64 // by die: fail less its chance
	column         []float64 // by line and column modulo px
	cell           []float64 // by line modulo py and column modulo px
}

func (f *field) newFolder() *folder {
	g := f.in.Grid
	n := len(f.rows)
	d := &folder{f: f, col: make([]int32, n), line: make([]int32, n), over: make([]float64, n)}
	x1, y1 := f.x0, f.y0
	for _, r := range f.rows {
		x1, y1 = max(x1, int(g.x[r])), max(y1, int(g.y[r]))
	}
	d.spaceX, d.spaceY = f.spacing(extent{f.x0, x1, f.y0, y1})
	d.cols, d.lines = (x1-f.x0)/d.spaceX+1, (y1-f.y0)/d.spaceY+1
	for i, r := range f.rows {
		d.col[i], d.line[i] = int32((int(g.x[r])-f.x0)/d.spaceX), int32((int(g.y[r])-f.y0)/d.spaceY)
		d.over[i] = -f.p[i]
		if f.fail[i] {
			d.over[i]++
		}
	}
	d.column = make([]float64, d.lines*longestPeriod)
	d.cell = make([]float64, longestPeriod*longestPeriod)
	return d
}

// findRepeats looks for dice that fail in step with a period along both axes (shot) and
// along one (comb), of all periods and, for shots, the one given. Unless fresh, it
// tries the periods of the last time again.
func (f *field) findRepeats(fresh bool) (shot, comb *pattern) {
	d := f.newFolder()
	mx, my := min(longestPeriod, d.cols/fewestPeriods), min(longestPeriod, d.lines/fewestPeriods)
	if fresh || f.periods == nil {
		f.periods = d.foldAll(mx, my)
	}
	better := func(p, q *pattern) *pattern {
		if p == nil || q != nil && q.gain-q.cost >= p.gain-p.cost {
			return q
		}
		return p
	}
	if sx, sy := f.in.ShotColumns, f.in.ShotRows; sx > 1 && sy > 1 {
		px, py := sx/divisor(sx, d.spaceX), sy/divisor(sy, d.spaceY)
		if px*py > 1 && px < d.cols && py < d.lines {
			shot = better(d.settle(px, py, 0), shot)
		}
	}
	for _, it := range append(slices.Clone(f.periods), f.keptPeriods...) {
		if px, py := int(it.x[0]), int(it.x[1]); px > 1 && py > 1 {
			shot = better(d.settle(px, py, math.Log(float64((mx-1)*(my-1)))), shot)
		} else {
			comb = better(d.settle(px, py, math.Log(float64(mx+my-2))), comb)
		}
	}
	if shot != nil {
		shot.shape = shapeShot
	}
	if comb != nil {
		comb.shape = shapeComb
	}
	return shot, comb
}

// foldAll tries all pairs of periods and returns the best few.
func (d *folder) foldAll(mx, my int) []spotlight {
	both, one := shortlist{most: 6}, shortlist{most: 2}
	same := func(a, b [6]float64) bool { return a[0] == b[0] && a[1] == b[1] }
	for px := 1; px <= mx; px++ {
		d.foldColumns(px)
		for py := 1; py <= my; py++ {
			if px*py == 1 {
				continue
			}
			list := &both
			if px == 1 || py == 1 {
				list = &one
			}
			d.foldLines(px, py)
			list.offer(d.peak(px*py)-math.Log(float64(px*py)), [6]float64{float64(px), float64(py)}, same)
		}
	}
	return append(both.items, one.items...)
}

func (d *folder) foldColumns(px int) {
	clear(d.column[:d.lines*px])
	modulo := make([]int32, d.cols)
	for i := range modulo {
		modulo[i] = int32(i % px)
	}
	for i, col := range d.col {
		d.column[int(d.line[i])*px+int(modulo[col])] += d.over[i]
	}
}

func (d *folder) foldLines(px, py int) {
	cell := d.cell[:px*py]
	clear(cell)
	at := 0
	for j := range d.lines {
		into := cell[at : at+px]
		for i, v := range d.column[j*px : j*px+px] {
			into[i] += v
		}
		if at += px; at == px*py {
			at = 0
		}
	}
}

// peak is about the gain of the fullest cell.
func (d *folder) peak(cells int) float64 {
	top := 0.0
	for _, v := range d.cell[:cells] {
		top = max(top, v)
	}
	e := d.f.total.o / float64(cells)
	return (e+top)*math.Log1p(top/e) - top
}

// settle tallies the cells of a pair of periods and joins those that fail together.
func (d *folder) settle(px, py int, free float64) *pattern {
	f := d.f
	cells := make([]tally, px*py)
	column, line := make([]int32, d.cols), make([]int32, d.lines)
	for i := range column {
		column[i] = int32(i % px)
	}
	for i := range line {
		line[i] = int32(i % py * px)
	}
	for i, col := range d.col {
		t := &cells[line[d.line[i]]+column[col]]
		t.n++
		t.e += f.p[i]
		if f.fail[i] {
			t.o++
		}
	}
	order := make([]int, 0, len(cells))
	over := make([]float64, len(cells))
	for c, t := range cells {
		if t.o > t.e && t.n > 0 {
			order = append(order, c)
			over[c] = (t.o - t.e) / math.Sqrt(t.e)
		}
	}
	slices.SortStableFunc(order, func(a, b int) int { return cmp.Compare(over[b], over[a]) })
	var best *pattern
	var t tally
	choices := free
	for k, c := range order {
		if k == mostCells || 2*k >= len(cells) {
			break
		}
		t = t.plus(cells[c])
		choices += math.Log(float64(len(cells)-k) / float64(k+1))
		if t.o < 3 {
			continue
		}
		gain := f.gain(t)
		if best == nil || gain-choices > best.gain-best.cost {
			best = &pattern{start: spotlight{x: [6]float64{float64(px), float64(py)}}, periodX: px * d.spaceX, periodY: py * d.spaceY, cells: slices.Clone(order[:k+1]), tally: t, gain: gain, cost: choices}
		}
	}
	if best != nil {
		for i, c := range best.cells { // from spacings to dice
			best.cells[i] = c/px*d.spaceY*best.periodX + c%px*d.spaceX
		}
		slices.Sort(best.cells)
	}
	return best
}
