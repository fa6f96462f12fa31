package stdf

import (
	"bytes"
	"errors"
	"math"
	"math/rand/v2"
	"reflect"
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"
)

// fill puts random values into a record: texts of every length, numbers of
// every size, the odd floats.
func fill(rnd *rand.Rand, v reflect.Value) {
	switch v.Kind() {
	case reflect.Uint8, reflect.Uint16, reflect.Uint32:
		v.SetUint(rnd.Uint64() & (1<<uint(8*v.Type().Size()) - 1))
	case reflect.Int8, reflect.Int16, reflect.Int32:
		v.SetInt(int64(rnd.Uint64()) >> uint(64-8*v.Type().Size()))
	case reflect.Float32:
		odd := []float64{0, 1, -0.5, 1e-9, math.Inf(1), math.Inf(-1), math.NaN(), math.MaxFloat32, 1e-45}
		v.SetFloat(float64(float32(odd[rnd.IntN(len(odd))])))
	case reflect.String:
		n := []int{0, 1, 3, 17, 255}[rnd.IntN(5)]
		b := make([]byte, n)
		for i := range b {
			b[i] = byte(' ' + rnd.IntN(95))
		}
		v.SetString(string(b))
	case reflect.Slice:
		n := rnd.IntN(5)
		v.Set(reflect.MakeSlice(v.Type(), n, n))
		for i := range n {
			fill(rnd, v.Index(i))
		}
		if v.Type().Elem().Kind() == reflect.Uint8 {
			for i := range n {
				v.Index(i).SetUint(uint64('a' + rnd.IntN(26))) // PART_ID is a text
			}
		}
	}
}

func randomRecord(rnd *rand.Rand, k Kind) Record {
	rec := Clone(NewReader(nil).records[k])
	if k == KindGDR {
		return NewGDR(Field{1, uint8(rnd.Uint32())}, Field{7, rnd.Float32()}, Field{8, rnd.Float64()}, Field{10, "text"}, Field{5, int16(-3)})
	}
	v := reflect.ValueOf(rec).Elem()
	for i := range v.NumField() {
		if f := v.Type().Field(i); f.IsExported() && f.Name != "Present" {
			fill(rnd, v.Field(i))
		}
	}
	nibbles := func(n int) Nibbles {
		b := Nibbles{N: n, Data: make([]byte, (n+1)/2)}
		for i := range b.Data {
			b.Data[i] = byte(rnd.Uint32())
		}
		return b
	}
	switch m := rec.(type) {
	case *PTR:
		m.Test = nil
		if rnd.IntN(3) > 0 {
			m.Optional = &Optional{Present: 12}
			o := reflect.ValueOf(m.Optional).Elem()
			for i := 1; i < o.NumField(); i++ {
				fill(rnd, o.Field(i))
			}
			if rnd.IntN(2) == 0 { // leave some of its fields out
				m.Optional.Present = 1 + rnd.IntN(12)
				for i := m.Optional.Present + 1; i < o.NumField(); i++ {
					o.Field(i).SetZero() // its fields stand in the order of the file
				}
			}
		}
	case *MPR:
		m.Test = nil
		pins := rnd.IntN(6)
		m.States = nibbles(pins)
		if rnd.IntN(3) > 0 {
			m.Optional = &MPROptional{StartIn: 1, StepIn: 0.5, UnitsIn: "V"}
			o := reflect.ValueOf(&m.Optional.Optional).Elem()
			for i := range o.NumField() {
				fill(rnd, o.Field(i))
			}
			m.Optional.Present = 16
			for range pins {
				m.Optional.Pins = append(m.Optional.Pins, uint16(rnd.Uint32()))
			}
		}
	case *FTR:
		m.Test = nil
		m.ReturnStates, m.ProgramStates = nibbles(len(m.ReturnPins)), nibbles(len(m.ProgramPins))
		m.FailPins = Bits{N: 11, Data: []byte{byte(rnd.Uint32()), 3}}
		m.SpinMap = Bits{}
	}
	return rec
}

// What is written is read back equal, of every type in both byte orders.
func TestWriteRead(t *testing.T) {
	rnd := rand.New(rand.NewPCG(5, 5))
	for _, order := range []Order{LittleEndian, BigEndian} {
		var want []Record
		for range 40 {
			for k := KindATR; k <= delivered; k++ {
				want = append(want, randomRecord(rnd, k))
			}
		}
		got, _ := readAll(t, write(t, order, want...))
		if len(got) != len(want) {
			t.Fatalf("%d records, want %d", len(got), len(want))
		}
		for i := range want {
			if diff := cmp.Diff(want[i], got[i], sameRecord); diff != "" {
				t.Fatalf("record %d (want -, got +):\n%s", i, diff)
			}
		}
		// And what was read writes the same bytes.
		if first, again := write(t, order, want...), write(t, order, got...); !bytes.Equal(first, again) {
			t.Error("writing what was read gives other bytes")
		}
	}
}

