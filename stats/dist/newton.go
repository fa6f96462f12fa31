package dist

import (
	"cmp"
	"math"
	"slices"

	"kneepoint/stats"
)

// sample is a data set reduced to what the likelihood needs: the moments of the
// exact readings and how often each bound occurs.
type sample struct {
	exact  exact
	bounds map[bound]int
	list   []counted
}

type bound struct{ lo, hi float64 }

type counted struct {
	bound
	n float64
}

// newSample reduces readings marked as in [FitNormal].
func newSample(x []float64, censor []int8) *sample {
	var s sample
	s.exact.start(x, censor)
	for i, v := range x {
		switch {
		case v != v:
		case censor == nil || censor[i] == 0:
			s.exact.add(v)
		case censor[i] > 0:
			s.bound(v, math.Inf(1))
		default:
			s.bound(math.Inf(-1), v)
		}
	}
	return &s
}

// byBound orders bounds, so that sums over them run in a fixed order.
func byBound(a, b counted) int {
	return cmp.Or(cmp.Compare(a.lo, b.lo), cmp.Compare(a.hi, b.hi))
}

func (s *sample) bound(lo, hi float64) {
	if s.bounds == nil {
		s.bounds = map[bound]int{}
	}
	s.bounds[bound{lo, hi}]++
}

// exact holds count, mean and sum of squares about it.
type exact struct {
	n           int
	mean, ss    float64
	centre, sum float64
	square      float64
	min, max    float64
}

// start takes the mean first, so that add can sum squares about it.
func (e *exact) start(x []float64, censor []int8) {
	if censor == nil {
		e.centre = stats.Mean(x)
	} else {
		only := make([]float64, 0, len(x))
		for i, v := range x {
			if censor[i] == 0 {
				only = append(only, v)
			}
		}
		e.centre = stats.Mean(only)
	}
	e.min, e.max = math.Inf(1), math.Inf(-1)
}

func (e *exact) add(v float64) {
	d := v - e.centre
	e.n++
	e.sum += d
	e.square += float64(d * d)
	e.min, e.max = min(e.min, v), max(e.max, v)
}

func (e *exact) finish() {
	if e.n == 0 {
		return
	}
	n := float64(e.n)
	e.mean = e.centre + e.sum/n
	e.ss = math.Max(0, e.square-e.sum*e.sum/n)
	if e.min == e.max {
		e.mean, e.ss = e.min, 0
	}
}

// fit maximises the likelihood.
func (s *sample) fit() (Normal, error) {
	s.exact.finish()
	var d Normal
	d.N = s.exact.n
	for b, n := range s.bounds {
		s.list = append(s.list, counted{b, float64(n)})
		d.N += n
		switch {
		case math.IsInf(b.lo, -1) && math.IsInf(b.hi, 1):
			d.N -= n // says nothing
		case math.IsInf(b.lo, -1):
			d.Left += n
		case math.IsInf(b.hi, 1):
			d.Right += n
		default:
			d.Between += n
		}
	}
	s.list = slices.DeleteFunc(s.list, func(c counted) bool {
		return math.IsInf(c.lo, -1) && math.IsInf(c.hi, 1)
	})
	slices.SortFunc(s.list, byBound)
	nan := math.NaN()
	d.Mu, d.Sigma, d.SEMu, d.SELogSigma, d.Cov, d.LogLik = nan, nan, nan, nan, nan, nan
	if d.N == 0 {
		return d, ErrNoValues
	}
	if err := s.check(); err != nil {
		return d, err
	}
	if len(s.list) == 0 {
		return closedForm(d, s.exact), nil
	}
	centre, unit := s.scale()
	top, ok := s.climb(centre, unit)
	if !ok {
		return d, ErrNoFit
	}
	fit := top.normal(d, s, centre, unit)
	if !(fit.SELogSigma < 20) { // flat to the end: bounds that no spread contradicts
		return d, ErrNoFit
	}
	return fit, nil
}

func (s *sample) check() error {
	if math.IsInf(s.exact.min, -1) && s.exact.n > 0 || math.IsInf(s.exact.max, 1) && s.exact.n > 0 {
		return ErrInfinite
	}
	for _, c := range s.list {
		if math.IsInf(c.lo, 1) || math.IsInf(c.hi, -1) {
			return ErrInfinite
		}
	}
	between := false
	for _, c := range s.list {
		between = between || !math.IsInf(c.lo, 0) && !math.IsInf(c.hi, 0)
	}
	if !(s.exact.ss > 0) && !between {
		return ErrTooFew
	}
	return nil
}

// closedForm is the fit without bounds.
func closedForm(d Normal, e exact) Normal {
	n := float64(e.n)
	d.Mu, d.Sigma = e.mean, math.Sqrt(e.ss/n)
	d.SEMu, d.SELogSigma, d.Cov = d.Sigma/math.Sqrt(n), 1/math.Sqrt(2*n), 0
	d.LogLik = -n*math.Log(d.Sigma) - n/2*(math.Log(2*math.Pi)+1)
	return d
}

