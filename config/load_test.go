package config

import (
	"bytes"
	"errors"
	"math"
	"os"
	"path/filepath"
	"reflect"
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"
	"github.com/google/go-cmp/cmp/cmpopts"
)

const productDir = "../testdata/product/"

// sameProduct compares all but where the product came from.
var sameProduct = cmp.Options{cmpopts.EquateNaNs(), cmpopts.IgnoreFields(Product{}, "File", "SHA256")}

func mustLoad(t *testing.T, path string) *Product {
	t.Helper()
	p, err := LoadProduct(path)
	if err != nil {
		t.Fatal(err)
	}
	return p
}

// The example of the design, value by value.
func TestLoadProductExample(t *testing.T) {
	p := mustLoad(t, productDir+"mp-n24.yaml")
	nan := math.NaN()
	want := &Product{
		Name: "MP-N24",
		Wafer: Wafer{DiameterMM: 100, DieWidthMM: 0.45, DieHeightMM: 0.45, EdgeExclusionMM: 3, Notch: "down",
			ShotColumns: 8, ShotRows: 8},
		Columns: map[string]string{"lot": "LOT", "wafer": "WAFER", "x": "DIE_X", "y": "DIE_Y", "site": "SITE", "hard_bin": "HBIN", "soft_bin": "SBIN"},
		Bins: Bins{Pass: []int{1, 2, 3}, Names: map[int]string{1: "gain grade A", 2: "gain grade B",
			3: "gain grade C", 5: "breakdown"}},
		TestTemperatureC: 25,
		Baseline: &Baseline{Yield: 0.95, Tests: map[string]BaselineTest{
			"BVCBO": {41.9, 0.9, nan, nan}, "BVCEO": {24.8, 0.6, 0.5, 0.3}}},
	}
	d := &Device{Polarity: "npn"}
	d.Epi.ThicknessUM = Spec{3.3, 3.1, 3.5}
	d.Epi.ResistivityOhmCM = Spec{1.72, 1.55, 1.90}
	d.Epi.UpDiffusionUM = Quantity{0.05, nan}
	d.Epi.SubstrateCM3, d.Epi.SiliconConsumedUM = Quantity{nan, nan}, Quantity{nan, nan}
	d.Base.JunctionDepthUM, d.Base.SurfaceConcentrationCM3 = Quantity{0.75, nan}, Quantity{1.2e18, nan}
	d.Base.AreaUM2, d.Base.PerimeterUM = Quantity{60000, nan}, Quantity{1000, nan}
	d.Emitter.DepthUM, d.Emitter.AreaUM2, d.Emitter.PerimeterUM = Quantity{0.25, nan}, Quantity{20000, nan}, Quantity{800, nan}
	d.Edge.CornerRadiusUM = Quantity{20, nan}
	want.Device = d
	volt, nA, pF := Unit{"V", "V", 0}, Unit{"nA", "A", -9}, Unit{"pF", "F", -12}
	amps := func(name, unit string, exp int, v float64) Condition { return Condition{name, v, Unit{unit, "A", exp}} }
	volts := func(name string, v float64) Condition { return Condition{name, v, volt} }
	mhz := Condition{"F", 1e6, Unit{"MHz", "Hz", 6}}
	want.Tests = []Test{
		{"BVCBO", "bvcbo", volt, 35, nan, []Condition{amps("IC", "uA", -6, 1e-5)}, "IC=10uA", 80, nan},
		{"BVCEO", "bvceo", volt, 22.5, nan, []Condition{amps("IC", "mA", -3, 1e-3)}, "IC=1mA", nan, nan},
		{"BVEBO", "bvebo", volt, 6, nan, []Condition{amps("IE", "uA", -6, 1e-5)}, "IE=10uA", nan, nan},
		{"ICBO", "icbo", nA, nan, 5e-9, []Condition{volts("VCB", 20)}, "VCB=20V", nan, nan},
		{"HFE1", "hfe", Unit{}, 70, 250, []Condition{amps("IC", "uA", -6, 1e-5), volts("VCE", 5)}, "IC=10uA, VCE=5V", nan, nan},
		{"HFE2", "hfe", Unit{}, 80, 250, []Condition{amps("IC", "mA", -3, 2e-3), volts("VCE", 5)}, "IC=2mA, VCE=5V", nan, nan},
		{"VCESAT", "vcesat", volt, nan, 0.12, []Condition{amps("IC", "mA", -3, 0.05), amps("IB", "mA", -3, 0.005)}, "IC=50mA, IB=5mA", nan, nan},
		{"COB", "cob", pF, nan, 3.6e-12, []Condition{volts("VCB", 10), mhz}, "VCB=10V, F=1MHz", nan, nan},
		{"COB30", "cob", pF, nan, 3.1e-12, []Condition{volts("VCB", 30), mhz}, "VCB=30V, F=1MHz", nan, nan},
	}
	if diff := cmp.Diff(want, p, sameProduct); diff != "" {
		t.Error(diff)
	}
	if p.File != productDir+"mp-n24.yaml" || len(p.SHA256) != 64 {
		t.Errorf("file %q, hash %q", p.File, p.SHA256)
	}
}

