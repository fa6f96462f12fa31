package screen

import (
	"fmt"
	"math"

	"kneepoint/stats"
)

// Estimator is how centre and spread are found.
type Estimator int

const (
	// Quartiles: median and (Q3-Q1)/1.35, the robust mean and sigma of AEC-Q001.
	Quartiles Estimator = iota
	// MedianMAD: median and 1.4826 times the median absolute deviation, which
	// stands outliers up to half of the readings instead of a quarter.
	MedianMAD
	// MeanSD: mean and standard deviation, which the outliers themselves move.
	MeanSD
)

// Scale is the scale on which limits are symmetric.
type Scale int

const (
	Linear Scale = iota
	Log          // of the logarithms; readings must be positive
)

// Options say how part average limits are made. Start from [Standard].
type Options struct {
	K         float64 // sigmas on each side
	Estimator Estimator
	Kind      stats.QuantileKind // of the quartiles
	Scale     Scale
	// Asymmetric takes a spread of its own for each side, from the quartile on that
	// side: (Q2-Q1)/0.675 and (Q3-Q2)/0.675. With [Quartiles] only.
	Asymmetric bool
	// MinimumN is the number of readings below which no limits are given.
	MinimumN int
}

// Standard is six robust sigmas from quartiles, from 30 readings on.
func Standard() Options {
	return Options{K: 6, Estimator: Quartiles, Kind: stats.HyndmanFan8, MinimumN: 30}
}

// Limits are part average limits, in the readings' unit.
type Limits struct {
	Centre float64
	// SigmaLow and SigmaHigh are the spread on each side: of the readings, or of
	// their logarithms where Scale is Log.
	SigmaLow, SigmaHigh float64
	Lower, Upper        float64
	K                   float64
	Scale               Scale
	N                   int
	Method              string
	Why                 string
}

// PartAverage makes dynamic part average limits from a lot's own readings, which
// should be those of passing dice,
//
//	robust mean -+ K robust sigma
//
// A reading marked in censor (nil: none; +1 at least, -1 at most) counts as beyond
// every exact one on its side; estimators that fall among such readings give no
// limits, and neither does MeanSD with any.
//
// NaNs are skipped. There are no limits (NaN), and Why says so, below MinimumN, on
// a Log scale with a reading that is not positive, and without a spread: where
// half of the readings are equal, a limit of zero sigmas would screen the other
// half. It panics on a K that is not positive, and on Asymmetric without
// Quartiles.
func PartAverage(x []float64, censor []int8, o Options) Limits {
	if censor != nil && len(censor) != len(x) {
		panic("stats/screen: slice length mismatch")
	}
	if !(o.K > 0) || o.Asymmetric && o.Estimator != Quartiles {
		panic("stats/screen: options that make no limits")
	}
	v := make([]float64, 0, len(x))
	bounds, positive := 0, true
	for i, r := range x {
		if r != r {
			continue
		}
		if o.Scale == Log {
			positive = positive && (r > 0 || censor != nil && censor[i] < 0)
			r = math.Log(math.Max(r, 0))
		}
		if censor != nil && censor[i] != 0 {
			bounds++
			r = math.Inf(int(censor[i]))
		}
		v = append(v, r)
	}
	l := Limits{K: o.K, Scale: o.Scale, N: len(v), Method: o.method()}
	switch {
	case len(v) < max(o.MinimumN, 1):
		return l.none(fmt.Sprintf("%d readings; limits need %d", len(v), max(o.MinimumN, 1)))
	case !positive:
		return l.none("a reading that is not positive has no logarithm")
	case o.Estimator == MeanSD && bounds > 0:
		return l.none("mean and standard deviation take no bounds")
	}
	switch o.Estimator {
	case Quartiles:
		q := stats.Quantiles(v, []float64{0.25, 0.5, 0.75}, o.Kind)
		l.Centre = q[1]
		if l.SigmaLow = (q[2] - q[0]) / 1.35; o.Asymmetric {
			l.SigmaLow, l.SigmaHigh = (q[1]-q[0])/0.675, (q[2]-q[1])/0.675
		} else {
			l.SigmaHigh = l.SigmaLow
		}
	case MedianMAD:
		var s stats.Selector
		l.Centre, l.SigmaLow = s.MedianMADSigma(v)
		l.SigmaHigh = l.SigmaLow
	case MeanSD:
		m := stats.MomentsOf(v)
		l.Centre, l.SigmaLow = m.Mean, m.SD()
		l.SigmaHigh = l.SigmaLow
	default:
		panic("stats/screen: unknown estimator")
	}
	switch {
	case math.IsInf(l.Centre, 0) || math.IsInf(l.SigmaLow, 0) || math.IsInf(l.SigmaHigh, 0) || l.SigmaLow != l.SigmaLow || l.SigmaHigh != l.SigmaHigh:
		return l.none("too many readings are only bounds")
	case !(l.SigmaLow > 0) || !(l.SigmaHigh > 0):
		return l.none("too many readings are equal: no spread to measure by")
	}
	return l.set()
}

// set computes the limits from a centre that is still on the scale.
func (l Limits) set() Limits {
	l.Lower, l.Upper = l.Centre-l.K*l.SigmaLow, l.Centre+l.K*l.SigmaHigh
	if l.Scale == Log {
		l.Centre, l.Lower, l.Upper = math.Exp(l.Centre), math.Exp(l.Lower), math.Exp(l.Upper)
	}
	return l
}

func (l Limits) none(why string) Limits {
	nan := math.NaN()
	l.Centre, l.SigmaLow, l.SigmaHigh, l.Lower, l.Upper, l.Why = nan, nan, nan, nan, nan, why
	return l
}

