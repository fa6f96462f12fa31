package wafermap

import (
	"cmp"
	"fmt"
	"math"
	"slices"
	"strings"
)

// kind names a pattern. Every few columns fail together when one test site of several side by
// side is at fault, so that is a site where the sites are not recorded; where they are, and
// every few rows, it is a stripe. Where the test order runs along columns it is the other
// way round.
func (f *field) kind(p *pattern) string {
	if p.shape == shapeComb && (f.in.Site != nil || (p.periodX > 1) == f.ordersColumns()) {
		return shapeKind[shapeBand]
	}
	return shapeKind[p.shape]
}

// ordersColumns reports whether the test order runs along columns: from one touchdown to the
// next, y changes more often than x.
func (f *field) ordersColumns() bool {
	if f.in.Order == nil {
		return false
	}
	g := f.in.Grid
	rows := slices.Clone(f.rows)
	slices.SortStableFunc(rows, func(a, b int32) int { return cmp.Compare(f.in.Order[a], f.in.Order[b]) })
	moves := 0
	for i := 1; i < len(rows); i++ {
		if g.x[rows[i]] == g.x[rows[i-1]] {
			moves++
		}
		if g.y[rows[i]] == g.y[rows[i-1]] {
			moves--
		}
	}
	return moves > 0
}

func degrees(a float64) float64 {
	d := math.Mod(a*180/math.Pi, 360)
	if d < 0 {
		d += 360
	}
	return d
}

// outline says where a pattern lies. expected are the fail rates of the kinds of dice.
func (f *field) outline(x *explained, m *mixture, expected []float64) (o Outline) {
	r := f.radius
	p := x.pattern
	switch p.shape {
	case shapeRing, shapeAnnulus:
		o.Centre, o.Inner, o.Outer = Point{p.cu * r, p.cv * r}, p.a*r, p.b*r
		if p.shape == shapeRing {
			o.Outer = max(r, f.in.Geometry.Radius())
		}
	case shapeArc:
		o.Inner, o.Outer = p.a*r, max(r, f.in.Geometry.Radius())
		o.From = degrees(p.theta - p.width/2)
		o.To = o.From + p.width*180/math.Pi
	case shapeSector:
		o.Outer = max(r, f.in.Geometry.Radius())
		o.From = degrees(p.theta - p.width/2)
		o.To = o.From + p.width*180/math.Pi
	case shapeCentre, shapeBlob:
		o.Centre = Point{p.cu * r, p.cv * r}
		a, b, angle := p.a, p.b, p.angle
		if a < b {
			a, b, angle = b, a, angle+math.Pi/2
		}
		o.SemiMajor, o.SemiMinor, o.Angle = a*r, b*r, math.Mod(degrees(angle), 180)
	case shapeLine:
		l := p.line
		first, last := float64(l.from), float64(l.to-1)
		o.Ends = [2]Point{f.place(&l, first), f.place(&l, last)}
		o.Middle = f.place(&l, (first+last)/2)
		dx, dy := o.Ends[1].X-o.Ends[0].X, o.Ends[1].Y-o.Ends[0].Y
		across, along := math.Abs(f.dv)*r, dx
		if l.turned {
			across, along = f.du*r, dy
		}
		o.Width = l.thick * across * math.Abs(along) / math.Hypot(dx, dy)
	case shapeRamp:
		o.Direction = degrees(p.theta)
		var rate, n [layers]float64
		for i, d := range x.depth {
			rate[d] += expected[m.kind[i]]
			n[d]++
		}
		for d := range layers {
			if n[d] > 0 {
				o.Low = rate[d] / n[d]
				if o.High == 0 {
					o.High = o.Low
				}
			}
		}
	case shapeShot, shapeComb:
		o.PeriodX, o.PeriodY = p.periodX, p.periodY
		for _, c := range p.cells {
			o.Places = append(o.Places, [2]int{f.x0 + c%p.periodX, f.y0 + c/p.periodX})
		}
	case shapeSite:
		o.Sites = p.sites
	case shapeOrder:
		o.Along, o.First, o.Last = "touchdown", p.from, p.to-1
	case shapeBand:
		o.Along, o.First, o.Last = "row", p.from, p.to-1
		if p.axis == 1 {
			o.Along = "column"
		}
	}
	return o
}

// place is where a line is at a cell along it.
func (f *field) place(l *path, at float64) Point {
	x, y := at, l.at(at)
	if l.turned {
		x, y = y, x
	}
	return Point{(f.u0 + x*f.du) * f.radius, (f.v0 + y*f.dv) * f.radius}
}

