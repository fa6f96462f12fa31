package build

import (
	"context"
	"math"

	"kneepoint/reports"
	"kneepoint/stats"
	"kneepoint/wafermap"
)

const (
	surfaceDice = 1000 // dice of a wafer that a surface is fitted to, and
	stackedDice = 5000 // positions of the typical wafer: more would tell no more
	boundShare  = 0.1  // readings known as bounds only, from which a surface says nothing
)

// typical is a test's typical wafer.
type typical struct {
	value   []float64 // by position: median over the wafers of what a die has beyond its wafer's median
	surface wafermap.Surface
	log     bool
}

// surfaces fits the smooth shape of every test on the typical wafer, and that of the
// tests that matter most on every wafer.
func (w *lotwork) surfaces(ctx context.Context, p *places) error {
	tests, wafers := w.lot.Tests(), w.lot.Wafers()
	w.maps.typical = make([]*typical, len(tests))
	grid := wafermap.NewGrid(p.x, p.y)
	rows := thin(p.x, p.y, 0, len(p.x), stackedDice)
	basis := w.basis(p.x, p.y, rows)
	readings := make([][]float64, len(tests))
	over := "median over the wafers at each die position"
	if len(wafers) == 1 {
		over = "dice"
	}
	err := w.each(ctx, len(tests), func(t int) {
		v, why := w.smoothReadings(t)
		if w.rep.Tests[t].SurfaceWhy = why; why != "" {
			return
		}
		readings[t] = v
		typical := &typical{value: w.typicalWafer(p, v), log: w.logScale[t]}
		typical.surface = basis.Fit(pick(typical.value, rows), pickInts(p.site, rows))
		w.maps.typical[t] = typical
		r := w.surface(t, &typical.surface, over)
		r.Alike = alike(grid, typical.value)
		w.rep.Tests[t].Surface = r
	})
	if err != nil {
		return err
	}
	w.maps.shown = w.shownSurfaces()
	return w.each(ctx, len(wafers), func(i int) { w.waferSurfaces(i, readings) })
}

// smoothReadings are a test's readings on the scale on which they are symmetric, in
// the unit that is shown; bounds are left out.
func (w *lotwork) smoothReadings(t int) ([]float64, string) {
	if w.geo.Unit == "" {
		return nil, "the wafer's geometry is not known: " + w.geo.Why
	}
	out := inUnit(w.lot.Values(t), w.lot.Tests()[t].Unit)
	marks, bounds, n := w.lot.Censor(t), 0, 0
	for i, v := range out {
		if !finite(v) {
			continue
		}
		n++
		if marks != nil && marks[i] != 0 {
			bounds++
			out[i] = math.NaN()
		} else if w.logScale[t] {
			out[i] = math.Log(v) // NaN below 0, minus infinity at 0: left out
		}
	}
	if n == 0 {
		return nil, "no reading"
	}
	if float64(bounds) > boundShare*float64(n) {
		return nil, "more than a tenth of the readings are known as bounds only"
	}
	return out, ""
}

// waferSurfaces fits the tests that are drawn on wafer i.
func (w *lotwork) waferSurfaces(i int, readings [][]float64) {
	lo, hi := w.lot.Wafers()[i].Lo, w.lot.Wafers()[i].Hi
	x, y := w.lot.X(), w.lot.Y()
	rows := thin(x, y, lo, hi, surfaceDice)
	basis := w.basis(x, y, rows)
	grid := wafermap.NewGrid(x[lo:hi], y[lo:hi])
	site := pickInts(w.lot.Site(), rows)
	over := "dice"
	if len(rows) < hi-lo {
		over = "some dice spread evenly"
	}
	for _, t := range w.maps.shown {
		s := basis.Fit(pick(readings[t], rows), site)
		r := w.surface(t, &s, over)
		r.Alike = alike(grid, readings[t][lo:hi])
		w.rep.Tests[t].ByWafer[i].Surface = r
	}
}

func (w *lotwork) basis(x, y []int32, rows []int) *wafermap.SurfaceBasis {
	return wafermap.NewSurfaceBasis(w.geo, pickInts(x, rows), pickInts(y, rows))
}

