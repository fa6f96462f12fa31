package yield

import (
	"fmt"
	"math"
	"math/rand/v2"
	"slices"

	"gonum.org/v1/gonum/stat/distuv"
	"kneepoint/stats"
)

// WindowSize is what windows of one size tell.
type WindowSize struct {
	Wide, High int
	// Windows counts windows with a die at every place; Good weighs those of all good
	// dice, as a share: the yield of such windows.
	Windows int
	Good    float64
	// Fitted is Good by the fit; NaN when the size was not used, as too few windows
	// are good.
	Fitted float64
}

// Windowing is a lot's loss split in two.
type Windowing struct {
	// Systematic is the share of dice lost together: to regions, patterns, whole
	// wafers. Random is what the other dice lose one by one, as a share of all
	// dice. Their estimates add up to the whole loss.
	Systematic, Random stats.Interval
	// RandomRate is the chance that a die outside of what is lost together fails
	// by itself.
	RandomRate stats.Interval
	// Sizes are the windows used, from one die on.
	Sizes []WindowSize
	// Wafers, Dice and Passing are what was used. Again counts dice at a place that
	// had one already, the last counting; Unplaced dice without a coordinate, or on
	// wafers whose coordinates make no grid.
	Wafers, Dice, Passing int
	Again, Unplaced       int
	Why                   string
}

// windowSizes are the sizes looked at; both ways round, as patterns may lie either
// way.
var windowSizes = [][2]int{{1, 1}, {1, 2}, {2, 1}, {2, 2}, {2, 3}, {3, 2}, {3, 3}, {3, 4}, {4, 3}, {4, 4}}

// enoughGood is how many dice must lie in good windows for a size to be used.
const enoughGood = 20

// resamples of the bootstrap.
const resamples = 1000

// Windows splits the loss of a lot into what dice lose one by one and what they
// lose together, by grouping neighbouring dice into windows of one, two, four and
// more. x and y are die columns and rows, wafer tells the dice's wafers apart.
// A coordinate of math.MinInt32 is unknown.
//
// If dice fail by themselves, with chance r, windows of k dice are good with chance
// (1-r)^k: minus the logarithm of their yield is a line in k through zero. What is
// lost together, say a dead ring, is lost to windows of any size alike: it
// lifts that line. So the slope gives the random loss, and what is left of the
// yield at k = 1 is systematic. A window also fails when it only touches the
// ring, which bends the line; so the fit to windows of a by b dice is
//
//	-ln(Y_ab/Y_11) = l (ab-1) + e (a+b-2) + s (1-2^-(ab-1)),  l, e, s >= 0
//	random rate r = 1 - exp(-l); systematic loss 1 - Y_11 exp(l)
//
// where e takes the windows that touch an edge of lost regions (by Steiner's
// formula for a rectangle the number that do grows with its sides, while
// single dice grow it with the area) and s regions in which most but not all
// dice fail: a few dice wide, a window always holds one of them. Windows at the rim
// are weighted so that every die counts once. Least squares, weights by the windows
// that do not overlap.
//
// On simulated lots of known split (this package's test) the estimates are right to
// 0.2 % of dice for dead rings, halves, blobs, scratches and wafers with 2 to 10 %
// random loss. Where dice of a region fail half of the time, or by a slow gradient,
// up to about a fifth of the systematic loss is taken for random, which is also
// the right word for part of it. A single die that fails at the same place on all
// wafers is random to windows: stack the wafers to see it.
//
// Intervals are by bootstrap over wafers with a fixed seed, for what wafers
// like these lose on average; they need two wafers, and rest on few below ten. Of
// simulated lots with blobs or rings of all sizes 88 to 95 % of the 95 % intervals
// held the truth, the least where small blobs pass for random dice. They say how
// far chance goes, not the model. No passing die, or one without neighbours,
// leaves the split unknown.
//
// It panics when lengths differ or confidence is outside (0, 1).
//
// Sources: Seeds 1967, IEEE International Convention Record 15(6), 60-61, and Paz
// and Lawson 1977, IEEE J. Solid-State Circuits 12, 540-546 (windows, and a yield
// that windows of no size would still lose); Cunningham 1990, IEEE Trans.
// Semiconductor Manufacturing 3, 60-71 (review); all from memory. Santalo 1976,
// Integral Geometry and Geometric Probability, ch. 8 (Steiner's formula). The terms
// e and s are this package's own.
func Windows(x, y, wafer []int32, pass []bool, confidence float64) Windowing {
	if len(x) != len(pass) || len(y) != len(pass) || len(wafer) != len(pass) {
		panic("stats/yield: slice length mismatch")
	}
	if !(confidence > 0 && confidence < 1) {
		panic("stats/yield: confidence outside (0, 1)")
	}
	w := Windowing{}
	lots := w.count(x, y, wafer, pass)
	for k, s := range windowSizes {
		size := WindowSize{Wide: s[0], High: s[1], Good: math.NaN(), Fitted: math.NaN()}
		all, good := 0.0, 0.0
		for _, l := range lots {
			size.Windows += l.windows[k]
			all += l.all[k]
			good += l.good[k]
		}
		if all > 0 {
			size.Good = good / all
		}
		w.Sizes = append(w.Sizes, size)
	}
	w.estimate(lots, confidence)
	return w
}