func TestLoadProductFormatsAgree(t *testing.T) {
	yaml := mustLoad(t, productDir+"mp-n24.yaml")
	for _, ext := range []string{"toml", "json"} {
		other := mustLoad(t, productDir+"mp-n24."+ext)
		if diff := cmp.Diff(yaml, other, sameProduct); diff != "" {
			t.Errorf("%s: %s", ext, diff)
		}
	}
}

// parse reads YAML text as a product; lines is what its error says.
func parse(text string) (*Product, []string) {
	p, err := ParseProduct("p.yaml", []byte(text))
	if err == nil {
		return p, nil
	}
	return nil, strings.Split(err.Error(), "\n")
}

const head = "product: P\n"

func TestLoadProductAccepts(t *testing.T) {
	const one = "tests: [{name: T}]\n"
	for name, c := range map[string]struct {
		text  string
		check func(p *Product) bool
	}{
		"least":                {head + one, func(p *Product) bool { return p.TestTemperatureC == 25 && p.Device == nil && p.Baseline == nil }},
		"pnp":                  {head + one + "device: {polarity: pnp}\n", func(p *Product) bool { return p.Device.Polarity == "pnp" }},
		"pnp signed":           {head + "tests: [{name: T, unit: V, upper: -30, clamp: -80}]\n", func(p *Product) bool { return p.Tests[0].Clamp == -80 }},
		"keys without case":    {"Product: P\nTESTS: [{Name: T, Unit: mV, Lower: 5}]\n", func(p *Product) bool { return p.Tests[0].Lower == 0.005 }},
		"words without case":   {head + "tests: [{name: T, measures: BVCEO}]\nwafer: {notch: Up}\n", func(p *Product) bool { return p.Tests[0].Measures == "bvceo" && p.Wafer.Notch == "up" }},
		"nothing is not given": {head + "tests: [{name: T, lower: , upper: 5}]\nwafer:\nbaseline:\ndevice:\n", func(p *Product) bool { return math.IsNaN(p.Tests[0].Lower) && p.Device == nil && p.Baseline == nil }},
		"bare spec and quantity": {head + one + "device: {polarity: npn, epi: {thickness_um: 3.3, substrate_cm3: {value: 5e18, sigma: 1e18}}}\n", func(p *Product) bool {
			return p.Device.Epi.ThicknessUM.Target == 3.3 && p.Device.Epi.SubstrateCM3 == (Quantity{5e18, 1e18})
		}},
		"one passing bin":       {head + one + "bins: {pass: 1}\n", func(p *Product) bool { return p.Bins.PassBin(1) && !p.Bins.PassBin(2) }},
		"baseline without case": {head + "tests: [{name: BVceo, unit: V}]\nbaseline: {tests: {BVCEO: {median: 24}}}\n", func(p *Product) bool { return p.Baseline.Tests["BVceo"].Median == 24 && math.IsNaN(p.Baseline.Yield) }},
		"dotted test name":      {head + "tests: [{name: Q1.BVceo, unit: V}]\nbaseline: {tests: {Q1.BVceo: {median: 24}}}\n", func(p *Product) bool { return p.Baseline.Tests["Q1.BVceo"].Median == 24 }},
		"baseline in the unit": {head + "tests: [{name: I, measures: icbo, unit: nA, upper: 5}]\nbaseline: {tests: {I: {median: 0.5, sigma: 0.1}}}\n", func(p *Product) bool {
			return p.Baseline.Tests["I"].Median == 5e-10 && p.Baseline.Tests["I"].Sigma == 1e-10
		}},
		"ratio unit":   {head + "tests: [{name: H, measures: hfe, unit: 1, lower: 70}]\n", func(p *Product) bool { return p.Tests[0].Unit.Base == "ratio" }},
		"no exclusion": {head + one + "wafer: {diameter_mm: 100, edge_exclusion_mm: 0}\n", func(p *Product) bool { return p.Wafer.EdgeExclusionMM == 0 }},
		"causes raw": {head + one + "causes: [{cause: furnace-7, Prior: 2, since: 2024-05-06, Tests: {BVceo: [1, x]}}]\n", func(p *Product) bool {
			return reflect.DeepEqual(p.Causes, []map[string]any{{"cause": "furnace-7", "Prior": 2.0, "since": "2024-05-06", "Tests": map[string]any{"BVceo": []any{1.0, "x"}}}})
		}},
		"byte-order mark":          {"\xef\xbb\xbf" + head + one, func(p *Product) bool { return p.Name == "P" }},
		"Windows line ends":        {"product: P\r\ntests:\r\n  - name: T\r\n", func(p *Product) bool { return p.Tests[0].Name == "T" }},
		"document marks":           {"%YAML 1.1\n---\n# c\n" + head + one + "...\n", func(p *Product) bool { return p.Name == "P" }},
		"anchors":                  {head + "tests:\n - &t {name: T, unit: V, lower: 1}\n - {<<: *t, name: U}\n", func(p *Product) bool { return p.Tests[1].Lower == 1 && p.Tests[1].Name == "U" }},
		"clamp at the lower limit": {head + "tests: [{name: T, unit: V, lower: 80, clamp: 80}]\n", func(p *Product) bool { return p.Tests[0].Clamp == 80 }},
		"floor":                    {head + "tests: [{name: T, measures: icbo, unit: nA, upper: 5, floor: 0.01, clamp: 100}]\n", func(p *Product) bool { return p.Tests[0].Floor == 1e-11 }},
	} {
		p, lines := parse(c.text)
		if lines != nil {
			t.Errorf("%s: %s", name, strings.Join(lines, "\n"))
		} else if !c.check(p) {
			t.Errorf("%s: read as %+v", name, p)
		}
	}
}

