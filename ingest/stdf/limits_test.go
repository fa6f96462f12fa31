package stdf

import (
	"bytes"
	"fmt"
	"math"
	"testing"
)

// write puts records into a file, after a FAR.
func write(t testing.TB, order Order, recs ...Record) []byte {
	t.Helper()
	var buf bytes.Buffer
	w := NewWriter(&buf, order)
	for _, rec := range append([]Record{&FAR{}}, recs...) {
		if err := w.Write(rec); err != nil {
			t.Fatal(err)
		}
	}
	if err := w.Flush(); err != nil {
		t.Fatal(err)
	}
	return buf.Bytes()
}

// readAll reads the records after the FAR, and expects a sound file.
func readAll(t testing.TB, file []byte) ([]Record, *Reader) {
	t.Helper()
	r := NewReader(bytes.NewReader(file))
	var recs []Record
	for r.Scan() {
		if _, ok := r.Record().(*FAR); !ok {
			recs = append(recs, Clone(r.Record()))
		}
	}
	if r.Err() != nil || len(r.Damages()) > 0 {
		t.Fatalf("reading: %v, %v", r.Err(), r.Damages())
	}
	return recs, r
}

func show(l Limits) string {
	return fmt.Sprintf("%g..%g spec %g..%g %q scale %d", l.Lower, l.Upper, l.LowerSpec, l.UpperSpec, l.Units, l.ResScale)
}

