package wafermap

import (
	"math"
	"testing"
)

var squareDice = Geometry{DiameterMM: 100, DieWidthMM: 1, DieHeightMM: 2, EdgeExclusionMM: 3, CentreX: 10, CentreY: -5.5, Unit: "mm"}

func TestPosition(t *testing.T) {
	g := squareDice
	if x, y := g.Position(13, -4); x != 3 || y != 3 {
		t.Errorf("(%v, %v), want (3, 3)", x, y)
	}
	g.YDown = true
	if x, y := g.Position(13, -4); x != 3 || y != -3 {
		t.Errorf("y down: (%v, %v), want (3, -3)", x, y)
	}
	if r := g.RadiusMM(13, -4); math.Abs(r-3*math.Sqrt2) > 1e-15 {
		t.Errorf("radius %v", r)
	}
	if r := g.RadiusMM(Missing, 0); !math.IsNaN(r) || g.Ring(0, Missing, 3) != -1 || g.Sector(Missing, 0, 3) != -1 || g.OnWafer(Missing, 0) {
		t.Error("a die without coordinates has a place")
	}
}

// A die of 1 x 2 mm in row y = -5 (1 mm above the centre, from 0 to 2 mm): its far
// corner lies at hypot(dx+0.5, 2). With 47 mm inside the exclusion the last die that fits
// has dx + 0.5 <= sqrt(47^2 - 2^2) = 46.957, so dx = 46 (x = 56); the wafer of 50 mm
// touches dice with dx - 0.5 < 50, so dx = 50 (x = 60).
func TestEdgeRules(t *testing.T) {
	g := squareDice
	for _, c := range []struct {
		x                int32
		exclusion, wafer bool
	}{{10, false, true}, {56, false, true}, {57, true, true}, {60, true, true}, {61, true, false}, {-36, false, true}, {-37, true, true}, {-41, true, false}} {
		if got := g.InExclusion(c.x, -5); got != c.exclusion {
			t.Errorf("x = %d in exclusion: %v", c.x, got)
		}
		if got := g.OnWafer(c.x, -5); got != c.wafer {
			t.Errorf("x = %d on wafer: %v", c.x, got)
		}
	}
	// a die whose corner lies exactly on the limit fits (3-4-5 triangle)
	g = Geometry{DiameterMM: 10, DieWidthMM: 1, DieHeightMM: 1, CentreX: 0.5, CentreY: 0.5}
	if g.InExclusion(3, 4) {
		t.Error("(3, 4): corner at (3, 4) from the centre is within 5")
	}
	if !g.InExclusion(4, 4) {
		t.Error("(4, 4) is within 5")
	}
}

// Whole dice on a wafer against de Vries's formula (IEEE Trans. Semicond.
// Manuf. 18, 136, 2005, from memory): pi d^2/(4 S) - 0.58 pi d / sqrt(S), which he
// gives as good to about a per cent for dice much smaller than the wafer.
func TestWholeDiceOnWafer(t *testing.T) {
	for _, c := range []struct{ diameter, w, h float64 }{{100, 0.45, 0.45}, {150, 0.45, 0.45}, {150, 1.2, 0.9}, {200, 2, 2}, {300, 5, 8}} {
		g := Geometry{DiameterMM: c.diameter, DieWidthMM: c.w, DieHeightMM: c.h, CentreX: 0.5, CentreY: 0.25}
		whole := 0
		n := int32(c.diameter/min(c.w, c.h)/2) + 2
		for y := -n; y <= n; y++ {
			for x := -n; x <= n; x++ {
				if !g.InExclusion(x, y) {
					whole++
				}
			}
		}
		s := c.w * c.h
		formula := math.Pi*sq(c.diameter)/(4*s) - 0.58*math.Pi*c.diameter/math.Sqrt(s)
		if math.Abs(float64(whole)/formula-1) > 0.015 {
			t.Errorf("%v: %d dice, formula %.0f", c, whole, formula)
		}
	}
}