// Each text has exactly the problems listed: key path, and a part of what is
// wrong and of the remedy.
func TestLoadProductProblems(t *testing.T) {
	tests := func(list string) string { return head + "tests: [" + list + "]\n" }
	with := func(rest string) string { return tests("{name: T, unit: V}") + rest + "\n" }
	device := func(rest string) string { return with("device: {polarity: npn, " + rest + "}") }
	for name, c := range map[string]struct {
		text string
		want []string // "key: what; remedy", "..." standing for anything
	}{
		"no tests":             {"product: P", []string{"tests: missing; list the tests"}},
		"empty tests":          {tests(""), []string{"tests: the list of tests is empty; list the tests"}},
		"tests as keys":        {head + "tests: {T: {unit: V}}", []string{"tests: a block of keys stands where a list belongs; list the tests"}},
		"test of nothing":      {head + "tests:\n - \n - name: T", []string{"tests[0]: nothing stands where a test belongs; write a block"}},
		"test as text":         {tests("T"), []string{`tests[0]: the text "T" stands where a block of keys belongs; its keys are name, measures`}},
		"test without name":    {tests("{unit: V}"), []string{"tests[0].name: missing; give the test's name"}},
		"blank name":           {tests("{name: ' '}"), []string{"tests[0].name: the text is blank; write a text"}},
		"number as name":       {tests("{name: 12}"), []string{"tests[0].name: the number 12 stands where text belongs; put it in quotes"}},
		"date as product":      {"product: 2024-05-06\ntests: [{name: T}]", []string{"product: the date 2024-05-06 stands where text belongs; put it in quotes"}},
		"true as product":      {"product: true\ntests: [{name: T}]", []string{"product: true stands where text belongs; put it in quotes"}},
		"duplicated test":      {tests("{name: T}, {name: U}, {name: T}"), []string{"tests[2].name: test T is listed already as tests[0]; give each test once"}},
		"test twice but case":  {tests("{name: T}, {name: t}"), []string{"tests[1].name: test t differs from T, tests[0], only in case...; give each test once"}},
		"unknown measures":     {tests("{name: T, measures: bvcoe}"), []string{`tests[0].measures: the text "bvcoe" is not known; did you mean bvceo?`}},
		"measures far off":     {tests("{name: T, measures: thickness}"), []string{"tests[0].measures: ...is not known; write bvceo, bvcbo"}},
		"unknown unit":         {tests("{name: T, unit: volz}"), []string{`tests[0].unit: unknown unit "volz"...; write a unit such as V, nA`}},
		"siemens":              {tests("{name: T, unit: mS}"), []string{"tests[0].unit: ...siemens...; write a unit such as"}},
		"megavolts":            {tests("{name: T, measures: vcesat, unit: MV}"), []string{"tests[0].unit: MV is megaV...; write mV for milli"}},
		"bvceo in A":           {tests("{name: T, measures: bvceo, unit: nA}"), []string{"tests[0].unit: bvceo is measured in volts, not in nA; give a unit of volts"}},
		"hfe in V":             {tests("{name: T, measures: hfe, unit: V}"), []string{"tests[0].unit: hfe is measured in a ratio, not in V"}},
		"cob as ratio":         {tests("{name: T, measures: cob, unit: ''}"), []string{"tests[0].unit: cob is measured in farads, not in a ratio"}},
		"leakage without unit": {tests("{name: T, measures: icbo, upper: 5}"), []string{"tests[0].unit: T has no unit, and upper 5 would be 5 A; give the unit"}},
		"ft without unit":      {tests("{name: T, measures: ft, lower: 150}"), []string{"tests[0].unit: T has no unit, and lower 150 would be 150 Hz"}},
		"upper below lower":    {tests("{name: T, unit: V, lower: 70, upper: 60}"), []string{"tests[0].upper: T: upper 60 is below lower 70; swap them"}},
		"text for number":      {tests("{name: T, lower: abc}"), []string{`tests[0].lower: the text "abc" stands where a number belongs; write a number such as`}},
		"quoted number":        {tests("{name: T, lower: '35'}"), []string{`tests[0].lower: the text "35" stands where a number belongs; take the quotes away: 35`}},
		"number with unit":     {tests("{name: T, lower: 35V}"), []string{`tests[0].lower: the text "35V" stands where a number belongs`}},
		"nan":                  {tests("{name: T, lower: .nan, upper: .inf}"), []string{"tests[0].lower: NaN is no finite number", "tests[0].upper: +Inf is no finite number"}},
		"too large":            {tests("{name: T, lower: 1e999}"), []string{`tests[0].lower: the text "1e999" stands where a number belongs`}},
		"list for number":      {tests("{name: T, lower: [1]}"), []string{"tests[0].lower: a list stands where a number belongs"}},
		"bad condition":        {tests("{name: T, at: 'IC=10uA, VCE'}"), []string{`tests[0].at: condition "IC=10uA, VCE", character 10...; write conditions as in`}},
		"condition unit":       {tests("{name: T, at: VCE=5A}"), []string{"tests[0].at: VCE has A; give it in V, as in VCE=5V"}},
		"condition bare":       {tests("{name: T, at: IC=10}"), []string{"tests[0].at: IC has no unit; give it in A, as in IC=10uA"}},
		"clamp below lower":    {tests("{name: T, unit: V, lower: 35, clamp: 30}"), []string{"tests[0].clamp: clamp 30 is on the wrong side of lower 35: no die could pass; give the largest"}},
		"clamp below upper":    {tests("{name: T, unit: V, upper: 35, clamp: 30}"), []string{"tests[0].clamp: clamp 30 is on the wrong side of upper 35: no die could fail"}},
		"clamp signed":         {tests("{name: T, unit: V, upper: -35, clamp: -30}"), []string{"tests[0].clamp: clamp -30 is on the wrong side of upper -35: no die could pass"}},
		"clamp of nothing":     {tests("{name: T, unit: V, clamp: 0}"), []string{"tests[0].clamp: clamp 0 would make every reading one at the clamp"}},
		"floor above upper":    {tests("{name: T, unit: nA, upper: 5, floor: 6}"), []string{"tests[0].floor: floor 6 is on the wrong side of upper 5: no die could pass"}},
		"floor above lower":    {tests("{name: T, unit: nA, lower: 5, floor: 6}"), []string{"tests[0].floor: floor 6 is on the wrong side of lower 5"}},
		"floor above clamp":    {tests("{name: T, unit: nA, floor: 6, clamp: 5}"), []string{"tests[0].floor: floor 6 is not below clamp 5"}},
		"misspelt in test":     {tests("{name: T, uppper: 5}"), []string{"tests[0].uppper: unknown key; did you mean upper?"}},
		"misspelt name":        {tests("{nmae: T}"), []string{"tests[0].nmae: unknown key; did you mean name?"}},

		"misspelt at the top":     {with("prodct: Q"), []string{"prodct: unknown key; did you mean product?"}},
		"misspelt tests":          {"product: P\ntest: [{name: T}]", []string{"test: unknown key; did you mean tests?"}},
		"nothing like it":         {with("services: {web: 1}"), []string{"services: unknown key; keys known here are product, device"}},
		"unit left out":           {with("wafer: {diameter: 100}"), []string{"wafer.diameter: unknown key; did you mean diameter_mm?"}},
		"misplaced":               {with("thickness_um: 3"), []string{"thickness_um: unknown key; thickness_um belongs under device.epi"}},
		"misplaced below":         {with("wafer: {test_temperature_c: 3}"), []string{"wafer.test_temperature_c: unknown key; test_temperature_c belongs at the top"}},
		"key twice but case":      {with("Product: Q"), []string{"product: the key stands twice, as Product too; keep one"}},
		"wafer as number":         {with("wafer: 100"), []string{"wafer: the number 100 stands where a block of keys belongs; its keys are diameter_mm"}},
		"no polarity":             {with("device: {epi: {thickness_um: 3}}"), []string{"device.polarity: missing; write polarity: npn"}},
		"polarity":                {with("device: {polarity: mos}"), []string{`device.polarity: the text "mos" is not known; write npn or pnp`}},
		"misspelt polarity":       {with("device: {polarty: npn}"), []string{"device.polarty: unknown key; did you mean polarity?"}},
		"misspelt deep":           {device("epi: {thickness_um: {traget: 3}}"), []string{"device.epi.thickness_um.traget: unknown key; did you mean target?"}},
		"misspelt quantity":       {device("base: {area_um2: {value: 3, sigm: 1}}"), []string{"device.base.area_um2.sigm: unknown key; did you mean sigma?"}},
		"spec upper below lower":  {device("epi: {thickness_um: {lower: 3.5, upper: 3.1}}"), []string{"device.epi.thickness_um.upper: upper 3.1 is below lower 3.5; swap them"}},
		"target outside":          {device("epi: {thickness_um: {target: 4, lower: 3.1, upper: 3.5}}"), []string{"device.epi.thickness_um.target: target 4 is outside of its limits 3.1 to 3.5"}},
		"target above upper":      {device("epi: {resistivity_ohm_cm: {target: 4, upper: 3.5}}"), []string{"device.epi.resistivity_ohm_cm.target: target 4 is outside of its limits up to 3.5"}},
		"zero thickness":          {device("epi: {thickness_um: 0}"), []string{"device.epi.thickness_um: 0 is not above zero"}},
		"negative lower":          {device("epi: {thickness_um: {lower: -1}}"), []string{"device.epi.thickness_um.lower: -1 is not above zero"}},
		"negative up-diffusion":   {device("epi: {up_diffusion_um: -0.1}"), []string{"device.epi.up_diffusion_um: -0.1 is negative"}},
		"zero area":               {device("base: {area_um2: 0}"), []string{"device.base.area_um2: 0 is not above zero"}},
		"negative sigma":          {device("base: {area_um2: {value: 5, sigma: -1}}"), []string{"device.base.area_um2.sigma: -1 is negative"}},
		"sigma alone":             {device("base: {area_um2: {sigma: 1}}"), []string{"device.base.area_um2.value: missing; write {value: 60000}"}},
		"concentration":           {device("base: {surface_concentration_cm3: 1.2e24}"), []string{"device.base.surface_concentration_cm3: 1.2e+24 is more than silicon allows"}},
		"text as quantity":        {device("base: {area_um2: big}"), []string{`device.base.area_um2: the text "big" stands where a number belongs`}},
		"no net epi":              {device("epi: {thickness_um: 3, up_diffusion_um: 0.5}, base: {junction_depth_um: 2.5}"), []string{"device.base.junction_depth_um: base, up-diffusion and consumed silicon take 3 um and leave nothing"}},
		"no base":                 {device("base: {junction_depth_um: 0.7}, emitter: {depth_um: 0.8}"), []string{"device.emitter.depth_um: an emitter 0.8 um deep leaves no base"}},
		"emitter beyond its base": {device("base: {area_um2: 100}, emitter: {area_um2: 200}"), []string{"device.emitter.area_um2: an emitter of 200 um2 is larger"}},
		"field plate":             {device("edge: {field_plate: maybe}"), []string{"device.edge.field_plate: ...stands where true or false belongs"}},

		"zero diameter":          {with("wafer: {diameter_mm: 0}"), []string{"wafer.diameter_mm: 0 is not above zero"}},
		"diameter in um":         {with("wafer: {diameter_mm: 100000}"), []string{"wafer.diameter_mm: 100000 is more than any wafer has"}},
		"negative die":           {with("wafer: {die_width_mm: -1, die_height_mm: 1}"), []string{"wafer.die_width_mm: -1 is not above zero"}},
		"one side of a die":      {with("wafer: {die_width_mm: 1}"), []string{"wafer.die_height_mm: missing; give the die's width and height"}},
		"die larger than wafer":  {with("wafer: {diameter_mm: 100, die_width_mm: 1, die_height_mm: 120}"), []string{"wafer.die_height_mm: a die of 1 by 120 mm does not fit on a wafer of 100 mm"}},
		"exclusion over radius":  {with("wafer: {diameter_mm: 100, edge_exclusion_mm: 50}"), []string{"wafer.edge_exclusion_mm: 50 leaves nothing of a radius of 50"}},
		"negative exclusion":     {with("wafer: {edge_exclusion_mm: -3}"), []string{"wafer.edge_exclusion_mm: -3 is negative"}},
		"notch":                  {with("wafer: {notch: bottom}"), []string{`wafer.notch: the text "bottom" is not known; write down, up, left or right`}},
		"shot of half a die":     {with("wafer: {shot: {columns: 1.5, rows: 8}}"), []string{"wafer.shot.columns: 1.5 is no whole number of at least 1"}},
		"shot without rows":      {with("wafer: {shot: {columns: 8}}"), []string{"wafer.shot.rows: missing"}},
		"shot of no rows":        {with("wafer: {shot: {columns: 8, rows: 0}}"), []string{"wafer.shot.rows: 0 is no whole number of at least 1"}},
		"shot larger than wafer": {with("wafer: {diameter_mm: 100, die_width_mm: 1, die_height_mm: 1, shot: {columns: 8, rows: 101}}"), []string{"wafer.shot.rows: 101 dice are 101 mm, more than the wafer's 100 mm"}},
		"shot as number":         {with("wafer: {shot: 8}"), []string{"wafer.shot: the number 8 stands where a block", "wafer.shot.columns: missing", "wafer.shot.rows: missing"}},

		"unknown role":         {with("columns: {hardbin: HB}"), []string{"columns.hardbin: unknown key; did you mean hard_bin?"}},
		"role by number":       {with("columns: {x: 3}"), []string{"columns.x: the number 3 stands where text belongs"}},
		"column of two roles":  {with("columns: {x: DX, y: dx}"), []string{`columns.y: column "dx" is x already`}},
		"empty pass":           {with("bins: {pass: []}"), []string{"bins.pass: the list of passing bins is empty"}},
		"negative bin":         {with("bins: {pass: [1, -2]}"), []string{"bins.pass[1]: -2 is no bin"}},
		"half a bin":           {with("bins: {pass: [1.5]}"), []string{"bins.pass[0]: 1.5 is no bin"}},
		"bin twice":            {with("bins: {pass: [1, 1]}"), []string{"bins.pass[1]: bin 1 stands twice"}},
		"bin as text":          {with("bins: {pass: [good]}"), []string{`bins.pass[0]: the text "good" stands where a number belongs`}},
		"pass as text":         {with("bins: {pass: good}"), []string{`bins.pass: the text "good" stands where a list belongs`}},
		"bin of nothing":       {with("bins: {pass: [~]}"), []string{"bins.pass[0]: nothing stands where a bin belongs"}},
		"name of no bin":       {with("bins: {names: {good: A}}"), []string{`bins.names.good: "good" is no bin`}},
		"name by number":       {with("bins: {names: {2: 5}}"), []string{"bins.names.2: the number 5 stands where text belongs"}},
		"bin without name":     {with("bins: {names: {2: }}"), []string{"bins.names.2: the bin has no name"}},
		"names as list":        {with("bins: {names: [A]}"), []string{"bins.names: a list stands where a block of keys belongs"}},
		"bin named twice":      {with("bins: {names: {'01': A, 1: B}}"), []string{"bins.names.1: bin 1 is named twice"}},
		"key as number, text":  {with("bins: {names: {1.0: A, 1: B}}"), []string{"bins.names.1: the key stands twice, as a number and as text"}},
		"temperature":          {with("test_temperature_c: 500"), []string{"test_temperature_c: 500 is outside of -100 to 400"}},
		"temperature cold":     {with("test_temperature_c: -101"), []string{"test_temperature_c: -101 is outside"}},
		"temperature in words": {with("test_temperature_c: room"), []string{`test_temperature_c: the text "room" stands where a number`}},

		"yield in percent":    {with("baseline: {yield: 95}"), []string{"baseline.yield: 95 is above 1; write it as a share: 0.95"}},
		"yield of nothing":    {with("baseline: {yield: 0}"), []string{"baseline.yield: 0 is no yield"}},
		"baseline of no test": {with("baseline: {tests: {TT: {median: 1}}}"), []string{"baseline.tests.TT: there is no such test in tests; did you mean T?"}},
		"baseline far off":    {with("baseline: {tests: {ICBO: {median: 1}}}"), []string{"baseline.tests.ICBO: there is no such test in tests; add it to tests"}},
		"baseline twice":      {with("baseline: {tests: {T: {median: 1}, t: {median: 1}}}"), []string{"baseline.tests.t: test T has a baseline already, as T"}},
		"baseline as list":    {with("baseline: {tests: [T]}"), []string{"baseline.tests: a list stands where a block of keys belongs"}},
		"zero sigma":          {with("baseline: {tests: {T: {median: 1, sigma: 0}}}"), []string{"baseline.tests.T.sigma: 0 is not above zero"}},
		"negative lot sigma":  {with("baseline: {tests: {T: {median: 1, sigma: 1, lot_sigma: -1}}}"), []string{"baseline.tests.T.lot_sigma: -1 is not above zero"}},
		"no median":           {with("baseline: {tests: {T: {sigma: 1}}}"), []string{"baseline.tests.T.median: missing"}},
		"misspelt median":     {with("baseline: {tests: {T: {mediam: 1}}}"), []string{"baseline.tests.T.mediam: unknown key; did you mean median?"}},
		"baseline of nothing": {with("baseline: {tests: {T: }}"), []string{"baseline.tests.T: nothing stands where median and sigma belong"}},
		"median beyond limit": {tests("{name: T, unit: nA, upper: 5}") + "baseline: {tests: {T: {median: 6}}}", []string{"baseline.tests.T.median: median 6 is outside of the test's limits up to 5"}},
		"cause as text":       {with("causes: [furnace]"), []string{`causes[0]: the text "furnace" stands where a cause belongs`}},
		"causes as text":      {with("causes: furnace"), []string{`causes: the text "furnace" stands where a list belongs`}},

		"all at once, in the order of the schema": {
			"tests: [{name: T, uppr: 1, unit: x}]\nzz: 1\nwafer: {notch: n}\ndevice: {polarity: x}\nbaseline: {yield: 2}\nbins: {pass: []}\ntest_temperature_c: x\ncauses: 1\ncolumns: {q: 1}",
			[]string{"zz: ", "device.polarity: ", "wafer.notch: ", "columns.q: ", "bins.pass: ", "test_temperature_c: ",
				"tests[0].uppr: ", "tests[0].unit: ", "baseline.yield: ", "causes: "}},
	} {
		_, lines := parse(c.text)
		if len(lines) != len(c.want) {
			t.Errorf("%s: %d problems, want %d:\n%s", name, len(lines), len(c.want), strings.Join(lines, "\n"))
			continue
		}
		for i, want := range c.want {
			rest := lines[i]
			if !strings.HasPrefix(rest, "p.yaml: ") || !strings.Contains(rest, "; ") {
				t.Errorf("%s: line %q has no file or no remedy", name, rest)
			}
			for j, part := range strings.Split("p.yaml: "+want, "...") {
				at := strings.Index(rest, part)
				if at < 0 || j == 0 && at > 0 {
					t.Errorf("%s:\n got %s\nwant %s", name, lines[i], want)
					break
				}
				rest = rest[at+len(part):]
			}
		}
	}
}

