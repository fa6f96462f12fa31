package control

import (
	"fmt"
	"math"

	"gonum.org/v1/gonum/stat/distuv"
	"kneepoint/stats"
)

// Baseline is what the points of a good time say of centre and spread.
type Baseline struct {
	Center, Sigma, Lower, Upper float64
	// Excluded are the indexes of points that were not taken as good.
	Excluded []int
	N        int // points used
	Why      string
}

// fewestPoints is where limits begin to mean something; 20 to 25 are better
// (common practice, no source).
const fewestPoints = 8

// medianRange is the median of |X - Y| for independent normal X and Y, in sigmas:
// sqrt(2) times the third quartile of the normal distribution.
var medianRange = math.Sqrt2 * distuv.UnitNormal.Quantile(0.75)

// PhaseOne finds limits from points of which some may be bad. It starts from
// estimates that bad points hardly move, the median and the median moving range
// (over 0.954), and leaves out what is beyond three sigma; from the rest it takes
// mean and mean moving range as [Individuals] does, and again leaves out what is
// beyond, until nothing changes. Moving ranges do not bridge points left out.
//
// Below eight points there are no limits. When more than a quarter of the points
// are left out the limits are given with a Why: that is no good time with a few bad
// points, but two processes.
//
// Source: the two stages follow Montgomery 2013, section 6.2.2 (trial limits);
// the median moving range is Clifford 1959, Industrial Quality Control 15(11),
// 40-43 (from memory).
func PhaseOne(x []float64) Baseline {
	b := Baseline{Center: math.NaN(), Sigma: math.NaN(), Lower: math.NaN(), Upper: math.NaN(), Excluded: []int{}}
	n := stats.MomentsOf(x).N
	if n < fewestPoints {
		b.N = n
		b.Why = fmt.Sprintf("%d points; limits need %d", n, fewestPoints)
		return b
	}
	center := stats.Median(x)
	sigma := stats.Median(movingRanges(x)) / medianRange
	if !(sigma > 0) {
		sigma = stats.MADSigma(x)
	}
	if !(sigma > 0) {
		b.N, b.Why = n, "points do not differ"
		return b
	}
	good := make([]float64, len(x))
	was := -1
	for range 50 {
		out := 0
		for i, v := range x {
			good[i] = v
			if math.Abs(v-center) > 3*sigma {
				good[i] = math.NaN()
				out++
			}
		}
		c := stats.Mean(good)
		s := stats.Mean(movingRanges(good)) / ConstantsFor(2).MeanRange
		if !(s > 0) {
			break
		}
		if out == was {
			break
		}
		center, sigma, was = c, s, out
	}
	b.Center, b.Sigma, b.Lower, b.Upper = center, sigma, center-3*sigma, center+3*sigma
	for i, v := range x {
		if v != v {
			continue
		}
		if good[i] != good[i] {
			b.Excluded = append(b.Excluded, i)
		} else {
			b.N++
		}
	}
	if 4*len(b.Excluded) > n {
		b.Why = fmt.Sprintf("%d of %d points do not belong to the others: this is no time when all was well", len(b.Excluded), n)
	}
	return b
}

// StatLimits are statistical limits on a lot's yield or on a bin's share.
type StatLimits struct {
	Center, Sigma float64
	// First and Second are three and four sigma away on the bad side, within [0, 1].
	First, Second float64
	// FirstRisk and SecondRisk are the chances that a lot of the same process is
	// beyond a limit, counting that centre and sigma are known from N lots only;
	// NaN for robust limits, and for limits that [0, 1] cut off.
	FirstRisk, SecondRisk float64
	N                     int // lots
	Robust                bool
	Why                   string

	lower bool
}

// fewestLots is how many lots AEC-Q002 wants (from memory).
const fewestLots = 6

// YieldLimits are the statistical yield limits SYL1 and SYL2: the mean of the
// yields of past lots less three and four standard deviations. A lot below the
// first is held for review, below the second all the more. Robust takes median
// and MAD sigma instead, for lots of which some were bad; yields have a tail to
// low values, and mean and standard deviation then hide what they should show.
//
// NaNs are skipped. Fewer than six lots give no limits. Independent lots with
// normal yields are below the first limit in FirstRisk of cases: 1.9 % when six
// lots set it, 0.3 % with a hundred; not 0.13 %.
//
// Source: AEC-Q002, Guidelines for Statistical Yield Analysis (from memory).
func YieldLimits(yields []float64, robust bool) StatLimits { return statLimits(yields, robust, true) }

// BinLimits are the statistical bin limits SBL1 and SBL2: the mean share of a
// failing bin in past lots plus three and four standard deviations. As
// [YieldLimits] otherwise.
func BinLimits(shares []float64, robust bool) StatLimits { return statLimits(shares, robust, false) }

func statLimits(x []float64, robust, lower bool) StatLimits {
	m := stats.MomentsOf(x)
	l := StatLimits{Center: m.Mean, Sigma: m.SD(), N: m.N, Robust: robust, lower: lower,
		First: math.NaN(), Second: math.NaN(), FirstRisk: math.NaN(), SecondRisk: math.NaN()}
	if robust {
		l.Center, l.Sigma = stats.Median(x), stats.MADSigma(x)
	}
	if m.N < fewestLots {
		l.Why = fmt.Sprintf("%d lots; statistical limits need %d", m.N, fewestLots)
		return l
	}
	side := 1.0
	if lower {
		side = -1
	}
	n := float64(m.N)
	t := distuv.StudentsT{Mu: 0, Sigma: 1, Nu: n - 1}
	limit := func(k float64) (at, risk float64) {
		at, risk = l.Center+side*k*l.Sigma, math.NaN()
		if !robust && at >= 0 && at <= 1 {
			risk = t.CDF(-k / math.Sqrt(1+1/n))
		}
		return math.Min(1, math.Max(0, at)), risk
	}
	l.First, l.FirstRisk = limit(3)
	l.Second, l.SecondRisk = limit(4)
	if l.Sigma == 0 {
		l.Why = "past lots do not differ"
	}
	return l
}

// Judge says which limits a lot breaks: 0 none, 1 the first, 2 both. Without
// limits, or for NaN, it is 0.
func (l StatLimits) Judge(x float64) int {
	beyond := func(limit float64) bool {
		if l.lower {
			return x < limit
		}
		return x > limit
	}
	switch {
	case beyond(l.Second):
		return 2
	case beyond(l.First):
		return 1
	}
	return 0
}
