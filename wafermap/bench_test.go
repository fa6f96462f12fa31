package wafermap

import (
	"math"
	"testing"
)

// The wafer of the benchmarks: about 88,000 dice, as 0.45 mm dice on 150 mm.
func benchWafer(b *testing.B, rate float64) (g *Grid, x, y []int32, fail []bool) {
	b.Helper()
	x, y = disc(167.5)
	return NewGrid(x, y), x, y, scatter(len(x), rate, 9)
}

func BenchmarkNewGrid(b *testing.B) {
	_, x, y, _ := benchWafer(b, 0)
	b.ReportAllocs()
	for b.Loop() {
		NewGrid(x, y)
	}
	b.ReportMetric(float64(len(x)), "dice")
}

func benchmarkJoins(b *testing.B, rate float64, clustered int) {
	g, _, _, fail := benchWafer(b, rate)
	for k := range clustered { // makes the test go the whole way
		fail[g.Index(k%10, k/10)] = true
	}
	var method string
	for b.Loop() {
		method = g.JoinCount(fail, Queen).Method
	}
	b.Log(method)
}

func BenchmarkJoinCountHealthy(b *testing.B)   { benchmarkJoins(b, 0.05, 0) }
func BenchmarkJoinCountFewFails(b *testing.B)  { benchmarkJoins(b, 0.005, 0) }
func BenchmarkJoinCountSmallBlob(b *testing.B) { benchmarkJoins(b, 0.005, 60) }

func BenchmarkClusters(b *testing.B) {
	g, _, _, fail := benchWafer(b, 0.1)
	for b.Loop() {
		g.Clusters(fail, Queen, 3)
	}
}

func BenchmarkDensityClusters(b *testing.B) {
	g, _, _, fail := benchWafer(b, 0.1)
	for b.Loop() {
		g.DensityClusters(fail, 2.5, 1, 1, 6)
	}
}

func BenchmarkAutocorrelation(b *testing.B) {
	g, x, _, _ := benchWafer(b, 0)
	value := make([]float64, len(x))
	for i := range value {
		value[i] = float64(i*7919%1000) / 100
	}
	for b.Loop() {
		g.Autocorrelation(value, Queen, Binary)
	}
}

func BenchmarkFitZernike15(b *testing.B) {
	_, x, y, _ := benchWafer(b, 0)
	mx, my, value := make([]float64, len(x)), make([]float64, len(x)), make([]float64, len(x))
	for i := range value {
		mx[i], my[i], value[i] = float64(x[i]), float64(y[i]), float64(i*7919%1000)
	}
	b.ReportAllocs()
	for b.Loop() {
		FitZernike(mx, my, value, 167.5, 15)
	}
}

// A lot of 25 such wafers: 2.2 million coordinates.
func benchLot(b *testing.B) (x, y []int32) {
	_, wx, wy, _ := benchWafer(b, 0)
	for range 25 {
		x, y = append(x, wx...), append(y, wy...)
	}
	return x, y
}

func BenchmarkFindGeometryLot(b *testing.B) {
	x, y := benchLot(b)
	known := Known{DiameterMM: 156, DieWidthMM: 0.45, DieHeightMM: 0.45, EdgeExclusionMM: 3}
	b.ReportAllocs()
	for b.Loop() {
		FindGeometry(x, y, known)
	}
}

func BenchmarkFindGeometryNothingKnown(b *testing.B) {
	_, x, y, _ := benchWafer(b, 0)
	for b.Loop() {
		FindGeometry(x, y, Known{})
	}
}

func BenchmarkZoneYieldsLot(b *testing.B) {
	x, y := benchLot(b)
	pass := make([]bool, len(x))
	g := FindGeometry(x, y, Known{})
	for b.Loop() {
		ZoneYields(g, x, y, pass, 5, 8)
	}
}

func BenchmarkStackLot(b *testing.B) {
	_, x, y, fail := benchWafer(b, 0.1)
	b.ReportAllocs()
	for b.Loop() {
		s := NewStack()
		for range 25 {
			s.Add(x, y, fail)
		}
	}
}

func BenchmarkPaintStates(b *testing.B) {
	_, x, y, fail := benchWafer(b, 0.1)
	state := make([]uint8, len(x))
	for i := range state {
		state[i] = StatePass
		if fail[i] {
			state[i] = StateFail
		}
	}
	box := BoxOf(x, y)
	size := 0
	for b.Loop() {
		p, _ := PaintStates(x, y, state, DefaultPalette, box)
		size = len(p.PNG)
	}
	b.ReportMetric(float64(size), "PNG-bytes")
}

// hurt is the wafer of the benchmarks with an edge ring, a blob and a scratch.
func hurt(b *testing.B) SignatureInput {
	b.Helper()
	g, x, y, fail := benchWafer(b, 0.05)
	often, seldom := scatter(len(x), 0.6, 10), scatter(len(x), 0.12, 11)
	for i := range x {
		u, v := float64(x[i])/167.5, float64(y[i])/167.5
		near := (u-0.4)*(u-0.4)+(v+0.3)*(v+0.3) < 0.02 || math.Abs(v-0.5*u-0.3) < 0.008 && u > -0.5 && u < 0.4
		if near && often[i] || u*u+v*v > 0.88 && seldom[i] {
			fail[i] = true
		}
	}
	geometry := FindGeometry(x, y, Known{DiameterMM: 156, DieWidthMM: 0.45, DieHeightMM: 0.45, EdgeExclusionMM: 3})
	return SignatureInput{Grid: g, Geometry: geometry, Fail: fail}
}

func BenchmarkSignaturesRandom(b *testing.B) {
	g, x, y, fail := benchWafer(b, 0.05)
	in := SignatureInput{Grid: g, Geometry: FindGeometry(x, y, Known{}), Fail: fail}
	b.ReportAllocs()
	for b.Loop() {
		Signatures(in)
	}
}

func BenchmarkSignaturesThree(b *testing.B) {
	in := hurt(b)
	var found []Signature
	b.ReportAllocs()
	for b.Loop() {
		found = Signatures(in)
	}
	for _, s := range found {
		b.Log(s.Kind)
	}
}
