package config

import (
	"fmt"
	"math"
	"strings"
)

// measuredIn is the base unit of what a test measures.
var measuredIn = map[string]string{
	"bvceo": "V", "bvcbo": "V", "bvebo": "V", "bvces": "V", "vcesat": "V", "vbesat": "V",
	"icbo": "A", "iceo": "A", "iebo": "A", "hfe": "ratio",
	"rb": "ohm", "rc": "ohm", "rpinch": "ohm", "cob": "F", "ft": "Hz",
}

// plausible bounds, in SI, what a number without a unit can be. 5 for an ICBO
// was meant in nA: read as 5 A it would pass every die. Common practice, no source.
var plausible = map[string]struct {
	low, high float64
	example   string
}{
	"A": {0, 0.01, "nA"}, "F": {0, 1e-6, "pF"}, "Hz": {1e5, 1e13, "MHz"},
}

// conditionUnits is the base unit of a bias condition of a known name.
var conditionUnits = map[string]string{
	"IC": "A", "IB": "A", "IE": "A", "ICE": "A", "IEB": "A", "ICB": "A", "ICER": "A",
	"VCE": "V", "VCB": "V", "VEB": "V", "VBE": "V", "VC": "V", "VB": "V", "VE": "V", "VBC": "V", "VEC": "V",
	"F": "Hz", "FREQ": "Hz", "RBE": "ohm", "RB": "ohm", "RE": "ohm", "RC": "ohm", "RL": "ohm",
}

func readTests(c *collector, top *block) []Test {
	const remedy = "list the tests, as in tests: [{name: BVCEO, measures: bvceo, unit: V, lower: 22.5}]"
	top.missing("tests", remedy)
	list := top.list("tests", remedy)
	if list != nil && len(list) == 0 {
		c.add("tests", "the list of tests is empty", remedy)
	}
	var out []Test
	first := map[string]int{}
	for i, v := range list {
		path := index("tests", i)
		if v == nil {
			c.add(path, "nothing stands where a test belongs", "write a block such as {name: BVCEO, measures: bvceo, unit: V}")
			continue
		}
		t := readTest(c, path, v)
		out = append(out, t)
		if t.Name == "" {
			continue
		}
		// Header names are matched without case in data files (design: names of
		// columns), so two tests must differ in more than that.
		folded := strings.ToLower(t.Name)
		if j, ok := first[folded]; ok {
			what := fmt.Sprintf("test %s is listed already as %s", t.Name, index("tests", j))
			if other := out[j].Name; other != t.Name {
				what = fmt.Sprintf("test %s differs from %s, %s, only in case, and data files are matched without it", t.Name, other, index("tests", j))
			}
			c.add(path+".name", what, "give each test once, under a name of its own")
			continue
		}
		first[folded] = len(out) - 1
	}
	return out
}

func readTest(c *collector, path string, v any) Test {
	b := c.block(path, "tests[]", v)
	t := Test{}
	if _, ok := v.(map[string]any); ok {
		b.missing("name", "give the test's name as the data file has it")
	}
	t.Name = b.text("name", "BVCEO")
	t.Measures = b.word("measures", Measures...)
	unitOK := b.readUnit(&t)
	lower, upper := b.number("lower", "22.5"), b.number("upper", "250")
	if upper < lower {
		c.add(path+".upper", fmt.Sprintf("%s: upper %s is below lower %s", t.Name, formatNumber(upper), formatNumber(lower)),
			"swap them, or mend the one that is wrong")
	}
	if at := b.text("at", "IC=1mA"); at != "" {
		t.AtText = at
		var err error
		if t.At, err = ParseConditions(at); err != nil {
			c.add(path+".at", err.Error(), "write conditions as in IC=10uA, VCE=5V")
		}
		b.checkConditions(t.At)
	}
	clamp, floor := b.number("clamp", "80"), b.number("floor", "0.01")
	checkRange(c, path, lower, upper, clamp, floor)
	if unitOK {
		b.checkBareNumbers(t, map[string]float64{"lower": lower, "upper": upper, "clamp": clamp})
	}
	t.Lower, t.Upper = t.Unit.ToSI(lower), t.Unit.ToSI(upper)
	t.Clamp, t.Floor = t.Unit.ToSI(clamp), t.Unit.ToSI(floor)
	return t
}

