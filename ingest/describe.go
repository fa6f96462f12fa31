package ingest

import (
	"fmt"
	"math"
	"strconv"

	"kneepoint/config"
)

// describeTests settles unit, limits and what else is known of each test from
// files and product file.
func (t *readings) describeTests(product *config.Product) {
	for i := len(t.tests); i < len(t.sch.tests); i++ {
		t.tests = append(t.tests, testInfo{name: t.sch.tests[i], product: productTest(product, t.sch.tests[i]), units: make([]config.Unit, len(t.files)),
			lower: math.NaN(), upper: math.NaN(), clamp: math.NaN(), floor: math.NaN(), number: Missing})
	}
	for fi, f := range t.files {
		if f.layout == nil {
			continue
		}
		for _, c := range f.layout.columns {
			i := t.sch.test(c.name)
			t.tests[i].used = true
			t.tests[i].fromFile(t, fi, &c, product)
		}
	}
	absent := []string{}
	if product != nil {
		for pi := range product.Tests {
			found := false
			for i := range t.tests {
				if t.tests[i].used && t.tests[i].product == pi {
					t.tests[i].fromProduct(t, &product.Tests[pi])
					found = true
				}
			}
			if !found {
				absent = append(absent, product.Tests[pi].Name)
			}
		}
	}
	if len(absent) > 0 {
		t.note(Warning, "test-absent", fmt.Sprintf("%d of the product file's %d tests %s not in the data: %s", len(absent), len(product.Tests),
			plural(len(absent), "is", "are"), list(absent, 12)), "check the names, also those in the header", 0)
	}
}

// fromFile takes what one file says of the test. The first file to say
// something holds.
func (i *testInfo) fromFile(t *readings, file int, c *testColumn, product *config.Product) {
	if c.unitText != "" || c.unit.Given() || c.lower == c.lower || c.upper == c.upper || c.condition != "" {
		i.declared = true
	}
	var own config.Unit // the product's
	if i.product >= 0 {
		own = product.Tests[i.product].Unit
		i.declared = true
	}
	unit := c.unit
	switch {
	case !unit.Given():
		unit = own
		if !own.Given() {
			unit = i.unit
		}
	case own.Given() && !own.Compatible(unit):
		t.note(Severe, "unit-conflict", fmt.Sprintf("test %s: the data file says %s and the product file %s, which do not convert into one another; the values are taken as %s",
			i.name, showUnit(unit), showUnit(own), showUnit(own)), "correct the unit in the product file or in the data", 0)
		unit = own
	case own.Given() && own.Exp != unit.Exp:
		t.note(Info, "unit-prefix", fmt.Sprintf("test %s: the data file says %s and the product file %s; the values are converted", i.name, showUnit(unit), showUnit(own)), "", 0)
	case !own.Given() && i.unit.Given() && !i.unit.Compatible(unit):
		t.note(Severe, "unit-conflict", fmt.Sprintf("test %s: one file says %s and another %s; the values are taken as %s",
			i.name, showUnit(i.unit), showUnit(unit), showUnit(i.unit)), "correct the unit in the files", 0)
		unit = i.unit
	}
	i.units[file] = unit
	if !i.unit.Given() {
		i.unit = unit
	}
	lower, upper := unit.ToSI(c.lower), unit.ToSI(c.upper)
	if i.limitsFrom != "" && (differ(i.lower, lower) || differ(i.upper, upper)) && (lower == lower || upper == upper) {
		t.note(Warning, "limits-mixed", fmt.Sprintf("test %s: the files give different limits, %s and %s; the first are used", i.name,
			showLimits(i.lower, i.upper, i.unit), showLimits(lower, upper, i.unit)), "check whether test programs were mixed", 0)
	}
	if i.limitsFrom == "" && (lower == lower || upper == upper) {
		i.lower, i.upper, i.limitsFrom = lower, upper, "data file"
	}
	if i.condition == "" {
		i.condition = c.condition
	}
	if i.number == Missing {
		i.number = c.number
	}
}

// fromProduct lets the product file have its say.
func (i *testInfo) fromProduct(t *readings, p *config.Test) {
	i.name = p.Name
	i.measures = p.Measures
	if p.Unit.Given() {
		i.unit = p.Unit
	}
	if p.AtText != "" {
		i.condition = p.AtText
	}
	i.clamp, i.floor = p.Clamp, p.Floor
	if p.Lower != p.Lower && p.Upper != p.Upper {
		return
	}
	fileLower, fileUpper, had := i.lower, i.upper, i.limitsFrom != ""
	if p.Lower == p.Lower {
		i.lower = p.Lower
	}
	if p.Upper == p.Upper {
		i.upper = p.Upper
	}
	i.limitsFrom = "product file"
	if had && (p.Lower == p.Lower && differ(p.Lower, fileLower) || p.Upper == p.Upper && differ(p.Upper, fileUpper)) {
		t.note(Warning, "limits-differ", fmt.Sprintf("test %s: the data file has limits %s, the product file %s; the product file's hold", i.name,
			showLimits(fileLower, fileUpper, i.unit), showLimits(i.lower, i.upper, i.unit)), "check which revision of the test program was run", 0)
	}
}

