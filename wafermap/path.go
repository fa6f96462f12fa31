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

const (
	shortestLine = 5  // cells
	lineExpect   = 16 // binary digits after the point of expected fails in packed sums
)

// lineCost is the logarithm of the number of paths of a thickness, about.
func (f *field) lineCost(thick float64) float64 {
	return math.Log(float64(f.cols) * float64(f.lines) / (thick * thick))
}

// lineSearch looks along paths of one thickness and curvature. It packs fails (16 bits), dice
// (16) and expected fails (32) of each cell into one word, so that one addition a cell sums
// all three along a path.
type lineSearch struct {
	f      *field
	turned bool
	block  int // cells of the raster by cell of the search
	thick  int // cells of the search
	long   int // cells along and across
	wide   int
	cells  []uint64
	prefix []uint64
	list   *shortlist
	spare  float64

	cost                float64
	slope, square, half float64 // of the paths being looked along
	lengths             []int
}

// nearLines tells whether two lines of a shortlist overlap much: x holds turned, middle
// along and across in cells, slope, length, and bow at the middle.
func nearLines(a, b [6]float64) bool {
	if a[0] != b[0] {
		return false
	}
	l := max(a[4], b[4])
	return math.Abs(a[1]-b[1]) < 0.35*l && math.Abs(a[2]+(b[1]-a[1])*a[3]-b[2]) < 2+0.06*l && math.Abs(a[3]-b[3]) < 0.25
}

// curvatures are those of the bowed lines that are looked for, in wafers' radii.
var curvatures = []float64{-1.6, -0.8, -0.35, 0.35, 0.8, 1.6}

const bowedCells = 3500 // cells of the raster that bowed lines are looked for on: blocks of cells where there are more

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
	for i, it := range starts {
		if x, v := f.bow(it); v > 0 {
			best.offer(v, [6]float64{float64(i), x[0], x[1], x[2], x[3]}, func(a, b [6]float64) bool { return a == b })
		}
	}
	var top *pattern
	for _, it := range best.items {
		if p := f.fitLine(starts[int(it.x[0])]); top == nil || p.gain-p.cost > top.gain-top.cost {
			top = p
		}
	}
	return top
}

// lineStarts are the places of lines worth fitting.
func (f *field) lineStarts() []spotlight {
	straight, bowed := shortlist{most: 16}, shortlist{most: 16}
	block := 1
	for f.cols*f.lines > bowedCells*block*block {
		block++
	}
	for _, turned := range []bool{false, true} {
		for _, thick := range []int{2, 4} {
			s := lineSearch{f: f, turned: turned, block: 1, thick: thick, list: &straight}
			s.pack()
			s.run(0)
		}
		for _, thick := range []int{1, 2} {
			s := lineSearch{f: f, turned: turned, block: block, thick: thick, list: &bowed}
			s.pack()
			for _, c := range curvatures {
				s.run(c)
			}
		}
	}
	return append(straight.items, bowed.items...)
}

// pack lays the cells out along the main axis, each the sum of thick cells across.
func (s *lineSearch) pack() {
	f := s.f
	b := f.band(s.turned)
	s.spare = 1 - f.mean
	s.long, s.wide = (b.long+s.block-1)/s.block, (b.wide+s.block-1)/s.block
	s.cells = make([]uint64, s.long*s.wide)
	for i := range b.long {
		for y := range s.wide {
			lo, hi := max(0, y-(s.thick-1)/2)*s.block, min(b.wide, (y+s.thick/2+1)*s.block)
			c, e := b.sums.span(i, lo, hi)
			o, n := c>>32, c&0xffffffff
			s.cells[y*s.long+i/s.block] += o<<48 | n<<32 | uint64(e*(1<<lineExpect)+0.5)
		}
	}
	s.prefix = make([]uint64, s.long+1)
}

// run looks along all paths of a curvature.
func (s *lineSearch) run(curvature float64) {
	if s.long < 3 {
		return
	}
	half := float64(s.long-1) / 2
	slopes := max(2, int(math.Ceil(half/(1.2*float64(s.thick))))) // the ends of neighbouring slopes lie 1.2 thicknesses apart
	square := curvature / (2 * half)
	shift := make([]int, s.long)
	ends := make([][2]int, 0, 4*s.long)
	s.cost = s.f.lineCost(float64(s.thick * s.block))
	for k := -slopes; k <= slopes; k++ {
		slope := float64(k) / float64(slopes)
		lowest, highest := 0, 0
		for i := range shift {
			x := float64(i) - half
			shift[i] = int(math.Round(slope*x + square*x*x))
			lowest, highest = min(lowest, shift[i]), max(highest, shift[i])
		}
		s.chooseLengths(k)
		s.slope, s.square, s.half = slope, square, half
		// Along the path the shift rises to both sides, or falls: the places where it is below
		// some value, or not below, are one stretch. Inside the raster, 0 <= y0+shift < wide.
		ends = stretches(ends[:0], shift, lowest, highest, curvature >= 0)
		stretch := func(v int) [2]int { return ends[min(max(v-lowest, 0), highest+1-lowest)] }
		for y0 := -highest; y0 < s.wide-lowest; y0++ {
			outer, inner := stretch(s.wide-y0), stretch(-y0)
			if curvature < 0 {
				outer, inner = inner, outer
			}
			if inner[0] >= inner[1] {
				s.look(y0, outer[0], outer[1], shift)
				continue
			}
			s.look(y0, outer[0], inner[0], shift)
			s.look(y0, inner[1], outer[1], shift)
		}
	}
}

