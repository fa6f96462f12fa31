package ingest

import (
	"bytes"
	"context"
	"errors"
	"fmt"
	"io"
	"math"
	"os"
	"path/filepath"
	"testing"

	"github.com/apache/arrow/go/v17/arrow"
	"github.com/apache/arrow/go/v17/arrow/array"
	"github.com/apache/arrow/go/v17/arrow/memory"
	"github.com/apache/arrow/go/v17/parquet"
	"github.com/apache/arrow/go/v17/parquet/compress"
	"github.com/apache/arrow/go/v17/parquet/pqarrow"
	"github.com/google/go-cmp/cmp"
)

func parquetBytes(t testing.TB, rec arrow.Record, opts ...parquet.WriterProperty) []byte {
	t.Helper()
	var b bytes.Buffer
	f, err := pqarrow.NewFileWriter(rec.Schema(), justWriter{&b}, parquet.NewWriterProperties(opts...), pqarrow.NewArrowWriterProperties(pqarrow.WithStoreSchema()))
	if err != nil {
		t.Fatal(err)
	}
	if err := f.Write(rec); err != nil {
		t.Fatal(err)
	}
	if err := f.Close(); err != nil {
		t.Fatal(err)
	}
	return b.Bytes()
}

// manyCells has a column of each kind with rows enough for several pages.
func manyCells(n int) arrow.Record {
	f := func(name string, t arrow.DataType) arrow.Field {
		return arrow.Field{Name: name, Type: t, Nullable: true}
	}
	b := array.NewRecordBuilder(memory.DefaultAllocator, arrow.NewSchema([]arrow.Field{f("WAFER", arrow.BinaryTypes.String), f("X", arrow.PrimitiveTypes.Int32),
		f("Y", arrow.PrimitiveTypes.Int64), f("PF", arrow.FixedWidthTypes.Boolean), f("BV", arrow.PrimitiveTypes.Float64), f("ICBO", arrow.PrimitiveTypes.Float32),
		f("DIE_ID", arrow.BinaryTypes.String)}, nil))
	defer b.Release()
	for i := range n {
		b.Field(0).(*array.StringBuilder).Append(fmt.Sprint(i * 3 / n))
		b.Field(1).(*array.Int32Builder).Append(int32(i % 97))
		b.Field(2).(*array.Int64Builder).Append(int64(i / 97))
		b.Field(3).(*array.BooleanBuilder).Append(i%5 != 0)
		if i%7 == 0 {
			b.Field(4).(*array.Float64Builder).AppendNull()
		} else {
			b.Field(4).(*array.Float64Builder).Append(float64(i%1000) / 8)
		}
		b.Field(5).(*array.Float32Builder).Append(float32(i) / 4)
		b.Field(6).(*array.StringBuilder).Append(fmt.Sprintf("die %05d", i))
	}
	return b.NewRecord()
}

// However another program packs a column, its values are the same.
func TestParquetPackings(t *testing.T) {
	const n = 4000
	rec := manyCells(n)
	delta := []parquet.WriterProperty{parquet.WithDictionaryDefault(false), parquet.WithEncodingFor("X", parquet.Encodings.DeltaBinaryPacked),
		parquet.WithEncodingFor("Y", parquet.Encodings.DeltaBinaryPacked), parquet.WithEncodingFor("WAFER", parquet.Encodings.DeltaLengthByteArray),
		parquet.WithEncodingFor("DIE_ID", parquet.Encodings.DeltaByteArray), parquet.WithEncodingFor("PF", parquet.Encodings.RLE)}
	var want *Lot
	for name, opts := range map[string][]parquet.WriterProperty{
		"plain":            {parquet.WithDictionaryDefault(false)},
		"dictionaries":     {parquet.WithDictionaryDefault(true)},
		"small pages":      {parquet.WithDataPageSize(512), parquet.WithBatchSize(64)},
		"full dictionary":  {parquet.WithDictionaryPageSizeLimit(512), parquet.WithBatchSize(64), parquet.WithDataPageSize(512)},
		"second page form": {parquet.WithDataPageVersion(parquet.DataPageV2), parquet.WithCompression(compress.Codecs.Snappy)},
		"differences":      append(delta, parquet.WithDataPageVersion(parquet.DataPageV2)),
		"differences, zstd, row groups": append(delta, parquet.WithCompression(compress.Codecs.Zstd),
			parquet.WithMaxRowGroupLength(1000)),
		"snappy": {parquet.WithCompression(compress.Codecs.Snappy)},
		"gzip":   {parquet.WithCompression(compress.Codecs.Gzip)},
		"brotli": {parquet.WithCompression(compress.Codecs.Brotli), parquet.WithDataPageVersion(parquet.DataPageV2)},
	} {
		data := parquetBytes(t, rec, opts...)
		l := readOne(t, save(t, "lot.parquet", func(w io.Writer) error { _, err := w.Write(data); return err }), Options{})
		if l.Len() != n || testNames(l) != "BV ICBO" {
			t.Fatalf("%s: %d dice, tests %s", name, l.Len(), testNames(l))
		}
		for i, v := range l.Values(0) {
			ok := v == float64(i%1000)/8
			if i%7 == 0 {
				ok = v != v
			}
			if !ok || l.Values(1)[i] != float64(float32(i)/4) || l.X()[i] != int32(i%97) || l.Y()[i] != int32(i/97) || l.Pass()[i] != int8(min(i%5, 1)) {
				t.Fatalf("%s: row %d: %v %v %d %d %d", name, i, v, l.Values(1)[i], l.X()[i], l.Y()[i], l.Pass()[i])
			}
		}
		if want == nil {
			want = l
		} else if d := cmp.Diff(viewOf(want).DieAttributes, viewOf(l).DieAttributes); d != "" {
			t.Errorf("%s: %.300s", name, d)
		}
	}
}

