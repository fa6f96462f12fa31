package wafermap

import (
	"math"
	"math/rand/v2"
	"testing"
)

// Noll's table I (1976): the first eleven terms in closed form, from memory.
func TestZernikeTermsOfNollsTable(t *testing.T) {
	closed := []func(r, a float64) float64{
		func(r, a float64) float64 { return 1 },
		func(r, a float64) float64 { return 2 * r * math.Cos(a) },
		func(r, a float64) float64 { return 2 * r * math.Sin(a) },
		func(r, a float64) float64 { return math.Sqrt(3) * (2*r*r - 1) },
		func(r, a float64) float64 { return math.Sqrt(6) * r * r * math.Sin(2*a) },
		func(r, a float64) float64 { return math.Sqrt(6) * r * r * math.Cos(2*a) },
		func(r, a float64) float64 { return math.Sqrt(8) * (3*r*r*r - 2*r) * math.Sin(a) },
		func(r, a float64) float64 { return math.Sqrt(8) * (3*r*r*r - 2*r) * math.Cos(a) },
		func(r, a float64) float64 { return math.Sqrt(8) * r * r * r * math.Sin(3*a) },
		func(r, a float64) float64 { return math.Sqrt(8) * r * r * r * math.Cos(3*a) },
		func(r, a float64) float64 { return math.Sqrt(5) * (6*r*r*r*r - 6*r*r + 1) },
	}
	for j, f := range closed {
		for _, p := range [][2]float64{{0, 0}, {0.3, 1}, {0.77, -2.5}, {1, 3}} {
			if got, want := Zernike(j+1, p[0], p[1]), f(p[0], p[1]); math.Abs(got-want) > 1e-14 {
				t.Errorf("term %d at %v: %v, want %v", j+1, p, got, want)
			}
		}
	}
}

// Terms are orthonormal over the disc: midpoint rule in angle (exact for these
// orders) and Simpson's in the radius.
func TestZernikeTermsAreOrthonormal(t *testing.T) {
	const radii, angles, terms = 400, 24, 28
	for j := 1; j <= terms; j++ {
		for k := 1; k <= j; k++ {
			sum := 0.0
			for r := 0; r <= radii; r++ {
				weight := 2.0
				switch {
				case r == 0 || r == radii:
					weight = 1
				case r%2 == 1:
					weight = 4
				}
				rho := float64(r) / radii
				for a := range angles {
					theta := 2 * math.Pi * float64(a) / angles
					sum += weight * rho * Zernike(j, rho, theta) * Zernike(k, rho, theta)
				}
			}
			got, want := sum*2/(3*radii*angles), 0.0
			if j == k {
				want = 1
			}
			if math.Abs(got-want) > 1e-6 {
				t.Errorf("terms %d and %d: %v, want %v", j, k, got, want)
			}
		}
	}
	// at the rim every radial polynomial is 1, at any order
	for _, n := range []int{20, 40, 60} {
		for m := n % 2; m <= n; m += 2 {
			if got := radial(n, m, 1); math.Abs(got-1) > 1e-12 {
				t.Errorf("R_%d^%d(1) = %v", n, m, got)
			}
		}
	}
}

func TestFitZernikeFindsItsOwnSurface(t *testing.T) {
	x, y := disc(14)
	random := rand.New(rand.NewPCG(2, 2))
	want := make([]float64, 15)
	for j := range want {
		want[j] = random.NormFloat64()
	}
	want[0] = 84
	var mx, my, value []float64
	for i := range x {
		px, py := float64(x[i])*0.9, float64(y[i])*0.9
		v := 0.0
		for j := range want {
			v += want[j] * Zernike(j+1, math.Hypot(px, py)/13, math.Atan2(py, px))
		}
		mx, my, value = append(mx, px), append(my, py), append(value, v)
	}
	mx, my, value = append(mx, 1, math.NaN()), append(my, 1, 1), append(value, math.NaN(), 3)
	f := FitZernike(mx, my, value, 13, 15)
	if f.N != len(x) || f.Why != "" || f.RMS > 1e-12 || math.Abs(f.RSquared-1) > 1e-12 || f.Condition > 2 {
		t.Errorf("%+v", f)
	}
	for j := range want {
		if math.Abs(f.Coefficients[j]-want[j]) > 1e-11 {
			t.Errorf("term %d: %v, want %v", j+1, f.Coefficients[j], want[j])
		}
	}
	// turned by a quarter, the tilt moves from x to y and the bowl stays
	turned := FitZernike(negative(my), mx, value, 13, 15)
	if math.Abs(turned.Coefficients[2]-f.Coefficients[1]) > 1e-11 || math.Abs(turned.Coefficients[3]-f.Coefficients[3]) > 1e-11 {
		t.Errorf("turned %v, was %v", turned.Coefficients[:4], f.Coefficients[:4])
	}
}

func negative(v []float64) []float64 {
	out := make([]float64, len(v))
	for i := range v {
		out[i] = -v[i]
	}
	return out
}

func TestFitZernikeDegenerate(t *testing.T) {
	line := []float64{-3, -2, -1, 0, 1, 2, 3}
	zero := make([]float64, 7)
	for name, f := range map[string]ZernikeFit{
		"empty":   FitZernike(nil, nil, nil, 1, 3),
		"few":     FitZernike(line[:3], line[:3], line[:3], 4, 6),
		"on line": FitZernike(line, zero, line, 4, 6),
		"radius":  FitZernike(line, line, line, 0, 3),
	} {
		if f.Why == "" || !math.IsNaN(f.Coefficients[0]) || !math.IsNaN(f.RSS) {
			t.Errorf("%s: %+v", name, f)
		}
	}
	if f := FitZernike(line, negative(line), []float64{5, 5, 5, 5, 5, 5, 5}, 4, 1); f.Coefficients[0] != 5 || !math.IsNaN(f.RSquared) || f.RSS != 0 {
		t.Errorf("constant: %+v", f)
	}
}
