package synth

import (
	"bytes"
	"encoding/json"
	"math"
	"os"
	"runtime"
	"slices"
	"strings"
	"sync"
	"testing"

	"gonum.org/v1/gonum/stat"

	"kneepoint/config"
)

func makerOf(t testing.TB, p *config.Product) *Maker {
	t.Helper()
	m, err := NewMaker(p)
	if err != nil {
		t.Fatal(err)
	}
	return m
}

// class20 is the maker of the 20 V class, whose variants of the device model take
// about a second each to build.
func class20(t testing.TB) *Maker {
	t.Helper()
	m, err := makerOfClass20()
	if err != nil {
		t.Fatal(err)
	}
	return m
}

var makerOfClass20 = sync.OnceValues(func() (*Maker, error) { return NewMaker(ClassProducts()[0]) })

func random(t testing.TB, m *Maker, o RandomOptions) *Made {
	t.Helper()
	made, err := m.Random(o)
	if err != nil {
		t.Fatal(err)
	}
	return made
}

// TestRandomSame: the same bytes on any number of cores, by a new maker and by one
// that made others before; other bytes with another seed.
func TestRandomSame(t *testing.T) {
	p := demoProduct(t)
	o := RandomOptions{Seed: 9, Wafers: 4, Dice: 150, Physics: "laws", Causes: []Wanted{{ID: "epi-doping"}, {ID: "handling-damage"}}}
	text := func(m *Maker, procs int, o RandomOptions) []byte {
		defer runtime.GOMAXPROCS(runtime.GOMAXPROCS(procs))
		var b bytes.Buffer
		made := random(t, m, o)
		if err := made.Generate().WriteWide(&b, Format{UnitRow: true, LimitRows: true}); err != nil {
			t.Fatal(err)
		}
		truth, err := json.Marshal(made.Truth())
		if err != nil {
			t.Fatal(err)
		}
		return append(b.Bytes(), truth...)
	}
	used := makerOf(t, p)
	random(t, used, RandomOptions{Seed: 1, Wafers: 2, Physics: "laws"})
	one := text(makerOf(t, p), 1, o)
	if !bytes.Equal(one, text(used, 3, o)) {
		t.Error("other bytes with more cores and a used maker")
	}
	// Both makers build the same variant of the device model, on any number of cores.
	o.Physics = "junction 1"
	if os.Getenv("KNEEPOINT_LONG") != "" && !bytes.Equal(text(makerOf(t, ClassProducts()[0]), 1, o), text(class20(t), 2, o)) {
		t.Error("other bytes by another maker's device model")
	}
	o.Physics, o.Seed = "laws", 10
	if bytes.Equal(one, text(used, 3, o)) {
		t.Error("the same bytes with another seed")
	}
}

// TestRandomKeepsBaseline: healthy lots of any product, drawn at random, have the
// baseline's yield, levels and spreads: what the file says of its healthy lots.
func TestRandomKeepsBaseline(t *testing.T) {
	for i, p := range append(ClassProducts(), demoProduct(t)) {
		m := makerOf(t, p)
		if i == 0 {
			m = class20(t)
		}
		const lots = 30
		n := len(p.Tests)
		medians, within := make([][]float64, n), make([]float64, n)
		yields := []float64{}
		for seed := range uint64(lots) {
			physics := "laws"
			if i == 0 && seed%2 == 1 {
				physics = "junction 1"
			}
			l := random(t, m, RandomOptions{Seed: 1000 + seed, Wafers: 8, Dice: 80, Physics: physics}).Generate()
			yields = append(yields, l.Yield())
			for t := range n {
				var v []float64
				for w := range l.Wafers {
					for _, row := range l.Wafers[w].Final() {
						if x := l.Wafers[w].Values[t][row]; l.Spec.PassBin(int(l.Wafers[w].HardBin[row])) && x == x {
							v = append(v, x)
						}
					}
				}
				mid, sd := robust(v)
				medians[t] = append(medians[t], mid)
				within[t] += sd * sd / lots
			}
		}
		if y := stat.Mean(yields, nil); math.Abs(y-p.Baseline.Yield) > 0.012 {
			t.Errorf("%s: mean yield %.3f, baseline %.3f", p.Name, y, p.Baseline.Yield)
		}
		for k, test := range p.Tests {
			b := p.Baseline.Tests[test.Name]
			mid, lot := stat.MeanStdDev(medians[k], nil)
			want, sigma, lotSigma := test.Unit.FromSI(b.Median), test.Unit.FromSI(b.Sigma), test.Unit.FromSI(b.LotSigma)
			// 30 lots know their mean to a fifth of the lots' spread, that spread to 13 %.
			if math.Abs(mid-want) > 0.7*lotSigma+0.05*sigma {
				t.Errorf("%s %s: mean of medians %.4g, baseline %.4g", p.Name, test.Name, mid, want)
			}
			if r := math.Sqrt(within[k]) / test.Unit.FromSI(b.WithinLotSigma); r < 0.7 || r > 1.35 {
				t.Errorf("%s %s: spread within lots %.2f of the baseline's", p.Name, test.Name, r)
			}
			if r := lot / lotSigma; r < 0.5 || r > 1.6 {
				t.Errorf("%s %s: spread between lots %.2f of the baseline's", p.Name, test.Name, r)
			}
		}
	}
}