func TestProblemsAreTyped(t *testing.T) {
	_, err := ParseProduct("p.yaml", []byte("product: P\ntests: [{name: T, unit: q}]"))
	var p *Problems
	if !errors.As(err, &p) || p.File != "p.yaml" || len(p.List) != 1 || p.List[0].Key != "tests[0].unit" {
		t.Errorf("%#v", err)
	}
	many := &Problems{File: "f", List: make([]Problem, 150)}
	if lines := strings.Split(many.Error(), "\n"); len(lines) != 101 || lines[100] != "f: and 50 more problems" {
		t.Errorf("%d lines, the last %q", len(lines), lines[len(lines)-1])
	}
}

// Files that cannot be read, or are no text of their format: one line that
// begins with the file and the line and says what to do.
func TestUnreadableProducts(t *testing.T) {
	dir := t.TempDir()
	for name, c := range map[string]struct {
		file, data, want string
	}{
		"empty":             {"e.yaml", "", "e.yaml: the file is empty; draft one from a data file"},
		"blank":             {"b.json", " \n\t\n", "b.json: the file is empty"},
		"comments":          {"c.yaml", "# nothing\n", "c.yaml: the file holds no keys"},
		"empty block":       {"c.json", "{}", "c.json: the file holds no keys"},
		"binary":            {"b.yaml", "product: P\x00\x01", "b.yaml: this is a binary file (a zero at byte 10); give a product file"},
		"UTF-16":            {"u.yaml", "\xff\xfep\x00", "u.yaml: the file is UTF-16 text; give a product file saved as UTF-8"},
		"Latin-1":           {"l.yaml", "product: P\nx: \xb5A\n", "l.yaml:2: byte 14 is no UTF-8 text"},
		"control character": {"c2.yaml", "product: P\nx: y\nz: \x01\n", "c2.yaml:3: not valid YAML: control characters are not allowed; mend"},
		"huge":              {"h.yaml", strings.Repeat("# 345678901234567\n", 250_000), "h.yaml: the file is larger than 4 MB; this is no product file"},
		"other extension":   {"p.csv", "LOT,WAFER\n", `p.csv: a product file does not end in ".csv"; name it .yaml, .toml or .json`},
		"no extension":      {"p", "product: P", `p: a product file does not end in ""`},
		"list":              {"l2.yaml", "- a\n- b\n", "l2.yaml:1: not valid YAML: a list stands where keys belong"},
		"word":              {"w.yaml", "hello\n", "w.yaml:1: not valid YAML: a plain value stands where keys belong"},
		"list in JSON":      {"l.json", "[1]", "l.json:1: not valid JSON: a list stands where keys belong"},
		"two documents":     {"d.yaml", "product: P\n---\ntests: []\n", "d.yaml:2: a second YAML document begins here; keep one"},
		"after the end":     {"d2.yaml", "product: P\n...\ntests: []\n", "d2.yaml:3: a second YAML document"},
		"YAML indent":       {"i.yaml", "product: P\n tests: []\n", "i.yaml:2: not valid YAML: mapping values are not allowed"},
		"YAML tab":          {"t.yaml", "device:\n\tpolarity: npn\n", "t.yaml:2: not valid YAML: found"},
		"YAML bracket":      {"k.yaml", "product: P\ntests: [{name: T}\nwafer: {}\n", "k.yaml:2: not valid YAML: "},
		"YAML key twice":    {"t2.yaml", "product: P\nproduct: Q\n", `t2.yaml:2: not valid YAML: mapping key "product" already defined at line 1; `},
		"YAML alias":        {"a.yaml", "product: P\ntests: *t\n", "a.yaml:2: not valid YAML: unknown anchor 't' referenced"},
		"YAML tag":          {"g.yaml", "product: P\nx: !!int y\n", "g.yaml:2: not valid YAML: cannot decode !!str `y` as a !!int"},
		"YAML key of keys":  {"q.yaml", "product: P\n? {a: 1}\n: 2\n", "q.yaml:2: not valid YAML: a block stands where keys belong"},
		"TOML":              {"p.toml", "product = \"P\"\ntests = \n", "p.toml:2: not valid TOML: "},
		"TOML key twice":    {"t.toml", "product = \"P\"\n[wafer]\n\n[bins]\n[wafer]\n", "t.toml:5: not valid TOML: "},
		"TOML value twice":  {"v.toml", "product = \"P\"\n\nproduct = \"Q\"\nx = 1\n", "v.toml:3: not valid TOML: key product is already defined"},
		"TOML nested":       {"n.toml", "a = " + strings.Repeat("[", 20_000), "n.toml:1: more than 1000 brackets are open here"},
		"TOML long":         {"o.toml", "a" + strings.Repeat(".a", 100_000) + "=1", "o.toml:1: this line is longer than 64 kB"},
		"JSON":              {"p.json", "{\"product\": \"P\",\n\"tests\": [}\n", "p.json:2: not valid JSON: invalid character '}'"},
		"JSON cut":          {"x.json", "{\"product\": \"P\",\n\"tests\": [", "x.json:2: not valid JSON: unexpected end of JSON input"},
		"JSON key twice":    {"t.json", "{\"a\": [{\"x\": 1}, {\"x\": 2}],\n\"b\": {},\n\"b\": 1}", `t.json:3: not valid JSON: the key "b" stands twice`},
		"keys without end":  {"m.yaml", strings.Repeat("key: 1\n", 40_000), "m.yaml: the file has about 40000 keys, too many by far; keep one product"},
		"deep JSON":         {"n.json", "{\"a\": " + strings.Repeat("[", 50_000), "n.json:1: not valid JSON: "},
		"deep YAML":         {"n.yaml", "a: " + strings.Repeat("[", 50_000), "n.yaml:1: not valid YAML: exceeded max depth"},
		"alias bomb": {"z.yaml", "a: &a [x,x,x,x,x,x,x,x,x]\nb: &b [*a,*a,*a,*a,*a,*a,*a,*a,*a]\nc: &c [*b,*b,*b,*b,*b,*b,*b,*b,*b]\nd: &d [*c,*c,*c,*c,*c,*c,*c,*c,*c]\n" +
			"e: &e [*d,*d,*d,*d,*d,*d,*d,*d,*d]\nf: &f [*e,*e,*e,*e,*e,*e,*e,*e,*e]\ng: &g [*f,*f,*f,*f,*f,*f,*f,*f,*f]\n", "z.yaml:4: not valid YAML: document contains excessive aliasing"},
	} {
		path := filepath.Join(dir, c.file)
		if err := os.WriteFile(path, []byte(c.data), 0o600); err != nil {
			t.Fatal(err)
		}
		p, err := LoadProduct(path)
		var fe *FileError
		if p != nil || !errors.As(err, &fe) || fe.File != path {
			t.Errorf("%s: got %v, %v", name, p, err)
			continue
		}
		got := strings.TrimPrefix(err.Error(), dir+string(filepath.Separator))
		if !strings.HasPrefix(got, c.want) || strings.Contains(got, "\n") || !strings.Contains(got, "; ") {
			t.Errorf("%s:\n got %s\nwant %s", name, got, c.want)
		}
	}
	if _, err := LoadProduct(filepath.Join(dir, "none.yaml")); !errors.Is(err, os.ErrNotExist) || !strings.Contains(err.Error(), "none.yaml: there is no such file; check the path") {
		t.Error(err)
	}
	if _, err := LoadProduct(dir); err == nil || !strings.Contains(err.Error(), dir+": this is a folder; name the product file in it") {
		t.Error(err)
	}
	locked := filepath.Join(dir, "locked.yaml")
	if err := os.WriteFile(locked, []byte("product: P"), 0); err != nil {
		t.Fatal(err)
	}
	if f, err := os.Open(locked); err == nil {
		f.Close() // the user may read everything
	} else if _, err := LoadProduct(locked); err == nil || !strings.Contains(err.Error(), "the file may not be read") {
		t.Error(err)
	}
}

