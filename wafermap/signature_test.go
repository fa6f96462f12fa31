package wafermap

import (
	"cmp"
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"runtime"
	"slices"
	"strconv"
	"sync"
	"testing"
)

// manyMaps is how many maps each of the tests below makes: 4,000 with KNEEPOINT_LONG=1, as many
// as it says when it is a larger number.
func manyMaps() int {
	switch n, _ := strconv.Atoi(os.Getenv("KNEEPOINT_LONG")); {
	case n > 1:
		return n
	case n == 1:
		return 4000
	}
	return 120
}

// eachMap runs work on maps 0 to n-1 on all cores; results must go to a place of their own.
func eachMap(n int, work func(k int)) {
	var group sync.WaitGroup
	next := make(chan int)
	for range runtime.GOMAXPROCS(0) {
		group.Add(1)
		go func() {
			defer group.Done()
			for k := range next {
				work(k)
			}
		}()
	}
	for k := range n {
		next <- k
	}
	close(next)
	group.Wait()
}

// madeRate is a fail rate from 0.2 % to 40 %, half of them drawn evenly and half evenly in
// the logarithm.
func madeRate(random *rand.Rand) float64 {
	if random.IntN(2) == 0 {
		return between(random, 0.002, 0.4)
	}
	return 0.002 * math.Exp(random.Float64()*math.Log(200))
}

func (m madeWafer) input(fail []bool) SignatureInput {
	return SignatureInput{Grid: NewGrid(m.x, m.y), Geometry: m.geo, Fail: fail, Site: m.site, Order: m.order}
}

func patterned(list []Signature) (out []Signature) {
	for _, s := range list {
		if s.Kind != "random" && s.Kind != "none" {
			out = append(out, s)
		}
	}
	return out
}

// On random maps at most 2 % may get any signature but random, or none where hardly a die
// fails.
func TestRandomMapsAreCalledRandom(t *testing.T) {
	n := manyMaps()
	type outcome struct {
		text  string
		fails int
		kind  string
		p     float64
	}
	out := make([]outcome, n)
	eachMap(n, func(k int) {
		random := rand.New(rand.NewPCG(20240501, uint64(k)))
		m := makeWafer(random)
		rate := madeRate(random)
		if k%4 == 0 { // some with what a lot brings
			m.geo = FindGeometry(m.x, m.y, Known{})
		}
		in := m.input(makeFails(random, len(m.x), rate, nil, nil, false))
		if k%3 == 0 {
			in.ShotColumns, in.ShotRows = 2+random.IntN(10), 2+random.IntN(10)
		}
		got := Signatures(in)
		o := outcome{kind: got[0].Kind, p: got[0].PValue}
		for _, f := range in.Fail {
			if f {
				o.fails++
			}
		}
		if found := patterned(got); len(found) > 0 {
			o.text = fmt.Sprintf("map %d, %d dice (%s), %d fails: %s", k, len(m.x), m.about, o.fails, found[0].Kind)
		}
		out[k] = o
	})
	alarms, low := 0, 0
	kinds := map[string]int{}
	for _, o := range out {
		if o.text != "" {
			t.Log(o.text)
			alarms++
			kinds[o.kind]++
		} else if o.fails >= judgedFails != (o.kind == "random") {
			t.Errorf("%d fails without pattern are called %s", o.fails, o.kind)
		}
		if o.p <= 0.1 {
			low++
		}
	}
	t.Logf("%d of %d random maps get a signature (%.2f %%): %v; the p-value is 0.1 or less on %.1f %%", alarms, n, 100*float64(alarms)/float64(n), kinds, 100*float64(low)/float64(n))
	// 2 %, with three standard errors for few maps
	if limit := 0.02 * float64(n); float64(alarms) > limit+3*math.Sqrt(limit)*float64(boolean(n < 1000)) {
		t.Errorf("%d of %d random maps get a signature", alarms, n)
	}
}

func boolean(b bool) int {
	if b {
		return 1
	}
	return 0
}

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

func testPatterns(t *testing.T, g generator) {
	n := manyMaps()
	all := make([][]foundPattern, n)
	extras := make([]int, n)
	eachMap(n, func(k int) { all[k], extras[k] = g.judge(k) })

	edges := []float64{0, 3, 4, 4.892, 6, 8, 12, 20, math.Inf(1)} // z; chi-squared with one degree of freedom gives 1e-6 at 4.892
	const plain = 3
	type tally struct{ made, found, named int }
	table := map[string]*[8]tally{}
	total := [8]tally{}
	confused := map[string]int{}
	extra := 0
	for k, patterns := range all {
		extra += boolean(extras[k] > 0)
		for _, p := range patterns {
			bin := 0
			for p.z >= edges[bin+1] {
				bin++
			}
			row := table[p.kind]
			if row == nil {
				row = &[8]tally{}
				table[p.kind] = row
			}
			for _, c := range []*tally{&row[bin], &total[bin]} {
				c.made++
				c.found += boolean(p.called != "")
				c.named += boolean(p.called == p.kind)
			}
			if bin >= plain && p.called != p.kind {
				confused[p.kind+" -> "+cmp.Or(p.called, "nothing")]++
				if testing.Verbose() {
					t.Logf("%s, z %.1f: called %q (%s)", p.kind, p.z, p.called, p.about)
				}
			}
		}
	}
	sum := func(row *[8]tally) (s tally) {
		for _, c := range row[plain:] {
			s.made, s.found, s.named = s.made+c.made, s.found+c.found, s.named+c.named
		}
		return s
	}
	t.Log("made/found/named by z of the test that knows the pattern")
	line := fmt.Sprintf("%-12s", "")
	for b := range total {
		line += fmt.Sprintf("%14s", fmt.Sprintf("%.3g to %.3g", edges[b], edges[b+1]))
	}
	t.Log(line + "     p < 1e-6")
	for _, kind := range append(slices.Clone(madeKinds), "") {
		row := table[kind]
		if kind == "" {
			row = &total
		} else if row == nil {
			continue
		}
		line := fmt.Sprintf("%-12s", cmp.Or(kind, "all"))
		for _, c := range row {
			line += fmt.Sprintf("%14s", fmt.Sprintf("%d/%d/%d", c.made, c.found, c.named))
		}
		s := sum(row)
		t.Logf("%s %5d, found %.1f %%, named %.1f %%", line, s.made, 100*float64(s.found)/float64(max(1, s.made)), 100*float64(s.named)/float64(max(1, s.found)))
	}
	var pairs []string
	for pair := range confused {
		pairs = append(pairs, pair)
	}
	slices.SortFunc(pairs, func(a, b string) int {
		return cmp.Or(cmp.Compare(confused[b], confused[a]), cmp.Compare(a, b))
	})
	for _, pair := range pairs {
		t.Logf("%4d %s", confused[pair], pair)
	}
	t.Logf("%d of %d maps (%.1f %%) get a signature that was not made", extra, n, 100*float64(extra)/float64(n))
	s := sum(&total)
	slack := 2 * math.Sqrt(0.05*0.95/float64(s.made)) * float64(boolean(n < 1000))
	if got := float64(s.found) / float64(s.made); got < 0.95-slack {
		t.Errorf("%.1f %% of plain patterns found", 100*got)
	}
	if got := float64(s.named) / float64(s.found); got < 0.95-slack {
		t.Errorf("%.1f %% of found patterns named rightly", 100*got)
	}
	if got := float64(extra) / float64(n); got > 0.05 {
		t.Errorf("%.1f %% of maps get a signature that was not made", 100*got)
	}
}
