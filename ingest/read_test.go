package ingest

import (
	"bytes"
	"context"
	"crypto/sha256"
	"encoding/hex"
	"fmt"
	"io"
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"

	"kneepoint/config"
	"kneepoint/ingest/stdf"
)

const oxide = "../testdata/ingest/oxide.csv"

// Data made by nobody here: see testdata/ingest/README.md.
func TestOxide(t *testing.T) {
	b, err := Read(context.Background(), []string{oxide}, Options{})
	if err != nil {
		t.Fatal(err)
	}
	if len(b.Lots) != 8 {
		t.Fatalf("%d lots, want 8", len(b.Lots))
	}
	sum := 0.0
	for i, l := range b.Lots {
		if l.ID() != digitsOf(i+1) || l.Len() != 9 || len(l.Wafers()) != 3 || l.HasCoordinates() {
			t.Errorf("lot %q: %d dice, %d wafers, coordinates %v", l.ID(), l.Len(), len(l.Wafers()), l.HasCoordinates())
		}
		if d := cmp.Diff([]int32{1, 2, 3, 1, 2, 3, 1, 2, 3}, l.Site()); d != "" {
			t.Errorf("lot %s sites: %s", l.ID(), d)
		}
		if want := map[bool]string{true: "1", false: "2"}[i < 4]; l.Attributes()["SOURCE"] != want {
			t.Errorf("lot %s: attributes %v, want source %s", l.ID(), l.Attributes(), want)
		}
		if n := l.TestIndex("oxide_thickness"); n != 0 || l.Tests()[0].Unit.Base != "A" {
			t.Errorf("lot %s: tests %v", l.ID(), l.Tests())
		}
		for _, v := range l.Values(0) {
			sum += v
		}
	}
	// Mean of all 72 as printed by R, nlme::lme, for this data set.
	if mean := sum / 72; math.Abs(mean-2000.1527778) > 5e-8 {
		t.Errorf("mean %v", mean)
	}
	if b.Tally.Rows != 72 || b.Tally.Dice != 72 || b.Tally.Used != 72 {
		t.Errorf("tally %+v", b.Tally)
	}
}

// A means angstrom in this file and ampere in SI. The product file settles it.
func TestOxideWithProduct(t *testing.T) {
	p := aProduct(config.Test{Name: "Oxide_Thickness", Unit: unit("angstrom"), Lower: 1950e-10})
	b, err := Read(context.Background(), []string{oxide}, Options{Product: p, Lot: "1"})
	if err != nil {
		t.Fatal(err)
	}
	l := b.Lots[0]
	if len(b.Lots) != 1 || l.ID() != "1" {
		t.Fatalf("lots %v", b.Lots)
	}
	if x := l.Tests()[0]; x.Unit.Text != "angstrom" || x.Name != "Oxide_Thickness" || x.LimitsFrom != "product file" {
		t.Errorf("test %+v", x)
	}
	if v := l.Values(0)[0]; v != unit("angstrom").ToSI(2006) {
		t.Errorf("first value %v", v)
	}
	f := l.Findings()
	if len(f) == 0 || f[0].Code != "unit-conflict" || f[0].Severity != Severe || !strings.Contains(f[0].Text, "says A and the product file angstrom") {
		t.Errorf("findings %+v", f)
	}
	if want := (Tally{Rows: 72, Used: 9, Discarded: map[string]int{"other-lot": 63}, Measurements: 9, Dice: 9}); !cmp.Equal(want, b.Tally) {
		t.Errorf("tally %+v", b.Tally)
	}
}

