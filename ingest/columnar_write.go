package ingest

import (
	"fmt"
	"io"
	"math"
	"runtime"
	"slices"

	"github.com/apache/arrow/go/v17/arrow"
	"github.com/apache/arrow/go/v17/arrow/array"
	"github.com/apache/arrow/go/v17/arrow/bitutil"
	"github.com/apache/arrow/go/v17/arrow/ipc"
	"github.com/apache/arrow/go/v17/arrow/memory"
	"github.com/apache/arrow/go/v17/parquet"
	"github.com/apache/arrow/go/v17/parquet/compress"
	"github.com/apache/arrow/go/v17/parquet/pqarrow"
	"golang.org/x/sync/errgroup"

	"kneepoint/config"
)

// groupRows are the rows of a row group of Parquet, or a batch of Arrow: enough
// for compression, few enough for all cores to work on one lot.
const groupRows = 128 << 10

// WriteParquet writes the lot as a Parquet file. Reading it gives the same lot:
// wafers, tests, attributes, findings, measurements that do not count, and every
// value to the last bit; but for Inputs, and for what depends on a product file or
// retest policy other than those that the lot was read with.
func WriteParquet(w io.Writer, l *Lot) error {
	t, err := newColumnTable(l)
	if err != nil {
		return err
	}
	props := parquet.NewWriterProperties(parquet.WithCompression(compress.Codecs.Snappy), parquet.WithMaxRowGroupLength(groupRows),
		parquet.WithVersion(parquet.V2_LATEST), parquet.WithCreatedBy("kneepoint"))
	f, err := pqarrow.NewFileWriter(t.schema, justWriter{w}, props, pqarrow.NewArrowWriterProperties(pqarrow.WithStoreSchema()))
	if err != nil {
		return fmt.Errorf("parquet: %w", err)
	}
	if err := t.write(f.Write); err != nil {
		return err
	}
	return f.Close()
}

// WriteArrow writes the lot as an Arrow IPC file; see WriteParquet.
func WriteArrow(w io.Writer, l *Lot) error {
	t, err := newColumnTable(l)
	if err != nil {
		return err
	}
	f, err := ipc.NewFileWriter(&countingWriter{w: w}, ipc.WithSchema(t.schema))
	if err != nil {
		return fmt.Errorf("arrow: %w", err)
	}
	if err := t.write(f.Write); err != nil {
		return err
	}
	return f.Close()
}

// WriteArrowStream writes the lot as an Arrow IPC stream; see WriteParquet.
func WriteArrowStream(w io.Writer, l *Lot) error {
	t, err := newColumnTable(l)
	if err != nil {
		return err
	}
	f := ipc.NewWriter(justWriter{w}, ipc.WithSchema(t.schema))
	if err := t.write(f.Write); err != nil {
		return err
	}
	return f.Close()
}

// justWriter keeps the libraries from closing what they were not given to own.
type justWriter struct{ io.Writer }

// countingWriter tells the library its place, which is all that it seeks for.
type countingWriter struct {
	w io.Writer
	n int64
}

func (c *countingWriter) Write(p []byte) (int, error) {
	n, err := c.w.Write(p)
	c.n += int64(n)
	return n, err
}

func (c *countingWriter) Seek(offset int64, whence int) (int64, error) {
	if offset != 0 || whence != io.SeekCurrent {
		return 0, fmt.Errorf("arrow: the file is written from start to end")
	}
	return c.n, nil
}

// columnTable is a lot laid out for writing.
type columnTable struct {
	lot     *Lot
	schema  *arrow.Schema
	rows    []int32 // row of the lot, or ^index of Earlier
	ofDie   []int32 // measurement of each row, from 1
	columns []func(lo, hi int) arrow.Array
}

