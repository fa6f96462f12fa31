package ingest

import (
	"fmt"
	"math"
	"slices"
	"strconv"

	"kneepoint/config"
)

// said is what one file says of one test.
type said struct {
	file int
	*testColumn
}

// told collects what the files say, by test of the schema and in the order of
// the files. What a long table says holds for every long file.
func (t *readings) told() [][]said {
	out := make([][]said, len(t.sch.tests))
	for fi, f := range t.files {
		if f.layout == nil {
			continue
		}
		columns := f.layout.columns
		if f.layout.long {
			columns = t.longColumns
		}
		for k := range columns {
			i := t.sch.test(columns[k].name)
			out[i] = append(out[i], said{fi, &columns[k]})
		}
	}
	return out
}

// settleUnits decides in which unit each file has the values of each test: its
// own; the product file's when it gives none, or one that cannot be; else that
// of an earlier file.
func (t *readings) settleUnits(product *config.Product) {
	t.units, t.si = make([][]config.Unit, len(t.sch.tests)), map[[2]int]bool{}
	for i, all := range t.told() {
		t.units[i] = make([]config.Unit, len(t.files))
		var own, first config.Unit
		if p := productTest(product, t.sch.tests[i]); p >= 0 {
			own = product.Tests[p].Unit
		}
		long := false
		for _, c := range all {
			again := t.files[c.file].layout.long && long // said once for all long files
			long = long || t.files[c.file].layout.long
			unit := t.unitOf(i, c, own, first, again)
			t.units[i][c.file] = unit
			if c.si {
				t.si[[2]int{i, c.file}] = true
			}
			if !first.Given() {
				first = unit
			}
		}
	}
}

func (t *readings) unitOf(test int, c said, own, first config.Unit, again bool) config.Unit {
	name, unit := t.sch.tests[test], c.unit
	note := func(s Severity, code, text, remedy string) {
		if !again {
			t.note(c.file, s, code, "test "+name+": "+text, remedy, 0)
		}
	}
	switch {
	case !unit.Given() && own.Given():
		return own
	case !unit.Given():
		return first
	case own.Given() && !own.Compatible(unit):
		note(Severe, "unit-conflict", fmt.Sprintf("the data file says %s and the product file %s, which do not convert into one another; the values are taken as %s",
			showUnit(unit), showUnit(own), showUnit(own)), "correct the unit in the product file or in the data")
		return own
	case own.Given() && own.Exp != unit.Exp:
		note(Info, "unit-prefix", fmt.Sprintf("the data file says %s and the product file %s; the values are converted", showUnit(unit), showUnit(own)), "")
	case !own.Given() && first.Given() && !first.Compatible(unit):
		note(Severe, "unit-conflict", fmt.Sprintf("one file says %s and another %s, which do not convert into one another; the values are taken as %s",
			showUnit(first), showUnit(unit), showUnit(first)), "correct the unit in the files")
		return first
	}
	return unit
}

// describe gives what is known of each test of a lot, from the product file and
// from the files that the lot has rows of; slots are the tests' places in the
// schema. A test that none of these files has is left out.
func (t *readings) describe(product *config.Product, files []bool, note func(Severity, string, string, string, int)) (infos []testInfo, slots []int) {
	for slot, all := range t.told() {
		i := testInfo{name: t.sch.tests[slot], product: productTest(product, t.sch.tests[slot]), lower: math.NaN(), upper: math.NaN(),
			clamp: math.NaN(), floor: math.NaN(), number: Missing}
		used := slot < len(t.given)
		if used {
			i = t.given[slot]
			i.fileUnits = []config.Unit{i.unit} // values that never were in a file
		}
		for _, c := range all {
			if files[c.file] {
				used = true
				i.fromFile(c, t.units[slot][c.file], note)
			}
		}
		if !used {
			continue
		}
		i.uncross(note)
		if i.product >= 0 {
			i.fromProduct(&product.Tests[i.product], note)
		}
		infos, slots = append(infos, i), append(slots, slot)
	}
	if product != nil {
		var absent []string
		for p := range product.Tests {
			if !slices.ContainsFunc(infos, func(i testInfo) bool { return i.product == p }) {
				absent = append(absent, product.Tests[p].Name)
			}
		}
		if len(absent) > 0 {
			note(Warning, "test-not-in-data", fmt.Sprintf("%d of the product file's %d tests %s not in the data: %s", len(absent), len(product.Tests),
				plural(len(absent), "is", "are"), list(absent, 12)), "check the names, also those in the header", 0)
		}
	}
	return infos, slots
}

