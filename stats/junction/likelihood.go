package junction

import "math"

// Reading is a test's level on a die, wafer or lot against the baseline.
type Reading struct {
	Test     int     // index into Model.Tests
	LogRatio float64 // ln(level / baseline level); NaN: missing
	Sigma    float64 // of LogRatio, by measurement and sampling; 0: UsualSigma
	Censor   int     // +1: the level is at least this, -1: at most
}

// maxReadings bounds a single inversion; one place is the prior's.
const maxReadings = 24

// believed stands for the prior of the grown thickness, which is one more reading:
// so base depth and up-diffusion are tied to the net thickness as they are in the
// wafer.
const believed = -1

// problem is an inversion made ready: readings, and the nuisances' linearisation.
type problem struct {
	m     *Model
	prior Prior
	exact []Reading // uncensored
	bound []Reading // censored
	notes []string

	rest  Process     // nuisances at the linearisation
	lin   []*linear   // of the readings, exact then bound
	noise [][]float64 // covariance by noise and nuisances
	flat  []float64   // slopes at nominal along thickness, for the knee
	gain  float64     // ln hFE ratio as measured, for the slope's error
	u, v  float64     // the fit
}

// withPrior is the problem with the prior of the grown thickness among its
// readings; that of doping is added on the grid.
func (q *problem) withPrior() *problem {
	p := *q
	p.exact = append([]Reading{{Test: believed, Sigma: math.Max(q.prior.Sigma[EpiThickness], 1e-4)}}, q.exact...)
	return &p
}

// follow starts a problem without the prior at the fit of the one with it.
func (q *problem) follow(full *problem) {
	q.rest, q.u, q.v = full.rest, full.u, full.v
	q.lin, q.flat = full.lin[1:], full.flat[1:]
	q.noise = nil
	for _, row := range full.noise[1:] {
		q.noise = append(q.noise, row[1:])
	}
}

// pull is 1/(2 sigma^2) of the prior of doping, 0 without a prior.
func (q *problem) pull() float64 {
	if len(q.exact) > 0 && q.exact[0].Test == believed {
		return 1 / (2 * q.prior.Sigma[EpiDoping] * q.prior.Sigma[EpiDoping])
	}
	return 0
}

// measures is what a reading measures, "" for the prior.
func (q *problem) measures(i int) string {
	if t := q.reading(i).Test; t != believed {
		return q.m.Tests[t].Measures
	}
	return ""
}

// response is ln of what a reading would be over nominal at a spot.
func (q *problem) response(i int, s *spot, u float64) float64 {
	t := q.reading(i).Test
	if t == believed {
		return q.m.processAt(u, s.p[EpiDoping], s.p)[EpiThickness]
	}
	return q.m.log(t, s) - q.m.levels[t]
}

// pose sorts the readings out. A BVceo at BVcbo is capped by its collector junction
// and only says "at least".
func (m *Model) pose(readings []Reading, prior Prior) *problem {
	q := &problem{m: m, prior: prior}
	volts := func(measures string) (float64, float64) {
		for _, r := range readings {
			if t := &m.Tests[r.Test]; t.Measures == measures && r.Censor == 0 && !math.IsNaN(r.LogRatio) {
				return m.Level(r.Test) * math.Exp(r.LogRatio), r.Sigma
			}
		}
		return math.NaN(), 0
	}
	bvcbo, sigma := volts(BVcbo)
	for _, r := range readings {
		if math.IsNaN(r.LogRatio) {
			continue
		}
		t := &m.Tests[r.Test]
		if !(r.Sigma > 0) {
			r.Sigma = UsualSigma(t.Measures)
		}
		if t.Measures == BVceo && r.Censor == 0 && m.Level(r.Test)*math.Exp(r.LogRatio) > bvcbo*(1-3*math.Hypot(sigma, r.Sigma)) {
			r.Censor = 1
			q.notes = append(q.notes, "BVceo is at BVcbo: the collector junction's edge caps it, so it only says that the open-base voltage is at least this")
		}
		if math.IsInf(r.LogRatio, 0) {
			r.Censor = int(math.Copysign(1, r.LogRatio))
			continue // no finite bound: nothing to learn here
		}
		if r.Censor == 0 {
			q.exact = append(q.exact, r)
		} else {
			q.bound = append(q.bound, r)
		}
		if t.Measures == HFE && r.Censor == 0 && math.Abs(r.LogRatio) > math.Abs(q.gain) {
			q.gain = r.LogRatio
		}
	}
	if q.size() >= maxReadings {
		panic("junction: more than 23 readings in one inversion: join readings of the same test first")
	}
	return q
}

