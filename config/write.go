package config

import (
	"bytes"
	"fmt"
	"io"
	"math"
	"regexp"
	"sort"
	"strconv"
	"strings"

	"github.com/spf13/viper"
)

// Write writes a product as the YAML that the package comment describes, with
// short comments. What is not given is left out; where a whole block is, a
// commented template of it stands instead, to be filled in.
//
// The bytes depend on the product alone, not on its File and SHA256. Loading
// them gives an equal product, for every product that LoadProduct has returned.
// Conditions that are none ([ParseConditions] refuses them) are written as a
// comment.
func Write(w io.Writer, p *Product) error {
	y := &yamlWriter{}
	y.line("# Product file of kneepoint: what is tested, and on what device.")
	y.line("# Numbers are in the unit that the key names; those of a test are in the test's unit.")
	if p.Name != "" {
		y.line("product: %s", yamlText(p.Name))
	} else {
		y.line("# product:                        # the part type")
	}
	y.device(p.Device)
	y.wafer(p.Wafer)
	y.columns(p.Columns)
	y.bins(p.Bins)
	y.line("test_temperature_c: %s", yamlNumber(p.TestTemperatureC))
	y.tests(p.Tests)
	y.baseline(p)
	if err := y.causes(p.Causes); err != nil {
		return fmt.Errorf("config: writing causes: %w", err)
	}
	_, err := w.Write(y.Bytes())
	return err
}

type yamlWriter struct{ bytes.Buffer }

func (y *yamlWriter) line(format string, args ...any) {
	fmt.Fprintf(y, format, args...)
	y.WriteByte('\n')
}

// deviceTemplate stands in a draft: a data file does not tell these values.
const deviceTemplate = `# Without this block causes are named from the data alone. Fill it in for the device model:
# device:
#   polarity: npn
#   epi:
#     thickness_um: {target: , lower: , upper: }        # as grown, surface to the substrate's plateau
#     resistivity_ohm_cm: {target: , lower: , upper: }
#     up_diffusion_um:                                  # optional, as are substrate_cm3 and silicon_consumed_um;
#                                                       # any number here may be {value: , sigma: }
#   base: {junction_depth_um: , surface_concentration_cm3: , area_um2: , perimeter_um: }
#   emitter: {depth_um: , area_um2: , perimeter_um: }   # depth from the surface
#   edge: {corner_radius_um: , field_plate: false}
`

func (y *yamlWriter) device(d *Device) {
	if d == nil {
		y.WriteString(deviceTemplate)
		return
	}
	y.line("device:")
	if d.Polarity != "" {
		y.line("  polarity: %s", d.Polarity)
	}
	var epi []string
	add := func(key, value string) {
		if value != "" {
			epi = append(epi, "    "+key+": "+value)
		}
	}
	add("thickness_um", yamlSpec(d.Epi.ThicknessUM))
	add("resistivity_ohm_cm", yamlSpec(d.Epi.ResistivityOhmCM))
	add("up_diffusion_um", yamlQuantity(d.Epi.UpDiffusionUM))
	add("substrate_cm3", yamlQuantity(d.Epi.SubstrateCM3))
	add("silicon_consumed_um", yamlQuantity(d.Epi.SiliconConsumedUM))
	if epi != nil {
		y.line("  epi:                              # thickness as grown, surface to the substrate's plateau")
		y.line("%s", strings.Join(epi, "\n"))
	}
	y.flow("  base", "", flow{}.
		add("junction_depth_um", yamlQuantity(d.Base.JunctionDepthUM)).
		add("surface_concentration_cm3", yamlQuantity(d.Base.SurfaceConcentrationCM3)).
		add("area_um2", yamlQuantity(d.Base.AreaUM2)).
		add("perimeter_um", yamlQuantity(d.Base.PerimeterUM)))
	y.flow("  emitter", "", flow{}.
		add("depth_um", yamlQuantity(d.Emitter.DepthUM)).
		add("area_um2", yamlQuantity(d.Emitter.AreaUM2)).
		add("perimeter_um", yamlQuantity(d.Emitter.PerimeterUM)))
	edge := flow{}.add("corner_radius_um", yamlQuantity(d.Edge.CornerRadiusUM))
	if len(edge) > 0 || d.Edge.FieldPlate {
		edge = edge.add("field_plate", strconv.FormatBool(d.Edge.FieldPlate))
	}
	y.flow("  edge", "", edge)
}

