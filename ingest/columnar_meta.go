package ingest

import (
	"encoding/json"
	"math"
	"slices"
	"strconv"
	"strings"

	"github.com/apache/arrow/go/v17/arrow"

	"kneepoint/config"
)

// Files that WriteParquet and WriteArrow make hold one lot: a row a measurement,
// dice sorted by wafer and touchdown, the measurements of a die next to each
// other in the order of test. The columns are, where the lot has them,
//
//	lot wafer x y site touchdown measurement hard_bin soft_bin pass
//
// then a column a test, then the attributes of wafers and dice. measurement
// counts a die's from 1; of several, the row with a touchdown is the one that
// counts. Missing is null. A test some of whose readings the file gave as bounds
// only (">1000", OL) has a column of 1 at least, -1 at most, behind them; clamped
// readings are found again by their values and have none. The metadata of a field say what it is:
//
//	role        the names above, "test", "wafer attribute", "die attribute", "bound"
//	test        of a bound: the name of its test
//	name        where the column could not bear it
//	unit        of the column's values, with unit_base and unit_exponent
//	show_unit   in which to show them, where that is another one
//	lower, upper, clamp, floor   in the column's unit
//	condition, number, measures, limits_from
//	clamp_from, floor_from       "data" when found as a pile-up of readings
//
// Values stand in the unit of the file that the lot came from (nA, pF), so that
// other programs show what the tester showed, if every value of the column is
// the same number to the last bit when it is converted to SI and back; else in
// the SI unit. The metadata of the schema, under lotKey, are a JSON object with
// what the columns do not hold.
const lotKey = "kneepoint.lot"

// lotMeta is that object.
type lotMeta struct {
	Version    int               `json:"version"`
	Lot        string            `json:"lot"`
	Product    string            `json:"product,omitempty"`
	Attributes map[string]string `json:"attributes,omitempty"`
	HardBins   map[int]string    `json:"hard_bin_names,omitempty"`
	SoftBins   map[int]string    `json:"soft_bin_names,omitempty"`
	Geometry   *Geometry         `json:"geometry,omitempty"`
	Findings   []findingMeta     `json:"findings,omitempty"` // that cannot be made again of the columns
	Sources    []Input           `json:"sources,omitempty"`
}

type findingMeta struct {
	Finding
	OfFile bool `json:"of_file,omitempty"`
}

// Roles of fields beside those of the product file's columns block.
const (
	roleTest        = "test"
	roleMeasurement = "measurement"
	roleWaferNote   = "wafer attribute"
	roleDieNote     = "die attribute"
	roleBound       = "bound" // of the test that "test" names
)

// markPrefix stands before the names of text columns that are none: marks on the
// values of a test, until cleaning takes them.
const markPrefix = "\x00"

// takeMarks turns such columns into marks.
func (d *draft) takeMarks() {
	for s, codes := range d.text {
		name, ok := strings.CutPrefix(d.textNames[s], markPrefix)
		if !ok || codes == nil {
			continue
		}
		d.text[s] = nil
		i := slices.IndexFunc(d.tests, func(t testInfo) bool { return strings.EqualFold(t.name, name) })
		if i < 0 {
			continue
		}
		sign := make([]int8, len(d.dict[s]))
		for k, t := range d.dict[s] {
			sign[k] = map[string]int8{"1": 1, "-1": -1}[t]
		}
		d.marks[i] = make([]int8, len(codes))
		for r, c := range codes {
			if c >= 0 && d.has(i, int32(r)) {
				d.marks[i][r] = sign[c]
			}
		}
	}
}

// stored is how a test's values stand in a column.
type stored struct {
	unit config.Unit // of the column
	show config.Unit
}