// LeaveOut leaves out what the first record of a test says, and nothing else.
func TestLeaveOut(t *testing.T) {
	opt := func(hi float32) *Optional {
		return &Optional{Present: 12, Flag: optReserved, HiLimit: hi, Units: "V"}
	}
	recs := []Record{
		&MIR{LotID: "A"},
		&PTR{Number: 1, Text: "A", Optional: opt(1)},
		&PTR{Number: 1, Text: "A", Optional: opt(1), Result: 2},
		&PTR{Number: 1, Text: "A", Optional: opt(2)},
		&PTR{Number: 1, Text: "B", Optional: opt(1)},
		&PTR{Number: 1, Text: "A", Alarm: "hot", Optional: opt(1)},
		&PTR{Number: 1, Text: "A"},
		&MIR{LotID: "B"},
		&PTR{Number: 1, Text: "A", Optional: opt(1)},
	}
	var buf bytes.Buffer
	w := NewWriter(&buf, LittleEndian)
	w.LeaveOut = true
	for _, rec := range append([]Record{&FAR{}}, recs...) {
		if err := w.Write(rec); err != nil {
			t.Fatal(err)
		}
	}
	w.Flush()
	got, _ := readAll(t, buf.Bytes())
	for i, short := range []bool{false, false, true, false, false, false, true, false, false} {
		m, ok := got[i].(*PTR)
		if !ok {
			continue
		}
		if (m.Text == "" && m.Optional == nil) != short {
			t.Errorf("record %d: text %q, optional part %v", i, m.Text, m.Optional)
		}
		if want := recs[i].(*PTR); want.Optional != nil && m.Limits().Upper != want.Optional.HiLimit {
			t.Errorf("record %d: upper limit %g, want %g", i, m.Limits().Upper, want.Optional.HiLimit)
		}
	}
}

func TestWriterRefuses(t *testing.T) {
	long := strings.Repeat("x", 256)
	for name, rec := range map[string]Record{
		"text":   &DTR{Text: long},
		"id":     &PRR{PartID: []byte(long)},
		"sites":  &SDR{Sites: make([]byte, 256)},
		"states": &MPR{States: Nibbles{N: 3, Data: []byte{1}}},
		"pins":   &FTR{ReturnPins: []uint16{1}, ReturnStates: Nibbles{}},
		"pins 2": &MPR{States: Nibbles{N: 1, Data: []byte{1}}, Optional: &MPROptional{Pins: []uint16{1, 2}}},
		"size":   &MPR{Results: make([]float32, 20000)},
		"count":  &RDR{Bins: make([]uint16, 70000)},
		"bits":   &FTR{FailPins: Bits{N: 9, Data: []byte{1}}},
		"datum":  NewGDR(Field{1, "text"}),
		"datum2": NewGDR(Field{1, 7}),
	} {
		var buf bytes.Buffer
		w := NewWriter(&buf, LittleEndian)
		if err := w.Write(rec); err == nil || !strings.Contains(err.Error(), rec.Kind().String()) {
			t.Errorf("%s: error %v", name, err)
		}
		if w.Flush(); buf.Len() > 0 || w.Bytes() != 0 {
			t.Errorf("%s: %d bytes written", name, buf.Len())
		}
	}
	w := NewWriter(failingWriter{}, LittleEndian)
	w.Write(&FAR{})
	if err := w.Flush(); !errors.Is(err, errFull) {
		t.Errorf("a full disk: %v", err)
	}
}

var errFull = errors.New("no space left")

type failingWriter struct{}

func (failingWriter) Write([]byte) (int, error) { return 0, errFull }

// A clone stays as it was when the reader goes on.
func TestClone(t *testing.T) {
	rnd := rand.New(rand.NewPCG(6, 6))
	var want []Record
	for range 20 {
		for k := KindATR; k <= delivered; k++ {
			want = append(want, randomRecord(rnd, k))
		}
	}
	r := NewReader(bytes.NewReader(write(t, BigEndian, want...)))
	r.Scan()
	var clones []Record
	for r.Scan() {
		clones = append(clones, Clone(r.Record()))
	}
	for i := range want {
		if diff := cmp.Diff(want[i], clones[i], sameRecord); diff != "" {
			t.Fatalf("record %d (want -, got +):\n%s", i, diff)
		}
	}
}

// The records that come by the million are read without allocating.
func TestNoAllocations(t *testing.T) {
	for _, m := range []madeFile{
		{wafers: 1, parts: 3000, sites: 4, leaveOut: true},
		{wafers: 1, parts: 3000, sites: 4, order: BigEndian},
		{wafers: 1, parts: 3000, sites: 4, textOnly: true, plainOnly: true},
	} {
		file := m.bytes(t)
		r := NewReader(bytes.NewReader(file))
		for range 500 {
			r.Scan()
		}
		if n := testing.AllocsPerRun(100, func() {
			for range 200 {
				if !r.Scan() {
					t.Fatal("the file is too short for the test")
				}
			}
		}); n > 0 {
			t.Errorf("%+v: Reader: %g allocations in 200 records", m, n)
		}
		p := NewParts(NewReader(bytes.NewReader(file)))
		for range 100 {
			p.Scan()
		}
		if n := testing.AllocsPerRun(100, func() {
			for range 20 {
				if !p.Scan() {
					t.Fatal("the file is too short for the test")
				}
			}
		}); n > 0 {
			t.Errorf("%+v: Parts: %g allocations in 20 parts", m, n)
		}
	}
}

// A file of many megabytes takes no more memory than its window and its tests.
func TestMemoryOfLongFile(t *testing.T) {
	file := madeFile{wafers: 2, parts: 4000, sites: 4}.bytes(t)
	n := allocated(func() {
		p := NewParts(NewReader(bytes.NewReader(file)))
		for p.Scan() {
		}
	})
	if n > 400<<10 {
		t.Errorf("%d bytes allocated for a file of %d", n, len(file))
	}
}
