package junction

import (
	"fmt"
	"math"
)

// Invert finds net epi thickness and doping, and what else the readings tell, with
// intervals that hold in every regime: a grid over log thickness and log doping
// (near the knee the likelihood is one-sided, where a Gaussian interval fails),
// nuisances integrated out on their linearisation (Laplace), readings at a clamp or
// floor as bounds.
//
// Two results stand side by side. WithPrior is the posterior under prior. DataOnly
// is the profile likelihood under no belief about thickness and doping at all,
// which charts and drift must use: a prior centred on the target hides drift.
//
// Readings with a NaN ratio are skipped. It panics when a reading names no test,
// or at more than 23 readings.
func (m *Model) Invert(readings []Reading, prior Prior) Posterior {
	for _, r := range readings {
		if r.Test < 0 || r.Test >= len(m.Tests) {
			panic("junction: a reading names no test of the model")
		}
	}
	q := m.pose(readings, prior)
	full := q.withPrior()
	full.fit()
	post := full.posteriorField()
	// Data alone are linearised at their own best point: the prior's compromise would
	// bend the nuisances of a lot far off target.
	q.follow(full)
	q.fit()
	like := q.zoom(m.grid.u, m.grid.v, 8)

	var p Posterior
	p.Best = m.processAt(full.u, full.v, &full.rest)
	q.epi(&p, post, like)
	full.others(&p, post)
	q.regime(&p, post)
	var c cell
	q.evaluate(&c, full.u, full.v)
	for i := range q.exact {
		p.Misfit += c.z[i] * c.z[i]
	}
	p.MisfitN = len(q.exact)
	p.Separate = m.Separability(append(append([]Reading(nil), q.exact...), q.bound...), prior)
	p.Notes = q.words(&p)
	return p
}

// posteriorField scans five prior sigmas, as far as the tables go.
func (q *problem) posteriorField() *field2 {
	g, sigmaU, sv := q.m.grid, q.m.NetSigma(q.prior), q.prior.Sigma[EpiDoping]
	clip := func(a axis, sigma float64) axis {
		return newAxis(math.Max(a.lo, -5*sigma), math.Min(a.hi(), 5*sigma), coarseNodes)
	}
	return q.zoom(clip(g.u, sigmaU), clip(g.v, sv), 9)
}

// epi fills in thickness, doping and what follows from them alone.
func (q *problem) epi(p *Posterior, post, like *field2) {
	m := q.m
	sigmaU := m.NetSigma(q.prior)
	d := &m.Device
	w := post.weights()
	wu, wv := post.marginal(w, true), post.marginal(w, false)
	uIn := quantity(post.u, wu, like.u, like.profile(true), sigmaU)
	vIn := quantity(post.v, wv, like.v, like.profile(false), q.prior.Sigma[EpiDoping])
	if q.size() == 0 { // nothing but the prior
		uIn.Sight, vIn.Sight = Blind, Blind
	}
	p.NetThickness = uIn.through(func(x float64) float64 { return d.netUM() * math.Exp(x) })
	p.Doping = vIn.through(func(x float64) float64 { return d.EpiDopingCM3 * math.Exp(x) })
	p.Resistivity = p.Doping.flipped(ResistivityF723)
	p.Thickness = q.grown(p.NetThickness)
	p.Params[EpiDoping] = vIn.through(math.Exp)
	p.Params[EpiThickness] = p.Thickness.through(func(x float64) float64 { return x / d.EpiThicknessUM })

	var mu, mv, uu, vv, uv float64
	for i := range post.u.n {
		for j := range post.v.n {
			a, b, x := post.u.at(i), post.v.at(j), w[i*post.v.n+j]
			mu, mv, uu, vv, uv = mu+x*a, mv+x*b, uu+x*a*a, vv+x*b*b, uv+x*a*b
		}
	}
	p.Correlation = (uv - mu*mv) / math.Sqrt((uu-mu*mu)*(vv-mv*mv))
}

// quantity joins posterior and profile of one axis, as logs.
func quantity(pa axis, weights []float64, la axis, profile []float64, sigma float64) Quantity {
	var q Quantity
	mean, lo, hi := summary(pa, weights)
	q.WithPrior = Interval{mean, lo, hi}
	q.Share = (hi - lo) / (2 * 1.959964 * sigma)
	est, dl, dh, openLow, openHigh := bounds(la, profile)
	q.DataOnly = Interval{est, dl, dh}
	switch {
	case openLow && openHigh:
		q.Sight = Blind
	case openLow:
		q.Sight = AtMost
	case openHigh:
		q.Sight = AtLeast
	case q.Share >= blindShare:
		q.Sight = Blind
	default:
		q.Sight = Seen
	}
	if q.Sight != Seen {
		q.DataOnly.Estimate = math.NaN()
	}
	return q
}

