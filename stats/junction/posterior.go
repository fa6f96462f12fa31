package junction

import "math"

// Interval is an estimate with a 95 % interval. Estimate is NaN where there is
// none; a bound is NaN where the data give none on that side.
type Interval struct{ Estimate, Lower, Upper float64 }

var noInterval = Interval{math.NaN(), math.NaN(), math.NaN()}

// Sight says on which sides data alone bound a quantity.
type Sight int

const (
	Blind   Sight = iota // not at all
	AtLeast              // a lower bound only
	AtMost               // an upper bound only
	Seen                 // from both sides
)

// String returns the sight in words.
func (s Sight) String() string {
	return [...]string{"not observable", "lower bound only", "upper bound only", "observable"}[s]
}

// Quantity is what is known of one physical quantity.
type Quantity struct {
	WithPrior Interval // always given
	DataOnly  Interval // from data alone; no Estimate unless Sight is Seen
	Sight     Sight
	// Share is the width of the interval with prior over that of the prior alone: 1
	// when the tests add nothing. From 0.9 up the quantity counts as not observable.
	Share float64
}

// blindShare is the Share from which on a quantity counts as not observable.
const blindShare = 0.9

// Regime is where net thickness stands against the depletion layer at BVceo.
type Regime string

const (
	ReachThrough   Regime = "reach-through"    // the layer reaches the substrate: BVceo sees thickness
	NoReachThrough Regime = "no reach-through" // it ends in the epi: BVceo sees doping only
	AtTheKnee      Regime = "borderline"       // the readings leave both open
)

// Posterior is what a set of readings says. Thickness is in um, doping in cm^-3,
// everything in Params is a ratio to nominal.
type Posterior struct {
	NetThickness Quantity // what the tests see: thickness less base and up-diffused tail
	Thickness    Quantity // as grown, by what base depth and up-diffusion usually are
	Doping       Quantity
	Resistivity  Quantity // ohm cm at 23 C, by ASTM F723
	Params       [NumParams]Quantity
	BaseGummel   Quantity // atoms per cm^2 of the neutral base, ratio to nominal
	BaseWidth    Quantity // metallurgical, ratio to nominal

	Regime      Regime
	X           Interval // net thickness over the depletion width at BVceo in endless epi
	Correlation float64  // of log thickness and log doping, with prior
	Best        Process  // most probable process point, logs of ratios
	Misfit      float64  // chi-square of the readings at Best, over MisfitN degrees
	MisfitN     int
	Notes       []string // sentences for the reader, most important first
	Separate    Separability
}

// field2 is a posterior or likelihood on a grid of log thickness and log doping.
type field2 struct {
	u, v axis
	log  []float64
	max  float64
}

// scan evaluates a grid; the prior of doping counts when that of thickness does.
func (q *problem) scan(u, v axis) *field2 {
	f := &field2{u: u, v: v, log: make([]float64, u.n*v.n), max: math.Inf(-1)}
	var c cell
	pull := q.pull()
	for i := range u.n {
		for j := range v.n {
			y := v.at(j)
			ll := q.evaluate(&c, u.at(i), y) - pull*y*y
			f.log[i*v.n+j] = ll
			f.max = math.Max(f.max, ll)
		}
	}
	return f
}

// box is the range of an axis in which the field is within drop of its maximum,
// one node wider on either side.
func (f *field2) box(drop float64) (u, v axis) {
	i0, i1, j0, j1 := f.u.n, -1, f.v.n, -1
	for i := range f.u.n {
		for j := range f.v.n {
			if f.log[i*f.v.n+j] > f.max-drop {
				i0, i1, j0, j1 = min(i0, i), max(i1, i), min(j0, j), max(j1, j)
			}
		}
	}
	i0, i1, j0, j1 = max(i0-1, 0), min(i1+1, f.u.n-1), max(j0-1, 0), min(j1+1, f.v.n-1)
	return newAxis(f.u.at(i0), f.u.at(i1), fineNodes), newAxis(f.v.at(j0), f.v.at(j1), fineNodes)
}

const coarseNodes, fineNodes = 21, 33

