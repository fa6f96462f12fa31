package wafermap

import (
	"math"
	"slices"
)

// path is a straight or gently bowed band of cells. Along its main axis (columns, or
// lines when turned) it runs from cell from to cell to, exclusive; its middle crosses from y0
// to y1 and bows by sag in between; thick is its breadth across. Lengths are in cells.
type path struct {
	turned      bool
	from, to    int
	y0, y1, sag float64
	thick       float64
	left, right int // y0 holds at left, y1 at right
}

// at is the middle across at a place along.
func (p *path) at(x float64) float64 {
	t := 0.0
	if p.right > p.left {
		t = (x - float64(p.left)) / float64(p.right-p.left)
	}
	return p.y0 + (p.y1-p.y0)*t + 4*p.sag*t*(1-t)
}

// band is the raster as seen by lines that run along one axis: straight sums are
// across it.
type band struct {
	long, wide int
	sums       *running // sums across: row i of it is place i along
}

func (f *field) band(turned bool) band {
	if turned {
		return band{f.lines, f.cols, &f.along}
	}
	return band{f.cols, f.lines, &f.across}
}

// sweep tallies a path.
func (b band) sweep(p *path) tally {
	var count uint64
	e := 0.0
	for i := max(0, p.from); i < min(b.long, p.to); i++ {
		y := p.at(float64(i))
		lo := max(0, int(math.Floor(y-p.thick/2)+1)) // cells whose middle lies inside
		hi := min(b.wide, int(math.Floor(y+p.thick/2)+1))
		if lo < hi {
			dc, de := b.sums.span(i, lo, hi)
			count += dc
			e += de
		}
	}
	return unpack(count, e)
}

// lineCost is the logarithm of the number of paths of a thickness, about.
func (f *field) lineCost(thick float64) float64 {
	return math.Log(float64(f.cols) * float64(f.lines) / (thick * thick))
}

// findLine looks for straight and gently bowed lines of all slopes, offsets, ends and a
// few thicknesses, then fits the best few. Unless fresh, it fits those of the last time
// again.
func (f *field) findLine(fresh bool) *pattern {
	if fresh || f.starts == nil {
		f.starts = f.lineStarts()
	}
	const polished = 6
	best := shortlist{most: polished}
	starts := append(slices.Clone(f.starts), f.keptStarts...)
	bows := make([][]float64, len(starts))
	for i, it := range starts {
		x, v := f.bow(it)
		if bows[i] = x; v > 0 {
			best.offer(v, [6]float64{float64(i), x[0], x[1], x[2], x[3]}, func(a, b [6]float64) bool { return a == b })
		}
	}
	var top *pattern
	for _, it := range best.items {
		if p := f.fitLine(starts[int(it.x[0])], bows[int(it.x[0])], it.value); top == nil || p.gain-p.cost > top.gain-top.cost {
			top = p
		}
	}
	return top
}

// polish tries thin lines within a broader one: their two ends must fit at once, which
// steps along one coordinate do not find.
func polish(x []float64, top float64, value func([]float64) float64) float64 {
	thick := x[5]
	start := append([]float64(nil), x...)
	try := append([]float64(nil), x...)
	for _, t := range []float64{1, 1.7} {
		if t > thick {
			break
		}
		try[5] = t
		reach := math.Ceil(thick)
		for d0 := -reach; d0 <= reach; d0 += 0.5 {
			for d1 := -reach; d1 <= reach; d1 += 0.5 {
				try[2], try[3] = start[2]+d0, start[3]+d1
				if v := value(try); v > top {
					top = v
					copy(x, try)
				}
			}
		}
	}
	if x[5] == thick {
		return top
	}
	return climb(x, []float64{2, 2, 0.5, 0.5, 0.5, 0.5}, 3, value)
}

// lineFit is the fitting of one line: its ends, thickness and bow.
type lineFit struct {
	f      *field
	band   band
	turned bool
}

func (l lineFit) path(x []float64) path {
	p := path{turned: l.turned, from: int(math.Round(x[0])), to: int(math.Round(x[1])) + 1, y0: x[2], y1: x[3], sag: x[4], thick: x[5]}
	p.left, p.right = p.from, p.to-1
	return p
}

func (l lineFit) value(x []float64) float64 {
	p := l.path(x)
	length := math.Hypot(x[1]-x[0], x[3]-x[2]) + 1
	if p.from < 0 || p.to > l.band.long || p.to-p.from < shortestLine-1 || x[5] < 0.8 || x[5] > 8 ||
		length < 4*x[5] || math.Abs(x[4]) > 0.2*length || math.Abs(x[3]-x[2]) > 1.6*(x[1]-x[0]) {
		return -1
	}
	return l.f.gain(l.band.sweep(&p)) - l.f.lineCost(x[5])
}

// slide moves the ends of a line along itself, which steps in one coordinate cannot.
func (l lineFit) slide(x []float64, top float64) float64 {
	try := make([]float64, len(x))
	for step := math.Ceil((x[1] - x[0]) / 4); step >= 1; step = math.Floor(step / 2) {
		for moved := true; moved; {
			moved = false
			for _, d := range [4][2]float64{{-step, 0}, {0, step}, {step, 0}, {0, -step}} {
				p := l.path(x)
				copy(try, x)
				try[0], try[1] = math.Round(x[0]+d[0]), math.Round(x[1]+d[1])
				if try[1] <= try[0] {
					continue
				}
				try[2], try[3] = p.at(try[0]), p.at(try[1])
				try[4] *= sq((try[1] - try[0]) / (x[1] - x[0]))
				if v := l.value(try); v > top {
					top, moved = v, true
					copy(x, try)
				}
			}
		}
	}
	return top
}

// bow fits a line from a start.
func (f *field) bow(it spotlight) (x []float64, top float64) {
	l := lineFit{f, f.band(it.x[0] == 1), it.x[0] == 1}
	mid, across, slope, length, bow := it.x[1], it.x[2], it.x[3], it.x[4], it.x[5]
	x = []float64{max(0, mid-(length-1)/2), min(float64(l.band.long-1), mid+(length-1)/2), 0, 0, bow, 2}
	x[2], x[3] = across-slope*(mid-x[0])-bow, across+slope*(x[1]-mid)-bow
	step := []float64{max(1, length/5), max(1, length/5), max(1, length/16), max(1, length/16), max(0.5, length/16), 1}
	return x, l.slide(x, climb(x, step, 5, l.value))
}

// fitLine goes on from what bow made of a start.
func (f *field) fitLine(it spotlight, x []float64, top float64) *pattern {
	l := lineFit{f, f.band(it.x[0] == 1), it.x[0] == 1}
	l.slide(x, polish(x, top, l.value))
	p := &pattern{shape: shapeLine, line: l.path(x), start: it}
	p.tally = l.band.sweep(&p.line)
	p.gain, p.cost = f.gain(p.tally), f.lineCost(x[5])
	return p
}
