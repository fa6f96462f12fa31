package wafermap

import (
	"bytes"
	"image"
	"image/color"
	"image/png"
	"testing"
)

func decode(t *testing.T, p Picture) *image.Paletted {
	t.Helper()
	m, err := png.Decode(bytes.NewReader(p.PNG))
	if err != nil {
		t.Fatal(err)
	}
	paletted, ok := m.(*image.Paletted)
	if !ok || m.Bounds().Dx() != p.Columns || m.Bounds().Dy() != p.Rows {
		t.Fatalf("%T of %v, want a paletted picture of %d x %d", m, m.Bounds(), p.Columns, p.Rows)
	}
	return paletted
}

func same(t *testing.T, got color.Color, want color.RGBA) {
	t.Helper()
	r, g, b, a := got.RGBA()
	if uint8(r>>8) != want.R || uint8(g>>8) != want.G || uint8(b>>8) != want.B || uint8(a>>8) != want.A {
		t.Errorf("colour %v, want %v", got, want)
	}
}

func TestPaintStates(t *testing.T) {
	x, y := []int32{10, 12, 11, Missing, 10, 90}, []int32{-3, -3, -1, 1, -3, 0}
	state := []uint8{StatePass, StateFail, StateLead, StatePass, StateMarginal, StateFail}
	box := Box{MinX: 10, MaxX: 12, MinY: -3, MaxY: -1}
	p, err := PaintStates(x, y, state, DefaultPalette, box)
	if err != nil {
		t.Fatal(err)
	}
	if p.Columns != 3 || p.Rows != 3 || p.Step != 1 || p.X0 != 10 || p.Y0 != -1 || p.YDown || p.Missing != 1 || p.Outside != 1 {
		t.Errorf("%+v", p)
	}
	m := decode(t, p)
	same(t, m.At(0, 2), DefaultPalette[StateMarginal]) // the last row at (10, -3)
	same(t, m.At(2, 2), DefaultPalette[StateFail])
	same(t, m.At(1, 0), DefaultPalette[StateLead])
	same(t, m.At(0, 0), color.RGBA{}) // no die: transparent
	for s, want := range map[uint8]int{StatePass: 1, StateFail: 1, StateLead: 1, StateMarginal: 1, StateNone: 0} {
		if p.Counts[s] != want {
			t.Errorf("%d rows in state %d, want %d", p.Counts[s], s, want)
		}
	}
	box.YDown = true
	q, _ := PaintStates(x, y, state, DefaultPalette, box)
	if q.Y0 != -3 || !q.YDown {
		t.Errorf("y down: %+v", q)
	}
	m = decode(t, q)
	same(t, m.At(2, 0), DefaultPalette[StateFail])
	same(t, m.At(1, 2), DefaultPalette[StateLead])
	again, _ := PaintStates(x, y, state, DefaultPalette, box)
	if !bytes.Equal(again.PNG, q.PNG) {
		t.Error("two pictures of the same wafer differ")
	}
}

// A wafer of more dice across than pixels: a lone fail stays visible, and dice are
// counted, not pixels.
func TestPaintStatesKeepsFailsWhenDiceShareAPixel(t *testing.T) {
	x, y := disc(700)
	state := make([]uint8, len(x))
	for i := range state {
		state[i] = StatePass
		if x[i] == 100 && y[i] == 40 {
			state[i] = StateFail
		}
	}
	p, err := PaintStates(x, y, state, DefaultPalette, BoxOf(x, y))
	if err != nil {
		t.Fatal(err)
	}
	if p.Step != 3 || p.Columns != 467 || p.Rows != 467 {
		t.Fatalf("step %d, %d x %d", p.Step, p.Columns, p.Rows)
	}
	if p.Counts[StateFail] != 1 || p.Counts[StatePass] != len(x)-1 || p.Outside != 0 {
		t.Errorf("counts %v of %d dice, %d outside", p.Counts, len(x), p.Outside)
	}
	m := decode(t, p)
	column, row := (100-p.X0)/3, (p.Y0-40)/3
	same(t, m.At(column, row), DefaultPalette[StateFail])
	fails := 0
	for _, v := range m.Pix {
		if v == StateFail {
			fails++
		}
	}
	if fails != 1 {
		t.Errorf("%d failing pixels", fails)
	}
}

