package ingest

import (
	"context"
	"errors"
	"fmt"
	"math"
	"strconv"
	"strings"
	"sync"

	"github.com/apache/arrow/go/v17/arrow"
	"golang.org/x/sync/errgroup"
)

// readColumns reads a Parquet or Arrow IPC file. A file that WriteParquet or
// WriteArrow made says itself what its columns are; in any other they are found
// by name and content, by the rules for delimited text, with unit and limits from
// the metadata of the fields where they have such.
func readColumns(ctx context.Context, in *input, index int, sch *schema, opt *Options, progress func(int64)) (*fileData, error) {
	if in.packed != "" {
		return nil, &Error{File: in.name, What: "is packed with " + in.packed + " around a format that packs by itself", Remedy: "unpack it"}
	}
	src, err := in.raw(progress)
	if err != nil {
		return nil, err
	}
	defer src.close()
	// The hash needs the file from start to end, the columns do not.
	var hashed sync.WaitGroup
	defer hashed.Wait()
	var t *tableReading
	hashed.Go(src.drain)
	err = guard(in.name, func() error {
		t = &tableReading{ctx: ctx, in: in, index: index, sch: sch, opt: opt, limit: newLimit(in), d: &fileData{odd: map[oddKey]oddCells{}}}
		switch in.kind {
		case kindParquet:
			return t.parquet()
		case kindArrowFile:
			return t.arrowFile()
		}
		return t.arrowStream()
	})
	if err != nil {
		if ctx.Err() != nil {
			return nil, ctx.Err()
		}
		var e *Error
		if errors.As(err, &e) {
			return nil, e
		}
		return nil, &Error{File: in.name, What: "the " + kindNames[in.kind] + " is damaged or cut short: " + bare(err), Remedy: "fetch or export the file again", Err: err}
	}
	hashed.Wait()
	t.finish(src)
	return t.d, nil
}

var kindNames = map[fileKind]string{kindParquet: "Parquet file", kindArrowFile: "Arrow IPC file", kindArrowStream: "Arrow IPC stream"}

// tableReading fills a chunk from Arrow arrays.
type tableReading struct {
	ctx    context.Context
	in     *input
	index  int
	sch    *schema
	opt    *Options
	limit  *limitAllocator
	d      *fileData
	layout *layout
	fields []arrow.Field
	own    bool
	levels []level // of text columns, by field
	c      *chunk
	room   int
	expect int64        // rows that the batches of a file say they have
	text   []globalText // by field
	mu     sync.Mutex   // of odd
}

// start settles what the columns are; sample gives a cell of the first rows as
// text, for files that do not say.
func (t *tableReading) start(s *arrow.Schema, rows int, sample func(field, row int) string) error {
	t.fields = s.Fields()
	if len(t.fields) == 0 {
		return &Error{File: t.in.name, What: "has no columns", Remedy: "export the table again"}
	}
	t.levels, t.text = make([]level, len(t.fields)), make([]globalText, len(t.fields))
	var err error
	if m := ownMeta(s); m != nil {
		t.own = true
		err = t.ownLayout(m)
	} else {
		err = t.foundLayout(rows, sample)
	}
	if err != nil {
		return err
	}
	t.d.layout = t.layout
	t.sch.adopt(t.layout)
	t.onceEach()
	for i, f := range t.layout.fields {
		if f.kind == textField && t.levels[i] != levelJudged && t.sch.levels[f.slot] != levelDie {
			t.sch.levels[f.slot] = t.levels[i]
		}
	}
	n := len(t.sch.tests)
	if t.layout.long {
		n = longColumns
	}
	t.c = &chunk{file: t.index, text: make([]textColumn, textAttributes+len(t.sch.attributes)), values: make([][]float64, n), odd: t.d.odd}
	return nil
}

// onceEach leaves out a column that says that it is what another is: columns are
// filled at the same time, and each has one place.
func (t *tableReading) onceEach() {
	l := t.layout
	type place struct {
		kind fieldKind
		slot int
	}
	first := map[place]int{}
	for i, f := range l.fields {
		p := place{f.kind, f.slot}
		if f.kind == skipField {
			continue
		}
		if k, ok := first[p]; ok {
			l.fields[i].kind = skipField
			t.d.note(Warning, "column-again", fmt.Sprintf("%s: columns %s and %s say that they are the same; the first is used", t.in.name, quote(t.fields[k].Name), quote(t.fields[i].Name)),
				"take one out", 0)
			continue
		}
		first[p] = i
	}
}

