package wafermap

import (
	"fmt"
	"math"
)

// Weights says how a die's neighbours are weighted.
type Weights int

const (
	Binary          Weights = iota // each neighbour counts 1
	RowStandardised                // a die's neighbours share a weight of 1
)

// Moment is a statistic with its moments under a null law; NaN where undefined.
type Moment struct {
	Value, Expected, Variance float64
	Z                         float64 // (Value - Expected) / sd; for Geary's C the sign is turned, so that Z > 0 means alike neighbours for both
	P                         float64 // two-sided, from the normal law
}

// Autocorrelation is how alike neighbours are in a measured value.
type Autocorrelation struct {
	N     int // dice with a value
	Links int // ordered pairs of neighbours
	// Moran's I, near 0 for values placed at random and towards 1 for smooth
	// maps, with moments when the values are permuted over the dice, and when
	// they are independent normal.
	Moran, MoranNormality Moment
	// Geary's C, near 1 for values placed at random and towards 0 for smooth
	// maps; moments under permutation. It weighs differences of neighbours and so
	// sees outliers and small scales more than I does.
	Geary Moment
	Why   string
}

// Autocorrelation computes Moran's I and Geary's C of a value over the dice.
//
//	I = n/S0 sum_ij w_ij z_i z_j / sum_i z_i^2
//	C = (n-1)/(2 S0) sum_ij w_ij (z_i - z_j)^2 / sum_i z_i^2
//
// with z the deviations from the mean and S0 the sum of weights. Moments are those
// of Cliff and Ord 1981, Spatial Processes, sections 1.5 and 2.3. Dice with a NaN or
// infinite value take no part and are nobody's neighbours; dice without neighbours
// take part with no links. Fewer than four dice, no links, or a constant value
// give NaN and a Why.
func (g *Grid) Autocorrelation(value []float64, n Neighbours, w Weights) Autocorrelation {
	g.check(len(value))
	undefined := Moment{nan, nan, nan, nan, nan}
	a := Autocorrelation{Moran: undefined, MoranNormality: undefined, Geary: undefined}
	present := func(r int32) bool { return value[r]-value[r] == 0 } // neither NaN nor infinite
	mean := 0.0
	for _, r := range g.order {
		if present(r) {
			a.N++
			mean += (value[r] - mean) / float64(a.N)
		}
	}
	if a.N < 4 {
		a.Why = fmt.Sprintf("%d dice with a value: at least 4 are needed", a.N)
		return a
	}
	var degree []uint8
	if w == RowStandardised {
		degree = g.degrees(n, present)
	}
	var s squares
	for _, r := range g.order {
		if present(r) {
			z := value[r] - mean
			s.m2 += z * z
			s.m4 += z * z * z * z
		}
	}
	if !(s.m2 > 1e-24*mean*mean*float64(a.N)) {
		a.Why = "the value is the same on all dice"
		return a
	}
	g.crossProducts(&s, value, mean, degree, n)
	a.Links = s.links
	if s.links == 0 {
		a.Why = "no two dice with a value are neighbours"
		return a
	}
	a.moments(s)
	return a
}

// squares gathers the sums over dice and links.
type squares struct {
	links      int
	m2, m4     float64 // sums of z^2, z^4
	cross      float64 // sum w z_i z_j
	difference float64 // sum w (z_i - z_j)^2
	s0, s1, s2 float64 // sums of weights, as Cliff and Ord name them
}

// degrees counts each present row's present neighbours.
func (g *Grid) degrees(n Neighbours, present func(int32) bool) []uint8 {
	degree := make([]uint8, len(g.x))
	ways := g.ways(n.later())
	for _, r := range g.order {
		if !present(r) {
			continue
		}
		for _, q := range ways.from(r) {
			if present(q) {
				degree[r]++
				degree[q]++
			}
		}
	}
	return degree
}

// crossProducts sums over links. degree is nil where each weighs 1.
func (g *Grid) crossProducts(s *squares, value []float64, mean float64, degree []uint8, n Neighbours) {
	into := make([]float64, len(g.x)) // sum of w_ij + w_ji over neighbours j
	ways := g.ways(n.later())
	for _, r := range g.order {
		if value[r]-value[r] != 0 {
			continue
		}
		zr := value[r] - mean
		for _, q := range ways.from(r) {
			if value[q]-value[q] != 0 {
				continue
			}
			zq := value[q] - mean
			both := 2.0
			if degree != nil {
				both = 1/float64(degree[r]) + 1/float64(degree[q])
			}
			s.links += 2
			s.cross += both * zr * zq
			s.difference += both * sq(zr-zq)
			s.s0 += both
			s.s1 += both * both
			into[r] += both
			into[q] += both
		}
	}
	for _, r := range g.order {
		s.s2 += into[r] * into[r]
	}
}

func (a *Autocorrelation) moments(s squares) {
	n := float64(a.N)
	kurtosis := n * s.m4 / (s.m2 * s.m2)
	ss := s.s0 * s.s0
	moment := func(value, expected, variance, sign float64) Moment {
		m := Moment{Value: value, Expected: expected, Variance: variance, Z: nan, P: nan}
		if variance > 0 {
			m.Z = sign * (value - expected) / math.Sqrt(variance)
			m.P = 2 * upperNormal(math.Abs(m.Z))
		}
		return m
	}
	i, expected := n/s.s0*s.cross/s.m2, -1/(n-1)
	second := (n*((n*n-3*n+3)*s.s1-n*s.s2+3*ss) - kurtosis*((n*n-n)*s.s1-2*n*s.s2+6*ss)) / ((n - 1) * (n - 2) * (n - 3) * ss)
	a.Moran = moment(i, expected, second-expected*expected, 1)
	a.MoranNormality = moment(i, expected, (n*n*s.s1-n*s.s2+3*ss)/(ss*(n*n-1))-expected*expected, 1)
	c := (n - 1) / (2 * s.s0) * s.difference / s.m2
	variance := ((n-1)*s.s1*(n*n-3*n+3-(n-1)*kurtosis) - 0.25*(n-1)*s.s2*(n*n+3*n-6-(n*n-n+2)*kurtosis) + ss*(n*n-3-sq(n-1)*kurtosis)) / (n * (n - 2) * (n - 3) * ss)
	a.Geary = moment(c, 1, variance, -1)
}
