package sketch

import (
	"math"

	"kneepoint/stats"
)

// Moments are count, extremes and central sums of readings. The zero value is that
// of no reading. All fields may be stored and read back.
type Moments struct {
	N        int     `json:"n"`
	Missing  int     `json:"missing"`  // NaNs
	Infinite int     `json:"infinite"` // counted, and in none of the other numbers
	Min      float64 `json:"min"`      // 0 when N is 0, as are the others
	Max      float64 `json:"max"`
	Mean     float64 `json:"mean"`
	// M2, M3 and M4 are the sums of (x - Mean)^k.
	M2 float64 `json:"m2"`
	M3 float64 `json:"m3"`
	M4 float64 `json:"m4"`
}

// MomentsOf summarises readings in one go, with the accuracy of
// [stats.MomentsOf]: better than adding them one by one.
func MomentsOf(x []float64) Moments {
	infinite := 0
	for _, v := range x {
		if math.IsInf(v, 0) {
			infinite++
		}
	}
	if infinite > 0 {
		finite := make([]float64, 0, len(x)-infinite)
		for _, v := range x {
			if !math.IsInf(v, 0) {
				finite = append(finite, v)
			}
		}
		x = finite
	}
	s := stats.MomentsOf(x)
	m := Moments{N: s.N, Missing: s.Missing, Infinite: infinite}
	if s.N == 0 {
		return m
	}
	m.Min, m.Max, m.Mean = s.Min, s.Max, s.Mean
	n := float64(s.N)
	if s.N > 1 {
		m.M2 = s.Variance() * (n - 1)
	}
	if v := m.M2 / n; v > 0 {
		m.M3 = s.MomentSkewness() * v * math.Sqrt(v) * n
		m.M4 = (s.MomentKurtosis() + 3) * v * v * n
	}
	return m
}

// Add takes one reading.
func (m *Moments) Add(x float64) {
	switch {
	case x != x:
		m.Missing++
	case math.IsInf(x, 0):
		m.Infinite++
	default:
		*m = m.Merge(Moments{N: 1, Min: x, Max: x, Mean: x})
	}
}

// Merge gives the moments of the readings of both, by Pebay's pairwise update
// (2008, eq. 3.1 to 3.3): with d the difference of means and a, b the counts,
//
//	M2 = M2a + M2b + d^2 ab/n
//	M3 = M3a + M3b + d^3 ab(a-b)/n^2 + 3d(a M2b - b M2a)/n
//	M4 = M4a + M4b + d^4 ab(a^2-ab+b^2)/n^3 + 6d^2(a^2 M2b + b^2 M2a)/n^2
//	     + 4d(a M3b - b M3a)/n
//
// Orders of merging agree to rounding; merge in one order for the same bits.
func (m Moments) Merge(o Moments) Moments {
	missing, infinite := m.Missing+o.Missing, m.Infinite+o.Infinite
	switch {
	case o.N == 0:
	case m.N == 0:
		m = o
	default:
		m = m.join(o)
	}
	m.Missing, m.Infinite = missing, infinite
	return m
}

func (m Moments) join(o Moments) Moments {
	a, b := float64(m.N), float64(o.N)
	n := a + b
	d := o.Mean - m.Mean
	r := Moments{N: m.N + o.N, Min: math.Min(m.Min, o.Min), Max: math.Max(m.Max, o.Max)}
	r.Mean = m.Mean + float64(d*(b/n))
	// Products one by one, in parentheses, so that no compiler fuses them.
	d2 := float64(d * d)
	r.M2 = m.M2 + o.M2 + float64(d2*(a*b/n))
	r.M3 = m.M3 + o.M3 + float64(float64(d2*d)*(a*b/n*((a-b)/n))) +
		float64(3*d*(float64(a*o.M2)-float64(b*m.M2))/n)
	r.M4 = m.M4 + o.M4 + float64(float64(d2*d2)*(a*b/n*((float64(a*a)-float64(a*b)+float64(b*b))/n/n))) +
		float64(6*d2*(float64(a*a/n*(o.M2/n))+float64(b*b/n*(m.M2/n)))) +
		float64(4*d*(float64(a*o.M3)-float64(b*m.M3))/n)
	return r
}

// Variance has divisor n-1: NaN below two readings.
func (m Moments) Variance() float64 {
	if m.N < 2 {
		return math.NaN()
	}
	return m.M2 / float64(m.N-1)
}

// SD is the standard deviation, the root of Variance.
func (m Moments) SD() float64 { return math.Sqrt(m.Variance()) }

// Skewness is G1 as [stats.Moments.Skewness] has it: NaN below three readings and
// for constant ones.
func (m Moments) Skewness() float64 {
	if m.N < 3 || !(m.M2 > 0) {
		return math.NaN()
	}
	n := float64(m.N)
	v := m.M2 / n
	return m.M3 / n / (v * math.Sqrt(v)) * math.Sqrt(n*(n-1)) / (n - 2)
}

// Kurtosis is the excess G2 as [stats.Moments.Kurtosis] has it: NaN below four
// readings and for constant ones.
func (m Moments) Kurtosis() float64 {
	if m.N < 4 || !(m.M2 > 0) {
		return math.NaN()
	}
	n := float64(m.N)
	v := m.M2 / n
	return (n - 1) / ((n - 2) * (n - 3)) * ((n+1)*(m.M4/n/(v*v)-3) + 6)
}
