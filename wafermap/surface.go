package wafermap

import "math"

// Estimate is a value with its 95 % interval; all NaN when not computed.
type Estimate struct{ Value, Lower, Upper float64 }

var noEstimate = Estimate{nan, nan, nan}

// Surface is the smooth shape of a value over the wafer.
type Surface struct {
	N        int     // dice with a value and a place
	Outliers int     // of these, dice so far off the surface that they have no say in it
	Radius   float64 // of the tested disc, in the geometry's unit: rho is the distance from the centre in it

	// Zernike terms 1 to Terms, whole radial orders up to Order. Coefficients are those
	// of the terms themselves (Noll's normalisation); Orthogonal those of the terms
	// orthogonalised one after the other on the dice present, so that their squares add up to
	// the mean square of the surface and none changes when terms are added.
	Terms, Order int
	Coefficients []float64
	Orthogonal   []float64
	// CV is the root mean square error on dice left out, for orders 0, 1, 2 ...
	CV []float64

	Noise float64 // robust standard deviation about the surface

	// Bowl is the edge's value less the centre's by the parabola; Tilt the rise from edge to
	// edge in the direction of steepest rise, TiltDirection (degrees counter-clockwise from
	// +x, y up); RollOff what the very edge has beyond parabola and tilt, by a term that
	// grows as the square from rho = 0.8 on. They are fitted together with the astigmatic
	// terms (5, 6) and do not depend on Order. Intervals allow for neighbouring dice being
	// alike.
	Bowl, Tilt, TiltDirection, RollOff Estimate

	// Variance of the value over the dice without outliers, split into that of the
	// smooth surface, of the test sites about it (NaN when no sites are given), and of the
	// dice about both. Shares add up to 1.
	Variance                         float64
	SmoothShare, SiteShare, DieShare float64
	Residual                         []float64 // value less surface, by row; NaN where missing
	Why                              string
	coefficients                     [monomials]float64
	geometry                         Geometry
}

// At is the surface at a place in lengths from the wafer's centre, as Geometry.Position
// gives it.
func (s Surface) At(mmX, mmY float64) float64 {
	if s.Why != "" {
		return nan
	}
	return polynomial(&s.coefficients, mmX/s.Radius, mmY/s.Radius)
}

const (
	surfaceOrder = 6  // highest radial order
	monomials    = 28 // of two variables up to that order, as many as Zernike terms
)

// polynomial is the value of sum c[k] u^i v^j with the monomials by i+j, then j.
func polynomial(c *[monomials]float64, u, v float64) float64 {
	sum := 0.0
	for j := surfaceOrder; j >= 0; j-- {
		p, at := 0.0, surfaceOrder*(surfaceOrder+1)/2+j // of u^(surfaceOrder-j) v^j
		for order := surfaceOrder; order >= j; order-- {
			p = p*u + c[at]
			at -= order
		}
		sum = sum*v + p
	}
	return sum
}

// alongRow are the coefficients of the powers of u at one v.
func alongRow(c *[monomials]float64, v float64) (p [surfaceOrder + 1]float64) {
	for i := range p { // of u^i: c of order i+j, place j, times v^j
		for j := surfaceOrder - i; j >= 0; j-- {
			p[i] = p[i]*v + c[(i+j)*(i+j+1)/2+j]
		}
	}
	return p
}

// powers fills in the monomials u^i v^j.
func powers(m *[monomials]float64, u, v float64) {
	m[0] = 1
	at := 0
	for order := 1; order <= surfaceOrder; order++ {
		next := at + order
		for k := range order {
			m[next+k] = m[at+k] * u
		}
		m[next+order] = m[at+order-1] * v
		at = next
	}
}

// powerRun gathers the monomials of dice next to each other in a row, which have v in common.
type powerRun struct {
	v, n float64
	u    [surfaceOrder + 1]float64 // sums of powers
}

func (r *powerRun) add(u float64) {
	r.n++
	ui := u
	for i := 1; i <= surfaceOrder; i++ {
		r.u[i] += ui
		ui *= u
	}
}

