package wafermap

import (
	"math"
	"math/rand/v2"
	"testing"
)

// The chance of a neighbourhood's fails must be the share of all placements, by
// enumeration, with as many or more (or as few or fewer), doubled.
func TestFailSpotsAreExact(t *testing.T) {
	x, y := raggedMap()
	g := NewGrid(x, y)
	for _, n := range []Neighbours{Rook, Queen, Within(2)} {
		for _, fails := range []int{1, 3, 6} {
			var maps [][]bool
			enumerate(len(x), fails, func(fail []bool) { maps = append(maps, append([]bool(nil), fail...)) })
			around := func(fail []bool, r int) (count int) {
				if fail[r] {
					count++
				}
				for _, s := range n.all() {
					if q := g.at(int32(r), s); q >= 0 && fail[q] {
						count++
					}
				}
				return count
			}
			sample := maps[len(maps)/3]
			l := g.FailSpots(sample, n, 0.05)
			for r := range x {
				seen := around(sample, r)
				var above, below, mean, square float64
				for _, m := range maps {
					c := around(m, r)
					if c >= seen {
						above++
					}
					if c <= seen {
						below++
					}
					mean += float64(c) / float64(len(maps))
					square += float64(c*c) / float64(len(maps))
				}
				want := min(1, 2*min(above, below)/float64(len(maps)))
				if math.Abs(l.P[r]-want) > 1e-9 {
					t.Errorf("%v, %d fails, die %d: p = %g, all placements give %g", n, fails, r, l.P[r], want)
				}
				if sd := math.Sqrt(square - mean*mean); sd > 1e-9 && math.Abs(l.Z[r]-(float64(seen)-mean)/sd) > 1e-9 {
					t.Errorf("%v, %d fails, die %d: z = %g, all placements give %g", n, fails, r, l.Z[r], (float64(seen)-mean)/sd)
				}
			}
		}
	}
}

// The tails of sums of skewed values must be those of random draws, of which there are ten
// times as many here as the table is made from: within an eighth down to 0.005, and within
// a half beyond, where the normal law is wrong a hundredfold.
func TestSumLawAgainstDraws(t *testing.T) {
	random := rand.New(rand.NewPCG(1, 5))
	values := make([]float64, 3000)
	for i := range values {
		values[i] = math.Exp(1.2 * random.NormFloat64()) // skewed like a leakage current
	}
	law := newSumLaw(values)
	const draws = 200000
	for _, k := range []int{4, 9, 29} {
		sums := make([]float64, draws)
		for d := range sums {
			for range k {
				sums[d] += values[random.IntN(len(values))]
			}
		}
		for _, z := range []float64{-1.5, -1, 1, 2, 3, 4, 6} {
			n, count := float64(len(values)), float64(k)
			sum := count*law.mean + z*law.sd*math.Sqrt(count*(n-count)/(n-1))
			extreme := 0.0
			for _, s := range sums {
				if z > 0 && s >= sum || z < 0 && s <= sum {
					extreme++
				}
			}
			want := extreme / draws
			tolerance := 0.12 * want
			if want < 0.005 { // beyond the reach of the table's own draws
				tolerance = 0.5 * want
			}
			if _, p := law.tails(k, sum); math.Abs(p/2-want) > tolerance+4*math.Sqrt(want/draws)+1e-6 {
				t.Errorf("k %d, z %g: tail %.3g, draws %.3g, normal %.3g", k, z, p/2, want, upperNormal(math.Abs(z)))
			}
		}
	}
}

