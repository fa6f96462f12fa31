package wafermap

import (
	"math"
	"math/rand/v2"
	"runtime"
	"testing"
)

// disc returns the dice within radius of (0, 0), by y, then x.
func disc(radius float64) (x, y []int32) {
	n := int32(radius)
	for j := -n; j <= n; j++ {
		for i := -n; i <= n; i++ {
			if math.Hypot(float64(i), float64(j)) <= radius {
				x, y = append(x, i), append(y, j)
			}
		}
	}
	return x, y
}

// scatter fails each die with probability p.
func scatter(n int, p float64, seed uint64) []bool {
	random := rand.New(rand.NewPCG(seed, 1))
	fail := make([]bool, n)
	for i := range fail {
		fail[i] = random.Float64() < p
	}
	return fail
}

// isometries are the eight rotations and reflections of the grid.
var isometries = []func(x, y int32) (int32, int32){
	func(x, y int32) (int32, int32) { return x, y },
	func(x, y int32) (int32, int32) { return -y, x },
	func(x, y int32) (int32, int32) { return -x, -y },
	func(x, y int32) (int32, int32) { return y, -x },
	func(x, y int32) (int32, int32) { return -x, y },
	func(x, y int32) (int32, int32) { return x, -y },
	func(x, y int32) (int32, int32) { return y, x },
	func(x, y int32) (int32, int32) { return -y, -x },
}

func moved(x, y []int32, move func(x, y int32) (int32, int32)) (mx, my []int32) {
	mx, my = make([]int32, len(x)), make([]int32, len(x))
	for i := range x {
		mx[i], my[i] = move(x[i], y[i])
	}
	return mx, my
}

func TestGridCountsWhatTakesNoPart(t *testing.T) {
	x := []int32{5, Missing, 7, 5, 6, 2}
	y := []int32{1, 1, Missing, 1, 1, 0}
	g := NewGrid(x, y)
	if g.Len() != 3 || g.Missing != 2 || g.Duplicates != 1 {
		t.Errorf("len %d, missing %d, duplicates %d; want 3, 2, 1", g.Len(), g.Missing, g.Duplicates)
	}
	if r := g.Index(5, 1); r != 3 {
		t.Errorf("position (5, 1) has row %d, want the last one, 3", r)
	}
	for _, p := range [][2]int{{0, 0}, {7, Missing}, {Missing, 1}, {1 << 40, 1}, {5, 1 << 33}} {
		if r := g.Index(p[0], p[1]); r != -1 {
			t.Errorf("position %v has row %d, want none", p, r)
		}
	}
	if a, b, c, d := g.Bounds(); a != 2 || b != 6 || c != 0 || d != 1 {
		t.Errorf("bounds %d %d %d %d", a, b, c, d)
	}
	if got := g.Rows(); len(got) != 3 || got[0] != 5 || got[1] != 3 || got[2] != 4 {
		t.Errorf("rows %v, want 5 3 4 (by y, then x)", got)
	}
}

func TestEmptyGrid(t *testing.T) {
	for _, v := range [][]int32{nil, {Missing, Missing}} {
		g := NewGrid(v, v)
		if g.Len() != 0 || g.Index(0, 0) != -1 || len(g.Clusters(make([]bool, len(v)), Queen, 1)) != 0 {
			t.Error("an empty grid holds dice")
		}
	}
}