// stretches lists, for values v from lowest to highest+1, the stretch from a to b (exclusive)
// where the shift is below v, or where it is at least v.
func stretches(ends [][2]int, shift []int, lowest, highest int, below bool) [][2]int {
	sign, first := 1, lowest
	if !below {
		sign, first = -1, -highest
	}
	tip := 0 // of the bow
	for i, d := range shift {
		if sign*d < sign*shift[tip] {
			tip = i
		}
	}
	a, b := tip, tip
	for v := range highest - lowest + 2 {
		for a > 0 && sign*shift[a-1] < first+v {
			a--
		}
		for b < len(shift) && sign*shift[b] < first+v {
			b++
		}
		ends = append(ends, [2]int{a, b})
	}
	if !below { // -shift < w is shift >= 1-w
		slices.Reverse(ends)
	}
	return ends
}

// chooseLengths picks the lengths of line that slope k is looked at for: those that
// a short line cannot tell from the next are looked at once.
func (s *lineSearch) chooseLengths(k int) {
	level := 0
	for level < 6 && k%(2<<level) == 0 {
		level++
	}
	s.lengths = s.lengths[:0]
	for _, l := range lineLengths {
		if l < 3*s.thick || l*s.block < shortestLine {
			continue
		}
		if l >= s.long {
			break
		}
		if fine := float64(s.long) / float64(l); fine < 2 || float64(int(1)<<level) >= fine/1.5 {
			s.lengths = append(s.lengths, l)
		}
	}
}

// look sums along a stretch of a path and tries the lines in it.
func (s *lineSearch) look(y0, a, b int, shift []int) {
	if (b-a)*s.block < shortestLine || b-a < 3*s.thick {
		return
	}
	s.walk(y0, a, b, shift)
	if s.prefix[b]>>48 >= 3 {
		s.segments(y0, a, b)
	}
}

func (s *lineSearch) walk(y0, a, b int, shift []int) {
	run := uint64(0)
	prefix := s.prefix[a : b+1]
	prefix[0] = 0
	at := y0*s.long + a
	for i, d := range shift[a:b] {
		run += s.cells[at+d*s.long+i]
		prefix[i+1] = run
	}
}

var lineLengths = []int{3, 5, 8, 13, 20, 32, 52, 83, 133, 213, 341}

func (s *lineSearch) segments(y0, a, b int) {
	need := s.need()
	for _, l := range s.lengths {
		if l >= b-a {
			break
		}
		step := max(1, l/3)
		lo, hi := s.prefix[a:b+1-l], s.prefix[a+l:b+1]
		for i := 0; i < len(lo) && i < len(hi); i += step {
			d := hi[i] - lo[i]
			o := d >> 48
			e := float64(d&0xffffffff) / (1 << lineExpect)
			if over := float64(o) - e; o < 3 || over <= 0 || over*over <= need*e {
				continue
			}
			need = s.try(d, y0, a+i, l)
		}
	}
	s.try(s.prefix[b], y0, a, b-a)
}

// need is what (o-e)^2/e must pass for a line to get on the list, about.
func (s *lineSearch) need() float64 { return 1.6 * (max(0, s.list.floor()) + s.cost) * s.spare }

func (s *lineSearch) try(d uint64, y0, i, l int) float64 {
	t := tally{float64(d >> 48), float64(d >> 32 & 0xffff), float64(d&0xffffffff) / (1 << lineExpect)}
	if v := s.f.gain(t) - s.cost; t.o >= 3 && v > max(0, s.list.floor()) {
		s.offer(v, y0, i, l, s.slope, s.square, s.half)
	}
	return s.need()
}

// offer puts a line on the list, in cells of the raster.
func (s *lineSearch) offer(v float64, y0, i, l int, slope, square, half float64) {
	turned := 0.0
	if s.turned {
		turned = 1
	}
	k := float64(s.block)
	x := float64(i) + float64(l-1)/2 - half
	mid := (x+half)*k + (k-1)/2
	across := (float64(y0)+slope*x+square*x*x)*k + (k-1)/2
	if s.thick%2 == 0 {
		across += k / 2
	}
	bow := -square * sq(float64(l)/2) * k
	s.list.offer(v, [6]float64{turned, mid, across, slope + 2*square*x, float64(l) * k, bow}, nearLines)
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

// bow fits a line from a start.
func (f *field) bow(it spotlight) (x []float64, top float64) {
	l := lineFit{f, f.band(it.x[0] == 1), it.x[0] == 1}
	mid, across, slope, length, bow := it.x[1], it.x[2], it.x[3], it.x[4], it.x[5]
	x = []float64{max(0, mid-(length-1)/2), min(float64(l.band.long-1), mid+(length-1)/2), 0, 0, bow, 2}
	x[2], x[3] = across-slope*(mid-x[0])-bow, across+slope*(x[1]-mid)-bow
	step := []float64{max(1, length/5), max(1, length/5), max(1, length/16), max(1, length/16), max(0.5, length/16), 1}
	return x, climb(x, step, 5, l.value)
}

func (f *field) fitLine(it spotlight) *pattern {
	l := lineFit{f, f.band(it.x[0] == 1), it.x[0] == 1}
	x, top := f.bow(it)
	polish(x, top, l.value)
	p := &pattern{shape: shapeLine, line: l.path(x), start: it}
	p.tally = l.band.sweep(&p.line)
	p.gain, p.cost = f.gain(p.tally), f.lineCost(x[5])
	return p
}
