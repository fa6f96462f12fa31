package build

import (
	"math"
	"slices"

	"kneepoint/reports"
	"kneepoint/wafermap"
)

// signature puts a pattern found on a wafer into the report; box is the extent of
// the dice that it was found on.
func (w *lotwork) signature(s *wafermap.Signature, box wafermap.Box) reports.Signature {
	return reports.Signature{Kind: s.Kind, Strength: num(s.Strength), PValue: num(s.PValue), Loss: num(s.Loss),
		Rate: num(s.Rate), Background: num(s.Background), Cover: num(s.Cover), PeriodX: s.Outline.PeriodX, PeriodY: s.Outline.PeriodY,
		Outline: w.paths(s, box), Text: s.Text(w.geo.Unit)}
}

// structured says whether a kind is a pattern, and not the lack of one.
func structured(kind string) bool { return kind != "random" && kind != "none" }

// paths draws a pattern's outline in die coordinates. Where the geometry is not
// known lengths have no scale that a map could show.
func (w *lotwork) paths(s *wafermap.Signature, box wafermap.Box) []reports.Path {
	var out []reports.Path
	if s.Kind == "stripe" && (s.Outline.Along == "row" || s.Outline.Along == "column") {
		x0, x1, y0, y1 := float64(box.MinX), float64(box.MaxX), float64(s.Outline.First), float64(s.Outline.Last)
		if s.Outline.Along == "column" {
			x0, x1, y0, y1 = y0, y1, float64(box.MinY), float64(box.MaxY)
		}
		x0, x1, y0, y1 = x0-0.5, x1+0.5, y0-0.5, y1+0.5
		return []reports.Path{pathOf([][2]float64{{x0, y0}, {x1, y0}, {x1, y1}, {x0, y1}, {x0, y0}})}
	}
	if w.geo.Unit == "" {
		return nil
	}
	tolerance := 0.002 * w.geo.Radius() / math.Min(w.geo.DieWidthMM, w.geo.DieHeightMM)
	paths := s.Paths()
	if s.Kind == "line" {
		paths = [][]wafermap.Point{w.band(paths[0], s.Outline.Width/2)}
	}
	for _, path := range paths {
		points := make([][2]float64, len(path))
		for i, p := range path {
			points[i][0], points[i][1] = w.onGrid(p)
		}
		out = append(out, pathOf(simplify(points, tolerance)))
	}
	return out
}

// band is the outline of a line of half a width, as far as it lies on the wafer.
func (w *lotwork) band(line []wafermap.Point, half float64) []wafermap.Point {
	var there, back []wafermap.Point
	for i, p := range line {
		if math.Hypot(p.X, p.Y) > w.geo.Radius() {
			continue
		}
		a, b := line[max(i-1, 0)], line[min(i+1, len(line)-1)]
		long := math.Hypot(b.X-a.X, b.Y-a.Y)
		if long == 0 {
			continue
		}
		dx, dy := -half*(b.Y-a.Y)/long, half*(b.X-a.X)/long
		there = append(there, wafermap.Point{X: p.X + dx, Y: p.Y + dy})
		back = append(back, wafermap.Point{X: p.X - dx, Y: p.Y - dy})
	}
	if len(there) < 2 {
		return line
	}
	slices.Reverse(back)
	return append(append(there, back...), there[0])
}

func pathOf(points [][2]float64) reports.Path {
	p := reports.Path{}
	for _, q := range points {
		p.X = append(p.X, num(math.Round(100*q[0])/100))
		p.Y = append(p.Y, num(math.Round(100*q[1])/100))
	}
	return p
}

// simplify drops points that lie within a tolerance of the line through those kept
// (Douglas and Peucker 1973). A closed line is cut at its farthest point first.
func simplify(p [][2]float64, tolerance float64) [][2]float64 {
	if len(p) < 3 {
		return p
	}
	far, most := 0, -1.0
	for i := 1; i < len(p)-1; i++ {
		if d := fromLine(p[i], p[0], p[len(p)-1]); d > most {
			far, most = i, d
		}
	}
	if most <= tolerance {
		return [][2]float64{p[0], p[len(p)-1]}
	}
	head, tail := simplify(p[:far+1], tolerance), simplify(p[far:], tolerance)
	return append(head[:len(head)-1:len(head)-1], tail...)
}

// fromLine is the distance of q from the line from a to b.
func fromLine(q, a, b [2]float64) float64 {
	dx, dy := b[0]-a[0], b[1]-a[1]
	long := dx*dx + dy*dy
	t := 0.0
	if long > 0 {
		t = math.Min(1, math.Max(0, ((q[0]-a[0])*dx+(q[1]-a[1])*dy)/long))
	}
	return math.Hypot(q[0]-a[0]-t*dx, q[1]-a[1]-t*dy)
}

// within says whether a die position lies inside a pattern's outline; known is
// false for kinds whose outline does not say (gradient, sites, test order).
func (w *lotwork) within(s *wafermap.Signature, r *reports.Signature) (inside func(x, y int32) bool, known bool) {
	o := &s.Outline
	switch s.Kind {
	case "shot-repeat", "site", "stripe":
		if o.PeriodX > 0 && o.PeriodY > 0 && len(o.Places) > 0 {
			return repeats(o), true
		}
		if s.Kind == "stripe" && len(r.Outline) > 0 {
			return func(x, y int32) bool {
				v := y
				if o.Along == "column" {
					v = x
				}
				return o.First <= int(v) && int(v) <= o.Last
			}, true
		}
	case "line":
		if len(r.Outline) > 0 && w.geo.Unit != "" {
			return w.nearLine(s), true
		}
	default:
		if len(r.Outline) > 0 {
			return func(x, y int32) bool { return evenOdd(r.Outline, float64(x), float64(y)) }, true
		}
	}
	return nil, false
}

// repeats says whether a die lies on one of the places of a periodic pattern.
func repeats(o *wafermap.Outline) func(x, y int32) bool {
	hit := make([]bool, o.PeriodX*o.PeriodY)
	at := func(x, y int) int { return modulo(y, o.PeriodY)*o.PeriodX + modulo(x, o.PeriodX) }
	for _, p := range o.Places {
		hit[at(p[0], p[1])] = true
	}
	return func(x, y int32) bool { return hit[at(int(x), int(y))] }
}

func modulo(v, n int) int { return ((v % n) + n) % n }

// nearLine says whether a die lies within half the width of a line.
func (w *lotwork) nearLine(s *wafermap.Signature) func(x, y int32) bool {
	var line [][2]float64
	for _, p := range s.Paths()[0] {
		line = append(line, [2]float64{p.X, p.Y})
	}
	return func(x, y int32) bool {
		mmX, mmY := w.geo.Position(x, y)
		for i := 1; i < len(line); i++ {
			if fromLine([2]float64{mmX, mmY}, line[i-1], line[i]) <= s.Outline.Width/2 {
				return true
			}
		}
		return false
	}
}

// evenOdd says whether a point lies inside closed paths: inside an odd number of them.
func evenOdd(paths []reports.Path, x, y float64) bool {
	in := false
	for _, p := range paths {
		for i, j := 0, len(p.X)-1; i < len(p.X); j, i = i, i+1 {
			xi, yi, xj, yj := float64(p.X[i]), float64(p.Y[i]), float64(p.X[j]), float64(p.Y[j])
			if (yi > y) != (yj > y) && x < (xj-xi)*(y-yi)/(yj-yi)+xi {
				in = !in
			}
		}
	}
	return in
}
