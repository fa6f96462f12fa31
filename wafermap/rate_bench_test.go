package wafermap

import (
	"runtime"
	"sync"
	"testing"
)

// rateWafer is a wafer of 88,000 dice with an edge ring, a blob and a scratch among 5 % of
// scattered fails, and a test's values on it: a bowl, a tilt and noise.
type rateWafer struct {
	x, y  []int32
	fail  []bool
	value []float64
	state []uint8
	geo   Geometry
}

func newRateWafer(b *testing.B) rateWafer {
	in := hurt(b)
	x, y := disc(167.5)
	w := rateWafer{x: x, y: y, fail: in.Fail, geo: in.Geometry, value: make([]float64, len(x)), state: make([]uint8, len(x))}
	for i := range x {
		u, v := float64(x[i])/167.5, float64(y[i])/167.5
		noise := float64(i*7919%10007)/10007 + float64(i*104729%10009)/10009 + float64(i*1299709%10037)/10037
		w.value[i] = 40 + 2*(u*u+v*v) + 0.5*u + noise
		w.state[i] = StatePass
		if w.fail[i] {
			w.state[i] = StateFail
		}
	}
	return w
}

// analyses are what a report needs of each wafer, all but the scan's random placements.
var analyses = []struct {
	name string
	run  func(w rateWafer, g *Grid)
}{
	{"Grid", func(w rateWafer, g *Grid) { NewGrid(w.x, w.y) }},
	{"Zones", func(w rateWafer, g *Grid) { ZoneYields(w.geo, w.x, w.y, w.fail, 5, 8) }},
	{"Joins", func(w rateWafer, g *Grid) { g.JoinCount(w.fail, Queen) }},
	{"MoranGeary", func(w rateWafer, g *Grid) { g.Autocorrelation(w.value, Queen, Binary) }},
	{"Components", func(w rateWafer, g *Grid) { g.Clusters(w.fail, Queen, 3) }},
	{"DensityClusters", func(w rateWafer, g *Grid) { g.DensityClusters(w.fail, 2.5, 1, 1, 6) }},
	{"FailSpots", func(w rateWafer, g *Grid) { g.FailSpots(w.fail, Queen, 0.05) }},
	{"LocalMoran", func(w rateWafer, g *Grid) { g.LocalMoran(w.value, Queen, 0.05) }},
	{"Surface", func(w rateWafer, g *Grid) { NewSurfaceBasis(w.geo, w.x, w.y).Fit(w.value, nil) }},
	{"Signatures", func(w rateWafer, g *Grid) {
		Signatures(SignatureInput{Grid: g, Geometry: w.geo, Fail: w.fail})
	}},
	{"Picture", func(w rateWafer, g *Grid) { PaintStates(w.x, w.y, w.state, DefaultPalette, BoxOf(w.x, w.y)) }},
}

func (w rateWafer) analyse() {
	g := NewGrid(w.x, w.y)
	for _, a := range analyses[1:] {
		a.run(w, g)
	}
}

// BenchmarkAnalyses shows each analysis by itself.
func BenchmarkAnalyses(b *testing.B) {
	w := newRateWafer(b)
	g := NewGrid(w.x, w.y)
	for _, a := range analyses {
		b.Run(a.name, func(b *testing.B) {
			b.ReportAllocs()
			for b.Loop() {
				a.run(w, g)
			}
		})
	}
}

// BenchmarkWafer is all analyses of a wafer: 0.25 s on one core is the limit (run it with
// -cpu 1).
func BenchmarkWafer(b *testing.B) {
	w := newRateWafer(b)
	for b.Loop() {
		w.analyse()
	}
	b.ReportMetric(float64(len(w.x)), "dice")
}

// BenchmarkLotOf25 is all analyses of 25 such wafers: 4 s on two cores is the limit (run
// it with -cpu 2).
func BenchmarkLotOf25(b *testing.B) {
	w := newRateWafer(b)
	for b.Loop() {
		var group sync.WaitGroup
		wafers := make(chan int)
		for range runtime.GOMAXPROCS(0) {
			group.Add(1)
			go func() {
				defer group.Done()
				for range wafers {
					w.analyse()
				}
			}()
		}
		for k := range 25 {
			wafers <- k
		}
		close(wafers)
		group.Wait()
	}
}
