package dist

import (
	"math"
	"slices"

	"gonum.org/v1/gonum/mathext"
)

// Gamma is a gamma distribution fitted by maximum likelihood, with density
//
//	x^(shape-1) exp(-x/scale) / (Gamma(shape) scale^shape),  x > 0
//
// Its mean is shape times scale, its coefficient of variation 1/sqrt(shape).
type Gamma struct {
	Shape, Scale float64
	// SELogMean and SELogShape are the standard errors of ln mean and ln shape,
	// Cov their covariance: 0 without bounds or screening.
	SELogMean, SELogShape, Cov float64
	LogLik                     float64
	Counts
}

// FitGamma fits a gamma distribution to positive readings marked as in
// [FitNormal]. NaNs, errors and panics as there, and [ErrNotPositive].
//
// Bounds take numerical derivatives of the incomplete gamma function, once for
// every different bound: readings at a clamp cost nothing, but a bound of its own
// for each of a million readings takes minutes.
func FitGamma(x []float64, censor []int8) (Gamma, error) {
	r := Readings{Values: x, Censor: censor}
	l := r.logs()
	return fitGamma(r, &l)
}

func fitGamma(r Readings, l *logged) (Gamma, error) {
	nan := math.NaN()
	none := Gamma{Shape: nan, Scale: nan, SELogMean: nan, SELogShape: nan, Cov: nan, LogLik: nan}
	g, c, start, err := newGammaSample(r, l)
	none.Counts = c
	if err != nil {
		return none, err
	}
	switch {
	case !(start.theta > 1e-9 && start.theta < 1e9):
		return none, ErrNoFit
	case start.theta > 3e4 && len(g.list) > 0:
		return none, ErrNarrow
	}
	top, ok := climb(g.at(start.theta, start.delta), g.at)
	if !ok {
		return none, ErrNoFit
	}
	// Of ln theta, theta^2 being the shape, and delta.
	t := top.theta
	imm, ims, iss := -top.ldd, -top.ltd*t, -top.ltt*t*t
	det := imm*iss - ims*ims
	shape := t * t
	d := Gamma{Shape: shape, Scale: g.mean * math.Exp(top.delta) / shape, Counts: c, LogLik: top.l,
		SELogMean: math.Sqrt(iss / det), SELogShape: 2 * math.Sqrt(imm/det), Cov: -2 * ims / det}
	if !(d.SELogShape < 20) {
		return none, ErrNoFit
	}
	return d, nil
}

// gammaSample is what the likelihood needs: of the exact readings their mean and
// the mean of ln(x/mean), and the bounds.
type gammaSample struct {
	n, mean, logs float64
	list          []counted
}

func newGammaSample(r Readings, l *logged) (g gammaSample, c Counts, start point, err error) {
	if l.err != nil {
		return g, c, start, l.err
	}
	r.Values = slices.Clone(r.Values)
	for i, v := range r.Values {
		if v <= 0 {
			r.Values[i] = math.Inf(-1) // a lower limit that says nothing
		}
	}
	s := r.sample()
	if s.seen != (bound{}) {
		s.seen.lo = math.Max(s.seen.lo, 0)
	}
	if c, err = s.finish(); err != nil {
		return g, c, start, err
	}
	g.list = s.list
	centre, unit := s.scale()
	if g.mean = centre; s.exact.n > 0 {
		g.n, g.mean = float64(s.exact.n), s.exact.mean
		r.exact(func(v float64) { // ln(1+d) less d, which sums to 0: no digits lost for a small spread
			d := v/g.mean - 1
			g.logs += math.Log1p(d) - d
		})
		g.logs /= g.n
	}
	start = point{theta: centre / unit, delta: math.Log(centre / g.mean)}
	if g.n > 0 && g.n == float64(c.N) { // nothing but exact readings: start near the top (Minka 2002)
		v := -g.logs
		start.theta = math.Sqrt((3 - v + math.Sqrt((v-3)*(v-3)+24*v)) / (12 * v))
		start.delta = 0
	}
	return g, c, start, nil
}

