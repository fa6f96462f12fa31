package junction

import (
	"fmt"
	"math"
)

// weak are the parameters of which the plane junction's tables hold the first
// order only, at every thickness and doping.
var weak = [4]Param{BaseDose, BaseDepth, UpDiffusion, Temperature}

// quantityKind is one property of the plane junction that tests are made of.
type quantityKind int

const (
	openBase quantityKind = iota // ln BVceo at the nominal gain
	openBaseSlope
	openBaseBend
	planeLimit    // ln plane BVcbo
	layerWidth    // ln depletion width at a bias
	generated     // ln of the field-enhanced width, multiplied
	multipliedBy  // ln (M-1)
	epiResistance // ln of the epi's ohmic resistance
	endless       // ln of the depletion width at BVceo in endless epi
)

// planeTable is one quantity over thickness and doping.
type planeTable struct {
	kind  quantityKind
	volts float64
	f     surface
	weak  [len(weak)]surface // d ln / d ln of each weak parameter at fixed net thickness
}

// recipe is which tables a test needs.
type recipe struct {
	first, second int // indices into tables; what they are depends on the test
	third         int
	gummel        int // index into base.at
	leak          *leakTable
	line          *line // for the tests without a structured model
	bvebo         *taylor[[4]float64]
}

// maxMultiplication caps 1/(1-I) in the tables: above it a die is in breakdown.
const maxMultiplication = 1e3

// table returns the index of a quantity's table, adding it when new.
func (m *Model) table(kind quantityKind, volts float64) int {
	for i := range m.tables {
		if m.tables[i].kind == kind && m.tables[i].volts == volts {
			return i
		}
	}
	m.tables = append(m.tables, planeTable{kind: kind, volts: volts})
	return len(m.tables) - 1
}

// openBaseTables are three neighbours: value, slope and half the bend of ln BVceo
// on ln(1+hFE).
func (m *Model) openBaseTables() int {
	i := m.table(openBase, 0)
	m.table(openBaseSlope, 0)
	m.table(openBaseBend, 0)
	return i
}

func (m *Model) build(kept *tape) error {
	m.tables, m.rims = nil, nil
	m.grid = plane2{
		newAxis(math.Log(MinThicknessRatio), math.Log(MaxThicknessRatio), 33),
		newAxis(math.Log(MinDopingRatio), math.Log(MaxDopingRatio), 16),
	}
	m.recipes = make([]recipe, len(m.Tests))
	needRim := false
	m.table(endless, 0)
	m.base = baseTable{at: []gummelTable{{vce: 5}}, gain: m.nominal.gain(5, 1e-3)}
	for i := range m.Tests {
		t, r := &m.Tests[i], &m.recipes[i]
		switch t.Measures {
		case BVceo:
			r.first, r.second = m.openBaseTables(), m.table(planeLimit, 0)
			needRim = true
		case BVcbo, BVces:
			r.second = m.table(planeLimit, 0)
			needRim = true
		case PlaneBV:
			r.second = m.table(planeLimit, 0)
		case Icbo, Iceo:
			r.first, r.second = m.table(generated, t.Voltage), m.table(planeLimit, 0)
			needRim = true
			if t.Measures == Iceo {
				r.third = m.table(multipliedBy, t.Voltage)
			}
		case AreaLeakage:
			r.first = m.table(generated, t.Voltage)
		case Multiplication:
			r.first = m.table(multipliedBy, t.Voltage)
		case Cob:
			r.first = m.table(layerWidth, t.Voltage)
			needRim = true
		case Rc, Vcesat:
			r.first = m.table(epiResistance, 0)
		case HFE, Rpinch:
			r.gummel = m.base.index(t.Voltage)
		case EarlyVoltage:
			r.gummel = m.base.index(t.Voltage)
			r.first = m.table(layerWidth, math.Max(0, t.Voltage-junctionVBE))
		}
	}
	if err := m.fillPlane(kept); err != nil {
		return err
	}
	if err := m.base.fill(m); err != nil {
		return err
	}
	if needRim {
		m.rims = m.fillRims(kept)
	}
	for i := range m.Tests {
		t, r := &m.Tests[i], &m.recipes[i]
		switch t.Measures {
		case Icbo, Iceo, Cob:
			r.leak = m.fillLeak(t)
		case BVebo:
			e := expand(func(x [4]float64) float64 {
				d := *m.nominal
				d.prof.ns *= math.Exp(x[0])
				d.kelvin *= math.Exp(x[1])
				return math.Log(d.bvebo())
			})
			r.bvebo = &e
		case Vbesat, Rb, FT:
			r.line = m.fillLine(t)
		}
	}
	return nil
}

// processAt is the process point of a net thickness and doping (logs of ratios to
// nominal) with the rest as given: the grown thickness follows.
func (m *Model) processAt(u, v float64, rest *Process) Process {
	p := *rest
	p[EpiDoping] = v
	d := &m.Device
	t := d.SiliconConsumedUM + d.BaseDepthUM*math.Exp(p[BaseDepth]) + d.netUM()*math.Exp(u) +
		d.UpDiffusionUM*math.Exp(p[UpDiffusion])*(math.Log(d.SubstrateCM3/d.EpiDopingCM3)-v)
	p[EpiThickness] = math.Log(t / d.EpiThicknessUM)
	return p
}

