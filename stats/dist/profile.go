package dist

import (
	"math"

	"kneepoint/stats"
	"kneepoint/stats/internal/tail"
)

// ProfileQuantile is the quantile at p of a fitted distribution with its
// interval by the profile likelihood: the values q for which the best fit whose
// quantile is q has a log-likelihood within chi2(confidence; 1)/2 of the
// maximum. It is as lopsided as the data make it, and holds its confidence for
// few readings and heavy censoring, where [QuantileInterval] is too short.
//
// It takes some sixty evaluations of the likelihood: for a Weibull distribution
// and two million readings seconds, elsewhere nothing to speak of. An end that
// no data limit is infinite (0 for the lower end of a positive family). It
// panics as [QuantileInterval]; it fails where [Fit] does.
func ProfileQuantile(f Family, r Readings, p, confidence float64) (stats.Interval, error) {
	checkConfidence(confidence)
	if !(p > 0 && p < 1) {
		panic("stats/dist: probability outside (0, 1)")
	}
	d, err := Fit(f, r)
	if err != nil {
		return stats.NoInterval(err.Error()), err
	}
	profile, err := profiler(f, r, d, p)
	if err != nil {
		return stats.NoInterval(err.Error()), err
	}
	// Work on the scale on which the quantile's error is about symmetric.
	to, from := func(q float64) float64 { return q }, func(t float64) float64 { return t }
	se := Delta(d, func(d Distribution) float64 { return d.Quantile(p) })
	if f != NormalFamily {
		to, from = math.Log, math.Exp
		se /= d.Quantile(p)
	}
	best := to(d.Quantile(p))
	if !(se > 0 && se < math.MaxFloat64) {
		iv := stats.NoInterval("the standard error is out of the range of numbers")
		iv.Estimate = from(best)
		return iv, nil
	}
	drop := tail.NormalQuantile(0.5 + confidence/2)
	drop = drop * drop / 2
	top := profile(from(best))
	end := func(sign float64) float64 {
		short, far := 0.0, 1.96*se
		for top-profile(from(best+sign*far)) < drop {
			short = far
			if far *= 1.6; far > 1e4*se {
				return math.Inf(int(sign))
			}
		}
		for range 60 {
			mid := short + (far-short)/2
			if far-short < 1e-9*se {
				break
			}
			if top-profile(from(best+sign*mid)) < drop {
				short = mid
			} else {
				far = mid
			}
		}
		return best + sign*far
	}
	return stats.Interval{Estimate: from(best), Lower: from(end(-1)), Upper: from(end(1)), Method: "profile likelihood"}, nil
}

// profiler returns the largest log-likelihood, up to a constant, with the
// quantile at p held.
func profiler(f Family, r Readings, d Distribution, p float64) (func(q float64) float64, error) {
	if f == GammaFamily {
		l := r.logs()
		g, _, _, err := newGammaSample(r, &l)
		if err != nil {
			return nil, err
		}
		start := d.(Gamma)
		return func(q float64) float64 {
			return along(math.Log(start.Shape), 2*start.SELogShape, func(b float64) float64 {
				theta := math.Exp(b / 2)
				unit := Gamma{Shape: theta * theta, Scale: 1 / (theta * theta)}.Quantile(p) // of mean 1
				return g.at(theta, math.Log(q/unit/g.mean)).l
			})
		}, nil
	}
	logs, sigma := r, 0.0
	kernel, z := normalKernel, tail.NormalQuantile(p)
	position := func(q float64) float64 { return q }
	switch d := d.(type) {
	case Normal:
		sigma = d.Sigma
	case Lognormal:
		sigma = d.Sigma
	case Weibull:
		sigma = 1 / d.Shape
		kernel, z = extremeKernel, math.Log(-math.Log1p(-p))
	}
	if f != NormalFamily {
		logs = r.logs().Readings
		position = math.Log
	}
	s := logs.sample()
	s.kernel = kernel
	if f == WeibullFamily {
		logs.exact(func(v float64) { s.values = append(s.values, v) })
	}
	if _, err := s.finish(); err != nil {
		return nil, err
	}
	centre, unit := s.scale()
	// z = theta x - delta at the quantile: delta = theta q - z, a straight line in
	// theta, along which the likelihood is concave.
	return func(q float64) float64 {
		at := (position(q) - centre) / unit
		theta := unit / sigma
		var p point
		for range 60 {
			p = s.at(theta, theta*at-z, centre, unit)
			slope, curve := p.lt+at*p.ld, p.ltt+2*at*p.ltd+at*at*p.ldd
			step := -slope / curve
			if !(curve < 0) { // may be, with truncation: a cautious step up
				step = math.Copysign(0.2*theta, slope)
			}
			if step < -theta/2 {
				step = -theta / 2
			}
			if step > theta {
				step = theta
			}
			if math.Abs(slope*step) < 1e-12*math.Max(1, math.Abs(p.l)) {
				break
			}
			theta += step
		}
		return p.l
	}, nil
}

// along returns the maximum of a function of one variable near a start, by golden
// section in a bracket that is widened until it holds a top.
func along(at, width float64, f func(float64) float64) float64 {
	const g = 0.6180339887498949
	lo, hi := at-width, at+width
	fa, fm, fb := f(lo), f(at), f(hi)
	for range 40 {
		if fa > fm {
			lo, at, hi, fm, fb = lo-2*(at-lo), lo, at, fa, fm
			fa = f(lo)
		} else if fb > fm {
			lo, at, hi, fa, fm = at, hi, hi+2*(hi-at), fm, fb
			fb = f(hi)
		} else {
			break
		}
	}
	x, y := hi-g*(hi-lo), lo+g*(hi-lo)
	fx, fy := f(x), f(y)
	for range 60 {
		if hi-lo < 1e-7 {
			break
		}
		if fx > fy {
			hi, y, fy = y, x, fx
			x = hi - g*(hi-lo)
			fx = f(x)
		} else {
			lo, x, fx = x, y, fy
			y = lo + g*(hi-lo)
			fy = f(y)
		}
	}
	return math.Max(math.Max(fx, fy), fm)
}