// Text says in words where a signature lies. unit is that of the geometry.
func (s Signature) Text(unit string) string {
	o := s.Outline
	switch s.Kind {
	case "edge-ring":
		return fmt.Sprintf("from a radius of %.3g %s out to the edge", o.Inner, unit)
	case "edge-arc":
		return fmt.Sprintf("from a radius of %.3g %s out to the edge, %.0f° to %.0f°", o.Inner, unit, o.From, math.Mod(o.To, 360))
	case "centre":
		return fmt.Sprintf("within %.3g %s of the centre", math.Sqrt(o.SemiMajor*o.SemiMinor), unit)
	case "annulus":
		return fmt.Sprintf("between radii of %.3g and %.3g %s", o.Inner, o.Outer, unit)
	case "line":
		text := fmt.Sprintf("from (%.3g, %.3g) to (%.3g, %.3g) %s, %.2g %s wide", o.Ends[0].X, o.Ends[0].Y, o.Ends[1].X, o.Ends[1].Y, unit, o.Width, unit)
		bow := math.Hypot(o.Middle.X-(o.Ends[0].X+o.Ends[1].X)/2, o.Middle.Y-(o.Ends[0].Y+o.Ends[1].Y)/2)
		if bow > o.Width {
			text += fmt.Sprintf(", bowed by %.2g %s", bow, unit)
		}
		return text
	case "blob":
		return fmt.Sprintf("%.3g by %.3g %s at (%.3g, %.3g) %s", 2*o.SemiMajor, 2*o.SemiMinor, unit, o.Centre.X, o.Centre.Y, unit)
	case "gradient":
		return fmt.Sprintf("rising towards %.0f° from %.2g %% to %.2g %%", o.Direction, 100*o.Low, 100*o.High)
	case "sector":
		return fmt.Sprintf("%.0f° to %.0f°", o.From, math.Mod(o.To, 360))
	case "shot-repeat":
		return fmt.Sprintf("every %d columns and %d rows, at %s", o.PeriodX, o.PeriodY, counted(len(o.Places), "place"))
	case "site":
		if len(o.Sites) > 0 {
			names := make([]string, len(o.Sites))
			for i, n := range o.Sites {
				names[i] = fmt.Sprint(n)
			}
			if len(names) == 1 {
				return "of site " + names[0]
			}
			return "of sites " + strings.Join(names, ", ")
		}
		return "in step with " + o.steps() + ", as one site of several does (sites are not recorded)"
	case "stripe":
		if o.Along == "" {
			return "in step with " + o.steps()
		}
		if o.First == o.Last {
			return fmt.Sprintf("%s %d", o.Along, o.First)
		}
		return fmt.Sprintf("%ss %d to %d", o.Along, o.First, o.Last)
	case "near-total":
		return fmt.Sprintf("%.0f %% of the dice fail", 100*s.Rate)
	case "random":
		return "no structure beyond chance"
	}
	return "too few fails to judge"
}

func (o Outline) steps() string {
	if o.PeriodX > 1 {
		return fmt.Sprintf("every %d columns", o.PeriodX)
	}
	return fmt.Sprintf("every %d rows", o.PeriodY)
}

func counted(n int, what string) string {
	if n == 1 {
		return "1 " + what
	}
	return fmt.Sprintf("%d %ss", n, what)
}

// Paths are lines that draw the outline on a map, closed ones with the first point again at
// the end; nil where the kind has none (sites, repeats, stripes, random).
func (s Signature) Paths() (paths [][]Point) {
	o := s.Outline
	arc := func(c Point, a, b, turned, from, to float64) []Point {
		const step = 3 // degrees
		n := max(2, int(math.Ceil((to-from)/step)))
		sin, cos := math.Sincos(turned * math.Pi / 180)
		var line []Point
		for i := range n + 1 {
			y, x := math.Sincos((from + (to-from)*float64(i)/float64(n)) * math.Pi / 180)
			line = append(line, Point{c.X + a*x*cos - b*y*sin, c.Y + a*x*sin + b*y*cos})
		}
		return line
	}
	ring := func(from, to float64) []Point { // there along the outside, back along the inside
		line := arc(o.Centre, o.Outer, o.Outer, 0, from, to)
		back := arc(o.Centre, o.Inner, o.Inner, 0, from, to)
		for i := len(back) - 1; i >= 0; i-- {
			line = append(line, back[i])
		}
		return append(line, line[0])
	}
	switch s.Kind {
	case "edge-ring", "annulus":
		return [][]Point{arc(o.Centre, o.Outer, o.Outer, 0, 0, 360), arc(o.Centre, o.Inner, o.Inner, 0, 0, 360)}
	case "edge-arc", "sector":
		return [][]Point{ring(o.From, o.To)}
	case "centre", "blob":
		return [][]Point{arc(o.Centre, o.SemiMajor, o.SemiMinor, o.Angle, 0, 360)}
	case "line":
		var line []Point
		for i := range 17 { // the parabola through both ends and the middle
			t := float64(i) / 16
			a, b, c := (1-t)*(1-2*t), 4*t*(1-t), t*(2*t-1)
			line = append(line, Point{a*o.Ends[0].X + b*o.Middle.X + c*o.Ends[1].X, a*o.Ends[0].Y + b*o.Middle.Y + c*o.Ends[1].Y})
		}
		return [][]Point{line}
	}
	return nil
}
