package ingest

import (
	"fmt"
	"math"

	"kneepoint/config"
)

// chunk builds the wide chunk.
func (p *pivoting) chunk() *chunk {
	n := len(p.ofDie)
	c := &chunk{n: n, file: p.file, text: make([]textColumn, len(p.text)), values: make([][]float64, len(p.t.sch.tests)), weight: make([]int32, n), files: make([]int32, n)}
	info := p.tests()
	for _, from := range p.long {
		p.textCodes(from, textUnit)
	}
	// The units of all rows together, as the letter M wants it.
	units, errs := config.ParseUnits(p.text[textUnit].dict)
	p.settleUnits(info, units)
	row := 0
	for _, from := range p.long {
		for i := range from.n {
			if m := p.meas[row+i]; m >= 0 {
				if c.weight[m] == 0 {
					c.files[m] = int32(from.file)
				}
				c.weight[m]++
			}
		}
		p.copyInts(c, from, row)
		p.copyTexts(c, from, row)
		p.copyValues(c, from, row, info, units)
		row += from.n
	}
	for s := range c.text {
		c.text[s].dict = p.text[s].dict
	}
	p.finish(info, errs)
	return c
}

// copyInts takes whole-number columns and the pass flag: the first value that
// a measurement has.
func (p *pivoting) copyInts(c, from *chunk, row int) {
	for s := range intNumber {
		col := from.ints[s]
		if col == nil {
			continue
		}
		if c.ints[s] == nil {
			c.ints[s] = make([]int32, c.n)
			for i := range c.ints[s] {
				c.ints[s][i] = Missing
			}
		}
		for i, v := range col {
			if m := p.meas[row+i]; m >= 0 && v != Missing && c.ints[s][m] == Missing {
				c.ints[s][m] = v
			}
		}
	}
	if from.pass == nil {
		return
	}
	if c.pass == nil {
		c.pass = make([]int8, c.n)
		for i := range c.pass {
			c.pass[i] = -1
		}
	}
	// Where rows of one measurement have a flag each, one fail fails the die.
	for i, v := range from.pass {
		if m := p.meas[row+i]; m >= 0 && v >= 0 && c.pass[m] != 0 {
			c.pass[m] = v
		}
	}
}

func (p *pivoting) copyTexts(c, from *chunk, row int) {
	for s := range from.text {
		if from.text[s].codes == nil || s == textTest || s == textUnit || s == textAt {
			continue
		}
		if c.text[s].codes == nil {
			c.text[s].codes = make([]int32, c.n)
			for i := range c.text[s].codes {
				c.text[s].codes[i] = -1
			}
		}
		at := p.textCodes(from, s)
		for i := range from.n {
			if m := p.meas[row+i]; m >= 0 && c.text[s].codes[m] < 0 {
				c.text[s].codes[m] = at(i)
			}
		}
	}
}

// longTest is what the rows of a long table say about one test.
type longTest struct {
	used      bool
	unit      config.Unit
	unitCode  int32 // text of the unit, -1 none
	others    int   // rows in another unit
	foreign   int   // rows in a unit that does not convert
	example   string
	limits    map[[2]float64]int
	order     [][2]float64
	condition string
	number    int
}

// tests prepares the account of each test.
func (p *pivoting) tests() []longTest {
	info := make([]longTest, len(p.t.sch.tests))
	for i := range info {
		info[i] = longTest{unitCode: -1, limits: map[[2]float64]int{}, number: Missing}
	}
	return info
}

// settleUnits decides in which unit the values of each test are kept: that of
// its first row, unless more rows are in units of another dimension.
func (p *pivoting) settleUnits(info []longTest, units []config.Unit) {
	counts := make([][]int, len(info)) // rows by test and text of the unit
	order := make([][]int32, len(info))
	row := 0
	for _, from := range p.long {
		unit := p.textCodes(from, textUnit)
		for i := range from.n {
			code, slot := unit(i), p.test[row+i]
			if code < 0 || slot < 0 || p.meas[row+i] < 0 {
				continue
			}
			if counts[slot] == nil {
				counts[slot] = make([]int, len(units))
			}
			if counts[slot][code] == 0 {
				order[slot] = append(order[slot], code)
			}
			counts[slot][code]++
		}
		row += from.n
	}
	for slot := range info {
		best, most := int32(-1), 0
		for _, code := range order[slot] {
			n := 0 // rows in units that convert to this one
			for _, o := range order[slot] {
				if o == code || units[o].Given() && units[code].Given() && units[o].Compatible(units[code]) {
					n += counts[slot][o]
				}
			}
			if n > most {
				best, most = code, n
			}
		}
		if best >= 0 {
			info[slot].unitCode, info[slot].unit = best, units[best]
		}
	}
}

