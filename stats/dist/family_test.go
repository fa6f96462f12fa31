package dist

import (
	"encoding/json"
	"math"
	"math/rand/v2"
	"os"
	"testing"
)

// testdata/families.json holds fits from R, made by families.R beside it; null
// is an infinite limit. The fits of R's survreg and fitdistrplus are checked by
// TestReference of package stats.
type familyCase struct {
	Name, Family string
	Lower, Upper []*float64
	From, To     *float64
	A, B, LogLik float64
	VarAA        float64 `json:"var_aa"`
	CovAB        float64 `json:"cov_ab"`
	VarBB        float64 `json:"var_bb"`
	P, Quantile  float64
	Profile      [2]*float64 // null: no end
}

var families = map[string]Family{"normal": NormalFamily, "lognormal": LognormalFamily, "weibull": WeibullFamily, "gamma": GammaFamily}

// working are the working parameters.
func working(d Distribution) (a, b float64) {
	switch d := d.(type) {
	case Normal:
		return d.Mu, math.Log(d.Sigma)
	case Lognormal:
		return d.Mu, math.Log(d.Sigma)
	case Weibull:
		return math.Log(d.Scale), -math.Log(d.Shape)
	case Gamma:
		return math.Log(d.Shape * d.Scale), math.Log(d.Shape)
	}
	panic("?")
}

func loadFamilies(t *testing.T) (r struct {
	Fits          []familyCase
	GammaShape    []float64 `json:"gamma_shape"`
	GammaP        []float64 `json:"gamma_p"`
	GammaQuantile []float64 `json:"gamma_quantile"`
}) {
	t.Helper()
	raw, err := os.ReadFile("testdata/families.json")
	if err == nil {
		err = json.Unmarshal(raw, &r)
	}
	if err != nil {
		t.Fatal(err)
	}
	return r
}

func (c familyCase) readings() Readings {
	open := func(v *float64, otherwise float64) float64 {
		if v == nil {
			return otherwise
		}
		return *v
	}
	r := Readings{}
	for i := range c.Lower {
		r.Values = append(r.Values, open(c.Lower[i], math.Inf(-1)))
		r.Upper = append(r.Upper, open(c.Upper[i], math.Inf(1)))
	}
	if c.From != nil || c.To != nil {
		r.From, r.To = open(c.From, math.Inf(-1)), open(c.To, math.Inf(1))
	}
	return r
}

func TestFitAgainstR(t *testing.T) {
	for _, c := range loadFamilies(t).Fits {
		t.Run(c.Family+" "+c.Name, func(t *testing.T) {
			r := c.readings()
			d, err := Fit(families[c.Family], r)
			if err != nil {
				t.Fatal(err)
			}
			a, b := working(d)
			aa, ab, bb := d.covariance()
			if math.Abs(a-c.A) > 1e-6*math.Sqrt(c.VarAA) || math.Abs(b-c.B) > 1e-6*math.Sqrt(c.VarBB) || !near(d.LogLikelihood(), c.LogLik, 1e-10) {
				// R's optimiser stops a little short of the top.
				if d.LogLikelihood() < c.LogLik-1e-9 || math.Abs(a-c.A) > 1e-3*math.Sqrt(c.VarAA) || math.Abs(b-c.B) > 1e-3*math.Sqrt(c.VarBB) {
					t.Errorf("a %.12g b %.12g loglik %.14g, want %.12g %.12g %.14g", a, b, d.LogLikelihood(), c.A, c.B, c.LogLik)
				}
			}
			if !near(aa, c.VarAA, 1e-3) || !near(bb, c.VarBB, 1e-3) || math.Abs(ab-c.CovAB) > 1e-3*math.Sqrt(c.VarAA*c.VarBB) {
				t.Errorf("covariance %.8g %.8g %.8g, want %.8g %.8g %.8g", aa, ab, bb, c.VarAA, c.CovAB, c.VarBB)
			}
			if q := d.Quantile(c.P); !near(q, c.Quantile, 1e-5) {
				t.Errorf("quantile %v, want %v", q, c.Quantile)
			}
			iv, err := ProfileQuantile(families[c.Family], r, c.P, 0.95)
			for i, got := range []float64{iv.Lower, iv.Upper} {
				if want := c.Profile[i]; err != nil || want == nil && !math.IsInf(got, 0) || want != nil && !near(got, *want, 1e-5) {
					t.Errorf("profile %+v %v, at %d want %v", iv, err, i, want)
				}
			}
		})
	}
}

func TestGammaQuantile(t *testing.T) {
	r := loadFamilies(t)
	for i, k := range r.GammaShape {
		d := Gamma{Shape: k, Scale: 3}
		q := d.Quantile(r.GammaP[i])
		if !near(q, 3*r.GammaQuantile[i], 1e-9) {
			t.Errorf("shape %v p %v: %.17g, want %.17g", k, r.GammaP[i], q, 3*r.GammaQuantile[i])
		}
	}
}