// at is the likelihood at shape = theta^2 and mean = g.mean exp(delta).
func (g gammaSample) at(theta, delta float64) point {
	p := point{theta: theta, delta: delta}
	k := theta * theta
	if g.n > 0 {
		l, slope, curve := stirling(k)
		e := math.Exp(-delta)
		off := g.logs - delta - math.Expm1(-delta)
		p.l = g.n * (l + k*off - math.Log(g.mean) - g.logs)
		lk, lkk := slope+off, curve
		p.lt = g.n * lk * 2 * theta
		p.ld = g.n * k * (e - 1)
		p.ltt = g.n * (lkk*4*k + 2*lk)
		p.ltd = g.n * (e - 1) * 2 * theta
		p.ldd = -g.n * k * e
	}
	for _, c := range g.list {
		g.bound(&p, c)
	}
	return p
}

// bound adds a bound, with derivatives by differences of fourth order.
func (g gammaSample) bound(p *point, c counted) {
	const h = 0.02
	ht, hd := h*p.theta, h/math.Max(p.theta, 1)
	f := func(i, j float64) float64 {
		t, mean := p.theta+i*ht, g.mean*math.Exp(p.delta+j*hd)
		return logGammaBetween(t*t, t*t*c.lo/mean, t*t*c.hi/mean)
	}
	f0 := f(0, 0)
	a, b, d, e := f(1, 0), f(-1, 0), f(2, 0), f(-2, 0)
	p.lt += c.n * (8*(a-b) - (d - e)) / (12 * ht)
	p.ltt += c.n * (16*(a+b) - (d + e) - 30*f0) / (12 * ht * ht)
	a, b, d, e = f(0, 1), f(0, -1), f(0, 2), f(0, -2)
	p.ld += c.n * (8*(a-b) - (d - e)) / (12 * hd)
	p.ldd += c.n * (16*(a+b) - (d + e) - 30*f0) / (12 * hd * hd)
	p.ltd += c.n * (f(1, 1) - f(1, -1) - f(-1, 1) + f(-1, -1)) / (4 * ht * hd)
	p.l += c.n * f0
}

// stirling returns k ln k - k - ln Gamma(k) with its first two derivatives. For a
// large shape its terms all but cancel, and the asymptotic series is used
// (Abramowitz and Stegun 6.1.41).
func stirling(k float64) (l, slope, curve float64) {
	if !(k > 1e-30) { // a spread beyond all measure
		return math.Inf(-1), math.NaN(), math.NaN()
	}
	if k < 20 {
		g, _ := math.Lgamma(k)
		ln := math.Log(k)
		return k*ln - k - g, ln - mathext.Digamma(k), 1/k - mathext.Zeta(2, k)
	}
	u := 1 / k
	v := u * u
	l = 0.5*math.Log(k/(2*math.Pi)) - u*(1./12-v*(1./360-v*(1./1260-v/1680)))
	slope = u * (0.5 + u*(1./12-v*(1./120-v*(1./252-v*(1./240-v/132)))))
	curve = -v * (0.5 + u*(1./6-v*(1./30-v*(1./42-v*(1./30-v*5/66)))))
	return l, slope, curve
}

// logGammaBetween is ln(P(k, b) - P(k, a)), a and b in units of the scale.
func logGammaBetween(k, a, b float64) float64 {
	switch {
	case a <= 0 && math.IsInf(b, 1):
		return 0
	case a <= 0:
		return logGammaBelow(k, b)
	case math.IsInf(b, 1):
		return logGammaAbove(k, a)
	}
	if w := (b - a) / math.Sqrt(k); w < 1e-4 { // the density in the middle
		m := (a + b) / 2
		g, _ := math.Lgamma(k)
		return (k-1)*math.Log(m) - m - g + math.Log(b-a)
	}
	if a > k { // differences of the smaller tail
		l, m := logGammaAbove(k, a), logGammaAbove(k, b)
		return l + math.Log1p(-math.Exp(m-l))
	}
	l, m := logGammaBelow(k, b), logGammaBelow(k, a)
	return l + math.Log1p(-math.Exp(m-l))
}

func logGammaBelow(k, x float64) float64 {
	if p := mathext.GammaIncReg(k, x); p > 1e-280 {
		if p > 0.5 {
			return math.Log1p(-mathext.GammaIncRegComp(k, x))
		}
		return math.Log(p)
	}
	g, _ := math.Lgamma(k + 1)
	sum, term := 1.0, 1.0
	for i := 1.0; i < 1e5 && term > 1e-17*sum; i++ {
		term *= x / (k + i)
		sum += term
	}
	return k*math.Log(x) - x - g + math.Log(sum)
}

