package dist

import (
	"errors"
	"math"

	"gonum.org/v1/gonum/stat/distuv"
)

// Normal is a normal distribution fitted by maximum likelihood.
type Normal struct {
	Mu, Sigma float64
	// SEMu and SELogSigma are the standard errors of Mu and of ln Sigma, Cov their
	// covariance.
	SEMu, SELogSigma, Cov float64
	LogLik                float64
	// N counts readings: exact ones and bounds. Left counts "at most", Right "at
	// least", Between readings known to lie between two values.
	N, Left, Right, Between int
}

// Why a fit cannot be made.
var (
	ErrNoValues = errors.New("no values")
	ErrTooFew   = errors.New("fewer than two different exact values")
	ErrInfinite = errors.New("an infinite value")
	ErrNoFit    = errors.New("the likelihood has no maximum at a positive spread")
)

// FitNormal fits a normal distribution to x. censor (nil: all exact) marks each
// reading: 0 exact, +1 the true value is at least x, -1 it is at most x.
//
// NaNs are skipped. Without censored readings Mu is the mean and Sigma the
// standard deviation with divisor n, as maximum likelihood has it. It panics
// when lengths differ and fails with one of the errors above when the data do
// not determine a fit.
//
// The likelihood is concave in 1/sigma and mu/sigma, so that Newton's method
// finds its only maximum (Olsen 1978, Econometrica 46, 1211-1215). Equal
// readings are counted once: a lot clamped at one voltage costs no more than an
// uncensored one.
func FitNormal(x []float64, censor []int8) (Normal, error) {
	if censor != nil && len(censor) != len(x) {
		panic("stats/dist: slice length mismatch")
	}
	return newSample(x, censor).fit()
}

// FitNormalBetween fits a normal distribution to readings each known to lie
// between lower[i] and upper[i]: equal limits are an exact reading, an infinite
// one is an open end. A pair with a NaN is skipped. It panics when the lengths
// differ or a lower limit is above its upper one; otherwise as [FitNormal].
func FitNormalBetween(lower, upper []float64) (Normal, error) {
	if len(lower) != len(upper) {
		panic("stats/dist: slice length mismatch")
	}
	var s sample
	exact := make([]float64, 0, len(lower))
	for i, a := range lower {
		b := upper[i]
		switch {
		case a != a || b != b:
		case a > b:
			panic("stats/dist: lower limit above upper limit")
		case a == b:
			exact = append(exact, a)
		default:
			s.bound(a, b)
		}
	}
	s.exact.start(exact, nil)
	for _, v := range exact {
		s.exact.add(v)
	}
	return s.fit()
}

// Quantile is the fitted quantile at p.
func (d Normal) Quantile(p float64) float64 {
	return d.Mu + d.Sigma*distuv.UnitNormal.Quantile(p)
}

// CDF is the fitted share of the population below x.
func (d Normal) CDF(x float64) float64 { return 0.5 * math.Erfc((d.Mu-x)/(d.Sigma*math.Sqrt2)) }

// Survival is the fitted share above x, with its digits kept where it is small.
func (d Normal) Survival(x float64) float64 { return 0.5 * math.Erfc((x-d.Mu)/(d.Sigma*math.Sqrt2)) }

// AIC is Akaike's criterion 4 - 2 LogLik.
func (d Normal) AIC() float64 { return 4 - 2*d.LogLik }

// BIC is the Bayesian criterion 2 ln N - 2 LogLik.
func (d Normal) BIC() float64 { return 2*math.Log(float64(d.N)) - 2*d.LogLik }

// Censored is the number of readings that are only bounds.
func (d Normal) Censored() int { return d.Left + d.Right + d.Between }

// Lognormal is the distribution of a value whose logarithm is Normal; LogLik is
// that of the values themselves.
type Lognormal struct{ Normal }

// ErrNotPositive is why a lognormal fit cannot be made.
var ErrNotPositive = errors.New("a value that is not positive")

// FitLognormal fits the logarithms of x as [FitNormal] does. Every value must be
// positive.
func FitLognormal(x []float64, censor []int8) (Lognormal, error) {
	logs := make([]float64, len(x))
	var jacobian float64
	for i, v := range x {
		if v <= 0 {
			return Lognormal{}, ErrNotPositive
		}
		logs[i] = math.Log(v)
		if v == v && (censor == nil || censor[i] == 0) {
			jacobian += logs[i]
		}
	}
	n, err := FitNormal(logs, censor)
	n.LogLik -= jacobian
	return Lognormal{n}, err
}

// Quantile is the fitted quantile at p.
func (d Lognormal) Quantile(p float64) float64 { return math.Exp(d.Normal.Quantile(p)) }

// CDF is the fitted share of the population below x > 0.
func (d Lognormal) CDF(x float64) float64 { return d.Normal.CDF(math.Log(x)) }

// Survival is the fitted share above x > 0.
func (d Lognormal) Survival(x float64) float64 { return d.Normal.Survival(math.Log(x)) }
