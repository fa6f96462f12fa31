package yield

import (
	"cmp"
	"math"
	"slices"
)

// waferGrid is the dice of a wafer on a grid: rows of cells, absent, good or bad.
type waferGrid struct {
	wide, high int
	present    []bool
	bad        []bool
}

// unknown marks a coordinate that the file does not have.
const unknown = math.MinInt32

// place puts the dice of a wafer on a grid. Empty columns and rows between
// dice are kept as one, which keeps what is next to what and no window reaches
// across; so strays far out do not make the grid large. again counts dice at a
// place that had one already: the last one counts. A wafer whose dice still lie too
// thinly gives no grid.
func placeDice(rows []int, x, y []int32, pass []bool) (g waferGrid, again int, ok bool) {
	col, wide := squeeze(rows, x)
	row, high := squeeze(rows, y)
	if wide*high > 64*len(rows)+1<<16 {
		return g, 0, false
	}
	g = waferGrid{wide, high, make([]bool, wide*high), make([]bool, wide*high)}
	for i, r := range rows {
		at := row[i]*wide + col[i]
		if g.present[at] {
			again++
		}
		g.present[at], g.bad[at] = true, !pass[r]
	}
	return g, again, true
}

// squeeze numbers the coordinates of rows from 0, each gap as one.
func squeeze(rows []int, x []int32) (place []int, n int) {
	place = make([]int, len(rows))
	if len(rows) == 0 {
		return place, 0
	}
	lo, hi := x[rows[0]], x[rows[0]]
	for _, r := range rows {
		lo, hi = min(lo, x[r]), max(hi, x[r])
	}
	if span := int64(hi) - int64(lo) + 1; span <= int64(4*len(rows)+1024) {
		number := make([]int, span) // 1 where a die has it, then its number
		for _, r := range rows {
			number[x[r]-lo] = 1
		}
		at, before := -1, true
		for i, seen := range number {
			if seen == 1 || before {
				at++ // the first empty one after a die is the gap
			}
			before = seen == 1
			number[i] = at
		}
		for i, r := range rows {
			place[i] = number[x[r]-lo]
		}
		return place, at + 1
	}
	sorted := make([]int32, len(rows))
	for i, r := range rows {
		sorted[i] = x[r]
	}
	slices.Sort(sorted)
	sorted = slices.Compact(sorted)
	number := make([]int, len(sorted))
	for i := 1; i < len(sorted); i++ {
		number[i] = number[i-1] + 1
		if int64(sorted[i])-int64(sorted[i-1]) > 1 {
			number[i]++
		}
	}
	for i, r := range rows {
		k, _ := slices.BinarySearch(sorted, x[r])
		place[i] = number[k]
	}
	return place, number[len(number)-1] + 1
}

// tableau is a summed-area table: sums over any rectangle from four corners.
type tableau[T cmp.Ordered] struct {
	wide int // of the table: one more than the grid's
	sum  []T
}

func newTableau[T int32 | float64](wide, high int, value func(i int) T) tableau[T] {
	t := tableau[T]{wide + 1, make([]T, (wide+1)*(high+1))}
	for r := range high {
		var line T
		for c := range wide {
			line += value(r*wide + c)
			t.sum[(r+1)*t.wide+c+1] = t.sum[r*t.wide+c+1] + line
		}
	}
	return t
}

// over is the sum of columns c to c+a and rows r to r+b, ends not included.
func over[T int32 | float64](t tableau[T], c, r, a, b int) T {
	return t.sum[(r+b)*t.wide+c+a] - t.sum[r*t.wide+c+a] - t.sum[(r+b)*t.wide+c] + t.sum[r*t.wide+c]
}

// layout is the windows of all sizes on wafers with dice at the same places.
type layout struct {
	of      waferGrid
	windows [10]int
	// weight of a window by its lower corner; 0 where a place has no die. A window
	// weighs the sum over its dice of one over the number of windows that the die is
	// in, so that every die counts once, at the rim as in the middle.
	weight [10][]float64
	all    [10]float64
}

func newLayout(g waferGrid) *layout {
	l := &layout{of: g}
	present := newTableau(g.wide, g.high, func(i int) int32 { return mark(g.present[i]) })
	for k, s := range windowSizes {
		l.weigh(k, s[0], s[1], present)
	}
	return l
}

// fits says whether a wafer has dice at the same places.
func (l *layout) fits(g waferGrid) bool {
	return l != nil && l.of.wide == g.wide && l.of.high == g.high && slices.Equal(l.of.present, g.present)
}

func (l *layout) weigh(k, a, b int, present tableau[int32]) {
	g := l.of
	if a > g.wide || b > g.high {
		return
	}
	full := int32(a * b)
	weight := make([]float64, g.wide*g.high)
	for r := 0; r+b <= g.high; r++ {
		for c := 0; c+a <= g.wide; c++ {
			if over(present, c, r, a, b) == full {
				weight[r*g.wide+c] = 1
				l.windows[k]++
			}
		}
	}
	corners := newTableau(g.wide, g.high, func(i int) int32 { return int32(weight[i]) })
	part := newTableau(g.wide, g.high, func(i int) float64 {
		if !g.present[i] {
			return 0
		}
		c, r := i%g.wide, i/g.wide
		c0, r0 := max(0, c-a+1), max(0, r-b+1)
		if n := over(corners, c0, r0, c-c0+1, r-r0+1); n > 0 {
			return 1 / float64(n)
		}
		return 0
	})
	for r := 0; r+b <= g.high; r++ {
		for c := 0; c+a <= g.wide; c++ {
			if i := r*g.wide + c; weight[i] > 0 {
				weight[i] = over(part, c, r, a, b)
				l.all[k] += weight[i]
			}
		}
	}
	l.weight[k] = weight
}

// good weighs the windows without a bad die.
func (l *layout) good(g waferGrid) (good [10]float64) {
	bad := newTableau(g.wide, g.high, func(i int) int32 { return mark(g.bad[i]) })
	for k, s := range windowSizes {
		if l.weight[k] == nil {
			continue
		}
		for r := 0; r+s[1] <= g.high; r++ {
			for c := 0; c+s[0] <= g.wide; c++ {
				if w := l.weight[k][r*g.wide+c]; w > 0 && over(bad, c, r, s[0], s[1]) == 0 {
					good[k] += w
				}
			}
		}
	}
	return good
}

func mark(b bool) int32 {
	if b {
		return 1
	}
	return 0
}
