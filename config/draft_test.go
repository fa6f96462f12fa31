package config

import (
	"bytes"
	"math"
	"math/rand/v2"
	"os"
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"
)

// Spellings of the trade: common practice, no source.
func TestGuessMeasures(t *testing.T) {
	volt, amp, farad, hertz, ohm := Unit{"V", "V", 0}, Unit{"nA", "A", -9}, Unit{"pF", "F", -12}, Unit{"MHz", "Hz", 6}, Unit{"ohm", "ohm", 0}
	ratio := Unit{"", "ratio", 0}
	for _, c := range []struct {
		names string
		unit  Unit
		want  string
	}{
		{"BVCEO BV_CEO V(BR)CEO V_BR_CEO VBRCEO BVceo_1mA BVCEO1 BVCEO1MA bvceo@1mA T12_BVCEO LVCEO BVCEO_SUS VCEO(SUS) VCEO BV-CEO BVceo.Q1 1:BVCEO", volt, "bvceo"},
		{"BVCBO V(BR)CBO BVcbo_10uA VCBO BV_CBO BVCBO_2 BV_CB_O", volt, "bvcbo"},
		{"BVEBO V(BR)EBO VEBO BVebo", volt, "bvebo"},
		{"BVCES V(BR)CES VCES", volt, "bvces"},
		{"ICBO ICBO_20V Icbo@20V I_CBO ICBO1 ICBO20V", amp, "icbo"},
		{"ICEO I(CEO) ICEO_10V", amp, "iceo"},
		{"IEBO IEBO_4V", amp, "iebo"},
		{"HFE1 H_FE hFE HFE HFE@2mA BETA BETA1 HFE_10uA h(FE)2 2_HFE", ratio, "hfe"},
		{"VCE_SAT VCESAT VCE(sat) VCEsat@50mA V_CE_SAT VCESAT1 VCE(ON)SAT", volt, "vcesat"},
		{"VBESAT VBE_SAT VBE(sat)", volt, "vbesat"},
		{"COB CCB COBO CJC CBC COB30 COB_10V CCBO C_OB", farad, "cob"},
		{"FT F_T FT1 fT", hertz, "ft"},
		{"RPINCH R_PINCH RB_PINCH PINCH_R", ohm, "rpinch"},
		{"RB RBB RB1", ohm, "rb"},
		{"RC RCS RC_SAT RCSAT", ohm, "rc"},
		{"DELTA_HFE HFE_RATIO HFE1/HFE2_RATIO DHFE BVCEO_SIGMA LOG_ICBO HFE_LIN HFE_DRIFT VBE VBEON VCE THICKNESS ICES FTEST MYBVCEOX RBIN BVCEO_BVCBO SHIFT_BVCEO", Unit{}, ""},
		{"ICBO ICEO", volt, ""},                    // a voltage is no leakage
		{"HFE BETA", amp, ""},                      // the base current of a gain test
		{"BVCEO HFE", Unit{"um", "m", -6}, ""},     // nor is a length
		{"FT", Unit{"um", "m", -6}, ""},            // film thickness
		{"BVCEO HFE1 ICBO COB", Unit{}, "-itself"}, // no unit: the name decides
	} {
		for _, name := range strings.Fields(c.names) {
			want := c.want
			if want == "-itself" {
				want = strings.TrimRight(strings.ToLower(name), "1")
			}
			if got := GuessMeasures(name, c.unit); got != want {
				t.Errorf("GuessMeasures(%q, %s) = %q, want %q", name, c.unit.Base, got, want)
			}
		}
	}
}

func written(t *testing.T, p *Product) []byte {
	t.Helper()
	var b bytes.Buffer
	if err := Write(&b, p); err != nil {
		t.Fatal(err)
	}
	return b.Bytes()
}

func TestWriteExample(t *testing.T) {
	p := mustLoad(t, productDir+"mp-n24.yaml")
	text := written(t, p)
	again, err := ParseProduct("again.yaml", text)
	if diff := cmp.Diff(p, again, sameProduct); err != nil || diff != "" {
		t.Fatalf("%v\n%s\n%s", err, diff, text)
	}
	if !bytes.Equal(text, written(t, again)) {
		t.Error("written twice, the text differs")
	}
	for _, line := range []string{
		"product: MP-N24",
		"    thickness_um: {target: 3.3, lower: 3.1, upper: 3.5}",
		"  base: {junction_depth_um: 0.75, surface_concentration_cm3: 1.2e18, area_um2: 60000, perimeter_um: 1000}",
		`  - {name: ICBO, measures: icbo, unit: nA, upper: 5, at: "VCB=20V"}`,
		"    BVCEO: {median: 24.8, sigma: 0.6, within_lot_sigma: 0.5, lot_sigma: 0.3}",
	} {
		if !bytes.Contains(text, []byte(line+"\n")) {
			t.Errorf("no line %q in\n%s", line, text)
		}
	}
}