// differ says whether two limits are not the same; NaN equals NaN. Limits that
// went through two units may differ in the last digits.
func differ(a, b float64) bool {
	if a != a || b != b {
		return (a != a) != (b != b)
	}
	return math.Abs(a-b) > 1e-9*math.Max(math.Abs(a), math.Abs(b))
}

func showUnit(u config.Unit) string {
	if u.Text != "" {
		return u.Text
	}
	return "a ratio"
}

// show gives a value in a unit.
func show(v float64, u config.Unit) string {
	if v != v {
		return "none"
	}
	s := strconv.FormatFloat(u.FromSI(v), 'g', 6, 64)
	if u.Text != "" {
		s += " " + u.Text
	}
	return s
}

func showLimits(lower, upper float64, u config.Unit) string {
	return show(lower, u) + " to " + show(upper, u)
}

// fileFindings turns the counts of rows of one file into findings.
func (t *readings) fileFindings(f *fileData) {
	t.findings = append(t.findings, f.notes...)
	name, r := f.input.File, &f.rows
	at := func(p place) string { return fmt.Sprintf("%s:%d", name, p.line) }
	if f.err != nil {
		t.note(Severe, "broken-off", fmt.Sprintf("%s: %s; the %d rows before are used, what followed is missing", name, f.err.What, f.rows.read-f.rows.cut), f.err.Remedy, 0)
	}
	if r.cut > 0 {
		t.note(Severe, "cut-short", at(r.firstCut)+": the file ends in the middle of this line; the line is not used, and rows after it may be missing", "fetch the file again", r.cut)
	}
	if r.long > 0 {
		t.note(Warning, "too-many-fields", fmt.Sprintf("%s: %d %s more fields than the header has columns, this one first; not used, for it cannot be told which field is which",
			at(r.firstLong), r.long, plural(r.long, "row has", "rows have")), "put quotes around text that holds the separator", r.long)
	}
	if r.short > 0 {
		t.note(Warning, "too-few-fields", fmt.Sprintf("%s: %d %s fewer fields than the header has columns, this one first; used as far as they go",
			at(r.firstShort), r.short, plural(r.short, "row has", "rows have")), "export the table again", r.short)
	}
	if r.binary > 0 {
		t.note(Severe, "zero-bytes", fmt.Sprintf("%s: %d %s zero bytes, this one first; not used", at(r.firstBinary), r.binary, plural(r.binary, "row holds", "rows hold")),
			"the file was damaged on its way; fetch it again", r.binary)
	}
	if r.header > 0 {
		t.note(Info, "repeated-header", fmt.Sprintf("%s: the header stands %d more %s among the rows, as when files are joined", at(r.firstHeader), r.header, plural(r.header, "time", "times")), "", 0)
	}
	if r.blank > 0 {
		t.note(Info, "blank-row", fmt.Sprintf("%s: %d %s nothing but separators", name, r.blank, plural(r.blank, "row holds", "rows hold")), "", 0)
	}
	if r.unclosed > 0 {
		t.note(Warning, "unclosed-quote", fmt.Sprintf("%s: %d %s a quote that is not closed, this one first; it is taken as text", at(r.firstUnclosed), r.unclosed,
			plural(r.unclosed, "row has", "rows have")), "double quotes within quoted text", r.unclosed)
	}
}

// cellFindings turns the counts of cells into findings, in the order of files
// and columns.
func (t *readings) cellFindings() {
	for _, f := range t.files {
		if f.layout == nil {
			continue
		}
		for i := range f.layout.fields {
			c := &f.cells[i]
			name, file := f.layout.names[i], f.input.File
			what := "test " + name
			if f.layout.fields[i].role != "" {
				what = "column " + name
			}
			if c.bad > 0 {
				t.note(Warning, "not-a-number", fmt.Sprintf("%s:%d: %s: %d %s text that is no number, first %s; taken as missing", file, c.firstBad.line, what, c.bad,
					plural(c.bad, "cell holds", "cells hold"), quote(c.firstBad.text)), "correct the cells, or tell what the text means", c.bad)
			}
			if c.inf > 0 {
				t.note(Warning, "infinite", fmt.Sprintf("%s:%d: %s: %d %s infinite, first %s; taken as missing", file, c.firstInf.line, what, c.inf,
					plural(c.inf, "value is", "values are"), quote(c.firstInf.text)), "", c.inf)
			}
			if c.over > 0 {
				t.note(Warning, "out-of-range", fmt.Sprintf("%s:%d: %s: %d %s a word for out of range, first %s; taken as missing", file, c.firstOver.line, what, c.over,
					plural(c.over, "cell holds", "cells hold"), quote(c.firstOver.text)), "export the reading at the clamp instead, so that it counts as a bound", c.over)
			}
			if c.missing > 0 {
				t.note(Info, "missing-word", fmt.Sprintf("%s: %s: %d %s a word for no reading, as NA", file, what, c.missing, plural(c.missing, "cell holds", "cells hold")), "", c.missing)
			}
		}
	}
}
