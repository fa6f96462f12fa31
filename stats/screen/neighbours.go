package screen

import (
	"math"

	"kneepoint/stats"
)

// places finds dice by their coordinates on one wafer.
type places struct {
	x, y   []int32
	x0, y0 int32
	w, h   int
	first  []int32            // of each place on a dense grid, -1 for none
	sparse map[[2]int32]int32 // where the grid would be too large
	next   []int32            // die at the same place
}

func newPlaces(x, y []int32) *places {
	p := &places{x: x, y: y, next: make([]int32, len(x))}
	if len(x) == 0 {
		return p
	}
	x1, y1 := x[0], y[0]
	p.x0, p.y0 = x1, y1
	for i := range x {
		p.x0, x1 = min(p.x0, x[i]), max(x1, x[i])
		p.y0, y1 = min(p.y0, y[i]), max(y1, y[i])
	}
	w, h := int64(x1)-int64(p.x0)+1, int64(y1)-int64(p.y0)+1
	if w < 1<<30 && h < 1<<30 && w*h <= int64(16*len(x)+1<<16) {
		p.w, p.h = int(w), int(h)
		p.first = make([]int32, p.w*p.h)
		for i := range p.first {
			p.first[i] = -1
		}
	} else {
		p.sparse = map[[2]int32]int32{}
	}
	for i := len(x) - 1; i >= 0; i-- { // so that chains run upwards
		p.next[i] = p.at(x[i], y[i])
		if p.sparse != nil {
			p.sparse[[2]int32{x[i], y[i]}] = int32(i)
		} else {
			p.first[int(y[i]-p.y0)*p.w+int(x[i]-p.x0)] = int32(i)
		}
	}
	return p
}

// at returns the first die at a place, -1 for none.
func (p *places) at(x, y int32) int32 {
	if p.sparse != nil {
		if i, ok := p.sparse[[2]int32{x, y}]; ok {
			return i
		}
		return -1
	}
	i, j := int64(x)-int64(p.x0), int64(y)-int64(p.y0)
	if i < 0 || j < 0 || i >= int64(p.w) || j >= int64(p.h) {
		return -1
	}
	return p.first[int(j)*p.w+int(i)]
}

// around calls f with every other die within so many columns and rows of die i.
func (p *places) around(i, radius int, f func(j int32)) {
	r := int64(radius)
	if cx, cy := int(p.x[i]-p.x0), int(p.y[i]-p.y0); p.sparse == nil && cx >= radius && cx+radius < p.w && cy >= radius && cy+radius < p.h {
		for row := cy - radius; row <= cy+radius; row++ { // all of the square is on the grid
			for _, j := range p.first[row*p.w+cx-radius : row*p.w+cx+radius+1] {
				for ; j >= 0; j = p.next[j] {
					if int(j) != i {
						f(j)
					}
				}
			}
		}
		return
	}
	for dy := -r; dy <= r; dy++ {
		for dx := -r; dx <= r; dx++ {
			x, y := int64(p.x[i])+dx, int64(p.y[i])+dy
			if x < math.MinInt32 || x > math.MaxInt32 || y < math.MinInt32 || y > math.MaxInt32 {
				continue
			}
			for j := p.at(int32(x), int32(y)); j >= 0; j = p.next[j] {
				if int(j) != i {
					f(j)
				}
			}
		}
	}
}

// Residuals are the readings of a wafer less the level around each.
type Residuals struct {
	// Residual is in the readings' unit, NaN where there is none: no reading, or too
	// few neighbours with one.
	Residual []float64
	// Sigma is the robust spread of the residuals, 1.4826 MAD.
	Sigma float64
	// Flag is set beyond K sigmas.
	Flag []bool
	N    int // residuals
	Why  string
}

// NeighbourOptions say which dice are neighbours. Start from [Nearby].
type NeighbourOptions struct {
	Radius  int     // columns and rows to each side
	Minimum int     // neighbours with a reading below which there is no residual
	K       float64 // sigmas beyond which a die is flagged
}

// Nearby is the 24 dice of a square of five, eight of them at least with a
// reading, and six sigmas.
func Nearby() NeighbourOptions { return NeighbourOptions{Radius: 2, Minimum: 8, K: 6} }

