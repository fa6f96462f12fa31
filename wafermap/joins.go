package wafermap

import (
	"fmt"
	"math"
)

// JoinCount is the join-count test of one wafer: do fails lie next to each other
// more often than the same number of fails placed at random on the tested dice?
type JoinCount struct {
	N, Fails, Joins              int     // dice, failing dice, pairs of neighbours
	FailFail, PassFail, PassPass float64 // joins by kind

	// Moments and z = (count - expected) / sd under randomisation. NaN with
	// Why where they are not defined.
	ExpectedFF, VarianceFF, ZFF float64
	SkewnessFF                  float64
	ExpectedPF, VariancePF, ZPF float64
	ExpectedPP, VariancePP, ZPP float64

	// PFF is the chance of at least FailFail joins under randomisation (one-sided,
	// clustering), by Method: "exact", "gamma, three moments" or "permutation, ...".
	// PFFNormal and PPPNormal are the upper tails of the normal law at ZFF and ZPP,
	// whatever the method.
	PFF                  float64
	Method               string
	PFFNormal, PPPNormal float64

	Why string
}

// JoinCount counts the joins of the dice and compares them with their moments
// under non-free sampling: the number of fails is kept and all ways to place them
// on the tested dice are equally likely. With J joins, K ordered pairs of joins
// that share a die, and f(k) the chance that k given dice all fail,
//
//	E = J f(2),  Var = J f(2) + K f(3) + (J(J-1) - K) f(4) - E^2
//
// for fail-fail joins, and likewise for the others (Cliff and Ord 1981, Spatial
// Processes, section 1.4; Moran 1948). Dice without neighbours take part: a fail may
// land on them.
//
// The normal approximation is poor where few joins are expected, and not good where
// many are, because the count is skewed: where chance does as much once in a
// thousand times, the normal tail is thin by a factor of two with 70 joins
// expected and of more than ten with 7. So PFF does not use it. With two or three
// fails it is exact. Where at least gammaFrom fail-fail and pass-pass joins are
// expected it is the tail of the gamma law (Pearson's type III) with the count's
// exact mean, variance and skewness, corrected for continuity: on discs of 100 to
// 30,000 dice that is within a quarter of the truth down to 0.001, and
// within a factor of two at 0.0001. Else it comes from seeded random placements, stopped early once it is
// clear that there is nothing (Besag and Clifford 1991); it cannot then be smaller
// than one over their number.
func (g *Grid) JoinCount(fail []bool, n Neighbours) JoinCount {
	g.check(len(fail))
	c := JoinCount{N: g.Len(), ExpectedFF: nan, VarianceFF: nan, ZFF: nan, SkewnessFF: nan, ExpectedPF: nan, VariancePF: nan, ZPF: nan,
		ExpectedPP: nan, VariancePP: nan, ZPP: nan, PFF: nan, PFFNormal: nan, PPPNormal: nan}
	degrees := g.countJoins(&c, fail, n)
	switch {
	case c.N == 0:
		c.Why = "no dice with coordinates"
	case c.Joins == 0:
		c.Why = "no two tested dice are neighbours"
	case c.Fails == 0:
		c.Why = "no fails"
	case c.Fails == c.N:
		c.Why = "all dice fail"
	case c.N < 4:
		c.Why = fmt.Sprintf("%d dice are too few", c.N)
	}
	if c.Why != "" {
		return c
	}
	c.moments(degrees)
	if c.Fails == 1 {
		c.Why = "one fail cannot lie next to another"
		c.PFF, c.Method = 1, "exact"
		return c
	}
	g.judge(&c, n, degrees)
	return c
}

// countJoins fills in the counts and returns each taking-part row's number of
// neighbours.
func (g *Grid) countJoins(c *JoinCount, fail []bool, n Neighbours) []uint8 {
	degrees := make([]uint8, len(fail))
	ways := g.ways(n.later())
	var ends [3]int // joins by the number of their dice that fail
	for _, r := range g.order {
		own := 0
		if fail[r] {
			own = 1
			c.Fails++
		}
		near := ways.from(r)
		degrees[r] += uint8(len(near))
		c.Joins += len(near)
		for _, q := range near {
			degrees[q]++
			k := own
			if fail[q] {
				k++
			}
			ends[k]++
		}
	}
	c.PassPass, c.PassFail, c.FailFail = float64(ends[0]), float64(ends[1]), float64(ends[2])
	return degrees
}

// moments fills in expectations, variances and z.
func (c *JoinCount) moments(degrees []uint8) {
	n, f := float64(c.N), float64(c.Fails)
	p := n - f
	j := float64(c.Joins)
	k := 0.0 // ordered pairs of joins that share a die
	for _, d := range degrees {
		k += float64(d) * (float64(d) - 1)
	}
	same := func(m float64) (expected, variance float64) { // joins among m dice of n
		f2 := m * (m - 1) / (n * (n - 1))
		f3 := f2 * (m - 2) / (n - 2)
		f4 := f3 * (m - 3) / (n - 3)
		return j * f2, j*f2 + k*f3 - (j+k)*f4 + j*j*(f4-f2*f2)
	}
	c.ExpectedFF, c.VarianceFF = same(f)
	c.ExpectedPP, c.VariancePP = same(p)
	g2 := f * p / (n * (n - 1)) // both of two joins that share a die are mixed: also g2, half of one join's
	g4 := 4 * f * (f - 1) * p * (p - 1) / (n * (n - 1) * (n - 2) * (n - 3))
	c.ExpectedPF = 2 * j * g2
	c.VariancePF = 2*j*g2 + k*g2 - (j+k)*g4 + j*j*(g4-4*g2*g2)
	z := func(count, expected, variance float64) float64 {
		if variance <= 1e-12*(1+expected) { // every placement gives the same count
			return nan
		}
		return (count - expected) / math.Sqrt(variance)
	}
	c.ZFF = z(c.FailFail, c.ExpectedFF, c.VarianceFF)
	c.ZPF = z(c.PassFail, c.ExpectedPF, c.VariancePF)
	c.ZPP = z(c.PassPass, c.ExpectedPP, c.VariancePP)
	c.PFFNormal, c.PPPNormal = upperNormal(c.ZFF), upperNormal(c.ZPP)
}

// upperNormal is the chance that a standard normal value is at least z.
func upperNormal(z float64) float64 { return 0.5 * math.Erfc(z/math.Sqrt2) }
