package dist

import (
	"math"

	"kneepoint/stats"
	"kneepoint/stats/internal/tail"
)

// Family is a kind of distribution with two parameters.
type Family int

const (
	// NormalFamily: what many small independent causes add up to.
	NormalFamily Family = iota + 1
	// LognormalFamily: what they multiply to, such as leakage.
	LognormalFamily
	// WeibullFamily: the weakest of many spots, such as breakdown; skewed left for
	// a shape above 3.6.
	WeibullFamily
	// GammaFamily: skewed right, less than a lognormal of the same spread.
	GammaFamily
)

// String names the family as a report does.
func (f Family) String() string {
	switch f {
	case NormalFamily:
		return "normal"
	case LognormalFamily:
		return "lognormal"
	case WeibullFamily:
		return "Weibull"
	case GammaFamily:
		return "gamma"
	}
	return "unknown"
}

// Readings are what a distribution is fitted to.
type Readings struct {
	// Values are the readings; NaN is missing.
	Values []float64
	// Censor marks them: 0 exact, +1 the true value is at least Values[i], -1 it
	// is at most that. nil: all exact.
	Censor []int8
	// Upper, if not nil, makes Values lower limits: reading i lies between
	// Values[i] and Upper[i], exact where they are equal. Censor is then not used.
	Upper []float64
	// From and To say that readings were screened: dice with a value outside are
	// not among them, nor is it known how many there were (truncation). Infinite
	// for an open end; both 0: not screened. A clamp is no screening: it keeps
	// the die and marks it.
	From, To float64
}

// screened returns the limits, and whether there are any.
func (r Readings) screened() (from, to float64, yes bool) {
	return r.From, r.To, r.From != 0 || r.To != 0
}

func (r Readings) check() {
	if r.Upper != nil && len(r.Upper) != len(r.Values) || r.Upper == nil && r.Censor != nil && len(r.Censor) != len(r.Values) {
		panic("stats/dist: slice length mismatch")
	}
	if from, to, yes := r.screened(); yes && !(from < to) {
		panic("stats/dist: the limits of screening are not in order")
	}
}

// sample reduces the readings for a fit.
func (r Readings) sample() *sample {
	r.check()
	var s *sample
	if r.Upper != nil {
		s = newSampleBetween(r.Values, r.Upper)
	} else {
		s = newSample(r.Values, r.Censor)
	}
	if from, to, yes := r.screened(); yes {
		s.seen = bound{from, to}
	}
	return s
}

// exact calls f with every exact reading.
func (r Readings) exact(f func(v float64)) {
	for i, v := range r.Values {
		if v == v && (r.Upper == nil && (r.Censor == nil || r.Censor[i] == 0) || r.Upper != nil && r.Upper[i] == v) {
			f(v)
		}
	}
}

// logged is readings in logarithms, for the families of positive values.
type logged struct {
	Readings
	// jacobian is the sum of the logarithms of the exact readings, by which the
	// log-likelihood of the readings themselves is less.
	jacobian float64
	err      error
}

func (r Readings) logs() (l logged) {
	r.check()
	ln := func(x []float64) []float64 {
		out := make([]float64, len(x))
		for i, v := range x {
			if out[i] = math.Log(v); v <= 0 {
				out[i] = math.Inf(-1) // right for a lower limit, which then says nothing
				atLeast := r.Upper == nil && r.Censor != nil && r.Censor[i] > 0
				if !atLeast && (r.Upper == nil || !(r.Upper[i] > 0)) {
					l.err = ErrNotPositive
				}
			}
		}
		return out
	}
	l.Values, l.Censor = ln(r.Values), r.Censor
	if r.Upper != nil {
		l.Upper = ln(r.Upper)
	}
	if from, to, yes := r.screened(); yes {
		l.From, l.To = logOf(from), math.Log(math.Max(to, 0))
		if !(l.From < l.To) {
			l.err = ErrOutside
		}
	}
	l.exact(func(v float64) { l.jacobian += v })
	return l
}

// Distribution is a distribution fitted to readings: [Normal], [Lognormal],
// [Weibull] or [Gamma].
type Distribution interface {
	Family() Family
	// Quantile is the value below which a share p of the population lies.
	Quantile(p float64) float64
	// CDF and Survival are the shares below and above x; each keeps its digits
	// where it is small.
	CDF(x float64) float64
	Survival(x float64) float64
	// Density is per unit of x.
	Density(x float64) float64
	LogLikelihood() float64
	AIC() float64
	BIC() float64
	Count() Counts
	// Parameters are the two parameters with intervals by their standard errors.
	Parameters(confidence float64) []Parameter

	// covariance is that of the two working parameters, in which the likelihood is
	// about quadratic; moved is the distribution with these moved.
	covariance() (aa, ab, bb float64)
	moved(a, b float64) Distribution
}

// Parameter is a named parameter with its interval.
type Parameter struct {
	Name  string
	Value stats.Interval
}

// Fit fits a distribution of a family to readings, with all that [Readings] can
// say of them: bounds, intervals, screening.
//
// NaNs are skipped. It panics on slices of different length and limits out of
// order, and fails when the data do not determine a fit, or, but for the normal
// family, when an exact value is not positive.
func Fit(f Family, r Readings) (Distribution, error) { return fit(f, r, nil) }