// readUnit reads the test's unit and holds it against what the test measures.
func (b *block) readUnit(t *Test) (ok bool) {
	text, path := "", b.path+".unit"
	switch v := b.values["unit"].(type) {
	case nil:
		return true
	case string:
		text = v
	case float64:
		text = formatNumber(v) // 1 is a spelling of the ratio
	default:
		b.text("unit", "V")
		return false
	}
	want := measuredIn[t.Measures]
	u, err := ParseUnit(text)
	if err != nil {
		example := map[string]string{"V": "V or mV", "A": "nA or uA", "F": "pF", "Hz": "MHz", "ohm": "ohm or kohm", "ratio": `"" or ratio`}[want]
		if example == "" {
			example = "V, nA, pF, ohm or MHz"
		}
		b.add(path, oneLine(err.Error()), "write a unit such as "+example)
		return false
	}
	t.Unit = u
	if want != "" && u.Base != want {
		name := map[string]string{"V": "volts", "A": "amperes", "F": "farads", "Hz": "hertz", "ohm": "ohms", "ratio": "a ratio"}[want]
		b.add(path, fmt.Sprintf("%s is measured in %s, not in %s", t.Measures, name, unitName(u)), "give a unit of "+name+", or mend measures")
		return false
	}
	if alt, mega := u.Capitals(); mega && u.Base != "ohm" {
		b.add(path, fmt.Sprintf("%s is mega%s, which no die is measured in", u.Text, alt.Base), "write m"+alt.Base+" for milli")
		return false
	}
	return true
}

func unitName(u Unit) string {
	if u.Text == "" {
		return "a ratio"
	}
	return u.Text
}

// checkConditions holds each bias condition against its name: VCE is in volts.
func (b *block) checkConditions(list []Condition) {
	for _, c := range list {
		want := conditionUnits[strings.ToUpper(c.Name)]
		bare := c.Unit.Base == "ratio" && c.Unit.Text == ""
		if want != "" && c.Unit.Base != want && !(bare && c.Value == 0) {
			got := unitName(c.Unit)
			if bare {
				got = "no unit"
			}
			b.add(b.path+".at", fmt.Sprintf("%s has %s", c.Name, got), fmt.Sprintf("give it in %s, as in %s", want,
				map[string]string{"V": c.Name + "=5V", "A": c.Name + "=10uA", "Hz": c.Name + "=1MHz", "ohm": c.Name + "=10kohm"}[want]))
		}
	}
}

// checkRange holds clamp and floor against the limits. A tester that signs the
// readings of a pnp part clamps at a negative value: the mirror image is judged.
func checkRange(c *collector, path string, lower, upper, clamp, floor float64) {
	low, high := limit{"lower", lower, lower}, limit{"upper", upper, upper}
	top, bottom := clamp, floor
	if clamp < 0 || floor < 0 {
		low, high = limit{"upper", upper, -upper}, limit{"lower", lower, -lower}
		top, bottom = -clamp, -floor
	}
	wrong := func(key string, v float64, l limit, why, remedy string) {
		c.add(path+"."+key, fmt.Sprintf("%s %s is on the wrong side of %s %s: %s", key, formatNumber(v), l.key, formatNumber(l.written), why), remedy)
	}
	const clampIs, floorIs = "give the largest value the tester can return", "give the smallest value the tester can tell from nothing"
	switch {
	case clamp == 0:
		c.add(path+".clamp", "clamp 0 would make every reading one at the clamp", clampIs)
	case top < low.v:
		wrong("clamp", clamp, low, "no die could pass", clampIs)
	case top < high.v:
		wrong("clamp", clamp, high, "no die could fail that limit", clampIs)
	}
	switch {
	case bottom >= top:
		c.add(path+".floor", fmt.Sprintf("floor %s is not below clamp %s", formatNumber(floor), formatNumber(clamp)), floorIs)
	case bottom > high.v:
		wrong("floor", floor, high, "no die could pass", floorIs)
	case bottom > low.v && low.v > 0:
		wrong("floor", floor, low, "a reading at the floor could not be judged", floorIs)
	}
}

// limit is a limit's key, its value as written, and the value to judge by.
type limit struct {
	key        string
	written, v float64
}