// copyValues puts readings in place. All values of a test are kept in one unit;
// those in a unit of another dimension are missing.
func (p *pivoting) copyValues(c, from *chunk, row int, info []longTest, units []config.Unit) {
	unit := p.textCodes(from, textUnit)
	for i := range from.n {
		m := p.meas[row+i]
		if m < 0 {
			continue
		}
		slot := p.test[row+i]
		t := &info[slot]
		if c.values[slot] == nil {
			c.values[slot] = nanColumn(c.n)
		}
		t.used = true
		v, lower, upper := valueAt(from, longValue, i), valueAt(from, longLower, i), valueAt(from, longUpper, i)
		if code := unit(i); code >= 0 {
			u := units[code]
			switch {
			case code == t.unitCode:
			case t.unit.Given() && (!u.Given() || !u.Compatible(t.unit)):
				if t.foreign++; t.foreign == 1 {
					t.example = p.text[textUnit].dict[code]
				}
				v, lower, upper = math.NaN(), math.NaN(), math.NaN()
			default:
				t.others++
				if u.Given() && t.unit.Given() {
					v, lower, upper = convertUnit(v, u, t.unit), convertUnit(lower, u, t.unit), convertUnit(upper, u, t.unit)
				}
			}
		}
		c.values[slot][m] = v
		if lower == lower || upper == upper {
			t.limit(lower, upper)
		}
		if t.condition == "" {
			t.condition = from.text[textAt].at(i)
		}
		if col := from.ints[intNumber]; col != nil && t.number == Missing {
			t.number = int(col[i])
		}
	}
}

func convertUnit(v float64, from, to config.Unit) float64 {
	if from.Exp == to.Exp {
		return v
	}
	if b, sign, ok := asBound(v); ok {
		return boundOf(to.FromSI(from.ToSI(b)), sign)
	}
	return to.FromSI(from.ToSI(v))
}

func valueAt(c *chunk, slot, i int) float64 {
	if c.values[slot] == nil {
		return math.NaN()
	}
	return c.values[slot][i]
}

func nanColumn(n int) []float64 {
	v := make([]float64, n)
	for i := range v {
		v[i] = math.NaN()
	}
	return v
}

// limit counts a pair of limits.
func (t *longTest) limit(lower, upper float64) {
	key := [2]float64{noLimit(lower), noLimit(upper)}
	if t.limits[key] == 0 {
		t.order = append(t.order, key)
	}
	t.limits[key]++
}

// noLimit turns NaN, which is no map key, and absurd limits into infinity.
func noLimit(v float64) float64 {
	if v != v || math.Abs(v) >= 1e30 {
		return math.Inf(1)
	}
	return v
}

// finish keeps what was learnt of the tests as if it had stood in rows under a
// header.
func (p *pivoting) finish(info []longTest, errs []error) {
	for slot := range info {
		t := &info[slot]
		if !t.used {
			continue
		}
		c := testColumn{name: p.t.sch.tests[slot], unit: t.unit, lower: math.NaN(), upper: math.NaN(), condition: t.condition, number: t.number, field: -1}
		if t.unitCode >= 0 && errs[t.unitCode] != nil {
			p.t.note(all, Warning, "unit-not-understood", fmt.Sprintf("test %s: %v", c.name, errs[t.unitCode]),
				"correct the unit; the product file's is used if it gives one", 0)
		}
		if t.others > 0 {
			p.t.note(all, Info, "mixed-units", fmt.Sprintf("test %s: %d %s in another unit than the others; converted to %s", c.name, t.others,
				plural(t.others, "row is", "rows are"), t.unit.Text), "", 0)
		}
		if t.foreign > 0 {
			p.t.note(all, Severe, "unit-conflict", fmt.Sprintf("test %s: %d %s in a unit that does not convert to %s, first %s; these readings are missing", c.name, t.foreign,
				plural(t.foreign, "row is", "rows are"), showUnit(t.unit), quote(t.example)), "correct the unit in the data, or give the readings a test name of their own", t.foreign)
		}
		t.majority(p.t, &c)
		p.t.longColumns = append(p.t.longColumns, c)
	}
}

// majority gives a test the limits that most of its rows have, the first of
// equals.
func (t *longTest) majority(r *readings, c *testColumn) {
	best, total := -1, 0
	for i, k := range t.order {
		total += t.limits[k]
		if best < 0 || t.limits[k] > t.limits[t.order[best]] {
			best = i
		}
	}
	if best < 0 {
		return
	}
	k := t.order[best]
	if !math.IsInf(k[0], 0) {
		c.lower = k[0]
	}
	if !math.IsInf(k[1], 0) {
		c.upper = k[1]
	}
	if len(t.order) > 1 {
		r.note(all, Warning, "limits-mixed", fmt.Sprintf("test %s has %d different pairs of limits among its rows; those of most rows are used, %d rows have others",
			c.name, len(t.order), total-t.limits[k]), "check whether test programs were mixed", 0)
	}
}