// through maps a quantity by a rising function.
func (q Quantity) through(f func(float64) float64) Quantity {
	by := func(i Interval) Interval { return Interval{f(i.Estimate), f(i.Lower), f(i.Upper)} }
	q.WithPrior, q.DataOnly = by(q.WithPrior), by(q.DataOnly)
	return q
}

// flipped maps a quantity by a falling function: bounds and sight swap sides.
func (q Quantity) flipped(f func(float64) float64) Quantity {
	q = q.through(f)
	for _, i := range []*Interval{&q.WithPrior, &q.DataOnly} {
		i.Lower, i.Upper = i.Upper, i.Lower
	}
	switch q.Sight {
	case AtLeast:
		q.Sight = AtMost
	case AtMost:
		q.Sight = AtLeast
	}
	return q
}

// grown turns net into grown thickness, um: base depth and up-diffusion are seen
// only through it, so their spread is added.
func (q *problem) grown(net Quantity) Quantity {
	m := q.m
	d := &m.Device
	so := m.offsetSigma(q.prior)
	st := d.EpiThicknessUM * q.prior.Sigma[EpiThickness]
	part := 1.0 // of a net deviation that is thickness, not offset
	if st+so > 0 {
		part = st * st / (st*st + so*so)
	}
	rest := 1.959964 * math.Sqrt(part) * so
	spread := func(i Interval, center, part, rest float64) Interval {
		return Interval{center, center - math.Hypot(part*(i.Estimate-i.Lower), rest), center + math.Hypot(part*(i.Upper-i.Estimate), rest)}
	}
	out := net
	out.WithPrior = spread(net.WithPrior, d.EpiThicknessUM+part*(net.WithPrior.Estimate-d.netUM()), part, rest)
	if st > 0 {
		out.Share = (out.WithPrior.Upper - out.WithPrior.Lower) / (2 * 1.959964 * st)
	}
	offset := d.EpiThicknessUM - d.netUM()
	rest = 1.959964 * so
	if net.Sight == Seen {
		out.DataOnly = spread(net.DataOnly, net.DataOnly.Estimate+offset, 1, rest)
	} else {
		out.DataOnly.Lower += offset - rest
		out.DataOnly.Upper += offset + rest
	}
	return out
}

// combination is a linear combination of log parameters.
type combination struct {
	doping float64
	of     [numNuisances]float64
}

// others fills in the nuisances and the base's combinations: means and variances
// given thickness and doping, averaged over the posterior.
func (q *problem) others(p *Posterior, post *field2) {
	atoms := q.m.base.at[0].atoms.grad
	d := &q.m.Device
	width := d.BaseDepthUM - d.EmitterDepthUM
	base := combination{doping: atoms[0]}
	var metal combination
	combos := make([]combination, 0, numNuisances+2)
	for k, param := range nuisances {
		var c combination
		c.of[k] = 1
		combos = append(combos, c)
		switch param {
		case BaseDose:
			base.of[k] = atoms[1]
		case BaseDepth:
			metal.of[k] = d.BaseDepthUM / width
			base.of[k] = atoms[2] + atoms[3]*metal.of[k]
		case EmitterDepth:
			metal.of[k] = -d.EmitterDepthUM / width
			base.of[k] = atoms[3] * metal.of[k]
		}
	}
	combos = append(combos, base, metal)
	mean := make([]float64, len(combos))
	square := make([]float64, len(combos))
	total := 0.0
	var c cell
	w := post.weights()
	for i, x := range w {
		if x < 1e-5 {
			continue
		}
		u, v := post.u.at(i/post.v.n), post.v.at(i%post.v.n)
		q.evaluate(&c, u, v)
		m, cov := q.conditional(&c)
		total += x
		for k := range combos {
			a := &combos[k]
			mu, va := a.doping*v, 0.0
			for r := range numNuisances {
				if a.of[r] == 0 {
					continue
				}
				mu += a.of[r] * m[r]
				for s := range numNuisances {
					va += a.of[r] * a.of[s] * cov[r][s]
				}
			}
			mean[k] += x * mu
			square[k] += x * (va + mu*mu)
		}
	}
	for k := range combos {
		prior := combos[k].doping * combos[k].doping * q.prior.Sigma[EpiDoping] * q.prior.Sigma[EpiDoping]
		for r, param := range nuisances {
			prior += combos[k].of[r] * combos[k].of[r] * q.prior.Sigma[param] * q.prior.Sigma[param]
		}
		mu := mean[k] / total
		out := gaussian(mu, square[k]/total-mu*mu, prior).through(math.Exp)
		switch k {
		case numNuisances:
			p.BaseGummel = out
		case numNuisances + 1:
			p.BaseWidth = out
		default:
			p.Params[nuisances[k]] = out
		}
	}
	for i := range p.Params {
		if p.Params[i] == (Quantity{}) { // no prior, no reading: as the product says
			p.Params[i] = gaussian(0, q.prior.Sigma[i]*q.prior.Sigma[i], q.prior.Sigma[i]*q.prior.Sigma[i]).through(math.Exp)
		}
	}
}