// zoom scans coarsely over a range, then finely over what counts, until the grid
// resolves it.
func (q *problem) zoom(u, v axis, drop float64) *field2 {
	f := q.scan(u, v)
	for range 3 {
		u, v := f.box(drop)
		next := q.scan(u, v)
		done := (next.u.hi()-next.u.lo) > 0.6*(f.u.hi()-f.u.lo) && (next.v.hi()-next.v.lo) > 0.6*(f.v.hi()-f.v.lo)
		f = next
		if done {
			break
		}
	}
	return f
}

// weights are the field's cells as probabilities.
func (f *field2) weights() []float64 {
	w := make([]float64, len(f.log))
	sum := 0.0
	for i, l := range f.log {
		w[i] = math.Exp(l - f.max)
		sum += w[i]
	}
	for i := range w {
		w[i] /= sum
	}
	return w
}

// marginal sums weights over the other axis.
func (f *field2) marginal(w []float64, alongU bool) []float64 {
	n := f.v.n
	if alongU {
		n = f.u.n
	}
	out := make([]float64, n)
	for i := range f.u.n {
		for j := range f.v.n {
			k := j
			if alongU {
				k = i
			}
			out[k] += w[i*f.v.n+j]
		}
	}
	return out
}

// summary is the mean and the central 95 % of a marginal on an axis; mass is
// spread evenly between the middles of its cells.
func summary(a axis, w []float64) (mean, lo, hi float64) {
	for i, x := range w {
		mean += x * a.at(i)
	}
	at := func(p float64) float64 {
		sum := 0.0
		for i, x := range w {
			if sum+x >= p && x > 0 {
				return a.at(i) + a.step*((p-sum)/x-0.5)
			}
			sum += x
		}
		return a.hi()
	}
	return mean, at(0.025), at(0.975)
}

// profile is the best log likelihood along an axis.
func (f *field2) profile(alongU bool) []float64 {
	n := f.v.n
	if alongU {
		n = f.u.n
	}
	out := make([]float64, n)
	for i := range out {
		out[i] = math.Inf(-1)
	}
	for i := range f.u.n {
		for j := range f.v.n {
			k := j
			if alongU {
				k = i
			}
			out[k] = math.Max(out[k], f.log[i*f.v.n+j])
		}
	}
	return out
}

// The fall of a profile likelihood that bounds 95 %: two-sided, and one-sided.
const twoSided, oneSided = 1.9207, 1.3528

// bounds reads a profile's interval. openLow and openHigh say that the end of the
// range is not excluded; then the bound on the other side is the one-sided one.
func bounds(a axis, p []float64) (est, lo, hi float64, openLow, openHigh bool) {
	best := 0
	for i := range p {
		if p[i] > p[best] {
			best = i
		}
	}
	est, top := a.at(best), p[best]
	if best > 0 && best < a.n-1 { // the parabola's top
		l, m, r := p[best-1], p[best], p[best+1]
		if d := l - 2*m + r; d < 0 && !math.IsInf(l, 0) && !math.IsInf(r, 0) {
			est += a.step * (l - r) / (2 * d)
			top -= (l - r) * (l - r) / (8 * d)
		}
	}
	cross := func(dir int, drop float64) (float64, bool) {
		for i := best; i+dir >= 0 && i+dir < a.n; i += dir {
			y0, y1 := p[i]-top+drop, p[i+dir]-top+drop
			if y1 < 0 {
				if math.IsInf(y1, 0) {
					return a.at(i + dir), true
				}
				return a.at(i) + float64(dir)*a.step*math.Max(0, y0)/(math.Max(0, y0)-y1), true
			}
		}
		return math.NaN(), false
	}
	var okLow, okHigh bool
	lo, okLow = cross(-1, twoSided)
	hi, okHigh = cross(1, twoSided)
	openLow, openHigh = !okLow, !okHigh
	if openLow && okHigh {
		hi, _ = cross(1, oneSided)
	}
	if openHigh && okLow {
		lo, _ = cross(-1, oneSided)
	}
	return est, lo, hi, openLow, openHigh
}
