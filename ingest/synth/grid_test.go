package synth

import (
	"math"
	"testing"
)

// TestGrid: whole dice only, each once, in serpentine order by site.
func TestGrid(t *testing.T) {
	for name, g := range map[string]Grid{
		"demo":    DemoSpec().Grid,
		"bench":   BenchSpec().Grid,
		"oblong":  {DiameterMM: 150, DieWidthMM: 3, DieHeightMM: 5, EdgeExclusionMM: 5, SiteColumns: 2, SiteRows: 2},
		"one die": {DiameterMM: 100, DieWidthMM: 30, DieHeightMM: 50, EdgeExclusionMM: 3},
		"few":     {DiameterMM: 100, DicePerWafer: 2},
	} {
		dice, w, h := g.layout()
		if len(dice) == 0 || g.DicePerWafer > 0 && len(dice) != g.DicePerWafer {
			t.Errorf("%s: %d dice, want %d", name, len(dice), g.DicePerWafer)
		}
		seen := map[[2]int32]bool{}
		blocks := map[int32][2]int32{}
		nx, ny := max(g.SiteColumns, 1), max(g.SiteRows, 1)
		for i, d := range dice {
			if seen[[2]int32{d.x, d.y}] {
				t.Fatalf("%s: die %d,%d twice", name, d.x, d.y)
			}
			seen[[2]int32{d.x, d.y}] = true
			corner := math.Hypot((math.Abs(float64(d.x))+0.5)*w, (math.Abs(float64(d.y))+0.5)*h)
			if corner > g.DiameterMM/2-g.EdgeExclusionMM+1e-9 {
				t.Fatalf("%s: die %d,%d reaches %.3f mm", name, d.x, d.y, corner)
			}
			if i > 0 {
				before := dice[i-1]
				if step := d.touchdown - before.touchdown; step < 0 || step > 1 || step == 0 && d.site <= before.site {
					t.Fatalf("%s: die %d is touchdown %d site %d after %d site %d", name, i, d.touchdown, d.site, before.touchdown, before.site)
				}
			}
			if d.site < 1 || int(d.site) > nx*ny {
				t.Fatalf("%s: site %d", name, d.site)
			}
			block := [2]int32{(d.x - mod(d.x, nx)) / int32(nx), (d.y - mod(d.y, ny)) / int32(ny)}
			if b, ok := blocks[d.touchdown]; ok && b != block {
				t.Fatalf("%s: touchdown %d covers two blocks", name, d.touchdown)
			}
			blocks[d.touchdown] = block
		}
		// Serpentine: the prober goes to the next block, or one row down.
		for td, b := range blocks {
			next, ok := blocks[td+1]
			if !ok {
				continue
			}
			along, down := next[0]-b[0], b[1]-next[1]
			if !(down == 0 && max(along, -along) == 1 && (along > 0) == (mod(b[1], 2) == 0)) && down != 1 {
				t.Fatalf("%s: after block %v comes %v", name, b, next)
			}
		}
	}
}

// TestPlaces draws each shape's strength at a few dice by hand.
func TestPlaces(t *testing.T) {
	middle, right, rim := place{}, place{u: 0.5, r: 0.5, sx: 1}, place{v: 0.95, r: 0.95, site: 3, touchShare: 0.9}
	for name, c := range map[string]struct {
		p    Place
		want [3]float64
	}{
		"everywhere": {Place{}, [3]float64{1, 1, 1}},
		"centre":     {Place{Shape: Centre, Outer: 0.8}, [3]float64{1, 1 - 0.25/0.64, 0}},
		"rim":        {Place{Shape: Rim}, [3]float64{0, 0.25, 0.9025}},
		"ring":       {Place{Shape: Ring, Inner: 0.9, Outer: 1}, [3]float64{0, 0, 0.5}},
		"annulus":    {Place{Shape: Annulus, Inner: 0.5, Width: 0.5}, [3]float64{math.Exp(-0.5), 1, math.Exp(-0.405)}},
		"tilt":       {Place{Shape: Tilt}, [3]float64{0.5, 0.75, 0.5}},
		"tilt up":    {Place{Shape: Tilt, Angle: 90}, [3]float64{0.5, 0.5, 0.975}},
		"line":       {Place{Shape: Line, From: [2]float64{0.1, 0.02}, To: [2]float64{1, 0.02}, Width: 0.05}, [3]float64{0, 1, 0}},
		"blob":       {Place{Shape: Blob, From: [2]float64{0.5, 0}, Width: 0.5}, [3]float64{math.Exp(-0.5), 1, math.Exp(-2 * (0.25 + 0.9025))}},
		"sector":     {Place{Shape: Sector, Angle: 360, Width: 20, Inner: 0.1}, [3]float64{0, 1, 0}},
		"shot cell":  {Place{Shape: ShotCell, Shot: [2]int{1, 0}}, [3]float64{0, 1, 0}},
		"site":       {Place{Sites: []int{2, 3}}, [3]float64{0, 0, 1}},
		"burst":      {Place{Between: [2]float64{0.8, 1}}, [3]float64{0, 0, 1}},
	} {
		for i, d := range []place{middle, right, rim} {
			if got := c.p.strength(&d); math.Abs(got-c.want[i]) > 1e-9 {
				t.Errorf("%s at die %d: %.4f, want %.4f", name, i, got, c.want[i])
			}
		}
	}
}