func (q *problem) size() int { return len(q.exact) + len(q.bound) }

func (q *problem) reading(i int) *Reading {
	if i < len(q.exact) {
		return &q.exact[i]
	}
	return &q.bound[i-len(q.exact)]
}

// linear is a test's response made ready at one point: a surface over thickness and
// doping, and slopes on the nuisances.
type linear struct {
	resp   surface
	slopes [numNuisances]float64
}

// linearAt linearises what f gives (ln of a reading over nominal) at a thickness
// and doping and at the nuisances of rest. The surface is that of nuisances at
// their prior mean, so that they enter as deviations from it.
func (m *Model) linearAt(u, v float64, rest *Process, f func(s *spot, u float64) float64) linear {
	const h = 0.01
	var s spot
	var l linear
	at := func(u float64, p *Process) float64 {
		m.locateAt(&s, u, p)
		return f(&s, u)
	}
	p := *rest
	p[EpiDoping] = v
	off := 0.0
	for k, param := range nuisances {
		up, down := p, p
		up[param] += h
		down[param] -= h
		if d := (at(u, &up) - at(u, &down)) / (2 * h); !math.IsNaN(d) && !math.IsInf(d, 0) {
			l.slopes[k] = d
		}
		off += l.slopes[k] * rest[param]
	}
	l.resp = make(surface, m.grid.u.n*m.grid.v.n)
	for i := range l.resp {
		p[EpiDoping] = m.grid.v.at(i % m.grid.v.n)
		// A leakage in breakdown is as far off as need be.
		l.resp[i] = math.Min(at(m.grid.u.at(i/m.grid.v.n), &p), 20) - off
	}
	l.resp.mend(m.grid)
	return l
}

// linearise makes the readings' responses ready at a thickness and doping and at
// q.rest, or takes the model's own at nominal.
func (q *problem) linearise(u, v float64) {
	n := q.size()
	nominal := u == 0 && v == 0 && q.rest == Process{}
	q.lin = make([]*linear, n)
	q.flat = make([]float64, n)
	centre := q.m.grid.point(0, 0)
	for i := range n {
		if t := q.reading(i).Test; nominal && t != believed {
			q.lin[i] = &q.m.linear[t]
		} else {
			l := q.m.linearAt(u, v, &q.rest, func(s *spot, u float64) float64 { return q.response(i, s, u) })
			q.lin[i] = &l
		}
		_, q.flat[i], _ = q.lin[i].resp.slopes(q.m.grid, &centre)
	}
	q.noise = make([][]float64, n)
	for i := range n {
		q.noise[i] = make([]float64, n)
		for j := range i + 1 {
			c := 0.0
			for k, param := range nuisances {
				c += q.lin[i].slopes[k] * q.lin[j].slopes[k] * q.prior.Sigma[param] * q.prior.Sigma[param]
			}
			q.noise[i][j], q.noise[j][i] = c, c
		}
		q.noise[i][i] += q.reading(i).Sigma * q.reading(i).Sigma
	}
}

// cell is the work space of one evaluation.
type cell struct {
	resp [maxReadings]float64              // response to thickness and doping alone
	part [maxReadings]float64              // its error that tests of the same layer share
	knee [maxReadings]float64              // error by the knee's place
	r, z [maxReadings]float64              // residual, and whitened
	l    [maxReadings][maxReadings]float64 // Cholesky factor
	ok   bool
}