func TestEditDistance(t *testing.T) {
	for _, c := range []struct {
		a, b string
		want int
	}{{"", "", 0}, {"abc", "", 3}, {"kitten", "sitting", 3}, {"bvcoe", "bvceo", 1}, {"uppper", "upper", 1}, {"ca", "abc", 3}} {
		// kitten/sitting and ca/abc (3 when no substring is edited twice) are the literature's stock examples, from memory.
		if got := editDistance(c.a, c.b); got != c.want {
			t.Errorf("%q to %q: %d, want %d", c.a, c.b, got, c.want)
		}
	}
	if nearest("zzz", Roles) != "" || nearest(strings.Repeat("x", 1000), Roles) != "" {
		t.Error("something is near to anything")
	}
}

func FuzzLoadProduct(f *testing.F) {
	for _, ext := range []string{"yaml", "toml", "json"} {
		data, err := os.ReadFile(productDir + "mp-n24." + ext)
		if err != nil {
			f.Fatal(err)
		}
		f.Add(ext, data)
	}
	f.Add("yaml", []byte("product: P\ntests: [{name: T, lower: abc, unit: q}]\nbins: {names: {1.0: A, 1: B}}\ncauses: [{since: 2024-05-06}]"))
	f.Add("toml", []byte("product = 2024-05-06\ntests = [{name = 'T'}, 07:32:00]\n"))
	f.Fuzz(func(t *testing.T, ext string, data []byte) {
		if ext != "yaml" && ext != "toml" {
			ext = "json"
		}
		p, err := ParseProduct("file."+ext, data)
		if err != nil {
			if p != nil {
				t.Fatal("a product beside an error")
			}
			for _, line := range strings.Split(err.Error(), "\n") {
				if !strings.HasPrefix(line, "file."+ext+":") || !strings.Contains(line, ": ") {
					t.Fatalf("line without file: %q", line)
				}
			}
			again, err2 := ParseProduct("file."+ext, data)
			if again != nil || err2.Error() != err.Error() {
				t.Fatalf("two readings, two errors:\n%v\n%v", err, err2)
			}
			return
		}
		if len(p.Tests) == 0 {
			t.Fatalf("accepted %+v", p)
		}
		var b bytes.Buffer
		if err := Write(&b, p); err != nil {
			t.Fatal(err)
		}
		again, err := ParseProduct("again.yaml", b.Bytes())
		if diff := cmp.Diff(p, again, sameProduct); err != nil || diff != "" {
			t.Fatalf("%v\n%s\n%s", err, diff, b.Bytes())
		}
	})
}