// Any byte of a file may be wrong: reading ends, and what it says is one line.
func TestDamagedParquetEnds(t *testing.T) {
	step := 17
	if os.Getenv("KNEEPOINT_LONG") != "" {
		step = 2
	}
	for name, data := range map[string][]byte{
		"plain":        parquetBytes(t, manyCells(60), parquet.WithDictionaryDefault(false)),
		"dictionaries": parquetBytes(t, manyCells(60), parquet.WithDataPageVersion(parquet.DataPageV2)),
		"differences": parquetBytes(t, manyCells(60), parquet.WithDictionaryDefault(false), parquet.WithEncodingFor("X", parquet.Encodings.DeltaBinaryPacked),
			parquet.WithEncodingFor("DIE_ID", parquet.Encodings.DeltaByteArray)),
	} {
		path := filepath.Join(t.TempDir(), "lot.parquet")
		failed := 0
		for i := 4; i < len(data)-8; i += step {
			for _, v := range []byte{data[i] ^ 0x80, 0xff} {
				bad := bytes.Clone(data)
				bad[i] = v
				os.WriteFile(path, bad, 0o644)
				_, err := Read(context.Background(), []string{path}, Options{Workers: 1})
				var e *Error
				if err != nil {
					if failed++; !errors.As(err, &e) || bytes.ContainsAny([]byte(err.Error()), "\n\r") {
						t.Fatalf("%s, byte %d: %v", name, i, err)
					}
				}
			}
		}
		if failed == 0 {
			t.Errorf("%s: no damage was found", name)
		}
	}
}

// Pages whose levels end early, and whose index leads far beyond the dictionary.
func TestHostilePages(t *testing.T) {
	const n = 60
	b := array.NewRecordBuilder(memory.DefaultAllocator, arrow.NewSchema([]arrow.Field{{Name: "WAFER", Type: arrow.BinaryTypes.String, Nullable: true},
		{Name: "BV", Type: arrow.PrimitiveTypes.Float64, Nullable: true}, {Name: "SITE", Type: arrow.PrimitiveTypes.Int32, Nullable: true}}, nil))
	defer b.Release()
	for i := range n {
		b.Field(0).(*array.StringBuilder).Append(fmt.Sprint(i))
		b.Field(1).(*array.Float64Builder).Append(float64(i))
		b.Field(2).(*array.Int32Builder).Append(int32(i))
	}
	rec := b.NewRecord()
	levels := []byte{2, 0, 0, 0, n << 1, 1} // their length, and a run of ones
	for name, c := range map[string]struct {
		dict bool
		at   int // behind the mark
		put  []byte
	}{
		"levels end early":       {false, 4, []byte{1 << 1}},
		"levels end at once":     {false, 4, []byte{0}},
		"more levels than bytes": {false, 0, []byte{0xff, 0xff, 0xff, 0x7f}},
		"far index":              {true, 6, []byte{31, n << 1, 0xff, 0xff, 0xff, 0x7f}},
		"wide index":             {true, 6, []byte{63}},
	} {
		data := parquetBytes(t, rec, parquet.WithDictionaryDefault(c.dict))
		found := 0
		for i := range data {
			if !bytes.HasPrefix(data[i:], levels) {
				continue
			}
			found++
			bad := bytes.Clone(data)
			copy(bad[i+c.at:], c.put)
			path := save(t, "lot.parquet", func(w io.Writer) error { _, err := w.Write(bad); return err })
			var e *Error
			if _, err := Read(context.Background(), []string{path}, Options{}); !errors.As(err, &e) {
				t.Errorf("%s, column %d: error %v", name, found, err)
			}
		}
		if found != 3 {
			t.Errorf("%s: %d pages found", name, found)
		}
	}
	// Of a file that says itself what its columns are no sample is read first.
	rows := []string{"WAFER,X,Y,BV,ICBO"}
	for i := range n - 1 {
		rows = append(rows, fmt.Sprintf("1,%d,0,%d.%d,%d", i, i, i*7%10, i*i))
	}
	rows = append(rows, fmt.Sprintf("1,%d,0,,", n)) // columns with no blank have no levels
	tab, err := newColumnTable(mustRead(t, table(rows...), Options{}).Lots[0])
	if err != nil {
		t.Fatal(err)
	}
	var buf bytes.Buffer
	f, err := pqarrow.NewFileWriter(tab.schema, justWriter{&buf}, parquet.NewWriterProperties(parquet.WithDictionaryDefault(false)), pqarrow.NewArrowWriterProperties(pqarrow.WithStoreSchema()))
	if err != nil {
		t.Fatal(err)
	}
	if err := errors.Join(tab.write(f.Write), f.Close()); err != nil {
		t.Fatal(err)
	}
	refused := 0
	for i := range buf.Bytes() {
		if bytes.HasPrefix(buf.Bytes()[i:], []byte{0, 0, 0, (n - 1) << 1, 1}) {
			bad := bytes.Clone(buf.Bytes())
			bad[i+3] = 0
			path := save(t, "lot.parquet", func(w io.Writer) error { _, err := w.Write(bad); return err })
			if _, err := Read(context.Background(), []string{path}, Options{}); err != nil {
				refused++
			}
		}
	}
	if refused < 2 { // BV and ICBO, and others that the same cells have blanks in
		t.Errorf("%d columns refused", refused)
	}
}

