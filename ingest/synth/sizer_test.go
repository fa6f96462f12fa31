package synth

import (
	"math"
	"slices"
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"
)

// TestLosses: sized causes cost what was asked, on the whole lot and by its own
// truth; CauseTruth is Truth's row.
func TestLosses(t *testing.T) {
	m := makerOf(t, demoProduct(t))
	n, inside, reached := 0, 0, 0
	for i, e := range catalogue {
		for k := range uint64(2) {
			made := random(t, m, RandomOptions{Seed: uint64(i)*10 + k, Wafers: 10, Dice: 200, Physics: "laws", Causes: []Wanted{{ID: e.ID}}})
			l := made.Generate()
			got := l.CauseTruth(made.Causes[0].Number)
			n++
			if made.Causes[0].Reached {
				reached++
				if got.Loss > 0.015 && got.Loss < 0.5 {
					inside++
				} else {
					t.Logf("%s %s: loss %.3f", e.ID, made.Causes[0].Variety, got.Loss)
				}
			} else if made.Causes[0].Note == "" {
				t.Errorf("%s: not reached, and no note", e.ID)
			}
			if k == 0 {
				all := made.Spec.Truth(made.Seed)
				if diff := cmp.Diff(all.Causes[len(all.Causes)-1], got); diff != "" {
					t.Errorf("%s: Truth (-), CauseTruth (+):\n%s", e.ID, diff)
				}
			}
		}
	}
	if float64(inside) < 0.9*float64(reached) || float64(reached) < 0.75*float64(n) {
		t.Errorf("of %d causes %d are said to reach their loss, %d do", n, reached, inside)
	}
}

// TestHitsAreBinomial: the dice that a damage hits are as many as chance and place
// say, within four standard deviations of a binomial sum.
func TestHitsAreBinomial(t *testing.T) {
	m := makerOf(t, demoProduct(t))
	for i, e := range catalogue {
		for _, v := range Varieties(e.ID) {
			made := random(t, m, RandomOptions{Seed: uint64(i), Wafers: 12, Dice: 300, Physics: "laws", Causes: []Wanted{{ID: e.ID, Variety: v}}})
			number := made.Causes[0].Number
			c := &made.Spec.Causes[number]
			if c.Share == 0 {
				continue
			}
			f := newFab(&made.Spec, made.Seed)
			mean, variance, hits := 0.0, 0.0, 0
			for w := range made.Spec.Wafers {
				size := c.size(made.Seed, number, w)
				for j := range f.dice {
					p := min(c.Share*c.place(w).strength(&f.dice[j])*size, 1)
					mean += p
					variance += p * (1 - p)
				}
				if size != 0 {
					hits += f.hits(number, w)
				}
			}
			if math.Abs(float64(hits)-mean) > 4*math.Sqrt(variance)+1 {
				t.Errorf("%s %s: %d dice hit, want %.1f +- %.1f", e.ID, v, hits, mean, math.Sqrt(variance))
			}
		}
	}
}

// TestDamage: on the dice that a cause hits, the tests that it should change do, and
// the others stay as they are: a pipe lets BVcbo alone, a bad contact passes breakdown
// and leakage and fails gain, wrecked dice fail many tests, back-side resistance is in
// Vcesat alone (design of the causes' catalogue; common practice, no source).
func TestDamage(t *testing.T) {
	m := makerOf(t, demoProduct(t))
	for _, c := range []struct {
		id, variety    string
		change, still  string // tests that must on most hit dice, that must not on any
		least, hardest float64
	}{
		{"emitter-collector-pipe", "random", "BVCEO", "BVCBO BVEBO ICBO VCESAT COB COB30", 0.95, 0},
		{"emitter-collector-pipe", "slip", "BVCEO", "BVCBO BVEBO ICBO VCESAT COB COB30", 0.95, 0},
		{"probe-contact", "site", "BVCBO BVCEO BVEBO ICBO HFE1 HFE2 VCESAT COB", "", 0.99, 1},
		{"probe-contact", "burst", "BVCBO BVCEO BVEBO ICBO HFE1 HFE2 VCESAT COB", "", 0.99, 1},
		{"probe-contact", "resistance", "VCESAT", "BVCBO BVCEO BVEBO ICBO HFE1 HFE2 COB COB30", 0.9, 0},
		{"series-resistance", "wafer", "VCESAT", "BVCBO BVCEO BVEBO ICBO HFE1 HFE2 COB COB30", 0.9, 0},
		{"series-resistance", "pattern", "VCESAT", "BVCBO BVCEO BVEBO ICBO HFE1 HFE2 COB COB30", 0.3, 0},
		{"handling-damage", "scratch", "HFE2 VCESAT", "", 0.4, 0},
		{"edge-dice", "ring", "HFE2", "", 0.9, 0},
	} {
		made := random(t, m, RandomOptions{Seed: 5, Wafers: 6, Dice: 200, Physics: "laws", Causes: []Wanted{{ID: c.id, Variety: c.variety, AllWafers: true}}})
		number := made.Causes[0].Number
		s := made.Spec
		s.Missing, s.Retest, s.Repeat = 0, 0, 0
		for i := range number {
			s.Causes[i].Off = true
		}
		with := s.Generate(made.Seed)
		without := s.without(func(*Cause) bool { return true }).Generate(made.Seed)
		f := newFab(&s, made.Seed)
		hit, changed := 0, map[string]int{}
		for w := range with.Wafers {
			d := f.newDie(w)
			for row := range with.Wafers[w].Dice {
				d.at = &f.dice[row]
				d.key = dieKey(f.seed, w, d.at.x, d.at.y)
				if len(d.causes) > 0 && d.hit(&d.causes[0]) > 0.1 {
					hit++
				}
				for i, test := range s.Tests {
					if with.Wafers[w].Values[i][row] != without.Wafers[w].Values[i][row] {
						changed[test.Name]++
					}
				}
			}
		}
		for _, name := range strings.Fields(c.change) {
			if float64(changed[name]) < c.least*float64(hit) {
				t.Errorf("%s %s: %s changes on %d of %d dice hit", c.id, c.variety, name, changed[name], hit)
			}
		}
		for _, name := range strings.Fields(c.still) {
			if changed[name] > 0 {
				t.Errorf("%s %s: %s changes on %d dice", c.id, c.variety, name, changed[name])
			}
		}
		if c.hardest > 0 && with.Yield() > 1-0.95*float64(hit)/float64(with.Dice()) {
			t.Errorf("%s %s: yield %.3f with %d of %d dice hit", c.id, c.variety, with.Yield(), hit, with.Dice())
		}
	}
}

