package wafermap

import (
	"math"
	"math/rand/v2"
	"strings"
	"testing"
)

// plainMap is a disc of 2 x 2 mm dice, 3 % of which fail, with a pattern laid over it.
func plainMap(radius float64, seed uint64, hit func(u, v float64, x, y int32) float64) SignatureInput {
	x, y := disc(radius)
	g := FindGeometry(x, y, Known{DieWidthMM: 2, DieHeightMM: 2})
	random := rand.New(rand.NewPCG(seed, 21))
	fail := make([]bool, len(x))
	for i := range x {
		mx, my := g.Position(x[i], y[i])
		fail[i] = random.Float64() < 0.03+hit(mx, my, x[i], y[i])
	}
	return SignatureInput{Grid: NewGrid(x, y), Geometry: g, Fail: fail}
}

func within(lo, v, hi float64) float64 {
	if v >= lo && v <= hi {
		return 1
	}
	return 0
}

// Where a pattern lies must be told as it was drawn. Lengths are in mm, the wafer's tested
// radius is 60 mm.
func TestOutlines(t *testing.T) {
	for _, c := range []struct {
		kind  string
		hit   func(u, v float64, x, y int32) float64
		check func(t *testing.T, o Outline)
		text  string
	}{
		{"edge-ring", func(u, v float64, x, y int32) float64 { return 0.3 * within(52, math.Hypot(u, v), 99) },
			func(t *testing.T, o Outline) {
				about(t, "inner radius", o.Inner, 52, 1.5)
				if o.Outer < 59 {
					t.Errorf("outer radius %g", o.Outer)
				}
			}, "from a radius of"},
		{"edge-arc", func(u, v float64, x, y int32) float64 {
			return 0.4 * within(50, math.Hypot(u, v), 99) * within(-40, math.Atan2(v, u)*180/math.Pi, 30)
		}, func(t *testing.T, o Outline) {
			about(t, "inner radius", o.Inner, 50, 2)
			about(t, "from", o.From, 320, 5)
			about(t, "to", o.To, 390, 5)
		}, "out to the edge, 32"},
		{"centre", func(u, v float64, x, y int32) float64 { return 0.3 * within(0, math.Hypot(u, v), 20) },
			func(t *testing.T, o Outline) {
				about(t, "radius", math.Sqrt(o.SemiMajor*o.SemiMinor), 20, 2)
				about(t, "place", math.Hypot(o.Centre.X, o.Centre.Y), 0, 3)
			}, "of the centre"},
		{"annulus", func(u, v float64, x, y int32) float64 { return 0.3 * within(25, math.Hypot(u-3, v), 35) },
			func(t *testing.T, o Outline) {
				about(t, "inner radius", o.Inner, 25, 2)
				about(t, "outer radius", o.Outer, 35, 2)
				about(t, "x", o.Centre.X, 3, 2)
			}, "between radii"},
		{"blob", func(u, v float64, x, y int32) float64 {
			return 0.4 * within(0, math.Hypot((u-25)/16, (v-10)/8), 1)
		}, func(t *testing.T, o Outline) {
			about(t, "x", o.Centre.X, 25, 2)
			about(t, "y", o.Centre.Y, 10, 2)
			about(t, "major", o.SemiMajor, 16, 3)
			about(t, "minor", o.SemiMinor, 8, 2)
			about(t, "angle", math.Remainder(o.Angle, 180), 0, 12)
		}, "at (2"},
		{"line", func(u, v float64, x, y int32) float64 {
			k := u / 40
			return 0.8 * within(-40, u, 40) * within(-1.5, v-(0.3*u+5*(1-k*k)), 1.5)
		}, func(t *testing.T, o Outline) {
			a, b := o.Ends[0], o.Ends[1]
			if a.X > b.X {
				a, b = b, a
			}
			about(t, "left end x", a.X, -40, 5)
			about(t, "left end y", a.Y, -12, 3)
			about(t, "right end x", b.X, 40, 5)
			about(t, "right end y", b.Y, 12, 3)
			about(t, "middle y", o.Middle.Y-0.3*o.Middle.X, 5, 2)
			about(t, "width", o.Width, 3, 1.5)
		}, "bowed by"},
		{"gradient", func(u, v float64, x, y int32) float64 { return 0.2 * (u*math.Sqrt(3)/2 + v/2 + 60) / 120 },
			func(t *testing.T, o Outline) {
				about(t, "direction", o.Direction, 30, 12)
				about(t, "low", o.Low, 0.04, 0.02)
				about(t, "high", o.High, 0.22, 0.04)
			}, "rising towards"},
		{"sector", func(u, v float64, x, y int32) float64 { return 0.3 * within(100, math.Atan2(v, u)*180/math.Pi, 150) },
			func(t *testing.T, o Outline) {
				about(t, "from", o.From, 100, 5)
				about(t, "to", o.To, 150, 5)
			}, "° to 1"},
		{"shot-repeat", func(u, v float64, x, y int32) float64 {
			if (x%7+7)%7 == 3 && (y%5+5)%5 == 1 {
				return 0.5
			}
			return 0
		}, func(t *testing.T, o Outline) {
			if o.PeriodX != 7 || o.PeriodY != 5 || len(o.Places) != 1 || (o.Places[0][0]%7+7)%7 != 3 || (o.Places[0][1]%5+5)%5 != 1 {
				t.Errorf("periods %d and %d, places %v", o.PeriodX, o.PeriodY, o.Places)
			}
		}, "every 7 columns and 5 rows, at 1 place"},
		{"stripe", func(u, v float64, x, y int32) float64 { return 0.4 * within(-4, float64(y), -1) },
			func(t *testing.T, o Outline) {
				if o.Along != "row" || o.First != -4 || o.Last != -1 {
					t.Errorf("%s %d to %d", o.Along, o.First, o.Last)
				}
			}, "rows -4 to -1"},
		{"site", func(u, v float64, x, y int32) float64 { return 0.3 * within(2, float64((x%4+4)%4), 2) },
			func(t *testing.T, o Outline) {
				if o.PeriodX != 4 || o.PeriodY != 1 {
					t.Errorf("periods %d and %d", o.PeriodX, o.PeriodY)
				}
			}, "every 4 columns"},
	} {
		t.Run(c.kind, func(t *testing.T) {
			in := plainMap(30, 5, c.hit)
			got := Signatures(in)
			if len(got) != 1 || got[0].Kind != c.kind {
				t.Fatalf("called %v", kinds(got))
			}
			s := got[0]
			c.check(t, s.Outline)
			if text := s.Text("mm"); !strings.Contains(text, c.text) {
				t.Errorf("text %q lacks %q", text, c.text)
			}
			// what it costs, against what was drawn
			want, fails := 0.0, 0.0
			for i := range in.Fail {
				mx, my := in.Geometry.Position(in.Grid.x[i], in.Grid.y[i])
				want += c.hit(mx, my, in.Grid.x[i], in.Grid.y[i]) / float64(len(in.Fail))
				if in.Fail[i] {
					fails++
				}
			}
			about(t, "loss", s.Loss, want, 0.15*want+0.006)
			about(t, "strength", s.Strength, s.Loss*float64(len(in.Fail))/fails, 1e-9)
			if s.PValue > 1e-6 || s.PValue <= 0 || !(s.Rate > s.Background) {
				t.Errorf("p %g, rate %g, background %g", s.PValue, s.Rate, s.Background)
			}
			for _, r := range s.Dice {
				if !in.Fail[r] {
					t.Fatal("a passing die among the dice it explains")
				}
			}
			for _, path := range s.Paths() {
				for _, p := range path {
					if math.IsNaN(p.X+p.Y) || math.Hypot(p.X, p.Y) > 70 {
						t.Fatalf("a path goes to %v", p)
					}
				}
			}
		})
	}
}

func kinds(list []Signature) (out []string) {
	for _, s := range list {
		out = append(out, s.Kind)
	}
	return out
}

func about(t *testing.T, what string, got, want, tolerance float64) {
	t.Helper()
	if !(math.Abs(got-want) <= tolerance) {
		t.Errorf("%s %g, want %g +- %g", what, got, want, tolerance)
	}
}
