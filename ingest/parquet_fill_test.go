package ingest

import (
	"bytes"
	"io"
	"math"
	"testing"

	"github.com/apache/arrow/go/v17/arrow"
	"github.com/apache/arrow/go/v17/arrow/array"
	"github.com/apache/arrow/go/v17/arrow/memory"
	"github.com/apache/arrow/go/v17/parquet"
	"github.com/apache/arrow/go/v17/parquet/compress"
	"github.com/google/go-cmp/cmp"
)

// oddCellsTable has a column of each kind that is read without an array in between,
// with empty cells in all and what else there may be.
func oddCellsTable(n int) arrow.Record {
	f := func(name string, t arrow.DataType) arrow.Field {
		return arrow.Field{Name: name, Type: t, Nullable: true}
	}
	b := array.NewRecordBuilder(memory.DefaultAllocator, arrow.NewSchema([]arrow.Field{f("WAFER", dictType), f("X", arrow.PrimitiveTypes.Int32), f("Y", arrow.PrimitiveTypes.Int32),
		f("HBIN", arrow.PrimitiveTypes.Int32), f("PF", arrow.FixedWidthTypes.Boolean), f("BV", arrow.PrimitiveTypes.Float64), f("NOTE", arrow.BinaryTypes.String),
		f("CARD", arrow.BinaryTypes.Binary)}, nil))
	defer b.Release()
	notes := []string{"edge", "", " padded ", "edge", "probe \u03a9", "edge"}
	cards := [][]byte{[]byte("c1"), []byte("caf\xe9"), {}, []byte("c2")}
	for i := range n {
		b.Field(0).(*array.BinaryDictionaryBuilder).AppendString([]string{"1", "2", "3"}[i*3/n])
		b.Field(1).(*array.Int32Builder).Append(int32(i % 61))
		b.Field(2).(*array.Int32Builder).Append(int32(i / 61))
		if i%11 == 3 {
			for k := 3; k < 8; k++ {
				b.Field(k).AppendNull()
			}
			continue
		}
		b.Field(3).(*array.Int32Builder).Append(int32(i*i%7) - 1)
		b.Field(4).(*array.BooleanBuilder).Append(i/9%2 == 0)
		v := float64(i%500) / 8
		switch i % 701 {
		case 5:
			v = math.Inf(1)
		case 6:
			v = math.NaN()
		case 7:
			v = math.Inf(-1)
		}
		b.Field(5).(*array.Float64Builder).Append(v)
		b.Field(6).(*array.StringBuilder).Append(notes[i%len(notes)])
		b.Field(7).(*array.BinaryBuilder).Append(cards[i/5%len(cards)])
	}
	return b.NewRecord()
}

// Columns that are taken from their pages are the same as by way of the library.
func TestPagesAgreeWithLibrary(t *testing.T) {
	files := map[string][]byte{}
	for name, opts := range map[string][]parquet.WriterProperty{
		"plain":           {parquet.WithDictionaryDefault(false)},
		"dictionaries":    {parquet.WithCompression(compress.Codecs.Snappy)},
		"row groups":      {parquet.WithMaxRowGroupLength(700), parquet.WithCompression(compress.Codecs.Zstd)},
		"full dictionary": {parquet.WithDictionaryPageSizeLimit(512), parquet.WithBatchSize(64), parquet.WithDataPageSize(512)},
		"second form":     {parquet.WithDataPageVersion(parquet.DataPageV2), parquet.WithEncodingFor("PF", parquet.Encodings.RLE)},
		"differences":     {parquet.WithDictionaryDefault(false), parquet.WithEncodingFor("X", parquet.Encodings.DeltaBinaryPacked), parquet.WithEncodingFor("NOTE", parquet.Encodings.DeltaByteArray)},
	} {
		files[name] = parquetBytes(t, oddCellsTable(4000), opts...)
	}
	var own bytes.Buffer
	if err := WriteParquet(&own, readOne(t, save(t, "lot.csv", func(w io.Writer) error { return aLot(2).WriteWide(w, wideFormat) }), Options{})); err != nil {
		t.Fatal(err)
	}
	files["of convert"] = own.Bytes()
	for name, data := range files {
		path := save(t, "lot.parquet", func(w io.Writer) error { _, err := w.Write(data); return err })
		want := viewOf(readOne(t, path, Options{careful: true}))
		for _, workers := range []int{1, 3} {
			if d := cmp.Diff(want, viewOf(readOne(t, path, Options{Workers: workers})), exactly); d != "" {
				t.Errorf("%s, %d workers: %.600s", name, workers, d)
			}
		}
	}
}

// Numbers of every width, against a reading of the bits one by one.
func TestUnpackBits(t *testing.T) {
	b := make([]byte, 160)
	for i := range b {
		b[i] = byte(i*i*37 + i*11 + 5)
	}
	for width := range 33 {
		for _, n := range []int{0, 1, 3, 4, 5, 31, 8 * len(b) / max(width, 8)} {
			n = min(n, 8*len(b)/max(width, 1))
			got := make([]uint32, n)
			unpackBits(b[:(n*width+7)/8], width, got)
			for i, v := range got {
				want := uint32(0)
				for k := range width {
					at := i*width + k
					want |= uint32(b[at/8]>>(at%8)&1) << k
				}
				if v != want {
					t.Fatalf("width %d, number %d of %d: %d, want %d", width, i, n, v, want)
				}
			}
		}
	}
}