func TestStrayCoordinatesCostNoMemory(t *testing.T) {
	x, y := disc(60)
	x = append(x, 2_000_000_000, -2_000_000_000, math.MaxInt32, 7)
	y = append(y, 3, -2_000_000_000, math.MaxInt32, math.MinInt32+1)
	var before, after runtime.MemStats
	runtime.ReadMemStats(&before)
	g := NewGrid(x, y)
	runtime.ReadMemStats(&after)
	if grown := after.TotalAlloc - before.TotalAlloc; grown > 4<<20 {
		t.Errorf("%d dice took %d bytes", len(x), grown)
	}
	if g.Len() != len(x) {
		t.Fatalf("%d of %d dice", g.Len(), len(x))
	}
	for i := range x {
		if r := g.Index(int(x[i]), int(y[i])); r != i {
			t.Fatalf("(%d, %d) has row %d, want %d", x[i], y[i], r, i)
		}
	}
	fail := make([]bool, len(x))
	for i := range fail {
		fail[i] = true
	}
	if c := g.JoinCount(fail, Queen); c.N != len(x) {
		t.Errorf("joins of %d dice", c.N)
	}
	if c := g.Clusters(fail, Rook, 1); len(c) != 5 || c[0].Dice != len(x)-4 {
		t.Errorf("%d clusters", len(c))
	}
}

// sparse returns the same grid with all dice in the hash table.
func sparse(g *Grid) *Grid {
	s := &Grid{Missing: g.Missing, Duplicates: g.Duplicates, x: g.x, y: g.y, ix: &index{}, order: g.order}
	for _, r := range g.order {
		s.ix.put(int(g.x[r]), int(g.y[r]), r)
	}
	return s
}

func TestDenseEqualsSparse(t *testing.T) {
	x, y := disc(20)
	g := NewGrid(x, y)
	s := sparse(g)
	for _, n := range []Neighbours{Rook, Queen} {
		fail := scatter(len(x), 0.2, 3)
		if a, b := g.JoinCount(fail, n), s.JoinCount(fail, n); a != b {
			t.Errorf("%v: dense %+v, sparse %+v", n, a, b)
		}
		a, ka := g.Labels(fail, n)
		b, kb := s.Labels(fail, n)
		if ka != kb {
			t.Fatalf("%d and %d groups", ka, kb)
		}
		for i := range a {
			if a[i] != b[i] {
				t.Fatalf("row %d: labels %d and %d", i, a[i], b[i])
			}
		}
	}
	// a thin random map goes through the hash table by itself
	random := rand.New(rand.NewPCG(8, 8))
	x, y = x[:0], y[:0]
	for range 500 {
		x, y = append(x, int32(random.IntN(1e9))), append(y, int32(random.IntN(1e9)))
	}
	if g := NewGrid(x, y); len(g.ix.table) != 0 || g.Len() != 500 {
		t.Errorf("table of %d cells for %d dice", len(g.ix.table), g.Len())
	}
}

func TestLengthMismatchPanics(t *testing.T) {
	x, y := disc(3)
	g := NewGrid(x, y)
	for name, call := range map[string]func(){
		"grid":     func() { NewGrid(x, y[1:]) },
		"joins":    func() { g.JoinCount(make([]bool, 2), Rook) },
		"labels":   func() { g.Labels(make([]bool, 2), Rook) },
		"values":   func() { g.Autocorrelation(make([]float64, 2), Rook, Binary) },
		"density":  func() { g.DensityClusters(make([]bool, 2), 1, 1, 1, 3) },
		"stack":    func() { NewStack().Add(x, y, make([]bool, 2)) },
		"zones":    func() { ZoneYields(Geometry{}, x, y, make([]bool, 2), 2, 2) },
		"geometry": func() { FindGeometry(x, y[1:], Known{}) },
		"paint":    func() { PaintStates(x, y, make([]uint8, 2), DefaultPalette, BoxOf(x, y)) },
		"colour":   func() { PaintStates(x[:1], y[:1], []uint8{200}, DefaultPalette, BoxOf(x, y)) },
		"rates":    func() { PaintRates(x, y, x, y[1:], BoxOf(x, y)) },
		"zernike":  func() { FitZernike(make([]float64, 2), make([]float64, 2), make([]float64, 1), 1, 1) },
	} {
		func() {
			defer func() {
				if recover() == nil {
					t.Errorf("%s: no panic", name)
				}
			}()
			call()
		}()
	}
}
