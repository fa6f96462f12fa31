package causes

import (
	"math"
	"testing"

	"gonum.org/v1/gonum/mat"
)

// TestWhite: white and back of a density are the inverse of its covariance, as gonum
// inverts it.
func TestWhite(t *testing.T) {
	f := &frame{correlation: mat.NewDense(3, 3, []float64{1, 0.4, -0.2, 0.4, 1, 0.3, -0.2, 0.3, 1})}
	sigma := []float64{0.02, 0.1, 0.5}
	d := f.newDensity(sigma, nil, nil)
	s := mat.NewDense(3, 3, nil)
	for i := range 3 {
		for j := range 3 {
			s.Set(i, j, f.correlation.At(i, j)*sigma[i]*sigma[j])
		}
	}
	var inverse mat.Dense
	if err := inverse.Inverse(s); err != nil {
		t.Fatal(err)
	}
	v := []float64{0.01, -0.2, 0.3}
	got := d.back(d.white(v))
	for i := range got {
		want := 0.0
		for j := range v {
			want += inverse.At(i, j) * v[j]
		}
		if math.Abs(got[i]-want) > 1e-9*math.Abs(want) {
			t.Errorf("test %d: %v, want %v", i, got[i], want)
		}
	}
}

// TestMoveBetween: between two sizes of the grid a move is the mean of theirs, at 0 none,
// beyond the last it goes on.
func TestMoveBetween(t *testing.T) {
	l := &levelCause{at: []float64{0, 2, 6}, moves: [][]float64{{0, 0}, {-0.1, 0.05}, {-0.5, 0.05}}}
	for _, c := range []struct {
		size float64
		want [2]float64
	}{{0, [2]float64{0, 0}}, {1, [2]float64{-0.05, 0.025}}, {2, [2]float64{-0.1, 0.05}}, {4, [2]float64{-0.3, 0.05}}, {8, [2]float64{-0.7, 0.05}}} {
		got := l.move(c.size)
		if math.Abs(got[0]-c.want[0]) > 1e-12 || math.Abs(got[1]-c.want[1]) > 1e-12 {
			t.Errorf("size %v: %v, want %v", c.size, got, c.want)
		}
	}
}

// TestSolve fits the smooth size to a surface of its own form.
func TestSolve(t *testing.T) {
	want := [sizeTerms]float64{3, -1, 0.5, 2, 0.25, -0.75, 1.5}
	var normal [sizeTerms][sizeTerms]float64
	var right [sizeTerms]float64
	for i := range 21 {
		for j := range 21 {
			x, y := float64(i-10)/10, float64(j-10)/10
			terms, v := smoothTerms(x, y), 0.0
			for a := range terms {
				v += want[a] * terms[a]
			}
			for a := range terms {
				for b := range terms {
					normal[a][b] += terms[a] * terms[b]
				}
				right[a] += terms[a] * v
			}
		}
	}
	got, ok := solve(&normal, &right)
	if !ok {
		t.Fatal("no solution")
	}
	for a := range got {
		if math.Abs(got[a]-want[a]) > 1e-5 {
			t.Errorf("term %d: %v, want %v", a, got[a], want[a])
		}
	}
}

// TestSentences says what moved, what should have and did not, and what went the other
// way.
func TestSentences(t *testing.T) {
	for _, c := range []struct {
		seen, expected float64
		want           string
	}{
		{0.001, 0.05, "BV of 2 wafers reads 0.1 % above the typical wafer (+0.1 sigma): it should have moved and did not, to 5.1 % above it (+5.0 sigma)"},
		{-0.04, 0.05, "BV of 2 wafers reads 3.9 % below the typical wafer (-4.0 sigma): the other way than expected, 5.1 % above it (+5.0 sigma)"},
		{0.04, 0.05, "BV of 2 wafers reads 4.1 % above the typical wafer (+4.0 sigma); expected are 5.1 % above it (+5.0 sigma)"},
		{1.5, 0, "BV of 2 wafers reads 4.48 times the typical wafer (+150.0 sigma): this cause would leave it where it is"},
		{0.002, 0, "BV of 2 wafers reads 0.2 % above the typical wafer (+0.2 sigma): still, as it should be"},
	} {
		if got := moveSentence("BV", c.seen, c.expected, 0.01, "2 wafers", "the typical wafer"); got != c.want {
			t.Errorf("%s\nwant %s", got, c.want)
		}
	}
}