func TestColumnsAndAttributes(t *testing.T) {
	b := mustRead(t, table(
		"# product: MP-N24",
		"# operator = K.",
		"Lot: A7",
		"Wafer No.,Die X,Die Y,Hard Bin,P/F,Part ID,Reactor,Pocket,Temp,Card,BV_CBO [V],HFE1 (IC=10uA),1004",
		"unit,,,,,,,,,,,,mV",
		"number,,,,,,,,,,11,12,13",
		"max limit,,,,,,,,,,,250,0.5",
		"10,1,1,1.0,P,a,R1,3,25,c1,41.5,120,7",
		"10,2,1,5,F,b,R1,3,25,c2,12.5,121,8",
		"2,1,1,1,pass,c,R1,4,25,c1,41.7,122,9",
		"2,2,1,1,TRUE,d,R1,4,25,c1,41.8,,9",
		"2,3,1,1,0,e,R1,4,25,c1,41.9,123,9",
	), Options{})
	l := b.Lots[0]
	got := viewOf(l)
	nan := math.NaN()
	want := view{
		ID: "A7", Product: "MP-N24",
		Wafers: []Wafer{{"2", 0, 3, map[string]string{"Pocket": "4"}}, {"10", 3, 5, map[string]string{"Pocket": "3"}}},
		Tests: []Test{
			{Name: "BV_CBO", Unit: unit("V"), Lower: nan, Upper: nan, Clamp: nan, Floor: nan, Number: 11},
			{Name: "HFE1", Lower: nan, Upper: 250, LimitsFrom: "data file", Condition: "IC=10uA", Clamp: nan, Floor: nan, Number: 12, Place: 1},
			{Name: "1004", Unit: unit("mV"), Lower: nan, Upper: 0.0005, LimitsFrom: "data file", Clamp: nan, Floor: nan, Number: 13, Place: 2},
		},
		Values: [][]float64{{41.7, 41.8, 41.9, 41.5, 12.5}, {122, nan, 123, 120, 121}, {9 / 1e3, 9 / 1e3, 9 / 1e3, 7 / 1e3, 8 / 1e3}},
		Censor: [][]int8{nil, nil, nil},
		X:      []int32{1, 2, 3, 1, 2}, Y: []int32{1, 1, 1, 1, 1},
		Touchdown: []int32{1, 2, 3, 1, 2}, HardBin: []int32{1, 1, 1, 1, 5}, Pass: []int8{1, 1, 0, 1, 0},
		Attributes:    map[string]string{"operator": "K.", "Reactor": "R1", "Temp": "25"},
		DieAttributes: map[string][]string{"Part ID": {"c", "d", "e", "a", "b"}, "Card": {"c1", "c1", "c1", "c1", "c2"}},
		Findings:      []Finding{{Code: "missing", Severity: Info, Text: "test HFE1: 1 of 5 dice have no reading", Dice: 1}},
		Earlier:       Earlier{Values: make([][]float64, 3)},
	}
	if d := cmp.Diff(want, got, exactly); d != "" {
		t.Errorf("(-want +got)\n%s", d)
	}
}

// Columns that the product file names are taken whatever they are called.
func TestColumnsOfTheProduct(t *testing.T) {
	p := aProduct(config.Test{Name: "x"})
	p.Columns = map[string]string{"lot": "Charge", "wafer": "Plate", "x": "H", "y": "V", "soft_bin": "class"}
	l := mustRead(t, table("charge,PLATE,h,v,Class,X,Y", "A,1,4,5,2,1.5,7.5", "A,1,5,5,3,1.25,7.25"), Options{Product: p}).Lots[0]
	if l.ID() != "A" || l.X()[1] != 5 || l.Y()[0] != 5 || l.SoftBin()[1] != 3 || l.HardBin() != nil {
		t.Errorf("columns: %+v", viewOf(l))
	}
	// X is a test of the product here; Y says again what V says.
	if testNames(l) != "x" || l.Values(0)[0] != 1.5 || !cmp.Equal(l.DieAttributes(), []string{"Y"}) {
		t.Errorf("tests %+v, attributes %v", l.Tests(), l.DieAttributes())
	}
}

// A column of whole numbers that never differs within a wafer is an attribute,
// but not when product, unit or limits say that it is a test.
func TestConstantColumns(t *testing.T) {
	rows := func(header, units string) string {
		b := []string{header, units}
		for w := 1; w <= 2; w++ {
			for i := range 6 {
				b = append(b, strings.Join([]string{digitsOf(w), digitsOf(i), "0", digitsOf(40 + w), digitsOf(7 * w), "1.5", digitsOf(i * i)}, ","))
			}
		}
		return table(b...)
	}
	l := mustRead(t, rows("WAFER,X,Y,BOAT,STUCK,LEVEL,A", "unit,,,,V,,"), Options{Product: aProduct(config.Test{Name: "level"})}).Lots[0]
	if names := testNames(l); names != "level STUCK A" {
		t.Errorf("tests %s", names)
	}
	if l.Wafers()[1].Attributes["BOAT"] != "42" {
		t.Errorf("wafers %+v", l.Wafers())
	}
}

