package wafermap

import (
	"math"
	"slices"

	"gonum.org/v1/gonum/mathext"
)

// gammaFrom is the expected number of fail-fail and of pass-pass joins from which
// the gamma tail is taken.
const gammaFrom = 5

// judge fills in SkewnessFF, PFF and its Method.
func (g *Grid) judge(c *JoinCount, n Neighbours, degrees []uint8) {
	shapes := g.shapes(n, degrees)
	c.SkewnessFF = c.skewness(shapes)
	switch {
	case c.Fails <= 3:
		c.PFF, c.Method = c.exactTail(shapes), "exact"
	case c.ExpectedFF < gammaFrom || c.ExpectedPP < gammaFrom || math.IsNaN(c.SkewnessFF+c.ZFF):
		c.PFF, c.Method = g.permutedTail(c, n)
	default:
		z := (c.FailFail - 0.5 - c.ExpectedFF) / math.Sqrt(c.VarianceFF)
		c.PFF, c.Method = upperGamma(z, c.SkewnessFF), "gamma, three moments"
	}
}

// upperGamma is the chance that a value of a gamma law, shifted and scaled to mean 0 and
// variance 1, is at least z; for negative skewness the law is mirrored.
func upperGamma(z, skewness float64) float64 {
	if math.Abs(skewness) < 1e-3 { // not told from the normal, and hard on the incomplete gamma function
		return upperNormal(z)
	}
	shape := 4 / (skewness * skewness)
	if skewness > 0 {
		return mathext.GammaIncRegComp(shape, max(0, shape+z*math.Sqrt(shape)))
	}
	return mathext.GammaIncReg(shape, max(0, shape-z*math.Sqrt(shape)))
}

// shapes counts how joins hang together on a grid.
type shapes struct {
	wedges    float64 // two joins that share a die
	triangles float64 // three joins among three dice
	stars     float64 // three joins that share one die
	paths     float64 // three joins in a row, through four dice
}

func (g *Grid) shapes(n Neighbours, degree []uint8) shapes {
	steps := n.later()
	pairs := n.sides()
	here := make([]bool, len(steps))
	var s shapes
	for _, r := range g.order {
		d := float64(degree[r])
		s.wedges += d * (d - 1) / 2
		s.stars += d * (d - 1) * (d - 2) / 6
		for i, t := range steps {
			q := g.at(r, t)
			if here[i] = q >= 0; here[i] {
				s.paths += (d - 1) * (float64(degree[q]) - 1)
			}
		}
		// a triangle is met from its first die in raster order
		for _, p := range pairs {
			if here[p[0]] && here[p[1]] {
				s.triangles++
			}
		}
	}
	s.paths -= 3 * s.triangles // a triangle would be a path that ends where it began, three times
	return s
}

// skewness is the third standardised moment of the number of fail-fail joins under
// randomisation. As for the variance, E[count (count-1) (count-2)] / 6 is the sum over sets
// of three joins of the chance that all their dice fail: three dice for a
// triangle, four for stars and paths, five for a wedge and a join apart, six for
// three joins apart.
func (c *JoinCount) skewness(s shapes) float64 {
	n, f, j := float64(c.N), float64(c.Fails), float64(c.Joins)
	all := func(k int) float64 { // chance that k given dice fail
		p := 1.0
		for i := range k {
			p *= max(0, f-float64(i)) / (n - float64(i))
		}
		return p
	}
	if c.N < 6 {
		return nan
	}
	four := s.stars + s.paths
	five := s.wedges*(j-2) - 3*s.triangles - 3*s.stars - 2*s.paths
	six := j*(j-1)*(j-2)/6 - s.triangles - four - five
	m, v := c.ExpectedFF, c.VarianceFF
	third := 6*(s.triangles*all(3)+four*all(4)+five*all(5)+six*all(6)) + 3*(v+m*m-m) + m
	return (third - 3*m*v - m*m*m) / math.Pow(v, 1.5)
}

// sides lists the pairs of later neighbours of a die that are neighbours of each other.
func (n Neighbours) sides() (pairs [][2]int) {
	steps, all := n.later(), n.all()
	for i, s := range steps {
		for j, t := range steps[:i] {
			if slices.Contains(all, step{t.dx - s.dx, t.dy - s.dy}) {
				pairs = append(pairs, [2]int{j, i})
			}
		}
	}
	return pairs
}
