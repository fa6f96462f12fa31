package wafermap

import (
	"math"
	"testing"
)

// permute visits all orders of v.
func permute(v []float64, visit func([]float64)) {
	var rest func(k int)
	rest = func(k int) {
		if k == len(v) {
			visit(v)
			return
		}
		for i := k; i < len(v); i++ {
			v[k], v[i] = v[i], v[k]
			rest(k + 1)
			v[k], v[i] = v[i], v[k]
		}
	}
	rest(0)
}

// The moments under randomisation are those of all 40,320 orders of the values.
func TestAutocorrelationMomentsAreThoseOfAllOrders(t *testing.T) {
	x := []int32{0, 1, 2, 0, 1, 2, 1, 2}
	y := []int32{0, 0, 0, 1, 1, 2, 3, 3}
	g := NewGrid(x, y)
	for _, n := range []Neighbours{Rook, Queen, Within(2.3)} {
		for _, w := range []Weights{Binary, RowStandardised} {
			value := []float64{1, 2.5, 3, -4, 8, 0.3, 0.1, 5}
			a := g.Autocorrelation(value, n, w)
			var count, i1, i2, c1, c2 float64
			permute(value, func(v []float64) {
				b := g.Autocorrelation(v, n, w)
				count++
				i1 += b.Moran.Value
				i2 += sq(b.Moran.Value)
				c1 += b.Geary.Value
				c2 += sq(b.Geary.Value)
			})
			for what, pair := range map[string][2]float64{
				"E(I)": {a.Moran.Expected, i1 / count}, "Var(I)": {a.Moran.Variance, i2/count - sq(i1/count)},
				"E(C)": {a.Geary.Expected, c1 / count}, "Var(C)": {a.Geary.Variance, c2/count - sq(c1/count)},
			} {
				if math.Abs(pair[0]-pair[1]) > 1e-9 {
					t.Errorf("%v, weights %d: %s = %v, all orders %v", n, w, what, pair[0], pair[1])
				}
			}
		}
	}
}

func TestAutocorrelationLaws(t *testing.T) {
	x, y := disc(8)
	value := make([]float64, len(x))
	for i := range value {
		value[i] = float64(x[i]) + 0.3*float64(y[i]*y[i]) + float64(i*7919%13)
	}
	g := NewGrid(x, y)
	near := func(what string, got, want Moment) {
		t.Helper()
		if math.Abs(got.Value-want.Value) > 1e-10 || math.Abs(got.Z-want.Z) > 1e-8 {
			t.Errorf("%s: %+v, want %+v", what, got, want)
		}
	}
	want := g.Autocorrelation(value, Queen, Binary)
	if !(want.Moran.Z > 4) || !(want.Geary.Z > 4) {
		t.Errorf("a smooth map: z %v and %v", want.Moran.Z, want.Geary.Z)
	}
	scaled := make([]float64, len(value))
	for i := range value {
		scaled[i] = 1e6 - 12*value[i]
	}
	got := g.Autocorrelation(scaled, Queen, Binary)
	near("scaled I", got.Moran, want.Moran)
	near("scaled C", got.Geary, want.Geary)
	for _, move := range isometries {
		got := NewGrid(moved(x, y, move)).Autocorrelation(value, Queen, Binary)
		near("turned I", got.Moran, want.Moran)
		near("turned C", got.Geary, want.Geary)
	}
	// NaN dice are not there
	var sx, sy []int32
	var sv []float64
	for i := range value {
		if i%5 == 0 {
			value[i] = math.NaN()
		} else {
			sx, sy, sv = append(sx, x[i]), append(sy, y[i]), append(sv, value[i])
		}
	}
	value[5] = math.Inf(1)
	a, b := g.Autocorrelation(value, Rook, RowStandardised), NewGrid(sx, sy).Autocorrelation(sv, Rook, RowStandardised)
	if a.N != b.N || a.Links != b.Links {
		t.Errorf("%d dice and %d links, want %d and %d", a.N, a.Links, b.N, b.Links)
	}
	near("with holes I", a.Moran, b.Moran)
	near("with holes C", a.Geary, b.Geary)
}

func TestAutocorrelationDegenerate(t *testing.T) {
	x, y := disc(3)
	constant := make([]float64, len(x))
	for i := range constant {
		constant[i] = 0.1
	}
	missing := make([]float64, len(x))
	for i := range missing {
		missing[i] = math.NaN()
	}
	for name, a := range map[string]Autocorrelation{
		"empty":    NewGrid(nil, nil).Autocorrelation(nil, Rook, Binary),
		"three":    NewGrid(x[:3], y[:3]).Autocorrelation([]float64{1, 2, 3}, Rook, Binary),
		"constant": NewGrid(x, y).Autocorrelation(constant, Queen, Binary),
		"missing":  NewGrid(x, y).Autocorrelation(missing, Queen, Binary),
		"apart":    NewGrid([]int32{0, 2, 4, 6}, make([]int32, 4)).Autocorrelation([]float64{1, 2, 3, 5}, Queen, RowStandardised),
	} {
		if a.Why == "" || !math.IsNaN(a.Moran.Value) || !math.IsNaN(a.Geary.Z) || !math.IsNaN(a.MoranNormality.P) {
			t.Errorf("%s: %+v", name, a)
		}
	}
}
