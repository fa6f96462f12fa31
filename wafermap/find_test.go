package wafermap

import (
	"math"
	"math/rand/v2"
	"sort"
	"strings"
	"testing"
)

// quantile is for small samples in tests; it sorts v.
func quantile(v []float64, p float64) float64 {
	sort.Float64s(v)
	return v[int(p*float64(len(v)-1))]
}

// The centre of made maps must be found within these dice: the median and the 90 %
// point over maps, along the worse axis.
func TestFindGeometryOfMadeMaps(t *testing.T) {
	everything := func(k Known) Known { return k }
	pitch := func(k Known) Known { return Known{DieWidthMM: k.DieWidthMM, DieHeightMM: k.DieHeightMM} }
	nothing := func(k Known) Known { return Known{} }
	for _, c := range []struct {
		name, part  string
		every       int
		known       func(Known) Known
		median, p90 float64
	}{
		{"all known", "whole", 1, everything, 0.06, 0.2},
		{"all known", "flat", 1, everything, 0.08, 0.25},
		{"all known", "stopped", 1, everything, 0.25, 0.6},
		{"all known", "half", 1, everything, 0.25, 0.7},
		{"all known", "third", 1, everything, 0.3, 0.9},
		{"all known", "quarter", 1, everything, 0.7, 1.5},
		{"all known", "whole", 3, everything, 0.5, 1.2},
		{"pitch known", "whole", 1, pitch, 0.06, 0.2},
		{"pitch known", "flat", 1, pitch, 0.08, 0.25},
		{"pitch known", "stopped", 1, pitch, 0.25, 0.8},
		{"pitch known", "half", 1, pitch, 0.3, 1.5},
		{"nothing known", "whole", 1, nothing, 0.08, 0.3},
		{"nothing known", "flat", 1, nothing, 0.15, 0.5},
		{"nothing known", "stopped", 1, nothing, 0.4, 2},
		{"nothing known", "half", 1, nothing, 1.2, 4},
	} {
		for _, dirty := range []bool{false, true} {
			random := rand.New(rand.NewPCG(7, 7))
			var off, ratio, radius []float64
			for range 20 {
				m := makeMap(random, c.part, c.every, dirty)
				g := FindGeometry(m.x, m.y, c.known(m.known))
				if strings.Contains(g.Why, "at least 3 of each") && len(m.x) < 30 {
					continue // a third of a coarse map has two rows
				}
				if math.IsNaN(g.CentreX) {
					t.Errorf("%s, %s: %v: %s", c.name, c.part, m, g.Why)
					continue
				}
				off = append(off, max(math.Abs(g.CentreX-m.cx), math.Abs(g.CentreY-m.cy)))
				ratio = append(ratio, math.Abs(math.Log(g.DieHeightMM/g.DieWidthMM*m.known.DieWidthMM/m.known.DieHeightMM)))
				if g.Unit == "mm" {
					want := m.known.DiameterMM/2 - m.known.EdgeExclusionMM
					radius = append(radius, math.Abs(g.OutlineRadius-want)/max(g.DieWidthMM, g.DieHeightMM))
				}
			}
			if median, p90 := quantile(off, 0.5), quantile(off, 0.9); median > c.median || p90 > c.p90 {
				t.Errorf("%s, %s, every %d, dirty %v: centre off by %.2f (median), %.2f (90 %%) dice; want %v, %v", c.name, c.part, c.every, dirty, median, p90, c.median, c.p90)
			}
			if c.name == "nothing known" && (c.part == "whole" || c.part == "flat") && quantile(ratio, 0.9) > 0.06 {
				t.Errorf("%s, %s, dirty %v: die height to width off by %.3f", c.name, c.part, dirty, quantile(ratio, 0.9))
			}
			if len(radius) > 0 && c.part != "quarter" && c.every == 1 && quantile(radius, 0.9) > 1 {
				t.Errorf("%s, %s, dirty %v: outline radius off by %.2f dice", c.name, c.part, dirty, quantile(radius, 0.9))
			}
		}
	}
}

// Without the diameter, a whole map must give the standard size it was made on.
func TestFindGeometryTakesTheStandardDiameter(t *testing.T) {
	random := rand.New(rand.NewPCG(11, 3))
	wrong := 0
	for range 40 {
		m := makeMap(random, "whole", 1, true)
		g := FindGeometry(m.x, m.y, Known{DieWidthMM: m.known.DieWidthMM, DieHeightMM: m.known.DieHeightMM})
		if g.DiameterMM != m.known.DiameterMM {
			wrong++
		}
	}
	if wrong > 2 { // the coarsest maps leave it open
		t.Errorf("%d of 40 diameters wrong", wrong)
	}
}

