package synth

import (
	"fmt"
	"math"
	"runtime"
	"slices"
	"sync"
	"sync/atomic"
)

// Generate makes the lot. The same spec and seed give the same lot on any
// number of cores. It panics on a spec that makes no sense (no tests, a die
// larger than the wafer): specs are written by programs, not by users.
func (s Spec) Generate(seed uint64) *Lot {
	l := &Lot{ID: s.Lot, Product: s.Product, Spec: s, Seed: seed, Wafers: make([]Wafer, s.Wafers)}
	f := newFab(&l.Spec, seed)
	parallel(s.Wafers, func(i int) { l.Wafers[i] = f.wafer(i) })
	return l
}

// parallel calls do for 0..n-1 on all cores.
func parallel(n int, do func(i int)) {
	var next atomic.Int64
	var wg sync.WaitGroup
	for range min(runtime.GOMAXPROCS(0), n) {
		wg.Go(func() {
			for i := int(next.Add(1)) - 1; i < n; i = int(next.Add(1)) - 1 {
				do(i)
			}
		})
	}
	wg.Wait()
}

// fab is a spec made ready: what is the same for all wafers.
type fab struct {
	spec    *Spec
	seed    uint64
	dice    []place
	model   *model // for the geometry, and for readings without Physics
	forward forward
	faults  [][]int     // by cause: the test of each of its faults
	lot     Process     // lot level
	names   []uint64    // of the tests, as keys
	offset  [][]float64 // [site-1][test], share of the value
	scale   []float64   // power of ten at which a reading is a whole number, 0 for none
	grade   int         // index of the grade test, -1 without
}

func newFab(s *Spec, seed uint64) *fab {
	if len(s.Tests) == 0 {
		panic("synth: spec without tests")
	}
	f := &fab{spec: s, seed: seed, model: newModel(s), grade: -1, forward: s.forward()}
	f.dice, _, _ = s.Grid.layout()
	for i := range f.dice {
		f.dice[i].bowl = s.Smooth.bowl(f.dice[i].r)
	}
	sites := max(s.Grid.SiteColumns, 1) * max(s.Grid.SiteRows, 1)
	f.offset = make([][]float64, sites)
	for i := range f.offset {
		f.offset[i] = make([]float64, len(s.Tests))
	}
	for q := range f.lot {
		f.lot[q] = s.Spread[q].Lot * root(seed).at(branchLot).at(uint64(q)).normal()
	}
	for t, test := range s.Tests {
		f.names = append(f.names, nameKey(test.Name))
		scale := 0.0
		if d := Decimals(test.Resolution); d >= 0 {
			scale = math.Pow10(d)
		}
		f.scale = append(f.scale, scale)
		for site := range f.offset {
			k := root(seed).at(branchSite).at(uint64(site)).at(f.names[t])
			f.offset[site][t] = test.SiteOffset * k.normal()
		}
		if test.Name == s.GradeTest {
			f.grade = t
		}
	}
	f.faults = f.faultTests()
	if len(s.Grades) > 0 && f.grade < 0 {
		panic(fmt.Sprintf("synth: grade test %q is not in the program", s.GradeTest))
	}
	return f
}

// faultTests finds the tests of each cause's faults.
func (f *fab) faultTests() [][]int {
	out := make([][]int, len(f.spec.Causes))
	for i := range f.spec.Causes {
		for _, fault := range f.spec.Causes[i].Faults {
			t := f.spec.test(fault.Test)
			if t < 0 {
				panic(fmt.Sprintf("synth: fault of test %q, which is not in the program", fault.Test))
			}
			out[i] = append(out[i], t)
		}
	}
	return out
}

// test finds a test by name, -1 when absent.
func (s *Spec) test(name string) int {
	return slices.IndexFunc(s.Tests, func(t Test) bool { return t.Name == name })
}

// forward is what gives readings for the spec's program.
func (s *Spec) forward() forward {
	if s.Physics != nil {
		return s.Physics.bind(s.Tests)
	}
	return newModel(s)
}

// bowlMiddle is about the mean r^2 of the whole dice inside a usual edge
// exclusion. It is fixed, so that a die does not depend on how many others there
// are.
const bowlMiddle = 0.43

