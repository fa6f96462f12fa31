package junction_test

import (
	"fmt"
	"math"

	"kneepoint/stats/junction"
)

// A lot of an invented product reads low in BVceo and high in Cob above
// punch-through: its epi is thin, and the tests can see it.
func ExampleModel_Invert() {
	product := junction.Device{
		EpiThicknessUM: 3.3, EpiResistivityOhmCM: 1.72, UpDiffusionUM: 0.05, SubstrateCM3: 1e19,
		BaseDepthUM: 0.75, BaseSurfaceCM3: 1.2e18, BaseAreaUM2: 60000, BasePerimeterUM: 1000,
		EmitterDepthUM: 0.25, EmitterAreaUM2: 20000, EmitterPerimeterUM: 800, CornerRadiusUM: 20,
	}
	m, err := junction.NewModel(product,
		junction.Test{Name: "BVCEO", Measures: junction.BVceo, Current: 1e-3, Baseline: junction.Level{Median: 24.8}},
		junction.Test{Name: "HFE", Measures: junction.HFE, Baseline: junction.Level{Median: 125}},
		junction.Test{Name: "COB", Measures: junction.Cob, Voltage: 5, Baseline: junction.Level{Median: 4.1e-12}},
		junction.Test{Name: "COB30", Measures: junction.Cob, Voltage: 30, Baseline: junction.Level{Median: 2.85e-12}},
	)
	if err != nil {
		fmt.Println(err)
		return
	}
	median := map[string]float64{"BVCEO": 23.3, "HFE": 124, "COB": 4.1e-12, "COB30": 3.04e-12}
	var readings []junction.Reading
	for i, t := range m.Tests {
		readings = append(readings, junction.Reading{Test: i, LogRatio: math.Log(median[t.Name] / m.Level(i)), Sigma: 0.01})
	}
	p := m.Invert(readings, junction.UsualPrior())
	fmt.Printf("nominal net epi %.2f um\n", m.NetThickness())
	fmt.Printf("net epi %.2f um (%.2f to %.2f), data alone %.2f um, %s\n", p.NetThickness.WithPrior.Estimate,
		p.NetThickness.WithPrior.Lower, p.NetThickness.WithPrior.Upper, p.NetThickness.DataOnly.Estimate, p.NetThickness.Sight)
	fmt.Println(p.Regime)
	// Output:
	// nominal net epi 2.14 um
	// net epi 1.89 um (1.80 to 1.97), data alone 1.91 um, observable
	// reach-through
}
