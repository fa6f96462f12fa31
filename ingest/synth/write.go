package synth

import (
	"bytes"
	"encoding/csv"
	"errors"
	"fmt"
	"io"
	"math"
	"runtime"
	"slices"
	"strconv"
	"strings"
)

// Format says how delimited text is laid out. The zero value is comma and
// point, a header and nothing else.
type Format struct {
	Separator    byte // ',', ';' or '\t'; 0: comma
	DecimalComma bool // not with a comma as separator
	UnitRow      bool // wide: a row of units under the header; long: a column
	LimitRows    bool // wide: rows of lower and upper limits; long: two columns
	Comments     bool // '#' lines above the header
	NoTouchdown  bool // leave the order of test to the order of rows
}

// Header names of the columns that come before the tests.
var idColumns = []string{"LOT", "WAFER", "DIE_X", "DIE_Y", "SITE", "TOUCHDOWN", "HBIN", "SBIN"}

// WriteWide writes a row per measurement and a column per test. Values have the
// decimals of the test's resolution, so that every layout holds the same
// values; a blank is an empty field. Retests are rows of their own, after their
// wafer's other rows.
func (l *Lot) WriteWide(w io.Writer, f Format) error {
	return write(w, f, &l.Spec, func(i int) *Wafer { return &l.Wafers[i] }, true)
}

// WriteLong writes a row per measurement and test.
func (l *Lot) WriteLong(w io.Writer, f Format) error {
	return write(w, f, &l.Spec, func(i int) *Wafer { return &l.Wafers[i] }, false)
}

// WriteWide makes the lot and writes it wafer by wafer, without ever holding
// all of it: what Generate(seed).WriteWide(w, f) writes.
func (s Spec) WriteWide(w io.Writer, seed uint64, f Format) error {
	fab := newFab(&s, seed)
	return write(w, f, &s, func(i int) *Wafer { w := fab.wafer(i); return &w }, true)
}

func write(w io.Writer, f Format, s *Spec, wafer func(i int) *Wafer, wide bool) error {
	if f.Separator == 0 {
		f.Separator = ','
	}
	if f.Separator == ',' && f.DecimalComma {
		return errors.New("synth: a decimal comma needs another separator")
	}
	t := newText(f, s)
	if _, err := w.Write(t.head(wide)); err != nil {
		return err
	}
	// A batch of wafers is made into text on all cores, then written in order.
	bufs := make([][]byte, runtime.GOMAXPROCS(0))
	for from := 0; from < s.Wafers; from += len(bufs) {
		n := min(len(bufs), s.Wafers-from)
		parallel(n, func(i int) {
			made, layout, size := wafer(from+i), t.long, 32*len(s.Tests)
			if wide {
				layout, size = t.wide, 40+8*len(s.Tests)
			}
			bufs[i] = layout(slices.Grow(bufs[i][:0], size*len(made.X)), made)
		})
		for _, b := range bufs[:n] {
			if _, err := w.Write(b); err != nil {
				return err
			}
		}
	}
	return nil
}

// text is a format made ready for a program of tests.
type text struct {
	Format
	spec     *Spec
	lot      []byte
	decimals []int
	scale    []float64
	names    [][]byte
	suffix   [][]byte // of a long row: unit and limits
}

func newText(f Format, s *Spec) *text {
	t := &text{Format: f, spec: s}
	t.lot = t.field(nil, s.Lot)
	for i := range s.Tests {
		test := &s.Tests[i]
		d := Decimals(test.Resolution)
		t.decimals = append(t.decimals, d)
		t.scale = append(t.scale, math.Pow10(max(d, 0)))
		t.names = append(t.names, t.field(nil, test.Name))
		var suffix []byte
		if f.UnitRow {
			suffix = t.field(append(suffix, f.Separator), test.Unit)
		}
		if f.LimitRows {
			lower, upper := s.Limits(i)
			suffix = t.limit(append(suffix, f.Separator), lower)
			suffix = t.limit(append(suffix, f.Separator), upper)
		}
		t.suffix = append(t.suffix, suffix)
	}
	return t
}

// Decimals returns how many decimals show a step of the tester exactly, -1
// when nine do not or there is no step.
func Decimals(resolution float64) int {
	for d := range 10 {
		if s := resolution * math.Pow10(d); resolution > 0 && s >= 0.5 && math.Abs(s-math.Round(s)) < 1e-6*s {
			return d
		}
	}
	return -1
}