// ownLayout takes the metadata's word.
func (t *tableReading) ownLayout(m *lotMeta) error {
	l := &layout{file: t.in.name, decimal: '.'}
	t.layout = l
	t.d.lot = m.Lot
	for _, k := range sortedKeys(m.Attributes) {
		if isRole(k, "lot") || isRole(k, "wafer") || isRole(k, roleProduct) {
			if t.d.about.attributes == nil {
				t.d.about.attributes = map[string]string{}
			}
			t.d.about.attributes[k] = m.Attributes[k]
			continue
		}
		t.d.attributes = append(t.d.attributes, [2]string{k, m.Attributes[k]})
	}
	if m.Product != "" {
		t.d.attributes = append(t.d.attributes, [2]string{roleProduct, m.Product})
	}
	l.attributes = t.d.attributes
	t.d.about.hardNames, t.d.about.softNames = m.HardBins, m.SoftBins
	if m.Geometry != nil {
		t.d.about.geometry = *m.Geometry
	}
	for _, f := range m.Findings {
		if f.OfFile {
			t.d.notes = append(t.d.notes, f.Finding)
		} else {
			t.d.carried = append(t.d.carried, f.Finding)
		}
	}
	attributes := 0
	for i, f := range t.fields {
		md := fieldMeta(f)
		name := f.Name
		if n := md["name"]; n != "" {
			name = n
		}
		fd := field{role: md["role"]}
		switch role := md["role"]; {
		case role == "lot": // all rows are of the lot that the metadata name
			fd.kind = skipField
		case role == roleMeasurement:
			fd.kind, fd.slot = intField, intMeasurement
		case role == "pass":
			fd.kind = passField
		case role == roleBound:
			name = markPrefix + md["test"]
			fd = field{kind: textField, slot: textAttributes + attributes}
			attributes++
			t.levels[i] = levelDie
		case role == roleTest:
			c := ownColumn(name, md)
			c.field = i
			fd = field{kind: valueField, slot: len(l.columns)}
			l.columns = append(l.columns, c)
		case role == roleWaferNote, role == roleDieNote:
			fd = field{kind: textField, slot: textAttributes + attributes}
			attributes++
			t.levels[i] = levelWafer
			if role == roleDieNote {
				t.levels[i] = levelDie
			}
		default:
			if slot, ok := textRoles[role]; ok {
				fd.kind, fd.slot = textField, slot
			} else if slot, ok := intRoles[role]; ok {
				fd.kind, fd.slot = intField, slot
			} else {
				fd = field{kind: skipField}
			}
		}
		l.names, l.fields = append(l.names, name), append(l.fields, fd)
	}
	return nil
}

// foundLayout finds the columns of a file from elsewhere.
func (t *tableReading) foundLayout(rows int, sample func(field, row int) string) error {
	l := &layout{file: t.in.name, decimal: '.', waferElse: t.in.waferElse()}
	t.layout = l
	var nested []string
	for _, f := range t.fields {
		l.names = append(l.names, strings.TrimSpace(f.Name))
		if isNested(f.Type) {
			nested = append(nested, f.Name)
		}
	}
	for r := range min(rows, sampleRows) {
		cells := make([]string, len(t.fields))
		for i, f := range t.fields {
			if !isNested(f.Type) {
				cells[i] = sample(i, r)
			}
		}
		l.sample = append(l.sample, cells)
	}
	roles, err := l.assignRoles(t.opt.Product)
	if err != nil {
		return err
	}
	l.judge(roles, t.opt.Product)
	for i, f := range t.fields {
		if isNested(f.Type) {
			roles[i] = "skip"
		}
	}
	l.place(roles, t.opt.Product)
	for j := range l.columns {
		md := fieldMeta(t.fields[l.columns[j].field])
		for key, kind := range map[string]rowKind{"unit": unitRow, "units": unitRow, "lower": lowerRow, "upper": upperRow, "condition": conditionRow, "number": numberRow} {
			l.columns[j].take(l, kind, md[key])
		}
	}
	l.parseColumnUnits()
	if len(nested) > 0 {
		l.note(Info, "column-not-understood", fmt.Sprintf("%s: %d %s lists or structures, which are not read: %s", t.in.name, len(nested), plural(len(nested), "column holds", "columns hold"), list(nested, 8)), "")
	}
	if err := l.check(t.opt.Product); err != nil {
		var e *Error
		if errors.As(err, &e) {
			e.Line = 0
			e.What = strings.ReplaceAll(e.What, "the header holds", "the columns are")
		}
		return err
	}
	t.d.notes = append(t.d.notes, l.notes...)
	t.d.lot, t.d.wafer, t.d.attributes = l.commented("lot"), l.commented("wafer"), l.attributes
	return nil
}

func isNested(t arrow.DataType) bool {
	if arrow.IsNested(t.ID()) || t.ID() == arrow.EXTENSION || arrow.IsUnion(t.ID()) || t.ID() == arrow.RUN_END_ENCODED {
		return true
	}
	if d, ok := t.(*arrow.DictionaryType); ok {
		return isNested(d.ValueType)
	}
	return false
}