// metaOf is the metadata of a test's field.
func metaOf(t *Test, pile [2]bool, s stored) map[string]string {
	m := map[string]string{"role": roleTest}
	put := func(key, v string) {
		if v != "" {
			m[key] = v
		}
	}
	number := func(key string, v float64) {
		if v == v {
			m[key] = strconv.FormatFloat(s.unit.FromSI(v), 'g', -1, 64)
		}
	}
	if t.Unit.Given() {
		m["unit"], m["unit_base"], m["unit_exponent"] = s.unit.Text, s.unit.Base, strconv.Itoa(s.unit.Exp)
	}
	if s.show != s.unit {
		m["show_unit"], m["show_exponent"] = s.show.Text, strconv.Itoa(s.show.Exp)
	}
	number("lower", t.Lower)
	number("upper", t.Upper)
	number("clamp", t.Clamp)
	number("floor", t.Floor)
	put("limits_from", t.LimitsFrom)
	put("condition", t.Condition)
	put("measures", t.Measures)
	if t.Number != Missing {
		m["number"] = strconv.Itoa(t.Number)
	}
	if pile[0] {
		m["clamp_from"] = "data"
	}
	if pile[1] {
		m["floor_from"] = "data"
	}
	return m
}

// ownColumn makes a test's description of its field's metadata.
func ownColumn(name string, m map[string]string) testColumn {
	c := testColumn{name: name, condition: m["condition"], number: Missing}
	c.unit = unitOf(m["unit"], m["unit_base"], m["unit_exponent"])
	own := &ownFact{measures: m["measures"], limitsFrom: m["limits_from"]}
	c.lower, c.upper = floatOf(m["lower"]), floatOf(m["upper"])
	own.clamp, own.floor = c.unit.ToSI(floatOf(m["clamp"])), c.unit.ToSI(floatOf(m["floor"]))
	if m["clamp_from"] == "data" {
		own.clamp = math.NaN()
	}
	if m["floor_from"] == "data" {
		own.floor = math.NaN()
	}
	if n, err := strconv.Atoi(m["number"]); err == nil {
		c.number = n
	}
	if exp, ok := m["show_exponent"]; ok && c.unit.Exp == 0 {
		c.si = true
		c.unit = unitOf(m["show_unit"], m["unit_base"], exp)
	}
	c.own = own
	return c
}

func unitOf(text, base, exp string) config.Unit {
	e, err := strconv.Atoi(exp)
	if base == "" || err != nil || e < -30 || e > 30 {
		return config.Unit{}
	}
	return config.Unit{Text: text, Base: base, Exp: e}
}

func floatOf(s string) float64 {
	v, err := strconv.ParseFloat(s, 64)
	if err != nil {
		return math.NaN()
	}
	return v
}

// metaOfLot is the schema's metadata.
func metaOfLot(l *Lot) (string, error) {
	m := lotMeta{Version: 1, Lot: l.id, Product: l.product, Attributes: l.attributes, HardBins: l.about.hardNames, SoftBins: l.about.softNames}
	if l.about.geometry.Known() {
		m.Geometry = &l.about.geometry
	}
	for i, f := range l.findings {
		if !foundAgain[f.Code] {
			m.Findings = append(m.Findings, findingMeta{f, i < l.shared})
		}
	}
	m.Sources = append(m.Sources, l.inputs...)
	b, err := json.Marshal(m)
	return string(b), err
}

// ownMeta reads it; nil when the file is not from WriteParquet or WriteArrow.
func ownMeta(s *arrow.Schema) *lotMeta {
	md := s.Metadata()
	i := md.FindKey(lotKey)
	if i < 0 {
		return nil
	}
	m := &lotMeta{}
	if json.Unmarshal([]byte(md.Values()[i]), m) != nil || m.Version != 1 {
		return nil
	}
	return m
}

func fieldMeta(f arrow.Field) map[string]string {
	m := map[string]string{}
	for i, k := range f.Metadata.Keys() {
		m[k] = f.Metadata.Values()[i]
	}
	return m
}

func metadata(m map[string]string) arrow.Metadata {
	keys := sortedKeys(m)
	values := make([]string, len(keys))
	for i, k := range keys {
		values[i] = m[k]
	}
	return arrow.NewMetadata(keys, values)
}

// freeNames gives columns names that no other has.
type freeNames map[string]bool

func (f freeNames) take(name string) string {
	free := name
	for i := 2; f[strings.ToLower(free)]; i++ {
		free = name + "_" + strconv.Itoa(i)
	}
	f[strings.ToLower(free)] = true
	return free
}

// byPlace gives the tests in the order of the data.
func byPlace(tests []Test) []int {
	order := make([]int, len(tests))
	for i := range order {
		order[i] = i
	}
	slices.SortStableFunc(order, func(a, b int) int { return tests[a].Place - tests[b].Place })
	return order
}