// gaussian is a quantity whose posterior and prior (mean 0) are normal; data alone
// is what is left when the prior is divided out.
func gaussian(mean, variance, prior float64) Quantity {
	variance = math.Max(variance, 0)
	s := 1.959964 * math.Sqrt(variance)
	q := Quantity{WithPrior: Interval{mean, mean - s, mean + s}, DataOnly: noInterval, Share: 1}
	if prior > 0 {
		q.Share = math.Sqrt(variance / prior)
	}
	if q.Share < blindShare && variance > 0 {
		q.Sight = Seen
		v := 1 / (1/variance - 1/prior)
		m := mean * v / variance
		s := 1.959964 * math.Sqrt(v)
		q.DataOnly = Interval{m, m - s, m + s}
	}
	return q
}

// regime places net thickness against the depletion layer.
func (q *problem) regime(p *Posterior, post *field2) {
	m := q.m
	table := m.table(endless, 0)
	slope := 0.0
	for i := range m.tables {
		if m.tables[i].kind == openBaseSlope {
			at := m.grid.point(0, 0)
			slope = m.tables[i].f.value(m.grid, &at) / 2 // the width goes as the root of the voltage
		}
	}
	w := post.weights()
	// x on a log axis of its own.
	a := newAxis(-3, 3, 1201)
	sum := make([]float64, a.n)
	for i, x := range w {
		u, v := post.u.at(i/post.v.n), post.v.at(i%post.v.n)
		at := m.grid.point(u, v)
		l := math.Log(m.Device.netUM()*um) + u - m.tables[table].f.value(m.grid, &at) - slope*q.gain
		k := int(math.Round((l - a.lo) / a.step))
		sum[max(0, min(k, a.n-1))] += x
	}
	mean, lo, hi := summary(a, sum)
	p.X = Interval{math.Exp(mean), math.Exp(lo), math.Exp(hi)}
	switch {
	case p.X.Upper < 1:
		p.Regime = ReachThrough
	case p.X.Lower > 1:
		p.Regime = NoReachThrough
	default:
		p.Regime = AtTheKnee
	}
}

// words are the sentences of a posterior.
func (q *problem) words(p *Posterior) []string {
	var out []string
	add := func(format string, args ...any) { out = append(out, fmt.Sprintf(format, args...)) }
	switch p.Regime {
	case ReachThrough:
		add("the depletion layer reaches the substrate below BVceo (W/wd %.2f): BVceo follows thickness, d ln BVceo / d ln W about %.2f", p.X.Estimate, 2*(1-p.X.Estimate)/(2-p.X.Estimate))
	case NoReachThrough:
		add("the depletion layer ends inside the epi at BVceo (W/wd %.2f): BVceo follows doping and is blind to thickness; a normal BVceo does not prove the epi is thick enough", p.X.Estimate)
	default:
		add("the epi is about as thick as the depletion layer at BVceo (W/wd %.2f to %.2f): BVceo falls when it is thinner and hardly rises when it is thicker", p.X.Lower, p.X.Upper)
	}
	sight := func(name, unit string, x Quantity) {
		switch x.Sight {
		case Blind:
			add("%s is not observable with these tests: no value from data alone, and with the prior it is %.0f %% as wide as the prior", name, 100*math.Min(1, x.Share))
		case AtLeast:
			add("data alone say only that %s is at least %.3g %s", name, x.DataOnly.Lower, unit)
		case AtMost:
			add("data alone say only that %s is at most %.3g %s", name, x.DataOnly.Upper, unit)
		}
	}
	sight("net thickness", "um", p.NetThickness)
	sight("doping", "cm^-3", p.Doping)
	if p.MisfitN > 2 && p.Misfit > misfitLimit(p.MisfitN) {
		add("the readings do not fit one another on any thickness, doping and base (chi-square %.0f over %d readings): something other than these parameters has moved, or a test is off", p.Misfit, p.MisfitN)
	}
	out = append(out, q.notes...)
	return append(out, p.Separate.Sentences...)
}

// misfitLimit is about the 0.1 % point of chi-square of n degrees.
//
// Source: Wilson and Hilferty, Proc. Nat. Acad. Sci. 17 (1931) 684.
func misfitLimit(n int) float64 {
	k := float64(n)
	c := 1 - 2/(9*k) + 3.0902*math.Sqrt(2/(9*k))
	return k * c * c * c
}