// weakEvery is how many nodes apart the weak parameters' slopes are computed; in
// between they are interpolated on straight lines.
const weakEveryU, weakEveryV = 4, 5

// fillPlane computes the plane junction's tables, or takes them from a tape.
func (m *Model) fillPlane(kept *tape) error {
	n := m.grid.u.n * m.grid.v.n
	for k := range m.tables {
		t := &m.tables[k]
		t.f = make(surface, n)
		for w := range t.weak {
			t.weak[w] = make(surface, n)
		}
	}
	if !kept.reading {
		if err := m.computePlane(n); err != nil {
			return err
		}
	}
	for k := range m.tables {
		kept.row(m.tables[k].f)
		for w := range weak {
			kept.row(m.tables[k].weak[w])
		}
	}
	return nil
}

func (m *Model) computePlane(n int) error {
	g := m.grid
	each(n, func(i int) {
		vals := make([]float64, len(m.tables))
		m.planeAt(vals, m.processAt(g.u.at(i/g.v.n), g.v.at(i%g.v.n), &Process{}))
		for k := range vals {
			m.tables[k].f[i] = vals[k]
		}
		if (i/g.v.n)%weakEveryU != 0 || (i%g.v.n)%weakEveryV != 0 {
			return
		}
		for w := range weak {
			for k, slope := range m.weakAt(w, i) {
				m.tables[k].weak[w][i] = slope
			}
		}
	})
	for k := range m.tables {
		t := &m.tables[k]
		if !t.f.mend(g) {
			return fmt.Errorf("junction: the device has no depletion layer at %g V: check epi, base depth and base surface concentration", t.volts)
		}
		for w := range t.weak {
			t.weak[w].fillBetween(g)
			t.weak[w].mend(g)
		}
	}
	return nil
}

// weakAt is how all quantities follow a weak parameter at node i; nil where the device has
// none of it.
func (m *Model) weakAt(w, i int) []float64 {
	param, h := weak[w], 0.05
	if param == Temperature {
		h = 0.01
	}
	if param == UpDiffusion && m.Device.UpDiffusionUM == 0 {
		return nil
	}
	u, v := m.grid.u.at(i/m.grid.v.n), m.grid.v.at(i%m.grid.v.n)
	vals, other := make([]float64, len(m.tables)), make([]float64, len(m.tables))
	var rest Process
	rest[param] = h
	m.planeAt(vals, m.processAt(u, v, &rest))
	rest[param] = -h
	m.planeAt(other, m.processAt(u, v, &rest))
	for k := range vals {
		vals[k] = (vals[k] - other[k]) / (2 * h)
	}
	return vals
}

// fillBetween interpolates a surface of which only every few nodes are set.
func (f surface) fillBetween(g plane2) {
	const ku, kv = weakEveryU, weakEveryV
	for i := range g.u.n {
		i0 := min(i/ku*ku, g.u.n-1-ku)
		a := float64(i-i0) / ku
		for j := range g.v.n {
			j0 := min(j/kv*kv, g.v.n-1-kv)
			if i%ku == 0 && j%kv == 0 {
				continue
			}
			b := float64(j-j0) / kv
			at := func(i, j int) float64 { return f[i*g.v.n+j] }
			f[i*g.v.n+j] = (1-a)*((1-b)*at(i0, j0)+b*at(i0, j0+kv)) + a*((1-b)*at(i0+ku, j0)+b*at(i0+ku, j0+kv))
		}
	}
}

// gainRange is how far around the nominal gain BVceo's dependence is fitted, in
// ln(1+hFE).
const gainRange = 0.8

// planeAt computes all plane quantities at a process point.
func (m *Model) planeAt(dst []float64, p Process) {
	d := m.Device.make(&p, &m.nat)
	level := math.Log1p(m.base.gain)
	for k := range m.tables {
		t := &m.tables[k]
		switch t.kind {
		case openBase:
			v, near := d.planeBreakdownNear(math.Exp(-level), nil)
			v1, _ := d.planeBreakdownNear(math.Exp(-level-gainRange), &near)
			v0, _ := d.planeBreakdownNear(math.Exp(-level+gainRange), &near)
			mid, hi, lo := math.Log(v), math.Log(v1), math.Log(v0)
			dst[k], dst[k+1], dst[k+2] = mid, (hi-lo)/(2*gainRange), (hi+lo-2*mid)/(2*gainRange*gainRange)
		case openBaseSlope, openBaseBend: // with openBase
		case planeLimit:
			dst[k] = math.Log(d.planeBreakdown(1))
		case layerWidth:
			l, _ := d.layerAt(t.volts)
			dst[k] = math.Log(l.width())
		case generated:
			l, _ := d.layerAt(t.volts)
			dst[k] = math.Log(d.prof.generation(&l, d.fg) * math.Min(maxMultiplication, gainOf(d.prof.multiplication(&l, &d.law))))
		case multipliedBy:
			dst[k] = math.Log(math.Max(1e-12, math.Min(maxMultiplication, d.multiplied(t.volts))-1))
		case epiResistance:
			dst[k] = math.Log(math.Max(1e-4, d.epiResistance()))
		case endless:
			dst[k] = math.Log(d.endlessWidth(math.Expm1(level)))
		}
	}
}
