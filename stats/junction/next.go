package junction

import (
	"math"
	"sort"
)

// Information is what one more test would tell, in bits: half the base-2 log of how
// much the variance shrinks (for Bits: the determinant of the covariance of log
// thickness and log doping).
type Information struct {
	Test                  int
	Bits                  float64
	Thickness, Doping     float64
	ThicknessShareOfPrior float64 // interval width left, over the prior's
}

// NextTest ranks candidates by the information that each alone would add to the
// readings at hand, most first. A candidate is a reading of which only Test and
// Sigma matter; it may repeat a test already read.
//
// Method: mean and covariance of thickness, doping and the candidate's reading over
// the posterior grid (nuisances included, so that a test spoiled by an unknown
// counts for little), then the linear-Gaussian gain. Expected, before the reading;
// the actual gain depends on it.
func (m *Model) NextTest(readings []Reading, prior Prior, candidates []Reading) []Information {
	base := m.pose(readings, prior).withPrior()
	base.fit()
	post := base.posteriorField()
	w := post.weights()

	// The candidates' responses, on the same linearisation.
	cand := &problem{m: m, prior: prior, rest: base.rest}
	for _, r := range candidates {
		r.LogRatio, r.Censor = 0, 0
		if !(r.Sigma > 0) {
			r.Sigma = UsualSigma(m.Tests[r.Test].Measures)
		}
		cand.exact = append(cand.exact, r)
	}
	cand.linearise(base.u, base.v)

	n := len(cand.exact)
	sum := make([]moments, n)
	var c cell
	for i, x := range w {
		if x < 1e-6 {
			continue
		}
		u, v := post.u.at(i/post.v.n), post.v.at(i%post.v.n)
		base.evaluate(&c, u, v)
		mean, cov := base.conditional(&c)
		at := m.grid.point(u, v)
		for k := range cand.exact {
			y := cand.lin[k].resp.value(m.grid, &at)
			e := prior.Response * responseError(m.Tests[cand.exact[k].Test].Measures) * y
			s := cand.exact[k].Sigma
			va := s*s + e*e
			for a := range numNuisances {
				ja := cand.lin[k].slopes[a]
				y += ja * mean[a]
				for b := range numNuisances {
					va += ja * cand.lin[k].slopes[b] * cov[a][b]
				}
			}
			sum[k].add(x, u, v, y, va)
		}
	}
	out := make([]Information, n)
	for k := range out {
		out[k] = sum[k].information()
		out[k].Test = cand.exact[k].Test
		out[k].ThicknessShareOfPrior /= m.NetSigma(prior)
	}
	sort.SliceStable(out, func(i, j int) bool { return out[i].Bits > out[j].Bits })
	return out
}

// moments accumulates weighted first and second moments of u, v and y.
type moments struct{ w, u, v, y, uu, vv, yy, uv, uy, vy float64 }

func (s *moments) add(w, u, v, y, variance float64) {
	s.w += w
	s.u, s.v, s.y = s.u+w*u, s.v+w*v, s.y+w*y
	s.uu, s.vv, s.yy = s.uu+w*u*u, s.vv+w*v*v, s.yy+w*(y*y+variance)
	s.uv, s.uy, s.vy = s.uv+w*u*v, s.uy+w*u*y, s.vy+w*v*y
}

func (s *moments) information() Information {
	u, v, y := s.u/s.w, s.v/s.w, s.y/s.w
	uu, vv, yy := s.uu/s.w-u*u, s.vv/s.w-v*v, s.yy/s.w-y*y
	uv, uy, vy := s.uv/s.w-u*v, s.uy/s.w-u*y, s.vy/s.w-v*y
	half := func(before, after float64) float64 {
		if !(before > 0 && after > 0) {
			return 0
		}
		return math.Max(0, math.Log2(before/after)/2)
	}
	au, av, auv := uu-uy*uy/yy, vv-vy*vy/yy, uv-uy*vy/yy
	return Information{
		Thickness: half(uu, au), Doping: half(vv, av), Bits: half(uu*vv-uv*uv, au*av-auv*auv),
		ThicknessShareOfPrior: math.Sqrt(math.Max(0, au)),
	}
}