// What holds for each PTR, by the rule of the standard (from memory): the first
// record of a test number defines the defaults; a later one overrides them for
// itself alone.
func TestLimitsOfPTR(t *testing.T) {
	full := func() *Optional {
		return &Optional{Present: 12, Flag: optReserved, ResScale: 3, LoScale: 3, HiScale: 3, LoLimit: 1, HiLimit: 2, Units: "V",
			ResFormat: "%f", LoSpec: 0.5, HiSpec: 2.5}
	}
	with := func(change func(*Optional)) *Optional {
		o := full()
		change(o)
		return o
	}
	inf := float32(math.Inf(1))
	const byDefault = `1..2 spec 0.5..2.5 "V" scale 3`
	const nothing = `NaN..NaN spec NaN..NaN "" scale 0`
	for _, c := range []struct {
		name string
		recs []*Optional // of one test number, on sites 1, 2, 1, 2 ...
		want []string
	}{
		{"left out later", []*Optional{full(), nil, nil}, []string{byDefault, byDefault, byDefault}},
		{"repeated later", []*Optional{full(), full(), nil}, []string{byDefault, byDefault, byDefault}},
		{"no record gives any", []*Optional{nil, nil}, []string{nothing, nothing}},
		{"an override is for its record alone", []*Optional{full(), with(func(o *Optional) { o.LoLimit, o.HiLimit, o.Units = 3, 4, "A" }), nil},
			[]string{byDefault, `3..4 spec 0.5..2.5 "A" scale 3`, byDefault}},
		{"flags take fields away for the default", []*Optional{full(), with(func(o *Optional) {
			o.Flag = optReserved | NoResScale | DefaultLow | DefaultHigh | NoLowSpec | NoHighSpec
			o.ResScale, o.LoLimit, o.HiLimit, o.LoSpec, o.HiSpec = 9, 7, 8, 7, 8
		})}, []string{byDefault, byDefault}},
		{"no limit for this record", []*Optional{full(), with(func(o *Optional) { o.Flag |= NoLow }), with(func(o *Optional) { o.Flag |= NoHigh }), nil},
			[]string{byDefault, `NaN..2 spec 0.5..2.5 "V" scale 3`, `1..NaN spec 0.5..2.5 "V" scale 3`, byDefault}},
		{"no limit from the first", []*Optional{with(func(o *Optional) { o.Flag |= NoLow | NoHigh | NoLowSpec | NoHighSpec }), nil},
			[]string{`NaN..NaN spec NaN..NaN "V" scale 3`, `NaN..NaN spec NaN..NaN "V" scale 3`}},
		{"all flags set says nothing", []*Optional{full(), with(func(o *Optional) { o.Flag = 0xff })}, []string{byDefault, byDefault}},
		{"all flags set in the first", []*Optional{with(func(o *Optional) { o.Flag = 0xff }), nil},
			[]string{`NaN..NaN spec NaN..NaN "V" scale 0`, `NaN..NaN spec NaN..NaN "V" scale 0`}},
		{"infinite limits are none", []*Optional{with(func(o *Optional) { o.LoLimit, o.HiLimit, o.LoSpec = -inf, inf, float32(math.NaN()) }), nil},
			[]string{`NaN..NaN spec NaN..2.5 "V" scale 3`, `NaN..NaN spec NaN..2.5 "V" scale 3`}},
		{"the largest float32 is no limit", []*Optional{with(func(o *Optional) { o.LoLimit, o.HiLimit = -math.MaxFloat32, math.MaxFloat32 })},
			[]string{`NaN..NaN spec 0.5..2.5 "V" scale 3`}},
		{"just below it is one", []*Optional{with(func(o *Optional) { o.HiLimit = math.Nextafter32(math.MaxFloat32, 0) })},
			[]string{`1..3.4028233e+38 spec 0.5..2.5 "V" scale 3`}},
		{"ends after the flag", []*Optional{full(), {Present: 1, Flag: optReserved}}, []string{byDefault, byDefault}},
		{"ends after the low limit", []*Optional{full(), {Present: 5, Flag: optReserved, ResScale: 6, LoLimit: 1.5, LoScale: 6}},
			[]string{byDefault, `1.5..2 spec 0.5..2.5 "V" scale 6`}},
		{"blank texts are for the default", []*Optional{full(), with(func(o *Optional) { o.Units, o.ResFormat = "", "" })}, []string{byDefault, byDefault}},
		{"a null text overrides", []*Optional{full(), with(func(o *Optional) { o.Units = "\x00" }), nil},
			[]string{byDefault, `1..2 spec 0.5..2.5 "" scale 3`, byDefault}},
		{"padding of units", []*Optional{with(func(o *Optional) { o.Units = "V  " })}, []string{byDefault}},
		{"a later record is the first with a field", []*Optional{{Present: 6, Flag: optReserved, LoLimit: 1, HiLimit: 2}, full(), nil},
			[]string{`1..2 spec NaN..NaN "" scale 0`, byDefault, `1..2 spec 0.5..2.5 "V" scale 0`}},
		{"the first leaves all out", []*Optional{nil, full(), nil}, []string{nothing, byDefault, byDefault}},
	} {
		for _, order := range []Order{LittleEndian, BigEndian} {
			var recs []Record
			for i, o := range c.recs {
				recs = append(recs, &PTR{Number: 7, Head: 1, Site: uint8(1 + i%2), Optional: o})
				// another test in between must not matter
				recs = append(recs, &PTR{Number: 8, Head: 1, Site: 1, Optional: &Optional{Present: 12, LoLimit: -1, HiLimit: -2, Units: "W"}})
			}
			got, r := readAll(t, write(t, order, recs...))
			for i, want := range c.want {
				if s := show(got[2*i].(*PTR).Limits()); s != want {
					t.Errorf("%s: record %d has %s, want %s", c.name, i, s, want)
				}
				if s := show(got[2*i+1].(*PTR).Limits()); s != `-1..-2 spec 0..0 "W" scale 0` {
					t.Errorf("%s: the other test has %s", c.name, s)
				}
			}
			if n := len(r.Tests()); n != 2 {
				t.Errorf("%s: %d tests", c.name, n)
			}
		}
	}
}

