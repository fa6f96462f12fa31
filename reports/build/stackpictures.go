package build

import (
	"fmt"
	"image/color"
	"math"
	"slices"

	"kneepoint/reports"
	"kneepoint/stats"
	"kneepoint/wafermap"
)

// surfacesShown is how many tests have their typical wafer drawn.
const surfacesShown = 4

// shapeWorth is the share of the typical wafer's variance that is smooth or of the test
// sites from which a test is drawn for its shape alone.
const shapeWorth = 0.1

// stackPictures draws the stacked maps and the typical wafers of tests.
func (w *lotwork) stackPictures(box wafermap.Box) error {
	p := &w.rep.Pictures
	if w.unjudged == "" {
		all := w.maps.all
		if all == nil { // one wafer: its own map says it all
			all = w.stack(w.maps.places, []int{0}, func(row int) bool { return !w.pass[row] })
		}
		r, err := w.paintStack("all wafers stacked", all, box)
		if err != nil {
			return err
		}
		p.Stacked = &r
		for k, s := range w.maps.stacks {
			r, err := w.paintStack(stackName(&w.rep.Stacks[k]), s, box)
			if err != nil {
				return err
			}
			p.Stacks = append(p.Stacks, r)
		}
	}
	for _, t := range w.maps.shown {
		s, err := w.paintTypical(t, box)
		if err != nil {
			return err
		}
		p.Surfaces = append(p.Surfaces, s)
	}
	return nil
}

func stackName(s *reports.Stack) string {
	if s.Of == "group" {
		return fmt.Sprintf("group %d", s.Group)
	}
	return s.Test
}

func (w *lotwork) paintStack(name string, s *stack, box wafermap.Box) (reports.Raster, error) {
	p := w.maps.places
	picture, legend, err := wafermap.PaintRates(p.x, p.y, s.failing, s.tested, box)
	if err != nil {
		return reports.Raster{}, err
	}
	r := w.raster(name, picture)
	for i, e := range legend {
		r.Legend = append(r.Legend, reports.Swatch{R: e.Colour.R, G: e.Colour.G, B: e.Colour.B, Label: e.Label, Dice: picture.Counts[i+1]})
	}
	return r, nil
}

// shownSurfaces are the tests worth a drawing: the two that lose most, then those
// with the most shape.
func (w *lotwork) shownSurfaces() []int {
	var out []int
	for _, t := range w.mostLosing() {
		if w.maps.typical[t] != nil && len(out) < 2 {
			out = append(out, t)
		}
	}
	var shaped []int
	for t, v := range w.maps.typical {
		if v != nil && v.shape() >= shapeWorth && !slices.Contains(out, t) {
			shaped = append(shaped, t)
		}
	}
	slices.SortStableFunc(shaped, func(a, b int) int {
		switch x, y := w.maps.typical[a].shape(), w.maps.typical[b].shape(); {
		case x > y:
			return -1
		case x < y:
			return 1
		}
		return 0
	})
	return append(out, shaped[:min(len(shaped), surfacesShown-len(out))]...)
}

// shape is the share of the variance that has a place on the wafer.
func (v *typical) shape() float64 {
	if share := v.surface.SmoothShare + v.surface.SiteShare; finite(share) {
		return share
	}
	return v.surface.SmoothShare
}

// paintTypical draws a test's typical wafer: its smooth part about its median, and
// what each position has beyond that, in classes of one width.
func (w *lotwork) paintTypical(t int, box wafermap.Box) (reports.Surfaces, error) {
	v, p := w.maps.typical[t], w.maps.places
	smooth, rest := make([]float64, len(v.value)), make([]float64, len(v.value))
	for k := range smooth {
		smooth[k] = math.NaN()
		if finite(v.value[k]) {
			smooth[k] = v.surface.At(w.geo.Position(p.x[k], p.y[k]))
		}
		rest[k] = v.value[k] - smooth[k]
	}
	middle := medianOf(smooth)
	step := classWidth(smooth, middle)
	out := reports.Surfaces{Test: w.lot.Tests()[t].Name}
	var err error
	if out.Smooth, err = w.paintClasses(t, "smooth part", smooth, middle, step, box); err != nil {
		return out, err
	}
	out.Residual, err = w.paintClasses(t, "residual", rest, 0, classWidth(rest, 0), box)
	return out, err
}

// classWidth is a round width of classes such that the middle nine tenths of the
// values fill five.
func classWidth(values []float64, middle float64) float64 {
	var far []float64
	for _, v := range values {
		if finite(v) {
			far = append(far, math.Abs(v-middle))
		}
	}
	if len(far) == 0 {
		return 1
	}
	wide := stats.Quantiles(far, []float64{0.9}, stats.HyndmanFan8)[0] / 2.5
	if !(wide > 0) {
		return 1
	}
	ten := math.Pow(10, math.Floor(math.Log10(wide)))
	for _, nice := range []float64{1, 2, 5} {
		if wide <= nice*ten*(1+1e-9) {
			return nice * ten
		}
	}
	return 10 * ten
}

// paintClasses draws values in seven classes about a middle.
func (w *lotwork) paintClasses(t int, what string, values []float64, middle, step float64, box wafermap.Box) (reports.Raster, error) {
	p, test := w.maps.places, w.lot.Tests()[t]
	log := w.maps.typical[t].log
	if !log { // classes meet at round values
		middle = step * math.Round(middle/step)
	}
	var x, y []int32
	var state []uint8
	for k, v := range values {
		if finite(v) {
			x, y = append(x, p.x[k]), append(y, p.y[k])
			state = append(state, uint8(math.Min(math.Max(math.Round((v-middle)/step)+4, 1), 7)))
		}
	}
	picture, err := wafermap.PaintStates(x, y, state, epiRamp, box)
	if err != nil {
		return reports.Raster{}, err
	}
	r := w.raster(test.Name+", "+what, picture)
	for s := 1; s < len(epiRamp); s++ {
		r.Legend = append(r.Legend, swatchOf(epiRamp[s], classLabel(s, middle, step, log, what == "residual", test.Unit.Text), picture.Counts[s]))
	}
	return r, nil
}

func swatchOf(c color.RGBA, label string, dice int) reports.Swatch {
	return reports.Swatch{R: c.R, G: c.G, B: c.B, Label: label, Dice: dice}
}

// classLabel names class s, 1 to 7, of values about a middle: in the test's unit, or
// for what is left of a logarithm as a factor.
func classLabel(s int, middle, step float64, log, residual bool, unit string) string {
	digits := max(0, int(math.Ceil(-math.Log10(step)))+1)
	at := func(class float64) string {
		v := middle + (class-4)*step
		switch {
		case log && residual:
			return fmt.Sprintf("× %.3g", math.Exp(v))
		case log:
			return fmt.Sprintf("%.3g", math.Exp(v))
		}
		return fmt.Sprintf("%.*f", digits, v)
	}
	if unit != "" && !(log && residual) {
		unit = " " + unit
	} else {
		unit = ""
	}
	switch s {
	case 1:
		return "below " + at(1.5) + unit
	case 7:
		return "above " + at(6.5) + unit
	}
	return at(float64(s)-0.5) + " to " + at(float64(s)+0.5) + unit
}
