package wafermap

import (
	"math"
	"math/rand/v2"
	"testing"
)

// enumerate visits every way to place fails on n dice.
func enumerate(n, fails int, visit func([]bool)) {
	fail := make([]bool, n)
	var place func(from, left int)
	place = func(from, left int) {
		if left == 0 {
			visit(fail)
			return
		}
		for i := from; i <= n-left; i++ {
			fail[i] = true
			place(i+1, left-1)
			fail[i] = false
		}
	}
	place(0, fails)
}

// joins counts fail-fail and pass-fail joins without the grid's machinery.
func joins(x, y []int32, fail []bool, n Neighbours) (ff, pf float64) {
	for i := range x {
		for j := range i {
			dx, dy := math.Abs(float64(x[i]-x[j])), math.Abs(float64(y[i]-y[j]))
			if n == Rook && dx+dy == 1 || n == Queen && max(dx, dy) == 1 || n > Queen && dx*dx+dy*dy <= float64(n) {
				if fail[i] && fail[j] {
					ff++
				} else if fail[i] != fail[j] {
					pf++
				}
			}
		}
	}
	return
}

// raggedMap is a small map with a hole, a die apart from the rest and no symmetry.
func raggedMap() (x, y []int32) {
	for _, p := range [][2]int32{{1, 0}, {2, 0}, {3, 0}, {0, 1}, {1, 1}, {3, 1}, {4, 1}, {0, 2}, {1, 2}, {2, 2}, {3, 2}, {2, 3}, {9, 9}} {
		x, y = append(x, p[0]), append(y, p[1])
	}
	return x, y
}

// The moments and exact tails must be those of the whole enumeration, which is
// their definition.
func TestJoinMomentsAreThoseOfAllPlacements(t *testing.T) {
	x, y := raggedMap()
	g := NewGrid(x, y)
	for _, n := range []Neighbours{Rook, Queen, Within(2)} {
		for fails := 1; fails < len(x); fails++ {
			var count, sumFF, sumFF2, sumFF3, sumPF, sumPF2 float64
			tail := map[float64]float64{}
			enumerate(len(x), fails, func(fail []bool) {
				ff, pf := joins(x, y, fail, n)
				count++
				sumFF, sumFF2, sumFF3 = sumFF+ff, sumFF2+ff*ff, sumFF3+ff*ff*ff
				sumPF, sumPF2 = sumPF+pf, sumPF2+pf*pf
				for k := 0.0; k <= ff; k++ {
					tail[k]++
				}
			})
			checked := map[float64]bool{}
			enumerate(len(x), fails, func(fail []bool) {
				ff, pf := joins(x, y, fail, n)
				if checked[ff] {
					return
				}
				checked[ff] = true
				c := g.JoinCount(fail, n)
				if c.FailFail != ff || c.PassFail != pf || c.FailFail+c.PassFail+c.PassPass != float64(c.Joins) {
					t.Fatalf("%v, %d fails: counts %+v, want %v and %v", n, fails, c, ff, pf)
				}
				close := func(what string, got, want, tolerance float64) {
					t.Helper()
					if !(math.Abs(got-want) <= tolerance) {
						t.Errorf("%v, %d fails, %v joins: %s = %v, want %v", n, fails, ff, what, got, want)
					}
				}
				close("expected FF", c.ExpectedFF, sumFF/count, 1e-12)
				close("variance FF", c.VarianceFF, sumFF2/count-sq(sumFF/count), 1e-10)
				close("expected PF", c.ExpectedPF, sumPF/count, 1e-12)
				close("variance PF", c.VariancePF, sumPF2/count-sq(sumPF/count), 1e-10)
				if m, v := sumFF/count, sumFF2/count-sq(sumFF/count); fails > 1 && v > 1e-9 {
					close("skewness FF", c.SkewnessFF, (sumFF3/count-3*m*v-m*m*m)/math.Pow(v, 1.5), 1e-8)
				}
				p := tail[ff] / count
				switch c.Method {
				case "exact":
					close("p", c.PFF, p, 1e-12)
				case "gamma, three moments": // as good as can be with so few dice
					close("p", c.PFF, p, 0.05)
				default: // standard errors of stopped random placements, and their floor
					close("p", c.PFF, p, 4.5*p*math.Sqrt((1-p)/enough)+0.002)
				}
			})
		}
	}
}

func TestJoinCountDoesNotSeeOrientation(t *testing.T) {
	x, y := disc(9)
	fail := scatter(len(x), 0.3, 5)
	for _, n := range []Neighbours{Rook, Queen} {
		want := NewGrid(x, y).JoinCount(fail, n)
		for i, move := range isometries {
			got := NewGrid(moved(x, y, move)).JoinCount(fail, n)
			// the random placements meet the dice in another order
			if math.Abs(got.PFF-want.PFF) > 0.05 {
				t.Errorf("%v, isometry %d: p %v, want about %v", n, i, got.PFF, want.PFF)
			}
			got.PFF, got.Method = want.PFF, want.Method
			if got != want {
				t.Errorf("%v, isometry %d: %+v, want %+v", n, i, got, want)
			}
		}
	}
}

