package config

import (
	"crypto/sha256"
	"encoding/hex"
	"fmt"
	"math"
	"sort"
	"strconv"
	"strings"
)

// schema lists the keys of every block of the product file, in the order in
// which they are checked, documented and written.
var schema = map[string][]string{
	"":                 {"product", "device", "wafer", "columns", "bins", "test_temperature_c", "tests", "baseline", "causes"},
	"device":           {"polarity", "epi", "base", "emitter", "edge"},
	"device.epi":       {"thickness_um", "resistivity_ohm_cm", "up_diffusion_um", "substrate_cm3", "silicon_consumed_um"},
	"device.base":      {"junction_depth_um", "surface_concentration_cm3", "area_um2", "perimeter_um"},
	"device.emitter":   {"depth_um", "area_um2", "perimeter_um"},
	"device.edge":      {"corner_radius_um", "field_plate"},
	"wafer":            {"diameter_mm", "die_width_mm", "die_height_mm", "edge_exclusion_mm", "notch", "shot"},
	"wafer.shot":       {"columns", "rows"},
	"columns":          Roles,
	"bins":             {"pass", "names"},
	"tests[]":          {"name", "measures", "unit", "lower", "upper", "at", "clamp", "floor"},
	"baseline":         {"yield", "tests"},
	"baseline.tests.*": {"median", "sigma", "within_lot_sigma", "lot_sigma"},
	"spec":             {"target", "lower", "upper"},
	"quantity":         {"value", "sigma"},
}

// schemaOrder is the order in which a key known elsewhere is looked for.
var schemaOrder = []string{"", "device", "device.epi", "device.base", "device.emitter", "device.edge",
	"wafer", "wafer.shot", "bins", "tests[]", "baseline", "baseline.tests.*", "columns"}

// LoadProduct reads a product file (see the package comment). The extension
// tells the format: .yaml, .yml, .toml or .json.
//
// A file that cannot be read, or is no text of its format, gives a *[FileError];
// a file with anything wrong in it gives *[Problems] with all that is wrong.
// There is never a Product beside an error.
func LoadProduct(path string) (*Product, error) {
	data, err := readFile(path, "product")
	if err != nil {
		return nil, err
	}
	return ParseProduct(path, data)
}

// ParseProduct reads a product file's bytes; file is its name, for its
// extension and the messages. Errors are those of [LoadProduct].
func ParseProduct(file string, data []byte) (*Product, error) {
	root, double, err := decodeFile(file, data, "product")
	if err != nil {
		return nil, err
	}
	sum := sha256.Sum256(data)
	p := &Product{File: file, SHA256: hex.EncodeToString(sum[:])}
	c := &collector{}
	for _, key := range double {
		c.add(key, "the key stands twice, as a number and as text", "keep one of them")
	}
	p.read(c, root)
	if len(c.list) > 0 {
		return nil, &Problems{file, c.list}
	}
	return p, nil
}

func (p *Product) read(c *collector, root map[string]any) {
	top := c.block("", "", root)
	p.Name = top.text("product", "MP-N24")
	if top.has("device") {
		p.Device = readDevice(c, top.values["device"])
	}
	p.Wafer = readWafer(c, top.values["wafer"])
	p.Columns = readColumns(c, top.values["columns"])
	p.Bins = readBins(c, top.values["bins"])
	p.TestTemperatureC = readTemperature(top)
	p.Tests = readTests(c, top)
	if top.has("baseline") {
		p.Baseline = readBaseline(c, top.values["baseline"], p.Tests)
	}
	for i, v := range top.list("causes", "write causes: [] or a list of blocks") {
		m, ok := v.(map[string]any)
		if !ok {
			c.add(index("causes", i), describe(v)+" stands where a cause belongs", "write a block of keys, as the built-in catalogue does")
			continue
		}
		p.Causes = append(p.Causes, textDates(m).(map[string]any))
	}
}

// textDates makes dates the text they are, for what is handed on as it stands.
func textDates(v any) any {
	switch v := v.(type) {
	case date:
		return string(v)
	case map[string]any:
		for k, x := range v {
			v[k] = textDates(x)
		}
	case []any:
		for i, x := range v {
			v[i] = textDates(x)
		}
	}
	return v
}

func readTemperature(top *block) float64 {
	t := top.number("test_temperature_c", "25")
	switch {
	case math.IsNaN(t):
		return 25
	case t < -100 || t > 400:
		top.add("test_temperature_c", formatNumber(t)+" is outside of -100 to 400", "give the chuck's temperature in degrees Celsius, such as 25")
	}
	return t
}