// movedBy makes one lot with and without its cause, without defects and losses, the
// cause everywhere, and returns the median of ln(with/without) of each test.
func movedBy(t *testing.T, made *Made) map[string]float64 {
	s := made.Spec
	c := s.Causes[made.Causes[0].Number]
	c.Place, c.Places, c.Wafers, c.Sizes, c.Share, c.Leak = Place{}, nil, nil, nil, 0, 0
	s.Causes, s.Missing, s.Retest, s.Repeat, s.Wafers = []Cause{c}, 0, 0, 0, 1
	for i := range s.Tests {
		s.Tests[i].Resolution = 0
	}
	with := s.Generate(made.Seed)
	s.Causes = nil
	without := s.Generate(made.Seed)
	out := map[string]float64{}
	for i, test := range s.Tests {
		var d []float64
		for row, v := range with.Wafers[0].Values[i] {
			d = append(d, math.Log(v/without.Wafers[0].Values[i][row]))
		}
		slices.Sort(d)
		out[test.Name] = stat.Quantile(0.5, stat.LinInterp, d, nil)
	}
	return out
}

// TestSignatures of drawn lots: each cause of the process moves each test as the
// numerical reference model says (testdata/physics/signatures.json: natural log of
// test over nominal; sign and order of magnitude), on the classes that are like its
// devices A and B, by drawn laws and by a variant of the device model. Where the
// reference is still, so are the lots.
func TestRandomSignatures(t *testing.T) {
	var file struct {
		Devices map[string]map[string]map[string]float64 `json:"devices"`
	}
	data, err := os.ReadFile("../../testdata/physics/signatures.json")
	if err != nil {
		t.Fatal(err)
	}
	if err := json.Unmarshal(data, &file); err != nil {
		t.Fatal(err)
	}
	rows := map[string]Wanted{
		"epi 15 % thin":         {ID: "epi-thickness", Direction: "low", Size: 0.15},
		"epi 15 % thick":        {ID: "epi-thickness", Direction: "high", Size: 0.15},
		"epi doping +25 %":      {ID: "epi-doping", Direction: "high", Size: 0.25},
		"epi doping -20 %":      {ID: "epi-doping", Direction: "low", Size: 0.2},
		"base surface +25 %":    {ID: "base-profile", Direction: "high", Size: 0.25},
		"base 8 % deep":         {ID: "emitter-depth", Direction: "shallow", Variety: "base", Size: 0.08},
		"emitter 15 % deep":     {ID: "emitter-depth", Direction: "deep", Variety: "emitter", Size: 0.15},
		"emitter Gummel -30 %":  {ID: "emitter-efficiency", Direction: "low", Size: 0.3},
		"edge radius -30 %":     {ID: "edge-field", Variety: "all", Size: 0.3},
		"oxide charge x10":      {ID: "surface-charge", Variety: "charge", Size: 10},
		"lifetime /20":          {ID: "lifetime", Size: 20},
		"surface velocity x300": {ID: "surface-charge", Variety: "velocity", Size: math.Pow(300, 1/2.5)},
	}
	names := map[string]string{"BVCBO": "BVcbo", "BVCEO": "BVceo", "BVEBO": "BVebo", "ICBO": "Icbo", "HFE1": "hFE_low", "HFE2": "hFE",
		"VCESAT": "Vcesat", "COB": "Cob", "COB2": "Cob_hiV"}
	classes := ClassProducts()
	for device, p := range map[string]*config.Product{"A": classes[1], "B": classes[0]} {
		m := makerOf(t, p)
		if device == "B" {
			m = class20(t)
		}
		for row, want := range rows {
			ref := file.Devices[device][row]
			if len(ref) < 9 {
				t.Fatalf("no row %q of device %s", row, device)
			}
			for _, physics := range []string{"laws", "junction 1"} {
				if physics != "laws" && device == "A" && os.Getenv("KNEEPOINT_LONG") == "" {
					continue
				}
				made := random(t, m, RandomOptions{Seed: 4, Dice: 60, Physics: physics, Causes: []Wanted{want}})
				got := movedBy(t, made)
				for test, name := range names {
					g, r := got[test], ref[name]
					switch {
					// Drawn slopes lie up to twice as far from still, half as far from large.
					case math.Abs(r) > 0.06 && (g*r < 0 || math.Abs(g) < 0.4*math.Abs(r) || math.Abs(g) > 2.2*math.Abs(r)),
						math.Abs(r) <= 0.06 && math.Abs(g) > 0.08:
						t.Errorf("%s %s, %s: %s moves by %.3f, reference %.3f", p.Name, row, made.Physics, test, g, r)
					}
				}
			}
		}
	}
}

