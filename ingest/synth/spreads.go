package synth

import "math"

// target is what the product's baseline says of a test's spread, as shares of its
// median; NaN where it says nothing.
type target struct{ pooled, within, lot float64 }

// targets reads the baseline, and works out how many healthy dice lie beyond the
// limits by their spread alone.
func (m *Maker) targets() {
	m.levels = make([]target, len(m.spec.Tests))
	keep := 1.0
	for i := range m.levels {
		m.levels[i] = target{none, none, none}
		t := &m.spec.Tests[i]
		if m.product.Baseline == nil {
			continue
		}
		b, ok := m.product.Baseline.Tests[t.Name]
		if !ok || !(b.Median > 0) || !(b.Sigma > 0) {
			continue
		}
		l := target{b.Sigma / b.Median, b.WithinLotSigma / b.Median, b.LotSigma / b.Median}
		m.levels[i] = l
		below, above := 0.0, 0.0
		if t.Lower > 0 {
			below = normalTail(math.Log(t.Typical/t.Lower) / l.pooled)
		}
		if t.Upper > 0 {
			above = normalTail(math.Log(t.Upper/t.Typical) / l.pooled)
		}
		keep *= 1 - below - above
	}
	m.tails = 1 - keep
	if m.product.Baseline != nil {
		m.yield = m.product.Baseline.Yield
	}
}

func normalTail(z float64) float64 { return 0.5 * math.Erfc(z/math.Sqrt2) }

// drawTester draws noise, site offsets, resolution, ends of range and habits. A
// tester is no coarser than its product can bear: noise stays under half of the
// spread within a lot, a step under a third of it.
func (m *Maker) drawTester(s *Spec, d *draws) {
	for i := range s.Tests {
		t, e := &s.Tests[i], d.under(uint64(i))
		f := e.factor(0.6)
		t.Gauge, t.Noise, t.SiteOffset = t.Gauge*f, t.Noise*e.factor(0.6), t.SiteOffset*e.factor(0.7)
		step := oneOf(e, 0.2, 0.5, 1, 1, 2)
		if l := m.levels[i]; l.pooled > 0 {
			within := or(l.within, 0.85*l.pooled)
			if noise := math.Hypot(t.Noise/t.Typical, t.Gauge); noise > within/2 {
				t.Noise, t.Gauge = t.Noise*within/2/noise, t.Gauge*within/2/noise
			}
			t.SiteOffset = min(t.SiteOffset, within/3)
			for step*t.Resolution > within*t.Typical/3 {
				step /= 10
			}
		}
		t.Resolution = roundStep(t.Resolution * step)
		if !(m.clamped(t.Name)) {
			t.Clamp = roundStep(t.Typical * e.logBetween(3, 300))
		}
	}
	if d.chance(0.5) {
		s.Missing = d.logBetween(1e-4, 4e-3)
	}
	if d.chance(0.5) {
		s.Retest = d.between(0.1, 1)
	}
	if d.chance(0.3) {
		s.Repeat = d.logBetween(1e-4, 5e-3)
	}
}

// clamped reports whether the product file gives the test's clamp.
func (m *Maker) clamped(name string) bool {
	for i := range m.product.Tests {
		if m.product.Tests[i].Name == name {
			return m.product.Tests[i].Clamp > 0
		}
	}
	return false
}

// roundStep is v to one digit, of 1, 2 and 5.
func roundStep(v float64) float64 {
	e := math.Floor(math.Log10(v))
	p := math.Pow10(int(e))
	switch x := v / p; {
	case x < 1.5:
		return p
	case x < 3.5:
		return 2 * p
	case x < 7.5:
		return 5 * p
	}
	return math.Pow10(int(e) + 1)
}

// drawSpread draws how far each latent strays at each level, then fits all of them
// to what the baseline allows each test.
func (m *Maker) drawSpread(s *Spec, d *draws) {
	s.Smooth = Smooth{Power: d.between(1.5, 4), Saddle: d.between(0, 1)}
	for q := range s.Spread {
		p, e := &s.Spread[q], d.under(uint64(q))
		for _, v := range []*float64{&p.Lot, &p.Wafer, &p.Die, &p.Bowl, &p.Tilt} {
			*v *= e.factor(0.4)
		}
		p.MeanBowl *= e.between(-1, 1.5)
	}
	split := d.between(0.15, 0.45) // of the pooled variance between lots, where the file does not say
	within, lots := make([]float64, len(m.levels)), make([]float64, len(m.levels))
	for i, l := range m.levels {
		within[i], lots[i] = l.within, l.lot
		if math.IsNaN(l.within) {
			within[i] = l.pooled * math.Sqrt(1-split)
		}
		if math.IsNaN(l.lot) {
			lots[i] = l.pooled * math.Sqrt(split)
		}
		t := &s.Tests[i]
		noise := math.Hypot(math.Hypot(t.Noise/t.Typical, t.Gauge), t.SiteOffset)
		within[i] = math.Sqrt(max(within[i]*within[i]-noise*noise, within[i]*within[i]/4))
	}
	slopes := s.slopes()
	f := fit(slopes, within, func(q int) float64 { return math.Sqrt(s.Spread[q].within()) })
	g := fit(slopes, lots, func(q int) float64 { return s.Spread[q].Lot })
	wide := d.factor(0.06)
	for q := range s.Spread {
		p := &s.Spread[q]
		lot := p.Lot * g[q]
		*p = p.times(f[q] * wide)
		p.Lot = lot
	}
}