// A record read before a field was first given has what the test gives now:
// the default was filled in, by the record that first gave it.
func TestLimitsIndex(t *testing.T) {
	a := &Optional{Present: 12, Flag: optReserved, LoLimit: 1, HiLimit: 2, Units: "V"}
	b := &Optional{Present: 12, Flag: optReserved, LoLimit: 1, HiLimit: 3, Units: "V"}
	var recs []Record
	for _, o := range []*Optional{a, b, nil, b, a, b} {
		recs = append(recs, &PTR{Number: 7, Head: 1, Site: 1, Optional: o})
	}
	got, r := readAll(t, write(t, LittleEndian, recs...))
	var indexes []int
	for _, rec := range got {
		indexes = append(indexes, rec.(*PTR).LimitsIndex())
	}
	if fmt.Sprint(indexes) != "[0 1 0 1 0 1]" {
		t.Errorf("indexes %v", indexes)
	}
	test := r.Tests()[0]
	if len(test.Limits) != 2 || test.Overridden != 3 || test.Records != 6 || test.Default != 0 {
		t.Errorf("test %+v", test)
	}
	if test.Limits[1].Upper != 3 {
		t.Errorf("second limits %s", show(*test.Limits[1]))
	}
}

// More different limits than are kept: each record still has its own.
func TestManyLimits(t *testing.T) {
	var recs []Record
	for i := range 3 * maxLimits {
		recs = append(recs, &PTR{Number: 7, Head: 1, Site: 1, Optional: &Optional{Present: 12, LoLimit: float32(i), HiLimit: 1000, Units: "V"}})
	}
	got, r := readAll(t, write(t, LittleEndian, append(recs, recs...)...))
	for i, rec := range got {
		l := rec.(*PTR).Limits()
		if l.Lower != float32(i%(3*maxLimits)) {
			t.Fatalf("record %d has %s", i, show(l))
		}
		if which := rec.(*PTR).LimitsIndex(); which >= 0 != (i%(3*maxLimits) < maxLimits) {
			t.Fatalf("record %d has index %d", i, which)
		}
	}
	test := r.Tests()[0]
	if l := test.LimitsOf(&Result{Limits: -1}); l.Lower == l.Lower || l.Units != "V" {
		t.Errorf("limits that are not kept are %s", show(l))
	}
	if l := test.LimitsOf(&Result{Limits: 3}); l.Lower != 3 {
		t.Errorf("limits 3 are %s", show(l))
	}
	if len(test.Limits) != maxLimits || test.NotKept != 4*maxLimits || test.Overridden != 6*maxLimits-2 {
		t.Errorf("%d limits, %d not kept, %d overridden", len(test.Limits), test.NotKept, test.Overridden)
	}
}

// A second MIR in the file starts its own defaults.
func TestLimitsOfRuns(t *testing.T) {
	ptr := func(o *Optional) *PTR { return &PTR{Number: 7, Head: 1, Site: 1, Text: "BVCEO", Optional: o} }
	o := func(lo float32) *Optional {
		return &Optional{Present: 7, Flag: optReserved, LoLimit: lo, HiLimit: 9, Units: "V"}
	}
	got, r := readAll(t, write(t, LittleEndian, &MIR{LotID: "A"}, ptr(o(1)), ptr(nil), &MRR{}, &MIR{LotID: "B"}, ptr(o(2)), ptr(nil), &MRR{},
		&MIR{LotID: "C"}, ptr(nil)))
	var lower []float32
	for _, rec := range got {
		if m, ok := rec.(*PTR); ok {
			lower = append(lower, m.Limits().Lower)
		}
	}
	if fmt.Sprint(lower) != "[1 1 2 2 2]" {
		t.Errorf("lower limits %v", lower)
	}
	if n := len(r.Tests()); n != 1 {
		t.Errorf("%d tests", n)
	}
}

