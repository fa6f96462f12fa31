package junction

import (
	"math"

	"gonum.org/v1/gonum/mat"
)

// DieInverter inverts many dice that were read with the same tests: the most
// probable net thickness and doping of each, nuisances integrated out on their
// linearisation at nominal. A die costs about a microsecond. Use [Model.Invert] for
// wafers and lots, whose intervals matter; these are points for maps.
type DieInverter struct {
	m     *Model
	q     *problem // first reading is the prior's
	want  []int    // indices into nuisances of the parameters asked for
	prior [2]float64
	tests []int
	level []float64 // ln of each test's baseline level
}

// Dice makes an inverter for columns of readings of the given tests, each with the
// sigma of a die's log reading (0: [UsualSigma]). Centre is what the prior is
// centred on, as logs of net thickness and doping over nominal: 0, 0, or a wafer's
// own estimate from [Model.Invert], which keeps dice from being drawn to the target.
// Parameters in want come out as further columns.
func (m *Model) Dice(tests []int, sigmas []float64, prior Prior, centre [2]float64, want ...Param) *DieInverter {
	if len(tests) != len(sigmas) || len(tests) >= 16 {
		panic("junction: Dice: tests and sigmas differ in length, or there are more than 15")
	}
	d := &DieInverter{m: m, prior: centre, tests: append([]int(nil), tests...)}
	var r []Reading
	for i, t := range tests {
		s := sigmas[i]
		if !(s > 0) {
			s = UsualSigma(m.Tests[t].Measures)
		}
		r = append(r, Reading{Test: t, Sigma: s})
		d.level = append(d.level, math.Log(m.Level(t)))
	}
	d.q = (&problem{m: m, prior: prior, exact: r}).withPrior()
	at := m.processAt(centre[0], centre[1], &Process{})
	d.q.exact[0].LogRatio = at[EpiThickness]
	d.q.linearise(centre[0], centre[1])
	for _, p := range want {
		k := -1
		for i, n := range nuisances {
			if n == p {
				k = i
			}
		}
		if k < 0 {
			panic("junction: Dice: " + p.String() + " is not among what a die's readings give")
		}
		d.want = append(d.want, k)
	}
	return d
}

// DieColumns are the results, one value a die. Thickness is the net one in um,
// doping in cm^-3, sigmas are of their logs; Params are ratios to nominal in the
// order asked for. NaN where a die has no reading at all.
type DieColumns struct {
	Thickness, Doping           []float64
	ThicknessSigma, DopingSigma []float64
	Params                      [][]float64
}

// Invert inverts n dice. Columns hold readings in SI by test, NaN where missing;
// censor is nil or holds, by test, nil or -1 (at most), 0, +1 (at least) for every
// die. A bound counts only when a die's other readings contradict it. Dice are
// shared among the cores; the result does not depend on how many there are.
//
// It panics when a column has not the length of the first.
func (d *DieInverter) Invert(columns [][]float64, censor [][]int8) DieColumns {
	if len(columns) != len(d.tests) {
		panic("junction: DieInverter: as many columns as tests are wanted")
	}
	n := 0
	if len(columns) > 0 {
		n = len(columns[0])
	}
	for i := range columns {
		if len(columns[i]) != n || (censor != nil && censor[i] != nil && len(censor[i]) != n) {
			panic("junction: DieInverter: columns differ in length")
		}
	}
	make1 := func() []float64 { return make([]float64, n) }
	out := DieColumns{Thickness: make1(), Doping: make1(), ThicknessSigma: make1(), DopingSigma: make1()}
	for range d.want {
		out.Params = append(out.Params, make1())
	}
	const chunk = 4096
	each((n+chunk-1)/chunk, func(c int) {
		w := dieWorker{DieInverter: d, by: map[uint16]*pattern{}}
		for i := c * chunk; i < min(n, (c+1)*chunk); i++ {
			w.one(i, columns, censor, &out)
		}
	})
	return out
}

// pattern is the linear algebra of one set of readings that are there.
type pattern struct {
	index []int       // into q.exact, the prior's first
	p     []float64   // precision matrix, row by row
	gains [][]float64 // nuisance asked for = gains . residuals
}

type dieWorker struct {
	*DieInverter
	by   map[uint16]*pattern
	r, f [16]float64
	a, b [16]float64 // slopes
}

