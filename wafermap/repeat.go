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

// slots is a wafer's dice by column and line, in spacings of the sampled map.
type slots struct {
	cols, lines    int
	spaceX, spaceY int
	at             []int32   // by die
	n              []float64 // dice by line and column
}

// lattice is a fail map on them.
type lattice struct {
	*slots
	o, e   []float64
	folded map[[2]int][]tally // fails and dice that agree modulo two periods
}

// mostPlaces is the number of columns times lines beyond which repeats are not looked
// for: no wafer has as many.
const mostPlaces = 1 << 22

func (p *places) newSlots(c *cells) *slots {
	g, l := p.grid, &slots{spaceX: c.spaceX, spaceY: c.spaceY}
	l.cols, l.lines = (c.x1-c.x0)/l.spaceX+1, (c.y1-c.y0)/l.spaceY+1
	if l.cols > mostPlaces/l.lines {
		l.cols, l.lines = 0, 0
		return l
	}
	l.at, l.n = make([]int32, len(p.rows)), make([]float64, l.cols*l.lines)
	for i, r := range p.rows {
		k := (int(g.y[r])-c.y0)/l.spaceY*l.cols + (int(g.x[r])-c.x0)/l.spaceX
		l.at[i] = int32(k)
		l.n[k]++
	}
	return l
}

func (f *field) newLattice() *lattice {
	l := &lattice{slots: f.slotsFor(f.cells), folded: map[[2]int][]tally{}}
	if l.cols > 0 {
		l.o, l.e = make([]float64, len(l.n)), make([]float64, len(l.n))
		for _, i := range f.failing {
			l.o[l.at[i]]++
		}
	}
	return l
}

// folder sums over places that agree modulo two periods.
type folder struct {
	f *field
	*lattice
}

func (f *field) newFolder() folder {
	if f.lattice == nil {
		f.lattice = f.newLattice()
	}
	l := f.lattice
	if l.cols > 0 {
		clear(l.e)
		for i, c := range l.at {
			l.e[c] += f.p[i]
		}
	}
	return folder{f, l}
}

// fold adds up, in each row of a table width wide, what agrees modulo period.
func fold(into, table []float64, width, period int) {
	clear(into)
	for ; len(table) >= width; table, into = table[width:], into[period:] {
		sum, row := into[:period], table[:width]
		for ; len(row) >= period; row = row[period:] {
			addTo(sum, row[:period])
		}
		addTo(sum[:len(row)], row)
	}
}

// addTo adds row to sum, place by place.
func addTo(sum, row []float64) {
	for len(sum) >= 4 && len(row) >= 4 { // written out: it is most of the work
		sum[0] += row[0]
		sum[1] += row[1]
		sum[2] += row[2]
		sum[3] += row[3]
		sum, row = sum[4:], row[4:]
	}
	for i, v := range row {
		sum[i] += v
	}
}

// findRepeats looks for dice that fail in step with a period along both axes (shot) and
// along one (comb), of all periods and, for shots, the one given. Unless fresh, it
// tries the periods of the last time again.
func (f *field) findRepeats(fresh bool) (shot, comb *pattern) {
	d := f.newFolder()
	if d.cols == 0 {
		return nil, nil
	}
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
func (d folder) foldAll(mx, my int) []spotlight {
	both, one := shortlist{most: 6}, shortlist{most: 2}
	same := func(a, b [6]float64) bool { return a[0] == b[0] && a[1] == b[1] }
	over := make([]float64, len(d.o))
	for c := range over {
		over[c] = d.o[c] - d.e[c]
	}
	// what agrees modulo 8 is added up from what agrees modulo 16
	var columns, cells [longestPeriod + 1][]float64
	for px := mx; px > 0; px-- {
		from, width := over, d.cols
		if 2*px <= mx {
			from, width = columns[2*px], 2*px
		}
		columns[px] = make([]float64, d.lines*px)
		fold(columns[px], from, width, px)
		for py := my; py > 0; py-- {
			from, lines := columns[px], d.lines
			if 2*py <= my {
				from, lines = cells[2*py], 2*py
			}
			if cap(cells[py]) == 0 {
				cells[py] = make([]float64, py*mx)
			}
			cells[py] = cells[py][:px*py]
			fold(cells[py], from, lines*px, py*px)
			if px*py == 1 {
				continue
			}
			list := &both
			if px == 1 || py == 1 {
				list = &one
			}
			list.offer(d.peak(cells[py])-math.Log(float64(px*py)), [6]float64{float64(px), float64(py)}, same)
		}
	}
	return append(both.items, one.items...)
}

// peak is about the gain of the fullest cell.
func (d folder) peak(cells []float64) float64 {
	top := 0.0
	for _, v := range cells {
		if v > top {
			top = v
		}
	}
	e := d.f.total.o / float64(len(cells))
	return (e+top)*math.Log1p(top/e) - top
}

// counts tallies the fails and dice that agree modulo two periods.
func (d folder) counts(px, py int) []tally {
	key := [2]int{px, py}
	if t, ok := d.folded[key]; ok {
		return t
	}
	cells := make([]tally, px*py)
	for line := range d.lines {
		into := cells[line%py*px:][:px]
		c := 0
		for i, n := range d.n[line*d.cols : (line+1)*d.cols] {
			into[c].n += n
			into[c].o += d.o[line*d.cols+i]
			if c++; c == px {
				c = 0
			}
		}
	}
	d.folded[key] = cells
	return cells
}

// settle tallies the cells of a pair of periods and joins those that fail together.
func (d folder) settle(px, py int, free float64) *pattern {
	f := d.f
	cells := slices.Clone(d.counts(px, py))
	column, cell := make([]float64, d.lines*px), make([]float64, px*py)
	fold(column, d.e, d.cols, px)
	fold(cell, column, d.lines*px, py*px)
	for c, e := range cell {
		cells[c].e = e
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
