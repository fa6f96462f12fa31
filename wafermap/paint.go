package wafermap

import (
	"bytes"
	"fmt"
	"image"
	"image/color"
	"image/png"
)

// maxPixels is the most columns or rows of a picture.
const maxPixels = 512

// Box is the common extent of a lot's pictures, in die coordinates, ends
// included.
type Box struct {
	MinX, MaxX, MinY, MaxY int
	YDown                  bool // row 0 of a picture is MinY, else MaxY
}

// BoxOf returns the box of the dice of a lot, without coordinates far away from all
// others: those would shrink the wafer to a speck. Dice outside are not drawn, and
// counted in Picture.Outside.
func BoxOf(x, y []int32) Box {
	b := bulk(x, y)
	return Box{MinX: b.X0, MaxX: b.X1, MinY: b.Y0, MaxY: b.Y1}
}

// Box returns the box of the dice that lie on the wafer, which stray coordinates
// near it do not widen; that of BoxOf where the geometry is not known.
func (g Geometry) Box(x, y []int32) Box {
	b, found := BoxOf(x, y), false
	if g.Unit == "" {
		return b
	}
	b.YDown = g.YDown
	for i := range x {
		if !g.OnWafer(x[i], y[i]) {
			continue
		}
		xi, yi := int(x[i]), int(y[i])
		if !found {
			b.MinX, b.MaxX, b.MinY, b.MaxY, found = xi, xi, yi, yi, true
		}
		b.MinX, b.MaxX = min(b.MinX, xi), max(b.MaxX, xi)
		b.MinY, b.MaxY = min(b.MinY, yi), max(b.MaxY, yi)
	}
	return b
}

// Picture is a paletted PNG with one pixel a die or, where there are more
// columns or rows than maxPixels, a block of Step x Step dice. Pixel (column, row)
// covers die x from X0+column*Step, and die y from Y0+row*Step when YDown, else down
// from Y0-row*Step. Pixels without a die are transparent.
type Picture struct {
	Columns, Rows, X0, Y0 int
	YDown                 bool
	Step                  int
	PNG                   []byte
	Counts                []int // rows drawn, by palette index
	Missing, Outside      int   // rows not drawn: without coordinates, outside the box
}

// canvas starts a picture over a box.
func (b Box) canvas(colours int) Picture {
	w, h := b.MaxX-b.MinX+1, b.MaxY-b.MinY+1
	step := max(1, (max(w, h)+maxPixels-1)/maxPixels)
	p := Picture{Columns: (w + step - 1) / step, Rows: (h + step - 1) / step, X0: b.MinX, Y0: b.MaxY, YDown: b.YDown, Step: step, Counts: make([]int, colours)}
	if b.YDown {
		p.Y0 = b.MinY
	}
	return p
}

// pixel returns the pixel a die falls on, -1 when it is outside.
func (p *Picture) pixel(x, y int32) int {
	column, row := int(x)-p.X0, p.Y0-int(y)
	if p.YDown {
		row = -row
	}
	if column < 0 || row < 0 {
		return -1
	}
	column, row = column/p.Step, row/p.Step
	if column >= p.Columns || row >= p.Rows {
		return -1
	}
	return row*p.Columns + column
}

// draw paints dice with palette indexes; of the dice that share a pixel the one
// with the highest rank wins. Index 0 is the background, whatever its colour.
func (p *Picture) draw(x, y []int32, cell []uint8, rank func(uint8) int, palette []color.RGBA) error {
	pixels := make([]uint8, p.Columns*p.Rows)
	for i := range x {
		if !placed(x[i], y[i]) {
			p.Missing++
			continue
		}
		k := p.pixel(x[i], y[i])
		if k < 0 {
			p.Outside++
			continue
		}
		if int(cell[i]) >= len(palette) {
			panic("wafermap: state without a colour")
		}
		p.Counts[cell[i]]++
		if p.Step == 1 || rank(cell[i]) >= rank(pixels[k]) {
			pixels[k] = cell[i]
		}
	}
	colours := make(color.Palette, len(palette))
	for i, c := range palette {
		colours[i] = color.NRGBA(c)
	}
	colours[0] = color.NRGBA{}
	var out bytes.Buffer
	encoder := png.Encoder{CompressionLevel: png.DefaultCompression}
	m := &image.Paletted{Pix: pixels, Stride: p.Columns, Rect: image.Rect(0, 0, p.Columns, p.Rows), Palette: colours}
	if err := encoder.Encode(&out, m); err != nil {
		return fmt.Errorf("drawing a wafer map of %d x %d dice: %w", p.Columns, p.Rows, err)
	}
	p.PNG = out.Bytes()
	return nil
}

// stateRank orders states by how much they matter where dice share a pixel.
func stateRank(s uint8) int {
	switch s {
	case StateNone:
		return 0
	case StatePass:
		return 1
	case StateOther:
		return 2
	case StateMarginal:
		return 3
	case StateFail:
		return 4
	case StateLead:
		return 5
	}
	return int(s)
}

// PaintStates draws one wafer. Where dice share a pixel the worst state wins, in the
// order none, pass, no result, marginal, fail, leading fail: a lone failing die
// must stay visible. So a picture with Step above 1 looks worse than the wafer, and
// only Counts, which are of dice, say how many fail. A position in several rows
// shows the last. A state without a colour in the palette panics.
func PaintStates(x, y []int32, state []uint8, palette []color.RGBA, box Box) (Picture, error) {
	if len(x) != len(y) || len(x) != len(state) {
		panic("wafermap: x, y and state differ in length")
	}
	p := box.canvas(len(palette))
	return p, p.draw(x, y, state, stateRank, palette)
}
