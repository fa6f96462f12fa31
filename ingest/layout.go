package ingest

import (
	"fmt"
	"slices"
	"strings"

	"kneepoint/config"
)

// layout is what the start of a file says about the rest: how it is written
// and what each column is.
type layout struct {
	file    string
	sep     byte
	decimal byte
	// decimalSeen is false when no number of the sample had a fraction.
	decimalSeen bool
	waferElse   string   // wafer of a file without any, "" none
	names       []string // header as written
	header      [][]byte // the same as bytes, to know it again
	headerLine  int
	long        bool
	fields      []field // by column of the file
	start       int     // where the data start in the head
	startLine   int
	attributes  [][2]string // key and value of comments and lines above the header, in order
	notes       []Finding
	columns     []testColumn // of a wide table, by field.slot
	sample      [][]string   // first data rows
	product     *config.Product
	cellUnits   map[int]string // of columns whose cells hold their unit, see unitInCells
}

// fieldKind says how the cells of a column are read.
type fieldKind uint8

const (
	skipField  fieldKind = iota
	textField            // slot: text column of the schema
	intField             // slot: intX ...
	passField            //
	valueField           // slot: column of numbers
)

type field struct {
	kind fieldKind
	slot int
	role string // "" for tests and attributes
}

// testColumn is what a wide file says about one test.
type testColumn struct {
	name         string
	unitText     string
	unit         config.Unit
	lower, upper float64 // in the file's unit
	condition    string
	number       int
	field        int
	limitCells   [2]headCell // lower and upper limit as written
	si           bool        // values and limits are SI already; the unit is for showing
	own          *ownFact    // what only files of convert say
}

// Slots of the fixed text, whole-number and value columns.
const (
	textLot = iota
	textWafer
	textPart
	textTest
	textUnit
	textProduct
	textAt
	textTime
	textAttributes // first of the attributes
)

const (
	intX = iota
	intY
	intSite
	intTouchdown
	intHardBin
	intSoftBin
	intMeasurement // of files that convert wrote: place among the measurements of its die
	intNumber
	intColumns
)

const (
	longValue = iota
	longLower
	longUpper
	longColumns
)

var textRoles = map[string]int{"lot": textLot, "wafer": textWafer, "part": textPart, "test": textTest, "unit": textUnit,
	roleProduct: textProduct, roleAt: textAt, "time": textTime}
var intRoles = map[string]int{"x": intX, "y": intY, "site": intSite, "touchdown": intTouchdown, "hard_bin": intHardBin,
	"soft_bin": intSoftBin, roleNumber: intNumber}
var longValues = map[string]int{"value": longValue, "lower": longLower, "upper": longUpper}

// headCell is a cell of a row under the header, line 0: none.
type headCell struct {
	line int
	text string
}

// headRow is one row of the head as text.
type headRow struct {
	cells []string
	raw   [][]byte
	line  int
	next  int // offset of the row after it
	after int // line of the row after it
}

const (
	headRows   = 200  // rows in which the header is looked for
	sampleRows = 1000 // rows by which columns are judged
)

// lineOf gives a file's error at a line.
func (l *layout) fail(line int, column, what, remedy string) error {
	return &Error{File: l.file, Line: line, Column: column, What: what, Remedy: remedy}
}

// findLayout studies the start of a file. fix holds what an earlier reading
// found out: names of columns that are text, or fixDecimal.
func findLayout(in *input, head []byte, final bool, product *config.Product, fix map[string]bool) (*layout, error) {
	l := &layout{file: in.name, decimal: '.', waferElse: in.waferElse()}
	rows, at, err := l.findHeader(head, final, product)
	if err != nil {
		return nil, err
	}
	h := rows[at]
	l.names, l.header, l.headerLine = h.cells, h.raw, h.line
	for _, r := range rows[:at] {
		l.preamble(r)
	}
	roles, err := l.assignRoles(product)
	if err != nil {
		return nil, err
	}
	special, data := l.specialRows(head, final, h, roles)
	l.sample = data
	l.findDecimal()
	if fix[fixDecimal] {
		l.decimal = ','
	}
	l.judge(roles, product)
	for i, n := range l.names {
		if fix[n] {
			roles[i] = secondColumn
		}
	}
	l.place(roles, product)
	l.applySpecial(special)
	l.parseColumnUnits()
	return l, l.check(product)
}

