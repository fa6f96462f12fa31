package ingest

import (
	"fmt"
	"math"
	"strings"

	"kneepoint/config"
)

// specialRow is a row between header and data.
type specialRow struct {
	kind rowKind
	row  headRow
}

// specialRows reads the unit, limit and other rows under the header, and a
// sample of the data rows after them.
func (l *layout) specialRows(head []byte, final bool, h headRow, roles []string) (special []specialRow, data [][]string) {
	rows := readHead(head, h.next, h.after, l.sep, len(l.names), sampleRows+12, final, nil)
	l.start, l.startLine = h.next, h.after
	i := 0
	for ; i < len(rows) && i < 12; i++ {
		kind := l.rowKind(rows[i], roles)
		if kind == dataRow {
			break
		}
		special = append(special, specialRow{kind, rows[i]})
		l.start, l.startLine = rows[i].next, rows[i].after
	}
	for _, r := range rows[i:] {
		data = append(data, r.cells)
	}
	return special, data
}

// limitsByContent stands for a row that can only be one of limits, and does not
// say which.
const limitsByContent rowKind = -1

// rowKind tells a unit or limit row: no whole-number column holds a number, and
// a cell says what the row is; or lot and wafer are empty and the cells of the
// other columns are all units, or numbers.
func (l *layout) rowKind(r headRow, roles []string) rowKind {
	if l.long {
		return dataRow
	}
	kind := dataRow
	keysEmpty := true
	units, numbers, others := 0, 0, 0
	for i, c := range r.cells {
		if i >= len(roles) || c == "" {
			continue
		}
		_, st := parseNumber([]byte(c), '.')
		_, stComma := parseNumber([]byte(c), ',')
		number := st == cellNumber || stComma == cellNumber
		if _, ok := intRoles[roles[i]]; ok && number {
			return dataRow
		}
		if k, ok := rowWords[plainName(c)]; ok && kind == dataRow {
			kind = k
			continue
		}
		switch roles[i] {
		case "lot", "wafer", "part":
			keysEmpty = false
			continue
		case "x", "y", "site", "touchdown", "hard_bin", "soft_bin", "pass", "time", roleProduct:
			continue
		}
		u, err := config.ParseUnit(c)
		switch {
		case number:
			numbers++
		case err == nil && u.Base != "ratio":
			units++
		case err == nil || word([]byte(c)) == cellMissing:
		default:
			others++
		}
	}
	switch {
	case kind != dataRow:
		return kind
	case !keysEmpty:
		return dataRow
	case units > 0 && numbers == 0 && others <= units:
		return unitRow
	case numbers > 0 && units == 0 && others == 0:
		return limitsByContent
	}
	return dataRow
}