func (t *text) head(wide bool) []byte {
	var b []byte
	sep := t.Separator
	if t.Comments {
		b = fmt.Appendf(b, "# product %s\n# lot %s\n# made-up data: no part of it was ever measured\n", t.spec.Product, t.spec.Lot)
	}
	ids := make([]string, 0, len(idColumns))
	for _, name := range idColumns {
		if name != "TOUCHDOWN" || !t.NoTouchdown {
			ids = append(ids, name)
		}
	}
	for i, name := range ids {
		if i > 0 {
			b = append(b, sep)
		}
		b = append(b, name...)
	}
	if !wide {
		b = append(append(b, sep), "TEST"...)
		b = append(append(b, sep), "VALUE"...)
		if t.UnitRow {
			b = append(append(b, sep), "UNIT"...)
		}
		if t.LimitRows {
			b = append(append(b, sep), "LOWER"...)
			b = append(append(b, sep), "UPPER"...)
		}
		return append(b, '\n')
	}
	for _, name := range t.names {
		b = append(append(b, sep), name...)
	}
	b = append(b, '\n')
	row := func(label string, cell func(b []byte, test int) []byte) {
		b = append(b, label...)
		for range len(ids) - 1 {
			b = append(b, sep)
		}
		for i := range t.spec.Tests {
			b = cell(append(b, sep), i)
		}
		b = append(b, '\n')
	}
	if t.UnitRow {
		row("UNIT", func(b []byte, i int) []byte { return t.field(b, t.spec.Tests[i].Unit) })
	}
	if t.LimitRows {
		row("LOWER", func(b []byte, i int) []byte { lower, _ := t.spec.Limits(i); return t.limit(b, lower) })
		row("UPPER", func(b []byte, i int) []byte { _, upper := t.spec.Limits(i); return t.limit(b, upper) })
	}
	return b
}

// field appends text, quoted where it must be.
func (t *text) field(b []byte, s string) []byte {
	if !strings.ContainsAny(s, string(rune(t.Separator))+"\"\r\n") && !strings.HasPrefix(s, "#") {
		return append(b, s...)
	}
	b = append(b, '"')
	b = append(b, strings.ReplaceAll(s, `"`, `""`)...)
	return append(b, '"')
}

// limit appends a limit as short as it goes, nothing when there is none.
func (t *text) limit(b []byte, v float64) []byte {
	if math.IsNaN(v) {
		return b
	}
	from := len(b)
	b = strconv.AppendFloat(b, v, 'f', -1, 64)
	t.comma(b[from:])
	return b
}

func (t *text) comma(b []byte) {
	if t.DecimalComma {
		if i := bytes.IndexByte(b, '.'); i >= 0 {
			b[i] = ','
		}
	}
}

// die appends the columns before the tests, without a separator at the end.
func (t *text) die(b []byte, w *Wafer, row int) []byte {
	sep := t.Separator
	b = append(append(b, t.lot...), sep)
	b = append(append(b, w.ID...), sep)
	b = append(strconv.AppendInt(b, int64(w.X[row]), 10), sep)
	b = append(strconv.AppendInt(b, int64(w.Y[row]), 10), sep)
	b = append(strconv.AppendInt(b, int64(w.Site[row]), 10), sep)
	if !t.NoTouchdown {
		b = append(strconv.AppendInt(b, int64(w.Touchdown[row]), 10), sep)
	}
	b = append(strconv.AppendInt(b, int64(w.HardBin[row]), 10), sep)
	return strconv.AppendInt(b, int64(w.SoftBin[row]), 10)
}

// value appends a reading with the test's decimals, nothing for a blank.
func (t *text) value(b []byte, test int, v float64) []byte {
	if v != v {
		return b
	}
	d := t.decimals[test]
	scaled := math.Round(v * t.scale[test])
	if d < 0 || math.Abs(scaled) > 1<<53 {
		from := len(b)
		b = strconv.AppendFloat(b, v, 'g', -1, 64)
		t.comma(b[from:])
		return b
	}
	// Digits of the scaled integer with the point put in: a third of the time
	// of strconv's fixed form, and the same text.
	n := int64(scaled)
	if n < 0 {
		b = append(b, '-')
		n = -n
	}
	var digits [24]byte
	i := len(digits)
	for k := 0; k <= d || n > 0; k++ {
		if k == d && d > 0 {
			i--
			digits[i] = '.'
			if t.DecimalComma {
				digits[i] = ','
			}
		}
		i--
		digits[i] = byte('0' + n%10)
		n /= 10
	}
	return append(b, digits[i:]...)
}

func (t *text) wide(b []byte, w *Wafer) []byte {
	for row := range w.X {
		b = t.die(b, w, row)
		for test := range w.Values {
			b = t.value(append(b, t.Separator), test, w.Values[test][row])
		}
		b = append(b, '\n')
	}
	return b
}

func (t *text) long(b []byte, w *Wafer) []byte {
	var id []byte
	for row := range w.X {
		id = append(t.die(id[:0], w, row), t.Separator)
		for test := range w.Values {
			b = append(append(append(b, id...), t.names[test]...), t.Separator)
			b = t.value(b, test, w.Values[test][row])
			b = append(append(b, t.suffix[test]...), '\n')
		}
	}
	return b
}

// WriteHistory writes what the fab recorded of each wafer: CSV by lot and
// wafer, a column per attribute. Nothing but the header when nothing was.
func (l *Lot) WriteHistory(w io.Writer) error {
	out := csv.NewWriter(w)
	head := []string{"LOT", "WAFER"}
	if len(l.Wafers) > 0 {
		for _, a := range l.Wafers[0].History {
			head = append(head, a.Name)
		}
	}
	rows := [][]string{head}
	for i := range l.Wafers {
		row := []string{l.ID, l.Wafers[i].ID}
		for _, a := range l.Wafers[i].History {
			row = append(row, a.Value)
		}
		rows = append(rows, row)
	}
	return out.WriteAll(rows)
}
