package dist

import "math"

// Weibull is a two-parameter Weibull distribution fitted by maximum likelihood,
//
//	F(x) = 1 - exp(-(x/scale)^shape),  x > 0
//
// Scale, the 63.2 % quantile, is in the readings' unit.
type Weibull struct {
	Shape, Scale float64
	// SELogScale and SELogShape are the standard errors of ln Scale and ln Shape,
	// Cov the covariance of ln Scale and -ln Shape (the location and the logarithm
	// of the spread of ln x).
	SELogScale, SELogShape, Cov float64
	LogLik                      float64
	Counts
}

// FitWeibull fits a Weibull distribution to positive readings marked as in
// [FitNormal]. NaNs, errors and panics as there, and [ErrNotPositive].
//
// ln x has the smallest-extreme-value distribution, of which location and spread
// are found as for the normal one, by the same method.
func FitWeibull(x []float64, censor []int8) (Weibull, error) {
	l := Readings{Values: x, Censor: censor}.logs()
	return fitWeibull(&l)
}

func fitWeibull(l *logged) (Weibull, error) {
	nan := math.NaN()
	none := Weibull{Shape: nan, Scale: nan, SELogScale: nan, SELogShape: nan, Cov: nan, LogLik: nan}
	if l.err != nil {
		return none, l.err
	}
	s := l.sample()
	s.kernel = extremeKernel
	l.exact(func(v float64) { s.values = append(s.values, v) })
	c, err := s.finish()
	none.Counts = c
	if err != nil {
		return none, err
	}
	// The moments of ln x: its sigma is sd sqrt(6)/pi, its mu the mean + 0.5772 sigma.
	top, err := s.climbScale(math.Pi/math.Sqrt(6), eulerGamma)
	if err != nil {
		return none, err
	}
	return Weibull{Shape: 1 / top.sigma, Scale: math.Exp(top.mu), SELogScale: top.seMu, SELogShape: top.seLogSigma,
		Cov: top.cov, LogLik: top.logLik - l.jacobian, Counts: c}, nil
}

const eulerGamma = 0.57721566490153286061

// extremeKernel is the standard smallest-extreme-value distribution,
// F(z) = 1 - exp(-exp(z)).
var extremeKernel = kernel{
	between: func(a, b float64) (l, ha, hb float64) {
		density := func(z float64) float64 { return z - math.Exp(z) } // its logarithm
		switch {
		case math.IsInf(b, 1):
			return -math.Exp(a), math.Exp(a), 0
		case math.IsInf(a, -1):
			l = math.Log(-math.Expm1(-math.Exp(b)))
			if b < -36 {
				l = b
			}
		default: // exp(-exp(a)) - exp(-exp(b))
			l = -math.Exp(a) + math.Log(-math.Expm1(-math.Exp(a)*math.Expm1(b-a)))
			ha = math.Exp(density(a) - l)
		}
		return l, ha, math.Exp(density(b) - l)
	},
	slope: func(z float64) float64 { return 1 - math.Exp(z) },
	exact: func(p *point, s *sample, centre, unit float64) {
		var l, s0, s1, s2, y0, y1 float64
		for _, v := range s.values {
			y := (v - centre) / unit
			z := p.theta*y - p.delta
			e := math.Exp(z)
			l += z - e
			s0 += e
			s1 += float64(e * y)
			s2 += float64(e * y * y)
			y1 += y
			y0++
		}
		p.l = l + y0*math.Log(p.theta)
		p.lt = y0/p.theta + y1 - s1
		p.ld = s0 - y0
		p.ltt = -y0/(p.theta*p.theta) - s2
		p.ltd = s1
		p.ldd = -s0
	},
}

// Quantile is the fitted quantile at p.
func (d Weibull) Quantile(p float64) float64 {
	return d.Scale * math.Pow(-math.Log1p(-p), 1/d.Shape)
}

// CDF is the fitted share of the population below x; 0 for x <= 0.
func (d Weibull) CDF(x float64) float64 { return -math.Expm1(-d.power(x)) }

// Survival is the fitted share above x; 1 for x <= 0.
func (d Weibull) Survival(x float64) float64 { return math.Exp(-d.power(x)) }

func (d Weibull) power(x float64) float64 {
	if x <= 0 {
		return 0
	}
	return math.Pow(x/d.Scale, d.Shape)
}

// Density is the fitted probability density at x; 0 for x <= 0.
func (d Weibull) Density(x float64) float64 {
	if x <= 0 {
		return 0
	}
	u := d.power(x)
	return d.Shape / x * u * math.Exp(-u)
}

// AIC is Akaike's criterion 4 - 2 LogLik.
func (d Weibull) AIC() float64 { return 4 - 2*d.LogLik }

// BIC is the Bayesian criterion 2 ln N - 2 LogLik.
func (d Weibull) BIC() float64 { return 2*math.Log(float64(d.N)) - 2*d.LogLik }

// Family is WeibullFamily.
func (d Weibull) Family() Family { return WeibullFamily }

// LogLikelihood is that at the maximum.
func (d Weibull) LogLikelihood() float64 { return d.LogLik }

// Count says what the fit rests on.
func (d Weibull) Count() Counts { return d.Counts }

// Parameters are shape and scale with their intervals.
func (d Weibull) Parameters(confidence float64) []Parameter {
	return []Parameter{
		{"shape", aroundLog(d.Shape, d.SELogShape, confidence)},
		{"scale", aroundLog(d.Scale, d.SELogScale, confidence)},
	}
}

func (d Weibull) covariance() (aa, ab, bb float64) {
	return d.SELogScale * d.SELogScale, d.Cov, d.SELogShape * d.SELogShape
}

// moved moves ln Scale and the logarithm of the spread of ln x.
func (d Weibull) moved(a, b float64) Distribution {
	d.Scale *= math.Exp(a)
	d.Shape *= math.Exp(-b)
	return d
}
