package stats_test

import (
	"math"
	"math/rand/v2"
	"testing"

	"kneepoint/stats"
)

const lot = 25 * 88_000

// readings returns breakdown-like values at the tester's resolution, leakage-like
// values, and both with a fifth of the values missing and a few gross outliers.
func readings(n int) map[string][]float64 {
	r := rand.New(rand.NewPCG(1, 1))
	volts, amps, gaps := make([]float64, n), make([]float64, n), make([]float64, n)
	for i := range volts {
		volts[i] = math.Round(100*(42+0.9*r.NormFloat64())) / 100
		amps[i] = 1.8e-9 * math.Exp(0.55*r.NormFloat64())
		switch {
		case r.Float64() < 0.2:
			gaps[i] = math.NaN()
		case r.Float64() < 0.001:
			gaps[i] = 1e3 * r.NormFloat64()
		default:
			gaps[i] = volts[i]
		}
	}
	return map[string][]float64{"volts": volts, "amperes": amps, "gaps": gaps}
}

func BenchmarkDescribe(b *testing.B) {
	probs := []float64{0.01, 0.05, 0.25, 0.5, 0.75, 0.95, 0.99}
	for name, x := range readings(lot) {
		b.Run(name, func(b *testing.B) {
			b.ReportAllocs()
			var s stats.Selector
			for b.Loop() {
				s.Describe(x, probs)
			}
		})
	}
}

func BenchmarkMedianMADSigma(b *testing.B) {
	for name, x := range readings(lot) {
		b.Run(name, func(b *testing.B) {
			b.ReportAllocs()
			var s stats.Selector
			for b.Loop() {
				s.MedianMADSigma(x)
			}
		})
	}
}

func BenchmarkMoments(b *testing.B) {
	x := readings(lot)["volts"]
	for b.Loop() {
		stats.MomentsOf(x)
	}
}

func BenchmarkHistogram(b *testing.B) {
	for name, x := range readings(lot) {
		b.Run(name, func(b *testing.B) {
			for b.Loop() {
				stats.FreedmanDiaconis(x, 80).Count(x)
			}
		})
	}
}

func BenchmarkHodgesLehmann(b *testing.B) {
	x := readings(200_000)["amperes"]
	for b.Loop() {
		stats.HodgesLehmann(x)
	}
}