// makeRoom makes columns of n rows.
func (t *tableReading) makeRoom(n int) error {
	if n <= t.room {
		return nil
	}
	wide := int64(0)
	for _, f := range t.layout.fields {
		wide += [...]int64{skipField: 0, textField: 4, intField: 4, passField: 1, valueField: 8}[f.kind]
	}
	if int64(n) > t.limit.most/max(wide, 1) {
		return &Error{File: t.in.name, What: fmt.Sprintf("says that it holds %d rows, which cannot be in a file of %d bytes", n, t.in.size), Remedy: "fetch or export the file again"}
	}
	t.room = n
	var g errgroup.Group
	g.SetLimit(t.opt.Workers)
	for _, f := range t.layout.fields {
		g.Go(func() error {
			switch f.kind {
			case textField:
				t.c.text[f.slot].codes = larger(t.c.text[f.slot].codes, n)
			case intField:
				t.c.ints[f.slot] = larger(t.c.ints[f.slot], n)
			case passField:
				t.c.pass = larger(t.c.pass, n)
			case valueField:
				t.c.values[f.slot] = larger(t.c.values[f.slot], n)
			}
			return nil
		})
	}
	return g.Wait()
}

// records takes the columns of one batch, in parallel.
func (t *tableReading) record(rec arrow.Record, at int) error {
	if int(rec.NumCols()) != len(t.fields) {
		return errors.New("a batch has other columns than the schema")
	}
	g, _ := errgroup.WithContext(t.ctx)
	g.SetLimit(t.opt.Workers)
	for i := range t.fields {
		g.Go(func() error {
			return guard(t.in.name, func() error {
				a := rec.Column(i)
				if int64(a.Len()) != rec.NumRows() {
					return errors.New("a column has other rows than its batch")
				}
				return t.column(i, a, at)
			})
		})
	}
	return g.Wait()
}

// column puts an array's cells in place. Cells of one column come from one
// goroutine at a time, in order, when it is text.
func (t *tableReading) column(i int, a arrow.Array, at int) error {
	f := t.layout.fields[i]
	n := a.Len()
	if f.kind == skipField || n == 0 {
		return nil
	}
	if at+n > t.room {
		return errors.New("there are more rows than the file says")
	}
	k := cells{a: a, at: at}
	if f.kind == valueField && !t.layout.long {
		for j := range t.layout.columns {
			if c := &t.layout.columns[j]; c.field == i {
				k.unit = c.unit
			}
		}
	}
	var err error
	switch f.kind {
	case valueField:
		err = k.floats(t.c.values[f.slot][at : at+n])
	case intField:
		err = k.ints(t.c.ints[f.slot][at : at+n])
	case passField:
		err = k.passes(t.c.pass[at : at+n])
	case textField:
		err = k.texts(t.c.text[f.slot].codes[at:at+n], &t.text[i])
	}
	t.count(i, &k)
	return err
}

// count adds up the odd cells of a column.
func (t *tableReading) count(field int, k *cells) {
	if len(k.odd) == 0 {
		return
	}
	t.mu.Lock()
	defer t.mu.Unlock()
	for st, o := range k.odd {
		key := oddKey{field: field, kind: st}
		sum := t.d.odd[key]
		sum.n += o.n
		if sum.first.line == 0 || o.first.line < sum.first.line {
			sum.first = o.first
		}
		t.d.odd[key] = sum
	}
}

// finish completes the file's data.
func (t *tableReading) finish(src *source) {
	d, c := t.d, t.c
	for i, f := range t.layout.fields {
		if f.kind == textField {
			c.text[f.slot].dict = t.text[i].dict
		}
	}
	c.trim()
	d.data = c
	d.rows.read = c.n
	shape := ""
	if !t.own {
		if shape = ", wide"; t.layout.long {
			shape = ", long"
		}
	}
	name := map[fileKind]string{kindParquet: "Parquet", kindArrowFile: "Arrow IPC file", kindArrowStream: "Arrow IPC stream"}[t.in.kind]
	d.input = Input{File: t.in.name, SHA256: src.sum(), Format: name + shape, Bytes: src.raw, Rows: int64(c.n)}
	if w := c.text[textWafer].codes; d.wafer == "" {
		none := 0
		for _, code := range w {
			if code < 0 {
				none++
			}
		}
		if none > 0 {
			d.note(Warning, "no-wafer", fmt.Sprintf("%s: %d %s no wafer id; not used, as the dice cannot be placed", t.in.name, none, plural(none, "row has", "rows have")), "fill the wafer column", none)
		}
	}
}

var errNoRows = "holds no rows"

func (t *tableReading) noRows() error {
	return &Error{File: t.in.name, What: errNoRows, Remedy: "export the table again"}
}

// shortDecimal shows a number as short as it goes.
func shortDecimal(v float64) string {
	if v == math.Trunc(v) && math.Abs(v) < 1e15 {
		return strconv.FormatInt(int64(v), 10)
	}
	return strconv.FormatFloat(v, 'g', -1, 64)
}