func testNames(l *Lot) string {
	var n []string
	for _, t := range l.Tests() {
		n = append(n, t.Name)
	}
	return strings.Join(n, " ")
}

func TestSeveralLotsAndFiles(t *testing.T) {
	dir := t.TempDir()
	a, b := filepath.Join(dir, "a.csv"), filepath.Join(dir, "b.csv.gz")
	first := table("LOT,WAFER,X,Y,BV [V]", "B,2,0,0,3", "A10,1,0,0,1", "A2,1,0,0,2", "B,1,0,0,4")
	second := table("lot;wafer;x;y;Leak [nA];bv [mV]", "B;1;0;1;5;6000", "A2;1;0;1;7;8000,5")
	os.WriteFile(a, []byte(first), 0o644)
	os.WriteFile(b, []byte(gzipped(second)), 0o644)
	batch, err := Read(context.Background(), []string{a, b}, Options{})
	if err != nil {
		t.Fatal(err)
	}
	nan := math.NaN()
	for i, want := range []struct {
		id     string
		values [][]float64
		files  int
	}{
		{"A2", [][]float64{{2, 8000.5 / 1e3}, {nan, 7 / 1e9}}, 2},
		{"A10", [][]float64{{1}}, 1}, // of a file without the other test
		{"B", [][]float64{{4, 6, 3}, {nan, 5 / 1e9, nan}}, 2},
	} {
		l := batch.Lots[i]
		var got [][]float64
		for k := range l.Tests() {
			got = append(got, l.Values(k))
		}
		if l.ID() != want.id || len(l.Inputs()) != want.files || !cmp.Equal(want.values, got, exactly) {
			t.Errorf("lot %s of %d files: %v; want %+v", l.ID(), len(l.Inputs()), got, want)
		}
	}
	raw, _ := os.ReadFile(b)
	sum := sha256.Sum256(raw)
	want := Input{File: b, SHA256: hex.EncodeToString(sum[:]), Format: "delimited text, wide, semicolon, decimal comma, gzip", Bytes: int64(len(raw)), Rows: 2}
	if d := cmp.Diff(want, batch.Inputs[1]); d != "" {
		t.Error(d)
	}
	if _, err := Read(context.Background(), []string{a, a}, Options{}); err != nil {
		t.Fatal(err)
	}
}

// The hash is of all raw bytes, also those that the reader has no use for.
func TestHashOfTrailingBytes(t *testing.T) {
	text := gzipped(plain()) + strings.Repeat("\x00", 5000)
	path := filepath.Join(t.TempDir(), "lot.csv.gz")
	os.WriteFile(path, []byte(text), 0o644)
	b, err := Read(context.Background(), []string{path}, Options{})
	if err != nil {
		t.Fatal(err)
	}
	sum := sha256.Sum256([]byte(text))
	if b.Inputs[0].SHA256 != hex.EncodeToString(sum[:]) || b.Inputs[0].Bytes != int64(len(text)) || b.Lots[0].Len() != 9 {
		t.Errorf("input %+v", b.Inputs[0])
	}
}

func TestLotNamedAfterFile(t *testing.T) {
	b, err := readNamed(t, "K4471.1.CSV.gz", gzipped(table("WAFER,X,Y,BV", "1,0,0,4.5")), Options{})
	if err != nil || b.Lots[0].ID() != "K4471.1" {
		t.Errorf("lots %v, error %v", b, err)
	}
}

// The decimal comma may show only after the first thousand rows; a column may
// turn out to be text.
func TestSecondLook(t *testing.T) {
	var b bytes.Buffer
	b.WriteString("WAFER;X;Y;BV;NOTE\n")
	for i := range 2000 {
		v, note := "40", "17"
		if i >= 1500 {
			v = "40,5"
		}
		if i >= 1200 {
			note = "odd"
		}
		b.WriteString("1;" + digitsOf(i%50) + ";" + digitsOf(i/50) + ";" + v + ";" + note + "\n")
	}
	for i := range 1000 {
		b.WriteString("2;" + digitsOf(i%50) + ";" + digitsOf(i/50) + ";41;even\n")
	}
	l := mustRead(t, b.String(), Options{}).Lots[0]
	if testNames(l) != "BV" || l.Values(0)[1999] != 40.5 || l.Len() != 3000 {
		t.Errorf("tests %s, %d dice", testNames(l), l.Len())
	}
	if d := l.DieAttributes(); len(d) != 1 || d[0] != "NOTE" {
		t.Errorf("attributes %v", d)
	}
	codes, labels := l.DieAttribute(0)
	if labels[codes[0]] != "17" || labels[codes[1999]] != "odd" || labels[codes[2999]] != "even" {
		t.Errorf("labels %v", labels)
	}
}