// scale gives location and spread of all readings taken at face value; the
// search works in these units, whether the readings are volts or picoamperes.
func (s *sample) scale() (centre, unit float64) {
	face := make([]counted, 0, len(s.list))
	n := float64(s.exact.n)
	sum := n * s.exact.mean
	for _, c := range s.list {
		at := c.lo
		if math.IsInf(c.lo, -1) {
			at = c.hi
		} else if !math.IsInf(c.hi, 1) {
			at = c.lo + (c.hi-c.lo)/2
		}
		face = append(face, counted{bound{at, at}, c.n})
		n += c.n
		sum += c.n * at
	}
	centre = sum / n
	ss := s.exact.ss
	if s.exact.n > 0 {
		ss += float64(s.exact.n) * (s.exact.mean - centre) * (s.exact.mean - centre)
	}
	width := 0.0
	for i, c := range face {
		ss += c.n * (c.lo - centre) * (c.lo - centre)
		if w := s.list[i].hi - s.list[i].lo; !math.IsInf(w, 0) {
			width = math.Max(width, w)
		}
	}
	unit = math.Sqrt(ss / n)
	if !(unit > 0) {
		unit = width
	}
	return centre, unit
}

// point is the likelihood at theta = 1/sigma and delta = mu/sigma in the units
// of the search: its value, slopes and curvatures.
type point struct {
	theta, delta  float64
	l, lt, ld     float64
	ltt, ltd, ldd float64
}

func (s *sample) at(theta, delta, centre, unit float64) point {
	p := point{theta: theta, delta: delta}
	n := float64(s.exact.n)
	if n > 0 {
		m, ss := (s.exact.mean-centre)/unit, s.exact.ss/(unit*unit)
		z := theta*m - delta
		p.l = n*math.Log(theta) - 0.5*(theta*theta*ss+n*z*z) - n/2*math.Log(2*math.Pi)
		p.lt = n/theta - theta*ss - n*z*m
		p.ld = n * z
		p.ltt = -n/(theta*theta) - ss - n*m*m
		p.ltd = n * m
		p.ldd = -n
	}
	for _, c := range s.list {
		a, b := (c.lo-centre)/unit, (c.hi-centre)/unit
		p.bound(c.n, a, b)
	}
	return p
}

// bound adds n readings between a and b.
func (p *point) bound(n, a, b float64) {
	za, zb := p.theta*a-p.delta, p.theta*b-p.delta
	var l, ha, hb float64
	switch {
	case math.IsInf(a, -1):
		l, hb = logPhi(zb), hazard(zb)
		a, za = 0, 0
	case math.IsInf(b, 1):
		l, ha = logPhi(-za), hazard(-za)
		b, zb = 0, 0
	default:
		l, ha, hb = logBetween(za, zb)
	}
	// With h = phi/(Phi(zb)-Phi(za)): dl/dzb = hb, dl/dza = -ha.
	gt, gd := b*hb-a*ha, ha-hb
	p.l += n * l
	p.lt += n * gt
	p.ld += n * gd
	p.ltt += n * (-zb*hb*b*b + za*ha*a*a - gt*gt)
	p.ltd += n * (zb*hb*b - za*ha*a - gt*gd)
	p.ldd += n * (-zb*hb + za*ha - gd*gd)
}

// climb is Newton's method with the step halved until the likelihood rises.
func (s *sample) climb(centre, unit float64) (point, bool) {
	p := s.at(1, 0, centre, unit)
	for range 200 {
		det := p.ltt*p.ldd - p.ltd*p.ltd
		if !(det > 0) || !(p.ltt < 0) {
			return p, false
		}
		dt := -(p.ldd*p.lt - p.ltd*p.ld) / det
		dd := -(p.ltt*p.ld - p.ltd*p.lt) / det
		gain := p.lt*dt + p.ld*dd // twice what the quadratic model promises
		if gain < 1e-18*math.Max(1, math.Abs(p.l)) {
			q := s.at(p.theta+dt, p.delta+dd, centre, unit)
			if q.theta > 0 && q.l >= p.l-1e-9 {
				p = q
			}
			return p, true
		}
		step, moved := 1.0, false
		for range 60 {
			if t := p.theta + step*dt; t > 0 {
				if q := s.at(t, p.delta+step*dd, centre, unit); q.l >= p.l-1e-13*math.Abs(p.l) {
					p, moved = q, true
					break
				}
			}
			step /= 2
		}
		if !moved {
			return p, true // rounding: no step can rise any more
		}
		if p.theta > 1e9 { // the spread runs to nothing
			return p, false
		}
	}
	return p, false
}

// normal turns the top into a fit in the readings' units, with the covariance
// of mu and ln sigma.
func (p point) normal(d Normal, s *sample, centre, unit float64) Normal {
	mu, sigma := p.delta/p.theta, 1/p.theta
	// theta = exp(-s), delta = mu exp(-s): at the top the information transforms
	// by the Jacobian alone.
	t, e := p.theta, p.delta
	imm := -p.ldd * t * t
	ims := -(t * (-t*p.ltd - e*p.ldd))
	iss := -(t*t*p.ltt + 2*t*e*p.ltd + e*e*p.ldd)
	det := imm*iss - ims*ims
	d.Mu, d.Sigma = centre+unit*mu, unit*sigma
	d.SEMu = unit * math.Sqrt(iss/det)
	d.SELogSigma = math.Sqrt(imm / det)
	d.Cov = -unit * ims / det
	d.LogLik = p.l - float64(s.exact.n)*math.Log(unit)
	return d
}