// assignRoles gives each role its column: those of the product file first,
// then by the usual names. Returned by column of the file.
func (l *layout) assignRoles(product *config.Product) ([]string, error) {
	l.product = product
	roles := make([]string, len(l.names))
	seen := map[string]int{}
	for i, n := range l.names {
		low := strings.ToLower(n)
		if j, ok := seen[low]; ok && low != "" {
			return nil, l.fail(l.headerLine, n, fmt.Sprintf("the header has this name twice, in columns %d and %d", j+1, i+1), "rename one of them")
		}
		seen[low] = i
	}
	taken := map[string]bool{}
	isTest := make([]bool, len(l.names))
	if product != nil {
		for _, role := range roleOrder {
			name, ok := product.Columns[role]
			if !ok {
				continue
			}
			i, ok := seen[strings.ToLower(strings.TrimSpace(name))]
			if !ok {
				return nil, l.fail(l.headerLine, name, fmt.Sprintf("the product file names this column for %s, and the header does not have it; the header holds %s",
					role, list(l.names, 12)), "correct columns."+role+" of the product file")
			}
			roles[i], taken[role] = role, true
		}
		for i, n := range l.names {
			isTest[i] = roles[i] == "" && productTest(product, n) >= 0
		}
	}
	l.findRole("test", roles, taken, isTest)
	l.findRole("value", roles, taken, isTest)
	l.long = taken["test"] && taken["value"]
	if !l.long {
		// TEST or RESULT alone is a column like others; RESULT may be a pass flag.
		for i, role := range roles {
			if longRoles[role] || role == secondColumn {
				roles[i] = ""
			}
		}
	}
	for _, role := range roleOrder {
		if role != "test" && role != "value" && (l.long || !longRoles[role]) {
			l.findRole(role, roles, taken, isTest)
		}
	}
	l.pairCoordinates(roles, product)
	return roles, nil
}

// pairCoordinates gives x and y to two columns of the same kind: DIE_X with X and Y
// beside it, and no DIE_Y, is something else.
func (l *layout) pairCoordinates(roles []string, product *config.Product) {
	x, y := slices.Index(roles, "x"), slices.Index(roles, "y")
	if x < 0 || y < 0 || product != nil && (product.Columns["x"] != "" || product.Columns["y"] != "") || otherAxis(plainName(l.names[x])) == plainName(l.names[y]) {
		return
	}
	find := func(role, name string) int {
		for i := range roles {
			if (roles[i] == role || roles[i] == secondColumn) && plainName(l.names[i]) == name {
				return i
			}
		}
		return -1
	}
	for _, n := range roleNames["x"] {
		i, k := find("x", n), find("y", otherAxis(n))
		if i < 0 || k < 0 {
			continue
		}
		l.note(Info, "column-not-understood", fmt.Sprintf("columns %s and %s are no pair; %s and %s are taken for the die's x and y", quote(l.names[x]), quote(l.names[y]), quote(l.names[i]), quote(l.names[k])), "")
		roles[x], roles[y] = secondColumn, secondColumn
		roles[i], roles[k] = "x", "y"
		return
	}
}

// otherAxis gives the plain name that goes with that of an x column.
func otherAxis(x string) string {
	for _, p := range [][2]string{{"column", "row"}, {"col", "row"}, {"spalte", "zeile"}} {
		if strings.Contains(x, p[0]) {
			return strings.Replace(x, p[0], p[1], 1)
		}
	}
	if rest, ok := strings.CutPrefix(x, "x"); ok {
		return "y" + rest
	}
	rest, _ := strings.CutSuffix(x, "x")
	return rest + "y"
}