// judge settles by the sample what columns without a role hold, and takes a
// role away where the content cannot be it.
func (l *layout) judge(roles []string, product *config.Product) {
	l.betterCoordinates("x", roles, product)
	l.betterCoordinates("y", roles, product)
	for i := range roles {
		numbers, texts, zeros, flags, fractions := 0, 0, 0, 0, 0
		for _, r := range l.sample {
			if i >= len(r) || r[i] == "" {
				continue
			}
			c := r[i]
			if passFlag([]byte(c)) >= 0 {
				flags++
			}
			switch v, st := parseNumber([]byte(c), l.decimal); st {
			case cellNumber, cellBound:
				numbers++
				if st == cellNumber && v != math.Trunc(v) {
					fractions++
				}
				if len(c) > 1 && c[0] == '0' && c[1]-'0' <= 9 {
					zeros++
				}
			case cellBad:
				_, ok := parseGrouped(c)
				if _, thousands := l.thousands(c); (ok || thousands) && roles[i] == "" {
					numbers++
				} else {
					texts++
				}
			}
		}
		if texts > numbers && roles[i] == "" && l.unitInCells(i) {
			numbers, texts = numbers+texts, 0
		}
		text := texts > numbers
		switch _, whole := intRoles[roles[i]]; {
		case whole && text && strings.HasSuffix(roles[i], "_bin") && flags >= texts && !contains(roles, "pass"):
			roles[i] = "pass"
		case whole && text && (roles[i] == "x" || roles[i] == "y"):
			l.note(Warning, "column-not-understood", fmt.Sprintf("column %s looks like the die's %s and holds text; it is kept as an attribute of the die", quote(l.names[i]), roles[i]),
				"give whole numbers, or name the right column under columns in the product file")
			roles[i] = "attribute"
		case (roles[i] == "x" || roles[i] == "y") && 2*fractions > numbers:
			l.note(Warning, "column-not-understood", fmt.Sprintf("column %s holds fractions, perhaps positions, and no die indices; it is kept as an attribute of the die", quote(l.names[i])),
				"export the die's column and row numbers")
			roles[i] = "attribute"
		case whole && text:
			l.note(Info, "column-not-understood", fmt.Sprintf("column %s looks like the %s and holds text; it is kept as an attribute", quote(l.names[i]), strings.ReplaceAll(roles[i], "_", " ")), "")
			roles[i] = "attribute"
		case roles[i] == "pass" && flags*2 < numbers+texts:
			roles[i] = ""
			if text {
				roles[i] = "attribute"
			}
		}
		if roles[i] == secondColumn && fractions > 0 && !text && weakNames[plainName(l.names[i])] {
			roles[i] = ""
			continue
		}
		if roles[i] != "" {
			continue
		}
		switch {
		case l.names[i] == "" && numbers+texts == 0:
			roles[i] = "skip"
		case productTest(product, l.names[i]) >= 0:
		case text, zeros > 0 && zeros == numbers, l.long, attributeNames[plainName(l.names[i])], isPosition(l.names[i]):
			roles[i] = "attribute"
		}
	}
}

// betterCoordinates gives the role of x or y to the next best column when the
// best one holds no whole numbers, as positions in millimetres do.
func (l *layout) betterCoordinates(role string, roles []string, product *config.Product) {
	now := -1
	for i, r := range roles {
		if r == role {
			now = i
		}
	}
	if now < 0 || l.wholeNumbers(now) || product != nil && product.Columns[role] != "" {
		return
	}
	for _, n := range roleNames[role] {
		for i, name := range l.names {
			if roles[i] == secondColumn && plainName(name) == n && l.wholeNumbers(i) {
				l.note(Info, "column-not-understood", fmt.Sprintf("column %s holds no whole numbers; column %s is taken for the die's %s", quote(l.names[now]), quote(name), role), "")
				roles[now], roles[i] = secondColumn, role
				return
			}
		}
	}
}

// wholeNumbers says whether a column of the sample holds whole numbers, mostly.
func (l *layout) wholeNumbers(i int) bool {
	whole, others := 0, 0
	for _, r := range l.sample {
		if i >= len(r) || r[i] == "" {
			continue
		}
		if _, st := parseInt([]byte(r[i]), l.decimal); st == cellNumber {
			whole++
		} else if st == cellBad {
			others++
		}
	}
	return whole > others
}

// unitInCells says whether all cells of a column are numbers with a unit behind
// them, of one dimension and some with a fraction: "5A" may be a name. The first
// unit is that of the column.
func (l *layout) unitInCells(i int) bool {
	var first config.Unit
	fraction := false
	for _, r := range l.sample {
		if i >= len(r) || r[i] == "" || word([]byte(r[i])) != cellBad {
			continue
		}
		v, text, ok := splitQuantity(r[i], l.decimal)
		u, err := config.ParseUnit(text)
		if !ok || text == "" || err != nil || !first.Compatible(u) {
			return false
		}
		if !first.Given() {
			first = u
		}
		fraction = fraction || v != math.Trunc(v)
	}
	if !first.Given() || !fraction {
		return false
	}
	if l.cellUnits == nil {
		l.cellUnits = map[int]string{}
	}
	l.cellUnits[i] = first.Text
	return true
}