func (y *yamlWriter) wafer(w Wafer) {
	mm := func(v float64) string {
		if v == 0 {
			return ""
		}
		return yamlNumber(v)
	}
	f := flow{}.add("diameter_mm", mm(w.DiameterMM)).add("die_width_mm", mm(w.DieWidthMM)).
		add("die_height_mm", mm(w.DieHeightMM)).add("edge_exclusion_mm", mm(w.EdgeExclusionMM))
	if w.Notch != "" {
		f = f.add("notch", w.Notch)
	}
	if w.ShotColumns > 0 && w.ShotRows > 0 {
		f = f.add("shot", fmt.Sprintf("{columns: %d, rows: %d}", w.ShotColumns, w.ShotRows))
	}
	if len(f) == 0 {
		y.line("# wafer: {diameter_mm: , die_width_mm: , die_height_mm: , edge_exclusion_mm: , notch: down}   # die with its street")
		return
	}
	y.flow("wafer", "die with its street; notch is down, up, left or right", f)
}

func (y *yamlWriter) columns(columns map[string]string) {
	f := flow{}
	for _, role := range Roles {
		if header := columns[role]; header != "" {
			f = f.add(role, yamlText(header))
		}
	}
	if len(f) == 0 {
		y.line("# columns: {lot: , wafer: , x: , y: , hard_bin: }   # only where the headers are not the usual ones")
		return
	}
	y.flow("columns", "headers in the data file", f)
}

func (y *yamlWriter) bins(b Bins) {
	f := flow{}
	if len(b.Pass) > 0 {
		pass := make([]string, len(b.Pass))
		for i, bin := range b.Pass {
			pass[i] = strconv.Itoa(bin)
		}
		f = f.add("pass", "["+strings.Join(pass, ", ")+"]")
	}
	if len(b.Names) > 0 {
		bins := make([]int, 0, len(b.Names))
		for bin := range b.Names {
			bins = append(bins, bin)
		}
		sort.Ints(bins)
		names := flow{}
		for _, bin := range bins {
			names = names.add(strconv.Itoa(bin), yamlText(b.Names[bin]))
		}
		f = f.add("names", names.String())
	}
	if len(f) == 0 {
		y.line("# bins: {pass: [1], names: {1: good}}   # without it bin 1 passes")
		return
	}
	y.flow("bins", "", f)
}

func (y *yamlWriter) tests(tests []Test) {
	if len(tests) == 0 {
		y.line("tests: []")
		return
	}
	y.line("tests:                              # measures is one of %s,", strings.Join(Measures[:8], " "))
	y.line("                                    # %s, or left out", strings.Join(Measures[8:], " "))
	for i := range tests {
		t := &tests[i]
		f := flow{}.add("name", yamlText(t.Name))
		if t.Measures != "" {
			f = f.add("measures", t.Measures)
		}
		if t.Unit.Given() {
			f = f.add("unit", yamlText(t.Unit.Text))
		}
		f = f.add("lower", yamlNumber(t.Unit.FromSI(t.Lower))).add("upper", yamlNumber(t.Unit.FromSI(t.Upper)))
		at, comment := t.AtText, ""
		if at == "" && len(t.At) > 0 {
			at = FormatConditions(t.At)
		}
		if _, err := ParseConditions(at); err != nil {
			at, comment = "", "at "+strconv.Quote(at)+" is not of the form NAME=value unit"
		}
		if at != "" {
			f = f.add("at", strconv.Quote(at))
		}
		f = f.add("clamp", yamlNumber(t.Unit.FromSI(t.Clamp))).add("floor", yamlNumber(t.Unit.FromSI(t.Floor)))
		y.comment("  - "+f.String(), comment)
	}
}

