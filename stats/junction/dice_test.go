package junction

import (
	"math"
	"math/rand/v2"
	"testing"
)

func demoModel(t testing.TB) *Model {
	t.Helper()
	m, err := NewModel(demoDevice(), demoTests()...)
	if err != nil {
		t.Fatal(err)
	}
	return m
}

// dieColumns makes readings of n dice around nominal by the model itself: speed and
// agreement with Invert are tested here, physics elsewhere.
func dieColumns(m *Model, n int) (columns [][]float64, truth []Process) {
	r := rand.New(rand.NewPCG(3, 3))
	columns = make([][]float64, len(m.Tests))
	for i := range columns {
		columns[i] = make([]float64, n)
	}
	dst := make([]float64, len(m.Tests))
	truth = make([]Process, n)
	for k := range n {
		u, v := normal(r, 0.08), normal(r, 0.08)
		p := m.processAt(u, v, &Process{EmitterGummel: normal(r, 0.1), BaseDose: normal(r, 0.05)})
		truth[k] = p
		m.LogRatios(dst, &p)
		for i := range dst {
			columns[i][k] = m.Level(i) * math.Exp(dst[i]+normal(r, UsualSigma(m.Tests[i].Measures)))
		}
	}
	return columns, truth
}

// TestDice holds the fast inversion to the grid's: the same readings, nearly the
// same answer, and the sigmas it states.
func TestDice(t *testing.T) {
	m := demoModel(t)
	columns, truth := dieColumns(m, 200)
	all := make([]int, len(m.Tests))
	for i := range all {
		all[i] = i
	}
	prior := UsualPrior()
	prior.Knee, prior.Response, prior.GainSlope = 0, 0, 0
	columns[2][5] = math.NaN()
	censor := make([][]int8, len(all))
	censor[0] = make([]int8, 200)
	censor[0][7] = 1
	got := m.Dice(all, make([]float64, len(all)), prior, [2]float64{}, EmitterGummel).Invert(columns, censor)
	var zz float64
	for k := range truth {
		var r []Reading
		for i := range all {
			x := Reading{Test: i, LogRatio: math.Log(columns[i][k] / m.Level(i))}
			if censor[i] != nil {
				x.Censor = int(censor[i][k])
			}
			r = append(r, x)
		}
		if k < 20 {
			want := m.Invert(r, prior)
			// Mode against mean of nearly the same posterior, linearised at nominal: half a sigma.
			if d := math.Log(got.Thickness[k] / want.NetThickness.WithPrior.Estimate); math.Abs(d) > 0.5*got.ThicknessSigma[k] {
				t.Errorf("die %d: thickness %.4f by the fast way, %.4f by the grid (sigma %.4f)", k, got.Thickness[k], want.NetThickness.WithPrior.Estimate, got.ThicknessSigma[k])
			}
			if d := math.Log(got.Doping[k] / want.Doping.WithPrior.Estimate); math.Abs(d) > 0.5*got.DopingSigma[k] {
				t.Errorf("die %d: doping %.4g by the fast way, %.4g by the grid", k, got.Doping[k], want.Doping.WithPrior.Estimate)
			}
		}
		z := (math.Log(got.Doping[k]/m.Device.EpiDopingCM3) - truth[k][EpiDoping]) / got.DopingSigma[k]
		zz += z * z
	}
	if zz /= float64(len(truth)); zz < 0.6 || zz > 1.6 {
		t.Errorf("doping errors have %.2f times the stated variance", zz)
	}
	if got.Params[0][0] == 1 {
		t.Error("emitter Gummel number did not move")
	}
}

func TestDiceMissing(t *testing.T) {
	m := demoModel(t)
	columns, _ := dieColumns(m, 3)
	for i := range columns {
		columns[i][1] = math.NaN()
	}
	all := []int{0, 1, 2, 3, 4, 5, 6, 7, 8}
	got := m.Dice(all, make([]float64, 9), UsualPrior(), [2]float64{}).Invert(columns, nil)
	if !math.IsNaN(got.Thickness[1]) || math.IsNaN(got.Thickness[0]) || math.IsNaN(got.Doping[2]) {
		t.Errorf("thickness %v, want NaN for the die without readings only", got.Thickness)
	}
}

func BenchmarkDice(b *testing.B) {
	m := demoModel(b)
	columns, _ := dieColumns(m, 100000)
	all := []int{0, 1, 2, 3, 4, 5, 6, 7, 8}
	d := m.Dice(all, make([]float64, 9), UsualPrior(), [2]float64{})
	for b.Loop() {
		d.Invert(columns, nil)
	}
	b.ReportMetric(float64(b.Elapsed().Seconds())/float64(b.N)*10, "s/Mdice")
}