func TestBoxOf(t *testing.T) {
	x, y := disc(20)
	for i := range x {
		x[i] += 7
	}
	if b := BoxOf(append(x, 2000000000, Missing), append(y, 5, 5)); b != (Box{MinX: -13, MaxX: 27, MinY: -20, MaxY: 20}) {
		t.Errorf("box %+v", b)
	}
	// a stray close by widens BoxOf, but not the box of the wafer
	x, y = append(x, 38), append(y, 0)
	want := Box{MinX: -13, MaxX: 27, MinY: -20, MaxY: 20}
	if b := FindGeometry(x, y, Known{}).Box(x, y); b != want {
		t.Errorf("box of the wafer %+v, want %+v", b, want)
	}
	if b := FindGeometry(nil, nil, Known{}).Box(x, y); b != BoxOf(x, y) {
		t.Errorf("box without a geometry %+v", b)
	}
	b := BoxOf(nil, nil)
	p, err := PaintStates(nil, nil, nil, DefaultPalette, b)
	if err != nil || p.Columns != 1 || p.Rows != 1 {
		t.Errorf("no dice: %+v, %v", p, err)
	}
}

func TestPaintRates(t *testing.T) {
	x, y := []int32{0, 1, 2, 3}, []int32{0, 0, 0, 0}
	p, legend, err := PaintRates(x, y, []int32{0, 1, 25, 0}, []int32{25, 25, 25, 0}, BoxOf(x, y))
	if err != nil {
		t.Fatal(err)
	}
	m := decode(t, p)
	if m.ColorIndexAt(0, 0) != 1 || m.ColorIndexAt(1, 0) != 4 || int(m.ColorIndexAt(2, 0)) != len(legend) || m.ColorIndexAt(3, 0) != 0 {
		t.Errorf("indexes %v", m.Pix)
	}
	if len(p.Counts) != len(legend)+1 || p.Counts[1] != 1 || p.Counts[len(legend)] != 1 {
		t.Errorf("counts %v", p.Counts)
	}
	if legend[0].Label != "0 %" || legend[3].Label != "over 2 to 5 %" || legend[len(legend)-2].Label != "over 60, under 100 %" || legend[len(legend)-1].Label != "100 %" {
		t.Errorf("legend %v", legend)
	}
	s := NewStack()
	s.Add(x, y, []bool{false, true, true, false})
	q, _, err := s.Paint(BoxOf(x, y))
	if err != nil || decode(t, q).ColorIndexAt(1, 0) != uint8(len(legend)) {
		t.Error("a stack of one wafer paints its fails at 100 %")
	}
}

// Class edges belong to the class below them.
func TestRateClassEdges(t *testing.T) {
	for _, c := range []struct {
		failing, tested int32
		want            uint8
	}{{0, 5, 1}, {1, 1000, 2}, {1, 100, 2}, {11, 1000, 3}, {1, 50, 3}, {1, 20, 4}, {1, 10, 5}, {3, 20, 6}, {1, 5, 7}, {3, 10, 8}, {2, 5, 9}, {3, 5, 10}, {601, 1000, 11}, {999, 1000, 11}, {5, 5, 12}, {0, 0, 0}} {
		if got := rateClass(c.failing, c.tested); got != c.want {
			t.Errorf("%d of %d is class %d, want %d", c.failing, c.tested, got, c.want)
		}
	}
	if len(ratePalette) != len(rateEdges)+3 {
		t.Errorf("%d colours for %d edges", len(ratePalette), len(rateEdges))
	}
}