// NeighbourResidual compares each die of one wafer with the median of the dice
// around it, so that a wafer's own pattern, which moves limits of the lot apart,
// is taken out first. x and y are die coordinates, v readings, censor marks as in
// stats/dist or nil.
//
// A marked reading counts as beyond every exact one in its neighbours' medians; a
// median among such readings is no level. A die whose own reading is marked is
// flagged only when that much is certain. With equal residuals in half of the
// dice there is no spread, no die is flagged, and Why says so. It panics on a
// Radius or Minimum below 1 and a K that is not positive. Common practice of the
// trade (nearest-neighbour residual), no source.
func NeighbourResidual(x, y []int32, v []float64, censor []int8, o NeighbourOptions) Residuals {
	if len(y) != len(x) || len(v) != len(x) || censor != nil && len(censor) != len(x) {
		panic("stats/screen: slice length mismatch")
	}
	if o.Radius < 1 || o.Minimum < 1 || !(o.K > 0) {
		panic("stats/screen: options that name no neighbours")
	}
	r := Residuals{Residual: make([]float64, len(x)), Flag: make([]bool, len(x))}
	p := newPlaces(x, y)
	mark := func(i int) int8 {
		if censor == nil {
			return 0
		}
		return censor[i]
	}
	near := make([]float64, 0, (2*o.Radius+1)*(2*o.Radius+1))
	usual := math.NaN() // level of the die before, which mostly is the neighbour
	for i := range x {
		r.Residual[i] = math.NaN()
		if v[i] != v[i] {
			continue
		}
		near = near[:0]
		p.around(i, o.Radius, func(j int32) {
			if u := v[j]; u == u {
				if c := mark(int(j)); c != 0 {
					u = math.Inf(int(c))
				}
				near = append(near, u)
			}
		})
		if len(near) < o.Minimum {
			continue
		}
		level := medianAbout(usual, near)
		usual = level
		if !math.IsInf(level, 0) && level == level && !math.IsInf(v[i], 0) {
			r.Residual[i] = v[i] - level
			r.N++
		}
	}
	r.Sigma = stats.MADSigma(r.Residual)
	switch {
	case r.N == 0:
		r.Why = "no die with enough neighbours"
	case !(r.Sigma > 0):
		r.Why = "half of the residuals are equal: no spread to measure by"
	}
	if r.Why != "" {
		return r
	}
	for i, d := range r.Residual {
		c := mark(i)
		r.Flag[i] = c >= 0 && d > o.K*r.Sigma || c <= 0 && d < -o.K*r.Sigma
	}
	return r
}

// medianAbout is the median of a few values, which it reorders; guess is where it may lie.
// From the guess a good one is a few steps away.
func medianAbout(guess float64, v []float64) float64 {
	const mostSteps = 6
	low := 0 // values below the guess go first
	for i, u := range v {
		v[i] = v[low]
		v[low] = u
		if u < guess {
			low++
		}
	}
	below, above := v[:low], v[low:]
	upper := len(v) / 2 // rank of the upper of the two in the middle
	lower := upper
	if len(v)%2 == 0 {
		lower--
	}
	if low-lower > mostSteps || upper-low >= mostSteps {
		return medianOf(v)
	}
	for k := 1; k <= low-lower; k++ { // the largest of those below come last, in order
		last := low - k
		for i := range last {
			if below[i] > below[last] {
				below[i], below[last] = below[last], below[i]
			}
		}
	}
	for k := 0; k <= upper-low; k++ { // and the smallest of those above first
		for i := k + 1; i < len(above); i++ {
			if above[i] < above[k] {
				above[i], above[k] = above[k], above[i]
			}
		}
	}
	return middle(v[lower], v[upper])
}

// medianOf is the median of a few values, which it sorts.
func medianOf(v []float64) float64 {
	for i := 1; i < len(v); i++ {
		u, j := v[i], i
		for ; j > 0 && v[j-1] > u; j-- {
			v[j] = v[j-1]
		}
		v[j] = u
	}
	n := len(v)
	return middle(v[(n-1)/2], v[n/2])
}

func middle(a, b float64) float64 {
	if a == b {
		return b
	}
	return a/2 + b/2
}

// Neighbourhood is the outcome of [BadNeighbourhood].
type Neighbourhood struct {
	// Failing and Neighbours count, for each die, the failing ones and all within
	// the radius.
	Failing, Neighbours []int32
	// Flag is set for good dice of which at least the share of neighbours fails.
	Flag []bool
}

// BadNeighbourhood flags good dice of one wafer among failing ones: passing dice
// of whose neighbours within radius columns and rows at least the share fails, of
// at least minimum neighbours. Half of the eight nearest, radius 1 and share 0.5,
// is usual (common practice, no source). At the wafer's edge the share is of the
// neighbours that there are. It panics on a radius or minimum below 1 and a share
// outside (0, 1].
func BadNeighbourhood(x, y []int32, fail []bool, radius, minimum int, share float64) Neighbourhood {
	if len(y) != len(x) || len(fail) != len(x) {
		panic("stats/screen: slice length mismatch")
	}
	if radius < 1 || minimum < 1 || !(share > 0 && share <= 1) {
		panic("stats/screen: options that name no neighbours")
	}
	n := Neighbourhood{Failing: make([]int32, len(x)), Neighbours: make([]int32, len(x)), Flag: make([]bool, len(x))}
	p := newPlaces(x, y)
	for i := range x {
		p.around(i, radius, func(j int32) {
			n.Neighbours[i]++
			if fail[j] {
				n.Failing[i]++
			}
		})
		n.Flag[i] = !fail[i] && int(n.Neighbours[i]) >= minimum && float64(n.Failing[i]) >= share*float64(n.Neighbours[i])
	}
	return n
}
