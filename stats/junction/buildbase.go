package junction

import (
	"fmt"
	"math"
)

// gummelTable is the base at a collector-emitter voltage: logs to second order in
// epi doping, base dose, base depth, metallurgical base width and temperature.
// Width stands in for emitter depth because the logs are nearly straight in it.
type gummelTable struct {
	vce                  float64
	atoms, number, sheet taylor[[5]float64]
}

type baseTable struct {
	at   []gummelTable
	gain float64 // nominal hFE at the current that BVceo is tabulated for
}

func (b *baseTable) index(vce float64) int {
	for i := range b.at {
		if b.at[i].vce == vce {
			return i
		}
	}
	b.at = append(b.at, gummelTable{vce: vce})
	return len(b.at) - 1
}

func (b *baseTable) fill(m *Model) error {
	for i := range b.at {
		t := &b.at[i]
		of := func(pick int) taylor[[5]float64] {
			return expand(func(x [5]float64) float64 {
				p := Process{EpiDoping: x[0], BaseDose: x[1], BaseDepth: x[2], Temperature: x[4]}
				width := (m.Device.BaseDepthUM - m.Device.EmitterDepthUM) * math.Exp(x[3])
				p[EmitterDepth] = math.Log((m.Device.BaseDepthUM*math.Exp(x[2]) - width) / m.Device.EmitterDepthUM)
				if math.IsNaN(p[EmitterDepth]) { // an emitter above the surface: the base has no such width
					p[EmitterDepth] = -20
				}
				p = m.processAt(0, x[0], &p)
				_, atoms, number, sheet := m.Device.make(&p, &m.nat).gummel(t.vce)
				return math.Log([3]float64{atoms, number, sheet}[pick])
			})
		}
		t.atoms, t.number, t.sheet = of(0), of(1), of(2)
		if math.IsNaN(t.number.value(&[5]float64{0.01, 0.01, 0.01, 0.01, 0.001})) {
			return fmt.Errorf("junction: at VCE %g V the collector's depletion layer reaches the emitter: the base (%g to %g um, %g cm^-3 at the surface) is too thin or too lightly doped",
				t.vce, m.Device.EmitterDepthUM, m.Device.BaseDepthUM, m.Device.BaseSurfaceCM3)
		}
	}
	return nil
}

// rimTable is the curved junction's breakdown over the doping under the oxide, the
// edge radius and the corner: s = R/(R + rj) is 1 for a straight edge. To first
// order it follows base dose and temperature.
type rimTable struct {
	n, r, s    axis
	f          []float64
	dose, heat float64
	surface    float64 // nominal doping under the oxide, cm^-3
}

func (m *Model) fillRims(kept *tape) *rimTable {
	t := &rimTable{n: newAxis(-1.3, 2.4, 8), r: newAxis(-1.2, 0.9, 7), s: newAxis(0, 1, 9), surface: m.nominal.surface}
	t.f = make([]float64, t.n.n*t.r.n*t.s.n)
	if !kept.reading {
		each(len(t.f), func(i int) { t.f[i] = m.rimNode(t, i) })
		x := m.nominal
		s := m.Device.CornerRadiusUM * um / (m.Device.CornerRadiusUM*um + x.rj)
		const h = 0.05
		t.dose = (m.rimAt(0, 0, s, x.prof.ns*math.Exp(h), x.kelvin) - m.rimAt(0, 0, s, x.prof.ns*math.Exp(-h), x.kelvin)) / (2 * h)
		t.heat = (m.rimAt(0, 0, s, x.prof.ns, x.kelvin*1.01) - m.rimAt(0, 0, s, x.prof.ns, x.kelvin/1.01)) / (2 * math.Log(1.01))
	}
	kept.row(t.f)
	kept.number(&t.dose)
	kept.number(&t.heat)
	return t
}

// rimAt is ln of the curved junction's breakdown.
func (m *Model) rimAt(n, r, s, ns, kelvin float64) float64 {
	rj := m.nominal.rj * math.Exp(r)
	c := newRim(m.nominal.surface*math.Exp(n), ns, rj, s < 1, rj*s/(1-s))
	law := overstraeten(kelvin, m.nat.fieldScale)
	return math.Log(c.breakdown(&law, kelvin))
}

// rimNode is node i of the table.
func (m *Model) rimNode(t *rimTable, i int) float64 {
	return m.rimAt(t.n.at(i/(t.r.n*t.s.n)), t.r.at(i/t.s.n%t.r.n), t.s.at(i%t.s.n), m.nominal.prof.ns, m.nominal.kelvin)
}