// evaluate returns the log likelihood at a net thickness and doping, nuisances
// integrated out on their linearisation. It leaves residuals and factor in c.
func (q *problem) evaluate(c *cell, u, v float64) float64 {
	m := q.m
	n, ne := q.size(), len(q.exact)
	c.ok = false
	at := m.grid.point(u, v)
	for i := range n {
		var slope float64
		c.resp[i], slope, _ = q.lin[i].resp.slopes(m.grid, &at)
		c.r[i] = q.reading(i).LogRatio - c.resp[i]
		// How much steeper or flatter the response is here than at nominal is what
		// a misplaced knee gets wrong.
		c.knee[i] = q.prior.Knee * (slope - q.flat[i])
		c.part[i] = q.prior.Response * sharedError(q.measures(i)) * c.resp[i]
		if q.reading(i).Test == believed {
			c.knee[i] = 0
		}
	}
	ll, scale := 0.0, 1.0
	for i := range n {
		measures := q.measures(i)
		for j := range i + 1 {
			a := q.noise[i][j] + c.knee[i]*c.knee[j] + c.part[i]*c.part[j]
			if i == j && measures != "" {
				e := q.prior.Response * responseError(measures) * c.resp[i]
				a += e * e
				if measures == BVceo {
					g := q.prior.GainSlope * 0.18 * q.gain
					a += g * g
				}
			}
			for k := range min(j, ne) {
				a -= c.l[i][k] * c.l[j][k]
			}
			switch {
			case i != j && j < ne:
				c.l[i][j] = a / c.l[j][j]
			case i == j:
				if !(a > 0) {
					return math.Inf(-1)
				}
				c.l[i][i] = math.Sqrt(a)
			}
		}
		z := c.r[i]
		for k := range min(i, ne) {
			z -= c.l[i][k] * c.z[k]
		}
		// A bound is judged given the readings; bounds among each other as if
		// independent.
		z /= c.l[i][i]
		c.z[i] = z
		if i < ne {
			ll -= z * z / 2
			scale *= c.l[i][i]
		} else {
			ll += logNormalTail(float64(q.reading(i).Censor) * z)
		}
	}
	c.ok = true
	return ll - math.Log(scale)
}

// logNormalTail is ln P(Z > z) for a standard normal Z.
func logNormalTail(z float64) float64 {
	if z > 8 { // asymptotic
		return -z*z/2 - math.Log(z*math.Sqrt(2*math.Pi)) - 1/(z*z)
	}
	return math.Log(math.Erfc(z/math.Sqrt2) / 2)
}

// conditional returns the nuisances' mean and covariance given thickness and doping
// at the cell last evaluated, from the uncensored readings.
func (q *problem) conditional(c *cell) (mean [numNuisances]float64, cov [numNuisances][numNuisances]float64) {
	ne := len(q.exact)
	var w [numNuisances][maxReadings]float64 // L^-1 J Lambda, by nuisance
	for k, param := range nuisances {
		s2 := q.prior.Sigma[param] * q.prior.Sigma[param]
		for i := range ne {
			x := q.lin[i].slopes[k] * s2
			for j := range i {
				x -= c.l[i][j] * w[k][j]
			}
			w[k][i] = x / c.l[i][i]
			mean[k] += w[k][i] * c.z[i]
		}
		cov[k][k] += s2
		for o := range k + 1 {
			x := 0.0
			for i := range ne {
				x += w[k][i] * w[o][i]
			}
			cov[k][o] -= x
			if o != k {
				cov[o][k] = cov[k][o]
			}
		}
	}
	return mean, cov
}

// fit finds the most probable thickness, doping and nuisances, and linearises
// there: a search on the marginal problem, nuisances following by their conditional
// means. One round does, since the logs are nearly straight.
func (q *problem) fit() {
	var c cell
	if q.lin == nil {
		q.linearise(0, 0)
	}
	q.climb(&c)
	q.evaluate(&c, q.u, q.v)
	if !c.ok {
		return
	}
	mean, _ := q.conditional(&c)
	moved := false
	for k, param := range nuisances {
		limit := 4 * q.prior.Sigma[param]
		x := math.Min(math.Max(mean[k], -limit), limit)
		moved = moved || math.Abs(x-q.rest[param]) > 0.25*q.prior.Sigma[param]
		q.rest[param] = x
	}
	if moved {
		q.linearise(q.u, q.v)
	}
}

// climb maximises likelihood and prior over thickness and doping by a shrinking
// pattern search: the function is cheap, two-dimensional and may be flat on a side.
func (q *problem) climb(c *cell) {
	sigmaU, sigmaV := q.m.NetSigma(q.prior), q.prior.Sigma[EpiDoping]
	pull, g := q.pull(), q.m.grid
	f := func(u, v float64) float64 {
		if u < g.u.lo || u > g.u.hi() || v < g.v.lo || v > g.v.hi() {
			return math.Inf(-1)
		}
		return q.evaluate(c, u, v) - pull*v*v
	}
	best := f(q.u, q.v)
	for step := 1.0; step > 0.02; {
		moved := false
		for _, d := range [8][2]float64{{1, 0}, {-1, 0}, {0, 1}, {0, -1}, {1, 1}, {-1, -1}, {1, -1}, {-1, 1}} {
			a, b := q.u+d[0]*step*sigmaU, q.v+d[1]*step*sigmaV
			if g := f(a, b); g > best {
				q.u, q.v, best, moved = a, b, g, true
			}
		}
		if !moved {
			step /= 2
		}
	}
}
