package stats

import (
	"math"

	"gonum.org/v1/gonum/stat/distuv"
)

// Moments are the sample moments of a set of readings. Get them from
// [MomentsOf]; the zero value is that of an empty set apart from its Mean, Min
// and Max.
type Moments struct {
	N        int // readings
	Missing  int // NaNs
	Min, Max float64
	Mean     float64

	// Central moments sum((x-mean)^k)/n of values scaled by 2^-scale, so that
	// neither picoamperes nor absurd readings leave the range of a float64.
	m2, m3, m4 float64
	scale      int
}

// MomentsOf computes the first four moments of x.
//
// The mean is a sum compensated by error-free additions (Knuth's two-sum; Ogita,
// Rump and Oishi 2005, SIAM J. Sci. Comput. 26, 1955-1988), and is within one
// unit in the last place of the exact mean. The central moments take a second pass and are then
// corrected for the rounding of the mean (Chan, Golub and LeVeque 1983, The
// American Statistician 37, 242-247, eq. 1.7, and its analogue for the third and
// fourth power).
//
// NaNs are skipped and counted. With no value the mean, Min and Max are NaN.
// With an infinity among the values the mean is infinite or NaN and the higher
// moments are NaN. When all values are equal the mean is that value and the
// central moments are exactly zero.
func MomentsOf(x []float64) Moments {
	m := sumPass(x)
	if m.N == 0 {
		m.Mean, m.Min, m.Max = math.NaN(), math.NaN(), math.NaN()
		m.m2, m.m3, m.m4 = math.NaN(), math.NaN(), math.NaN()
		return m
	}
	if m.Min == m.Max && !math.IsInf(m.Min, 0) {
		m.Mean = m.Min
		return m
	}
	if math.IsInf(m.Min, 0) || math.IsInf(m.Max, 0) {
		m.Mean = m.Min + m.Max // the infinity, or NaN for both
		m.m2, m.m3, m.m4 = math.NaN(), math.NaN(), math.NaN()
		return m
	}
	_, m.scale = math.Frexp(math.Max(m.Max/2-m.Mean/2, m.Mean/2-m.Min/2))
	m.scale++
	m.centralPass(x)
	return m
}

// twoSum returns a+b and the exact rounding error of that sum.
func twoSum(a, b float64) (s, e float64) {
	s = a + b
	t := s - a
	e = (a - (s - t)) + (b - t)
	return s, e
}

// sum is a compensated accumulator: Value is hi+lo.
type sum struct{ hi, lo float64 }

func (s *sum) add(x float64) {
	var e float64
	s.hi, e = twoSum(s.hi, x)
	s.lo += e
}

func (s *sum) merge(t sum) {
	s.add(t.hi)
	s.lo += t.lo
}

func (s sum) value() float64 { return s.hi + s.lo }

// over divides by n, keeping what the sum holds beyond a float64 and what the
// division leaves over.
func (s sum) over(n float64) float64 {
	hi, lo := twoSum(s.hi, s.lo)
	q := hi / n
	left := math.FMA(-q, n, hi) // exact
	return q + (left+lo)/n
}

// sumPass counts, and finds extremes and mean. Four accumulators run side by
// side because one alone waits for its own last addition.
func sumPass(x []float64) Moments {
	m := Moments{Min: math.Inf(1), Max: math.Inf(-1)}
	var s [4]sum
	for i, v := range x {
		if v != v {
			m.Missing++
			continue
		}
		if v < m.Min {
			m.Min = v
		}
		if v > m.Max {
			m.Max = v
		}
		s[i&3].add(v)
	}
	m.N = len(x) - m.Missing
	total := s[0]
	total.merge(s[1])
	total.merge(s[2])
	total.merge(s[3])
	if v := total.value(); !math.IsInf(v, 0) && v == v {
		m.Mean = total.over(float64(m.N))
	} else if m.N > 0 { // the sum overflows although the mean cannot
		var t sum
		for _, v := range x {
			if v == v {
				t.add(math.Ldexp(v, -64))
			}
		}
		m.Mean = math.Ldexp(t.over(float64(m.N)), 64)
	}
	return m
}

// centralPass fills m2, m3 and m4 from the deviations.
func (m *Moments) centralPass(x []float64) {
	unit := math.Ldexp(1, -m.scale/2)
	rest := math.Ldexp(1, -(m.scale - m.scale/2)) // two factors: 2^-scale itself may overflow
	var s1, s2, s3, s4 [2]sum
	for i, v := range x {
		if v != v {
			continue
		}
		var d float64
		if m.scale < 1000 {
			d = (v - m.Mean) * unit * rest
		} else { // the deviation itself may overflow
			d = (v*unit - m.Mean*unit) * rest
		}
		d2 := float64(d * d)
		j := i & 1
		s1[j].add(d)
		s2[j].add(d2)
		s3[j].add(float64(d2 * d))
		s4[j].add(float64(d2 * d2))
	}
	n := float64(m.N)
	total := func(s [2]sum) float64 { s[0].merge(s[1]); return s[0].value() / n }
	e, a2, a3, a4 := total(s1), total(s2), total(s3), total(s4)
	e2 := float64(e * e)
	m.m2 = a2 - e2
	m.m3 = a3 - float64(3*e*a2) + float64(2*e*e2)
	m.m4 = a4 - float64(4*e*a3) + float64(6*e2*a2) - float64(3*e2*e2)
}