// fromFile takes what one file says of the test. The first file to say
// something holds.
func (i *testInfo) fromFile(c said, unit config.Unit, note func(Severity, string, string, string, int)) {
	if c.unitText != "" || c.unit.Given() || c.lower == c.lower || c.upper == c.upper || c.condition != "" {
		i.declared = true
	}
	if !i.unit.Given() {
		i.unit = unit
	}
	if c.si {
		unit = config.Unit{Text: unit.Base, Base: unit.Base}
	}
	i.addUnits(c, unit)
	lower, upper := unit.ToSI(c.lower), unit.ToSI(c.upper)
	if lower == lower || upper == upper {
		if i.limitsFrom == "" {
			i.lower, i.upper, i.limitsFrom = lower, upper, "data file"
		} else if differ(i.lower, lower) || differ(i.upper, upper) {
			note(Warning, "limits-mixed", fmt.Sprintf("test %s: the files give different limits, %s and %s; the first are used", i.name,
				showLimits(i.lower, i.upper, i.unit), showLimits(lower, upper, i.unit)), "check whether test programs were mixed", 0)
		}
	}
	if i.condition == "" {
		i.condition = c.condition
	}
	if i.number == Missing {
		i.number = c.number
	}
	i.fromOwn(c.own)
}

// uncross drops limits of the data file of which the lower is above the upper:
// no die could hold both.
func (i *testInfo) uncross(note func(Severity, string, string, string, int)) {
	if !(i.lower > i.upper) {
		return
	}
	note(Severe, "limits-crossed", fmt.Sprintf("test %s: the data file's lower limit is above its upper one, %s; neither is used", i.name, showLimits(i.lower, i.upper, i.unit)),
		"correct the limits in the data, or give them in the product file", 0)
	i.lower, i.upper, i.limitsFrom = math.NaN(), math.NaN(), ""
}