// checkBareNumbers finds limits that cannot be in SI units although no unit is given.
func (b *block) checkBareNumbers(t Test, numbers map[string]float64) {
	base := measuredIn[t.Measures]
	p, ok := plausible[base]
	if !ok || t.Unit.Given() {
		return
	}
	for _, key := range []string{"lower", "upper", "clamp"} {
		if v := math.Abs(numbers[key]); v > p.high || v < p.low && v > 0 {
			b.add(b.path+".unit", fmt.Sprintf("%s has no unit, and %s %s would be %s %s", t.Name, key, formatNumber(numbers[key]), formatNumber(numbers[key]), base),
				"give the unit of the limits and the data, such as unit: "+p.example)
			return
		}
	}
}

func readBaseline(c *collector, v any, tests []Test) *Baseline {
	b := c.block("baseline", "baseline", v)
	out := &Baseline{Yield: b.number("yield", "0.95")}
	switch y := out.Yield; {
	case y > 1 && y <= 100:
		b.add("baseline.yield", formatNumber(y)+" is above 1", "write it as a share: "+formatNumber(percent.ToSI(y)))
	case y > 1, y <= 0:
		b.add("baseline.yield", formatNumber(y)+" is no yield", "write a share above 0 and up to 1, such as 0.95")
	}
	m, ok := b.values["tests"].(map[string]any)
	if v := b.values["tests"]; v != nil && !ok {
		b.add("baseline.tests", describe(v)+" stands where a block of keys belongs", "write tests: {BVCEO: {median: 24.8, sigma: 0.6}}")
	}
	names := make([]string, len(tests))
	exact, folded := map[string]string{}, map[string]string{}
	for i := len(tests) - 1; i >= 0; i-- { // the first of two listed wins
		names[i] = tests[i].Name
		exact[names[i]], folded[strings.ToLower(names[i])] = names[i], names[i]
	}
	keysOf := map[string][]string{} // by listed test
	var strangers []string
	for _, k := range sortedKeys(m) {
		name, ok := exact[k]
		if !ok {
			name, ok = folded[strings.ToLower(k)]
		}
		if ok && name != "" {
			keysOf[name] = append(keysOf[name], k)
		} else {
			strangers = append(strangers, k)
		}
	}
	for _, t := range tests {
		for i, k := range keysOf[t.Name] {
			path := join("baseline.tests", k)
			if i > 0 {
				c.add(path, fmt.Sprintf("test %s has a baseline already, as %s", t.Name, keysOf[t.Name][0]), "keep one of them")
				continue
			}
			if out.Tests == nil {
				out.Tests = map[string]BaselineTest{}
			}
			out.Tests[t.Name] = readBaselineTest(c, path, m[k], t)
		}
		delete(keysOf, t.Name) // a test listed twice is reported already
	}
	for _, k := range strangers {
		remedy := "add it to tests, or take it out of the baseline"
		// A baseline of another product altogether is not worth the search.
		if near := nearest(k, names[:min(len(names), 100_000/len(strangers))]); near != "" {
			remedy = "did you mean " + near + "?"
		}
		c.add(join("baseline.tests", k), "there is no such test in tests", remedy)
	}
	return out
}

var percent = Unit{"%", "ratio", -2}

func readBaselineTest(c *collector, path string, v any, t Test) BaselineTest {
	b := c.block(path, "baseline.tests.*", v)
	if v == nil {
		c.add(path, "nothing stands where median and sigma belong", "write {median: 24.8, sigma: 0.6}, or leave the test out")
	} else if _, ok := v.(map[string]any); ok {
		b.missing("median", "give the typical reading in the test's unit")
	}
	median := b.number("median", "24.8")
	if si := t.Unit.ToSI(median); si < t.Lower || si > t.Upper {
		c.add(path+".median", fmt.Sprintf("median %s is outside of the test's limits %s", formatNumber(median),
			limitText(t.Unit.FromSI(t.Lower), t.Unit.FromSI(t.Upper))), "give the median of healthy lots in the unit of the limits")
	}
	return BaselineTest{
		Median:         t.Unit.ToSI(median),
		Sigma:          t.Unit.ToSI(b.positive("sigma", "0.6")),
		WithinLotSigma: t.Unit.ToSI(b.positive("within_lot_sigma", "0.5")),
		LotSigma:       t.Unit.ToSI(b.positive("lot_sigma", "0.3")),
	}
}