// Variance is the sample variance with divisor n-1: NaN below two values.
func (m Moments) Variance() float64 {
	if m.N < 2 {
		return math.NaN()
	}
	n := float64(m.N)
	return math.Ldexp(m.m2*(n/(n-1)), 2*m.scale)
}

// SD is the sample standard deviation, the root of [Moments.Variance].
func (m Moments) SD() float64 {
	if m.N < 2 {
		return math.NaN()
	}
	n := float64(m.N)
	return math.Ldexp(math.Sqrt(m.m2*(n/(n-1))), m.scale)
}

// MomentSkewness is g1 = m3/m2^(3/2) with moments over n: NaN for a constant
// sample. For what a report shows see [Moments.Skewness].
func (m Moments) MomentSkewness() float64 {
	if m.N < 2 || !(m.m2 > 0) {
		return math.NaN()
	}
	return m.m3 / (m.m2 * math.Sqrt(m.m2))
}

// MomentKurtosis is the excess kurtosis g2 = m4/m2^2 - 3 with moments over n:
// NaN for a constant sample.
func (m Moments) MomentKurtosis() float64 {
	if m.N < 2 || !(m.m2 > 0) {
		return math.NaN()
	}
	return m.m4/(m.m2*m.m2) - 3
}

// Skewness is the bias-corrected skewness
//
//	G1 = g1 * sqrt(n(n-1)) / (n-2)
//
// NaN below three values and for a constant sample. Source: Joanes and Gill
// 1998, The Statistician 47, 183-189.
func (m Moments) Skewness() float64 {
	if m.N < 3 {
		return math.NaN()
	}
	n := float64(m.N)
	return m.MomentSkewness() * math.Sqrt(n*(n-1)) / (n - 2)
}

// Kurtosis is the bias-corrected excess kurtosis, 0 for a normal population,
//
//	G2 = (n-1)/((n-2)(n-3)) * ((n+1) g2 + 6)
//
// NaN below four values and for a constant sample. Source as for
// [Moments.Skewness].
func (m Moments) Kurtosis() float64 {
	if m.N < 4 {
		return math.NaN()
	}
	n := float64(m.N)
	return (n - 1) / ((n - 2) * (n - 3)) * ((n+1)*m.MomentKurtosis() + 6)
}

// Mean is the arithmetic mean of the values that are not NaN; NaN with none.
func Mean(x []float64) float64 { return MomentsOf(x).Mean }

// SD is the sample standard deviation (divisor n-1); NaN below two values.
func SD(x []float64) float64 { return MomentsOf(x).SD() }

// Lag1 is the lag-1 autocorrelation coefficient of a sequence,
//
//	r1 = sum_t (x_t - m)(x_t+1 - m) / sum_t (x_t - m)^2
//
// with m the mean over all values. Values keep their places: a NaN drops the two
// products that it belongs to. NaN for fewer than two values and for constant
// ones. Source: NIST/SEMATECH e-Handbook 1.3.5.12; Box and Jenkins 1976.
func Lag1(x []float64) float64 {
	m := MomentsOf(x)
	if m.N < 2 || !(m.m2 > 0) {
		return math.NaN()
	}
	unit := math.Ldexp(1, -m.scale/2)
	rest := math.Ldexp(1, -(m.scale - m.scale/2))
	var s, dev sum
	pairs := 0.0 // sum of both members' deviations over the pairs used
	before := math.NaN()
	used := 0
	for _, v := range x {
		d := (v*unit - m.Mean*unit) * rest
		if d == d {
			dev.add(d)
			if before == before {
				s.add(float64(before * d))
				pairs += before + d
				used++
			}
		}
		before = d
	}
	// The mean is rounded by up to half a unit; take that error out again.
	n := float64(m.N)
	e := dev.value() / n
	num := s.value() - e*pairs + float64(used)*e*e
	return num / (m.m2 * n)
}

// MeanInterval is the mean with Student's t interval,
//
//	mean -+ t(n-1) * sd / sqrt(n)
//
// for values that are independent and not far from normal, or many. Limits are
// NaN below two values.
func MeanInterval(x []float64, confidence float64) Interval {
	checkConfidence(confidence)
	m := MomentsOf(x)
	iv := Interval{Estimate: m.Mean, Lower: math.NaN(), Upper: math.NaN(), Method: "Student's t"}
	switch {
	case m.N == 0:
		iv.Why = "no values"
	case m.N == 1:
		iv.Why = "one value has no spread"
	default:
		t := distuv.StudentsT{Mu: 0, Sigma: 1, Nu: float64(m.N - 1)}.Quantile(0.5 + confidence/2)
		half := t * m.SD() / math.Sqrt(float64(m.N))
		iv.Lower, iv.Upper = m.Mean-half, m.Mean+half
	}
	return iv
}

func checkConfidence(c float64) {
	if !(c > 0 && c < 1) {
		panic("stats: confidence outside (0, 1)")
	}
}
