package compare

import (
	"math"
	"math/rand/v2"
	"slices"
	"strings"
	"testing"

	"kneepoint/stats"
)

// The cases of R and of the NIST handbook are checked by TestReference of
// package stats; here are further values, laws and the ends of the range.

var nan, inf = math.NaN(), math.Inf(1)

func near(got, want, tolerance float64) bool {
	return math.Abs(got-want) <= tolerance*math.Max(math.Abs(want), 1e-300)
}

// Constant leading digits cost nothing: NIST StRD SmLs01 is tens of readings
// between 1.1 and 1.9; in tenths they are whole numbers, which stay exact when
// 1e13 is added (the SmLs07-09 of integers). F by hand: between 9 groups whose
// readings alternate about 13..16, sums of squares 168 and 180.
func TestOneWayLeadingDigits(t *testing.T) {
	var y []float64
	var group []int32
	means := []float64{14, 13, 15, 13, 15, 14, 16, 14, 16} // x10; total about 14.44
	for g, m := range means {
		for i := range 21 {
			d := 0.0
			if i > 0 {
				d = float64(2*(i%2) - 1)
			}
			y, group = append(y, m+d), append(group, int32(g))
		}
	}
	for _, shift := range []float64{0, 1e7, 1e13} {
		z := make([]float64, len(y))
		for i := range y {
			z[i] = y[i] + shift
		}
		a := OneWay(z, group)
		between := 0.0
		for _, m := range means {
			between += 21 * (m - 130.0/9) * (m - 130.0/9)
		}
		if a.SSWithin != 180 || !near(a.SSBetween, between, 1e-14) || a.DFBetween != 8 || a.DFWithin != 180 {
			t.Errorf("shift %v: %+v", shift, a)
		}
	}
}

func TestNoResult(t *testing.T) {
	r := func(x Result) string { return x.Why }
	for _, c := range []struct {
		name, got, want string
	}{
		{"empty", OneWay(nil, nil).Why, "no readings"},
		{"one group", OneWay([]float64{1, 2}, []int32{4, 4}).Why, "one group"},
		{"one reading a group", OneWay([]float64{1, 2, nan}, []int32{4, 5, 5}).Why, "one reading a group"},
		{"constant groups", OneWay([]float64{1, 1, 2, 2}, []int32{4, 4, 5, 5}).Why, "no spread"},
		{"infinite", OneWay([]float64{1, inf, 2, 2}, []int32{4, 4, 5, 5}).Why, "infinite"},
		{"welch", r(WelchANOVA([]float64{1, 1, 2, 3}, []int32{4, 4, 5, 5})), "without spread"},
		{"welch one group", r(WelchANOVA([]float64{1, 1, 2}, []int32{4, 4, 5})), "one group"},
		{"bartlett", r(Bartlett([]float64{1, 1, 2, 3}, []int32{4, 4, 5, 5})), "without spread"},
		{"brown", r(BrownForsythe([]float64{1, inf, 2, 3}, []int32{4, 4, 5, 5})), "infinite"},
		{"kruskal", r(KruskalWallis([]float64{1, 1, 1, 1}, []int32{4, 4, 5, 5})), "equal"},
		{"mann", MannWhitney(nil, []float64{1}, 0.9).Why, "no readings"},
		{"mann equal", MannWhitney([]float64{1, 1}, []float64{1}, 0.9).Why, "equal"},
		{"t", WelchT([]float64{1}, []float64{1, 2}, 0.9).Why, "fewer than two"},
		{"t infinite", PooledT([]float64{1, inf}, []float64{1, 2}, 0.9).Why, "infinite"},
		{"t constant", PooledT([]float64{1, 1}, []float64{2, 2}, 0.9).Why, "no spread"},
		{"f", r(VarianceRatio([]float64{1, 1}, []float64{2, 3})), "without spread"},
		{"ks", r(KolmogorovSmirnov(nil, nil)), "no readings"},
		{"table", ChiSquare(nil).Why, "no counts"},
		{"one row left", ChiSquare([][]int{{3, 4}, {0, 0}}).Why, "fewer than two rows"},
	} {
		if !strings.Contains(c.got, c.want) {
			t.Errorf("%s: %q, want %q", c.name, c.got, c.want)
		}
	}
	for _, f := range []func(){
		func() { OneWay([]float64{1}, nil) },
		func() { ChiSquare([][]int{{1, 2}, {1}}) },
		func() { ChiSquare([][]int{{1, -2}}) },
		func() { Fisher([2][2]int{{-1, 0}, {0, 0}}, 0.95) },
		func() { WelchT(nil, nil, 1) },
		func() { Adjust([]float64{1.5}, Holm) },
		func() { Adjust(nil, 99) },
	} {
		func() {
			defer func() {
				if s, ok := recover().(string); !ok || !strings.HasPrefix(s, "stats/compare: ") {
					t.Errorf("recovered %q", s)
				}
			}()
			f()
		}()
	}
}

