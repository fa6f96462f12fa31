package variance_test

import (
	"math"
	"math/rand/v2"
	"slices"
	"strings"
	"testing"

	"gonum.org/v1/gonum/mat"
	"kneepoint/stats/variance"
)

var nan = math.NaN()

// dense is the restricted log-likelihood straight from its definition, with the
// readings' covariance as a matrix:
//
//	-1/2 ((n-p) log 2 pi + log|V| + log|X'V^-1X| + r'V^-1r)
func dense(levels []variance.Level, y []float64, tau []float64, columns [][]float64, reml bool) float64 {
	n := len(y)
	v := mat.NewSymDense(n, nil)
	for i := range n {
		for j := i; j < n; j++ {
			c := 0.0
			same := true
			for k, l := range levels {
				same = same && l.Code[i] == l.Code[j]
				if same {
					c += tau[k]
				}
			}
			if i == j {
				c += tau[len(levels)]
			}
			v.SetSym(i, j, c)
		}
	}
	p := 1 + len(columns)
	x := mat.NewDense(n, p, nil)
	for i := range n {
		x.Set(i, 0, 1)
		for k := range columns {
			x.Set(i, k+1, columns[k][i])
		}
	}
	var chol, small mat.Cholesky
	chol.Factorize(v)
	var vx, vy, xvx, b, r mat.Dense
	yy := mat.NewDense(n, 1, slices.Clone(y))
	chol.SolveTo(&vx, x)
	chol.SolveTo(&vy, yy)
	xvx.Mul(x.T(), &vx)
	sym := mat.NewSymDense(p, nil)
	for i := range p {
		for j := i; j < p; j++ {
			sym.SetSym(i, j, xvx.At(i, j))
		}
	}
	small.Factorize(sym)
	var xvy mat.Dense
	xvy.Mul(x.T(), &vy)
	small.SolveTo(&b, &xvy)
	var fitted mat.Dense
	fitted.Mul(x, &b)
	r.Sub(yy, &fitted)
	var vr, q mat.Dense
	chol.SolveTo(&vr, &r)
	q.Mul(r.T(), &vr)
	nn := float64(n)
	ll := chol.LogDet() + q.At(0, 0)
	if reml {
		nn -= float64(p)
		ll += small.LogDet()
	}
	return -0.5 * (nn*math.Log(2*math.Pi) + ll)
}

// The likelihood at the fit agrees with dense matrices, and nothing nearby is
// better: three levels, uneven, with and without a pattern.
func TestAgainstDenseMatrices(t *testing.T) {
	r := rand.New(rand.NewPCG(5, 6))
	for range 4 {
		levels := []variance.Level{{Name: "lot"}, {Name: "wafer"}, {Name: "zone"}}
		var y []float64
		for l := range int32(4) {
			a := r.NormFloat64()
			for w := range int32(2 + r.IntN(3)) {
				b := a + r.NormFloat64()
				for z := range int32(3) {
					c := b + 0.7*r.NormFloat64() + 0.8*float64(z)
					for range 1 + r.IntN(4) {
						levels[0].Code, levels[1].Code, levels[2].Code = append(levels[0].Code, l), append(levels[1].Code, w), append(levels[2].Code, z)
						y = append(y, 1000*(10+c+0.5*r.NormFloat64()))
					}
				}
			}
		}
		columns := make([][]float64, 2)
		for k := range columns {
			for _, z := range levels[2].Code {
				x := 0.0
				if int(z) == k+1 {
					x = 1
				}
				columns[k] = append(columns[k], x)
			}
		}
		for _, pattern := range []bool{false, true} {
			levels[2].Repeats = pattern
			var cols [][]float64
			if pattern {
				cols = columns
			}
			for _, reml := range []bool{true, false} {
				d := variance.New(levels, y)
				f := d.ML(0.95)
				if reml {
					f = d.REML(0.95)
				}
				var tau []float64
				for _, c := range f.Components {
					if !c.Pattern {
						tau = append(tau, c.Variance.Estimate)
					}
				}
				best := dense(levels, y, tau, cols, reml)
				if math.Abs(best-f.LogLik) > 1e-9*math.Abs(best) {
					t.Fatalf("pattern %v, REML %v: log-likelihood %v, by matrices %v", pattern, reml, f.LogLik, best)
				}
				for k := range tau {
					for _, step := range []float64{0.99, 1.01} {
						moved := slices.Clone(tau)
						moved[k] = moved[k]*step + (step-0.99)*1e3
						if ll := dense(levels, y, moved, cols, reml); ll > best+1e-9 {
							t.Errorf("pattern %v, REML %v: better at %v than at %v", pattern, reml, moved, tau)
						}
					}
				}
				// A limit is where the profile has fallen by half of chi-square's quantile;
				// with the others at their fit it has fallen at least as far.
				iv := f.Components[0].Variance
				moved := slices.Clone(tau)
				moved[0] = iv.Upper
				if fall := best - dense(levels, y, moved, cols, reml); fall < 3.8414588/2-1e-6 {
					t.Errorf("fall at the upper limit of lots: %v", fall)
				}
			}
		}
	}
}

