package variance_test

import (
	"math"
	"math/rand/v2"
	"os"
	"testing"

	"kneepoint/stats/variance"
)

// draws is how many lots a coverage test makes, and the slack in standard errors
// that few draws need.
func draws(short int) int {
	if os.Getenv("KNEEPOINT_LONG") != "" {
		return 2000
	}
	return short
}

// nested makes readings of lots with so many wafers and dice, with the given
// standard deviations.
func nested(r *rand.Rand, wafers []int, dice func(lot, wafer int) int, sdLot, sdWafer, sdDie float64) (levels []variance.Level, y []float64) {
	levels = []variance.Level{{Name: "lot"}, {Name: "wafer"}}
	for l, n := range wafers {
		a := 84 + sdLot*r.NormFloat64()
		for w := range n {
			b := a + sdWafer*r.NormFloat64()
			for range dice(l, w) {
				levels[0].Code = append(levels[0].Code, int32(l))
				levels[1].Code = append(levels[1].Code, int32(w))
				y = append(y, b+sdDie*r.NormFloat64())
			}
		}
	}
	return levels, y
}

// 95 % intervals hold the true components in 93 to 97 % of 2,000 designs
// (KNEEPOINT_LONG=1); by default 80 designs are drawn, with three standard errors
// of slack.
func TestIntervalsCover(t *testing.T) {
	n := draws(80)
	six := func(_, _ int) int { return 6 }
	uneven := func(l, w int) int { return 3 + (7*l+5*w)%13 }
	for _, c := range []struct {
		name        string
		wafers      []int
		dice        func(int, int) int
		lot, wafer  float64
		alsoMoments bool
	}{
		{"12 lots x 4 x 6", []int{4, 4, 4, 4, 4, 4, 4, 4, 4, 4, 4, 4}, six, 1.2, 0.8, true},
		{"5 lots x 8 x 6", []int{8, 8, 8, 8, 8}, six, 1.5, 1, true},
		{"8 lots, uneven", []int{2, 6, 3, 5, 4, 2, 6, 4}, uneven, 1.5, 1, false},
	} {
		r := rand.New(rand.NewPCG(11, 4))
		truth := []float64{c.lot * c.lot, c.wafer * c.wafer, 1}
		var held, heldMoments [3]int
		heldMean, heldShare := 0, 0
		for range n {
			levels, y := nested(r, c.wafers, c.dice, c.lot, c.wafer, 1)
			d := variance.New(levels, y)
			f := d.REML(0.95)
			rows := d.ANOVA(0.95)
			for k, v := range truth {
				if iv := f.Components[k].Variance; iv.Lower <= v && v <= iv.Upper {
					held[k]++
				}
				if iv := rows[k].Variance; iv.Lower <= v && v <= iv.Upper {
					heldMoments[k]++
				}
			}
			if f.Mean.Lower <= 84 && 84 <= f.Mean.Upper {
				heldMean++
			}
			if iv := f.Components[0].Share; iv.Lower <= truth[0]/(truth[0]+truth[1]+1) && truth[0]/(truth[0]+truth[1]+1) <= iv.Upper {
				heldShare++
			}
		}
		check := func(what string, held int) {
			share := float64(held) / float64(n)
			slack := 0.0
			if n < 2000 {
				slack = 3 * math.Sqrt(0.05*0.95/float64(n))
			}
			if share < 0.93-slack || share > 0.97+slack {
				t.Errorf("%s: 95 %% interval of %s covers %.3f", c.name, what, share)
			}
			t.Logf("%s: %s covered %.3f", c.name, what, share)
		}
		for k, level := range []string{"lot", "wafer", "die"} {
			check(level, held[k])
			if c.alsoMoments {
				check(level+" by moments", heldMoments[k])
			}
		}
		check("the mean", heldMean)
		check("the lots' share", heldShare)
	}
}

// A pattern that all wafers share is not taken for a spread of zones, and its
// interval covers.
func TestPatternCovers(t *testing.T) {
	n := draws(40)
	places := []float64{0.6, 0.2, 0, -0.2, -0.9} // deviations of five zones
	for _, uneven := range []bool{false, true} {
		var heldPattern, heldZone int
		sumPattern, sumZone := 0.0, 0.0
		r := rand.New(rand.NewPCG(21, 4))
		truth := 0.0
		for range n {
			levels := []variance.Level{{Name: "wafer"}, {Name: "zone", Repeats: true}}
			var y []float64
			var count [5]int
			for w := range int32(12) {
				a := r.NormFloat64()
				for z := range int32(5) {
					b := a + places[z] + 0.3*r.NormFloat64()
					dice := 4
					if uneven {
						dice = 2 + int(w+2*z)%5
					}
					for range dice {
						levels[0].Code, levels[1].Code = append(levels[0].Code, w), append(levels[1].Code, z)
						y = append(y, b+r.NormFloat64())
						count[z]++
					}
				}
			}
			f := variance.New(levels, y).REML(0.95)
			mean := 0.0
			truth = 0
			for z, c := range count {
				mean += places[z] * float64(c) / float64(len(y))
			}
			for z, c := range count {
				truth += (places[z] - mean) * (places[z] - mean) * float64(c) / float64(len(y))
			}
			zone, pattern := f.Components[1], f.Components[2]
			if !pattern.Pattern || zone.Level != "zone" {
				t.Fatalf("%+v", f.Components)
			}
			sumZone += zone.Variance.Estimate
			sumPattern += pattern.Variance.Estimate
			if zone.Variance.Lower <= 0.09 && 0.09 <= zone.Variance.Upper {
				heldZone++
			}
			if pattern.Variance.Lower <= truth && truth <= pattern.Variance.Upper {
				heldPattern++
			}
		}
		slack := 0.0
		if n < 2000 {
			slack = 3 * math.Sqrt(0.05*0.95/float64(n))
		}
		for what, held := range map[string]int{"pattern": heldPattern, "zone": heldZone} {
			share := float64(held) / float64(n)
			t.Logf("uneven %v: %s covered %.3f", uneven, what, share)
			if share < 0.93-slack || share > 0.97+slack {
				t.Errorf("uneven %v: 95 %% interval of %s covers %.3f", uneven, what, share)
			}
		}
		if mean := sumPattern / float64(n); math.Abs(mean/truth-1) > 0.1 {
			t.Errorf("uneven %v: pattern %v on average, true %v", uneven, mean, truth)
		}
		t.Logf("uneven %v: pattern %.3f on average, true %.3f; zone %.3f, true 0.09", uneven, sumPattern/float64(n), truth, sumZone/float64(n))
	}
}
