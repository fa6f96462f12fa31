package wafermap

import (
	"fmt"
	"image/color"
)

// rateEdges are the upper edges, included, of the classes of fail rates between
// "on no wafer" and "on every wafer", which have classes of their own. They are
// narrow where healthy lots lie, and the same for every lot, so that two pictures
// can be compared.
var rateEdges = []float64{0.01, 0.02, 0.05, 0.10, 0.15, 0.20, 0.30, 0.40, 0.60, 1}

// ratePalette has the background, no fails (the colour of passing dice), and a
// ramp for the classes. The ramp falls in CIE lightness from 86 to 16 in even
// steps of 7, so that grey print keeps its order, while the hue turns from blue to
// plum (hue 245 + 70 t, chroma 10 + 34 sin(0.9 pi t + 0.2) with t from 0 to 1).
var ratePalette = []color.RGBA{
	{},
	{239, 233, 220, 255},
	{183, 220, 243, 255}, {148, 202, 241, 255}, {117, 183, 236, 255}, {94, 163, 228, 255},
	{80, 142, 214, 255}, {77, 121, 195, 255}, {78, 101, 171, 255}, {77, 82, 143, 255},
	{73, 64, 113, 255}, {62, 49, 82, 255}, {47, 35, 54, 255},
}

// Swatch is one entry of a legend; its palette index is its place plus one.
type Swatch struct {
	Colour color.RGBA
	Label  string
}

// RateLegend returns the legend of a map of fail rates: exactly 0, then rising
// classes, then exactly 1.
func RateLegend() []Swatch {
	legend := []Swatch{{ratePalette[1], "0 %"}}
	from := 0.0
	for i, e := range rateEdges {
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
func rateClass(failing, tested int32) uint8 {
	switch {
	case tested <= 0:
		return 0
	case failing <= 0:
		return 1
	case failing >= tested:
		return uint8(len(ratePalette) - 1)
	}
	class := 0
	for rate := float64(failing) / float64(tested); rate > rateEdges[class]; {
		class++
	}
	return uint8(class + 2)
}

// PaintRates draws the fail rate of each die position over a lot's wafers. Where
// positions share a pixel, the highest rate wins. Counts are of positions.
func PaintRates(x, y, failing, tested []int32, box Box) (Picture, []Swatch, error) {
	if len(x) != len(y) || len(x) != len(failing) || len(x) != len(tested) {
		panic("wafermap: x, y, failing and tested differ in length")
	}
	cells := make([]uint8, len(x))
	for i := range x {
		cells[i] = rateClass(failing[i], tested[i])
	}
	p := box.canvas(len(ratePalette))
	err := p.draw(x, y, cells, func(c uint8) int { return int(c) }, ratePalette)
	return p, RateLegend(), err
}

// Paint draws the stack; see PaintRates.
func (s *Stack) Paint(box Box) (Picture, []Swatch, error) {
	return PaintRates(s.X, s.Y, s.Failing, s.Tested, box)
}