func TestFisher(t *testing.T) {
	// Fisher's own example, a lady tasting tea (The Design of Experiments, 1935):
	// three of four cups right has probability 17/70.
	e := Fisher([2][2]int{{3, 1}, {1, 3}}, 0.95)
	if !near(e.Greater, 17.0/70, 1e-12) || !near(e.P, 34.0/70, 1e-12) || !near(e.Less, 69.0/70, 1e-12) {
		t.Errorf("tea: %+v", e)
	}
	// R 4.2.2, fisher.test; its odds ratios are good to three digits.
	e = Fisher([2][2]int{{20000, 980000}, {20500, 979500}}, 0.95)
	if !near(e.P, 0.0122427046800205, 1e-6) || !near(e.OddsRatio.Estimate, 0.975107, 1e-3) ||
		!near(e.OddsRatio.Lower, 0.956079, 1e-3) || !near(e.OddsRatio.Upper, 0.994532, 1e-3) {
		t.Errorf("a million each: %+v", e)
	}
	if e = Fisher([2][2]int{{150, 99850}, {60, 99940}}, 0.95); !near(e.P, 4.35749778181264e-10, 1e-8) {
		t.Errorf("small p: %+v", e)
	}
	e = Fisher([2][2]int{{0, 50}, {9, 41}}, 0.95)
	if !near(e.P, 0.00263420440025905, 1e-10) || e.OddsRatio.Estimate != 0 || e.OddsRatio.Lower != 0 || !near(e.OddsRatio.Upper, 0.45055, 2e-3) {
		t.Errorf("empty cell: %+v", e)
	}
	if e = Fisher([2][2]int{{9, 41}, {0, 50}}, 0.95); !math.IsInf(e.OddsRatio.Estimate, 1) || !math.IsInf(e.OddsRatio.Upper, 1) || e.OddsRatio.Lower <= 1 {
		t.Errorf("empty cell: %+v", e)
	}
	if e = Fisher([2][2]int{{0, 0}, {9, 41}}, 0.95); e.P != 1 || e.OddsRatio.Why == "" {
		t.Errorf("empty row: %+v", e)
	}
	if e = Fisher([2][2]int{}, 0.95); e.P != 1 {
		t.Errorf("no counts: %+v", e)
	}
}

// All tables with small sums against plain counting.
func TestFisherByCounting(t *testing.T) {
	choose := func(n, k int) float64 {
		c := 1.0
		for i := range k {
			c = c * float64(n-i) / float64(i+1)
		}
		return math.Round(c)
	}
	for n := 0; n < 6*6*6*6; n++ {
		a, b, c, d := n%6, n/6%6, n/36%6, n/216
		e := Fisher([2][2]int{{a, b}, {c, d}}, 0.95)
		p := func(k int) float64 { return choose(a+c, k) * choose(b+d, a+b-k) / choose(a+b+c+d, a+b) }
		var two, greater, less float64
		for k := max(0, a-d); k <= a+min(b, c); k++ {
			if p(k) <= p(a)*(1+1e-7) {
				two += p(k)
			}
			if k >= a {
				greater += p(k)
			}
			if k <= a {
				less += p(k)
			}
		}
		if math.Abs(e.P-two) > 1e-12 || math.Abs(e.Greater-greater) > 1e-12 || math.Abs(e.Less-less) > 1e-12 {
			t.Errorf("%d %d %d %d: %+v, want %v %v %v", a, b, c, d, e, two, greater, less)
		}
	}
}

// R 4.2.2, wilcox.test(exact = FALSE, conf.int = TRUE); its shift is a root to
// 1e-4, and its interval not by rank but by inverting the corrected p.
func TestMannWhitney(t *testing.T) {
	x := []float64{1.1, 2.2, 3.3, 4.4, 5.5, 6.6, 7.7, 8.8, 9.9, 11, 12.1}
	y := []float64{4, 5, 6.5, 7, 9, 11.5, nan, 14, 15, 15.5, 16, 17.5}
	r := MannWhitney(x, y, 0.95)
	if r.W != 30 || !near(r.P, 0.0488440641742743, 1e-12) || r.NX != 11 || r.NY != 11 || !near(r.Larger, 30.0/121, 1e-14) {
		t.Errorf("%+v", r)
	}
	if !near(r.Shift.Estimate, -4.5, 1e-3) || math.Abs(r.Shift.Lower+8.7) > 0.21 || math.Abs(r.Shift.Upper+0.2) > 0.21 {
		t.Errorf("shift %+v", r.Shift)
	}
	// Every rank of the differences against forming them all.
	a, b := stats.Sorted([]float64{3, -1, 2, 2, 7.5, 0}), stats.Sorted([]float64{1, 1, -4, 2, 0})
	var all []float64
	for _, u := range a {
		for _, v := range b {
			all = append(all, u-v)
		}
	}
	slices.Sort(all)
	for i, want := range all {
		if got := difference(a, b, i); got != want {
			t.Errorf("difference %d: %v, want %v", i, got, want)
		}
	}
	// Infinities have a rank, but leave no shift.
	if r = MannWhitney([]float64{1, inf}, []float64{0, 2}, 0.95); r.W != 3 || r.Shift.Why == "" {
		t.Errorf("%+v", r)
	}
}