func (o Options) method() string {
	s := map[Estimator]string{Quartiles: "median and quartiles", MedianMAD: "median and MAD", MeanSD: "mean and standard deviation"}[o.Estimator]
	if o.Asymmetric {
		s += ", each side by itself"
	}
	if o.Scale == Log {
		s += ", of the logarithms"
	}
	return fmt.Sprintf("%s, %g sigma", s, o.K)
}

// Fitting returns o with Scale and Asymmetric set to suit the readings, and why:
// symmetric where they are, on logarithms where these are symmetric (leakage),
// else each side by itself. Skewness is taken from the octiles,
// (O7 + O1 - 2 median)/(O7 - O1), which outliers do not touch; up to 0.1, or three
// standard errors, is none (common practice, no source).
func (o Options) Fitting(x []float64, censor []int8) (Options, string) {
	if censor != nil && len(censor) != len(x) {
		panic("stats/screen: slice length mismatch")
	}
	v, positive := make([]float64, 0, len(x)), true
	for i, r := range x {
		if r != r {
			continue
		}
		if censor != nil && censor[i] != 0 {
			r = math.Inf(int(censor[i]))
		}
		positive = positive && r > 0
		v = append(v, r)
	}
	o.Scale, o.Asymmetric = Linear, false
	if len(v) < 8 {
		return o, "too few readings to tell their shape: taken as symmetric"
	}
	q := stats.Quantiles(v, []float64{1. / 8, 0.5, 7. / 8}, stats.HyndmanFan8)
	skew := func(a, b, c float64) float64 { return (c + a - 2*b) / (c - a) }
	none := math.Max(0.1, 3*1.3/math.Sqrt(float64(len(v))))
	raw := skew(q[0], q[1], q[2])
	switch {
	case raw != raw:
		return o, "a quarter or more of the readings are equal or bounds: taken as symmetric"
	case math.Abs(raw) <= none:
		return o, fmt.Sprintf("about symmetric (octile skewness %.2g)", raw)
	}
	if positive {
		if s := skew(math.Log(q[0]), math.Log(q[1]), math.Log(q[2])); math.Abs(s) <= none {
			o.Scale = Log
			return o, fmt.Sprintf("skewed (octile skewness %.2g), its logarithms are not (%.2g)", raw, s)
		}
	}
	o.Asymmetric = o.Estimator == Quartiles
	return o, fmt.Sprintf("skewed (octile skewness %.2g): each side by itself", raw)
}

// Static makes static part average limits from those of several lots: the median
// of their centres, and on each side the root of the mean square of their sigmas
// plus the variance between their centres (1.4826 MAD, squared). AEC-Q001 asks for
// six lots at least; with fewer, or with lots of different scales, there are no
// limits, and Why says so. Lots without limits are left out.
func Static(lots []Limits, k float64) Limits {
	if !(k > 0) {
		panic("stats/screen: options that make no limits")
	}
	l := Limits{K: k, Method: "static, from several lots"}
	var centres, low, high []float64
	for _, lot := range lots {
		if lot.Why != "" || !(lot.SigmaLow > 0) {
			continue
		}
		if len(centres) == 0 {
			l.Scale = lot.Scale
		} else if l.Scale != lot.Scale {
			return l.none("lots on different scales")
		}
		c := lot.Centre
		if l.Scale == Log {
			c = math.Log(c)
		}
		centres = append(centres, c)
		low, high = append(low, lot.SigmaLow*lot.SigmaLow), append(high, lot.SigmaHigh*lot.SigmaHigh)
		l.N += lot.N
	}
	if len(centres) < 6 {
		return l.none(fmt.Sprintf("%d lots; static limits need six", len(centres)))
	}
	l.Method = fmt.Sprintf("static, from %d lots", len(centres))
	between := stats.MADSigma(centres)
	l.Centre = stats.Median(centres)
	l.SigmaLow = math.Sqrt(stats.Mean(low) + between*between)
	l.SigmaHigh = math.Sqrt(stats.Mean(high) + between*between)
	return l.set()
}

// Within returns limits that are nowhere wider than the given ones (NaN: none), as
// part average limits never are.
func (l Limits) Within(lower, upper float64) Limits {
	if lower > l.Lower {
		l.Lower = lower
	}
	if upper < l.Upper {
		l.Upper = upper
	}
	return l
}

// Outside says which readings are beyond the limits: none where there are no
// limits, or for a NaN; a reading "at least" v where v is above the upper limit, one
// "at most" v where v is below the lower.
func (l Limits) Outside(x []float64, censor []int8) []bool {
	if censor != nil && len(censor) != len(x) {
		panic("stats/screen: slice length mismatch")
	}
	out := make([]bool, len(x))
	for i, v := range x {
		var c int8
		if censor != nil {
			c = censor[i]
		}
		out[i] = c >= 0 && v > l.Upper || c <= 0 && v < l.Lower
	}
	return out
}

// Fences are Tukey's: the inner ones 1.5, the outer ones 3 interquartile ranges
// beyond the quartiles.
type Fences struct{ InnerLower, InnerUpper, OuterLower, OuterUpper float64 }

// Tukey computes [Fences]; NaNs are skipped, and without a reading all are NaN.
// Source: Tukey 1977, Exploratory Data Analysis.
func Tukey(x []float64, kind stats.QuantileKind) Fences {
	q := stats.Quantiles(x, []float64{0.25, 0.75}, kind)
	d := q[1] - q[0]
	return Fences{q[0] - 1.5*d, q[1] + 1.5*d, q[0] - 3*d, q[1] + 3*d}
}
