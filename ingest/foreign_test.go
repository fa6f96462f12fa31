package ingest

import (
	"context"
	"io"
	"math"
	"slices"
	"strings"
	"testing"

	"github.com/apache/arrow/go/v17/arrow"
	"github.com/apache/arrow/go/v17/arrow/array"
	"github.com/apache/arrow/go/v17/arrow/ipc"
	"github.com/apache/arrow/go/v17/arrow/memory"
	"github.com/apache/arrow/go/v17/parquet"
	"github.com/apache/arrow/go/v17/parquet/pqarrow"
	"github.com/google/go-cmp/cmp"
)

// foreign builds a table as other programs write it: plain types, no metadata of
// ours, nulls, a unit on one field, a nested column.
func foreign(long bool) arrow.Record {
	m := memory.DefaultAllocator
	meta := func(kv ...string) arrow.Metadata { return arrow.MetadataFrom(map[string]string{kv[0]: kv[1]}) }
	null := arrow.Metadata{}
	fields := []arrow.Field{
		{Name: "Lot ID", Type: arrow.BinaryTypes.String}, {Name: "wafer", Type: arrow.PrimitiveTypes.Int64}, {Name: "die_x", Type: arrow.PrimitiveTypes.Int16},
		{Name: "die_y", Type: arrow.PrimitiveTypes.Float64, Nullable: true}, {Name: "passed", Type: arrow.FixedWidthTypes.Boolean},
		{Name: "tested", Type: &arrow.TimestampType{Unit: arrow.Millisecond}},
	}
	if long {
		fields = append(fields, arrow.Field{Name: "test name", Type: arrow.BinaryTypes.String}, arrow.Field{Name: "value", Type: arrow.PrimitiveTypes.Float64, Nullable: true})
	} else {
		fields = append(fields, arrow.Field{Name: "BVCBO", Type: arrow.PrimitiveTypes.Float32, Nullable: true, Metadata: meta("unit", "V")},
			arrow.Field{Name: "ICBO [nA]", Type: arrow.PrimitiveTypes.Float64, Nullable: true, Metadata: null}, arrow.Field{Name: "HFE", Type: arrow.BinaryTypes.String, Nullable: true},
			arrow.Field{Name: "trace", Type: arrow.ListOf(arrow.PrimitiveTypes.Float64), Nullable: true})
	}
	b := array.NewRecordBuilder(m, arrow.NewSchema(fields, nil))
	defer b.Release()
	b.Field(0).(*array.StringBuilder).AppendValues([]string{"A", "A", "A", "A"}, nil)
	b.Field(1).(*array.Int64Builder).AppendValues([]int64{1, 1, 2, 2}, nil)
	b.Field(2).(*array.Int16Builder).AppendValues([]int16{-3, -2, -3, -2}, nil)
	b.Field(3).(*array.Float64Builder).AppendValues([]float64{4, 5, 4, 0}, []bool{true, true, true, false})
	b.Field(4).(*array.BooleanBuilder).AppendValues([]bool{true, false, true, true}, nil)
	b.Field(5).(*array.TimestampBuilder).AppendValues([]arrow.Timestamp{1_700_000_000_000, 1_700_000_001_000, 1_700_000_002_000, 1_700_000_003_000}, nil)
	if long {
		b.Field(6).(*array.StringBuilder).AppendValues([]string{"BV", "BV", "BV", "BV"}, nil)
		b.Field(7).(*array.Float64Builder).AppendValues([]float64{41.5, 12, 41, 40}, nil)
		return b.NewRecord()
	}
	b.Field(6).(*array.Float32Builder).AppendValues([]float32{41.3, 0, 41.7, 41.9}, []bool{true, false, true, true})
	b.Field(7).(*array.Float64Builder).AppendValues([]float64{1.5, math.Inf(1), math.NaN(), 4.2}, nil)
	b.Field(8).(*array.StringBuilder).AppendValues([]string{"120.5", "OVL", "121", "x"}, nil)
	for range 4 {
		b.Field(9).(*array.ListBuilder).AppendNull()
	}
	return b.NewRecord()
}

