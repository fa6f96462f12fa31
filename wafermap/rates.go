package wafermap

import (
	"fmt"
	"image/color"
)

// rateEdges are the upper edges, included, of the classes of fail rates after
// "none at all": narrow where healthy lots lie, and the same for every lot, so that two
// pictures can be compared. The last but one ends below 1: positions that fail on
// every wafer have a class of their own.
var rateEdges = []float64{0.01, 0.02, 0.05, 0.10, 0.15, 0.20, 0.30, 0.40, 0.60, 1, 1}

// Swatch is one entry of a legend; its palette index is its place plus one.
type Swatch struct {
	Colour color.RGBA
	Label  string
}

// RateLegend returns the legend of a stacked map: a failing share of exactly 0,
// then rising classes.
func RateLegend() []Swatch {
	legend := []Swatch{{ratePalette[1], "0 %"}}
	from := 0.0
	for i, e := range rateEdges[:len(rateEdges)-1] {
		label := fmt.Sprintf("over %g to %g %%", 100*from, 100*e)
		if e == 1 {
			label = fmt.Sprintf("over %g, under 100 %%", 100*from)
		}
		legend = append(legend, Swatch{ratePalette[i+2], label})
		from = e
	}
	return append(legend, Swatch{ratePalette[len(ratePalette)-1], "100 %"})
}

// rateClass returns the palette index of a fail rate.
func rateClass(failing, tested int) uint8 {
	switch {
	case tested <= 0:
		return 0
	case failing <= 0:
		return 1
	case failing >= tested:
		return uint8(len(rateEdges) + 1)
	}
	rate := float64(failing) / float64(tested)
	for i, e := range rateEdges {
		if rate <= e {
			return uint8(i + 2)
		}
	}
	return uint8(len(rateEdges) + 1)
}

// ratePalette: index 0 background, 1 no fails, then a ramp of one hue, even in
// lightness.
var ratePalette = []color.RGBA{
	{},
	{239, 233, 220, 255},
	{214, 222, 233, 255}, {193, 209, 226, 255}, {170, 195, 219, 255}, {145, 180, 211, 255}, {119, 164, 202, 255}, {92, 147, 191, 255},
	{64, 129, 177, 255}, {42, 110, 160, 255}, {27, 90, 138, 255}, {16, 66, 108, 255}, {40, 10, 50, 255},
}

// PaintRates draws the fail rate of each die position over a lot's wafers. Where
// positions share a pixel, the highest rate wins.
func PaintRates(x, y, failing, tested []int32, box Box) (Picture, []Swatch, error) {
	if len(x) != len(y) || len(x) != len(failing) || len(x) != len(tested) {
		panic("wafermap: x, y, failing and tested differ in length")
	}
	cells := make([]uint8, len(x))
	for i := range x {
		cells[i] = rateClass(int(failing[i]), int(tested[i]))
	}
	p := box.canvas(len(ratePalette))
	err := p.draw(x, y, cells, func(c uint8) int { return int(c) }, ratePalette)
	return p, RateLegend(), err
}

// Paint draws the stack; see PaintRates.
func (s *Stack) Paint(box Box) (Picture, []Swatch, error) {
	return PaintRates(s.X, s.Y, s.Failing, s.Tested, box)
}
