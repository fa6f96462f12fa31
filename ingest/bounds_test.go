package ingest

import (
	"io"
	"math"
	"strings"
	"testing"

	"github.com/apache/arrow/go/v17/arrow"
	"github.com/apache/arrow/go/v17/arrow/array"
	"github.com/apache/arrow/go/v17/arrow/memory"
	"github.com/google/go-cmp/cmp"

	"kneepoint/ingest/stdf"
)

// boundsTable has readings beyond the range, in numbers and in text.
func boundsTable() arrow.Record {
	var fields []arrow.Field
	for _, n := range []string{"WAFER", "BV [V]"} {
		fields = append(fields, arrow.Field{Name: n, Type: arrow.BinaryTypes.String})
	}
	for _, n := range []string{"X", "Y"} {
		fields = append(fields, arrow.Field{Name: n, Type: arrow.PrimitiveTypes.Int32})
	}
	fields = append(fields, arrow.Field{Name: "ICBO [nA]", Type: arrow.PrimitiveTypes.Float64}, arrow.Field{Name: "HFE", Type: arrow.PrimitiveTypes.Float32})
	b := array.NewRecordBuilder(memory.DefaultAllocator, arrow.NewSchema(fields, nil))
	defer b.Release()
	b.Field(0).(*array.StringBuilder).AppendValues([]string{"1", "1", "1", "1"}, nil)
	b.Field(1).(*array.StringBuilder).AppendValues([]string{"41.5", ">80", "< 0.5", "1,500.5"}, nil)
	b.Field(2).(*array.Int32Builder).AppendValues([]int32{0, 1, 2, 3}, nil)
	b.Field(3).(*array.Int32Builder).AppendValues([]int32{0, 0, 0, 0}, nil)
	b.Field(4).(*array.Float64Builder).AppendValues([]float64{1.5, math.Inf(1), math.Inf(-1), 4.5}, nil)
	b.Field(5).(*array.Float32Builder).AppendValues([]float32{120.5, float32(math.Inf(-1)), 121, float32(math.Inf(1))}, nil)
	return b.NewRecord()
}

// An infinite reading and a text with a comparison sign are bounds in every
// format, as they are in delimited text.
func TestBoundsInEveryFormat(t *testing.T) {
	check := func(name string, l *Lot) {
		t.Helper()
		for test, want := range map[string]struct {
			values []float64
			censor []int8
		}{
			"BV":   {[]float64{41.5, 80, 0.5, 1500.5}, []int8{0, 1, -1, 0}},
			"ICBO": {[]float64{1.5e-9, 4.5e-9, 1.5e-9, 4.5e-9}, []int8{0, 1, -1, 0}},
			"HFE":  {[]float64{120.5, 120.5, 121, 121}, []int8{0, -1, 0, 1}},
		} {
			i := strings.Index(" "+testNames(l)+" ", " "+test+" ")
			if i < 0 {
				t.Fatalf("%s: no test %s in %q", name, test, testNames(l))
			}
			k := len(strings.Fields(testNames(l)[:i]))
			if !cmp.Equal(l.Values(k), want.values, exactly) || !cmp.Equal(l.Censor(k), want.censor) {
				t.Errorf("%s: %s %v %v, want %v", name, test, l.Values(k), l.Censor(k), want)
			}
		}
		if findingBy(l.Findings(), "over-range") == nil {
			t.Errorf("%s: not told: %v", name, l.Findings())
		}
	}
	check("text", mustRead(t, table("WAFER,BV [V],X,Y,ICBO [nA],HFE", `1,41.5,0,0,1.5,120.5`, `1,>80,1,0,inf,-inf`, `1,< 0.5,2,0,-inf,121`, `1,"1,500.5",3,0,4.5,inf`), Options{}).Lots[0])
	for _, kind := range []string{".parquet", ".arrow", ".arrows"} {
		check(kind, readOne(t, foreignFile(t, kind, boundsTable()), Options{}))
	}
}

// A cell that gives its unit is converted in columns of text too.
func TestUnitInTextColumn(t *testing.T) {
	s := arrow.NewSchema([]arrow.Field{{Name: "WAFER", Type: arrow.BinaryTypes.String}, {Name: "ICBO [nA]", Type: arrow.BinaryTypes.String}}, nil)
	b := array.NewRecordBuilder(memory.DefaultAllocator, s)
	defer b.Release()
	b.Field(0).(*array.StringBuilder).AppendValues([]string{"1", "1", "1"}, nil)
	b.Field(1).(*array.StringBuilder).AppendValues([]string{"1.5", "0.002uA", "2.5"}, nil)
	l := readOne(t, foreignFile(t, ".parquet", b.NewRecord()), Options{})
	if v := l.Values(0); !cmp.Equal(v, []float64{1.5e-9, 2e-9, 2.5e-9}, exactly) {
		t.Errorf("%v", v)
	}
}

