package stats_test

import (
	"bufio"
	"math"
	"math/big"
	"math/rand/v2"
	"os"
	"path/filepath"
	"slices"
	"strconv"
	"strings"
	"testing"

	"kneepoint/stats"
)

// close1 compares relatively; want 0 means exactly 0.
func close1(got, want, tolerance float64) bool {
	if math.IsNaN(want) {
		return math.IsNaN(got)
	}
	return got == want || math.Abs(got-want) <= tolerance*math.Abs(want)
}

// exactMoments computes mean and standard deviation of the binary values without
// rounding.
func exactMoments(x []float64) (mean, sd float64) {
	const prec = 600
	n := new(big.Float).SetPrec(prec).SetInt64(int64(len(x)))
	sum := new(big.Float).SetPrec(prec)
	for _, v := range x {
		sum.Add(sum, new(big.Float).SetPrec(prec).SetFloat64(v))
	}
	m := new(big.Float).SetPrec(prec).Quo(sum, n)
	ss := new(big.Float).SetPrec(prec)
	for _, v := range x {
		d := new(big.Float).SetPrec(prec).SetFloat64(v)
		d.Sub(d, m)
		ss.Add(ss, d.Mul(d, d))
	}
	ss.Quo(ss, n.Sub(n, big.NewFloat(1)))
	ss.Sqrt(ss)
	mean, _ = m.Float64()
	sd, _ = ss.Float64()
	return mean, sd
}

// strd reads the data of a NIST StRD univariate file, from line 61 on.
func strd(t *testing.T, name string) []float64 {
	t.Helper()
	f, err := os.Open(filepath.Join("..", "testdata", "reference", "nist", name+".dat"))
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	var x []float64
	s := bufio.NewScanner(f)
	for line := 1; s.Scan(); line++ {
		if line < 61 {
			continue
		}
		if v, err := strconv.ParseFloat(strings.TrimSpace(s.Text()), 64); err == nil {
			x = append(x, v)
		}
	}
	return x
}

// numAcc4 is NIST StRD NumAcc4, whose data follow a rule (from memory):
// 10000000.2, then 10000000.1 and 10000000.3 in turn, 1001 values; certified
// mean 10000000.2, sd 0.1, lag-1 autocorrelation -0.999.
func numAcc4() []float64 {
	x := []float64{10000000.2}
	for range 500 {
		x = append(x, 10000000.1, 10000000.3)
	}
	return x
}

// Against the certified values TestReference checks what the data sets allow.
// Here the same data, as the binary numbers they are, are computed without
// rounding: mean and sd must come out as the nearest float64, or next to it.
func TestMomentsAreExactToTheLastDigit(t *testing.T) {
	sets := map[string][]float64{"NumAcc4": numAcc4()}
	for _, name := range []string{"Lew", "Mavro", "Michelso", "NumAcc1", "NumAcc2", "NumAcc3"} {
		sets[name] = strd(t, name)
	}
	for name, x := range sets {
		mean, sd := exactMoments(x)
		m := stats.MomentsOf(x)
		if !close1(m.Mean, mean, 1.2e-16) {
			t.Errorf("%s: mean %.17g, exactly %.17g", name, m.Mean, mean)
		}
		if !close1(m.SD(), sd, 4.5e-16) {
			t.Errorf("%s: sd %.17g, exactly %.17g", name, m.SD(), sd)
		}
	}
}

// What NumAcc4 allows: its decimal data are off by up to 9e-10 in binary, 1e-8 of
// the standard deviation.
func TestNumAcc4(t *testing.T) {
	m := stats.MomentsOf(numAcc4())
	if !close1(m.Mean, 10000000.2, 1e-16) || !close1(m.SD(), 0.1, 1e-8) || !close1(stats.Lag1(numAcc4()), -0.999, 1e-8) {
		t.Errorf("mean %.17g sd %.17g lag1 %.17g", m.Mean, m.SD(), stats.Lag1(numAcc4()))
	}
}