// The discs of the spdep cases have their centre at (n-1)/2 by the script that
// made them, and square dice.
func TestFindGeometryOfReferenceDiscs(t *testing.T) {
	for _, n := range []int{11, 15} {
		var x, y []int32
		c := float64(n-1) / 2
		for j := range n {
			for i := range n {
				if sq(float64(i)-c)+sq(float64(j)-c) <= float64(n*n)/4 {
					x, y = append(x, int32(i)), append(y, int32(j))
				}
			}
		}
		g := FindGeometry(x, y, Known{})
		if math.Abs(g.CentreX-c) > 0.01 || math.Abs(g.CentreY-c) > 0.01 || math.Abs(g.DieHeightMM/g.DieWidthMM-1) > 0.01 {
			t.Errorf("n = %d: centre (%v, %v), want %v; ratio %v", n, g.CentreX, g.CentreY, c, g.DieHeightMM)
		}
		if g.Unit != "die widths" || !math.IsNaN(g.DiameterMM) || g.Why == "" || math.Abs(g.Radius()-float64(n)/2) > 0.6 {
			t.Errorf("n = %d: %+v", n, g)
		}
	}
}

func TestFindGeometryFollowsIsometries(t *testing.T) {
	m := makeMap(rand.New(rand.NewPCG(5, 5)), "stopped", 1, true)
	want := FindGeometry(m.x, m.y, m.known)
	for i, move := range isometries {
		x, y := moved(m.x, m.y, move)
		known := m.known
		if px, _ := move(1, 0); px == 0 {
			known.DieWidthMM, known.DieHeightMM = known.DieHeightMM, known.DieWidthMM
		}
		g := FindGeometry(x, y, known)
		px, py := move(1, 0)
		qx, qy := move(0, 1)
		cx, cy := float64(px)*want.CentreX+float64(qx)*want.CentreY, float64(py)*want.CentreX+float64(qy)*want.CentreY
		if math.Abs(g.CentreX-cx) > 0.01 || math.Abs(g.CentreY-cy) > 0.01 || math.Abs(g.OutlineRadius/want.OutlineRadius-1) > 1e-3 {
			t.Errorf("isometry %d: centre (%v, %v), radius %v; want (%v, %v), %v", i, g.CentreX, g.CentreY, g.OutlineRadius, cx, cy, want.OutlineRadius)
		}
	}
}

// The order of rows and repeats must not matter, nor may inputs change.
func TestFindGeometryIsAFunctionOfThePositions(t *testing.T) {
	m := makeMap(rand.New(rand.NewPCG(6, 5)), "whole", 1, true)
	want := FindGeometry(m.x, m.y, m.known)
	x, y := append([]int32{Missing}, m.x...), append([]int32{3}, m.y...)
	random := rand.New(rand.NewPCG(1, 1))
	random.Shuffle(len(x), func(i, j int) { x[i], x[j], y[i], y[j] = x[j], x[i], y[j], y[i] })
	if got := FindGeometry(x, y, m.known); got != want {
		t.Errorf("shuffled: %+v\nwant %+v", got, want)
	}
	if got := FindGeometry(append(x, x...), append(y, y...), m.known); got != want {
		t.Errorf("repeated: %+v\nwant %+v", got, want)
	}
}

func TestFindGeometryWithPartOfTheSizes(t *testing.T) {
	random := rand.New(rand.NewPCG(3, 9))
	for range 10 {
		m := makeMap(random, "whole", 1, false)
		if len(m.x) < 1500 {
			continue // the ratio is only as good as the map is fine
		}
		k := m.known
		for name, part := range map[string]Known{
			"width":    {DieWidthMM: k.DieWidthMM, DiameterMM: k.DiameterMM},
			"height":   {DieHeightMM: k.DieHeightMM},
			"diameter": {DiameterMM: k.DiameterMM, EdgeExclusionMM: k.EdgeExclusionMM},
		} {
			g := FindGeometry(m.x, m.y, part)
			if math.Abs(g.DieWidthMM/k.DieWidthMM-1) > 0.04 || math.Abs(g.DieHeightMM/k.DieHeightMM-1) > 0.04 || g.Unit != "mm" || math.Abs(g.DiameterMM/k.DiameterMM-1) > 0.02 {
				t.Errorf("%s given, %v: %+v", name, m, g)
			}
		}
	}
}