// Two levels of a lot with one level of wafers only: sums of squares and
// intervals of a balanced one-way layout from their textbook formulas.
func TestOneWay(t *testing.T) {
	// Snedecor and Cochran 1989, Statistical Methods, 8th ed., table 13.3.1 (from
	// memory): calcium in four turnip leaves, four determinations each. Printed:
	// between leaves mean square 0.2961, within 0.0066; components 0.0724, 0.0066.
	y := []float64{3.28, 3.09, 3.03, 3.03, 3.52, 3.48, 3.38, 3.38, 2.88, 2.80, 2.81, 2.76, 3.34, 3.38, 3.23, 3.26}
	leaf := make([]int32, len(y))
	for i := range leaf {
		leaf[i] = int32(i / 4)
	}
	d := variance.New([]variance.Level{{Name: "leaf", Code: leaf}}, y)
	rows := d.ANOVA(0.95)
	if math.Abs(rows[0].MS-0.2961) > 5e-5 || math.Abs(rows[1].MS-0.0066) > 5e-5 || math.Abs(rows[0].Variance.Estimate-0.0724) > 5e-5 {
		t.Errorf("%+v", rows)
	}
	f := d.REML(0.95)
	if got := f.Components[0].Variance.Estimate; math.Abs(got/rows[0].Variance.Estimate-1) > 1e-8 {
		t.Errorf("REML %v, moments %v", got, rows[0].Variance.Estimate)
	}
	if f.Components[0].DF > 3.0001 || f.Components[0].DF < 2.5 {
		t.Errorf("worth %v degrees of freedom, of 3", f.Components[0].DF)
	}
}

// What a design cannot tell apart has no number, and the rest is as without it.
func TestAliasedLevels(t *testing.T) {
	r := rand.New(rand.NewPCG(3, 3))
	levels, y := nested(r, []int{6}, func(_, _ int) int { return 8 }, 0, 1, 1)
	one := variance.New(levels, y).REML(0.95)
	wafers := variance.New(levels[1:], y).REML(0.95)
	if c := one.Components[0]; !math.IsNaN(c.Variance.Estimate) || c.Variance.Why != "one lot only" {
		t.Errorf("%+v", c)
	}
	for i := range wafers.Components {
		if got, want := one.Components[i+1].Variance, wafers.Components[i].Variance; math.Abs(got.Estimate/want.Estimate-1) > 1e-9 || math.Abs(got.Upper/want.Upper-1) > 1e-5 {
			t.Errorf("%+v, without the lot %+v", got, want)
		}
	}
	rows := variance.New(levels, y).ANOVA(0.95)
	if !math.IsNaN(rows[0].Variance.Estimate) || rows[0].Variance.Why != "one lot only" || math.IsNaN(rows[1].Variance.Estimate) {
		t.Errorf("%+v", rows)
	}

	// One wafer in each lot: the lots' component holds both.
	levels, y = nested(r, []int{1, 1, 1, 1, 1}, func(_, _ int) int { return 5 }, 1, 1, 1)
	f := variance.New(levels, y).REML(0.95)
	if c := f.Components[1]; !math.IsNaN(c.Share.Estimate) || !strings.Contains(c.Variance.Why, "part of the lot's") {
		t.Errorf("%+v", c)
	}
	if without := variance.New(levels[:1], y).REML(0.95); math.Abs(f.Components[0].Variance.Estimate/without.Components[0].Variance.Estimate-1) > 1e-8 {
		t.Error("the lots' component changes with an aliased level")
	}

	// One die on each wafer: the dice's component holds both.
	levels, y = nested(r, []int{4, 5, 6}, func(_, _ int) int { return 1 }, 1, 1, 1)
	f = variance.New(levels, y).REML(0.95)
	if c := f.Components[1]; !math.IsNaN(c.Share.Estimate) || !strings.Contains(c.Variance.Why, "part of the dice's") {
		t.Errorf("%+v", c)
	}
	if !(f.Components[2].Variance.Estimate > 0) {
		t.Errorf("%+v", f)
	}
}

