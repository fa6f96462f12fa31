package wafermap

import (
	"cmp"
	"fmt"
	"maps"
	"math"
	"math/rand/v2"
	"slices"
	"testing"
)

// found is one made pattern on a map: how plain it is, and what became of it.
type foundPattern struct {
	kind, called string
	z            float64
	about        string
}

// A generator makes wafers and patterns on them.
type generator struct {
	seed    uint64
	wafer   func(*rand.Rand) madeWafer
	pattern func(random *rand.Rand, m madeWafer, kind string) *madePattern
}

// judge draws the k-th map with one or two patterns of contrast 1.5 to 10, and judges what
// Signatures makes of it.
func (g generator) judge(k int) (patterns []foundPattern, extra int) {
	random := rand.New(rand.NewPCG(g.seed, uint64(k)))
	m := g.wafer(random)
	rate := madeRate(random)
	var made []*madePattern
	var contrast []float64
	many := 1 + random.IntN(2)
	for len(made) < many {
		kind := madeKinds[random.IntN(len(madeKinds))]
		if len(made) == 1 && made[0].kind == kind && !slices.Contains([]string{"line", "blob", "edge-arc"}, kind) {
			continue // a wafer has only one of these
		}
		if p := g.pattern(random, m, kind); p != nil {
			made = append(made, p)
			contrast = append(contrast, between(random, 1.5, math.Max(1.6, math.Min(10, 0.95/rate))))
		}
	}
	in := m.input(makeFails(random, len(m.x), rate, made, contrast, random.IntN(2) == 0))
	for _, p := range made {
		if p.given {
			in.ShotColumns, in.ShotRows = p.shot[0], p.shot[1]
		}
	}
	left := patterned(Signatures(in))
	take := func(p *madePattern, fits func(s Signature) bool) string {
		for i, s := range left {
			if fits(s) && p.lift(s) > 1.25 {
				left = slices.Delete(left, i, i+1)
				return s.Kind
			}
		}
		return ""
	}
	called := make([]string, len(made))
	for i, p := range made {
		called[i] = take(p, func(s Signature) bool { return s.Kind == p.kind })
	}
	for i, p := range made {
		if called[i] == "" {
			called[i] = take(p, func(s Signature) bool { return true })
		}
		patterns = append(patterns, foundPattern{p.kind, called[i], oracle(in.Fail, made, i),
			fmt.Sprintf("map %d, %d dice (%s), rate %.4f, contrast %.1f, %.0f dice", k, len(m.x), m.about, rate, contrast[i], p.area)})
	}
	for _, s := range left { // a pattern drawn in two parts may be found in two
		if !slices.ContainsFunc(made, func(p *madePattern) bool { return p.kind == s.Kind && p.parts > 1 && p.lift(s) > 1.25 }) {
			extra++
		}
	}
	return patterns, extra
}

// lift is how much more of a pattern is in a signature's dice than in all dice.
func (p *madePattern) lift(s Signature) float64 {
	sum := 0.0
	for _, r := range s.Dice {
		sum += p.weight[r]
	}
	return sum / float64(len(s.Dice)) / (p.area / float64(len(p.weight)))
}

// On made maps with one or two patterns, of those where a likelihood-ratio test that knows
// the pattern (and the other one) gives p < 1e-6, at least 95 % must be found and 95 % of
// the found ones be named rightly.
func TestMadePatternsAreFoundAndNamed(t *testing.T) {
	testPatterns(t, generator{20240502, makeWafer, makePattern})
}

func TestPlainPatternsAreFoundAndNamed(t *testing.T) {
	testPatterns(t, generator{20240503, makePlainWafer, makePlainPattern})
}

// zEdges are the edges of classes of z; a chi-squared value with one degree of freedom has p =
// 1e-6 at 4.892, from where patterns are plain.
var zEdges = [...]float64{0, 3, 4, 4.892, 6, 8, 12, 20, math.Inf(1)}

const plainClass = 3

type zCount struct{ made, found, named int }

type zRow [len(zEdges) - 1]zCount

// plain sums the classes of plain patterns.
func (r *zRow) plain() (s zCount) {
	for _, c := range r[plainClass:] {
		s.made, s.found, s.named = s.made+c.made, s.found+c.found, s.named+c.named
	}
	return s
}

// zTable counts made patterns by kind and class of z.
type zTable struct {
	rows     map[string]*zRow // "": of all kinds
	confused map[string]int   // plain patterns not named rightly
}

func (z zTable) add(t *testing.T, p foundPattern) {
	class := 0
	for p.z >= zEdges[class+1] {
		class++
	}
	for _, kind := range []string{p.kind, ""} {
		if z.rows[kind] == nil {
			z.rows[kind] = &zRow{}
		}
		c := &z.rows[kind][class]
		c.made++
		c.found += boolean(p.called != "")
		c.named += boolean(p.called == p.kind)
	}
	if class >= plainClass && p.called != p.kind {
		z.confused[p.kind+" -> "+cmp.Or(p.called, "nothing")]++
		t.Logf("%s, z %.1f: called %q (%s)", p.kind, p.z, p.called, p.about)
	}
}

func (z zTable) log(t *testing.T) {
	t.Log("made/found/named by z of the test that knows the pattern")
	line := fmt.Sprintf("%-12s", "")
	for class, from := range zEdges[:len(zEdges)-1] {
		line += fmt.Sprintf("%14s", fmt.Sprintf("%.3g to %.3g", from, zEdges[class+1]))
	}
	t.Log(line + "     p < 1e-6")
	for _, kind := range append(slices.Clone(madeKinds), "") {
		row := z.rows[kind]
		if row == nil {
			continue
		}
		line := fmt.Sprintf("%-12s", cmp.Or(kind, "all"))
		for _, c := range row {
			line += fmt.Sprintf("%14s", fmt.Sprintf("%d/%d/%d", c.made, c.found, c.named))
		}
		s := row.plain()
		t.Logf("%s %5d, found %.1f %%, named %.1f %%", line, s.made, 100*float64(s.found)/float64(max(1, s.made)), 100*float64(s.named)/float64(max(1, s.found)))
	}
	pairs := slices.SortedFunc(maps.Keys(z.confused), func(a, b string) int {
		return cmp.Or(cmp.Compare(z.confused[b], z.confused[a]), cmp.Compare(a, b))
	})
	for _, pair := range pairs {
		t.Logf("%4d %s", z.confused[pair], pair)
	}
}

func testPatterns(t *testing.T, g generator) {
	n := manyMaps()
	all := make([][]foundPattern, n)
	extras := make([]int, n)
	eachMap(n, func(k int) { all[k], extras[k] = g.judge(k) })
	table := zTable{map[string]*zRow{}, map[string]int{}}
	extra := 0
	for k, patterns := range all {
		extra += boolean(extras[k] > 0)
		for _, p := range patterns {
			table.add(t, p)
		}
	}
	table.log(t)
	t.Logf("%d of %d maps (%.1f %%) get a signature that was not made", extra, n, 100*float64(extra)/float64(n))
	s := table.rows[""].plain()
	slack := 3 * math.Sqrt(0.05*0.95/float64(s.made)) * float64(boolean(n < 1000)) // few maps
	if got := float64(s.found) / float64(s.made); got < 0.95-slack {
		t.Errorf("%.1f %% of plain patterns found", 100*got)
	}
	if got := float64(s.named) / float64(s.found); got < 0.95-slack {
		t.Errorf("%.1f %% of found patterns named rightly", 100*got)
	}
	if got := float64(extra) / float64(n); got > 0.05+slack {
		t.Errorf("%.1f %% of maps get a signature that was not made", 100*got)
	}
}