// fromProduct lets the product file have its say.
func (i *testInfo) fromProduct(p *config.Test, note func(Severity, string, string, string, int)) {
	i.declared = true
	i.name = p.Name
	i.measures = p.Measures
	if p.Unit.Given() {
		i.unit = p.Unit
	}
	if p.AtText != "" {
		i.condition = p.AtText
	}
	if p.Clamp == p.Clamp {
		i.clamp = p.Clamp
	}
	if p.Floor == p.Floor {
		i.floor = p.Floor
	}
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
	if i.lower > i.upper {
		note(Severe, "limits-crossed", fmt.Sprintf("test %s: the product file gives one limit and the data file another that it contradicts, %s; the data file's is not used", i.name,
			showLimits(i.lower, i.upper, i.unit)), "give both limits in the product file", 0)
		i.lower, i.upper = p.Lower, p.Upper
		return
	}
	if had && (p.Lower == p.Lower && differ(p.Lower, fileLower) || p.Upper == p.Upper && differ(p.Upper, fileUpper)) {
		note(Warning, "limits-differ", fmt.Sprintf("test %s: the data file has limits %s, the product file %s; the product file's hold", i.name,
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

// all stands for every file in readings.note.
const all = -1

// fileFindings turns the counts of odd rows of one file into findings.
func (t *readings) fileFindings(file int) {
	f := t.files[file]
	for _, n := range f.notes {
		t.note(file, n.Severity, n.Code, n.Text, n.Remedy, n.Dice)
	}
	name := f.input.File
	if f.err != nil {
		t.note(file, Severe, "broken-off", fmt.Sprintf("%s: %s; the %d rows before are used, what followed is missing", name, f.err.What, f.rows.read-f.rows.odd[cutRow].n), f.err.Remedy, 0)
	}
	for _, k := range []struct {
		o            rowOddity
		severity     Severity
		code         string
		one, many    string
		note, remedy string
	}{
		{cutRow, Severe, "cut-short", "the file ends in the middle of this line", "", "; it is not used, and rows after it may be missing", "fetch the file again"},
		{longRow, Warning, "long-row", "this row has more fields than the header", "%d rows, this one first, have more fields than the header",
			"; not used, as it cannot be told which field is which", "put quotes around text that holds the separator"},
		{shortRow, Warning, "short-row", "this row has fewer fields than the header", "%d rows, this one first, have fewer fields than the header",
			"; used as far as they go", "export the table again"},
		{noWaferRow, Warning, "no-wafer", "this row has no wafer id", "%d rows, this one first, have no wafer id", "; not used, as the dice cannot be placed",
			"fill the wafer column, also where a spreadsheet left it out below the first row"},
		{binaryRow, Severe, "binary-row", "this row holds zero bytes", "%d rows, this one first, hold zero bytes", "; not used", "the file was damaged on its way; fetch it again"},
		{headerAgain, Info, "repeated-header", "the header stands here again", "the header stands %d times more, here first", ", as when files are joined", ""},
		{blankRow, Info, "blank-row", "this row holds nothing but separators", "%d rows, this one first, hold nothing but separators", "", ""},
		{unclosedRow, Warning, "unclosed-quote", "a quote is not closed", "quotes are not closed in %d rows, this one first", "; taken as text", "double the quotes within quoted text"},
	} {
		if c := f.rows.odd[k.o]; c.n > 0 {
			what := k.one
			if c.n > 1 {
				what = fmt.Sprintf(k.many, c.n)
			}
			t.note(file, k.severity, k.code, fmt.Sprintf("%s:%d: %s%s", name, c.first.line, what, k.note), k.remedy, c.n)
		}
	}
	if f.layout == nil {
		return
	}
	t.limitFindings(file)
	t.thousandsFinding(file)
	for i, fd := range f.layout.fields {
		c := f.odd[oddKey{field: i, kind: cellBad}]
		if fd.kind != intField && fd.kind != passField || c.n == 0 {
			continue
		}
		kind := "whole number"
		if fd.kind == passField {
			kind = "pass flag"
		}
		t.note(file, Warning, "unreadable-value", fmt.Sprintf("%s:%d: column %s: %d %s no %s, first %s; taken as missing", name, c.first.line, f.layout.names[i], c.n,
			plural(c.n, "cell is", "cells are"), kind, quote(c.first.text)), "correct the cells, or name the right column under columns in the product file", c.n)
	}
}

// thousandsFinding tells of numbers whose comma was taken to part thousands.
func (t *readings) thousandsFinding(file int) {
	f, n, first := t.files[file], 0, place{}
	for k, o := range f.odd { // sums and the least line, the order is all one
		if k.kind != cellThousands {
			continue
		}
		if n += o.n; first.line == 0 || o.first.line < first.line {
			first = o.first
		}
	}
	if n > 0 {
		t.note(file, Info, "thousands", fmt.Sprintf("%s:%d: %d %s such as %s %s taken as thousands, as commas part the columns of this file and points the fractions", f.input.File,
			first.line, n, plural(n, "cell", "cells"), quote(first.text), plural(n, "is", "are")), "write numbers without a comma if these are fractions", n)
	}
}

// limitFindings tells of limits in the rows of a long table that cannot be read.
func (t *readings) limitFindings(file int) {
	f := t.files[file]
	for i, fd := range f.layout.fields {
		if !f.layout.long || fd.kind != valueField || fd.slot == longValue {
			continue
		}
		n, first, test := 0, place{}, ""
		for k, o := range f.odd { // sums and the least line, the order is all one
			if k.field != i || k.kind != cellBad {
				continue
			}
			n += o.n
			if first.line == 0 || o.first.line < first.line {
				first, test = o.first, k.test
			}
		}
		if n > 0 {
			t.note(file, Severe, "limit-not-understood", fmt.Sprintf("%s:%d: column %s: %d %s cannot be read and %s not used, first %s of test %s", f.input.File, first.line,
				f.layout.names[i], n, plural(n, "limit", "limits"), plural(n, "is", "are"), quote(first.text), test),
				"write plain numbers in the test's unit, or give the limits in the product file", 0)
		}
	}
}

// firstOdd finds where a kind of odd cell of a test stands first, in the files
// that a lot has rows of.
func (t *readings) firstOdd(test int, kind status, files []bool) (at, text string) {
	for i, f := range t.files {
		if f.layout == nil || !files[i] {
			continue
		}
		for k, fd := range f.layout.fields {
			if fd.kind != valueField || f.layout.long && fd.slot != longValue || !f.layout.long && fd.slot != test {
				continue
			}
			key := oddKey{field: k, kind: kind}
			if f.layout.long {
				key.test = t.sch.tests[test]
			}
			if o, ok := f.odd[key]; ok {
				return fmt.Sprintf("%s:%d: ", f.input.File, o.first.line), o.first.text
			}
		}
	}
	return "", ""
}