// A footer whose tree has more children than there are, or more rows than the file
// can hold.
func TestHostileFooters(t *testing.T) {
	data := parquetBytes(t, manyCells(60))
	footer := len(data) - 8 - int(uint32(data[len(data)-8])|uint32(data[len(data)-7])<<8)
	if err := checkParquet(bytes.NewReader(data), int64(len(data))); err != nil {
		t.Fatal(err)
	}
	refused := 0
	for i := footer; i < len(data)-8; i++ {
		bad := bytes.Clone(data)
		bad[i] |= 0x40
		if err := checkParquet(bytes.NewReader(bad), int64(len(bad))); err != nil {
			refused++
		}
	}
	if refused < 50 {
		t.Errorf("only %d damages of %d seen", refused, len(data)-8-footer)
	}
}

// What pages are packed with, against sequences worked out by hand from the
// specification of the format (parquet-format, Encodings.md; from memory).
func TestRunsAndDifferences(t *testing.T) {
	for _, c := range []struct {
		b     []byte
		width int
		want  []uint32
		err   bool
	}{
		{[]byte{3 << 1, 7}, 3, []uint32{7, 7, 7}, false},
		{[]byte{1<<1 | 1, 0x88, 0xc6, 0xfa}, 3, []uint32{0, 1, 2, 3, 4, 5, 6, 7}, false}, // the specification's own example
		{[]byte{2 << 1, 1, 1<<1 | 1, 0b101}, 1, []uint32{1, 1, 1, 0, 1}, false},
		{[]byte{2 << 1, 1}, 1, []uint32{0, 0, 0}, true},      // ends early
		{[]byte{0, 1}, 1, []uint32{0}, true},                 // a run of none
		{[]byte{1<<1 | 1, 0x88}, 3, make([]uint32, 8), true}, // bytes are missing
		{nil, 1, []uint32{0}, true},
	} {
		got := make([]uint32, len(c.want))
		if err := runs(c.b, c.width, got); (err != nil) != c.err || err == nil && !cmp.Equal(got, c.want) {
			t.Errorf("% x: %v %v, want %v", c.b, got, err, c.want)
		}
	}
	// 7, 5, 3, 1, 2, 3, 4, 5 is the specification's example: least difference -2, then widths and differences from it.
	head := []byte{8, 1, 8, 14}            // a block of 8 values in one part; 8 values; the first is 7
	body := []byte{3, 2, 0xc0, 0x3f, 0, 0} // -2, 2 bits each: 0 0 0 3 3 3 3
	var got []int64
	n, rest, err := deltas(append(append(head, body...), 9), 8, func(v int64) { got = append(got, v) })
	if want := []int64{7, 5, 3, 1, 2, 3, 4, 5}; n != 8 || err != nil || !cmp.Equal(got, want) || len(rest) == 0 {
		t.Errorf("%v %v %v", got, rest, err)
	}
	for _, b := range [][]byte{nil, {8, 0, 8, 14}, {0, 1, 8, 14}, {8, 1, 9, 14}, {8, 1, 8, 14, 3, 2}, {0xff, 0xff, 0xff, 0xff, 0x7f, 1, 8, 14}, {8, 1, 8, 14, 3, 65, 0, 0}} {
		if _, _, err := deltas(b, 8, func(int64) {}); err == nil {
			t.Errorf("% x: no error", b)
		}
	}
	if v := bitsAt([]byte{0xff, 0xff, 0xff, 0xff, 0xff, 0xff, 0xff, 0xff}, 0, 64); v != math.MaxUint64 {
		t.Errorf("%x", v)
	}
}