// secondColumn stands for the role of a column that says again what another
// column says better; it is kept as an attribute.
const secondColumn = "attribute"

// findRole gives a role the first column that bears one of its names.
func (l *layout) findRole(role string, roles []string, taken map[string]bool, isTest []bool) {
	for _, n := range roleNames[role] {
		for i, name := range l.names {
			if roles[i] != "" || isTest[i] || plainName(name) != n {
				continue
			}
			if taken[role] {
				// A second column of the same meaning, as LOT beside LOT_ID.
				roles[i] = secondColumn
				continue
			}
			roles[i], taken[role] = role, true
		}
	}
}

func contains(list []string, s string) bool {
	for _, l := range list {
		if l == s {
			return true
		}
	}
	return false
}

// productTest finds a header name among the product's tests, -1 when absent.
func productTest(product *config.Product, header string) int {
	if product == nil {
		return -1
	}
	name, _ := bracket(header)
	for i := range product.Tests {
		if strings.EqualFold(product.Tests[i].Name, strings.TrimSpace(header)) {
			return i
		}
	}
	for i := range product.Tests {
		if strings.EqualFold(product.Tests[i].Name, name) {
			return i
		}
	}
	return -1
}

// findDecimal judges from the sample which character parts the fraction.
func (l *layout) findDecimal() {
	points, commas := 0, 0
	for _, r := range l.sample {
		for _, c := range r {
			switch {
			case strings.IndexByte(c, '.') >= 0 && isDecimal([]byte(c), '.'):
				points++
			case l.sep == ',' && oneComma.MatchString(c):
				// thousands, unless another cell shows that commas part fractions
			case strings.IndexByte(c, ',') >= 0 && isDecimal([]byte(c), ','):
				commas++
			}
		}
	}
	if commas > points {
		l.decimal = ',' // also for "2,500", as one file writes numbers one way
	}
	l.decimalSeen = points+commas > 0
}

// check refuses a layout that cannot be a table of dice.
func (l *layout) check(product *config.Product) error {
	wafer, values, verdict := l.commented("wafer") != "", 0, false
	for _, f := range l.fields {
		wafer = wafer || f.kind == textField && f.slot == textWafer
		if f.kind == valueField {
			values++
		}
		verdict = verdict || f.kind == passField || f.kind == intField && (f.slot == intHardBin || f.slot == intSoftBin)
	}
	holds := "the header holds " + list(l.names, 12)
	switch {
	case allNumbers(l.names):
		return l.fail(l.headerLine, "", "no header found: the first row holds numbers only", "put a row with the names of the columns first")
	case !wafer && l.waferElse != "":
		l.attributes = append(l.attributes, [2]string{"wafer", l.waferElse})
		l.note(Warning, "wafer-from-file-name", fmt.Sprintf("%s names no wafer; taken for wafer %s, after its name", l.file, l.waferElse), "add a wafer column")
		return l.check(product)
	case !wafer:
		return l.fail(l.headerLine, "", "no wafer column found: looked for "+list(roleNames["wafer"][:7], 7)+" and the like; "+holds,
			"rename the column, or name it under columns.wafer in the product file")
	case len(l.sample) == 0:
		return l.fail(l.headerLine, "", "there is a header and no data row under it", "export the table again")
	case values == 0 && verdict:
		l.note(Info, "no-tests", l.file+" has bins or pass flags and no readings; what needs readings is left out", "")
	case values == 0:
		return l.fail(l.headerLine, "", "no column of numbers found that could be a test; "+holds, "check the export, and that decimal signs and separators are what they seem")
	}
	return nil
}

func allNumbers(cells []string) bool {
	n := 0
	for _, c := range cells {
		if c == "" {
			continue
		}
		if !isDecimal([]byte(c), '.') && !isDecimal([]byte(c), ',') {
			return false
		}
		n++
	}
	return n > 0
}

// limit reads a cell of a limit row, NaN for none.
func (l *layout) limit(cell string) float64 {
	v, _ := parseLimit(cell, l.decimal, true)
	return v.value
}