// TestTester: what a tester does wrong shows on the affected wafers alone, in the
// tests it concerns alone (design of the causes' catalogue; doubling of leakage each
// 10 K or so is common practice, no source).
func TestTester(t *testing.T) {
	m := makerOf(t, demoProduct(t))
	lots := func(variety string) (made *Made, with, without *Lot) {
		made = random(t, m, RandomOptions{Seed: 12, Wafers: 4, Dice: 120, Physics: "laws",
			Causes: []Wanted{{ID: "test-setup", Variety: variety, Wafers: []int{2, 3}}}})
		s := made.Spec
		s.Missing, s.Retest = 0, 0
		off := s.without(func(c *Cause) bool { return !c.Background })
		return made, s.Generate(made.Seed), off.Generate(made.Seed)
	}
	for _, v := range Varieties("test-setup") {
		made, with, without := lots(v)
		c := made.Spec.Causes[made.Causes[0].Number]
		changed := map[string]bool{}
		for w := range with.Wafers {
			a, b := &with.Wafers[w], &without.Wafers[w]
			for i, test := range made.Spec.Tests {
				for row := range a.Dice {
					if x, y := a.Values[i][row], b.Values[i][row]; x != y {
						changed[test.Name] = true
						if w < 2 {
							t.Fatalf("%s: wafer %s changed, where it does not act", v, a.ID)
						}
					}
				}
			}
		}
		for i, test := range made.Spec.Tests {
			named := slices.ContainsFunc(c.Faults, func(f Fault) bool { return f.Test == test.Name })
			if v != "temperature" && changed[test.Name] && !named {
				t.Errorf("%s: %s changed, which no fault names", v, test.Name)
			}
			if !named {
				continue
			}
			for row, x := range with.Wafers[3].Values[i][:with.Wafers[3].Dice] {
				f := c.Faults[slices.IndexFunc(c.Faults, func(f Fault) bool { return f.Test == test.Name })]
				if f.Top > 0 && x > f.Top+test.Resolution {
					t.Errorf("%s: %s reads %v above its range %v", v, test.Name, x, f.Top)
				}
				if y := without.Wafers[3].Values[i][row]; f.WrongLower+f.WrongUpper > 0 && x != y {
					t.Errorf("%s: a limit changed the reading %v to %v", v, y, x)
				}
			}
		}
		if v == "limit" {
			if slices.Equal(with.Wafers[3].HardBin, without.Wafers[3].HardBin) || !slices.Equal(with.Wafers[0].HardBin, without.Wafers[0].HardBin) {
				t.Error("a wrong limit must change bins, on its wafers alone")
			}
		}
		if v == "crossed" {
			ceo, cbo, above := made.Spec.test("BVCEO"), made.Spec.test("BVCBO"), 0
			w := &with.Wafers[2]
			for row := range w.Dice {
				if w.Values[ceo][row] > w.Values[cbo][row] {
					above++
				}
			}
			if above < w.Dice*8/10 {
				t.Errorf("BVceo above BVcbo on %d of %d dice", above, w.Dice)
			}
		}
	}
	got := movedBy(t, random(t, m, RandomOptions{Seed: 12, Dice: 60, Physics: "laws", Causes: []Wanted{{ID: "test-setup", Direction: "hot", Size: 20}}}))
	if got["ICBO"] < 20.0/12*math.Ln2 || got["ICBO"] > 20.0/8*math.Ln2 || got["HFE2"] < 0.05 || math.Abs(got["COB"]) > 0.01 {
		t.Errorf("20 K hot moves ICBO by %.2f, HFE2 by %.3f, COB by %.3f", got["ICBO"], got["HFE2"], got["COB"])
	}
}