// On random maps few dice may get a class: the false discovery rate is then the chance of
// any at all. A block of high values must be found, and a single one in it named.
func TestLocalIndicatorsFindABlockAndNothingElse(t *testing.T) {
	x, y := disc(20)
	g := NewGrid(x, y)
	random := rand.New(rand.NewPCG(2, 6))
	wafers := 50
	alarms := map[string]int{}
	for range wafers {
		value := make([]float64, len(x))
		for i := range value {
			value[i] = math.Exp(random.NormFloat64())
		}
		for name, l := range map[string]Local{
			"hot spots": g.HotSpots(value, Queen, 0.05), "Moran": g.LocalMoran(value, Rook, 0.05),
			"fails": g.FailSpots(scatter(len(x), 0.03, random.Uint64()), Within(2), 0.05),
		} {
			for _, c := range l.Class {
				if c != Ordinary {
					alarms[name]++
					break
				}
			}
		}
	}
	for _, name := range []string{"hot spots", "Moran", "fails"} {
		t.Logf("%s: %d of %d random wafers get a class", name, alarms[name], wafers)
		if alarms[name] > 9 { // 2.5 expected, 9 is beyond 99.9 %
			t.Errorf("%s: %d of %d random wafers get a class", name, alarms[name], wafers)
		}
	}
	value := make([]float64, len(x))
	for i := range value {
		value[i] = random.NormFloat64()
		if x[i] > 2 && x[i] <= 9 && y[i] > -4 && y[i] <= 3 {
			value[i] += 3
		}
	}
	value[g.Index(5, 0)] = -3
	hot, moran := g.HotSpots(value, Queen, 0.05), g.LocalMoran(value, Queen, 0.05)
	found, outside := 0, 0
	for i := range x {
		inside := x[i] > 2 && x[i] <= 9 && y[i] > -4 && y[i] <= 3
		near := x[i] > 1 && x[i] <= 10 && y[i] > -5 && y[i] <= 4
		if inside && hot.Class[i] == HotSpot {
			found++
		}
		if !near && hot.Class[i] != Ordinary {
			outside++
		}
	}
	if found < 44 || outside > 4 {
		t.Errorf("%d of 49 dice of the block found, and %d outside", found, outside)
	}
	if c := moran.Class[g.Index(5, 0)]; c != LowAmongHigh {
		t.Errorf("a low die in a block of high ones is %v", c)
	}
	if c := moran.Class[g.Index(7, 1)]; c != HotSpot {
		t.Errorf("a high die in a block of high ones is %v", c)
	}
}

func TestLocalDegenerate(t *testing.T) {
	x, y := disc(4)
	g := NewGrid(x, y)
	if l := g.HotSpots(make([]float64, len(x)), Queen, 0.05); l.Why == "" || !math.IsNaN(l.P[3]) {
		t.Errorf("a constant value: %+v", l)
	}
	value := make([]float64, len(x))
	for i := range value {
		value[i] = math.NaN()
	}
	if l := g.LocalMoran(value, Rook, 0.05); l.Why == "" || l.N != 0 {
		t.Errorf("no value: %+v", l)
	}
	for i := range value {
		value[i] = float64(i)
	}
	value[7] = 1e30 // one absurd reading must not upset the rest
	if l := g.HotSpots(value, Queen, 0.05); l.Why != "" || math.IsNaN(l.P[0]) {
		t.Errorf("an absurd value: %+v", l.Why)
	}
}

func TestWithin(t *testing.T) {
	for _, c := range []struct {
		dice float64
		all  int
	}{{1, 4}, {1.5, 8}, {2, 12}, {2.3, 20}, {3, 28}, {6, 112}} {
		if got := len(Within(c.dice).all()); got != c.all {
			t.Errorf("Within(%g) has %d neighbours, want %d", c.dice, got, c.all)
		}
	}
	if Within(1) != Rook || Within(1.5) != Queen || Within(2).String() != "within 2 dice" {
		t.Error("small distances are rook and queen")
	}
}

func BenchmarkFailSpots(b *testing.B) {
	g, _, _, fail := benchWafer(b, 0.05)
	for b.Loop() {
		g.FailSpots(fail, Queen, 0.05)
	}
}

func BenchmarkLocalMoran(b *testing.B) {
	g, x, _, _ := benchWafer(b, 0)
	random := rand.New(rand.NewPCG(1, 2))
	value := make([]float64, len(x))
	for i := range value {
		value[i] = math.Exp(random.NormFloat64())
	}
	for b.Loop() {
		g.LocalMoran(value, Queen, 0.05)
	}
}
