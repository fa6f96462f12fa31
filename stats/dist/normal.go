package dist

import (
	"math"

	"kneepoint/stats/internal/tail"
)

// Normal is a normal distribution fitted by maximum likelihood.
type Normal struct {
	Mu, Sigma float64
	// SEMu and SELogSigma are the standard errors of Mu and of ln Sigma, Cov their
	// covariance.
	SEMu, SELogSigma, Cov float64
	LogLik                float64
	Counts
}

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
	return fitNormal(Readings{Values: x, Censor: censor})
}

// FitNormalBetween fits a normal distribution to readings each known to lie
// between lower[i] and upper[i]: equal limits are an exact reading, an infinite
// one is an open end. A pair with a NaN is skipped. It panics when the lengths
// differ or a lower limit is above its upper one; otherwise as [FitNormal].
func FitNormalBetween(lower, upper []float64) (Normal, error) {
	if upper == nil {
		upper = []float64{}
	}
	return fitNormal(Readings{Values: lower, Upper: upper})
}

func fitNormal(r Readings) (Normal, error) {
	s := r.sample()
	c, err := s.finish()
	if err != nil {
		return noNormal(c), err
	}
	if len(s.list) == 0 {
		return closedForm(c, s.exact), nil
	}
	top, err := s.climbScale(1, 0)
	if err != nil {
		return noNormal(c), err
	}
	return Normal{Mu: top.mu, Sigma: top.sigma, SEMu: top.seMu, SELogSigma: top.seLogSigma, Cov: top.cov, LogLik: top.logLik, Counts: c}, nil
}

func noNormal(c Counts) Normal {
	nan := math.NaN()
	return Normal{Mu: nan, Sigma: nan, SEMu: nan, SELogSigma: nan, Cov: nan, LogLik: nan, Counts: c}
}

// closedForm is the fit without bounds.
func closedForm(c Counts, e exact) Normal {
	d := Normal{Counts: c}
	n := float64(e.n)
	d.Mu, d.Sigma = e.mean, math.Sqrt(e.ss/n)
	d.SEMu, d.SELogSigma, d.Cov = d.Sigma/math.Sqrt(n), 1/math.Sqrt(2*n), 0
	d.LogLik = -n*math.Log(d.Sigma) - n/2*(math.Log(2*math.Pi)+1)
	return d
}

// Quantile is the fitted quantile at p.
func (d Normal) Quantile(p float64) float64 { return d.Mu + d.Sigma*tail.NormalQuantile(p) }

// CDF is the fitted share of the population below x.
func (d Normal) CDF(x float64) float64 { return 0.5 * math.Erfc((d.Mu-x)/(d.Sigma*math.Sqrt2)) }

// Survival is the fitted share above x, with its digits kept where it is small.
func (d Normal) Survival(x float64) float64 { return 0.5 * math.Erfc((x-d.Mu)/(d.Sigma*math.Sqrt2)) }

// Density is the fitted probability density at x, per unit of x.
func (d Normal) Density(x float64) float64 { return phi((x-d.Mu)/d.Sigma) / d.Sigma }

// AIC is Akaike's criterion 4 - 2 LogLik.
func (d Normal) AIC() float64 { return 4 - 2*d.LogLik }

// BIC is the Bayesian criterion 2 ln N - 2 LogLik.
func (d Normal) BIC() float64 { return 2*math.Log(float64(d.N)) - 2*d.LogLik }

// Family is NormalFamily.
func (d Normal) Family() Family { return NormalFamily }

// LogLikelihood is that at the maximum.
func (d Normal) LogLikelihood() float64 { return d.LogLik }

// Count says what the fit rests on.
func (d Normal) Count() Counts { return d.Counts }

// Parameters are mu and sigma with their intervals.
func (d Normal) Parameters(confidence float64) []Parameter {
	return []Parameter{
		{"mu", around(d.Mu, d.SEMu, confidence)},
		{"sigma", aroundLog(d.Sigma, d.SELogSigma, confidence)},
	}
}

func (d Normal) covariance() (aa, ab, bb float64) {
	return d.SEMu * d.SEMu, d.Cov, d.SELogSigma * d.SELogSigma
}

func (d Normal) moved(a, b float64) Distribution {
	d.Mu += a
	d.Sigma *= math.Exp(b)
	return d
}

// Lognormal is the distribution of a value whose logarithm is Normal; LogLik is
// that of the values themselves.
type Lognormal struct{ Normal }

// FitLognormal fits the logarithms of x as [FitNormal] does. Every value must be
// positive.
func FitLognormal(x []float64, censor []int8) (Lognormal, error) {
	l := Readings{Values: x, Censor: censor}.logs()
	return fitLognormal(&l)
}

func fitLognormal(l *logged) (Lognormal, error) {
	if l.err != nil {
		return Lognormal{noNormal(Counts{})}, l.err
	}
	n, err := fitNormal(l.Readings)
	n.LogLik -= l.jacobian
	return Lognormal{n}, err
}

// Quantile is the fitted quantile at p.
func (d Lognormal) Quantile(p float64) float64 { return math.Exp(d.Normal.Quantile(p)) }

// CDF is the fitted share of the population below x; 0 for x <= 0.
func (d Lognormal) CDF(x float64) float64 { return d.Normal.CDF(logOf(x)) }

// Survival is the fitted share above x; 1 for x <= 0.
func (d Lognormal) Survival(x float64) float64 { return d.Normal.Survival(logOf(x)) }

// Density is the fitted probability density at x; 0 for x <= 0.
func (d Lognormal) Density(x float64) float64 {
	if x <= 0 {
		return 0
	}
	return d.Normal.Density(math.Log(x)) / x
}

// logOf is ln x, -Inf at and below 0.
func logOf(x float64) float64 {
	if x <= 0 {
		return math.Inf(-1)
	}
	return math.Log(x)
}

// Family is LognormalFamily.
func (d Lognormal) Family() Family { return LognormalFamily }

// Parameters are the mean and sigma of the logarithms with their intervals.
func (d Lognormal) Parameters(confidence float64) []Parameter {
	return []Parameter{
		{"mu of ln x", around(d.Mu, d.SEMu, confidence)},
		{"sigma of ln x", aroundLog(d.Sigma, d.SELogSigma, confidence)},
	}
}

func (d Lognormal) moved(a, b float64) Distribution {
	return Lognormal{d.Normal.moved(a, b).(Normal)}
}
