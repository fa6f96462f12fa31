package wafermap_test

import (
	"fmt"
	"math/rand/v2"

	"kneepoint/wafermap"
)

// Eight fails on a small wafer, once scattered and once together: the same yield,
// but not the same wafer.
func ExampleGrid_JoinCount() {
	scattered := []string{
		"    . . #    ",
		"  . # . . #  ",
		". # . . . . .",
		". . . . # . .",
		"# . . . . # .",
		"  . . . . .  ",
		"    . # .    ",
	}
	together := []string{
		"    . . .    ",
		"  . . . . .  ",
		". . . . . . .",
		". # # . . . .",
		". # # # . . .",
		"  . # # . .  ",
		"    # . .    ",
	}
	for _, wafer := range [][]string{scattered, together} {
		var x, y []int32
		var fail []bool
		for row, dice := range wafer {
			for column, die := range dice {
				if die != ' ' {
					x, y = append(x, int32(column/2)), append(y, int32(-row))
					fail = append(fail, die == '#')
				}
			}
		}
		grid := wafermap.NewGrid(x, y)
		c := grid.JoinCount(fail, wafermap.Queen)
		fmt.Printf("%d of %d dice fail: %.0f fail-fail joins where %.1f are expected, z = %.1f, p = %.2g\n",
			c.Fails, c.N, c.FailFail, c.ExpectedFF, c.ZFF, c.PFF)
		for _, cluster := range grid.Clusters(fail, wafermap.Queen, 3) {
			fmt.Printf("a cluster of %d round (%.1f, %.1f)\n", cluster.Dice, cluster.CentreX, cluster.CentreY)
		}
	}
	// Output:
	// 8 of 37 dice fail: 3 fail-fail joins where 4.9 are expected, z = -1.0, p = 0.96
	// 8 of 37 dice fail: 16 fail-fail joins where 4.9 are expected, z = 6.1, p = 0.0001
	// a cluster of 8 round (2.0, -4.2)
}

func ExampleFindGeometry() {
	var x, y []int32
	for j := int32(-60); j <= 60; j++ { // a disc of 0.75 x 0.75 mm dice round the corner of four of them
		for i := int32(-60); i <= 60; i++ {
			if 4*(i*i+i+j*j+j)+2 < 4*62*62 {
				x, y = append(x, i), append(y, j)
			}
		}
	}
	g := wafermap.FindGeometry(x, y, wafermap.Known{DieWidthMM: 0.75, DieHeightMM: 0.75})
	fmt.Printf("centre (%.1f, %.1f), %g mm\n", g.CentreX, g.CentreY, g.DiameterMM)
	fmt.Println("ring of die (50, 0):", g.Ring(50, 0, 5))
	// Output:
	// centre (-0.5, -0.5), 100 mm
	// ring of die (50, 0): 3
}

// A scratch and an edge ring among fails that have nothing to do with each other.
func ExampleSignatures() {
	random := rand.New(rand.NewPCG(1, 2))
	var x, y []int32
	var fail []bool
	for j := int32(-40); j <= 40; j++ {
		for i := int32(-40); i <= 40; i++ {
			r2 := i*i + j*j
			if r2 > 40*40 {
				continue
			}
			scattered, ring := random.Float64() < 0.03, r2 > 37*37 && random.Float64() < 0.3
			scratch := i-2*j >= 5 && i-2*j <= 7 && i > -15 && i < 25
			x, y, fail = append(x, i), append(y, j), append(fail, scattered || ring || scratch)
		}
	}
	geometry := wafermap.FindGeometry(x, y, wafermap.Known{DieWidthMM: 1.2, DieHeightMM: 1.2})
	found := wafermap.Signatures(wafermap.SignatureInput{Grid: wafermap.NewGrid(x, y), Geometry: geometry, Fail: fail})
	for _, s := range found {
		fmt.Printf("%s: %s, %.1f %% of the dice\n", s.Kind, s.Text(geometry.Unit), 100*s.Loss)
	}
	// Output:
	// edge-ring: from a radius of 44.3 mm out to the edge, 4.2 % of the dice
	// line: from (-16.8, -12) to (28.8, 10.8) mm, 2.1 mm wide, 1.1 % of the dice
}