// flush adds the monomials u^i v^j to sums and empties the run.
func (r *powerRun) flush(sum *[monomials]float64) {
	r.u[0] = r.n
	vj := 1.0
	for j := range surfaceOrder + 1 {
		at := j*(j+1)/2 + j // of u^0 v^j; u^i v^j is in order i+j
		for i := 0; i <= surfaceOrder-j; i++ {
			sum[at] += r.u[i] * vj
			at += i + j + 1
		}
		vj *= r.v
	}
	*r = powerRun{}
}

// zernikePowers holds each term's coefficients of the monomials.
var zernikePowers = func() (z [monomials][monomials]float64) {
	place := func(i, j int) int { return (i+j)*(i+j+1)/2 + j }
	for t := range z {
		n, m := Noll(t + 1)
		order := max(m, -m)
		norm := math.Sqrt(float64(n + 1))
		if m != 0 {
			norm *= math.Sqrt2
		}
		for k := 0; k <= (n-order)/2; k++ {
			// (-1)^k (n-k)! / (k! ((n+m)/2-k)! ((n-m)/2-k)!) rho^(n-2k), as rho^(2q) times the
			// real or imaginary part of (u + iv)^m
			c := norm * factorial(n-k) / (factorial(k) * factorial((n+order)/2-k) * factorial((n-order)/2-k))
			if k%2 == 1 {
				c = -c
			}
			q := (n-order)/2 - k
			for a := 0; a <= q; a++ { // (u^2 + v^2)^q
				for b := 0; b <= order; b++ { // (u + iv)^m
					if (b%2 == 1) != (m < 0) {
						continue
					}
					sign := 1.0
					if b/2%2 == 1 {
						sign = -1
					}
					z[t][place(2*(q-a)+order-b, 2*a+b)] += sign * c * choose(q, a) * choose(order, b)
				}
			}
		}
	}
	return z
}()

func factorial(n int) float64 {
	f := 1.0
	for i := 2; i <= n; i++ {
		f *= float64(i)
	}
	return f
}

func choose(n, k int) float64 { return math.Round(factorial(n) / factorial(k) / factorial(n-k)) }

// SurfaceBasis is what fits of surfaces to different values of the same dice share. It may
// be used by several goroutines at once.
type SurfaceBasis struct {
	geometry Geometry
	radius   float64
	rows     []int32   // with a place on the disc
	u, v     []float64 // by place in rows
	cell     []int32   // by place in rows: dice near each other, fitted as one
	fold     []uint8   // for cross-validation
	cells    []surfaceCell
	slots    int // rows of the input
	why      string
}

// surfaceCell is a group of neighbouring dice.
type surfaceCell struct {
	u, v   float64            // their mean place
	z      [monomials]float64 // their mean Zernike terms
	zu, zv [monomials]float64 // slopes there
	edge   float64            // their mean edge term
	block  int32              // of cells, within which dice may be alike
}

const (
	cellsAcross   = 48   // cells of dice across the disc, where there are many
	diceAsCells   = 2500 // dice up to which each is a cell
	blocksAcross  = 8    // at most, and six dice wide at least
	rollOffFrom   = 0.8
	fewestSurface = 12 // dice
)

func edgeTerm(rho float64) float64 {
	if rho <= rollOffFrom {
		return 0
	}
	return sq((rho - rollOffFrom) / (1 - rollOffFrom))
}

// NewSurfaceBasis prepares fits to values of one wafer's dice (or of any dice with
// these coordinates, repeats welcome). It takes a few milliseconds for 88,000 dice;
// wafers with the same coordinates in the same order can share it.
func NewSurfaceBasis(g Geometry, x, y []int32) *SurfaceBasis {
	if len(x) != len(y) {
		panic("wafermap: x and y differ in length")
	}
	b := &SurfaceBasis{geometry: g, slots: len(x), radius: g.testedRadius()}
	if !(b.radius > 0) {
		b.why = "the wafer is not known: " + g.Why
		return b
	}
	b.rows, b.u, b.v = make([]int32, 0, len(x)), make([]float64, 0, len(x)), make([]float64, 0, len(x))
	for i := range x {
		mmX, mmY := g.Position(x[i], y[i])
		u, v := mmX/b.radius, mmY/b.radius
		if u*u+v*v <= farthest*farthest {
			b.rows, b.u, b.v = append(b.rows, int32(i)), append(b.u, u), append(b.v, v)
		}
	}
	b.group()
	b.fold = make([]uint8, len(b.rows))
	for i, r := range b.rows { // by the die's place alone
		h := key(int(x[r]), int(y[r])) * 0x9e3779b97f4a7c15
		h ^= h >> 29
		h *= 0xbf58476d1ce4e5b9
		b.fold[i] = uint8(h >> 33 % surfaceFolds)
	}
	return b
}