// isPosition tells "X (mm)", a die's position in a unit of length.
func isPosition(header string) bool {
	name, inside := bracket(header)
	u, err := config.ParseUnit(inside)
	n := plainName(name)
	return inside != "" && err == nil && u.Base == "m" && (contains(roleNames["x"], n) || contains(roleNames["y"], n))
}

func (l *layout) note(s Severity, code, text, remedy string) {
	l.notes = append(l.notes, Finding{Code: code, Severity: s, Text: text, Remedy: remedy})
}

// place gives every column its slot. Text attributes and tests get the slots
// of this file; the schema renumbers them.
func (l *layout) place(roles []string, product *config.Product) {
	l.fields = make([]field, len(roles))
	attributes := 0
	stripped := map[string]int{}
	for _, n := range l.names {
		s, _ := bracket(n)
		stripped[strings.ToLower(s)]++
	}
	for i, role := range roles {
		f := &l.fields[i]
		f.role = role
		if role == "attribute" || role == "skip" {
			f.role = ""
		}
		if slot, ok := textRoles[role]; ok {
			f.kind, f.slot = textField, slot
		} else if slot, ok := intRoles[role]; ok {
			f.kind, f.slot = intField, slot
		} else if slot, ok := longValues[role]; ok && l.long {
			f.kind, f.slot = valueField, slot
		} else if role == "pass" {
			f.kind = passField
		} else if role == "attribute" {
			f.kind, f.slot = textField, textAttributes+attributes
			attributes++
		} else if role == "" {
			f.kind, f.slot = valueField, len(l.columns)
			c := l.testColumn(i, stripped, product)
			if c.unitText == "" {
				c.unitText = l.cellUnits[i]
			}
			l.columns = append(l.columns, c)
		}
	}
}

// testColumn reads a test's header: "ICBO [nA]", "HFE1 (IC=10uA)".
func (l *layout) testColumn(i int, stripped map[string]int, product *config.Product) testColumn {
	c := testColumn{name: l.names[i], lower: math.NaN(), upper: math.NaN(), number: Missing, field: i}
	if c.name == "" {
		c.name = fmt.Sprintf("column %d", i+1)
	}
	name, inside := bracket(c.name)
	if inside == "" || stripped[strings.ToLower(name)] > 1 {
		return c
	}
	if product != nil && productTest(product, name) < 0 && productTest(product, c.name) >= 0 {
		return c // the product's name has the brackets in it
	}
	if _, err := config.ParseUnit(inside); err == nil {
		c.name, c.unitText = name, inside
	} else if _, err := config.ParseConditions(inside); err == nil {
		c.name, c.condition = name, inside
	}
	return c
}

// applySpecial takes units, limits, numbers and conditions from their rows.
func (l *layout) applySpecial(special []specialRow) {
	var unnamed []headRow
	for _, s := range special {
		if s.kind == limitsByContent {
			unnamed = append(unnamed, s.row)
			continue
		}
		for j := range l.columns {
			l.columns[j].takeAt(l, s.kind, cell(s.row, l.columns[j].field), s.row.line)
		}
	}
	switch len(unnamed) {
	case 0:
	case 2:
		low, high := lowerRow, upperRow
		if l.above(unnamed[0], unnamed[1]) {
			low, high = high, low
		}
		for j := range l.columns {
			l.columns[j].takeAt(l, low, cell(unnamed[0], l.columns[j].field), unnamed[0].line)
			l.columns[j].takeAt(l, high, cell(unnamed[1], l.columns[j].field), unnamed[1].line)
		}
	default:
		l.note(Warning, "row-not-understood", fmt.Sprintf("%s:%d: a row of numbers without lot and wafer stands above the data; it is not used", l.file, unnamed[0].line),
			"if it holds limits, write lower or upper in its wafer column")
	}
}

// above says whether the first row's numbers are above the second's.
func (l *layout) above(a, b headRow) bool {
	n := 0
	for j := range l.columns {
		va, vb := l.limit(cell(a, l.columns[j].field)), l.limit(cell(b, l.columns[j].field))
		if va > vb {
			n++
		} else if va < vb {
			n--
		}
	}
	return n > 0
}

