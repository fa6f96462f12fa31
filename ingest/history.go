package ingest

import (
	"bytes"
	"encoding/csv"
	"errors"
	"fmt"
	"io"
	"strings"
)

// History is what a fab recorded of wafers: a table by lot and wafer, each further
// column an attribute (supplier, epi run, reactor, pocket, boat position ...).
type History struct {
	Input   Input
	columns []string
	rows    []historyRow
}

type historyRow struct {
	line       int
	lot, wafer string
	values     []string
}

// maxHistory bounds the file: a row a wafer is small, and anything larger is
// another kind of file.
const maxHistory = 64 << 20

// ReadHistory reads a wafer history: delimited text (comma, semicolon or tab)
// with a header that has a wafer column and, unless every row is of one lot, a lot
// column, found by their usual names. Blank lines and '#' lines are passed over.
func ReadHistory(path string) (*History, error) {
	src, err := openSource(path, nil)
	if err != nil {
		return nil, err
	}
	defer src.close()
	data, err := io.ReadAll(io.LimitReader(src.plain, maxHistory+1))
	if err != nil {
		return nil, src.readError(err)
	}
	if len(data) > maxHistory {
		return nil, &Error{File: path, What: "is too large for a wafer history", Remedy: "name the table with a row a wafer"}
	}
	src.drain()
	h := &History{Input: Input{File: path, SHA256: src.sum(), Format: "wafer history", Bytes: src.size}}
	data = bytes.TrimPrefix(data, []byte("\xef\xbb\xbf"))
	if bytes.HasPrefix(data, []byte("\xff\xfe")) || bytes.HasPrefix(data, []byte("\xfe\xff")) || bytes.IndexByte(data, 0) >= 0 {
		return nil, &Error{File: path, What: "is not plain text", Remedy: "save it as CSV in UTF-8"}
	}
	if err := h.parse(path, data); err != nil {
		return nil, err
	}
	h.Input.Rows = int64(len(h.rows))
	return h, nil
}

func (h *History) parse(path string, data []byte) error {
	r := csv.NewReader(bytes.NewReader(data))
	r.Comma, r.Comment, r.FieldsPerRecord, r.TrimLeadingSpace = historySeparator(data), '#', -1, true
	head, err := r.Read()
	if errors.Is(err, io.EOF) {
		return &Error{File: path, What: "is empty", Remedy: "give a header with lot and wafer, and a row a wafer"}
	} else if err != nil {
		return historyError(path, err)
	}
	lot, wafer := headColumn(head, "lot"), headColumn(head, "wafer")
	var attributes []int
	for i, name := range head {
		if i != lot && i != wafer && strings.TrimSpace(name) != "" {
			attributes = append(attributes, i)
			h.columns = append(h.columns, strings.TrimSpace(name))
		}
	}
	if wafer < 0 {
		return &Error{File: path, Line: 1, What: "no column looks like the wafer; the header has " + list(head, 12), Remedy: "name one WAFER"}
	}
	for {
		record, err := r.Read()
		if errors.Is(err, io.EOF) {
			break
		} else if err != nil {
			return historyError(path, err)
		}
		line, _ := r.FieldPos(0)
		field := func(i int) string {
			if i < 0 || i >= len(record) {
				return ""
			}
			return strings.TrimSpace(record[i])
		}
		row := historyRow{line: line, lot: field(lot), wafer: field(wafer)}
		for _, i := range attributes {
			row.values = append(row.values, field(i))
		}
		h.rows = append(h.rows, row)
	}
	if len(h.rows) == 0 {
		return &Error{File: path, What: "has a header and no rows", Remedy: "give a row a wafer"}
	}
	return nil
}

// headColumn finds the column of a role by the best of its usual spellings, -1.
func headColumn(head []string, role string) int {
	for _, spelling := range roleNames[role] {
		for i, name := range head {
			if plainName(name) == spelling {
				return i
			}
		}
	}
	return -1
}

// historySeparator is the separator that the first line has most of.
func historySeparator(data []byte) rune {
	for len(data) > 0 && (data[0] == '#' || data[0] == '\n' || data[0] == '\r') {
		i := bytes.IndexByte(data, '\n')
		if i < 0 {
			break
		}
		data = data[i+1:]
	}
	first, _, _ := bytes.Cut(data, []byte("\n"))
	best, most := ',', 0
	for _, sep := range ",;\t" {
		if n := bytes.Count(first, []byte(string(sep))); n > most {
			best, most = sep, n
		}
	}
	return best
}

func historyError(path string, err error) error {
	var p *csv.ParseError
	if errors.As(err, &p) {
		return &Error{File: path, Line: p.Line, What: p.Err.Error(), Remedy: "correct the quotes", Err: err}
	}
	return &Error{File: path, What: err.Error(), Remedy: "check the file", Err: err}
}

// sameName makes wafer and lot names comparable: without case, spaces and leading
// zeros, and for wafers without a W before the number, as the fab's table and the
// tester rarely write them alike.
func sameName(s string, wafer bool) string {
	s = strings.ToLower(strings.TrimSpace(s))
	if wafer {
		if t := strings.TrimLeft(strings.TrimPrefix(strings.TrimPrefix(s, "wafer"), "w"), " _-#"); t != "" && t[0] >= '0' && t[0] <= '9' {
			s = t
		}
	}
	if t := strings.TrimLeft(s, "0"); t != "" {
		return t
	}
	return s
}

// apply gives a lot's wafers their attributes, and tells what did not match. Of
// several rows for a wafer the last one holds; an attribute of the data file with
// the same name gives way.
func (h *History) apply(l *Lot) {
	byWafer := map[string]historyRow{}
	twice, ofLot := 0, 0
	for _, r := range h.rows {
		if r.lot != "" && sameName(r.lot, false) != sameName(l.id, false) {
			continue
		}
		ofLot++
		key := sameName(r.wafer, true)
		if _, ok := byWafer[key]; ok {
			twice++
		}
		byWafer[key] = r
	}
	note := func(s Severity, code, text, remedy string, dice int) {
		l.findings = append(l.findings, Finding{Code: code, Severity: s, Text: h.Input.File + ": " + text, Remedy: remedy, Dice: dice})
	}
	l.inputs = append(l.inputs, h.Input)
	if ofLot == 0 {
		note(Warning, "history-without-lot", fmt.Sprintf("the wafer history has no row for lot %s", quote(l.id)), "check the lot's name in both files", l.Len())
		return
	}
	var without []string
	dice, used := 0, 0
	for i := range l.wafers {
		w := &l.wafers[i]
		row, ok := byWafer[sameName(w.ID, true)]
		if !ok {
			without = append(without, w.ID)
			dice += w.Hi - w.Lo
			continue
		}
		used++
		attributes := map[string]string{}
		for k, v := range w.Attributes {
			attributes[k] = v
		}
		for k, name := range h.columns {
			if row.values[k] != "" {
				attributes[name] = row.values[k]
			}
		}
		w.Attributes = attributes
	}
	if len(without) > 0 {
		note(Warning, "wafer-without-history", fmt.Sprintf("no row for %d of %d wafers: %s", len(without), len(l.wafers), list(without, 12)), "add them, or check the wafers' names", dice)
	}
	if extra := len(byWafer) - used; extra > 0 {
		note(Info, "history-of-other-wafers", fmt.Sprintf("%d wafers of the history are not in the data", extra), "", 0)
	}
	if twice > 0 {
		note(Warning, "history-twice", fmt.Sprintf("%d wafers have more than one row; the last one holds", twice), "keep one row a wafer", 0)
	}
}
