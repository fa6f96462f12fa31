package stats

import (
	"math"
	"math/rand/v2"
	"testing"
)

// TestRepeatability: by hand, differences 1 to 11 have the median 6; and pairs of
// normal readings of sigma 0.2, a tenth of them changed for good, must show 0.2
// within the sampling error of the median (about 1.17 sigma / sqrt(n), Rousseeuw
// and Croux 1993).
func TestRepeatability(t *testing.T) {
	var a, b []float64
	for i := 1; i <= 11; i++ {
		a, b = append(a, 100), append(b, 100+float64(i))
	}
	if r := RepeatabilityOf(append(a, math.NaN()), append(b, 1)); r.N != 11 || r.Shift != 6 || math.Abs(r.Sigma-1.4826*6/math.Sqrt2) > 1e-12 {
		t.Errorf("%+v", r)
	}
	if r := RepeatabilityOf(a[:5], b[:5]); !math.IsNaN(r.Sigma) || r.Why == "" {
		t.Errorf("five pairs give %+v", r)
	}
	rng := rand.New(rand.NewPCG(1, 2))
	a, b = nil, nil
	for i := range 4000 {
		level := 25 + rng.NormFloat64()
		x, y := level+0.2*rng.NormFloat64(), level+0.2*rng.NormFloat64()
		if i%10 == 0 {
			y = level + 10
		}
		a, b = append(a, x), append(b, y)
	}
	// A tenth of wild pairs lifts the median of |d| to the 0.5/0.9 quantile: by 13 %.
	if r := RepeatabilityOf(a, b); r.Sigma < 0.2 || r.Sigma > 0.24 {
		t.Errorf("sigma %v, want 0.2 to 0.24", r.Sigma)
	}
}