func (d *DieInverter) pattern(mask uint16) *pattern {
	p := &pattern{}
	for i := range d.q.exact {
		if mask>>i&1 == 1 {
			p.index = append(p.index, i)
		}
	}
	n := len(p.index)
	c := mat.NewSymDense(n, nil)
	for i, x := range p.index {
		for j, y := range p.index[:i+1] {
			c.SetSym(i, j, d.q.noise[x][y])
		}
	}
	var chol mat.Cholesky
	inv := mat.NewSymDense(n, nil)
	if !chol.Factorize(c) || chol.InverseTo(inv) != nil {
		panic("junction: readings' covariance is not positive definite")
	}
	p.p = make([]float64, n*n)
	for i := range n {
		for j := range n {
			p.p[i*n+j] = inv.At(i, j)
		}
	}
	for _, k := range d.want {
		s := d.q.prior.Sigma[nuisances[k]]
		g := make([]float64, n)
		for j := range n {
			for i, x := range p.index {
				g[j] += s * s * d.q.lin[x].slopes[k] * p.p[i*n+j]
			}
		}
		p.gains = append(p.gains, g)
	}
	return p
}

// one inverts die i.
func (w *dieWorker) one(i int, columns [][]float64, censor [][]int8, out *DieColumns) {
	mask, bounds := uint16(1), uint16(0)
	w.r[0] = w.q.exact[0].LogRatio
	for t := range columns {
		y := math.Log(columns[t][i]) - w.level[t]
		if math.IsNaN(y) || math.IsInf(y, 0) {
			continue
		}
		w.r[t+1] = y
		if censor != nil && censor[t] != nil && censor[t][i] != 0 {
			bounds |= 1 << (t + 1)
		} else {
			mask |= 1 << (t + 1)
		}
	}
	if mask == 1 && bounds == 0 {
		nan := math.NaN()
		out.Thickness[i], out.Doping[i], out.ThicknessSigma[i], out.DopingSigma[i] = nan, nan, nan, nan
		for k := range out.Params {
			out.Params[k][i] = nan
		}
		return
	}
	u, v, su, sv, p := w.solve(mask)
	if bounds != 0 {
		at := w.m.grid.point(u, v)
		for t := range columns {
			if bounds>>(t+1)&1 == 1 && float64(censor[t][i])*(w.r[t+1]-w.q.lin[t+1].resp.value(w.m.grid, &at)) > 0 {
				mask |= 1 << (t + 1)
			}
		}
		u, v, su, sv, p = w.solve(mask)
	}
	d := &w.m.Device
	out.Thickness[i], out.Doping[i] = d.netUM()*math.Exp(u), d.EpiDopingCM3*math.Exp(v)
	out.ThicknessSigma[i], out.DopingSigma[i] = su, sv
	for k, g := range p.gains {
		x := 0.0
		for j := range g {
			x += g[j] * w.f[j]
		}
		out.Params[k][i] = math.Exp(x)
	}
}

// solve is Gauss-Newton in two dimensions, steps cut to a quarter in log. It leaves
// the residuals in w.f, in the pattern's order.
func (w *dieWorker) solve(mask uint16) (u, v, su, sv float64, p *pattern) {
	if p = w.by[mask]; p == nil {
		p = w.pattern(mask)
		w.by[mask] = p
	}
	n := len(p.index)
	pull := 1 / (w.q.prior.Sigma[EpiDoping] * w.q.prior.Sigma[EpiDoping])
	u, v = w.prior[0], w.prior[1]
	var huu, huv, hvv float64
	for range 8 {
		at := w.m.grid.point(u, v)
		for k, x := range p.index {
			var f float64
			f, w.a[k], w.b[k] = w.q.lin[x].resp.slopes(w.m.grid, &at)
			w.f[k] = w.r[x] - f
		}
		gu, gv := 0.0, pull*(w.prior[1]-v)
		huu, huv, hvv = 0, 0, pull
		for i := range n {
			row := p.p[i*n : i*n+n]
			pr, pa, pb := 0.0, 0.0, 0.0
			for j, c := range row {
				pr += c * w.f[j]
				pa += c * w.a[j]
				pb += c * w.b[j]
			}
			gu += w.a[i] * pr
			gv += w.b[i] * pr
			huu += w.a[i] * pa
			huv += w.a[i] * pb
			hvv += w.b[i] * pb
		}
		det := huu*hvv - huv*huv
		du, dv := (hvv*gu-huv*gv)/det, (huu*gv-huv*gu)/det
		du, dv = math.Max(-0.25, math.Min(0.25, du)), math.Max(-0.25, math.Min(0.25, dv))
		u = math.Max(w.m.grid.u.lo, math.Min(w.m.grid.u.hi(), u+du))
		v = math.Max(w.m.grid.v.lo, math.Min(w.m.grid.v.hi(), v+dv))
		if math.Abs(du)+math.Abs(dv) < 2e-4 {
			break
		}
	}
	det := huu*hvv - huv*huv
	return u, v, math.Sqrt(hvv / det), math.Sqrt(huu / det), p
}