func TestTouchdownOrder(t *testing.T) {
	text := table("WAFER,X,Y,TD,BV",
		"1,0,0,3,33", "1,1,0,1,31", "1,2,0,2,32", "1,3,0,,99", "2,0,0,7,27")
	l := mustRead(t, text, Options{}).Lots[0]
	if d := cmp.Diff([]float64{31, 32, 99, 33, 27}, l.Values(0)); d != "" {
		t.Error(d)
	}
	if d := cmp.Diff([]int32{1, 2, 2, 3, 7}, l.Touchdown()); d != "" {
		t.Error(d)
	}
}

func TestNaturalOrder(t *testing.T) {
	for _, c := range []struct {
		a, b string
		want int
	}{{"2", "10", -1}, {"02", "2", -1}, {"w2", "w10", -1}, {"a", "b", -1}, {"a1b2", "a1b10", -1}, {"", "a", -1}, {"x", "x", 0}, {"9", "a", -1},
		{"A7.1", "A7.1", 0}, {"00000000000000000000000000000001", "2", -1}} {
		if got := natural(c.a, c.b); got != c.want || natural(c.b, c.a) != -c.want {
			t.Errorf("natural(%q, %q) = %d, want %d", c.a, c.b, got, c.want)
		}
	}
}

// Values is a view: no copy is made of what Arrow holds.
func TestValuesIsAView(t *testing.T) {
	l := mustRead(t, plain(), Options{}).Lots[0]
	one, two := l.Values(0), l.Values(0)
	if &one[0] != &two[0] || testing.AllocsPerRun(10, func() { l.Values(0) }) > 0 {
		t.Error("Values copies")
	}
	if n := l.cols.values[0]; n.Len() != 9 || n.Value(3) != l.Values(0)[3] || n.NullN() != 0 {
		t.Errorf("Arrow column %v", n)
	}
}

func TestBatchOverview(t *testing.T) {
	s := makeSample()
	o := mustRead(t, "# fab: north\n"+s.wide(";", true), Options{}).Overview()
	f, l := o.Files[0], o.Lots[0]
	if f.Separator != "semicolon" || !f.DecimalComma || f.Long || f.HeaderLine != 2 || f.Comments[0] != [2]string{"fab", "north"} {
		t.Errorf("file %+v", f)
	}
	var as []string
	for _, c := range f.Columns {
		as = append(as, c.As)
	}
	if got := strings.Join(as, " "); got != "lot wafer x y site touchdown hard_bin attribute test test test test" {
		t.Errorf("columns %s", got)
	}
	if l.Dice != len(s.rows)-6 || l.Retested != 4 || len(l.Wafers) != 2 || !cmp.Equal(l.Sites, []int32{1, 2}) || l.X != [2]int32{-4, 4} || len(l.HardBins) != 2 {
		t.Errorf("lot %+v", l)
	}
	for _, x := range l.Tests {
		n := 0
		for _, c := range x.Spark {
			n += c
		}
		if n != x.N || x.N+x.Missing != l.Dice || x.Min >= x.Max {
			t.Errorf("test %+v", x)
		}
	}
}

func TestDraft(t *testing.T) {
	p := Draft(mustRead(t, table("WAFER,X,Y,BVCBO [V],ICBO [nA],NOTE_1 (IC=1mA)", "upper,,,,5,", "1,0,0,41,1,2.5"), Options{}))
	if len(p.Tests) != 3 || p.Tests[0].Measures != "bvcbo" || p.Tests[1].Measures != "icbo" || p.Tests[1].Upper != 5e-9 || p.Tests[2].Measures != "" ||
		len(p.Tests[2].At) != 1 || p.Tests[2].At[0].Value != 0.001 {
		t.Errorf("draft %+v", p.Tests)
	}
}