// Each distribution is one: the density is the slope of the CDF, the survival
// its complement, the quantile its inverse; nothing is below 0 where nothing can
// be.
func TestDistributions(t *testing.T) {
	for _, d := range []Distribution{
		Normal{Mu: 42, Sigma: 0.9}, Lognormal{Normal{Mu: 0.6, Sigma: 0.55}}, Weibull{Shape: 14, Scale: 96}, Weibull{Shape: 0.8, Scale: 1e-9},
		Gamma{Shape: 4, Scale: 0.5}, Gamma{Shape: 2200, Scale: 0.02}, Gamma{Shape: 0.4, Scale: 1e-9},
	} {
		for _, p := range []float64{1e-6, 0.00135, 0.3, 0.5, 0.9, 0.99865, 1 - 1e-6} {
			x := d.Quantile(p)
			if !near(d.CDF(x), p, 1e-8) || !near(d.Survival(x), 1-p, 1e-8) {
				t.Errorf("%v %+v: at %v CDF %v survival %v, want %v", d.Family(), d, x, d.CDF(x), d.Survival(x), p)
			}
			h := math.Min((d.Quantile(0.6)-d.Quantile(0.4))*1e-4, x*1e-4)
			if x-h > 0 && p > 1e-3 && p < 0.999 {
				if slope := (d.CDF(x+h) - d.CDF(x-h)) / (2 * h); !near(d.Density(x), slope, 1e-4) {
					t.Errorf("%v %+v: density at %v %v, slope %v", d.Family(), d, x, d.Density(x), slope)
				}
			}
		}
		if d.Family() != NormalFamily && (d.CDF(-1) != 0 || d.Survival(0) != 1 || d.Density(-1) != 0) {
			t.Errorf("%v below 0", d.Family())
		}
		if d.Family().String() == "unknown" || Family(0).String() != "unknown" {
			t.Error("names")
		}
	}
}

func TestFamilyFailures(t *testing.T) {
	nan, inf := math.NaN(), math.Inf(1)
	all := []Family{NormalFamily, LognormalFamily, WeibullFamily, GammaFamily}
	for _, f := range all {
		for _, c := range []struct {
			name string
			r    Readings
			want error
		}{
			{"empty", Readings{}, ErrNoValues},
			{"missing", Readings{Values: []float64{nan}, Censor: []int8{1}}, ErrNoValues},
			{"constant", Readings{Values: []float64{2, 2, 2}}, ErrTooFew},
			{"infinite", Readings{Values: []float64{2, 3, inf}}, ErrInfinite},
			{"outside", Readings{Values: []float64{2, 3, 4}, From: 2.5, To: 9}, ErrOutside},
		} {
			if d, err := Fit(f, c.r); err != c.want {
				t.Errorf("%v, %s: %+v %v, want %v", f, c.name, d, err, c.want)
			}
			if iv, err := ProfileQuantile(f, c.r, 0.5, 0.9); err == nil || iv.Why == "" {
				t.Errorf("%v, %s: profile %+v", f, c.name, iv)
			}
		}
		if f != NormalFamily {
			if _, err := Fit(f, Readings{Values: []float64{1, 2, 0}}); err != ErrNotPositive {
				t.Errorf("%v of 0: %v", f, err)
			}
			if _, err := Fit(f, Readings{Values: []float64{1, 2, -1}, Censor: []int8{0, 0, -1}}); err != ErrNotPositive {
				t.Errorf("%v at most -1: %v", f, err)
			}
			// At least -1 says nothing.
			if d, err := Fit(f, Readings{Values: []float64{1, 2, 2.5, -1}, Censor: []int8{0, 0, 0, 1}}); err != nil || d.Count().N != 3 {
				t.Errorf("%v at least -1: %+v %v", f, d, err)
			}
		}
		// A share growing to the end of what was kept has no top of its own.
		var flat []float64
		for i := range 60 {
			flat = append(flat, 1+float64(i)/60)
		}
		if d, err := Fit(f, Readings{Values: flat, From: 1, To: 2}); err == nil && !(d.Quantile(0.99) > 2) {
			t.Errorf("%v of a flat screened sample: %+v", f, d)
		}
		for _, bad := range []func(){
			func() { Fit(f, Readings{Values: []float64{1}, Upper: []float64{}}) },
			func() { Fit(f, Readings{Values: []float64{1, 2}, From: 3, To: 3}) },
			func() { ProfileQuantile(f, Readings{}, 1, 0.9) },
		} {
			mustPanic(t, bad)
		}
	}
	mustPanic(t, func() { Fit(0, Readings{}) })
	mustPanic(t, func() { QuantileInterval(Normal{}, 0.5, 1) })
}

// Fits follow the unit, volts or picoamperes.
func TestFamiliesFollowScale(t *testing.T) {
	r := rand.New(rand.NewPCG(8, 1))
	x, mark := make([]float64, 300), make([]int8, 300)
	for i := range x {
		x[i] = 1.8 * math.Exp(0.5*r.NormFloat64())
		if x[i] < 1 {
			x[i], mark[i] = 1, -1
		}
	}
	for _, f := range []Family{LognormalFamily, WeibullFamily, GammaFamily} {
		d, err := Fit(f, Readings{Values: x, Censor: mark})
		if err != nil {
			t.Fatal(err)
		}
		for _, scale := range []float64{1e-12, 1e9} {
			y := make([]float64, len(x))
			for i := range x {
				y[i] = scale * x[i]
			}
			e, err := Fit(f, Readings{Values: y, Censor: mark})
			if err != nil || !near(e.Quantile(0.01), scale*d.Quantile(0.01), 1e-7) {
				t.Errorf("%v times %v: %+v %v, from %+v", f, scale, e, err, d)
			}
			a, b := QuantileInterval(d, 0.9, 0.95), QuantileInterval(e, 0.9, 0.95)
			if !near(b.Lower, scale*a.Lower, 1e-6) || !near(b.Upper, scale*a.Upper, 1e-6) {
				t.Errorf("%v times %v: %+v, from %+v", f, scale, b, a)
			}
		}
	}
}
