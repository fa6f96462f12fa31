package control_test

import (
	"math"
	"math/rand/v2"
	"os"
	"testing"

	"gonum.org/v1/gonum/stat/distuv"
	"kneepoint/stats/control"
)

func long() bool { return os.Getenv("KNEEPOINT_LONG") != "" }

// runs is how many runs until the first false alarm are made.
func runs(short int) int {
	if long() {
		return 2000
	}
	return short
}

// meanRun is the average number of independent standard normal points until the
// first signal, over n runs, and its standard error.
func meanRun(seed uint64, n int, first func(x []float64) (int, bool)) (mean, se float64) {
	r := rand.New(rand.NewPCG(seed, 6))
	var sum, squares float64
	for range n {
		var x []float64
		at, found := 0, false
		for size := 512; !found; size *= 2 {
			for len(x) < size {
				x = append(x, r.NormFloat64())
			}
			at, found = first(x)
		}
		length := float64(at + 1)
		sum += length
		squares += length * length
	}
	mean = sum / float64(n)
	return mean, math.Sqrt((squares/float64(n) - mean*mean) / float64(n))
}

func earliest(lists ...[]int) (int, bool) {
	at, found := math.MaxInt, false
	for _, l := range lists {
		if len(l) > 0 && l[0] < at {
			at, found = l[0], true
		}
	}
	return at, found
}

// The average run length to a false alarm of each chart and rule is the published
// one, within four standard errors of the simulation: 2,000 runs with
// KNEEPOINT_LONG=1, else 150.
func TestFalseAlarmsComeAtTheirRate(t *testing.T) {
	n := runs(150)
	rules := func(pick func(control.Rules) [][]int) func([]float64) (int, bool) {
		return func(x []float64) (int, bool) { return earliest(pick(control.Nelson(x, 0, 1))...) }
	}
	ewma := func(lambda, l float64) func([]float64) (int, bool) {
		return func(x []float64) (int, bool) {
			return earliest(control.EWMA(x, 0, 1, control.EWMAOptions{Lambda: lambda, L: l, Asymptotic: true}).Signals)
		}
	}
	cusum := func(h float64) func([]float64) (int, bool) {
		return func(x []float64) (int, bool) {
			s := control.CUSUM(x, 0, 0.5, h, 0)
			return earliest(s.SignalsHigh, s.SignalsLow)
		}
	}
	for i, c := range []struct {
		name, source string
		want         float64
		first        func([]float64) (int, bool)
	}{
		{"three-sigma limits", "1/0.0027", 370.398, func(x []float64) (int, bool) { return earliest(control.Against(x, 0, 1).Signals) }},
		{"rule 1", "1/0.0027", 370.398, rules(func(r control.Rules) [][]int { return [][]int{r.Signals[0]} })},
		// Mean time to a run of r equal results of a fair coin is 2^r - 1 (Feller 1968,
		// An Introduction to Probability Theory 1, XIII.7).
		{"rule 2", "Feller 1968, XIII.7", 511, rules(func(r control.Rules) [][]int { return [][]int{r.Signals[1]} })},
		// To a run of r successes of probability p: (1 - p^r)/((1 - p) p^r), same source;
		// p = 0.682689 within one sigma.
		{"rule 7", "Feller 1968, XIII.7", 963.3, rules(func(r control.Rules) [][]int { return [][]int{r.Signals[6]} })},
		// Combinations of rule 1 with one other, Markov chains of Champ and Woodall 1987,
		// Technometrics 29, 393-399, table 1 (from memory).
		{"rules 1 and 5", "Champ and Woodall 1987", 225.44, rules(func(r control.Rules) [][]int { return [][]int{r.Signals[0], r.Any5} })},
		{"rules 1 and 6", "Champ and Woodall 1987", 166.05, rules(func(r control.Rules) [][]int { return [][]int{r.Signals[0], r.Any6} })},
		// EWMA schemes for 500, Lucas and Saccucci 1990, table 3; CUSUM with k = 1/2,
		// Montgomery 2013, table 9.3 (both from memory).
		{"EWMA 0.40", "Lucas and Saccucci 1990", 500, ewma(0.40, 3.054)},
		{"EWMA 0.20", "Lucas and Saccucci 1990", 500, ewma(0.20, 2.962)},
		{"EWMA 0.10", "Lucas and Saccucci 1990", 500, ewma(0.10, 2.814)},
		{"CUSUM 4", "Montgomery 2013", 168, cusum(4)},
		{"CUSUM 5", "Montgomery 2013", 465, cusum(5)},
	} {
		mean, se := meanRun(uint64(i), n, c.first)
		t.Logf("%s: run length %.1f (se %.1f), published %.1f (%s)", c.name, mean, se, c.want, c.source)
		if math.Abs(mean-c.want) > 4*se {
			t.Errorf("%s: run length %.1f (se %.1f), published %.1f (%s)", c.name, mean, se, c.want, c.source)
		}
	}
}

