package ingest

import (
	"bytes"
	"unicode/utf8"

	"golang.org/x/text/encoding/charmap"
)

const (
	// maxLine is the longest line that is read. A table with a longer one is
	// taken for something else than text.
	maxLine = 16 << 20

	// maxQuoted is the longest quoted field that may run over line ends. An
	// opening quote without a closing one that near is taken as a character
	// of the text, so that one stray quote costs a cell and not the file.
	maxQuoted = 64 << 10
)

// row is one row of a file as fields of text.
type row struct {
	fields   [][]byte // as written but for quotes; views of the buffer where possible
	next     int      // where the next row starts
	unclosed bool     // an opening quote was taken as text
	lines    int      // line ends within, the last one included
	more     bool     // the row does not end within the buffer
}

// splitRow reads the row of b that starts at i into r, by RFC 4180 with two
// liberties: a quote within an unquoted field is text, and so is one within a
// quoted field that no separator, line end or second quote follows.
//
// want is the number of fields the table has, 0 when not known yet: a quoted
// field runs over line ends only when the row then has that many. When final
// is false, b may go on, and a row that may not be complete sets more.
func splitRow(b []byte, i int, sep byte, want int, final bool, r *row) {
	splitRowMode(b, i, sep, final, true, r)
	if r.more || r.lines <= 1 || want == 0 || len(r.fields) == want {
		return
	}
	splitRowMode(b, i, sep, final, false, r)
}

func splitRowMode(b []byte, i int, sep byte, final, multi bool, r *row) {
	*r = row{fields: r.fields[:0]}
	for {
		field, next, st := splitField(b, i, sep, final, multi, r)
		if st == fieldMore {
			r.more = true
			return
		}
		r.fields = append(r.fields, field)
		if st == fieldLast {
			r.next = next
			r.lines++
			return
		}
		i = next
	}
}

type fieldEnd int

const (
	fieldNext fieldEnd = iota // a separator followed
	fieldLast                 // the line ended
	fieldMore                 // the buffer ended first
)

// splitField reads the field at i and gives the place after its separator.
func splitField(b []byte, i int, sep byte, final, multi bool, r *row) ([]byte, int, fieldEnd) {
	if i < len(b) && b[i] == '"' {
		if field, end, st := quotedField(b, i, sep, final, multi, r); st != fieldMore {
			return field, end, st
		} else if end > 0 {
			return nil, 0, fieldMore
		}
		r.unclosed = true
	}
	for j := i; j < len(b); j++ {
		switch b[j] {
		case sep:
			return b[i:j], j + 1, fieldNext
		case '\n':
			return dropCR(b[i:j]), j + 1, fieldLast
		}
	}
	if !final {
		return nil, 0, fieldMore
	}
	return dropCR(b[i:]), len(b), fieldLast
}

// quotedField reads a field that starts with a quote. fieldMore with end 0
// means that the quote never closes; with end 1, that more bytes are needed to
// know.
func quotedField(b []byte, i int, sep byte, final, multi bool, r *row) (field []byte, end int, st fieldEnd) {
	limit := min(len(b), i+maxQuoted)
	doubled, lines := false, 0
	for j := i + 1; j < limit; j++ {
		if b[j] == '\n' {
			if !multi {
				return nil, 0, fieldMore
			}
			lines++
			continue
		}
		if b[j] != '"' {
			continue
		}
		if j+1 < len(b) && b[j+1] == '"' {
			doubled = true
			j++
			continue
		}
		k := j + 1
		for k < len(b) && b[k] == ' ' {
			k++
		}
		switch {
		case k < len(b) && b[k] == sep:
			st, end = fieldNext, k+1
		case k < len(b) && b[k] == '\n':
			st, end = fieldLast, k+1
		case k+1 < len(b) && b[k] == '\r' && b[k+1] == '\n':
			st, end = fieldLast, k+2
		case k == len(b) || k+1 == len(b) && b[k] == '\r':
			if !final {
				return nil, 1, fieldMore
			}
			st, end = fieldLast, len(b)
		default:
			continue // a quote within the text
		}
		field = b[i+1 : j]
		if doubled {
			field = bytes.ReplaceAll(field, []byte(`""`), []byte(`"`))
		}
		r.lines += lines
		return field, end, st
	}
	if !final && limit < i+maxQuoted {
		return nil, 1, fieldMore
	}
	return nil, 0, fieldMore
}

func dropCR(b []byte) []byte {
	if n := len(b); n > 0 && b[n-1] == '\r' {
		return b[:n-1]
	}
	return b
}

// cellText is a field as text: blanks around it off; bytes that are no UTF-8
// read as Windows-1252, which is what testers' PCs write (µ, °).
func cellText(f []byte) string {
	f = bytes.TrimSpace(f)
	if utf8.Valid(f) {
		return string(f)
	}
	t, err := charmap.Windows1252.NewDecoder().Bytes(f)
	if err != nil {
		return string(bytes.ToValidUTF8(f, []byte("\uFFFD")))
	}
	return string(t)
}
