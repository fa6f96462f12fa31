package wafermap

import (
	"math"
	"slices"
)

const (
	shortestLine = 5  // cells
	lineExpect   = 16 // binary digits after the point of expected fails in packed sums
)

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
	densest             float64 // expected fails of the fullest cell
	sharpFor            float64 // what sharp was made for
	sharp               [len(lineLengths)]uint64
	slope, square, half float64 // of the paths being looked along
	offset              []int   // of each place along such a path in cells
	lengths             []int   // as indices
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
			if thick == 4 && block > 1 {
				s.block, s.thick = 2, 2
			}
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
	f.crowded = max(straight.floor(), bowed.floor()) >= f.needed(shapeLine)
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
	for _, c := range s.cells {
		s.densest = max(s.densest, float64(c&0xffffffff)/(1<<lineExpect))
	}
}

// sharpBits are the binary digits after the point of sharp.
const sharpBits = 8

// sharpen finds, for each length, how many times as many fails as expected a segment needs:
// over > sqrt(need e) is at least e sqrt(need/most), with most that are expected in any.
func (s *lineSearch) sharpen(need float64) {
	if need == s.sharpFor {
		return
	}
	s.sharpFor = need
	for k, l := range lineLengths {
		times := 1 + math.Sqrt(need/(s.densest*float64(l)))
		s.sharp[k] = uint64(min(times, 1<<16) * (1 - 1e-9) * (1 << sharpBits))
	}
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
	s.offset = make([]int, s.long)
	ends := make([][2]int, 0, 4*s.long)
	s.cost = s.f.lineCost(float64(s.thick * s.block))
	for k := -slopes; k <= slopes; k++ {
		slope := float64(k) / float64(slopes)
		lowest, highest := 0, 0
		for i := range shift {
			x := float64(i) - half
			shift[i] = int(math.Round(slope*x + square*x*x))
			lowest, highest = min(lowest, shift[i]), max(highest, shift[i])
			s.offset[i] = shift[i]*s.long + i
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
				s.look(y0, outer[0], outer[1])
				continue
			}
			s.look(y0, outer[0], inner[0])
			s.look(y0, inner[1], outer[1])
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
	for which, l := range lineLengths {
		if l < 3*s.thick || l*s.block < shortestLine {
			continue
		}
		if l >= s.long {
			break
		}
		if fine := float64(s.long) / float64(l); fine < 2 || float64(int(1)<<level) >= fine/1.5 {
			s.lengths = append(s.lengths, which)
		}
	}
}

// look sums along a stretch of a path and tries the lines in it.
func (s *lineSearch) look(y0, a, b int) {
	if (b-a)*s.block < shortestLine || b-a < 3*s.thick {
		return
	}
	s.walk(y0, a, b)
	if s.prefix[b]>>48 >= 3 {
		s.segments(y0, a, b)
	}
}

func (s *lineSearch) walk(y0, a, b int) {
	run := uint64(0)
	prefix := s.prefix[a : b+1]
	prefix[0] = 0
	prefix = prefix[1:]
	at, cells := y0*s.long, s.cells
	for i, o := range s.offset[a:b] {
		run += cells[at+o]
		prefix[i] = run
	}
}

var lineLengths = [...]int{3, 5, 8, 13, 20, 32, 52, 83, 133, 213, 341}

func (s *lineSearch) segments(y0, a, b int) {
	need := s.need()
	s.sharpen(need)
	for _, which := range s.lengths {
		l, times := lineLengths[which], s.sharp[which]
		if l >= b-a {
			break
		}
		step := max(1, l/3)
		lo, hi := s.prefix[a:b+1-l], s.prefix[a+l:b+1]
		for i := 0; i < len(lo) && i < len(hi); i += step {
			d := hi[i] - lo[i]
			o := d >> 48
			if o<<(lineExpect+sharpBits) <= d&0xffffffff*times {
				continue
			}
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
	if s.f.hopeless(t, max(0, s.list.floor())+s.cost) {
		return s.need()
	}
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