// log is ln of the breakdown at logs of the ratios of doping under the oxide and
// edge radius, and at s.
func (t *rimTable) log(n, r, s float64) float64 {
	a, b, c := t.n.stencil(n), t.r.stencil(r), t.s.stencil(s)
	sum := 0.0
	for i := range 4 {
		for j := range 4 {
			o := ((a.i+i)*t.r.n+b.i+j)*t.s.n + c.i
			f := t.f[o : o+4 : o+4]
			sum += a.w[i] * b.w[j] * (c.w[0]*f[0] + c.w[1]*f[1] + c.w[2]*f[2] + c.w[3]*f[3])
		}
	}
	return sum
}

// leakTable is what the rim adds to a leakage or a capacitance at one voltage.
// Generation along it is to first order in doping under the oxide, edge radius and
// base dose; the corner is straight in its mask radius.
type leakTable struct {
	volts          float64
	bulk, skin     [4]float64 // ln per cm of edge, and slopes: generation by lifetime and surface velocity
	bend, bendSkin [2]float64 // corner: constant and per cm of mask radius, same split
	cap            [4]float64 // ln F per cm, and slopes
	integral       []float64  // ln I of the corner against u = volts over its breakdown
	u              axis
}

func (m *Model) fillLeak(t *Test) *leakTable {
	k := &leakTable{volts: t.Voltage, u: newAxis(0.3, 1, 11)}
	x := m.nominal
	one := func(float64) float64 { return 1 }
	side := func(r float64) float64 { return r }
	at := func(n, r, ns float64) (bulk, skin, c float64) {
		e := newRim(x.surface*math.Exp(n), x.prof.ns*math.Exp(ns), x.rj*math.Exp(r), false, 0)
		ri := e.seek(t.Voltage+e.builtIn(x.kelvin), e.potential)
		return math.Log(math.Pi / 2 * e.generation(ri, x.fg, side)), math.Log(e.generation(ri, x.fg, one)),
			math.Log(permittivity * math.Pi / 2 / math.Log(e.outer(ri)/ri))
	}
	k.bulk[0], k.skin[0], k.cap[0] = at(0, 0, 0)
	const h = 0.06
	for i := range 3 {
		var s [3]float64
		s[i] = h
		b1, s1, c1 := at(s[0], s[1], s[2])
		b0, s0, c0 := at(-s[0], -s[1], -s[2])
		k.bulk[i+1], k.skin[i+1], k.cap[i+1] = (b1-b0)/(2*h), (s1-s0)/(2*h), (c1-c0)/(2*h)
	}
	x.rims()
	rc := x.notch.seek(t.Voltage+x.notchVbi, x.notch.potential)
	k.bend[0] = math.Pi * math.Pi * x.notch.generation(rc, x.fg, func(r float64) float64 { return r * r })
	k.bend[1] = math.Pi * math.Pi * x.notch.generation(rc, x.fg, side)
	k.bendSkin[0] = 2 * math.Pi * x.notch.generation(rc, x.fg, side)
	k.bendSkin[1] = 2 * math.Pi * x.notch.generation(rc, x.fg, one)
	bv := x.notch.breakdown(&x.law, x.kelvin)
	k.integral = make([]float64, k.u.n)
	each(k.u.n, func(i int) {
		ri := x.notch.seek(bv*k.u.at(i)+x.notchVbi, x.notch.potential)
		k.integral[i] = math.Log(math.Max(1e-12, x.notch.multiplication(ri, &x.law)))
	})
	return k
}

// gain is 1/(1-I) of a curved junction at a share of its breakdown voltage.
func (k *leakTable) gain(share float64) float64 {
	if share >= 1 {
		return math.Inf(1)
	}
	if !(share > k.u.lo) {
		return 1
	}
	s := k.u.stencil(share)
	f := k.integral[s.i : s.i+4]
	return gainOf(math.Exp(math.Min(0, s.w[0]*f[0]+s.w[1]*f[1]+s.w[2]*f[2]+s.w[3]*f[3])))
}

// line is a test's log to second order in each parameter alone.
type line struct {
	f            float64
	slope, curve [NumParams]float64
}

func (m *Model) fillLine(t *Test) *line {
	l := &line{f: math.Log(m.nominal.value(t))}
	each(NumParams, func(i int) {
		h := 0.04
		if Param(i) == Temperature {
			h = 0.01
		}
		var p Process
		p[i] = h
		up := math.Log(m.Device.make(&p, &m.nat).value(t))
		p[i] = -h
		down := math.Log(m.Device.make(&p, &m.nat).value(t))
		l.slope[i], l.curve[i] = (up-down)/(2*h), (up+down-2*l.f)/(2*h*h)
	})
	return l
}

func (l *line) value(p *Process) float64 {
	s := l.f
	for i := range p {
		s += p[i] * (l.slope[i] + l.curve[i]*p[i])
	}
	return s
}