func TestMomentsSpecialCases(t *testing.T) {
	nan, inf := math.NaN(), math.Inf(1)
	for _, c := range []struct {
		name                     string
		x                        []float64
		n, missing               int
		mean, sd, skew, kurtosis float64
	}{
		{"empty", nil, 0, 0, nan, nan, nan, nan},
		{"only missing", []float64{nan, nan}, 0, 2, nan, nan, nan, nan},
		{"one", []float64{3}, 1, 0, 3, nan, nan, nan},
		{"two", []float64{1, 2}, 2, 0, 1.5, math.Sqrt(0.5), nan, nan},
		{"three", []float64{1, 2, 3}, 3, 0, 2, 1, 0, nan},
		{"constant with gaps", []float64{0.1, nan, 0.1, 0.1, 0.1, nan}, 4, 2, 0.1, 0, nan, nan},
		{"an infinity", []float64{1, inf, 2, 3}, 4, 0, inf, nan, nan, nan},
		{"both infinities", []float64{1, inf, -inf, 3}, 4, 0, nan, nan, nan, nan},
		// By hand: 0,0,0,4 has g1 = 2/sqrt(3), G1 = g1*sqrt(12)/2 = 2; g2 = 7/3-3,
		// G2 = 3/2*(5*(-2/3)+6) = 4.
		{"skewed", []float64{0, 0, 0, 4}, 4, 0, 1, 2, 2, 4},
		// The sum overflows, the mean does not.
		{"huge", []float64{1.5e308, 1.5e308, 0.5e308, 0.5e308}, 4, 0, 1e308, 0.5e308 * math.Sqrt(4.0/3), 0, -6},
		{"opposite huge", []float64{1.2e308, -1.2e308}, 2, 0, 0, 1.2e308 * math.Sqrt2, nan, nan},
		{"tiny", []float64{1e-300, 3e-300}, 2, 0, 2e-300, math.Sqrt2 * 1e-300, nan, nan},
	} {
		m := stats.MomentsOf(c.x)
		if m.N != c.n || m.Missing != c.missing {
			t.Errorf("%s: n %d, missing %d", c.name, m.N, m.Missing)
		}
		got := []float64{m.Mean, m.SD(), m.Skewness(), m.Kurtosis()}
		for i, want := range []float64{c.mean, c.sd, c.skew, c.kurtosis} {
			if !close1(got[i], want, 1e-14) && !(want == 0 && math.Abs(got[i]) < 1e-14) {
				t.Errorf("%s: %s = %v, want %v", c.name, []string{"mean", "sd", "skewness", "kurtosis"}[i], got[i], want)
			}
		}
	}
}

// Shifting and scaling by powers of two is exact in binary: so must be what
// moments make of it, from picoamperes to absurd values.
func TestMomentsFollowScale(t *testing.T) {
	r := rand.New(rand.NewPCG(3, 1))
	x := make([]float64, 501)
	for i := range x {
		x[i] = math.Exp(r.NormFloat64())
	}
	m := stats.MomentsOf(x)
	for _, e := range []int{-700, -40, -1, 0, 1, 40, 700} {
		y := make([]float64, len(x))
		for i := range x {
			y[i] = -math.Ldexp(x[i], e)
		}
		s := stats.MomentsOf(y)
		if s.Mean != -math.Ldexp(m.Mean, e) || s.SD() != math.Ldexp(m.SD(), e) ||
			s.Skewness() != -m.Skewness() || s.Kurtosis() != m.Kurtosis() {
			t.Errorf("2^%d: %v %v %v %v against %v %v %v %v", e, s.Mean, s.SD(), s.Skewness(), s.Kurtosis(), m.Mean, m.SD(), m.Skewness(), m.Kurtosis())
		}
	}
	shifted := make([]float64, len(x))
	for i := range x {
		shifted[i] = x[i] + 1000
	}
	s := stats.MomentsOf(shifted)
	if !close1(s.Mean, m.Mean+1000, 1e-15) || !close1(s.SD(), m.SD(), 1e-12) || !close1(s.Kurtosis(), m.Kurtosis(), 1e-10) {
		t.Error("moments do not follow a shift")
	}
}