// TestOtherDirection: low and high, deep and shallow move every test opposite ways.
func TestOtherDirection(t *testing.T) {
	m := makerOf(t, ClassProducts()[0])
	for _, c := range []struct{ id, variety string }{{"epi-thickness", ""}, {"epi-doping", ""}, {"base-profile", ""},
		{"emitter-depth", "emitter"}, {"emitter-depth", "base"}, {"emitter-efficiency", ""}, {"test-setup", "temperature"}} {
		e := catalogue[slices.IndexFunc(catalogue, func(e Entry) bool { return e.ID == c.id })]
		size := 0.08
		if c.id == "test-setup" {
			size = 10
		}
		var got [2]map[string]float64
		for i, dir := range e.Directions {
			got[i] = movedBy(t, random(t, m, RandomOptions{Seed: 4, Dice: 60, Physics: "laws",
				Causes: []Wanted{{ID: c.id, Direction: dir, Variety: c.variety, Size: size}}}))
		}
		for test, a := range got[0] {
			if b := got[1][test]; math.Abs(a) > 0.01 && a*b > 0 {
				t.Errorf("%s: %s moves by %.3f and %.3f", c.id, test, a, b)
			}
		}
	}
}

// TestBareProducts: what a product file does not say is assumed and said, or is an
// error that names it.
func TestBareProducts(t *testing.T) {
	bare, err := config.ParseProduct("bare.yaml", []byte("product: P\ntests:\n  - {name: BVCEO, measures: bvceo, unit: V, lower: 30}\n  - {name: HFE, measures: hfe, lower: 50, upper: 200}\n  - {name: OTHER, lower: 2}\n"))
	if err != nil {
		t.Fatal(err)
	}
	m := makerOf(t, bare)
	made := random(t, m, RandomOptions{Seed: 2, Wafers: 3, Causes: []Wanted{{ID: "emitter-efficiency"}}})
	if len(m.Assumed) != 3 || made.Physics != "laws" || m.NoPhysics == "" {
		t.Errorf("assumed %q, by %s", m.Assumed, made.Physics)
	}
	if l := made.Generate(); l.Yield() < 0.4 || l.Dice() < 3*500 {
		t.Errorf("yield %.3f of %d", l.Yield(), l.Dice())
	}
	pnp, err := config.ParseProduct("pnp.yaml", []byte(strings.Replace(DemoProductYAML, "npn", "pnp", 1)))
	if err != nil {
		t.Fatal(err)
	}
	if _, err := NewMaker(pnp); err == nil || !strings.Contains(err.Error(), "pnp") {
		t.Errorf("pnp: error %v", err)
	}
}
