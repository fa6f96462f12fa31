package dist

import "math"

// kernel is a standard distribution on the whole line; readings are
// z = (x - mu)/sigma of it.
type kernel struct {
	// between returns ln(F(b)-F(a)), and the densities at a and b over that
	// difference; a may be -Inf and b +Inf.
	between func(a, b float64) (l, ha, hb float64)
	// slope is the derivative of the logarithm of the density.
	slope func(z float64) float64
	// exact adds the exact readings of s to p.
	exact func(p *point, s *sample, centre, unit float64)
}

var normalKernel = kernel{
	between: func(a, b float64) (l, ha, hb float64) {
		switch {
		case math.IsInf(a, -1):
			return logPhi(b), 0, hazard(b)
		case math.IsInf(b, 1):
			return logPhi(-a), hazard(-a), 0
		}
		return logBetween(a, b)
	},
	slope: func(z float64) float64 { return -z },
	exact: func(p *point, s *sample, centre, unit float64) {
		n := float64(s.exact.n)
		m, ss := (s.exact.mean-centre)/unit, s.exact.ss/(unit*unit)
		z := p.theta*m - p.delta
		p.l = n*math.Log(p.theta) - 0.5*(p.theta*p.theta*ss+n*z*z) - n/2*math.Log(2*math.Pi)
		p.lt = n/p.theta - p.theta*ss - n*z*m
		p.ld = n * z
		p.ltt = -n/(p.theta*p.theta) - ss - n*m*m
		p.ltd = n * m
		p.ldd = -n
	},
}

// point is the likelihood at theta = 1/sigma and delta = mu/sigma in the units
// of the search: its value, slopes and curvatures. In these coordinates it is
// concave for every kernel with a log-concave density, bounds included (Burridge
// 1981, J. R. Statist. Soc. B 43, 41-45), unless readings were truncated.
type point struct {
	theta, delta  float64
	l, lt, ld     float64
	ltt, ltd, ldd float64
}

func (s *sample) at(theta, delta, centre, unit float64) point {
	p := point{theta: theta, delta: delta}
	if s.exact.n > 0 {
		s.kernel.exact(&p, s, centre, unit)
	}
	for _, c := range s.list {
		p.bound(s.kernel, c.n, (c.lo-centre)/unit, (c.hi-centre)/unit)
	}
	return p
}

// bound adds n readings between a and b.
func (p *point) bound(k kernel, n, a, b float64) {
	za, zb := p.theta*a-p.delta, p.theta*b-p.delta
	l, ha, hb := k.between(za, zb)
	if math.IsInf(a, -1) {
		a, za = 0, 0
	}
	if math.IsInf(b, 1) {
		b, zb = 0, 0
	}
	// With h the density over F(zb)-F(za): dl/dzb = hb, dl/dza = -ha.
	gt, gd := b*hb-a*ha, ha-hb
	sa, sb := k.slope(za), k.slope(zb)
	p.l += n * l
	p.lt += n * gt
	p.ld += n * gd
	p.ltt += n * (sb*hb*b*b - sa*ha*a*a - gt*gt)
	p.ltd += n * (-sb*hb*b + sa*ha*a - gt*gd)
	p.ldd += n * (sb*hb - sa*ha - gd*gd)
}

// climb is Newton's method with the step halved until the likelihood rises.
// Where the likelihood is not concave, as it may be with truncation, the
// curvature is raised until a step leads up.
func climb(p point, at func(theta, delta float64) point) (point, bool) {
	for range 200 {
		ltt, ldd := p.ltt, p.ldd
		for raise := 1e-3; !(ltt < 0) || !(ltt*ldd-p.ltd*p.ltd > 0); raise *= 4 {
			if raise > 1e12 || p.l != p.l {
				return p, false
			}
			ltt, ldd = p.ltt-raise*(1+math.Abs(p.ltt)), p.ldd-raise*(1+math.Abs(p.ldd))
		}
		det := ltt*ldd - p.ltd*p.ltd
		dt := -(ldd*p.lt - p.ltd*p.ld) / det
		dd := -(ltt*p.ld - p.ltd*p.lt) / det
		gain := p.lt*dt + p.ld*dd // twice what the quadratic model promises
		if gain < 1e-18*math.Max(1, math.Abs(p.l)) {
			if t := p.theta + dt; t > 0 {
				if q := at(t, p.delta+dd); q.l >= p.l-1e-9 {
					p = q
				}
			}
			return p, true
		}
		step, moved := 1.0, false
		for range 60 {
			if t := p.theta + step*dt; t > 0 {
				// A gain below the rounding of a sum of millions is taken on trust.
				slack := 1e-13 * math.Abs(p.l)
				if step == 1 && gain < 1e-12*math.Abs(p.l) {
					slack = 1e-10 * math.Abs(p.l)
				}
				if q := at(t, p.delta+step*dd); q.l >= p.l-slack {
					p, moved = q, true
					break
				}
			}
			step /= 2
		}
		if !moved {
			return p, true // rounding: no step can rise any more
		}
		if p.theta > 1e9 || p.theta < 1e-9 { // the spread runs to nothing, or without end
			return p, false
		}
	}
	return p, false
}

// locationScale is the top of the likelihood in the readings' units: mu and
// sigma, the covariance of mu and ln sigma, and the likelihood.
type locationScale struct {
	mu, sigma, seMu, seLogSigma, cov, logLik float64
}

// climbScale fits mu and sigma.
func (s *sample) climbScale(theta, delta float64) (locationScale, error) {
	centre, unit := s.scale()
	at := func(theta, delta float64) point { return s.at(theta, delta, centre, unit) }
	if s.truncated() { // from the fit to what is seen, as if it were all
		free := *s
		free.list = s.list[:len(s.list)-1]
		if top, ok := climb(free.at(theta, delta, centre, unit), func(t, d float64) point { return free.at(t, d, centre, unit) }); ok {
			theta, delta = top.theta, top.delta
		}
	}
	top, ok := climb(at(theta, delta), at)
	if !ok {
		return locationScale{}, ErrNoFit
	}
	fit := top.locationScale(float64(s.exact.n), centre, unit)
	if !(fit.seLogSigma < 20) { // flat to the end: bounds that no spread contradicts
		return locationScale{}, ErrNoFit
	}
	return fit, nil
}

func (p point) locationScale(exact, centre, unit float64) (d locationScale) {
	mu, sigma := p.delta/p.theta, 1/p.theta
	// theta = exp(-s), delta = mu exp(-s): at the top the information transforms
	// by the Jacobian alone.
	t, e := p.theta, p.delta
	imm := -p.ldd * t * t
	ims := -(t * (-t*p.ltd - e*p.ldd))
	iss := -(t*t*p.ltt + 2*t*e*p.ltd + e*e*p.ldd)
	det := imm*iss - ims*ims
	d.mu, d.sigma = centre+unit*mu, unit*sigma
	d.seMu = unit * math.Sqrt(iss/det)
	d.seLogSigma = math.Sqrt(imm / det)
	d.cov = -unit * ims / det
	d.logLik = p.l - exact*math.Log(unit)
	return d
}