func readWafer(c *collector, v any) Wafer {
	b := c.block("wafer", "wafer", v)
	or0 := func(x float64) float64 {
		if math.IsNaN(x) {
			return 0
		}
		return x
	}
	w := Wafer{
		DiameterMM:  or0(b.positive("diameter_mm", "100")),
		DieWidthMM:  or0(b.positive("die_width_mm", "0.45")),
		DieHeightMM: or0(b.positive("die_height_mm", "0.45")),
	}
	if w.DiameterMM > 450 {
		b.add("wafer.diameter_mm", formatNumber(w.DiameterMM)+" is more than any wafer has", "give millimetres, such as 100, 150 or 200")
	}
	for _, key := range []string{"die_width_mm", "die_height_mm"} {
		if b.has("die_width_mm") || b.has("die_height_mm") {
			b.missing(key, "give the die's width and height, streets included, or neither")
		}
	}
	if d := math.Hypot(w.DieWidthMM, w.DieHeightMM); w.DiameterMM > 0 && d > w.DiameterMM {
		key := "die_width_mm"
		if w.DieHeightMM > w.DieWidthMM {
			key = "die_height_mm"
		}
		b.add("wafer."+key, fmt.Sprintf("a die of %s by %s mm does not fit on a wafer of %s mm",
			formatNumber(w.DieWidthMM), formatNumber(w.DieHeightMM), formatNumber(w.DiameterMM)), "give all three in millimetres")
	}
	w.EdgeExclusionMM = or0(b.number("edge_exclusion_mm", "3"))
	switch {
	case w.EdgeExclusionMM < 0:
		b.add("wafer.edge_exclusion_mm", formatNumber(w.EdgeExclusionMM)+" is negative", "write a width in millimetres such as 3, or 0 for none")
	case w.DiameterMM > 0 && w.EdgeExclusionMM >= w.DiameterMM/2:
		b.add("wafer.edge_exclusion_mm", formatNumber(w.EdgeExclusionMM)+" leaves nothing of a radius of "+formatNumber(w.DiameterMM/2), "write a width in millimetres such as 3")
	}
	w.Notch = b.word("notch", "down", "up", "left", "right")
	if b.has("shot") {
		w.readShot(b)
	}
	return w
}

func (w *Wafer) readShot(b *block) {
	s := b.block("wafer.shot", "wafer.shot", b.values["shot"])
	w.ShotColumns = s.whole("columns", 1, "8")
	w.ShotRows = s.whole("rows", 1, "8")
	for _, side := range []struct {
		key   string
		n     int
		dieMM float64
	}{{"columns", w.ShotColumns, w.DieWidthMM}, {"rows", w.ShotRows, w.DieHeightMM}} {
		s.missing(side.key, "give the columns and rows of dice in one exposure shot")
		if mm := float64(side.n) * side.dieMM; w.DiameterMM > 0 && mm > w.DiameterMM {
			s.add("wafer.shot."+side.key, fmt.Sprintf("%d dice are %s mm, more than the wafer's %s mm", side.n, formatNumber(mm),
				formatNumber(w.DiameterMM)), "count the dice of one exposure shot; leave the block out for a full-field mask")
		}
	}
}

func readColumns(c *collector, v any) map[string]string {
	b := c.block("columns", "columns", v)
	var out map[string]string
	role := map[string]string{}
	for _, key := range Roles {
		header := b.text(key, strings.ToUpper(key))
		if header == "" {
			continue
		}
		if out == nil {
			out = map[string]string{}
		}
		out[key] = header
		switch key { // a column may well be hard and soft bin, or time and touchdown
		case "lot", "wafer", "x", "y", "site", "test", "value":
			folded := strings.ToLower(header)
			if other := role[folded]; other != "" {
				b.add(join("columns", key), fmt.Sprintf("column %q is %s already", header, other), "name the column that holds "+key)
			}
			role[folded] = key
		}
	}
	return out
}

func readBins(c *collector, v any) Bins {
	b := c.block("bins", "bins", v)
	var out Bins
	list := []any{b.values["pass"]} // pass: 1 is the list of one
	if _, one := b.values["pass"].(float64); !one {
		list = b.list("pass", "list the passing bins, as in pass: [1, 2, 3]")
		if b.has("pass") && list != nil && len(list) == 0 {
			b.add("bins.pass", "the list of passing bins is empty", "list them, as in pass: [1, 2, 3], or leave the key out for bin 1")
		}
	}
	seen := map[int]bool{}
	for i, v := range list {
		path := index("bins.pass", i)
		f := c.numberAt(path, v, "1")
		n, ok := wholeNumber(f)
		switch {
		case v == nil:
			c.add(path, "nothing stands where a bin belongs", "write a bin number such as 1")
		case math.IsNaN(f): // reported
		case !ok || n < 0:
			c.add(path, formatNumber(f)+" is no bin", "bins are whole numbers from 0 up")
		case seen[n]:
			c.add(path, fmt.Sprintf("bin %d stands twice", n), "keep one of them")
		default:
			seen[n] = true
			out.Pass = append(out.Pass, n)
		}
	}
	if names, ok := b.values["names"].(map[string]any); ok {
		out.Names = readBinNames(c, names)
	} else if v := b.values["names"]; v != nil {
		c.add("bins.names", describe(v)+" stands where a block of keys belongs", "write names: {1: gain grade A, 5: breakdown}")
	}
	return out
}

func readBinNames(c *collector, names map[string]any) map[int]string {
	var out map[int]string
	for _, k := range numericOrder(names) {
		path := join("bins.names", k)
		n, err := strconv.ParseInt(k, 10, 32)
		if err != nil || n < 0 {
			c.add(path, strconv.Quote(k)+" is no bin", "bins are whole numbers from 0 up")
			continue
		}
		if _, ok := out[int(n)]; ok {
			c.add(path, fmt.Sprintf("bin %d is named twice", n), "keep one of them")
			continue
		}
		if out == nil {
			out = map[int]string{}
		}
		out[int(n)] = c.textAt(path, names[k], "gain grade A")
		if names[k] == nil {
			c.add(path, "the bin has no name", "write a text such as gain grade A, or leave the bin out")
		}
	}
	return out
}

// numericOrder sorts keys that are numbers by value, others after them.
func numericOrder(m map[string]any) []string {
	keys := sortedKeys(m)
	rank := func(k string) float64 {
		if f, err := strconv.ParseFloat(k, 64); err == nil && !math.IsNaN(f) {
			return f
		}
		return math.Inf(1)
	}
	sort.SliceStable(keys, func(i, j int) bool { return rank(keys[i]) < rank(keys[j]) })
	return keys
}
