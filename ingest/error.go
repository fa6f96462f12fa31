package ingest

import (
	"strconv"
	"strings"
)

// Error is input that could not be read. It prints as one line:
//
//	file:line: what; remedy
type Error struct {
	File   string
	Line   int    // 0: the file as a whole
	Column string // name of the column concerned, "" none
	What   string
	Remedy string
	Err    error // the cause below, may be nil
}

func (e *Error) Error() string {
	var b strings.Builder
	b.WriteString(oneLine(e.File))
	if e.Line > 0 {
		b.WriteString(":" + strconv.Itoa(e.Line))
	}
	b.WriteString(": ")
	if e.Column != "" {
		b.WriteString("column " + quote(e.Column) + ": ")
	}
	b.WriteString(oneLine(e.What))
	if e.Remedy != "" {
		b.WriteString("; " + oneLine(e.Remedy))
	}
	return b.String()
}

// Unwrap gives the cause, such as fs.ErrNotExist.
func (e *Error) Unwrap() error { return e.Err }

// oneLine keeps a text from the file from breaking the line that quotes it.
func oneLine(s string) string {
	return strings.Map(func(r rune) rune {
		if r < ' ' || r == 0x7f || r == '\u2028' || r == '\u2029' {
			return ' '
		}
		return r
	}, s)
}

// quote puts text of a file between quotation marks, control characters
// escaped, cut at a length that one can read.
func quote(s string) string {
	const most = 40
	if r := []rune(s); len(r) > most {
		s = string(r[:most-3]) + "..."
	}
	return strconv.Quote(s)
}

// list joins at most most texts, saying how many more there are.
func list(texts []string, most int) string {
	if len(texts) == 0 {
		return "none"
	}
	if len(texts) > most {
		return strings.Join(texts[:most], ", ") + " and " + strconv.Itoa(len(texts)-most) + " more"
	}
	return strings.Join(texts, ", ")
}