func newColumnTable(l *Lot) (*columnTable, error) {
	t := &columnTable{lot: l}
	t.order()
	meta, err := metaOfLot(l)
	if err != nil {
		return nil, err
	}
	var fields []arrow.Field
	names := freeNames{}
	add := func(name string, typ arrow.DataType, meta map[string]string, column func(lo, hi int) arrow.Array) {
		free := names.take(name)
		if free != name {
			meta["name"] = name
		}
		fields = append(fields, arrow.Field{Name: free, Type: typ, Nullable: true, Metadata: metadata(meta)})
		t.columns = append(t.columns, column)
	}
	role := func(r string) map[string]string { return map[string]string{"role": r} }
	lotCodes := func(int32) int32 { return 0 }
	add("lot", dictType, role("lot"), t.dictColumn([]string{l.id}, lotCodes))
	waferOf := make([]int32, l.Len())
	var ids []string
	for w, x := range l.wafers {
		ids = append(ids, x.ID)
		for i := x.Lo; i < x.Hi; i++ {
			waferOf[i] = int32(w)
		}
	}
	add("wafer", dictType, role("wafer"), t.dictColumn(ids, func(row int32) int32 { return waferOf[t.die(row)] }))
	for _, c := range []struct {
		name           string
		values         []int32
		earlier        []int32
		ofDie, missing bool // earlier readings have the die's value, none
	}{{"x", l.X(), nil, true, false}, {"y", l.Y(), nil, true, false}, {"site", l.Site(), nil, false, true}, {"touchdown", l.Touchdown(), nil, false, true},
		{"measurement", nil, nil, false, false}, {"hard_bin", l.HardBin(), l.earlier.HardBin, false, false}, {"soft_bin", l.SoftBin(), l.earlier.SoftBin, false, false}} {
		switch {
		case c.name == "measurement":
			if len(l.earlier.Of) > 0 {
				add(c.name, arrow.PrimitiveTypes.Int32, role(roleMeasurement), func(lo, hi int) arrow.Array { return ints32(hi-lo, func(i int) int32 { return t.ofDie[lo+i] }) })
			}
		case c.values != nil:
			add(c.name, arrow.PrimitiveTypes.Int32, role(c.name), t.intColumn(c.values, c.earlier, c.ofDie))
		}
	}
	if pass := l.Pass(); pass != nil {
		add("pass", arrow.FixedWidthTypes.Boolean, role("pass"), t.passColumn(pass))
	}
	store := t.stored()
	for _, i := range byPlace(l.tests) {
		add(l.tests[i].Name, arrow.PrimitiveTypes.Float64, metaOf(&l.tests[i], l.piles[i], store[i]), t.valueColumn(i, store[i].unit))
	}
	for i := range l.tests {
		if i < len(l.given) && slices.ContainsFunc(l.given[i], func(m int8) bool { return m != 0 }) {
			add(l.tests[i].Name+" bound", arrow.PrimitiveTypes.Int8, map[string]string{"role": roleBound, "test": l.tests[i].Name}, t.markColumn(l.given[i]))
		}
	}
	t.waferAttributes(add, waferOf)
	for i, name := range l.DieAttributes() {
		codes, labels := l.DieAttribute(i)
		add(name, dictType, role(roleDieNote), t.dictColumn(labels, func(row int32) int32 {
			if row < 0 {
				return -1
			}
			return codes[row]
		}))
	}
	m := arrow.NewMetadata([]string{lotKey}, []string{meta})
	t.schema = arrow.NewSchema(fields, &m)
	return t, nil
}

// order puts the measurements of each die together, in the order of test.
func (t *columnTable) order() {
	l := t.lot
	e := &l.earlier
	of := map[int32][]int32{}
	for i, row := range e.Of {
		of[row] = append(of[row], int32(i))
	}
	t.rows = make([]int32, 0, l.Len()+len(e.Of))
	t.ofDie = make([]int32, 0, cap(t.rows))
	put := func(row int32, k *int32) {
		*k++
		t.rows, t.ofDie = append(t.rows, row), append(t.ofDie, *k)
	}
	for row := range int32(l.Len()) {
		k := int32(0)
		later := of[row]
		for len(later) > 0 && !l.after[later[0]] {
			put(^later[0], &k)
			later = later[1:]
		}
		put(row, &k)
		for _, x := range later {
			put(^x, &k)
		}
	}
}

// die is the row of the lot that a row written is of.
func (t *columnTable) die(row int32) int32 {
	if row < 0 {
		return t.lot.earlier.Of[^row]
	}
	return row
}

// stored decides in which unit each test's values stand.
func (t *columnTable) stored() []stored {
	l := t.lot
	out := make([]stored, len(l.tests))
	var g errgroup.Group
	g.SetLimit(runtime.GOMAXPROCS(0))
	for i := range l.tests {
		g.Go(func() error {
			u := l.tests[i].Unit
			s := stored{u, u}
			var early []float64
			if len(l.earlier.Of) > 0 {
				early = l.earlier.Values[i]
			}
			x := &l.tests[i]
			if !exact(u, l.Values(i)) || !exact(u, early) || !exact(u, []float64{x.Lower, x.Upper, x.Clamp, x.Floor}) {
				s.unit = config.Unit{Text: u.Base, Base: u.Base}
			}
			out[i] = s
			return nil
		})
	}
	g.Wait()
	return out
}

// exact says whether every value is the same after conversion there and back.
func exact(u config.Unit, v []float64) bool {
	if u.Exp == 0 {
		return true
	}
	last := math.NaN()
	for _, x := range v {
		if x == x && x != last && math.Float64bits(u.ToSI(u.FromSI(x))) != math.Float64bits(x) {
			return false
		}
		last = x
	}
	return true
}

// waferAttributes adds a column for each attribute of wafers.
func (t *columnTable) waferAttributes(add func(string, arrow.DataType, map[string]string, func(lo, hi int) arrow.Array), waferOf []int32) {
	names := map[string]bool{}
	for _, w := range t.lot.wafers {
		for k := range w.Attributes {
			names[k] = true
		}
	}
	for _, name := range sortedKeys(names) {
		var g globalText
		code := make([]int32, len(t.lot.wafers))
		for i, w := range t.lot.wafers {
			if code[i] = -1; w.Attributes[name] != "" {
				code[i] = g.code(w.Attributes[name])
			}
		}
		add(name, dictType, map[string]string{"role": roleWaferNote}, t.dictColumn(g.dict, func(row int32) int32 { return code[waferOf[t.die(row)]] }))
	}
}