func logGammaAbove(k, x float64) float64 {
	if q := mathext.GammaIncRegComp(k, x); q > 1e-280 {
		if q > 0.5 {
			return math.Log1p(-mathext.GammaIncReg(k, x))
		}
		return math.Log(q)
	}
	// Far out: x^k exp(-x)/Gamma(k) over a continued fraction (Abramowitz and
	// Stegun 6.5.31), from its far end.
	f := x
	for i := 200.0; i >= 1; i-- {
		f = x + (i-k)/(1+i/f)
	}
	g, _ := math.Lgamma(k)
	return k*math.Log(x) - x - g - math.Log(f)
}

// Quantile is the fitted quantile at p.
func (d Gamma) Quantile(p float64) float64 {
	switch {
	case p == 0:
		return 0
	case p == 1:
		return math.Inf(1)
	case !(p > 0 && p < 1):
		return math.NaN()
	}
	// The library's inverse, which may be off by a percent in the far tails, and
	// Newton's steps on the logarithm of the smaller tail.
	x := mathext.GammaIncRegInv(d.Shape, p)
	if p > 0.5 {
		x = mathext.GammaIncRegCompInv(d.Shape, 1-p)
	}
	u := Gamma{Shape: d.Shape, Scale: 1}
	for range 20 {
		var step float64 // of ln x
		if p > 0.5 {
			l := logGammaAbove(d.Shape, x)
			step = (l - math.Log1p(-p)) / (x * math.Exp(math.Log(u.Density(x))-l))
		} else {
			l := logGammaBelow(d.Shape, x)
			step = -(l - math.Log(p)) / (x * math.Exp(math.Log(u.Density(x))-l))
		}
		if step != step || math.Abs(step) > 2 {
			break
		}
		x *= math.Exp(step)
		if math.Abs(step) < 1e-15 {
			break
		}
	}
	return d.Scale * x
}

// CDF is the fitted share of the population below x; 0 for x <= 0.
func (d Gamma) CDF(x float64) float64 {
	if x <= 0 {
		return 0
	}
	return mathext.GammaIncReg(d.Shape, x/d.Scale)
}

// Survival is the fitted share above x; 1 for x <= 0.
func (d Gamma) Survival(x float64) float64 {
	if x <= 0 {
		return 1
	}
	return mathext.GammaIncRegComp(d.Shape, x/d.Scale)
}

// Density is the fitted probability density at x; 0 for x <= 0.
func (d Gamma) Density(x float64) float64 {
	if x <= 0 {
		return 0
	}
	l, _, _ := stirling(d.Shape)
	u := x/(d.Scale*d.Shape) - 1 // from the mean
	return math.Exp(l+d.Shape*(math.Log1p(u)-u)) / x
}

// AIC is Akaike's criterion 4 - 2 LogLik.
func (d Gamma) AIC() float64 { return 4 - 2*d.LogLik }

// BIC is the Bayesian criterion 2 ln N - 2 LogLik.
func (d Gamma) BIC() float64 { return 2*math.Log(float64(d.N)) - 2*d.LogLik }

// Family is GammaFamily.
func (d Gamma) Family() Family { return GammaFamily }

// LogLikelihood is that at the maximum.
func (d Gamma) LogLikelihood() float64 { return d.LogLik }

// Count says what the fit rests on.
func (d Gamma) Count() Counts { return d.Counts }

// Parameters are shape and mean with their intervals.
func (d Gamma) Parameters(confidence float64) []Parameter {
	return []Parameter{
		{"shape", aroundLog(d.Shape, d.SELogShape, confidence)},
		{"mean", aroundLog(d.Shape*d.Scale, d.SELogMean, confidence)},
	}
}

func (d Gamma) covariance() (aa, ab, bb float64) {
	return d.SELogMean * d.SELogMean, d.Cov, d.SELogShape * d.SELogShape
}

// moved moves ln mean and ln shape.
func (d Gamma) moved(a, b float64) Distribution {
	mean := d.Shape * d.Scale * math.Exp(a)
	d.Shape *= math.Exp(b)
	d.Scale = mean / d.Shape
	return d
}