func TestLag1(t *testing.T) {
	nan := math.NaN()
	for _, c := range []struct {
		x    []float64
		want float64
	}{
		{nil, nan}, {[]float64{1}, nan}, {[]float64{2, 2, 2}, nan},
		{[]float64{1, 2, 3}, 0}, // (-1*0 + 0*1)/2
		{[]float64{1, -1, 1, -1}, -0.75},
		// m = 0: pairs (1,-1) and (-1,1) only, over 4.
		{[]float64{1, -1, nan, -1, 1}, -0.5},
	} {
		if got := stats.Lag1(c.x); !close1(got, c.want, 1e-15) {
			t.Errorf("Lag1(%v) = %v, want %v", c.x, got, c.want)
		}
	}
}

func TestMeanIntervalNeedsSpread(t *testing.T) {
	for _, x := range [][]float64{nil, {math.NaN()}, {5}} {
		iv := stats.MeanInterval(x, 0.95)
		if !math.IsNaN(iv.Lower) || !math.IsNaN(iv.Upper) || iv.Why == "" {
			t.Errorf("MeanInterval(%v) = %+v", x, iv)
		}
	}
}

// A 95 % interval of the mean covers 95 %, within three standard errors of a
// simulation of 2,000 draws.
func TestMeanIntervalCovers(t *testing.T) {
	r := rand.New(rand.NewPCG(11, 7))
	const draws = 2000
	covered := 0
	x := make([]float64, 12)
	for range draws {
		for i := range x {
			x[i] = 42 + 0.9*r.NormFloat64()
		}
		if iv := stats.MeanInterval(x, 0.95); iv.Lower <= 42 && 42 <= iv.Upper {
			covered++
		}
	}
	if share := float64(covered) / draws; math.Abs(share-0.95) > 3*math.Sqrt(0.95*0.05/draws) {
		t.Errorf("covers %.3f", share)
	}
}

func TestConfidencePanics(t *testing.T) {
	for _, c := range []float64{0, 1, -1, math.NaN()} {
		mustPanic(t, "stats: ", func() { stats.MeanInterval([]float64{1, 2}, c) })
	}
}

func mustPanic(t *testing.T, prefix string, f func()) {
	t.Helper()
	defer func() {
		t.Helper()
		if s, ok := recover().(string); !ok || !strings.HasPrefix(s, prefix) {
			t.Errorf("recovered %q, want a panic that starts with %q", s, prefix)
		}
	}()
	f()
}

// unchanged runs f and fails when it modifies x.
func unchanged(t *testing.T, name string, x []float64, f func()) {
	t.Helper()
	before := slices.Clone(x)
	f()
	for i := range x {
		if math.Float64bits(x[i]) != math.Float64bits(before[i]) {
			t.Errorf("%s modified its argument at %d", name, i)
			return
		}
	}
}

func TestArgumentsAreLeftAlone(t *testing.T) {
	r := rand.New(rand.NewPCG(5, 5))
	x := make([]float64, 700)
	for i := range x {
		x[i] = math.Exp(r.NormFloat64())
	}
	x[3], x[77] = math.NaN(), math.NaN()
	probs := []float64{0.9, 0.1, 0.5}
	for name, f := range map[string]func(){
		"Describe":         func() { stats.Describe(x, probs) },
		"Quantiles":        func() { stats.Quantiles(x, probs, stats.HyndmanFan7) },
		"MADSigma":         func() { stats.MADSigma(x) },
		"Lag1":             func() { stats.Lag1(x) },
		"TrimmedMean":      func() { stats.TrimmedMean(x, 0.1) },
		"HodgesLehmann":    func() { stats.HodgesLehmann(x) },
		"Huber":            func() { stats.Huber(x, 1.5) },
		"HuberProposal2":   func() { stats.HuberProposal2(x, 1.5) },
		"Geometric":        func() { stats.Geometric(x) },
		"FreedmanDiaconis": func() { stats.FreedmanDiaconis(x, 50).Count(x) },
	} {
		unchanged(t, name, x, f)
		unchanged(t, name, probs, f)
	}
}