func TestRings(t *testing.T) {
	x, y := disc(150)
	g := Geometry{DiameterMM: 310, DieWidthMM: 1, DieHeightMM: 1, EdgeExclusionMM: 5, Unit: "mm"}
	for _, rings := range []int{1, 3, 5, 8} {
		edges := g.RingEdges(rings)
		if len(edges) != rings+1 || edges[0] != 0 || math.Abs(edges[rings]-150) > 1e-12 {
			t.Fatalf("%d rings: edges %v", rings, edges)
		}
		counts := make([]int, rings)
		for i := range x {
			k := g.Ring(x[i], y[i], rings)
			counts[k]++
			if r := g.RadiusMM(x[i], y[i]); r < edges[k]*(1-1e-12) || r > edges[k+1]*(1+1e-12) {
				t.Fatalf("die at radius %v in ring %d of %v", r, k, edges)
			}
		}
		for k, n := range counts {
			if math.Abs(float64(n*rings)/float64(len(x))-1) > 0.01 {
				t.Errorf("ring %d of %d has %d of %d dice", k, rings, n, len(x))
			}
		}
	}
	if k := g.Ring(400, 0, 4); k != 3 {
		t.Errorf("a die outside is in ring %d, want the last", k)
	}
	g.EdgeExclusionMM, g.OutlineRadius = 0, 149
	if e := g.RingEdges(4); e[4] != 149 {
		t.Errorf("without an exclusion the rings reach %v, want the outline", e[4])
	}
	g.OutlineRadius = 60 // a few sites in the middle
	if e := g.RingEdges(4); e[4] != 155 {
		t.Errorf("with a few sites the rings reach %v, want the wafer's edge", e[4])
	}
}

func TestSectors(t *testing.T) {
	g := Geometry{DiameterMM: 100, DieWidthMM: 1, DieHeightMM: 1}
	for _, c := range []struct {
		x, y int32
		want int
	}{{0, 0, 0}, {5, 0, 0}, {5, 4, 0}, {4, 5, 1}, {0, 5, 2}, {-1, 5, 2}, {-5, 1, 3}, {-5, 0, 4}, {-5, -1, 4}, {0, -5, 6}, {5, -1, 7}} {
		if got := g.Sector(c.x, c.y, 8); got != c.want {
			t.Errorf("(%d, %d) in sector %d, want %d", c.x, c.y, got, c.want)
		}
	}
	g.YDown = true
	if got := g.Sector(4, 5, 8); got != 6 {
		t.Errorf("y down: (4, 5) in sector %d, want 6", got)
	}
}

func TestZoneYields(t *testing.T) {
	x, y := disc(30)
	g := Geometry{DiameterMM: 62, DieWidthMM: 1, DieHeightMM: 1}
	pass := make([]bool, len(x), len(x)+2)
	for i := range pass {
		pass[i] = x[i] > 0
	}
	z := ZoneYields(g, append(x, Missing, 3), append(y, 1, Missing), append(pass, true, true), 4, 8)
	if z.Missing != 2 {
		t.Errorf("missing %d, want 2", z.Missing)
	}
	rings, sectors, cells, passing := 0, 0, 0, 0
	for _, c := range z.Rings {
		rings += c.Dice
		passing += c.Passing
	}
	for _, c := range z.Sectors {
		sectors += c.Dice
	}
	for _, row := range z.Cells {
		for _, c := range row {
			cells += c.Dice
		}
	}
	if rings != len(x) || sectors != len(x) || cells != len(x) {
		t.Errorf("%d, %d, %d of %d dice", rings, sectors, cells, len(x))
	}
	if z.Sectors[3].Passing != 0 || z.Sectors[0].Passing != z.Sectors[0].Dice-1 { // all but (0, 0)
		t.Errorf("sectors %v", z.Sectors)
	}
	if want := count(pass); passing != want {
		t.Errorf("%d passing, want %d", passing, want)
	}
	if z := ZoneYields(FindGeometry(nil, nil, Known{}), x, y, pass, 3, 3); z.Missing != len(x) {
		t.Errorf("without a geometry %d of %d dice are missing", z.Missing, len(x))
	}
}

func count(v []bool) (n int) {
	for _, b := range v {
		if b {
			n++
		}
	}
	return n
}
