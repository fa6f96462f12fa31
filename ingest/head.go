package ingest

import (
	"bytes"
	"strings"

	"kneepoint/config"
)

// readHead splits rows of the head from offset i on.
func readHead(b []byte, i, line int, sep byte, want, most int, final bool, comment func(string)) []headRow {
	var rows []headRow
	var r row
	for i < len(b) && len(rows) < most {
		if b[i] == '#' {
			end := bytes.IndexByte(b[i:], '\n')
			if end < 0 {
				if final && comment != nil {
					comment(cellText(b[i:]))
				}
				break
			}
			if comment != nil {
				comment(cellText(b[i : i+end]))
			}
			i += end + 1
			line++
			continue
		}
		splitRow(b, i, sep, want, final, &r)
		if r.more {
			break
		}
		h := headRow{line: line, next: r.next, after: line + r.lines}
		for _, f := range r.fields {
			h.cells = append(h.cells, cellText(f))
			h.raw = append(h.raw, append([]byte(nil), f...))
		}
		i, line = r.next, h.after
		if len(h.cells) == 1 && h.cells[0] == "" {
			continue // a blank line
		}
		rows = append(rows, h)
	}
	return rows
}

// findHeader tries the separators and takes the one under which a row of the
// head names the most roles; then the one by which most rows have as many
// fields as that row.
func (l *layout) findHeader(head []byte, final bool, product *config.Product) (best []headRow, at int, err error) {
	bestScore := -1
	for _, sep := range []byte{',', ';', '\t', '|'} {
		var comments []string
		rows := readHead(head, 0, 1, sep, 0, headRows, final, func(s string) { comments = append(comments, s) })
		i, roles := headerRow(rows, product)
		if i < 0 {
			continue
		}
		same := 0
		for _, r := range rows[i:] {
			if len(r.cells) == len(rows[i].cells) {
				same++
			}
		}
		score := roles*1_000_000 + min(same, 900)*1000 + min(len(rows[i].cells), 900)
		if len(rows[i].cells) < 2 {
			score = 0
		}
		if score > bestScore {
			bestScore, best, at = score, rows, i
			l.sep, l.attributes, l.notes = sep, nil, nil
			for _, c := range comments {
				l.comment(c)
			}
		}
	}
	if bestScore < 0 {
		return nil, 0, &Error{File: l.file, What: "is empty but for comments and blank lines", Remedy: "export it again"}
	}
	if bestScore == 0 {
		return nil, 0, l.fail(best[at].line, "", "no table found: the rows have no comma, semicolon or tab between fields",
			"export the table as delimited text with a header row")
	}
	return best, at, nil
}

// headerRow finds the row that names most roles, the first of equals.
func headerRow(rows []headRow, product *config.Product) (at, roles int) {
	at, roles = -1, -1
	for i, r := range rows {
		n := 0
		for _, c := range r.cells {
			if isRoleName(c, product) {
				n++
			}
		}
		if n > roles {
			at, roles = i, n
		}
	}
	if roles <= 0 && len(rows) > 0 {
		// Nothing known: the first row as wide as most.
		widths, most := map[int]int{}, 0
		for _, r := range rows {
			widths[len(r.cells)]++
			most = max(most, widths[len(r.cells)])
		}
		for i, r := range rows {
			if widths[len(r.cells)] == most {
				return i, 0
			}
		}
	}
	return at, roles
}

var anyRoleName = func() map[string]bool {
	m := map[string]bool{}
	for _, names := range roleNames {
		for _, n := range names {
			m[n] = true
		}
	}
	return m
}()

func isRoleName(cell string, product *config.Product) bool {
	if cell == "" || len(cell) > 64 {
		return false
	}
	if product != nil {
		for _, name := range product.Columns {
			if strings.EqualFold(name, cell) {
				return true
			}
		}
		for _, t := range product.Tests {
			if n, _ := bracket(cell); strings.EqualFold(t.Name, n) || strings.EqualFold(t.Name, cell) {
				return true
			}
		}
	}
	name, _ := bracket(cell)
	return anyRoleName[plainName(name)]
}

// comment takes "# key: value" as an attribute of the lot.
func (l *layout) comment(s string) {
	s = strings.TrimSpace(strings.TrimLeft(s, "# \t"))
	key, value, ok := strings.Cut(s, ":")
	if !ok {
		key, value, ok = strings.Cut(s, "=")
	}
	l.attribute(key, value, ok)
}

// preamble takes a line above the header, "Lot: A" or "Lot,A", as an attribute.
func (l *layout) preamble(r headRow) {
	var cells []string
	for _, c := range r.cells {
		if c != "" {
			cells = append(cells, c)
		}
	}
	switch len(cells) {
	case 1:
		l.comment(cells[0])
	case 2:
		l.attribute(strings.TrimRight(cells[0], ":= "), cells[1], true)
	}
}

func (l *layout) attribute(key, value string, ok bool) {
	key, value = strings.TrimSpace(key), strings.Trim(strings.TrimSpace(value), `",;`+"\t")
	value = strings.TrimSpace(value)
	if !ok || key == "" || value == "" || len(key) > 40 || len(value) > 200 {
		return
	}
	l.attributes = append(l.attributes, [2]string{key, value})
}

// commented gives the value of a comment whose key names a role.
func (l *layout) commented(role string) string {
	for _, kv := range l.attributes {
		for _, n := range roleNames[role] {
			if plainName(kv[0]) == n {
				return kv[1]
			}
		}
	}
	return ""
}
