package junction

import "math"

// Reading is a test's level on a die, wafer or lot against the baseline.
type Reading struct {
	Test     int     // index into Model.Tests
	LogRatio float64 // ln(level / baseline level); NaN: missing
	Sigma    float64 // of LogRatio, by measurement and sampling; 0: UsualSigma
	Censor   int     // +1: the level is at least this, -1: at most
}

// maxReadings bounds a single inversion.
const maxReadings = 24

// problem is an inversion made ready: readings, and the nuisances' linearisation.
type problem struct {
	m     *Model
	prior Prior
	exact []Reading // uncensored
	bound []Reading // censored
	notes []string

	rest   Process                 // nuisances at the linearisation
	slopes [][numNuisances]float64 // d ln test / d ln nuisance, exact then bound
	noise  [][]float64             // covariance by noise and nuisances
	resp   []surface               // response of each reading to thickness and doping, nuisances at their prior mean
	flat   []float64               // its slope at nominal along thickness, for the knee
	gain   float64                 // ln hFE ratio as measured, for the slope's error
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
	if n := len(q.exact) + len(q.bound); n > maxReadings {
		panic("junction: more than 24 readings in one inversion: join readings of the same test first")
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

// linearise takes the nuisances' slopes at a thickness and doping and at q.rest.
func (q *problem) linearise(u, v float64) {
	const h = 0.01
	n := q.size()
	q.slopes = make([][numNuisances]float64, n)
	var s spot
	at := func(u float64, p *Process) []float64 {
		q.m.locateAt(&s, u, p)
		out := make([]float64, n)
		for i := range out {
			out[i] = q.m.log(q.reading(i).Test, &s)
		}
		return out
	}
	p := q.rest
	p[EpiDoping] = v
	for k, param := range nuisances {
		up, down := p, p
		up[param] += h
		down[param] -= h
		a, b := at(u, &up), at(u, &down)
		for i := range n {
			if d := (a[i] - b[i]) / (2 * h); !math.IsNaN(d) && !math.IsInf(d, 0) {
				q.slopes[i][k] = d
			}
		}
	}
	q.respond()
	q.noise = make([][]float64, n)
	for i := range n {
		q.noise[i] = make([]float64, n)
		for j := range i + 1 {
			c := 0.0
			for k, param := range nuisances {
				c += q.slopes[i][k] * q.slopes[j][k] * q.prior.Sigma[param] * q.prior.Sigma[param]
			}
			q.noise[i][j], q.noise[j][i] = c, c
		}
		q.noise[i][i] += q.reading(i).Sigma * q.reading(i).Sigma
	}
}

// respond tabulates the readings' responses on the model's grid, so that a cell of
// the posterior costs interpolations only.
func (q *problem) respond() {
	m, n := q.m, q.size()
	q.resp, q.flat = make([]surface, n), make([]float64, n)
	for i := range n {
		q.resp[i] = make(surface, m.grid.u.n*m.grid.v.n)
	}
	var s spot
	p := q.rest
	for at := range m.grid.u.n * m.grid.v.n {
		p[EpiDoping] = m.grid.v.at(at % m.grid.v.n)
		m.locateAt(&s, m.grid.u.at(at/m.grid.v.n), &p)
		for i := range n {
			test := q.reading(i).Test
			// A leakage in breakdown is as far off as need be.
			q.resp[i][at] = math.Min(m.log(test, &s)-m.levels[test], 20)
		}
	}
	nominal := m.grid.point(0, 0)
	for i := range n {
		// Nuisances enter as deviations from their prior mean.
		off := 0.0
		for k, param := range nuisances {
			off += q.slopes[i][k] * q.rest[param]
		}
		for at := range q.resp[i] {
			q.resp[i][at] -= off
		}
		q.resp[i].mend(m.grid)
		_, q.flat[i], _ = q.resp[i].slopes(m.grid, &nominal)
	}
}

// cell is the work space of one evaluation.
type cell struct {
	resp [maxReadings]float64              // response to thickness and doping alone
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
		c.resp[i], slope, _ = q.resp[i].slopes(m.grid, &at)
		c.r[i] = q.reading(i).LogRatio - c.resp[i]
		// How much steeper or flatter the response is here than at nominal is what
		// a misplaced knee gets wrong.
		c.knee[i] = q.prior.Knee * (slope - q.flat[i])
	}
	ll := 0.0
	for i := range n {
		t := &m.Tests[q.reading(i).Test]
		for j := range i + 1 {
			a := q.noise[i][j] + c.knee[i]*c.knee[j]
			if i == j {
				e := q.prior.Response * responseError(t.Measures) * c.resp[i]
				a += e * e
				if t.Measures == BVceo {
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
			ll -= z*z/2 + math.Log(c.l[i][i])
		} else {
			ll += logNormalTail(float64(q.reading(i).Censor) * z)
		}
	}
	c.ok = true
	return ll
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
			x := q.slopes[i][k] * s2
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

// fit finds the most probable thickness, doping and nuisances and linearises there:
// Gauss-Newton on the marginal problem, nuisances following by their conditional
// means. Two rounds do, since the logs are nearly straight.
func (q *problem) fit(sigmaU float64) (u, v float64) {
	var c cell
	q.linearise(0, 0)
	for range 2 {
		u, v = q.climb(&c, sigmaU, u, v)
		q.evaluate(&c, u, v)
		if !c.ok {
			break
		}
		mean, _ := q.conditional(&c)
		for k, param := range nuisances {
			limit := 4 * q.prior.Sigma[param]
			q.rest[param] = math.Min(math.Max(mean[k], -limit), limit)
		}
		q.linearise(u, v)
	}
	return u, v
}

// climb maximises likelihood and prior over thickness and doping by a shrinking
// pattern search: the function is cheap, two-dimensional and may be flat on a side.
func (q *problem) climb(c *cell, sigmaU, u, v float64) (float64, float64) {
	sigmaV := q.prior.Sigma[EpiDoping]
	f := func(u, v float64) float64 {
		return q.evaluate(c, u, v) - u*u/(2*sigmaU*sigmaU) - v*v/(2*sigmaV*sigmaV)
	}
	best := f(u, v)
	for step := 1.0; step > 0.02; {
		moved := false
		for _, d := range [8][2]float64{{1, 0}, {-1, 0}, {0, 1}, {0, -1}, {1, 1}, {-1, -1}, {1, -1}, {-1, 1}} {
			a, b := u+d[0]*step*sigmaU, v+d[1]*step*sigmaV
			if g := f(a, b); g > best {
				u, v, best, moved = a, b, g, true
			}
		}
		if !moved {
			step /= 2
		}
	}
	return u, v
}