// A number used for several texts is several tests; a record without text is of
// the first; a first record without text takes the text of a later one.
func TestTestIdentity(t *testing.T) {
	ptr := func(number uint32, text string, lo float32) *PTR {
		m := &PTR{Number: number, Head: 1, Site: 1, Text: text}
		if lo != 0 {
			m.Optional = &Optional{Present: 5, Flag: optReserved | NoHigh, LoLimit: lo}
		}
		return m
	}
	got, r := readAll(t, write(t, BigEndian,
		ptr(1, "A", 1), ptr(1, "B", 2), ptr(1, "A", 0), ptr(1, "B", 0), ptr(1, "", 0), ptr(1, "C", 0),
		ptr(2, "", 5), ptr(2, "D ", 0), ptr(2, "", 0),
		&FTR{Number: 1, Head: 1, Site: 1, Text: "F"}, &FTR{Number: 1, Head: 1, Site: 1},
		&MPR{Number: 1, Head: 1, Site: 1, Results: []float32{1, 2, 3}, Text: "M"},
		&TSR{Head: 1, Type: 'F', Number: 9, Name: "early", Executed: 1}, &FTR{Number: 9, Head: 1, Site: 1},
		&TSR{Head: 1, Type: 'P', Number: 1, Name: "B", Executed: 2}, &TSR{Head: AllSites, Type: 'P', Number: 1, Name: "B", Executed: 4},
	))
	var lines []string
	for _, rec := range got {
		switch m := rec.(type) {
		case *PTR:
			lines = append(lines, fmt.Sprintf("%d:%s:%q:%g", m.Test.Index, m.Test.Text, m.Text, m.Limits().Lower))
		case *FTR:
			lines = append(lines, fmt.Sprintf("%d:%s:%q", m.Test.Index, m.Test.Text, m.Text))
		case *MPR:
			lines = append(lines, fmt.Sprintf("%d:%s:%q", m.Test.Index, m.Test.Text, m.Text))
		}
	}
	// C gives no limits: those of the number's first test hold. D's text came
	// with its second record.
	want := `[0:A:"A":1 1:B:"B":2 0:A:"A":1 1:B:"B":2 0:A:"":1 2:C:"C":1 3:D:"":5 3:D:"D ":5 3:D:"":5 4:F:"F" 4:F:"" 5:M:"M" 6:early:""]`
	if fmt.Sprint(lines) != want {
		t.Errorf("got  %v\nwant %s", lines, want)
	}
	tests := r.Tests()
	if tests[5].Columns != 3 || tests[0].Columns != 1 {
		t.Errorf("columns %d, %d", tests[5].Columns, tests[0].Columns)
	}
	if tests[1].Summary == nil || tests[1].Summary.Executed != 4 || tests[0].Summary != nil {
		t.Errorf("summaries %+v, %+v", tests[1].Summary, tests[0].Summary)
	}
}

func TestLimitsOfMPR(t *testing.T) {
	opt := &MPROptional{Optional: Optional{Present: 16, Flag: NoStart | NoHighSpec, ResScale: 9, HiLimit: 2e-9, Units: "A", LoSpec: 1},
		Pins: []uint16{4, 5}}
	mpr := func(o *MPROptional) *MPR {
		return &MPR{Number: 7, Head: 1, Site: 1, States: Nibbles{2, []byte{0}}, Results: []float32{1, 2}, Optional: o}
	}
	short := &MPROptional{Optional: Optional{Present: 9, Flag: NoStart | DefaultLow, HiLimit: 3}, Pins: []uint16{4, 5}}
	got, r := readAll(t, write(t, LittleEndian, mpr(opt), mpr(nil), mpr(short), mpr(nil)))
	for i, want := range []string{
		`0..2e-09 spec 1..NaN "A" scale 9`, `0..2e-09 spec 1..NaN "A" scale 9`,
		`0..3 spec 1..NaN "A" scale 0`, `0..2e-09 spec 1..NaN "A" scale 9`,
	} {
		if s := show(got[i].(*MPR).Limits()); s != want {
			t.Errorf("record %d has %s, want %s", i, s, want)
		}
	}
	if pins := r.Tests()[0].Pins; fmt.Sprint(pins) != "[4 5]" {
		t.Errorf("pins %v", pins)
	}
	if got[1].(*MPR).Optional != nil {
		t.Errorf("optional part of a record without: %+v", got[1].(*MPR).Optional)
	}
}
