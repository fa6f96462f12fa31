package wafermap

import (
	"math"
	"math/rand/v2"
	"slices"
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

func TestSitesAndTestOrder(t *testing.T) {
	in := plainMap(25, 6, func(u, v float64, x, y int32) float64 { return 0.15 * within(1, float64((x%8+8)%8), 1) })
	in.Site, in.Order = make([]int32, len(in.Fail)), make([]int32, len(in.Fail))
	for i := range in.Fail {
		x, y := in.Grid.x[i], in.Grid.y[i]
		in.Site[i], in.Order[i] = (x%8+8)%8+1, 100*(y+40)+x/8
	}
	if got := Signatures(in); len(got) != 1 || got[0].Kind != "site" || !slices.Equal(got[0].Outline.Sites, []int32{2}) || got[0].Text("mm") != "of site 2" {
		t.Errorf("site 2: %v %+v", kinds(got), got[0].Outline)
	}
	in = plainMap(25, 7, func(u, v float64, x, y int32) float64 { return 0 })
	in.Order = make([]int32, len(in.Fail))
	random := rand.New(rand.NewPCG(1, 2))
	for i := range in.Fail {
		in.Order[i] = int32(i / 4)
		if i/4 >= 120 && i/4 < 170 && random.Float64() < 0.3 { // four whole rows and a part of two
			in.Fail[i] = true
		}
	}
	in.Order[7] = Missing
	got := Signatures(in)
	if len(got) != 1 || got[0].Kind != "stripe" || got[0].Outline.Along != "touchdown" || math.Abs(float64(got[0].Outline.First)-120) > 4 || math.Abs(float64(got[0].Outline.Last)-169) > 4 {
		t.Errorf("touchdowns 120 to 169: %v %+v", kinds(got), got[0].Outline)
	}
}

func TestWafersWithoutPatterns(t *testing.T) {
	x, y := disc(12)
	g := FindGeometry(x, y, Known{})
	in := SignatureInput{Grid: NewGrid(x, y), Geometry: g, Fail: make([]bool, len(x))}
	got := Signatures(in)
	if len(got) != 1 || got[0].Kind != "none" || got[0].Loss != 0 || !math.IsNaN(got[0].PValue) || got[0].Text("") != "too few fails to judge" {
		t.Errorf("no fails: %+v", got)
	}
	in.Fail[3], in.Fail[40], in.Fail[200] = true, true, true
	if got := Signatures(in); len(got) != 1 || got[0].Kind != "none" || len(got[0].Dice) != 3 {
		t.Errorf("three fails: %+v", got)
	}
	in.Fail = scatter(len(x), 0.2, 4)
	if got := Signatures(in); len(got) != 1 || got[0].Kind != "random" || got[0].Strength != 1 || !(got[0].PValue > falseAlarm) {
		t.Errorf("a fifth at random: %+v", got[0])
	}
	for _, rate := range []float64{0.8, 0.97, 1} {
		in.Fail = scatter(len(x), rate, 5)
		if got := Signatures(in); len(got) != 1 || got[0].Kind != "near-total" || !(got[0].PValue < 1e-10) || !strings.Contains(got[0].Text(""), "% of the dice fail") {
			t.Errorf("%g of all: %v", rate, kinds(got))
		}
	}
	// four fifths fail, but in a pattern: the centre is good
	for i := range x {
		in.Fail[i] = x[i]*x[i]+y[i]*y[i] > 90 || i%9 == 0
	}
	if got := Signatures(in); got[0].Kind == "near-total" || got[0].Kind == "random" {
		t.Errorf("a wide edge ring is called %v", kinds(got))
	}
	if got := Signatures(SignatureInput{Grid: NewGrid(nil, nil)}); len(got) != 1 || got[0].Kind != "none" {
		t.Errorf("no dice: %v", kinds(got))
	}
	// where no wafer can be found, what does not need one is found all the same
	long := func(x, y int32) bool { return y == 2 && x > 10 && x < 40 }
	var lx, ly []int32
	var fail []bool
	for j := range int32(5) {
		for i := range int32(60) {
			lx, ly, fail = append(lx, i*3), append(ly, j), append(fail, long(i, j))
		}
	}
	for _, s := range Signatures(SignatureInput{Grid: NewGrid(lx, ly), Geometry: Geometry{Why: "none"}, Fail: fail}) {
		if s.Kind != "line" && s.Kind != "blob" && s.Kind != "stripe" {
			t.Errorf("a row of fails on five rows of dice is called %s", s.Kind)
		}
	}
}

// Turning the wafer, shifting its coordinates or shuffling its rows must not change what is found.
func TestSignaturesFollowIsometries(t *testing.T) {
	hit := func(u, v float64, x, y int32) float64 {
		return 0.3*within(0, math.Hypot(u-25, v-15), 12) + 0.3*within(53, math.Hypot(u, v), 99)
	}
	in := plainMap(30, 8, hit)
	want := Signatures(in)
	if !slices.Equal(sorted(kinds(want)), []string{"blob", "edge-ring"}) {
		t.Fatalf("called %v", kinds(want))
	}
	for name, move := range map[string]func(x, y int32) (int32, int32){
		"turned":   func(x, y int32) (int32, int32) { return -y, x },
		"mirrored": func(x, y int32) (int32, int32) { return -x, y },
		"shifted":  func(x, y int32) (int32, int32) { return x + 1000, y - 77 },
	} {
		x, y := moved(in.Grid.x, in.Grid.y, move)
		got := Signatures(SignatureInput{Grid: NewGrid(x, y), Geometry: FindGeometry(x, y, Known{DieWidthMM: 2, DieHeightMM: 2}), Fail: in.Fail})
		if !slices.Equal(sorted(kinds(got)), sorted(kinds(want))) {
			t.Errorf("%s: called %v", name, kinds(got))
			continue
		}
		for k := range got {
			about(t, name+" loss", got[k].Loss, want[k].Loss, 0.1*want[k].Loss)
		}
	}
	order := rand.New(rand.NewPCG(1, 3)).Perm(len(in.Fail))
	x, y, fail := make([]int32, len(order)), make([]int32, len(order)), make([]bool, len(order))
	for i, k := range order {
		x[i], y[i], fail[i] = in.Grid.x[k], in.Grid.y[k], in.Fail[k]
	}
	before := slices.Clone(fail)
	got := Signatures(SignatureInput{Grid: NewGrid(x, y), Geometry: in.Geometry, Fail: fail})
	for k := range got {
		if got[k].Kind != want[k].Kind || got[k].Loss != want[k].Loss || got[k].PValue != want[k].PValue || len(got[k].Dice) != len(want[k].Dice) {
			t.Errorf("shuffled rows: %s with loss %g, was %s with %g", got[k].Kind, got[k].Loss, want[k].Kind, want[k].Loss)
		}
	}
	if !slices.Equal(before, fail) {
		t.Error("the fails were changed")
	}
}

func sorted(v []string) []string { return slices.Sorted(slices.Values(v)) }

func TestValueSignatures(t *testing.T) {
	in := plainMap(30, 9, func(u, v float64, x, y int32) float64 { return 0 })
	random := rand.New(rand.NewPCG(4, 4))
	value := make([]float64, len(in.Fail))
	for i := range value {
		u, v := in.Geometry.Position(in.Grid.x[i], in.Grid.y[i])
		value[i] = random.NormFloat64() + 1.5*within(0, math.Hypot(u, v), 20) - 1.5*within(0, math.Hypot(u+30, v), 12)
		if i%50 == 0 {
			value[i] = math.NaN()
		}
	}
	high, low := ValueSignatures(in, value, 0.1)
	if len(high) != 1 || high[0].Kind != "centre" || len(low) != 1 || low[0].Kind != "blob" {
		t.Fatalf("high %v, low %v", kinds(high), kinds(low))
	}
	about(t, "x of the low blob", low[0].Outline.Centre.X, -30, 3)
	for _, r := range high[0].Dice {
		if !(value[r] > 0.5) {
			t.Fatalf("row %d with value %g is no high die", r, value[r])
		}
	}
	high, low = ValueSignatures(in, make([]float64, len(value)), 0.1)
	if kinds(high)[0] != "near-total" && kinds(high)[0] != "none" {
		t.Errorf("a constant value: %v %v", kinds(high), kinds(low))
	}
}
