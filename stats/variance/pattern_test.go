package variance

import (
	"math"
	"testing"
)

// R 4.2.2: pchisq(x, 4, ncp).
func TestNoncentralChiSquared(t *testing.T) {
	for _, c := range []struct{ lambda, z, want float64 }{
		{0.5, 1, 0.8542085}, {10, 1, 0.8452969}, {10, -1.9, 0.0008377574}, {500, 1, 0.8414602}, {500, -1.9, 0.02472212},
		{1999, 1, 0.8413743}, {1999, -1.9, 0.0267587}, {2001, 1, 0.8413743}, {2001, -1.9, 0.0267597}, {1e5, 1, 0.8413453}, {1e5, -1.9, 0.0284449},
	} {
		x := math.Max(0.1, c.lambda+4+c.z*math.Sqrt(2*(4+2*c.lambda)))
		if got := noncentralChiSquared(x, 4, c.lambda); math.Abs(got/c.want-1) > 5e-5 {
			t.Errorf("P(chi2_4(%v) < %v) = %.8g, want %.8g", c.lambda, x, got, c.want)
		}
	}
	for _, p := range []float64{0.025, 0.5, 0.975} {
		l := noncentrality(25, 4, p)
		if got := noncentralChiSquared(25, 4, l); math.Abs(got-p) > 1e-9 {
			t.Errorf("quantile %v: %v", p, got)
		}
	}
	if noncentrality(3, 4, 0.975) != 0 {
		t.Error("a small statistic asks for noncentrality")
	}
}
