package dist

import (
	"math"
	"math/rand/v2"
	"os"
	"testing"

	"kneepoint/stats"
)

// Intervals of 95 % hold the truth in 93 to 97 % of the draws: 2,000 with
// KNEEPOINT_LONG=1; else 300, with three standard errors of slack.
func TestIntervalsCover(t *testing.T) {
	draws := 150
	if os.Getenv("KNEEPOINT_LONG") != "" {
		draws = 2000
	}
	slack := 0.0
	if draws < 2000 {
		slack = 3 * math.Sqrt(0.95*0.05/float64(draws))
	}
	r := rand.New(rand.NewPCG(2026, 1))
	hold := map[string]int{}
	check := func(name string, iv stats.Interval, truth float64) {
		if iv.Lower <= truth && truth <= iv.Upper {
			hold[name]++
		}
	}
	normal, lognormal := Normal{Mu: 97, Sigma: 3.5}, Lognormal{Normal{Mu: -0.5, Sigma: 0.8}}
	weibull, gamma := Weibull{Shape: 14, Scale: 96}, Gamma{Shape: 4, Scale: 0.5}
	const n = 100
	x, mark := make([]float64, n), make([]int8, n)
	draw := func(d Distribution, floor, clamp float64) Readings {
		for i := range x {
			x[i], mark[i] = d.Quantile(r.Float64()), 0
			if x[i] > clamp {
				x[i], mark[i] = clamp, 1
			} else if x[i] < floor {
				x[i], mark[i] = floor, -1
			}
		}
		return Readings{Values: x, Censor: mark}
	}
	inf := math.Inf(1)
	for range draws {
		// The mean of complete readings, by Student's t.
		rs := draw(normal, -inf, inf)
		check("mean", stats.MeanInterval(rs.Values, 0.95), 97)

		rs = draw(weibull, -inf, inf)
		w, err := FitWeibull(rs.Values, nil)
		if err != nil {
			t.Fatal(err)
		}
		check("Weibull shape", w.Parameters(0.95)[0].Value, 14)
		rs = draw(weibull, -inf, weibull.Quantile(0.7))
		if w, err = FitWeibull(rs.Values, rs.Censor); err != nil {
			t.Fatal(err)
		}
		check("Weibull shape, clamped", w.Parameters(0.95)[0].Value, 14)

		// The lower 1 % of a breakdown voltage of which 30 % are at the clamp, and the
		// upper 1 % of a leakage of which 30 % are below the floor.
		for _, c := range []struct {
			name         string
			d            Distribution
			p            float64
			floor, clamp float64
		}{
			{"normal quantile, clamped", normal, 0.01, -inf, normal.Quantile(0.7)},
			{"lognormal quantile, floored", lognormal, 0.99, lognormal.Quantile(0.3), inf},
			{"Weibull quantile, clamped", weibull, 0.01, -inf, weibull.Quantile(0.7)},
			{"gamma quantile, both", gamma, 0.95, gamma.Quantile(0.1), gamma.Quantile(0.9)},
		} {
			iv, err := ProfileQuantile(c.d.Family(), draw(c.d, c.floor, c.clamp), c.p, 0.95)
			if err != nil {
				t.Fatal(err)
			}
			check(c.name, iv, c.d.Quantile(c.p))
		}
	}
	for name, k := range hold {
		share := float64(k) / float64(draws)
		if share < 0.93-slack || share > 0.97+slack {
			t.Errorf("%s: the interval covers %.3f", name, share)
		}
		t.Logf("%s: %.3f", name, share)
	}
	if len(hold) != 7 {
		t.Errorf("%d intervals", len(hold))
	}
}