// Each of Nelson's tests signals at its rate per point: those of Nelson 1984
// (printed to four decimals; from memory) follow from the definitions as written
// beside them.
func TestNelsonRates(t *testing.T) {
	n := 400_000
	if long() {
		n = 8_000_000
	}
	phi := distuv.UnitNormal
	beyond := func(k float64) float64 { return phi.Survival(k) } // on one side
	p1, p2, inside := beyond(1), beyond(2), 1-2*beyond(1)
	three := func(p float64) float64 { return 4*p*p*p*(1-p) + p*p*p*p } // three or more of four
	const euler14 = 199360981                                           // alternating permutations of 14 (OEIS A000111)
	want := [8]float64{
		2 * beyond(3),                    // 0.0027
		2 * math.Pow(0.5, 9),             // 0.0039
		2.0 / 720,                        // 0.0028: one order of 6! each way
		2 * euler14 / 87178291200.0,      // 0.0046: of 14!
		2 * p2 * (1 - (1-p2)*(1-p2)),     // last point beyond, and one or both of the two before
		2 * p1 * three(p1),               // last point beyond, and three or four of the four before
		math.Pow(inside, 15),             // 0.0033
		math.Pow(2*p1, 8) * (1 - 2/256.), // 0.0001
	}
	// Nelson prints tests 5 and 6 in the Any form.
	printed := [8]float64{0.0027, 0.0039, 0.0028, 0.0046, math.NaN(), math.NaN(), 0.0033, 0.0001}
	any5 := 2 * (3*p2*p2*(1-p2) + p2*p2*p2)                  // 0.0031
	any6 := 2 * (5*math.Pow(p1, 4)*(1-p1) + math.Pow(p1, 5)) // 0.0055
	got := [8]int{}
	gotAny5, gotAny6, gotOne := 0, 0, 0
	r := rand.New(rand.NewPCG(17, 1))
	const block = 4000
	points := 0
	x := make([]float64, block)
	for points < n {
		for i := range x {
			x[i] = r.NormFloat64()
		}
		rules := control.Nelson(x, 0, 1)
		late := func(list []int) (k int) { // where every window is full
			for _, i := range list {
				if i >= 14 {
					k++
				}
			}
			return k
		}
		for k := range got {
			got[k] += late(rules.Signals[k])
		}
		gotAny5 += late(rules.Any5)
		gotAny6 += late(rules.Any6)
		gotOne += late(rules.OneSided8)
		points += block - 14
	}
	check := func(name string, got int, want, printed float64) {
		t.Helper()
		rate := float64(got) / float64(points)
		// Signals of overlapping windows come in clumps: up to about a window's worth
		// of variance.
		se := math.Sqrt(want / float64(points) * 10)
		t.Logf("%s: %.5f per point, by definition %.5f, printed %.4f", name, rate, want, printed)
		if math.Abs(rate-want) > 4*se {
			t.Errorf("%s: %.5f per point, by definition %.5f (se %.5f)", name, rate, want, se)
		}
		if math.Abs(want-printed) > 5.1e-5 {
			t.Errorf("%s: %.5f by definition, printed %.4f", name, want, printed)
		}
	}
	for k := range got {
		check("rule "+string(rune('1'+k)), got[k], want[k], printed[k])
	}
	check("rule 5 any", gotAny5, any5, 0.0031)
	check("rule 6 any", gotAny6, any6, 0.0055)
	check("rule 8 one-sided", gotOne, math.Pow(2*p1, 8), 0.0001)
}

