package junction

import (
	"math"
	"math/rand/v2"
	"testing"
)

// referenceModel is the model of a device of the tables with all of its tests.
func referenceModel(t testing.TB, name string) (*Model, *reference) {
	t.Helper()
	refs, err := references("../../testdata/physics")
	if err != nil {
		t.Fatal(err)
	}
	r := refs[name]
	var tests []Test
	for _, n := range sortedKeys(r.Jacobian) {
		x, _ := r.test(n)
		tests = append(tests, x)
	}
	m, err := NewModel(r.device(), tests...)
	if err != nil {
		t.Fatal(err)
	}
	return m, r
}

// usualSpread is one sigma of each parameter between lots (common practice, no
// source).
var usualSpread = Process{EpiThickness: 0.04, EpiDoping: 0.06, BaseDose: 0.06, BaseDepth: 0.025, EmitterDepth: 0.04,
	UpDiffusion: 0.2, EdgeRadius: 0.06, MaskRadius: 0.1, OxideCharge: 0.4, Lifetime: 0.4, SurfaceVelocity: 0.5,
	EmitterGummel: 0.08, SeriesResistance: 0.2, Modulation: 0.2}

func TestTables(t *testing.T) {
	for _, name := range []string{"A", "B"} {
		m, r := referenceModel(t, name)
		rng := rand.New(rand.NewPCG(1, 2))
		worst := make([]float64, len(m.Tests))
		at := make([]Process, len(m.Tests))
		for range 150 {
			var p Process
			for i := range p {
				p[i] = usualSpread[i] * math.Max(-3, math.Min(3, rng.NormFloat64()*1.3))
			}
			x := m.Device.make(&p, &m.nat)
			for i := range m.Tests {
				exact := math.Log(x.value(&m.Tests[i]) / m.nominal.value(&m.Tests[i]))
				if d := math.Abs(math.Log(m.Ratio(i, p)) - exact); !(d <= worst[i]) {
					worst[i], at[i] = d, p
				}
			}
		}
		for i := range m.Tests {
			t.Logf("%s %-12s worst %.4f", name, m.Tests[i].Name, worst[i])
			if worst[i] > 0.02 {
				t.Errorf("%s %s: table off by %.4f at %.3f", name, m.Tests[i].Name, worst[i], at[i])
			}
			j := m.Sensitivity(i)
			for k, param := range r.Params {
				if want := r.Jacobian[m.Tests[i].Name][k]; math.Abs(j[tableParams[param]]-want) > 0.02 {
					t.Errorf("%s d ln %s / d ln %s = %.4f, the reference says %.4f", name, m.Tests[i].Name, param, j[tableParams[param]], want)
				}
			}
		}
	}
}

func BenchmarkModel(b *testing.B) {
	refs, err := references("../../testdata/physics")
	if err != nil {
		b.Fatal(err)
	}
	r := refs["B"]
	var tests []Test
	for _, n := range []string{"BVcbo", "BVceo", "BVebo", "Icbo", "hFE", "hFE_low", "Vcesat", "Cob"} {
		x, _ := r.test(n)
		tests = append(tests, x)
	}
	b.Run("build", func(b *testing.B) {
		for b.Loop() {
			if _, err := NewModel(r.device(), tests...); err != nil {
				b.Fatal(err)
			}
		}
	})
	m, err := NewModel(r.device(), tests...)
	if err != nil {
		b.Fatal(err)
	}
	dst := make([]float64, len(tests))
	b.Run("forward", func(b *testing.B) {
		for i := range b.N {
			p := Process{EpiDoping: float64(i%100) * 1e-3, BaseDose: 0.01, Lifetime: 0.1}
			m.LogRatios(dst, &p)
		}
	})
}