// fit takes the logarithms too where the caller has them.
func fit(f Family, r Readings, l *logged) (Distribution, error) {
	if l == nil && f != NormalFamily {
		logs := r.logs()
		l = &logs
	}
	switch f {
	case NormalFamily:
		return fitNormal(r)
	case LognormalFamily:
		return fitLognormal(l)
	case WeibullFamily:
		return fitWeibull(l)
	case GammaFamily:
		return fitGamma(r, l)
	}
	panic("stats/dist: unknown family")
}

// QuantileInterval is the fitted quantile at p with an interval by the delta
// method on its logarithm (for the normal family on the value itself). It
// panics on a p or confidence outside (0, 1). For few readings
// [ProfileQuantile] holds its confidence better.
func QuantileInterval(d Distribution, p, confidence float64) stats.Interval {
	checkConfidence(confidence)
	if !(p > 0 && p < 1) {
		panic("stats/dist: probability outside (0, 1)")
	}
	q := d.Quantile(p)
	iv := stats.Interval{Estimate: q, Method: "delta method on the fit"}
	z := tail.NormalQuantile(0.5 + confidence/2)
	if d.Family() == NormalFamily {
		half := z * Delta(d, func(d Distribution) float64 { return d.Quantile(p) })
		iv.Lower, iv.Upper = q-half, q+half
		return iv
	}
	half := z * Delta(d, func(d Distribution) float64 { return math.Log(d.Quantile(p)) })
	iv.Lower, iv.Upper = q*math.Exp(-half), q*math.Exp(half)
	return iv
}

// ShareInterval is the fitted share of the population below x, or above it, with
// an interval by the delta method on the normal deviate of the share, which
// keeps it within 0 and 1 and its tail in proportion.
func ShareInterval(d Distribution, x float64, above bool, confidence float64) stats.Interval {
	checkConfidence(confidence)
	share := func(d Distribution) float64 {
		if above {
			return d.Survival(x)
		}
		return d.CDF(x)
	}
	iv := stats.Interval{Estimate: share(d), Method: "delta method on the fit"}
	deviate := func(d Distribution) float64 { return deviateOf(share(d)) }
	at := deviate(d)
	if math.IsInf(at, 0) || at != at {
		iv.Lower, iv.Upper = iv.Estimate, iv.Estimate
		iv.Why = "too far out for its size to be known"
		return iv
	}
	half := tail.NormalQuantile(0.5+confidence/2) * Delta(d, deviate)
	iv.Lower, iv.Upper = tail.Normal(-(at - half)), tail.Normal(-(at + half))
	return iv
}

// deviateOf is the normal deviate of a share.
func deviateOf(share float64) float64 { return tail.NormalQuantile(share) }

// Delta is the standard error of a quantity computed from a fit, by the delta
// method: its slopes in the two parameters, and their covariance.
func Delta(d Distribution, quantity func(Distribution) float64) float64 {
	aa, ab, bb := d.covariance()
	u, v := math.Sqrt(aa), math.Sqrt(bb)
	// Differences over a hundredth of a standard error to each side.
	const h = 0.01
	ga := (quantity(d.moved(h*u, 0)) - quantity(d.moved(-h*u, 0))) / (2 * h)
	gb := (quantity(d.moved(0, h*v)) - quantity(d.moved(0, -h*v))) / (2 * h)
	r := 0.0
	if u > 0 && v > 0 {
		r = ab / (u * v)
	}
	return math.Sqrt(math.Max(0, ga*ga+gb*gb+2*r*ga*gb))
}

// Widen returns a fit whose readings are worth less than they are in number: the
// variance of its location times location, that of the logarithm of its spread
// times spread, as dice do that share a wafer (design effects). Estimates stay.
// It panics on a factor below 1.
func Widen(d Distribution, location, spread float64) Distribution {
	if !(location >= 1) || !(spread >= 1) {
		panic("stats/dist: a design effect below 1")
	}
	u, v := math.Sqrt(location), math.Sqrt(spread)
	normal := func(d Normal) Normal {
		d.SEMu, d.SELogSigma, d.Cov = u*d.SEMu, v*d.SELogSigma, u*v*d.Cov
		return d
	}
	switch d := d.(type) {
	case Normal:
		return normal(d)
	case Lognormal:
		return Lognormal{normal(d.Normal)}
	case Weibull:
		d.SELogScale, d.SELogShape, d.Cov = u*d.SELogScale, v*d.SELogShape, u*v*d.Cov
		return d
	case Gamma:
		d.SELogMean, d.SELogShape, d.Cov = u*d.SELogMean, v*d.SELogShape, u*v*d.Cov
		return d
	}
	panic("stats/dist: unknown family")
}

func around(at, se, confidence float64) stats.Interval {
	checkConfidence(confidence)
	half := tail.NormalQuantile(0.5+confidence/2) * se
	return stats.Interval{Estimate: at, Lower: at - half, Upper: at + half, Method: "observed information"}
}

func aroundLog(at, se, confidence float64) stats.Interval {
	checkConfidence(confidence)
	f := math.Exp(tail.NormalQuantile(0.5+confidence/2) * se)
	return stats.Interval{Estimate: at, Lower: at / f, Upper: at * f, Method: "observed information"}
}

func checkConfidence(c float64) {
	if !(c > 0 && c < 1) {
		panic("stats/dist: confidence outside (0, 1)")
	}
}
