package wafermap

import (
	"math"
	"math/rand/v2"
	"slices"
	"strings"
	"testing"
)

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
