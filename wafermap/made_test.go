package wafermap

import (
	"fmt"
	"math"
	"math/rand/v2"
)

// madeMap is a wafer map whose geometry is known because it was made from it.
type madeMap struct {
	x, y   []int32
	cx, cy float64
	known  Known
}

func (m madeMap) String() string {
	return fmt.Sprintf("%d dice of %.3g x %.3g mm on %g mm", len(m.x), m.known.DieWidthMM, m.known.DieHeightMM, m.known.DiameterMM)
}

// parts are the ways a map may be cut, by whether a die at (dx, dy) mm from the
// centre of a disc of radius r is tested.
var parts = map[string]func(dx, dy, r, h float64) bool{
	"whole":   func(dx, dy, r, h float64) bool { return true },
	"half":    func(dx, dy, r, h float64) bool { return dx > 0 },
	"third":   func(dx, dy, r, h float64) bool { return dy < -r/3 },
	"quarter": func(dx, dy, r, h float64) bool { return dx > 0 && dy < 0 },
	"stopped": func(dx, dy, r, h float64) bool { return dy < 0.3*r-h || dy < 0.3*r && dx < 0 }, // in the middle of a row
	"flat":    func(dx, dy, r, h float64) bool { return dy > -0.9*r },
}

// makeMap draws a wafer of 16 to 300 dice across, of any shape up to 1:2.5, with dice
// chosen by corner or by centre inside an exclusion of 1 to 6 mm. When dirty, a
// fifth of the edge dice are missing and up to four coordinates are wrong.
func makeMap(random *rand.Rand, part string, every int, dirty bool) madeMap {
	d := []float64{76.2, 100, 150, 200}[random.IntN(4)]
	w := d / math.Exp(math.Log(16)+random.Float64()*math.Log(300.0/16))
	h := w * math.Exp((random.Float64()-0.5)*2*math.Log(2.5))
	exclusion := 1 + 5*random.Float64()
	r := d/2 - exclusion
	m := madeMap{cx: (random.Float64() - 0.5) * 400, cy: (random.Float64() - 0.5) * 400,
		known: Known{DiameterMM: d, DieWidthMM: w, DieHeightMM: h, EdgeExclusionMM: exclusion}}
	byCorner := random.IntN(2) == 0
	x0, y0, nx, ny := int(m.cx), int(m.cy), int(r/w)+2, int(r/h)+2
	for y := y0 - ny; y <= y0+ny; y++ {
		for x := x0 - nx; x <= x0+nx; x++ {
			dx, dy := (float64(x)-m.cx)*w, (float64(y)-m.cy)*h
			corner := math.Hypot(math.Abs(dx)+w/2, math.Abs(dy)+h/2)
			switch {
			case byCorner && corner > r, !byCorner && math.Hypot(dx, dy) > r:
			case !parts[part](dx, dy, r, h):
			case (x-x0)%every != 0 || (y-y0)%every != 0:
			case dirty && corner > r-2*max(w, h) && random.Float64() < 0.2:
			default:
				m.x, m.y = append(m.x, int32(x)), append(m.y, int32(y))
			}
		}
	}
	if dirty {
		for range min(4, len(m.x)/25) {
			a, out := 2*math.Pi*random.Float64(), 1.1+0.6*random.Float64()
			if random.IntN(2) == 0 {
				out = 3 + 1000*random.Float64()
			}
			m.x = append(m.x, int32(m.cx+out*d/2/w*math.Cos(a)))
			m.y = append(m.y, int32(m.cy+out*d/2/h*math.Sin(a)))
		}
	}
	return m
}