func (y *yamlWriter) baseline(p *Product) {
	b := p.Baseline
	if b == nil {
		y.line("# baseline:                         # a typical healthy lot; without it the ledger's, else the lot's own majority")
		y.line("#   yield: 0.95")
		y.line("#   tests: {NAME: {median: , sigma: , within_lot_sigma: , lot_sigma: }}   # the last two sharpen the judgement")
		return
	}
	var lines []string
	if !math.IsNaN(b.Yield) {
		lines = append(lines, "  yield: "+yamlNumber(b.Yield))
	}
	if len(b.Tests) > 0 {
		lines = append(lines, "  tests:")
	}
	for i := range p.Tests {
		t := &p.Tests[i]
		one, ok := b.Tests[t.Name]
		if !ok {
			continue
		}
		unit := func(v float64) string { return yamlNumber(t.Unit.FromSI(v)) }
		lines = append(lines, "    "+yamlText(t.Name)+": "+flow{}.add("median", unit(one.Median)).add("sigma", unit(one.Sigma)).
			add("within_lot_sigma", unit(one.WithinLotSigma)).add("lot_sigma", unit(one.LotSigma)).String())
	}
	if lines == nil {
		y.line("baseline: {}")
		return
	}
	y.line("baseline:                           # a typical healthy lot, in the tests' units")
	y.line("%s", strings.Join(lines, "\n"))
}

func (y *yamlWriter) causes(causes []map[string]any) error {
	if len(causes) == 0 {
		y.line("causes: []                          # the site's own, in the form of the built-in catalogue")
		return nil
	}
	encoder, err := viper.NewCodecRegistry().Encoder("yaml")
	if err != nil {
		return err
	}
	text, err := encoder.Encode(map[string]any{"causes": causes})
	if err != nil {
		return err
	}
	_, err = y.Write(text)
	return err
}

// flow is a block on one line: its "key: value" parts.
type flow []string

// add appends a key unless its value is "", which stands for not given.
func (f flow) add(key, value string) flow {
	if value == "" {
		return f
	}
	return append(f, key+": "+value)
}

func (f flow) String() string { return "{" + strings.Join(f, ", ") + "}" }

func (y *yamlWriter) flow(key, comment string, f flow) {
	if len(f) > 0 {
		y.comment(key+": "+f.String(), comment)
	}
}

func (y *yamlWriter) comment(text, comment string) {
	if comment != "" {
		text += "   # " + comment
	}
	y.line("%s", text)
}

func yamlQuantity(q Quantity) string {
	if math.IsNaN(q.Sigma) {
		return yamlNumber(q.Value)
	}
	return flow{}.add("value", yamlNumber(q.Value)).add("sigma", yamlNumber(q.Sigma)).String()
}

func yamlSpec(s Spec) string {
	if math.IsNaN(s.Lower) && math.IsNaN(s.Upper) {
		return yamlNumber(s.Target)
	}
	return flow{}.add("target", yamlNumber(s.Target)).add("lower", yamlNumber(s.Lower)).add("upper", yamlNumber(s.Upper)).String()
}

// yamlNumber is the shortest text that reads as v; "" for NaN, not given.
func yamlNumber(v float64) string {
	if math.IsNaN(v) {
		return ""
	}
	return strings.Replace(formatNumber(v), "e+", "e", 1)
}

// plainScalar matches texts that stand in YAML without quotes, in a flow block too.
var plainScalar = regexp.MustCompile(`^[A-Za-z][A-Za-z0-9_]*(?:[ ()./-]*[A-Za-z0-9_)]+)*$`)

// yamlText quotes a text where YAML would read it as something else. The
// escapes of strconv.Quote are all YAML's too.
func yamlText(s string) string {
	switch strings.ToLower(s) {
	case "true", "false", "yes", "no", "on", "off", "y", "n", "null":
		return strconv.Quote(s)
	}
	if plainScalar.MatchString(s) {
		return s
	}
	return strconv.Quote(strings.ToValidUTF8(s, "\ufffd"))
}
