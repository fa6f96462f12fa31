package wafermap

import (
	"math"
	"sync"
)

// cells is a wafer's dice on a grid of cells: one cell a tested position where the map
// allows it, blocks of dice where there are too many, or where dice lie thinly.
type cells struct {
	most           int     // cells of the box, as asked for
	cols, lines    int     // columns and rows of cells
	du, dv         float64 // size of a cell in radii; dv is negative when die y grows downwards
	u0, v0         float64 // centre of cell (0, 0)
	stepX, stepY   int     // die coordinates a cell
	spaceX, spaceY int     // spacing of a sampled map
	x0, y0         int     // die coordinates of the first die of cell (0, 0)
	x1, y1         int     // and the last of all
	cell           []int32 // by die
	fullest        int32   // dice in the fullest cell
	n              []int32 // dice by cell

	once  sync.Once
	apart [offCentres][]uint8 // see ringsRound
}

// raster is a fail map on such cells.
type raster struct {
	*cells
	o      []int32   // fails by cell
	e      []float64 // expected fails by cell
	lowest float64   // chance of a die to fail
	along  running   // sums along rows of cells
	across running   // sums along columns of cells
}

// running holds sums up to each cell of a row. Row j begins at j*stride.
type running struct {
	stride int
	sums   []soFar
}

// soFar packs fails (high half) and dice (low half), and has the fails expected.
type soFar struct {
	count    uint64
	expected float64
}

func (s *running) span(j, from, to int) (count uint64, e float64) {
	a, b := &s.sums[j*s.stride+from], &s.sums[j*s.stride+to]
	return b.count - a.count, b.expected - a.expected
}

func unpack(count uint64, e float64) tally {
	return tally{float64(count >> 32), float64(count & (1<<32 - 1)), e}
}

const (
	cellsOfRaster  = 26000 // cells of the box at most: 20,000 dice a wafer fit one by one
	thinnestRaster = 0.35  // dice a cell, at least
)

func (p *places) newCells(most int) *cells {
	g, r := p.grid, &cells{most: most}
	if len(p.rows) == 0 {
		return r
	}
	box := extent{math.MaxInt32, math.MinInt32, math.MaxInt32, math.MinInt32}
	for _, k := range p.rows {
		x, y := int(g.x[k]), int(g.y[k])
		box.X0, box.X1 = min(box.X0, x), max(box.X1, x)
		box.Y0, box.Y1 = min(box.Y0, y), max(box.Y1, y)
	}
	r.x0, r.y0, r.x1, r.y1 = box.X0, box.Y0, box.X1, box.Y1
	r.spaceX, r.spaceY = p.spacing(box)
	r.stepX, r.stepY = r.spaceX, r.spaceY
	for {
		r.cols, r.lines = (box.X1-box.X0)/r.stepX+1, (box.Y1-box.Y0)/r.stepY+1
		area := float64(r.cols) * float64(r.lines)
		if area <= float64(most) && float64(len(p.rows)) >= thinnestRaster*math.Pi/4*area || r.cols*r.lines <= 16 {
			break
		}
		// the finer side first
		if float64(r.stepX)*p.geo.DieWidthMM < float64(r.stepY)*p.geo.DieHeightMM && r.cols > 2 || r.lines <= 2 {
			r.stepX += r.spaceX
		} else {
			r.stepY += r.spaceY
		}
	}
	r.du, r.dv = float64(r.stepX)*p.geo.DieWidthMM/p.radius, float64(r.stepY)*p.geo.DieHeightMM/p.radius
	mmX, mmY := p.geo.Position(int32(box.X0), int32(box.Y0))
	r.u0 = mmX/p.radius + r.du*(1-1/float64(r.stepX))/2
	r.v0 = mmY / p.radius
	if p.geo.YDown {
		r.dv = -r.dv
	}
	r.v0 += r.dv * (1 - 1/float64(r.stepY)) / 2
	r.cell, r.n = make([]int32, len(p.rows)), make([]int32, r.cols*r.lines)
	last, line := math.MinInt32, int32(0) // rows come by y: few divisions
	column := make([]int32, box.X1-box.X0+1)
	for x := range column {
		column[x] = int32(x / r.stepX)
	}
	for i, k := range p.rows {
		if y := int(g.y[k]); y != last {
			last, line = y, int32((y-r.y0)/r.stepY*r.cols)
		}
		c := line + column[int(g.x[k])-r.x0]
		r.cell[i] = c
		r.n[c]++
		r.fullest = max(r.fullest, r.n[c])
	}
	return r
}