func foreignFile(t testing.TB, kind string, rec arrow.Record) string {
	return save(t, "lot"+kind, func(w io.Writer) error {
		switch kind {
		case ".parquet":
			f, err := pqarrow.NewFileWriter(rec.Schema(), justWriter{w}, parquet.NewWriterProperties(), pqarrow.DefaultWriterProps())
			if err != nil {
				return err
			}
			if err := f.Write(rec); err != nil {
				return err
			}
			return f.Close()
		case ".arrows":
			f := ipc.NewWriter(w, ipc.WithSchema(rec.Schema()), ipc.WithZstd())
			if err := f.Write(rec); err != nil {
				return err
			}
			return f.Close()
		}
		f, err := ipc.NewFileWriter(&countingWriter{w: w}, ipc.WithSchema(rec.Schema()), ipc.WithLZ4())
		if err != nil {
			return err
		}
		if err := f.Write(rec); err != nil {
			return err
		}
		return f.Close()
	})
}

func TestForeignColumns(t *testing.T) {
	for _, kind := range []string{".parquet", ".arrow", ".arrows"} {
		l := readOne(t, foreignFile(t, kind, foreign(false)), Options{})
		if l.ID() != "A" || len(l.Wafers()) != 2 || l.Wafers()[1].ID != "2" || testNames(l) != "BVCBO ICBO HFE" {
			t.Fatalf("%s: %+v", kind, viewOf(l))
		}
		if !cmp.Equal(l.X(), []int32{-3, -2, -3, -2}) || !cmp.Equal(l.Y(), []int32{4, 5, 4, Missing}) || !cmp.Equal(l.Pass(), []int8{1, 0, 1, 1}) {
			t.Errorf("%s: %+v", kind, viewOf(l))
		}
		// A float32 is read as its shortest decimal.
		if v := l.Values(0); v[0] != 41.3 || v[1] == v[1] || v[3] != 41.9 {
			t.Errorf("%s: BVCBO %v", kind, v)
		}
		if v := l.Values(1); v[0] != 1.5e-9 || v[1] != 4.2e-9 || l.Censor(1)[1] != 1 || v[2] == v[2] || v[3] != 4.2e-9 || l.Tests()[1].Unit.Text != "nA" {
			t.Errorf("%s: ICBO %v", kind, v)
		}
		if v := l.Values(2); v[0] != 120.5 || v[1] != 121 || v[2] != 121 || v[3] == v[3] {
			t.Errorf("%s: HFE %v", kind, v)
		}
		if d := viewOf(l).DieAttributes["tested"]; len(d) != 4 || d[0] != "2023-11-14 22:13:20" {
			t.Errorf("%s: times %q", kind, d)
		}
		for code, want := range map[string]string{"over-range": ":2: test ICBO", "unreadable-value": `:4: test HFE: 1 cell is no number, first "x"`,
			"column-not-understood": "trace"} {
			if s := noteText(l, code); !strings.Contains(s, want) {
				t.Errorf("%s: %s: %q, want %q", kind, code, s, want)
			}
		}
		long := readOne(t, foreignFile(t, kind, foreign(true)), Options{})
		if testNames(long) != "BV" || !cmp.Equal(slices.Clone(long.Values(0)), []float64{41.5, 12, 41, 40}) || long.Len() != 4 {
			t.Errorf("%s, long: %+v", kind, viewOf(long))
		}
	}
}

// What cannot be a table of dice is refused with the names that are there.
func TestForeignColumnsRefused(t *testing.T) {
	s := arrow.NewSchema([]arrow.Field{{Name: "a", Type: arrow.PrimitiveTypes.Float64}, {Name: "b", Type: arrow.PrimitiveTypes.Float64}}, nil)
	b := array.NewRecordBuilder(memory.DefaultAllocator, s)
	b.Field(0).(*array.Float64Builder).Append(1)
	b.Field(1).(*array.Float64Builder).Append(2)
	path := foreignFile(t, ".parquet", b.NewRecord())
	_, err := Read(context.Background(), []string{path}, Options{})
	if err == nil || !strings.Contains(err.Error(), "lot.parquet: no wafer column found") || !strings.Contains(err.Error(), "the columns are a, b") {
		t.Errorf("error %v", err)
	}
}