// fit returns a factor for each latent with which the tests' spreads come as near
// to what is wanted as their shared latents allow: each latent moves by the
// tests' log ratios, weighted by its part in each (proportional fitting).
func fit(slopes [][NumLatents]float64, want []float64, sigma func(q int) float64) (f [NumLatents]float64) {
	for q := range f {
		f[q] = 1
	}
	part := func(t, q int) float64 { return math.Pow(slopes[t][q]*f[q]*sigma(q), 2) }
	for range 40 {
		var sum, weight [NumLatents]float64
		for t := range slopes {
			if !(want[t] > 0) {
				continue
			}
			have := 0.0
			for q := range f {
				have += part(t, q)
			}
			if !(have > 0) {
				continue
			}
			ratio := 0.5 * math.Log(want[t]*want[t]/have)
			for q := range f {
				// A test that is too wide pulls harder: the baseline is kept first.
				w := part(t, q) / have
				if ratio < 0 {
					w *= 2
				}
				sum[q] += w * ratio
				weight[q] += w
			}
		}
		for q := range f {
			f[q] = min(max(f[q]*math.Exp(sum[q]/max(weight[q], 0.3)), 0.1), 8)
		}
	}
	return f
}

// slopes are d ln test / d latent at target, 0 where a test has no level.
func (s *Spec) slopes() [][NumLatents]float64 {
	m := s.forward()
	out := make([][NumLatents]float64, len(s.Tests))
	up, down := make([]float64, len(s.Tests)), make([]float64, len(s.Tests))
	const step = 1e-3
	for q := range NumLatents {
		var p Process
		p[q] = step
		m.values(up, &p)
		p[q] = -step
		m.values(down, &p)
		for t := range out {
			if v := (math.Log(up[t]) - math.Log(down[t])) / (2 * step); !math.IsNaN(v) && !math.IsInf(v, 0) {
				out[t][q] = v
			}
		}
	}
	return out
}

// drawBackground draws what every lot has a little of, so that healthy lots yield
// about what the baseline says, now less, now more.
func (m *Maker) drawBackground(s *Spec, d *draws) {
	yield := m.yield
	if !(yield > 0) {
		yield = d.between(0.88, 0.985)
	}
	loss := max(1-yield-m.tails, 0.2*(1-yield)) * d.factor(0.25)
	weight := [...]float64{d.between(0.5, 1.2), d.between(0.05, 0.3), d.between(0.05, 0.35), d.between(0.1, 0.6)}
	sum := weight[0] + weight[1] + weight[2] + weight[3]
	share := func(i int) float64 { return loss * weight[i] / sum }
	dice, _, _ := s.Grid.layout()
	edge := Place{Shape: Ring, Inner: d.between(0.75, 0.85), Outer: d.between(0.9, 0.97)}
	s.Causes = []Cause{
		{ID: "random-defects", Text: "point defects", Background: true, Share: share(0), Damage: Defect, Jitter: d.between(0.05, 0.3)},
		{ID: "emitter-collector-pipe", Text: "pipes through the base", Background: true, Share: share(1), Damage: Pipe, Jitter: d.between(0.05, 0.3)},
		{ID: "random-defects", Text: "single dice with generation centres", Background: true, Share: share(2),
			Shift: Process{Lifetime: -d.between(3, 4.5)}, Scatter: 0.25},
		{ID: "edge-dice", Text: "dice at the wafer's edge", Background: true, Damage: Wreck, Place: edge,
			Share: min(share(3)/max(meanStrength(&edge, dice), 0.01), 0.5)},
	}
}

// meanStrength of a place over the dice.
func meanStrength(p *Place, dice []place) float64 {
	sum := 0.0
	for i := range dice {
		sum += p.strength(&dice[i])
	}
	return sum / float64(max(len(dice), 1))
}
