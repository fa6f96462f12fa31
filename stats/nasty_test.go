package stats_test

import (
	"math"
	"math/rand/v2"
	"os"
	"runtime/debug"
	"testing"

	"kneepoint/stats"
	"kneepoint/stats/capability"
	"kneepoint/stats/compare"
	"kneepoint/stats/dist"
	"kneepoint/stats/relate"
	"kneepoint/stats/screen"
)

// nasty returns readings as files hold them at their worst: missing, infinite,
// equal, negative, huge, tiny, few.
func nasty(r *rand.Rand) (x []float64, mark []int8) {
	pool := []float64{0, 1, 1, 2, 42, 42.5, -1, math.NaN(), math.Inf(1), math.Inf(-1), 1e300, -1e300, 1e-300, 5e-324, math.MaxFloat64, 1e30}
	kind := r.IntN(7)
	for range r.IntN(60) {
		var v float64
		switch kind {
		case 0:
			v = pool[r.IntN(len(pool))]
		case 1:
			v = pool[r.IntN(7)]
		case 2:
			v = 42
		case 3:
			v = math.Round(10 * r.NormFloat64())
		case 4:
			v = math.Exp(50 * r.NormFloat64())
		case 5:
			v = 1e-12 * (1 + 1e-9*r.NormFloat64())
		default:
			v = 42 + r.NormFloat64()
			if r.IntN(9) == 0 {
				v = pool[r.IntN(len(pool))]
			}
		}
		x = append(x, v)
		mark = append(mark, []int8{0, 0, 0, 1, -1}[r.IntN(5)])
	}
	return x, mark
}

// Data never panic, whatever they are, and every function comes to an end.
func TestDataNeverPanic(t *testing.T) {
	rounds := 120
	if os.Getenv("KNEEPOINT_LONG") != "" {
		rounds = 2000
	}
	r := rand.New(rand.NewPCG(13, 13))
	for i := range rounds {
		x, mark := nasty(r)
		y := make([]float64, len(x))
		group, row, col := make([]int32, len(x)), make([]int32, len(x)), make([]int32, len(x))
		pass := make([]bool, len(x))
		for k := range x {
			y[k] = x[r.IntN(len(x))]
			group[k], row[k], col[k] = int32(r.IntN(3)), int32(r.IntN(8)), int32(r.IntN(8))
			pass[k] = r.IntN(2) == 0
		}
		marks := [][]int8{nil, mark}[i%2]
		func() {
			defer func() {
				if e := recover(); e != nil {
					t.Errorf("%v with marks %v: %v\n%s", x, marks, e, debug.Stack())
				}
			}()
			stats.Ranks(x)
			stats.Sorted(x)
			readings := dist.Readings{Values: x, Censor: marks}
			for _, f := range []dist.Family{dist.NormalFamily, dist.LognormalFamily, dist.WeibullFamily, dist.GammaFamily} {
				d, err := dist.Fit(f, readings)
				if err != nil {
					continue
				}
				dist.QuantileInterval(d, 0.01, 0.95)
				dist.ShareInterval(d, 41, false, 0.95)
				dist.SizeOfMisfit(x, marks, d)
				dist.ProbabilityPlot(x, marks, d, 20)
				capability.ByPercentiles(capability.Input{Values: x, Censor: marks, Group: group, Lower: 40, Upper: 44, Confidence: 0.95}, d)
				if i%10 == 0 {
					dist.ProfileQuantile(f, readings, 0.1, 0.95)
				}
			}
			dist.Fit(dist.NormalFamily, dist.Readings{Values: x, Censor: marks, From: 41, To: 43})
			dist.Fit(dist.GammaFamily, dist.Readings{Values: x, Censor: marks, From: 0.5, To: 43})
			dist.Choose(x, marks)
			dist.Empirical(x, marks)
			dist.TestNormal(x)
			dist.TestLognormal(x)
			dist.TestWeibull(x)
			dist.AgainstKnown(x, dist.Normal{Mu: 42, Sigma: 1})
			dist.BoxCox(x, 0.95)
			if m, err := dist.FitMixtures(x, marks, 3); err == nil {
				dist.Split(x, m.ByParts[m.Best-1].Populations())
			}
			capability.ByPercentiles(capability.Input{Values: x, Censor: marks, Lower: 40, Upper: 44, Confidence: 0.95}, nil)
			capability.Compute(capability.Input{Values: x, Censor: marks, Group: group, Lower: 40, Upper: 44, Confidence: 0.95})
			screen.Grubbs(x, 0.05)
			screen.GESD(x, 5, 0.05)
			for _, o := range []screen.Options{screen.Standard(), {K: 6, Estimator: screen.MedianMAD}, {K: 6, Estimator: screen.MeanSD}, {K: 6, Kind: 7, Scale: screen.Log, Asymmetric: true}} {
				screen.PartAverage(x, marks, o).Outside(x, marks)
				o.Fitting(x, marks)
			}
			screen.NeighbourResidual(row, col, x, marks, screen.NeighbourOptions{Radius: 1, Minimum: 2, K: 6})
			screen.BadNeighbourhood(row, col, pass, 1, 1, 0.5)
			screen.RobustDistance([][]float64{x, y})
			screen.CostOf(screen.Screen{Flag: pass}, pass, 0.95)
			compare.OneWay(x, group)
			compare.WelchANOVA(x, group)
			compare.KruskalWallis(x, group)
			compare.Levene(x, group)
			compare.BrownForsythe(x, group)
			compare.Bartlett(x, group)
			compare.MannWhitney(x, y, 0.95)
			compare.WelchT(x, y, 0.95)
			compare.PooledT(x, y, 0.95)
			compare.VarianceRatio(x, y)
			compare.KolmogorovSmirnov(x, y)
			relate.Pearson(x, y, 0.95)
			relate.Spearman(x, y)
			relate.Kendall(x, y)
			relate.TheilSen(x, y, 0.95)
			relate.MannKendall(x, 0.95)
		}()
	}
}
