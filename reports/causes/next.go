package causes

import (
	"math"
	"sort"
	"strings"

	"kneepoint/stats/junction"
)

// Measurement is one worth making, with what it is expected to tell of which cause is
// there: the mutual information of its outcome and the hypotheses.
type Measurement struct {
	Text    string
	Bits    float64
	Caution string // acid, voltage, chemical or ""
	Of      string // the cause whose check it is; "" for an electrical test
}

const (
	falseAlarm = 0.05 // of a check of the catalogue, common practice, no source
	leastBits  = 0.01
	mostNext   = 5
	quadrature = 600 // points of an integral over a reading
)

// measurements are all electrical tests that the device model knows and the lot lacks,
// and the checks of the listed causes, by falling information.
func (v *Verdict) measurements(list []Judged) []Measurement {
	out := v.electrical()
	for _, g := range list {
		if g.entry < 0 {
			continue
		}
		for _, c := range v.j.k.Causes[g.entry].Checks {
			out = append(out, Measurement{Text: c.Text, Bits: checkBits(v.chanceOf(g.entry), c.Power), Caution: c.Caution, Of: g.Cause})
		}
	}
	sort.SliceStable(out, func(a, b int) bool { return out[a].Bits > out[b].Bits })
	return out
}

// chanceOf is the probability that a cause is there, in either direction.
func (v *Verdict) chanceOf(entry int) float64 {
	for i := range v.Causes {
		if v.Causes[i].entry == entry {
			return min(1, v.Causes[i].Probability)
		}
	}
	return 0
}

// nextOf are the measurements told with one cause: with the first all that tell the
// most, with the others those that are theirs.
func nextOf(all []Measurement, cause string, first bool) []Measurement {
	var out []Measurement
	own := 0
	for _, m := range all {
		if m.Of == cause {
			own++
		}
		if m.Bits < leastBits && (m.Of != cause || own > 1) {
			continue
		}
		if m.Of == cause || first || m.Of == "" && m.Bits >= 0.1 {
			out = append(out, m)
		}
	}
	return out[:min(len(out), mostNext)]
}

// checkBits is the information of a check that shows a cause of probability p with
// chance power, and something else with the chance of a false alarm.
func checkBits(p, power float64) float64 {
	shown := p*power + (1-p)*falseAlarm
	return max(0, entropy(shown)-p*entropy(power)-(1-p)*entropy(falseAlarm))
}

func entropy(p float64) float64 {
	if p <= 0 || p >= 1 {
		return 0
	}
	return -p*math.Log2(p) - (1-p)*math.Log2(1-p)
}

// outcome is what a hypothesis expects of a reading: a mixture of Gaussians.
type outcome struct {
	p      float64 // of the hypothesis
	name   string
	weight []float64
	mean   []float64
	sigma  []float64
}

func (o *outcome) density(x float64) float64 {
	s := 0.0
	for i, w := range o.weight {
		z := (x - o.mean[i]) / o.sigma[i]
		s += w * math.Exp(-z*z/2) / (o.sigma[i] * math.Sqrt(2*math.Pi))
	}
	return s
}

// electrical are the tests that the device model knows beside the lot's own. Each is
// taken on an affected wafer against a healthy one; a hypothesis's sizes count as
// likely as the levels at hand make them.
func (v *Verdict) electrical() []Measurement {
	m := v.j.e.cols.Model
	if m == nil {
		return nil
	}
	used := map[int]bool{}
	for t := range v.j.e.cols.Tests {
		used[v.j.e.cols.Tests[t].Model] = true
	}
	var out []Measurement
	for i := range m.Tests {
		if used[i] {
			continue
		}
		list := v.outcomes(i)
		if list == nil {
			continue
		}
		bits := information(list)
		if bits < leastBits {
			continue
		}
		text := m.Tests[i].Name + ", on an affected and a healthy wafer"
		sort.SliceStable(list, func(a, b int) bool { return list[a].p > list[b].p })
		parts := []string{list[0].says()}
		for k := 1; k < len(list); k++ {
			if math.Abs(list[k].middle()-list[0].middle()) > list[0].sigma[0] { // the likeliest that it tells apart
				parts = append(parts, list[k].says())
				break
			}
		}
		out = append(out, Measurement{Text: text + ": " + strings.Join(parts, ", "), Bits: bits, Caution: hazard(&m.Tests[i])})
	}
	return out
}

