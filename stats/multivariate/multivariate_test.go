package multivariate_test

import (
	"math"
	"math/rand/v2"
	"slices"
	"strings"
	"testing"

	"kneepoint/stats/multivariate"
)

var nan = math.NaN()

func columns(seed uint64, n int) [][]float64 {
	r := rand.New(rand.NewPCG(seed, 7))
	c := make([][]float64, 3)
	for range n {
		u, v := r.NormFloat64(), r.NormFloat64()
		c[0] = append(c[0], 42+0.9*u)
		c[1] = append(c[1], 1e-9*(3+0.4*u+0.3*v))
		c[2] = append(c[2], 120-9*u+8*v+5*r.NormFloat64())
	}
	return c
}

// Components turn the columns into uncorrelated scores with the eigenvalues as
// variances, whatever the units.
func TestComponentsDecorrelate(t *testing.T) {
	c := columns(1, 500)
	keep := slices.Clone(c[1])
	p := multivariate.Components(c)
	var sum [3][3]float64
	for i := range c[0] {
		s := p.Score([]float64{c[0][i], c[1][i], c[2][i]})
		for a := range s {
			for b := range s {
				sum[a][b] += s[a] * s[b] / float64(p.N-1)
			}
		}
	}
	for a := range sum {
		for b := range sum {
			want := 0.0
			if a == b {
				want = p.Eigenvalues[a]
			}
			if math.Abs(sum[a][b]-want) > 1e-10 {
				t.Errorf("scores %d, %d: %v, want %v", a, b, sum[a][b], want)
			}
		}
	}
	if total := p.Eigenvalues[0] + p.Eigenvalues[1] + p.Eigenvalues[2]; math.Abs(total-3) > 1e-12 || !slices.Equal(keep, c[1]) {
		t.Errorf("eigenvalues add up to %v", total)
	}
}

// Distances do not change under shifts, scales and mixtures of columns; they add up
// to (n-1) times the number of columns; the exact limit is passed by its share of
// rows at any n.
func TestMahalanobisLaws(t *testing.T) {
	c := columns(2, 60)
	c[2][7] = nan
	d := multivariate.Mahalanobis(c)
	mixed := make([][]float64, 3)
	sum := 0.0
	for i := range c[0] {
		mixed[0] = append(mixed[0], 1e6*c[0][i]-5)
		mixed[1] = append(mixed[1], c[1][i]*1e9+c[2][i])
		mixed[2] = append(mixed[2], c[2][i]-3*c[0][i])
		if d.D2[i] == d.D2[i] {
			sum += d.D2[i]
		}
	}
	e := multivariate.Mahalanobis(mixed)
	for i := range d.D2 {
		if i == 7 {
			if !math.IsNaN(d.D2[i]) {
				t.Error("a distance from a missing value")
			}
		} else if math.Abs(d.D2[i]-e.D2[i]) > 1e-7*d.D2[i] {
			t.Errorf("row %d: %v, mixed %v", i, d.D2[i], e.D2[i])
		}
	}
	if d.N != 59 || d.Skipped != 1 || math.Abs(sum-58*3) > 1e-9 {
		t.Errorf("n %d, sum %v", d.N, sum)
	}
	beyond, rows := 0, 0
	for s := range uint64(2000) {
		d := multivariate.Mahalanobis(columns(100+s, 10))
		limit := d.ExactLimit(0.9)
		for _, v := range d.D2 {
			rows++
			if v > limit {
				beyond++
			}
		}
	}
	if share := float64(beyond) / float64(rows); math.Abs(share-0.1) > 0.01 {
		t.Errorf("%.4f beyond the 90 %% limit of ten rows", share)
	}
}

// A table of effects with a fifth of its cells spoilt: the effects come back.
func TestMedianPolishStandsOutliers(t *testing.T) {
	r := rand.New(rand.NewPCG(4, 1))
	row, col := []float64{-2, -1, 0, 1, 2, 0, 0}, []float64{-3, 0, 3, 0, 1, -1, 0}
	table := make([][]float64, len(row))
	for i := range table {
		for j := range col {
			v := 50 + row[i] + col[j]
			if (i+j)%5 == 0 {
				v += 100 * r.Float64()
			}
			table[i] = append(table[i], v)
		}
	}
	table[0][0] = nan
	keep := table[3][4]
	p := multivariate.MedianPolish(table, 1e-12, 100)
	if !p.Converged || math.Abs(p.Overall-50) > 1e-9 {
		t.Errorf("%+v", p)
	}
	for i := range row {
		for j := range col {
			if sum := p.Overall + p.Row[i] + p.Column[j] + p.Residual[i][j]; table[i][j] == table[i][j] && math.Abs(sum-table[i][j]) > 1e-9 {
				t.Errorf("cell %d, %d: parts add up to %v, not %v", i, j, sum, table[i][j])
			}
			if math.Abs(p.Row[i]-row[i]) > 1e-9 || math.Abs(p.Column[j]-col[j]) > 1e-9 {
				t.Fatalf("rows %v, columns %v", p.Row, p.Column)
			}
		}
	}
	if table[3][4] != keep {
		t.Error("the table was modified")
	}
	if p := multivariate.MedianPolish(nil, 0.01, 10); p.Overall != 0 {
		t.Errorf("%+v", p)
	}
	if p := multivariate.MedianPolish([][]float64{{nan, 3}, {nan, 5}}, 0.01, 10); p.Column[0] != p.Column[0] || p.Overall+p.Row[1]+p.Column[1] != 5 {
		t.Errorf("%+v", p)
	}
}

func TestDegenerate(t *testing.T) {
	twice := [][]float64{{1, 2, 3, 4}, {2, 4, 6, 8}}
	for _, c := range []struct {
		columns [][]float64
		why     string
	}{
		{nil, "no columns"},
		{[][]float64{{1, nan}, {2, 3}}, "1 complete rows"},
		{[][]float64{{1, 2, 3, 4}, {5, 5, 5, 5}}, "column 1 does not vary"},
	} {
		p, d := multivariate.Components(c.columns), multivariate.Mahalanobis(c.columns)
		if p.Why != c.why || !strings.HasPrefix(d.Why, c.why) || p.Eigenvalues != nil {
			t.Errorf("%v: %q, %q", c.columns, p.Why, d.Why)
		}
	}
	if d := multivariate.Mahalanobis(twice); d.Why != "a column follows from others" || !math.IsNaN(d.D2[0]) {
		t.Errorf("%+v", d)
	}
	if p := multivariate.Components(twice); math.Abs(p.Eigenvalues[0]-2) > 1e-12 || p.Loadings[0][0] < 0.7 {
		t.Errorf("%+v", p)
	}
	for _, f := range []func(){
		func() { multivariate.Components([][]float64{{1}, {1, 2}}) },
		func() { multivariate.Mahalanobis([][]float64{{1}, {1, 2}}) },
		func() { multivariate.MedianPolish([][]float64{{1}, {1, 2}}, 0, 1) },
		func() { multivariate.Components(twice).Score([]float64{1}) },
	} {
		func() {
			defer func() {
				if s, ok := recover().(string); !ok || !strings.HasPrefix(s, "stats/multivariate: ") {
					t.Errorf("recovered %v", s)
				}
			}()
			f()
		}()
	}
}