func TestFindGeometryGivesUpAndSaysWhy(t *testing.T) {
	line := []int32{1, 2, 3, 4, 5, 6, 7, 8}
	flat := make([]int32, 8)
	for name, c := range map[string]struct {
		x, y []int32
		why  string
	}{
		"empty":     {nil, nil, "no dice"},
		"missing":   {[]int32{Missing, 3}, []int32{4, Missing}, "no dice"},
		"four":      {[]int32{1, 2, 1, 2, 1, 2}, []int32{1, 1, 2, 2, 1, 1}, "4 distinct positions"},
		"one row":   {line, flat, "8 columns and 1 rows"},
		"two rows":  {append(line, line...), append(flat, 1, 1, 1, 1, 1, 1, 1, 1), "2 rows"},
		"one place": {flat, flat, "1 distinct"},
		"extremes":  {[]int32{math.MaxInt32, math.MinInt32 + 1, 0}, []int32{math.MinInt32 + 1, math.MaxInt32, 0}, "positions"},
	} {
		g := FindGeometry(c.x, c.y, Known{DiameterMM: 100, DieWidthMM: 1, DieHeightMM: 1, Notch: "down"})
		if !strings.Contains(g.Why, c.why) || !math.IsNaN(g.CentreX) || !math.IsNaN(g.Radius()) || !math.IsNaN(g.DieWidthMM) || g.Notch != "down" {
			t.Errorf("%s: %+v", name, g)
		}
		if g.OnWafer(0, 0) || g.InExclusion(0, 0) || g.Ring(0, 0, 4) != -1 || g.Sector(0, 0, 4) != -1 || !math.IsNaN(g.RadiusMM(0, 0)) {
			t.Errorf("%s: a geometry that is not known places a die", name)
		}
	}
	// diagonal: enough rows and columns, but no disc
	diagonal := FindGeometry(line, line, Known{})
	if diagonal.Unit != "" && !(diagonal.Radius() > 0) {
		t.Errorf("diagonal: %+v", diagonal)
	}
	// whatever comes in, numbers are all there or all NaN
	random := rand.New(rand.NewPCG(4, 4))
	for range 300 {
		n, size := 1+random.IntN(40), 1+random.IntN(30)
		x, y := make([]int32, n), make([]int32, n)
		for i := range x {
			x[i], y[i] = int32(random.IntN(size)), int32(random.IntN(size))
		}
		for _, k := range []Known{{}, {DieWidthMM: 2, DieHeightMM: 1}, {DieWidthMM: 2, DieHeightMM: 1, DiameterMM: 3}} {
			g := FindGeometry(x, y, k)
			bad := 0
			for _, v := range []float64{g.CentreX, g.CentreY, g.DieWidthMM, g.DieHeightMM, g.OutlineRadius, g.Radius()} {
				if math.IsNaN(v) || math.IsInf(v, 0) {
					bad++
				}
			}
			if bad != 0 && bad != 6 || bad == 6 && g.Why == "" {
				t.Fatalf("%v %v: %+v", x, y, g)
			}
		}
	}
}

func TestFindGeometryCautions(t *testing.T) {
	m := makeMap(rand.New(rand.NewPCG(21, 4)), "whole", 1, false)
	for len(m.x) < 3000 || math.Abs(math.Log(m.known.DieHeightMM/m.known.DieWidthMM)) < 0.3 {
		m = makeMap(rand.New(rand.NewPCG(21, uint64(len(m.x)))), "whole", 1, false)
	}
	k := m.known
	if g := FindGeometry(m.x, m.y, k); g.Caution != "" {
		t.Errorf("sizes that fit: %q", g.Caution)
	}
	swapped := k
	swapped.DieWidthMM, swapped.DieHeightMM = k.DieHeightMM, k.DieWidthMM
	small, large := k, k
	small.DiameterMM /= 2
	large.DiameterMM *= 2
	for want, known := range map[string]Known{"swapped?": swapped, "over the edge": small, "reach only": large} {
		if g := FindGeometry(m.x, m.y, known); !strings.Contains(g.Caution, want) {
			t.Errorf("want a caution with %q, got %q", want, g.Caution)
		} else if math.Abs(g.CentreX-m.cx) > 0.5 || math.Abs(g.CentreY-m.cy) > 0.5 {
			t.Errorf("%q: centre off", want)
		}
	}
	quarter := makeMap(rand.New(rand.NewPCG(22, 4)), "quarter", 1, false)
	if g := FindGeometry(quarter.x, quarter.y, Known{}); !strings.Contains(g.Caution, "of 360 degrees") {
		t.Errorf("a quarter wafer without sizes: %q, seen over %.0f", g.Caution, g.OutlineDegrees)
	}
}