// testedRadius is how far from the centre dice centres lie, about.
func (g Geometry) testedRadius() float64 {
	if r := g.OutlineRadius - math.Hypot(g.DieWidthMM, g.DieHeightMM)/2; r > 0 {
		return r
	}
	return g.Radius()
}

// group puts dice into cells.
func (b *SurfaceBasis) group() {
	b.cell = make([]int32, len(b.rows))
	var index [(cellsAcross + 1) * (cellsAcross + 1)]int32 // cells by place, counted from 1
	var count []float64
	var run powerRun
	last := int32(-1) // cell of the run
	for i := range b.rows {
		k := int32(i)
		if len(b.rows) > diceAsCells {
			at := func(x float64) int { return int((x + farthest) / (2 * farthest) * cellsAcross) }
			place := &index[at(b.v[i])*(cellsAcross+1)+at(b.u[i])]
			if *place == 0 {
				*place = int32(len(b.cells)) + 1
			}
			k = *place - 1
		}
		if int(k) == len(b.cells) {
			b.cells, count = append(b.cells, surfaceCell{}), append(count, 0)
		}
		b.cell[i] = k
		c := &b.cells[k]
		if k != last || b.v[i] != run.v {
			if last >= 0 {
				run.flush(&b.cells[last].z)
			}
			run.v, last = b.v[i], k
		}
		run.add(b.u[i])
		c.u += b.u[i]
		c.v += b.v[i]
		c.edge += edgeTerm(math.Sqrt(b.u[i]*b.u[i] + b.v[i]*b.v[i]))
		count[k]++
	}
	if last >= 0 {
		run.flush(&b.cells[last].z)
	}
	blocks := int32(min(max(math.Sqrt(4/math.Pi*float64(len(b.rows)))/6, 4), blocksAcross))
	for k := range b.cells {
		c := &b.cells[k]
		c.u /= count[k]
		c.v /= count[k]
		c.edge /= count[k]
		mean := c.z
		for j := range mean {
			mean[j] /= count[k]
		}
		var m, mu, mv [monomials]float64
		powers(&m, c.u, c.v)
		slopes(&mu, &mv, &m)
		for t := range zernikePowers {
			c.z[t], c.zu[t], c.zv[t] = 0, 0, 0
			for j, p := range zernikePowers[t] {
				c.z[t] += p * mean[j]
				c.zu[t] += p * mu[j]
				c.zv[t] += p * mv[j]
			}
		}
		at := func(x float64) int32 { return min(max(int32((x+1)/2*float64(blocks)), 0), blocks-1) }
		c.block = at(c.v)*blocks + at(c.u)
	}
}

// slopes are the derivatives of the monomials by u and by v.
func slopes(mu, mv, m *[monomials]float64) {
	at := 0
	for order := 1; order <= surfaceOrder; order++ {
		next := at + order
		for k := 0; k <= order; k++ {
			if k < order {
				mu[next+k] = float64(order-k) * m[at+k]
			}
			if k > 0 {
				mv[next+k] = float64(k) * m[at+k-1]
			}
		}
		at = next
	}
}

// failed is a surface that could not be fitted.
func (b *SurfaceBasis) failed(n int, why string) Surface {
	s := Surface{N: n, Radius: b.radius, Noise: nan, Bowl: noEstimate, Tilt: noEstimate, TiltDirection: noEstimate, RollOff: noEstimate,
		Variance: nan, SmoothShare: nan, SiteShare: nan, DieShare: nan, Why: why, geometry: b.geometry, Residual: make([]float64, b.slots)}
	for i := range s.Residual {
		s.Residual[i] = nan
	}
	return s
}
