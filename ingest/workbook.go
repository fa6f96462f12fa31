package ingest

import (
	"bufio"
	"errors"
	"fmt"
	"io"
	"math"
	"strconv"
	"strings"

	"github.com/xuri/excelize/v2"
)

// workbook gives the first sheet of an xlsx workbook as delimited text, a line a
// row, so that header, units, limits and everything else are found by the same
// rules as in text, and line numbers are those of the sheet.
//
// A cell is what it holds and not what its number format shows: 41.9370001 shown
// as 41.94 is 41.9370001. Only dates, which a workbook holds as days since 1900,
// are written as dates; they are known by a number that is shown as a date. What
// a formula gave when the workbook was saved is its value. The other sheets are
// mentioned in a finding.
func (in *input) workbook(s *source) error {
	at, size, done, err := in.at()
	if err != nil {
		return err
	}
	s.closers = append(s.closers, done)
	var book *excelize.File
	err = guard(in.name, func() error {
		var err error
		// Sheets of more than a few MB are unpacked to a temporary file by the
		// library, so that memory does not hold them.
		book, err = excelize.OpenReader(io.NewSectionReader(at, 0, size), excelize.Options{UnzipSizeLimit: unpackLimit(size)})
		return err
	})
	if err != nil {
		return in.noWorkbook(err)
	}
	s.closers = append(s.closers, func() { book.Close() })
	sheets := book.GetSheetList()
	if len(sheets) == 0 {
		return &Error{File: in.name, What: "the workbook has no sheet", Remedy: "save the table as the first sheet"}
	}
	in.remarks = nil
	if len(sheets) > 1 {
		in.remarks = append(in.remarks, Finding{Code: "other-sheets", Severity: Info, Text: fmt.Sprintf("%s: the first sheet, %s, was read; the workbook has %d more: %s", in.name,
			quote(sheets[0]), len(sheets)-1, list(sheets[1:], 8)), Remedy: "save another sheet as a file of its own if it holds data"})
	}
	r, w := io.Pipe()
	go func() {
		err := guard(in.name, func() error { return sheetText(w, book, sheets[0]) })
		if err != nil {
			var e *Error
			if !errors.As(err, &e) {
				err = fmt.Errorf("sheet %s: %w", quote(sheets[0]), err)
			}
		}
		w.CloseWithError(err)
	}()
	s.closers = append(s.closers, func() { r.Close() })
	s.plain = r
	return nil
}

func (in *input) noWorkbook(err error) error {
	var e *Error
	switch {
	case errors.As(err, &e):
		return e
	case errors.Is(err, excelize.ErrWorkbookFileFormat), strings.Contains(err.Error(), "password"), strings.Contains(err.Error(), "encrypt"):
		return &Error{File: in.name, What: "is no xlsx workbook that can be opened: " + err.Error(), Remedy: "save it as .xlsx without a password, or as CSV", Err: err}
	}
	return &Error{File: in.name, What: "the workbook is damaged: " + err.Error(), Remedy: "open and save it again, or save it as CSV", Err: err}
}

// sheetText writes a sheet as text, fields separated by tabs and in quotes.
func sheetText(to io.Writer, book *excelize.File, sheet string) error {
	rows, err := book.Rows(sheet)
	if err != nil {
		return err
	}
	defer rows.Close()
	shown, err := book.Rows(sheet)
	if err != nil {
		return err
	}
	defer shown.Close()
	props, _ := book.GetWorkbookProps()
	since1904 := props.Date1904 != nil && *props.Date1904
	out := bufio.NewWriterSize(to, 64<<10)
	width := 0
	for rows.Next() && shown.Next() {
		cells, err := rows.Columns(excelize.Options{RawCellValue: true})
		if err != nil {
			return err
		}
		as, err := shown.Columns()
		if err != nil {
			return err
		}
		if len(cells) == 1 && strings.HasPrefix(cells[0], "#") {
			out.WriteString(strings.NewReplacer("\r", " ", "\n", " ").Replace(cells[0]) + "\n") // a comment, as in text
			continue
		}
		// The library leaves empty cells at the end of a row out.
		if width = max(width, len(cells)); len(cells) > 0 {
			cells = append(cells, make([]string, width-len(cells))...)
		}
		for i, c := range cells {
			if i > 0 {
				out.WriteByte('\t')
			}
			if i < len(as) && as[i] != c {
				c = dated(c, as[i], since1904)
			}
			writeCell(out, c)
		}
		if err := out.WriteByte('\n'); err != nil {
			return err // the reader gave up
		}
	}
	if err := rows.Error(); err != nil {
		return err
	}
	return out.Flush()
}

// dated gives the date of a cell that holds a number and shows a date; all other
// cells as they are.
func dated(raw, shown string, since1904 bool) string {
	v, err := strconv.ParseFloat(raw, 64)
	if err != nil || v < 1 || v > 2958466 || !strings.ContainsAny(shown, "-/:.") && !strings.ContainsAny(shown, "年月") {
		return raw
	}
	if isDecimal([]byte(shown), '.') || isDecimal([]byte(strings.NewReplacer(",", "", "%", "", "$", "", "€", "", " ", "", "(", "", ")", "").Replace(shown)), '.') {
		return raw // a number after all
	}
	if _, err := strconv.ParseFloat(shown, 64); err == nil {
		return raw
	}
	t, err := excelize.ExcelDateToTime(v, since1904)
	if err != nil {
		return raw
	}
	if v == math.Trunc(v) {
		return t.Format("2006-01-02")
	}
	return t.Format("2006-01-02 15:04:05")
}

// writeCell writes a cell so that it stays one field of one line.
func writeCell(out *bufio.Writer, c string) {
	if strings.ContainsAny(c, "\r\n\t") {
		c = strings.NewReplacer("\r\n", " ", "\n", " ", "\r", " ", "\t", " ").Replace(c)
	}
	if !strings.ContainsAny(c, `"`) && !strings.HasPrefix(c, "#") {
		out.WriteString(c)
		return
	}
	out.WriteByte('"')
	out.WriteString(strings.ReplaceAll(c, `"`, `""`))
	out.WriteByte('"')
}

// guard turns a panic of a library into an error. The libraries for Parquet,
// Arrow and xlsx check much of what a file claims, but not all: lengths and
// offsets of a damaged or hostile file end in slices out of range. A file must
// never end the program, so that a panic counts as "damaged" here, at the border
// to them, and nowhere else.
func guard(file string, do func() error) (err error) {
	defer func() {
		if r := recover(); r != nil {
			if e, ok := r.(*Error); ok {
				err = e
				return
			}
			err = &Error{File: file, What: fmt.Sprintf("is damaged: its reader failed (%v)", r), Remedy: "fetch or export the file again"}
		}
	}()
	return do()
}