func cell(r headRow, i int) string {
	if i < len(r.cells) {
		return r.cells[i]
	}
	return ""
}

func (c *testColumn) take(l *layout, kind rowKind, text string) { c.takeAt(l, kind, text, 0) }

// takeAt is take for a cell of a line.
func (c *testColumn) takeAt(l *layout, kind rowKind, text string, line int) {
	if text == "" {
		return
	}
	switch kind {
	case unitRow:
		if _, st := parseNumber([]byte(text), l.decimal); st != cellNumber {
			c.unitText = text
		}
	case lowerRow:
		c.limitCells[0] = headCell{line, text}
	case upperRow:
		c.limitCells[1] = headCell{line, text}
	case numberRow:
		if n, st := parseInt([]byte(text), l.decimal); st == cellNumber {
			c.number = int(n)
		}
	case conditionRow:
		c.condition = text
	}
}

// parseColumnUnits reads the units of all columns together, as the letter M means
// what the others make likely, and then the limits.
func (l *layout) parseColumnUnits() {
	var texts []string
	var of []int
	for j := range l.columns {
		if t := l.columns[j].unitText; t != "" {
			texts, of = append(texts, t), append(of, j)
		}
	}
	units, errs := config.ParseUnits(texts)
	for k, j := range of {
		if errs[k] == nil {
			l.columns[j].unit = units[k]
			continue
		}
		l.note(Warning, "unit-not-understood", fmt.Sprintf("%s: test %s: %v", l.file, l.columns[j].name, errs[k]),
			"correct the unit; the product file's is used if it gives one")
	}
	l.settleLimits()
}

// limitNotUnderstood notes a limit that is left out.
func (l *layout) limitNotUnderstood(test string, c headCell) {
	l.note(Severe, "limit-not-understood", fmt.Sprintf("%s: test %s: the limit %s cannot be read and is not used; the test is judged without it", l.at(c.line), test, quote(c.text)),
		"write a plain number in the test's unit, or give the limit in the product file")
}

// at names a line of the file, 0 the file.
func (l *layout) at(line int) string {
	if line == 0 {
		return l.file
	}
	return fmt.Sprintf("%s:%d", l.file, line)
}

// settleLimits reads limits and brings them into the unit of the test's values. A test without
// unit takes that of its limits.
func (l *layout) settleLimits() {
	for j := range l.columns {
		c := &l.columns[j]
		for k, to := range []*float64{&c.lower, &c.upper} {
			cell := c.limitCells[k]
			if cell.text == "" {
				continue
			}
			limit, ok := parseLimit(cell.text, l.decimal, k == 1)
			if !ok {
				l.limitNotUnderstood(c.name, cell)
				continue
			}
			if !c.unit.Given() && limit.unit.Given() {
				c.unit, c.unitText = limit.unit, limit.unit.Text
				if p := productTest(l.product, c.name); p >= 0 && l.product.Tests[p].Unit.Given() {
					c.unit = l.product.Tests[p].Unit // in which values without unit are
				}
				l.note(Warning, "unit-from-limit", fmt.Sprintf("%s: test %s has no unit but in its limit %s; its values are taken to be in %s", l.at(cell.line), c.name,
					quote(cell.text), showUnit(c.unit)), "give the unit in a unit row or in the header")
			}
			if *to, ok = limit.in(c.unit); !ok {
				l.limitNotUnderstood(c.name, cell)
			}
		}
	}
}

// passFlag reads a pass flag: 1 pass, 0 fail, -1 neither.
func passFlag(t []byte) int8 {
	if len(t) == 1 {
		switch t[0] {
		case '1', 'P', 'p', 'Y', 'y', 'T', 't', 'G', 'g':
			return 1
		case '0', 'F', 'f', 'N', 'n', 'B', 'b':
			return 0
		}
		return -1
	}
	switch strings.ToLower(string(t)) {
	case "pass", "passed", "true", "yes", "good", "ok", "1.0":
		return 1
	case "fail", "failed", "false", "no", "bad", "nok", "ng", "reject", "rejected", "0.0":
		return 0
	}
	return -1
}