// A draft knows tests, units and limits: the rest stands as templates that load
// once the comment marks are gone and values are filled in.
func TestWriteDraft(t *testing.T) {
	nan := math.NaN()
	draft := &Product{Name: "7: #x", TestTemperatureC: 25, Tests: []Test{
		{Name: "BVceo, 1mA", Measures: "bvceo", Unit: Unit{"V", "V", 0}, Lower: 22.5, Upper: nan, Clamp: nan, Floor: nan},
		{Name: "yes", Unit: Unit{"µA", "A", -6}, Lower: nan, Upper: 4.2e-6, Clamp: nan, Floor: nan},
		{Name: "a \"b\"\n", Unit: Unit{"", "ratio", 0}, Lower: nan, Upper: nan, Clamp: nan, Floor: nan, AtText: "@ 5 volts"},
	}}
	text := string(written(t, draft))
	got, err := ParseProduct("draft.yaml", []byte(text))
	draft.Tests[2].Name, draft.Tests[2].AtText = `a "b"`, "" // texts are trimmed; what is no condition is a comment
	if diff := cmp.Diff(draft, got, sameProduct); err != nil || diff != "" {
		t.Fatalf("%v\n%s\n%s", err, diff, text)
	}
	for _, want := range []string{"# device:", "#   polarity: npn", "# wafer:", "# columns:", "# bins:", "# baseline:", `at "@ 5 volts" is not of the form`} {
		if !strings.Contains(text, want) {
			t.Errorf("no %q in\n%s", want, text)
		}
	}
	// The device template is right: with its marks off and polarity alone filled in, it loads.
	filled := strings.NewReplacer("# device:", "device:", "#   ", "  ").Replace(text)
	filled = strings.Replace(filled, "  yield: 0.95", "# ", 1)
	filled = strings.Replace(filled, "  tests: {NAME", "# {", 1)
	p, err := ParseProduct("filled.yaml", []byte(filled))
	if err != nil || p.Device == nil || p.Device.Polarity != "npn" {
		t.Fatalf("%v\n%s", err, filled)
	}
}

// Random products, as LoadProduct could have returned them, survive writing and
// loading; what is written depends on nothing else.
func TestWriteRoundTrip(t *testing.T) {
	r := rand.New(rand.NewPCG(7, 8))
	texts := []string{"BVCEO", "true", "12", "Q1.BV", "a b", "x: y", "µ", "#", "-", "{", "it's", "~", "2024-05-06", "0x1F", "a, b", "é\u2028z", "1e5", "null", "<<", "=", "!t", "&a", "*a", "%", "@", "`", "|"}
	number := func() float64 {
		if r.IntN(3) == 0 {
			return math.NaN()
		}
		return r.Float64() * math.Pow10(r.IntN(7))
	}
	quantity := func() Quantity {
		q := Quantity{number(), math.NaN()}
		if !math.IsNaN(q.Value) {
			q.Sigma = number()
		}
		return q
	}
	for i := range 400 {
		p := &Product{Name: texts[r.IntN(len(texts))], TestTemperatureC: float64(r.IntN(300))}
		if r.IntN(2) == 0 {
			d := &Device{Polarity: "pnp"}
			d.Epi.ThicknessUM, d.Epi.ResistivityOhmCM = Spec{math.NaN(), 1e-3 + r.Float64(), math.NaN()}, Spec{r.Float64() + 1e-9, math.NaN(), math.NaN()}
			d.Epi.UpDiffusionUM, d.Epi.SubstrateCM3, d.Epi.SiliconConsumedUM = Quantity{math.NaN(), math.NaN()}, quantity(), Quantity{math.NaN(), math.NaN()}
			d.Base.JunctionDepthUM, d.Base.SurfaceConcentrationCM3 = Quantity{math.NaN(), math.NaN()}, quantity()
			d.Base.AreaUM2, d.Base.PerimeterUM = quantity(), quantity()
			d.Emitter.DepthUM, d.Emitter.AreaUM2, d.Emitter.PerimeterUM = Quantity{math.NaN(), math.NaN()}, Quantity{math.NaN(), math.NaN()}, quantity()
			d.Edge.CornerRadiusUM, d.Edge.FieldPlate = quantity(), r.IntN(2) == 0
			p.Device = d
		}
		if r.IntN(2) == 0 {
			p.Wafer = Wafer{DiameterMM: 150, DieWidthMM: r.Float64() + 0.1, DieHeightMM: 0.3, EdgeExclusionMM: float64(r.IntN(4)), Notch: "left", ShotColumns: 3, ShotRows: 4}
			p.Columns = map[string]string{"x": texts[r.IntN(len(texts))], "part": "P"}
			p.Bins = Bins{Pass: []int{3, 1}, Names: map[int]string{3: texts[r.IntN(len(texts))], 0: "zero"}}
			p.Causes = []map[string]any{{"cause": texts[r.IntN(len(texts))], "Weights": map[string]any{"BVceo": -0.5, "1": 2.0}, "list": []any{1.0, "2", true, nil}}}
			p.Baseline = &Baseline{Yield: 0.5, Tests: map[string]BaselineTest{}}
		}
		for j, k := range r.Perm(len(texts))[:1+r.IntN(4)] {
			u := []Unit{{}, {"nA", "A", -9}, {"%", "ratio", -2}, {"Å", "m", -10}, {"", "ratio", 0}}[r.IntN(5)]
			test := Test{Name: texts[k], Unit: u, Lower: math.NaN(), Upper: u.ToSI(number()), Clamp: math.NaN(), Floor: math.NaN()}
			if j == 0 {
				test.AtText = "IC=10uA; X=2 1"
				test.At, _ = ParseConditions(test.AtText)
			}
			if p.Baseline != nil && !math.IsNaN(test.Upper) && test.Upper > 0 {
				p.Baseline.Tests[test.Name] = BaselineTest{test.Upper, test.Upper, math.NaN(), math.NaN()}
			}
			p.Tests = append(p.Tests, test)
		}
		if p.Baseline != nil && len(p.Baseline.Tests) == 0 {
			p.Baseline.Tests = nil
		}
		text := written(t, p)
		got, err := ParseProduct("p.yaml", text)
		if diff := cmp.Diff(p, got, sameProduct); err != nil || diff != "" {
			t.Fatalf("product %d: %v\n%s\n%s", i, err, diff, text)
		}
	}
}

func TestWriteFails(t *testing.T) {
	if err := Write(failing{}, &Product{}); err == nil {
		t.Error("no error from a writer that fails")
	}
}

type failing struct{}

func (failing) Write([]byte) (int, error) { return 0, os.ErrClosed }