// waferWindows are the weights of one wafer's windows, by size.
type waferWindows struct {
	windows   [10]int
	all, good [10]float64
}

// count looks at every wafer.
func (w *Windowing) count(x, y, wafer []int32, pass []bool) []waferWindows {
	rows := map[int32][]int{}
	for i := range pass {
		if x[i] == unknown || y[i] == unknown {
			w.Unplaced++
			continue
		}
		rows[wafer[i]] = append(rows[wafer[i]], i)
	}
	ids := make([]int32, 0, len(rows))
	for id := range rows {
		ids = append(ids, id)
	}
	slices.Sort(ids)
	var out []waferWindows
	var places *layout
	for _, id := range ids {
		g, again, ok := placeDice(rows[id], x, y, pass)
		if !ok {
			w.Unplaced += len(rows[id])
			continue
		}
		w.Wafers++
		w.Again += again
		for i, p := range g.present {
			if p {
				w.Dice++
				if !g.bad[i] {
					w.Passing++
				}
			}
		}
		if !places.fits(g) { // most wafers of a lot have the same
			places = newLayout(g)
		}
		l := waferWindows{windows: places.windows, all: places.all, good: places.good(g)}
		out = append(out, l)
	}
	return out
}

// estimate fits the windows of all wafers, and of wafers drawn from them.
func (w *Windowing) estimate(lots []waferWindows, confidence float64) {
	unknown := func(why string) {
		w.Why = why
		w.Systematic, w.Random, w.RandomRate = stats.NoInterval(why), stats.NoInterval(why), stats.NoInterval(why)
	}
	switch {
	case w.Dice == 0:
		unknown("no dice with coordinates")
		return
	case w.Passing == 0:
		unknown("no die passes: what is random cannot be told")
		return
	}
	weights := make([]float64, len(lots))
	for i := range weights {
		weights[i] = 1
	}
	f, ok := fitWindows(lots, weights)
	if !ok {
		unknown("too few windows of good neighbours")
		return
	}
	for k := range w.Sizes {
		if f.used[k] {
			w.Sizes[k].Fitted = f.yield * math.Exp(-f.at(windowSizes[k]))
		}
	}
	const method = "windows, bootstrap by wafer"
	nan := math.NaN()
	w.Systematic = stats.Interval{Estimate: f.systematic(), Lower: nan, Upper: nan, Method: method}
	w.Random = stats.Interval{Estimate: f.random(), Lower: nan, Upper: nan, Method: method}
	w.RandomRate = stats.Interval{Estimate: f.rate(), Lower: nan, Upper: nan, Method: method}
	if len(lots) < 2 {
		w.Why = "one wafer says nothing about the spread between wafers: no interval"
	} else {
		w.bootstrap(lots, confidence)
		if len(lots) < 10 {
			w.Why = fmt.Sprintf("interval rests on %d wafers", len(lots))
		}
	}
	w.Systematic.Why, w.Random.Why, w.RandomRate.Why = w.Why, w.Why, w.Why
}

// bootstrap takes limits from wafers drawn with replacement, stretched for what
// few wafers leave out: the bootstrap's spread is too small by sqrt((n-1)/n), and
// its limits by the normal's place of Student's t.
func (w *Windowing) bootstrap(lots []waferWindows, confidence float64) {
	r := rand.New(rand.NewPCG(0x77696e646f7773, uint64(len(lots))))
	var systematic, random, rate []float64
	weights := make([]float64, len(lots))
	for range resamples {
		clear(weights)
		for range lots {
			weights[r.IntN(len(lots))]++
		}
		if f, ok := fitWindows(lots, weights); ok {
			systematic, random, rate = append(systematic, f.systematic()), append(random, f.random()), append(rate, f.rate())
		}
	}
	n := float64(len(lots))
	q := 0.5 + confidence/2
	stretch := math.Sqrt(n/(n-1)) * distuv.StudentsT{Mu: 0, Sigma: 1, Nu: n - 1}.Quantile(q) / distuv.UnitNormal.Quantile(q)
	for _, c := range []struct {
		iv     *stats.Interval
		values []float64
	}{{&w.Systematic, systematic}, {&w.Random, random}, {&w.RandomRate, rate}} {
		ends := stats.Quantiles(c.values, []float64{1 - q, q}, stats.HyndmanFan8)
		e := c.iv.Estimate
		c.iv.Lower = math.Max(0, e-stretch*math.Max(0, e-ends[0]))
		c.iv.Upper = math.Min(1, e+stretch*math.Max(0, ends[1]-e))
	}
}
