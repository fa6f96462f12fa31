package capability

import (
	"math"

	"gonum.org/v1/gonum/stat/distuv"
	"kneepoint/stats"
)

// Index is the set of indices for a mean and a standard deviation; NaN where a
// limit is missing.
type Index struct {
	Cp, Cpl, Cpu, Cpk float64
	// K is the offset of the mean from the middle of the limits, in parts of half
	// their distance; Cpk = Cp(1-K).
	K float64
}

// Indices computes them. A NaN limit is no limit: Cp and K are then NaN, and Cpk
// is that of the other limit.
func Indices(mean, sigma, lower, upper float64) Index {
	i := Index{
		Cp:  (upper - lower) / (6 * sigma),
		Cpl: (mean - lower) / (3 * sigma),
		Cpu: (upper - mean) / (3 * sigma),
		K:   math.Abs((lower+upper)/2-mean) / ((upper - lower) / 2),
	}
	i.Cpk = i.Cpl
	if i.Cpk != i.Cpk || i.Cpu < i.Cpk {
		i.Cpk = i.Cpu
	}
	return i
}

// CpInterval is the exact interval of Cp (or Pp) for normal readings: a standard
// deviation on df degrees of freedom,
//
//	Cp * sqrt(chi2(alpha/2; df)/df) ... Cp * sqrt(chi2(1-alpha/2; df)/df)
func CpInterval(cp, df, confidence float64) stats.Interval {
	checkConfidence(confidence)
	chi := distuv.ChiSquared{K: df}
	alpha := (1 - confidence) / 2
	return stats.Interval{Estimate: cp,
		Lower:  cp * math.Sqrt(chi.Quantile(alpha)/df),
		Upper:  cp * math.Sqrt(chi.Quantile(1-alpha)/df),
		Method: "exact chi-square"}
}

// CpkInterval is the interval of Cpk (or Ppk) for normal readings,
//
//	Cpk -+ z * sqrt(1/(9n) + Cpk^2/(2 df))
//
// with n readings behind the mean and df degrees of freedom behind sigma, n-1
// for the overall one. Source: Bissell 1990.
func CpkInterval(cpk, n, df, confidence float64) stats.Interval {
	checkConfidence(confidence)
	return normalInterval(cpk, 1/(9*n)+cpk*cpk/(2*df), confidence, "Bissell 1990")
}

func normalInterval(estimate, variance, confidence float64, method string) stats.Interval {
	half := distuv.UnitNormal.Quantile(0.5+confidence/2) * math.Sqrt(variance)
	return stats.Interval{Estimate: estimate, Lower: estimate - half, Upper: estimate + half, Method: method}
}

// CpkLowerBound is the one-sided lower bound of Cpk by Bissell's formula.
func CpkLowerBound(cpk, n, df, confidence float64) float64 {
	checkConfidence(confidence)
	return cpk - distuv.UnitNormal.Quantile(confidence)*math.Sqrt(1/(9*n)+cpk*cpk/(2*df))
}

// OneSidedLowerBound is the exact lower confidence bound of a one-sided index
// (Cpl or Cpu) from n independent normal readings: 3 sqrt(n) times the index is
// noncentral t.
//
// Source: Chou, Owen and Borrego 1990, J. Quality Technology 22, 223-229 (from
// memory).
func OneSidedLowerBound(index float64, n int, confidence float64) float64 {
	checkConfidence(confidence)
	if n < 2 || index != index {
		return math.NaN()
	}
	root := 3 * math.Sqrt(float64(n))
	t := index * root
	// The bound is the noncentrality at which a t this large or larger has
	// probability 1-confidence.
	at := newNoncentral(float64(n - 1))
	spread := math.Sqrt(1 + t*t/(2*float64(n-1)))
	lo, hi := t-8*spread, t+8*spread
	for range 200 {
		mid := lo + (hi-lo)/2
		if mid <= lo || mid >= hi {
			break
		}
		if at.cdf(t, mid) > confidence {
			lo = mid
		} else {
			hi = mid
		}
	}
	return (lo + (hi-lo)/2) / root
}

// Cpm is the index that counts the offset from a target as spread,
//
//	(U - L) / 6 sqrt(sum((x-mean)^2)/n + (mean-target)^2)
//
// with sd the standard deviation (divisor n-1) of n readings. Source: Chan,
// Cheng and Spiring 1988, J. Quality Technology 20, 162-175 (from memory).
func Cpm(mean, sd float64, n int, lower, upper, target float64) float64 {
	about := sd*sd*float64(n-1)/float64(n) + (mean-target)*(mean-target)
	return (upper - lower) / (6 * math.Sqrt(about))
}

// Outside is the share of a normal population below the lower and above the
// upper limit; 0 for a limit that is NaN.
func Outside(mean, sigma, lower, upper float64) (below, above float64) {
	if lower == lower {
		below = 0.5 * math.Erfc((mean-lower)/(sigma*math.Sqrt2))
	}
	if upper == upper {
		above = 0.5 * math.Erfc((upper-mean)/(sigma*math.Sqrt2))
	}
	return below, above
}

func checkConfidence(c float64) {
	if !(c > 0 && c < 1) {
		panic("stats/capability: confidence outside (0, 1)")
	}
}