// Two groups by Kruskal-Wallis are Mann-Whitney without continuity correction.
func TestRankTestsAgree(t *testing.T) {
	r := rand.New(rand.NewPCG(3, 3))
	var x, y, all []float64
	var group []int32
	for i := range 60 {
		v := math.Round(10*r.NormFloat64()) / 10
		if i%3 == 0 {
			x = append(x, v+0.5)
			all, group = append(all, v+0.5), append(group, 2)
		} else {
			y = append(y, v)
			all, group = append(all, v), append(group, 7)
		}
	}
	w, h := MannWhitney(x, y, 0.95), KruskalWallis(all, group)
	_, ties := stats.Ranks(all)
	n, m := float64(len(x)), float64(len(y))
	z := (w.W - n*m/2) / math.Sqrt(n*m/12*(n+m+1-ties/((n+m)*(n+m-1))))
	if !near(h.Statistic, z*z, 1e-12) {
		t.Errorf("H %v, z^2 %v", h.Statistic, z*z)
	}
	f, p := OneWay(all, group), PooledT(x, y, 0.95)
	if !near(f.F, p.T*p.T, 1e-12) || !near(f.P, p.P, 1e-10) {
		t.Errorf("F %v, t^2 %v", f.F, p.T*p.T)
	}
	u, v := WelchANOVA(all, group), WelchT(x, y, 0.95)
	if !near(u.Statistic, v.T*v.T, 1e-12) || !near(u.DF2, v.DF, 1e-12) {
		t.Errorf("Welch: %+v, %+v", u, v)
	}
}

func TestKolmogorovSmirnov(t *testing.T) {
	x := []float64{1, 2, 2, 3, inf}
	if r := KolmogorovSmirnov(x, x); r.Statistic != 0 || r.P != 1 {
		t.Errorf("%+v", r)
	}
	if r := KolmogorovSmirnov([]float64{1, 2, 3, nan}, []float64{4, 5}); r.Statistic != 1 || r.N != 5 {
		t.Errorf("%+v", r)
	}
}

func TestAdjust(t *testing.T) {
	p := []float64{0.01, nan, 0.04, 0.03, 0.5}
	for how, want := range map[Adjustment][]float64{ // R 4.2.2, p.adjust
		Bonferroni:         {0.04, nan, 0.16, 0.12, 1},
		Holm:               {0.04, nan, 0.09, 0.09, 0.5},
		BenjaminiHochberg:  {0.04, nan, 4 * 0.04 / 3, 4 * 0.04 / 3, 0.5},
		BenjaminiYekutieli: {0.04 * 25 / 12, nan, 4 * 0.04 / 3 * 25 / 12, 4 * 0.04 / 3 * 25 / 12, 1},
	} {
		got := Adjust(p, how)
		for i := range want {
			if !near(got[i], want[i], 1e-14) && !(got[i] != got[i] && want[i] != want[i]) {
				t.Errorf("%v: %v, want %v", how, got, want)
			}
		}
	}
	if len(Adjust(nil, Holm)) != 0 {
		t.Error("of nothing")
	}
}

// Without a difference each test finds one in about 5 % of the draws.
func TestLevels(t *testing.T) {
	r := rand.New(rand.NewPCG(12, 4))
	const draws = 1000
	found := map[string]int{}
	y, group := make([]float64, 60), make([]int32, 60)
	for range draws {
		for i := range y {
			y[i], group[i] = r.NormFloat64(), int32(i%4)
		}
		x := y[:25]
		for name, p := range map[string]float64{"anova": OneWay(y, group).P, "welch": WelchANOVA(y, group).P, "kruskal": KruskalWallis(y, group).P,
			"brown-forsythe": BrownForsythe(y, group).P, "bartlett": Bartlett(y, group).P, "mann-whitney": MannWhitney(x, y[25:], 0.9).P,
			"t": WelchT(x, y[25:], 0.9).P, "f": VarianceRatio(x, y[25:]).P} {
			if p <= 0.05 {
				found[name]++
			}
		}
	}
	for name, k := range found {
		least := 0.03
		if name == "brown-forsythe" { // is known to be on the safe side in small groups
			least = 0.015
		}
		if share := float64(k) / draws; share < least || share > 0.07 {
			t.Errorf("%s: %.3f", name, share)
		}
	}
	if len(found) != 8 {
		t.Errorf("%d tests found something", len(found))
	}
}

func BenchmarkKruskalWallis(b *testing.B) {
	r := rand.New(rand.NewPCG(1, 1))
	y, group := make([]float64, 2_200_000), make([]int32, 2_200_000)
	for i := range y {
		y[i], group[i] = math.Round(100*(42+r.NormFloat64()))/100, int32(i/88_000)
	}
	for b.Loop() {
		KruskalWallis(y, group)
	}
}