// The wafer and the passing bins are drafted where the files tell them, and where
// they do not, the draft says so.
func TestDraftOfWaferAndBins(t *testing.T) {
	rows := func(head string, row func(x, y int) string) string {
		all := []string{head}
		for y := range 10 {
			for x := range 20 {
				all = append(all, fmt.Sprintf("1,%d,%d,%s", x, y, row(x, y)))
			}
		}
		return table(all...)
	}
	for _, c := range []struct {
		name, text string
		pass       []int
		says       []string
	}{
		{"flags", rows("WAFER,X,Y,HBIN,PF,BV", func(x, y int) string { return []string{"1,P,41.5", "2,P,40.5", "7,F,12.5"}[(x+y)%3] }), []int{1, 2},
			[]string{"passing by the pass flags: hard bin 1 (67 of 67 dice), 2 (67 of 67 dice)", "20 columns by 10 rows", "0.5 times as wide"}},
		{"limits", rows("WAFER,X,Y,HBIN,BV", func(x, y int) string { return []string{"3,41.5", "4,40.5", "7,12.5"}[(x+y)%3] }), nil, []string{"neither pass flags nor"}},
		{"mixed", rows("WAFER,X,Y,HBIN,PF,BV", func(x, y int) string { return []string{"1,P,41.5", "2,P,40.5", "2,F,12.5"}[(x+y)%3] }), []int{1},
			[]string{"not settled by the pass flags, so left out: hard bin 2 (67 of 133 dice pass)"}},
		{"none", table("WAFER,BV", "1,41.5", "1,41.25"), nil, []string{"no coordinates", "without them bin 1 passes"}},
	} {
		if c.name == "limits" { // the same with limits
			c.pass, c.says = []int{3, 4}, []string{"passing by the limits: hard bin 3 (67 of 67 dice), 4"}
			c.text = strings.Replace(c.text, "\n", "\nLSL,,,,20\n", 1)
		}
		b := mustRead(t, c.text, Options{})
		notes := strings.Join(DraftNotes(b), "\n")
		if p := Draft(b); !cmp.Equal(p.Bins.Pass, c.pass) || p.Wafer.DiameterMM != 0 {
			t.Errorf("%s: %+v %+v\n%s", c.name, p.Bins, p.Wafer, notes)
		}
		for _, want := range c.says {
			if !strings.Contains(notes, want) {
				t.Errorf("%s: no %q in\n%s", c.name, want, notes)
			}
		}
	}
	// STDF tells of the wafer (WCR, here in millimetres), of parts that pass and of the names of bins.
	b, err := Read(context.Background(), []string{save(t, "lot.stdf", func(w io.Writer) error {
		_, err := io.WriteString(w, stdfBytes(t, stdf.LittleEndian, &stdf.MIR{LotID: "A"}, &stdf.WIR{Head: 1, WaferID: "1"},
			&stdf.PIR{Head: 1, Site: 1}, &stdf.PTR{Number: 1, Head: 1, Site: 1, Result: 41, Text: "BV"}, &stdf.PRR{Head: 1, Site: 1, HardBin: 2, SoftBin: 2},
			&stdf.PIR{Head: 1, Site: 1}, &stdf.PTR{Number: 1, Head: 1, Site: 1, Result: 4, Text: "BV"}, &stdf.PRR{Head: 1, Site: 1, Flag: stdf.PartFailed, HardBin: 5, SoftBin: 5, X: 1},
			&stdf.WRR{Head: 1, Parts: 2}, &stdf.WCR{WaferSize: 100, DieWidth: 0.5, DieHeight: 0.75, Units: 3, Flat: 'D'},
			&stdf.HBR{Head: stdf.AllSites, Number: 5, Count: 1, PassFail: 'F', Name: "breakdown"}, &stdf.MRR{}))
		return err
	})}, Options{})
	if err != nil {
		t.Fatal(err)
	}
	p := Draft(b)
	if want := (config.Wafer{DiameterMM: 100, DieWidthMM: 0.5, DieHeightMM: 0.75, Notch: "down"}); p.Wafer != want || !cmp.Equal(p.Bins, config.Bins{Pass: []int{2}, Names: map[int]string{5: "breakdown"}}) {
		t.Errorf("%+v %+v %q", p.Wafer, p.Bins, DraftNotes(b))
	}
	var out bytes.Buffer
	if err := config.Write(&out, p); err != nil {
		t.Fatal(err)
	}
	if again, err := config.ParseProduct("draft.yaml", out.Bytes()); err != nil || again.Wafer != p.Wafer || !cmp.Equal(again.Bins, p.Bins) {
		t.Errorf("%v %+v\n%s", err, again, out.String())
	}
}