// An infinite result of STDF is beyond the range, not missing.
func TestInfiniteSTDF(t *testing.T) {
	var records []stdf.Record
	records = append(records, &stdf.MIR{LotID: "A"}, &stdf.WIR{Head: 1, WaferID: "1"})
	for i, v := range []float32{5, float32(math.Inf(1)), float32(math.Inf(-1)), 7} {
		records = append(records, &stdf.PIR{Head: 1, Site: 1}, &stdf.PTR{Number: 1, Head: 1, Site: 1, Result: v, Text: "BV"},
			&stdf.PRR{Head: 1, Site: 1, HardBin: 1, SoftBin: 1, X: int16(i)})
	}
	l := readOne(t, save(t, "lot.stdf", func(w io.Writer) error {
		_, err := io.WriteString(w, stdfBytes(t, stdf.LittleEndian, append(records, &stdf.WRR{Head: 1, Parts: 4}, &stdf.MRR{})...))
		return err
	}), Options{})
	if !cmp.Equal(l.Values(0), []float64{5, 7, 5, 7}) || !cmp.Equal(l.Censor(0), []int8{0, 1, -1, 0}) {
		t.Errorf("%v %v, %v", l.Values(0), l.Censor(0), l.Findings())
	}
}

// x and y are two columns of one kind.
func TestCoordinatesArePaired(t *testing.T) {
	for _, c := range []struct {
		head string
		x, y []int32
		told bool
	}{
		{"WAFER,DIE_X,X,Y,BV", []int32{5, 6}, []int32{7, 8}, true},
		{"WAFER,X,DIE_X,Y,BV", []int32{1, 2}, []int32{7, 8}, true},
		{"WAFER,X,DIE_Y,Y,BV", []int32{1, 2}, []int32{7, 8}, true},
		{"WAFER,DIE_X,DIE_Y,Y,BV", []int32{1, 2}, []int32{5, 6}, false},
		{"WAFER,COL,ROW,N,BV", []int32{1, 2}, []int32{5, 6}, false},
		{"WAFER,COL,X,Y,BV", []int32{5, 6}, []int32{7, 8}, false},
		{"WAFER,XPOS,YCOORD,N,BV", []int32{1, 2}, []int32{5, 6}, false}, // no pair at all: what there is
	} {
		l := mustRead(t, table(c.head, "1,1,5,7,41.5", "1,2,6,8,42.5"), Options{}).Lots[0]
		if !cmp.Equal(l.X(), c.x) || !cmp.Equal(l.Y(), c.y) || strings.Contains(noteText(l, "column-not-understood"), "no pair") != c.told {
			t.Errorf("%s: %v %v, %s", c.head, l.X(), l.Y(), noteText(l, "column-not-understood"))
		}
	}
}

// A comma within quotes, where commas part the columns.
func TestQuotedComma(t *testing.T) {
	for _, c := range []struct {
		name, text string
		want       []float64
		told       bool
	}{
		{"thousands alone", table("WAFER,X,Y,HFE", `1,0,0,"2,500"`, `1,1,0,"1,250"`), []float64{2500, 1250}, true},
		{"thousands among whole numbers", table("WAFER,X,Y,HFE", `1,0,0,"2,500"`, `1,1,0,950`), []float64{2500, 950}, true},
		{"thousands beside points", table("WAFER,X,Y,HFE", `1,0,0,"2,500"`, `1,1,0,950.5`), []float64{2500, 950.5}, true},
		{"fractions", table("WAFER,X,Y,HFE", `1,0,0,"2,5"`, `1,1,0,"1,250"`), []float64{2.5, 1.25}, false},
		{"a fraction with a zero in front", table("WAFER,X,Y,HFE", `1,0,0,"0,500"`, `1,1,0,"1,250"`), []float64{0.5, 1.25}, false},
		{"another separator", table("WAFER;X;Y;HFE", `1;0;0;2,500`, `1;1;0;1,250`), []float64{2.5, 1.25}, false},
	} {
		l := mustRead(t, c.text, Options{}).Lots[0]
		if testNames(l) != "HFE" || !cmp.Equal(l.Values(0), c.want) || (findingBy(l.Findings(), "thousands") != nil) != c.told {
			t.Errorf("%s: %s %v, %v", c.name, testNames(l), l.Values(0), l.Findings())
		}
	}
}