func TestDegenerate(t *testing.T) {
	codes := func(c ...int32) []variance.Level { return []variance.Level{{Name: "wafer", Code: c}} }
	for _, c := range []struct {
		why    string
		levels []variance.Level
		y      []float64
	}{
		{"fewer than two readings", codes(), nil},
		{"fewer than two readings", codes(1, 1, 2), []float64{nan, 3, nan}},
		{"all readings are equal", codes(1, 1, 2, 2), []float64{3, 3, 3, 3}},
		{"readings do not differ within any wafer", codes(1, 1, 2, 2), []float64{3, 3, 4, 4}},
		{"an infinite reading", codes(1, 1, 2, 2), []float64{3, 3, 4, math.Inf(1)}},
	} {
		d := variance.New(c.levels, c.y)
		f := d.REML(0.95)
		if f.Why != c.why || !math.IsNaN(f.Components[0].Variance.Estimate) || !strings.Contains(f.Text(), c.why) {
			t.Errorf("%v: %+v", c.y, f)
		}
		d.ANOVA(0.95)
	}
	// NaNs and unplaced readings are counted and left out.
	y := []float64{1, 2, nan, 4, 5, 7, 9, nan}
	d := variance.New(codes(0, 0, 0, 1, 1, -1, 2, -1), y)
	if d.N != 5 || d.Missing != 2 || d.Unplaced != 1 || d.Groups()[0] != 3 {
		t.Errorf("%+v", d)
	}
	same := variance.New(codes(0, 0, 1, 1, 2), []float64{1, 2, 4, 5, 9})
	if d.REML(0.95).LogLik != same.REML(0.95).LogLik {
		t.Error("missing readings change the fit")
	}
	// No spread between groups, and extreme scales.
	for _, scale := range []float64{1e-150, 1, 1e150} {
		f := variance.New(codes(0, 0, 1, 1, 2, 2), []float64{1 * scale, 5 * scale, 5 * scale, 1 * scale, 2 * scale, 4 * scale}).REML(0.95)
		if f.Components[0].Variance.Estimate != 0 || f.Components[0].Variance.Lower != 0 || !(f.Components[0].Variance.Upper > 0) {
			t.Errorf("scale %v: %+v", scale, f.Components)
		}
	}
}

// Order of rows, their shift and scale, and the way of summarising do not matter;
// nothing is modified.
func TestLaws(t *testing.T) {
	r := rand.New(rand.NewPCG(9, 1))
	levels, y := nested(r, []int{3, 5, 4, 2}, func(l, w int) int { return 2 + l + w }, 2, 1, 1)
	keep := slices.Clone(y)
	f := variance.New(levels, y).REML(0.95)
	if !slices.Equal(y, keep) {
		t.Fatal("readings were modified")
	}
	order := r.Perm(len(y))
	shuffled := []variance.Level{{Name: "lot"}, {Name: "wafer"}}
	var z []float64
	for _, i := range order {
		shuffled[0].Code, shuffled[1].Code = append(shuffled[0].Code, levels[0].Code[i]), append(shuffled[1].Code, levels[1].Code[i])
		z = append(z, 1e-12*y[i]-3e-9)
	}
	g := variance.New(shuffled, z).REML(0.95)
	// Cell by cell, a cell in two parts.
	half := []variance.Level{{Name: "lot"}, {Name: "wafer"}}
	var cells []variance.Cell
	for i := range y {
		half[0].Code, half[1].Code = append(half[0].Code, levels[0].Code[i]), append(half[1].Code, levels[1].Code[i])
		cells = append(cells, variance.Cell{N: 1, Mean: y[i]})
	}
	h := variance.FromCells(half, cells).REML(0.95)
	for k := range f.Components {
		a, b, c := f.Components[k].Variance, g.Components[k].Variance, h.Components[k].Variance
		if math.Abs(b.Estimate*1e24/a.Estimate-1) > 1e-6 || math.Abs(b.Upper*1e24/a.Upper-1) > 1e-4 {
			t.Errorf("shuffled and scaled: %+v, %+v", b, a)
		}
		if math.Abs(c.Estimate/a.Estimate-1) > 1e-7 {
			t.Errorf("from cells: %+v, %+v", c, a)
		}
	}
	for _, bad := range []func(){
		func() { variance.New(nil, y) },
		func() { variance.New(levels, y[1:]) },
		func() { variance.New(levels, y).REML(1) },
		func() {
			variance.New([]variance.Level{{Name: "zone", Code: levels[0].Code, Repeats: true}, levels[1]}, y)
		},
	} {
		func() {
			defer func() {
				if s, ok := recover().(string); !ok || !strings.HasPrefix(s, "stats/variance: ") {
					t.Errorf("recovered %v", s)
				}
			}()
			bad()
		}()
	}
}