// hazard is the caution of an electrical test: breakdown and what is read next to it.
func hazard(t *junction.Test) string {
	const touchable = 40 // V, common practice, no source
	switch t.Measures {
	case junction.BVceo, junction.BVcbo, junction.BVces, junction.PlaneBV, junction.Multiplication:
		return "voltage"
	}
	if t.Voltage > touchable {
		return "voltage"
	}
	return ""
}

// middle is the mean of a mixture.
func (o *outcome) middle() float64 {
	m := 0.0
	for k := range o.mean {
		m += o.weight[k] * o.mean[k]
	}
	return m
}

func (o *outcome) says() string {
	m := o.middle()
	if math.Abs(m) < 0.005 {
		return o.name + " leaves it where it is"
	}
	return o.name + " has it " + change(m) + " healthy"
}

// outcomes are the hypotheses' expectations of model test i, pairs among them: a
// reading does not tell causes apart that may hold together. Those of hardly any
// probability are left out.
func (v *Verdict) outcomes(i int) []outcome {
	j := v.j
	m := j.e.cols.Model
	slope := m.Sensitivity(i)
	spread := 0.0
	for p, s := range slope {
		if x := s * j.e.cols.Spread.Sigma[p]; !math.IsNaN(x) && !math.IsInf(x, 0) {
			spread += x * x
		}
	}
	const wafers = waferShare // of what lots spread
	sigma := math.Hypot(readError(m.Tests[i].Measures), wafers*math.Sqrt(spread))
	const least = 0.003
	var out []outcome
	sum := 0.0
	for n, p := range j.posterior(&v.weigh) {
		h := j.all[n]
		if p < least {
			continue
		}
		o := outcome{p: p, name: j.nameOf(h), weight: []float64{1}, mean: []float64{0}, sigma: []float64{sigma}}
		if h.unknown {
			o.sigma[0] *= 6
		}
		for _, x := range h.sees {
			j.shifted(&o, i, x)
		}
		out = append(out, o)
		sum += p
	}
	if len(out) < 2 {
		return nil
	}
	for k := range out {
		out[k].p /= sum
	}
	return out
}

func (j *judged) nameOf(h *hypothesis) string {
	var names []string
	for n, c := range h.causes {
		e := &j.k.Causes[c]
		name := e.Cause
		if len(e.Directions) > 0 {
			name += " " + e.Directions[h.dirs[n]]
		}
		names = append(names, name)
	}
	switch {
	case h.unknown:
		return Unknown
	case len(names) == 0:
		return Nothing
	}
	return strings.Join(names, " and ")
}

// shifted moves an expectation of model test i by a cause's shift, over its sizes.
func (j *judged) shifted(o *outcome, i int, x *seen) {
	shift, at := j.shiftOf(x)
	if shift == nil {
		return
	}
	chance := j.sizeChances(x)
	base := *o
	o.weight, o.mean, o.sigma = nil, nil, nil
	sum := 0.0
	for k, size := range at {
		move := j.moveOf(i, shift, size)
		if math.IsNaN(move) {
			continue
		}
		for b := range base.mean {
			o.weight = append(o.weight, chance[k]*base.weight[b])
			o.mean = append(o.mean, base.mean[b]+move)
			o.sigma = append(o.sigma, math.Hypot(base.sigma[b], moveError*move))
			sum += chance[k] * base.weight[b]
		}
	}
	if !(sum > 0) {
		*o = base
		return
	}
	for k := range o.weight {
		o.weight[k] /= sum
	}
}