// smooth is one latent on one wafer: level and the shape within.
type smooth struct {
	level, bowl, tiltX, tiltY float64
	saddle                    [2]float64
}

// bowl is the bowl's height at r, its mean over a wafer about 0.
func (s *Smooth) bowl(r float64) float64 {
	if s.Power == 0 || s.Power == 2 {
		return r*r - bowlMiddle
	}
	return math.Pow(r, s.Power) - 2*math.Pow(2*bowlMiddle, s.Power/2)/(s.Power+2)
}

func (f *fab) smooth(wafer, q int) smooth {
	s := f.spec.Spread[q]
	k := root(f.seed).at(branchWafer).at(uint64(wafer)).at(uint64(q))
	sm := smooth{
		level: f.lot[q] + s.Wafer*k.at(0).normal(),
		bowl:  s.MeanBowl + s.Bowl*k.at(1).normal(),
		tiltX: s.Tilt * k.at(2).normal(),
		tiltY: s.Tilt * k.at(3).normal(),
	}
	if depth := f.spec.Smooth.Saddle * s.Bowl; depth != 0 {
		sm.saddle = [2]float64{depth * k.at(4).normal(), depth * k.at(5).normal()}
	}
	return sm
}

func (f *fab) wafer(i int) Wafer {
	s, n := f.spec, len(f.dice)
	w := Wafer{
		ID: fmt.Sprintf("%02d", i+1), Dice: n,
		X: make([]int32, n), Y: make([]int32, n), Site: make([]int32, n), Touchdown: make([]int32, n),
		HardBin: make([]int32, n), SoftBin: make([]int32, n), Values: make([][]float64, len(s.Tests)),
	}
	if i < len(s.History) {
		w.History = s.History[i]
	}
	for t := range w.Values {
		w.Values[t] = make([]float64, n)
	}
	if s.KeepProcess {
		w.Process = make([][]float64, NumLatents)
		for q := range w.Process {
			w.Process[q] = make([]float64, n)
		}
	}
	d := f.newDie(i)
	for j := range f.dice {
		d.take(&f.dice[j])
		d.measure(0)
		w.X[j], w.Y[j], w.Site[j], w.Touchdown[j] = d.at.x, d.at.y, d.at.site, d.at.touchdown
		w.HardBin[j], w.SoftBin[j] = d.hard, d.soft
		for t, v := range d.reading {
			w.Values[t][j] = v
		}
		for q := range w.Process {
			w.Process[q][j] = d.process[q]
		}
		w.Epi.ThicknessUM += s.Device.EpiThicknessUM * math.Exp(d.process[EpiThickness])
		w.Epi.NetThicknessUM += f.model.net(&d.process) * 1e4
		w.Epi.DopingCM3 += f.model.n0 * math.Exp(d.process[EpiDoping])
	}
	w.Epi.ThicknessUM /= float64(n)
	w.Epi.NetThicknessUM /= float64(n)
	w.Epi.DopingCM3 /= float64(n)
	f.retest(&w, d)
	return w
}

// retest measures some dice once more at the wafer's end, in the order of
// test, one die a touchdown.
func (f *fab) retest(w *Wafer, d *die) {
	s := f.spec
	if s.Retest <= 0 && s.Repeat <= 0 {
		return
	}
	touch := f.dice[len(f.dice)-1].touchdown
	for j := range w.Dice {
		share := s.Retest
		if s.PassBin(int(w.HardBin[j])) {
			share = s.Repeat
		}
		if dieKey(f.seed, d.wafer, w.X[j], w.Y[j]).at(dieRetest).uniform() >= share {
			continue
		}
		d.take(&f.dice[j])
		d.measure(1)
		touch++
		w.X, w.Y = append(w.X, d.at.x), append(w.Y, d.at.y)
		w.Site, w.Touchdown = append(w.Site, d.at.site), append(w.Touchdown, touch)
		w.HardBin, w.SoftBin = append(w.HardBin, d.hard), append(w.SoftBin, d.soft)
		for t, v := range d.reading {
			w.Values[t] = append(w.Values[t], v)
		}
		w.RetestOf = append(w.RetestOf, int32(j))
	}
}