func TestJoinCountDegenerate(t *testing.T) {
	x, y := disc(4)
	all, none, one := make([]bool, len(x)), make([]bool, len(x)), make([]bool, len(x))
	for i := range all {
		all[i] = true
	}
	one[7] = true
	for name, c := range map[string]JoinCount{
		"empty":     NewGrid(nil, nil).JoinCount(nil, Rook),
		"one die":   NewGrid(x[:1], y[:1]).JoinCount(all[:1], Rook),
		"three":     NewGrid(x[2:5], y[2:5]).JoinCount([]bool{true, true, false}, Queen),
		"all fail":  NewGrid(x, y).JoinCount(all, Queen),
		"all pass":  NewGrid(x, y).JoinCount(none, Queen),
		"apart":     NewGrid([]int32{0, 5, 10, 15, 20}, make([]int32, 5)).JoinCount([]bool{true, true, false, false, false}, Queen),
		"no places": NewGrid([]int32{Missing}, []int32{3}).JoinCount(all[:1], Queen),
	} {
		if c.Why == "" || !math.IsNaN(c.ZFF) || !math.IsNaN(c.PFF) || !math.IsNaN(c.ExpectedFF) {
			t.Errorf("%s: %+v, want no numbers and why", name, c)
		}
	}
	c := NewGrid(x, y).JoinCount(one, Queen)
	if c.PFF != 1 || c.Why == "" || c.FailFail != 0 || c.ExpectedFF != 0 {
		t.Errorf("one fail: %+v", c)
	}
	for i := range one {
		one[i] = i != 7
	}
	if c = NewGrid(x, y).JoinCount(one, Queen); c.Why != "" || !(c.PFF > 0 && c.PFF <= 1) {
		t.Errorf("one pass: %+v", c)
	}
}

// A block of fails must come out significant and scattered fails must not, whatever
// the method.
func TestJoinCountTellsBlocksFromScatter(t *testing.T) {
	for _, radius := range []float64{8, 30, 100} {
		x, y := disc(radius)
		for _, fails := range []int{3, 12, 60, 900} {
			if fails > len(x)/3 {
				continue
			}
			g := NewGrid(x, y)
			block := make([]bool, len(x))
			side := int(math.Ceil(math.Sqrt(float64(fails))))
			for k := range fails {
				block[g.Index(k%side-side/2, k/side-side/2)] = true
			}
			c := g.JoinCount(block, Queen)
			if !(c.PFF < 0.01) || !(c.ZFF > 4) {
				t.Errorf("radius %v, block of %d: z %v, p %v (%s)", radius, fails, c.ZFF, c.PFF, c.Method)
			}
		}
	}
}

// Under random placement p-values must be uniform: of 400 maps no more than
// about 1 % may have p < 0.01, for each method (11 is beyond 4 sigma of 4).
func TestJoinCountPValuesAreFair(t *testing.T) {
	x, y := disc(15)
	g := NewGrid(x, y)
	for _, rate := range []float64{0.004, 0.02, 0.08, 0.3, 0.9} {
		small, low := 0, 0
		for seed := range uint64(400) {
			c := g.JoinCount(scatter(len(x), rate, 100+seed), Queen)
			if c.PFF < 0.01 {
				small++
			}
			if c.PFF < 0.5 {
				low++
			}
		}
		if small > 11 || low > 250 {
			t.Errorf("rate %v: %d of 400 below 0.01, %d below 0.5", rate, small, low)
		}
	}
}

// Where the gamma tail is used it must agree with random placements: within a
// quarter down to p = 0.001, for few fails and for many.
func TestGammaTailAgainstRandomPlacements(t *testing.T) {
	for _, c := range []struct {
		radius float64
		n      Neighbours
		fails  int
	}{{12, Rook, 45}, {12, Queen, 30}, {12, Queen, 100}, {12, Queen, 340}, {12, Rook, 400}, {40, Queen, 100}, {40, Rook, 300}} {
		const draws = 20000
		x, y := disc(c.radius)
		g := NewGrid(x, y)
		start, near := g.adjacency(c.n)
		random := rand.New(rand.NewPCG(12, 34))
		deck := random.Perm(len(x))
		fail := make([]bool, len(x))
		counts := map[int]int{}
		for range draws {
			clear(fail)
			ff := 0
			for i := range c.fails {
				k := i + random.IntN(len(deck)-i)
				deck[i], deck[k] = deck[k], deck[i]
				fail[deck[i]] = true
				for _, q := range near[start[deck[i]]:start[deck[i]+1]] {
					if fail[q] {
						ff++
					}
				}
			}
			counts[ff]++
		}
		jc := g.JoinCount(fail, c.n)
		if jc.Method != "gamma, three moments" {
			t.Errorf("%+v: method %s", c, jc.Method)
		}
		tail := 0
		for ff := jc.Joins; ff >= 0; ff-- {
			tail += counts[ff]
			p := float64(tail) / draws
			if p < 0.001 || counts[ff] == 0 {
				continue
			}
			got := upperGamma((float64(ff)-0.5-jc.ExpectedFF)/math.Sqrt(jc.VarianceFF), jc.SkewnessFF)
			if math.Abs(got-p) > 0.25*p+3*math.Sqrt(p/draws) {
				t.Errorf("%+v, at least %d joins: gamma %.3g, placements %.3g", c, ff, got, p)
			}
		}
	}
}

// The gamma law must pass into the normal, and its mirror image mirror it.
func TestUpperGamma(t *testing.T) {
	for _, z := range []float64{-3, -1, 0, 0.5, 2, 4} {
		if got, want := upperGamma(z, 1.1e-3), upperNormal(z); math.Abs(got/want-1) > 0.02 {
			t.Errorf("z = %v, skewness 0.0011: %v, normal %v", z, got, want)
		}
		if got, want := upperGamma(z, -0.4), 1-upperGamma(-z, 0.4); math.Abs(got-want) > 1e-12 {
			t.Errorf("z = %v: mirrored %v, want %v", z, got, want)
		}
	}
	// skewness 2 is the exponential law: P(X >= z) = exp(-(z+1))
	if got := upperGamma(1.5, 2); math.Abs(got-math.Exp(-2.5)) > 1e-14 {
		t.Errorf("exponential: %v, want %v", got, math.Exp(-2.5))
	}
}