// Shares and counts: the exact chance beyond the limits, by the binomial and the
// Poisson law, with limits set by many points.
func TestCountChartsAlarmAtTheirRate(t *testing.T) {
	points := 20_000
	if long() {
		points = 400_000
	}
	r := rand.New(rand.NewPCG(3, 8))
	binomial := distuv.Binomial{N: 500, P: 0.06, Src: r}
	poisson := distuv.Poisson{Lambda: 17, Src: r}
	n, d, c := make([]float64, points), make([]float64, points), make([]float64, points)
	for i := range n {
		n[i], d[i], c[i] = 500, binomial.Rand(), poisson.Rand()
	}
	outside := func(cdf func(float64) float64, lower, upper float64) float64 {
		return cdf(math.Ceil(lower)-1) + 1 - cdf(math.Floor(upper))
	}
	check := func(name string, chart control.Chart, want float64) {
		rate := float64(len(chart.Signals)) / float64(points)
		se := math.Sqrt(want / float64(points))
		t.Logf("%s: %.5f, by the law %.5f", name, rate, want)
		if math.Abs(rate-want) > 4*se {
			t.Errorf("%s: %.5f of points beyond the limits, by the law %.5f (se %.5f)", name, rate, want, se)
		}
	}
	half := 3 * math.Sqrt(500*0.06*0.94)
	pRate := outside(binomial.CDF, 30-half, 30+half)
	check("p", control.P(d, n), pRate)
	laney := control.LaneyP(d, n)
	check("Laney p'", laney, pRate)
	if math.Abs(laney.Sigma-1) > 0.02 {
		t.Errorf("binomial points: sigma_z %v", laney.Sigma)
	}
	cRate := outside(poisson.CDF, 17-3*math.Sqrt(17), 17+3*math.Sqrt(17)) // no limit near a whole number
	check("c", control.C(c), cRate)
	check("u", control.U(c, n), cRate)

	// Wafers whose fail rate itself spreads: the p chart alarms everywhere, Laney's
	// at about its normal rate.
	for i := range d {
		rate := 0.06 * math.Exp(0.3*r.NormFloat64()-0.045)
		n[i] = 20000
		d[i] = distuv.Binomial{N: 20000, P: rate, Src: r}.Rand()
		if i == 3999 {
			break
		}
	}
	p, l := control.P(d[:4000], n[:4000]), control.LaneyP(d[:4000], n[:4000])
	if share := float64(len(p.Signals)) / 4000; share < 0.5 {
		t.Errorf("p chart of wafers that differ: %.3f beyond", share)
	}
	if share := float64(len(l.Signals)) / 4000; share > 0.02 {
		t.Errorf("Laney chart of wafers that differ: %.3f beyond", share)
	}
}

// The risk that yield limits state is the share of further lots beyond them.
func TestYieldLimitRisk(t *testing.T) {
	lots := runs(2000) * 20
	r := rand.New(rand.NewPCG(2, 2))
	for _, n := range []int{6, 25} {
		first, second := 0, 0
		var l control.StatLimits
		x := make([]float64, n)
		for range lots {
			for i := range x {
				x[i] = 0.8 + 0.03*r.NormFloat64()
			}
			l = control.YieldLimits(x, false)
			switch l.Judge(0.8 + 0.03*r.NormFloat64()) {
			case 2:
				second++
				first++
			case 1:
				first++
			}
		}
		for _, c := range []struct {
			got  int
			want float64
		}{{first, l.FirstRisk}, {second, l.SecondRisk}} {
			rate := float64(c.got) / float64(lots)
			if math.Abs(rate-c.want) > 4*math.Sqrt(c.want/float64(lots)) {
				t.Errorf("%d lots: %.5f beyond, said %.5f", n, rate, c.want)
			}
		}
	}
}