// write gives the rows to a file, group by group.
func (t *columnTable) write(put func(arrow.Record) error) error {
	for lo := 0; lo < len(t.rows); lo += groupRows {
		hi := min(lo+groupRows, len(t.rows))
		arrays := make([]arrow.Array, len(t.columns))
		var g errgroup.Group
		g.SetLimit(runtime.GOMAXPROCS(0))
		for i, c := range t.columns {
			g.Go(func() error {
				arrays[i] = c(lo, hi)
				return nil
			})
		}
		g.Wait()
		rec := array.NewRecord(t.schema, arrays, int64(hi-lo))
		err := put(rec)
		rec.Release()
		for _, a := range arrays {
			a.Release()
		}
		if err != nil {
			return err
		}
	}
	return nil
}

var dictType = &arrow.DictionaryType{IndexType: arrow.PrimitiveTypes.Int32, ValueType: arrow.BinaryTypes.String}

// bitmap collects which rows are there.
type bitmap struct {
	bits  []byte
	nulls int
}

func newBitmap(n int) *bitmap { return &bitmap{bits: make([]byte, bitutil.BytesForBits(int64(n)))} }

func (b *bitmap) set(i int, there bool) {
	if there {
		bitutil.SetBit(b.bits, i)
	} else {
		b.nulls++
	}
}

func primitive[T any](typ arrow.DataType, v []T, b *bitmap) *array.Data {
	var valid *memory.Buffer
	if b.nulls > 0 {
		valid = memory.NewBufferBytes(b.bits)
	}
	return array.NewData(typ, len(v), []*memory.Buffer{valid, memory.NewBufferBytes(bytesOf(v))}, nil, b.nulls, 0)
}

func ints32(n int, at func(i int) int32) arrow.Array {
	v, b := make([]int32, n), newBitmap(n)
	for i := range v {
		x := at(i)
		b.set(i, x != Missing)
		if x != Missing {
			v[i] = x
		}
	}
	return array.NewInt32Data(primitive(arrow.PrimitiveTypes.Int32, v, b))
}

// intColumn is a whole-number column; earlier readings have their own values,
// the die's, or none.
func (t *columnTable) intColumn(values, earlier []int32, ofDie bool) func(lo, hi int) arrow.Array {
	return func(lo, hi int) arrow.Array {
		return ints32(hi-lo, func(i int) int32 {
			row := t.rows[lo+i]
			switch {
			case row >= 0:
				return values[row]
			case ofDie:
				return values[t.die(row)]
			case earlier != nil:
				return earlier[^row]
			}
			return Missing
		})
	}
}

func (t *columnTable) passColumn(pass []int8) func(lo, hi int) arrow.Array {
	return func(lo, hi int) arrow.Array {
		b := array.NewBooleanBuilder(memory.DefaultAllocator)
		defer b.Release()
		for _, row := range t.rows[lo:hi] {
			p := int8(-1)
			if row >= 0 {
				p = pass[row]
			} else {
				p = t.lot.earlier.Pass[^row]
			}
			if p < 0 {
				b.AppendNull()
			} else {
				b.Append(p == 1)
			}
		}
		return b.NewArray()
	}
}

func (t *columnTable) markColumn(marks []int8) func(lo, hi int) arrow.Array {
	return func(lo, hi int) arrow.Array {
		v, b := make([]int8, hi-lo), newBitmap(hi-lo)
		for i, row := range t.rows[lo:hi] {
			if row >= 0 {
				v[i] = marks[row]
			}
			b.set(i, v[i] != 0)
		}
		return array.NewInt8Data(primitive(arrow.PrimitiveTypes.Int8, v, b))
	}
}

func (t *columnTable) valueColumn(test int, u config.Unit) func(lo, hi int) arrow.Array {
	values := t.lot.Values(test)
	return func(lo, hi int) arrow.Array {
		v, b := make([]float64, hi-lo), newBitmap(hi-lo)
		for i, row := range t.rows[lo:hi] {
			x := 0.0
			if row >= 0 {
				x = values[row]
			} else {
				x = t.lot.earlier.Values[test][^row]
			}
			b.set(i, x == x)
			if x == x {
				v[i] = u.FromSI(x)
			}
		}
		return array.NewFloat64Data(primitive(arrow.PrimitiveTypes.Float64, v, b))
	}
}

// dictColumn is a text column over one dictionary for the whole file.
func (t *columnTable) dictColumn(labels []string, code func(row int32) int32) func(lo, hi int) arrow.Array {
	sb := array.NewStringBuilder(memory.DefaultAllocator)
	sb.AppendValues(labels, nil)
	dict := sb.NewArray()
	return func(lo, hi int) arrow.Array {
		v, b := make([]int32, hi-lo), newBitmap(hi-lo)
		for i, row := range t.rows[lo:hi] {
			c := code(row)
			b.set(i, c >= 0)
			v[i] = max(c, 0)
		}
		idx := array.NewInt32Data(primitive(arrow.PrimitiveTypes.Int32, v, b))
		return array.NewDictionaryArray(dictType, idx, dict)
	}
}