// moveOf is the change of a model test's log reading by a shift of a log size.
func (j *judged) moveOf(test int, shift *Shift, size float64) float64 {
	c := *j.e.cols
	c.Tests = []Test{{Measures: c.Model.Tests[test].Measures, Model: test}}
	s := slopes{c: &c}
	return s.move(0, shift, size)
}

// shiftOf finds the catalogue's shift that a variant is of, with the log size of
// each of its moves; nil for one that only scales a test.
func (j *judged) shiftOf(x *seen) (*Shift, []float64) {
	if x == nil || x.v.cause < 0 || x.v.test >= 0 || len(x.v.moves) == 0 {
		return nil, nil
	}
	e := &j.k.Causes[x.v.cause]
	for s := range e.Shifts {
		for _, sign := range []float64{1, -1} {
			var at []float64
			for _, size := range sizes(e.Shifts[s].From, e.Shifts[s].To) {
				if len(at) == len(x.v.moves) {
					break
				}
				same := true
				for i, t := range j.f.tests {
					same = same && j.f.slope.move(t, &e.Shifts[s], sign*size) == x.v.moves[len(at)][i]
				}
				if same {
					at = append(at, sign*size)
				}
			}
			if len(at) == len(x.v.moves) {
				return &e.Shifts[s], at
			}
		}
	}
	return nil, nil
}

// sizeChances are the chances of a variant's sizes: by the typical wafer where it is
// affected, else by the wafer that speaks most for the cause.
func (j *judged) sizeChances(x *seen) []float64 {
	logs := make([]float64, len(x.v.moves))
	switch {
	case len(x.bySize) == len(logs) && x.lot > 1:
		copy(logs, x.bySize)
	default:
		best := 0
		for w := range x.affected {
			if x.affected[w] > x.affected[best] {
				best = w
			}
		}
		if best < len(j.s.wafers) {
			for i, d := range x.v.wafer {
				logs[i] = d.at(j.s.wafers[best])
			}
		}
	}
	top := math.Inf(-1)
	for _, l := range logs {
		top = max(top, l)
	}
	sum := 0.0
	for i, l := range logs {
		logs[i] = math.Exp(0.5 * (l - top))
		sum += logs[i]
	}
	for i := range logs {
		logs[i] /= sum
	}
	return logs
}

// information is the mutual information of hypotheses and a reading, in bits, by the
// trapezoidal rule over the mixture's whole extent.
func information(list []outcome) float64 {
	low, high := math.Inf(1), math.Inf(-1)
	for _, o := range list {
		for i := range o.mean {
			low, high = min(low, o.mean[i]-6*o.sigma[i]), max(high, o.mean[i]+6*o.sigma[i])
		}
	}
	step := (high - low) / quadrature
	bits := 0.0
	for s := range quadrature + 1 {
		x := low + float64(s)*step
		all, part := 0.0, 0.0
		for i := range list {
			if f := list[i].p * list[i].density(x); f > 0 {
				all += f
				part += f * math.Log2(f/list[i].p)
			}
		}
		if all > 0 {
			bits += (part - all*math.Log2(all)) * step
		}
	}
	return max(0, bits)
}

// AsText says what a caution of a measurement is about, "" for none.
func (m Measurement) AsText() string {
	if text, ok := cautionText[m.Caution]; ok {
		return text
	}
	return m.Caution
}

// cautionText are the words that go with steps that can hurt someone.
var cautionText = map[string]string{
	"acid": "Acid decoration and etching: fume hood, protective equipment and the site's chemical rules; hydrofluoric acid only with its first-aid plan " +
		"and gel at hand, by people trained for it.",
	"voltage":  "High-voltage measurement: use the interlock and a current limit, discharge before touching, and leave it to trained people.",
	"chemical": "Hazardous chemicals (mercury, solvents): only under the site's chemical rules, by people trained for it.",
}

// Cautions are the words for all measurements of a list, each once.
func Cautions(list []Measurement) []string {
	var out []string
	for _, kind := range []string{"acid", "voltage", "chemical"} {
		for _, m := range list {
			if m.Caution == kind {
				out = append(out, cautionText[kind])
				break
			}
		}
	}
	return out
}