func (f *field) layRaster() {
	r := &f.raster
	count := r.cols * r.lines
	r.o, r.e = make([]int32, count), make([]float64, count)
	for _, i := range f.failing {
		r.o[r.cell[i]]++
	}
	r.along = running{r.cols + 1, make([]soFar, (r.cols+1)*r.lines)}
	r.across = running{r.lines + 1, make([]soFar, (r.lines+1)*r.cols)}
	for j := range r.lines {
		for i := range r.cols {
			c := uint64(r.o[j*r.cols+i])<<32 | uint64(r.n[j*r.cols+i])
			at := j*r.along.stride + i
			r.along.sums[at+1].count = r.along.sums[at].count + c
			at = i*r.across.stride + j
			r.across.sums[at+1].count = r.across.sums[at].count + c
		}
	}
}

// spacing is the spacing of a sampled map along x and y: the common divisor of all
// distances between columns, as of rows; 1 where all are tested.
func (p *places) spacing(box extent) (x, y int) {
	g := p.grid
	for _, k := range p.rows {
		if x != 1 {
			x = divisor(x, int(g.x[k])-box.X0)
		}
		if y != 1 {
			y = divisor(y, int(g.y[k])-box.Y0)
		}
	}
	return max(1, x), max(1, y)
}

func divisor(a, b int) int {
	for b != 0 {
		a, b = b, a%b
	}
	return a
}

// sum refreshes the expected fails.
func (r *raster) sum(f *field) {
	clear(r.e)
	for i, p := range f.p {
		r.e[r.cell[i]] += p
	}
	for j := range r.lines {
		run := 0.0
		at := j*r.along.stride + 1
		sums := r.along.sums[at : at+r.cols]
		for i, e := range r.e[j*r.cols : (j+1)*r.cols] {
			run += e
			sums[i].expected = run
		}
	}
	const block = 8 // columns at once, which lie side by side in memory
	for first := 0; first < r.cols; first += block {
		n := min(block, r.cols-first)
		var run [block]float64
		for j := range r.lines {
			for k, e := range r.e[j*r.cols+first:][:n] {
				run[k] += e
				r.across.sums[(first+k)*r.across.stride+j+1].expected = run[k]
			}
		}
	}
}

// ellipse tallies the cells whose centre lies in an ellipse with centre (cu, cv), half axes
// a and b, a turned by angle.
func (r *raster) ellipse(cu, cv, a, b, angle float64) tally {
	s, c := math.Sincos(angle)
	aa, bb := 1/(a*a), 1/(b*b)
	xx, xy, yy := c*c*aa+s*s*bb, s*c*(aa-bb), s*s*aa+c*c*bb
	half := math.Sqrt(a*a*s*s + b*b*c*c)
	j0, j1 := (cv-half-r.v0)/r.dv, (cv+half-r.v0)/r.dv
	if j0 > j1 {
		j0, j1 = j1, j0
	}
	var count uint64
	e := 0.0
	for j := max(0, int(math.Ceil(j0))); j <= min(r.lines-1, int(math.Floor(j1))); j++ {
		dy := r.v0 + float64(j)*r.dv - cv
		root := xy*xy*dy*dy - xx*(yy*dy*dy-1)
		if root <= 0 {
			continue
		}
		root = math.Sqrt(root)
		from := int(math.Ceil((cu + (-xy*dy-root)/xx - r.u0) / r.du))
		to := int(math.Floor((cu+(-xy*dy+root)/xx-r.u0)/r.du)) + 1
		from, to = max(0, from), min(r.cols, to)
		if from < to {
			dc, de := r.along.span(j, from, to)
			count += dc
			e += de
		}
	}
	return unpack(count, e)
}