// thin picks at most about so many rows of [lo, hi), spread evenly over the wafer
// and in step with nothing: by a hash of the position.
func thin(x, y []int32, lo, hi, most int) []int {
	every := uint64(1)
	if hi-lo > most {
		every = uint64((hi - lo + most - 1) / most)
	}
	var rows []int
	for row := lo; row < hi; row++ {
		if every == 1 || mix(uint64(uint32(x[row]))<<32|uint64(uint32(y[row])))%every == 0 {
			rows = append(rows, row)
		}
	}
	return rows
}

// mix is the finaliser of SplitMix64 (Steele, Lea and Flood 2014).
func mix(v uint64) uint64 {
	v += 0x9e3779b97f4a7c15
	v = (v ^ v>>30) * 0xbf58476d1ce4e5b9
	v = (v ^ v>>27) * 0x94d049bb133111eb
	return v ^ v>>31
}

func pick(v []float64, rows []int) []float64 {
	out := make([]float64, len(rows))
	for i, r := range rows {
		out[i] = v[r]
	}
	return out
}

func pickInts(v []int32, rows []int) []int32 {
	if v == nil {
		return nil
	}
	out := make([]int32, len(rows))
	for i, r := range rows {
		out[i] = v[r]
	}
	return out
}

// typicalWafer is the median over the wafers, at each position, of a reading beyond
// its wafer's median, on the level of the median wafer: so that wafers of other
// levels, tested at some positions only, make no pattern.
func (w *lotwork) typicalWafer(p *places, v []float64) []float64 {
	wafers := w.lot.Wafers()
	level, usual := make([]float64, len(wafers)), []float64{}
	for i, r := range wafers {
		if level[i] = medianOf(v[r.Lo:r.Hi]); finite(level[i]) {
			usual = append(usual, level[i])
		}
	}
	middle := medianOf(usual)
	start := make([]int32, len(p.x)+1) // of each position's readings
	for row, k := range p.of {
		if k >= 0 && finite(v[row]) {
			start[k+1]++
		}
	}
	for k := range p.x {
		start[k+1] += start[k]
	}
	all, next := make([]float64, start[len(p.x)]), append([]int32(nil), start...)
	for row, k := range p.of {
		if k >= 0 && finite(v[row]) {
			all[next[k]] = v[row] - level[w.code[row]]
			next[k]++
		}
	}
	out := make([]float64, len(p.x))
	for k := range out {
		out[k] = middle + smallMedian(all[start[k]:start[k+1]])
	}
	return out
}

func medianOf(v []float64) float64 {
	kept := make([]float64, 0, len(v))
	for _, x := range v {
		if finite(x) {
			kept = append(kept, x)
		}
	}
	if len(kept) == 0 {
		return math.NaN()
	}
	return stats.Median(kept)
}

// smallMedian is the median of a few values, which it sorts; NaN of none.
func smallMedian(v []float64) float64 {
	for i := 1; i < len(v); i++ {
		for j := i; j > 0 && v[j] < v[j-1]; j-- {
			v[j], v[j-1] = v[j-1], v[j]
		}
	}
	n := len(v)
	if n == 0 {
		return math.NaN()
	}
	return (v[(n-1)/2] + v[n/2]) / 2
}

// surface puts a fit into the report.
func (w *lotwork) surface(t int, s *wafermap.Surface, over string) *reports.Surface {
	estimate := func(e wafermap.Estimate) reports.Interval {
		return reports.Interval{Estimate: num(e.Value), Lower: num(e.Lower), Upper: num(e.Upper)}
	}
	unit := w.lot.Tests()[t].Unit.Text
	if w.logScale[t] {
		unit = "ln"
	}
	return &reports.Surface{N: s.N, Outliers: s.Outliers, Over: over, Unit: unit, Terms: s.Terms, Order: s.Order,
		Smooth: num(s.SmoothShare), Site: num(s.SiteShare), Die: num(s.DieShare), Noise: num(s.Noise),
		Bowl: estimate(s.Bowl), Tilt: estimate(s.Tilt), Direction: num(s.TiltDirection.Value), RollOff: estimate(s.RollOff), Why: s.Why}
}
