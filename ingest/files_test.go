package ingest

import (
	"archive/zip"
	"bytes"
	"context"
	"errors"
	"io"
	"os"
	"path/filepath"
	"regexp"
	"slices"
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"
	"github.com/xuri/excelize/v2"

	"kneepoint/ingest/stdf"
)

// folderOf writes files into a folder by name.
func folderOf(t testing.TB, name string, files ...string) string {
	t.Helper()
	dir := filepath.Join(t.TempDir(), name)
	os.MkdirAll(dir, 0o777)
	for i := 0; i < len(files); i += 2 {
		if err := os.WriteFile(filepath.Join(dir, files[i]), []byte(files[i+1]), 0o644); err != nil {
			t.Fatal(err)
		}
	}
	return dir
}

func findingOf(fs []Finding, code string) *Finding {
	if i := slices.IndexFunc(fs, func(f Finding) bool { return f.Code == code }); i >= 0 {
		return &fs[i]
	}
	return nil
}

func noteText(l *Lot, code string) string {
	if f := findingOf(l.Findings(), code); f != nil {
		return f.Text
	}
	return ""
}

func TestFolder(t *testing.T) {
	dir := folderOf(t, "LOT9", "LOT9_W10.csv", table("X,Y,BV [V]", "0,0,41", "1,0,42"), "LOT9_W2.csv", table("X,Y,BV [V]", "0,0,43"),
		"notes.pdf", "%PDF-1.4", "readme.txt", "about these files", ".hidden.csv", "x")
	os.Mkdir(filepath.Join(dir, "old"), 0o777)
	b, err := Read(context.Background(), []string{dir}, Options{})
	if err != nil {
		t.Fatal(err)
	}
	l := b.Lots[0]
	if len(b.Lots) != 1 || l.ID() != "LOT9" || len(l.Wafers()) != 2 || l.Wafers()[0].ID != "2" || l.Wafers()[1].ID != "10" || len(l.Inputs()) != 2 {
		t.Errorf("lots %d, %s, wafers %+v", len(b.Lots), l.ID(), l.Wafers())
	}
	if s := noteText(l, "file-skipped"); !strings.Contains(s, "notes.pdf, old/, readme.txt") {
		t.Errorf("skipped: %q", s)
	}
	if s := noteText(l, "wafer-from-file-name"); !strings.Contains(s, "taken for wafer 2") {
		t.Errorf("wafer: %q", s)
	}
	// A pattern, of the same files.
	g, err := Read(context.Background(), []string{filepath.Join(dir, "*W*.csv")}, Options{})
	if err != nil || len(g.Lots) != 1 || g.Lots[0].Len() != 3 {
		t.Fatalf("%v, %v", g, err)
	}
	for path, want := range map[string]string{
		filepath.Join(dir, "*.nothing"):                     `\*\.nothing: no file matches this pattern; .+`,
		filepath.Join(dir, "old"):                           `old: the folder is empty; .+`,
		folderOf(t, "none", "a.pdf", "%PDF", "b.txt~", "x"): `none: the folder .*none holds no data file; there are a\.pdf, b\.txt~; .+`,
	} {
		if _, err := Read(context.Background(), []string{path}, Options{}); err == nil || !regexp.MustCompile(want).MatchString(err.Error()) {
			t.Errorf("error %v, want %q", err, want)
		}
	}
}

// One bad file among many is an error that names it; where the caller asks for
// it, a severe finding.
func TestBadFileAmongMany(t *testing.T) {
	dir := folderOf(t, "lot", "a.csv", table("LOT,WAFER,X,Y,BV", "A,1,0,0,5"), "b.csv", table("Dear colleague"))
	var e *Error
	if _, err := Read(context.Background(), []string{dir}, Options{}); !errors.As(err, &e) || !strings.HasSuffix(e.File, "b.csv") || e.Remedy == "" {
		t.Errorf("error %v", err)
	}
	b, err := Read(context.Background(), []string{dir}, Options{SkipBad: true})
	if err != nil {
		t.Fatal(err)
	}
	if f := findingOf(b.Lots[0].Findings(), "file-not-read"); f == nil || f.Severity != Severe || !strings.Contains(f.Text, "b.csv: ") {
		t.Errorf("findings %+v", b.Lots[0].Findings())
	}
}

// A file without lot id is of the lot of the others, when that is one.
func TestLotIdentity(t *testing.T) {
	with, other := table("LOT,WAFER,X,Y,BV", "A,1,0,0,5"), table("LOT,WAFER,X,Y,BV", "B,1,0,0,5")
	without := table("WAFER,X,Y,BV", "2,0,0,6")
	for _, c := range []struct {
		files []string
		lots  string
		code  string
	}{
		{[]string{"a.csv", with, "b.csv", without}, "A", "lot-of-other-files"},
		{[]string{"a.csv", with, "b.csv", without, "c.csv", other}, "A B b", "lot-unknown"},
		{[]string{"b.csv", without}, "folder", ""},
		{[]string{"a.csv", with, "c.csv", other}, "A B", ""},
	} {
		b, err := Read(context.Background(), []string{folderOf(t, "folder", c.files...)}, Options{})
		if err != nil {
			t.Fatal(err)
		}
		var ids []string
		for _, l := range b.Lots {
			ids = append(ids, l.ID())
		}
		if got := strings.Join(ids, " "); got != c.lots {
			t.Errorf("lots %q, want %q", got, c.lots)
		}
		if c.code != "" && findingOf(b.Findings, c.code) == nil {
			t.Errorf("no finding %s in %+v", c.code, b.Findings)
		}
	}
}

// The same die in two files is a retest: by the files' start times where they
// have them, else by name. What they say differently becomes an attribute.
func TestRetestInAnotherFile(t *testing.T) {
	head := "LOT,WAFER,X,Y,BV"
	b, err := Read(context.Background(), []string{folderOf(t, "lot", "1first.csv", "# card: N1\n"+table(head, "A,1,0,0,5", "A,1,1,0,6"),
		"2retest.csv", "# card: N2\n"+table(head, "A,1,0,0,7"))}, Options{})
	if err != nil {
		t.Fatal(err)
	}
	l := b.Lots[0]
	if l.Len() != 2 || !cmp.Equal(l.Values(0), []float64{6, 7}) || !cmp.Equal(l.Earlier().Values[0], []float64{5}) {
		t.Errorf("values %v, earlier %+v", l.Values(0), l.Earlier())
	}
	if s := noteText(l, "wafer-in-several-files"); !strings.Contains(s, "by the order in which the files are named") {
		t.Errorf("order: %q", s)
	}
	if !cmp.Equal(l.DieAttributes(), []string{"card"}) {
		t.Errorf("attributes %v of dice %v", l.Attributes(), l.DieAttributes())
	}
	// STDF has start times: the file named first was made last.
	made := func(start uint32, v float32) string {
		return stdfBytes(t, stdf.LittleEndian, &stdf.MIR{LotID: "A", StartTime: start}, &stdf.WIR{Head: 1, WaferID: "1"}, &stdf.PIR{Head: 1, Site: 1},
			&stdf.PTR{Number: 1, Head: 1, Site: 1, Result: v, Text: "BV"}, &stdf.PRR{Head: 1, Site: 1, HardBin: 1, SoftBin: stdf.NoBin}, &stdf.WRR{Head: 1, Parts: 1, Retested: stdf.NoCount, Aborted: stdf.NoCount, Good: stdf.NoCount, Functional: stdf.NoCount}, &stdf.MRR{})
	}
	b, err = Read(context.Background(), []string{folderOf(t, "lot", "a.stdf", made(2000, 7), "b.stdf", made(1000, 5))}, Options{})
	if err != nil {
		t.Fatal(err)
	}
	l = b.Lots[0]
	if l.Len() != 1 || l.Values(0)[0] != 7 || l.Earlier().Values[0][0] != 5 || !strings.Contains(noteText(l, "wafer-in-several-files"), "start times") {
		t.Errorf("values %v, earlier %+v, %+v", l.Values(0), l.Earlier(), l.Findings())
	}
}

func stdfBytes(t testing.TB, order stdf.Order, records ...stdf.Record) string {
	t.Helper()
	var b bytes.Buffer
	w := stdf.NewWriter(&b, order)
	for _, r := range append([]stdf.Record{&stdf.FAR{}}, records...) {
		if err := w.Write(r); err != nil {
			t.Fatal(err)
		}
	}
	w.Flush()
	return b.String()
}

// What STDF says and text does not.
func TestSTDF(t *testing.T) {
	opt := func(units string, scale int8, lo, hi float32) *stdf.Optional {
		return &stdf.Optional{Present: 7, Flag: stdf.NoStart | stdf.NoLowSpec | stdf.NoHighSpec, ResScale: scale, LoLimit: lo, HiLimit: hi, Units: units}
	}
	data := stdfBytes(t, stdf.BigEndian,
		&stdf.MIR{StartTime: 1_700_000_000, LotID: " A7 ", PartType: "MP-N24", Job: "ws1", JobRevision: "C", Temperature: "25", CommandMode: ' ', Mode: ' ', Retest: ' ', Protection: ' ', BurnIn: 65535},
		&stdf.WIR{Head: 1, WaferID: "03"},
		&stdf.PIR{Head: 1, Site: 1}, &stdf.PIR{Head: 1, Site: 2},
		&stdf.PTR{Number: 10, Head: 1, Site: 1, Result: 4.2e-9, Text: "ICBO", Optional: opt("A", 9, 0, 5e-9)},
		&stdf.PTR{Number: 10, Head: 1, Site: 2, Result: 1e-9, Flag: stdf.ResultInvalid, Text: "ICBO"},
		&stdf.PTR{Number: 11, Head: 1, Site: 1, Result: 0.1, Text: "VF", Optional: opt("V", 3, 0, 1)},
		&stdf.PTR{Number: 12, Head: 1, Site: 1, Result: 0.2, Text: "VF"},
		&stdf.FTR{Number: 13, Head: 1, Site: 1, Optional: 0xff, Text: "CONTACT"},
		&stdf.PRR{Head: 1, Site: 1, HardBin: 1, SoftBin: 2, X: 3, Y: -4, PartID: []byte("1")},
		&stdf.PRR{Head: 1, Site: 2, Flag: stdf.PartFailed, HardBin: 5, SoftBin: stdf.NoBin, X: stdf.NoCoordinate, Y: stdf.NoCoordinate, PartID: []byte("2")},
		&stdf.PIR{Head: 1, Site: 1}, &stdf.PTR{Number: 10, Head: 1, Site: 1, Result: 5e-9, Text: "ICBO"},
		&stdf.PRR{Head: 1, Site: 1, HardBin: 1, SoftBin: 2, X: 4, Y: -4, PartID: []byte("3")},
		&stdf.WRR{Head: 1, Parts: 3, Retested: stdf.NoCount, Aborted: stdf.NoCount, Good: 2, Functional: stdf.NoCount},
		&stdf.WCR{WaferSize: 4, DieWidth: 0.1, DieHeight: 0.2, Units: 1, Flat: 'D', CenterX: stdf.NoCoordinate, PositiveX: 'R', PositiveY: 'U'},
		&stdf.HBR{Head: stdf.AllSites, Number: 5, Count: 1, PassFail: 'F', Name: "breakdown"},
		&stdf.PCR{Head: stdf.AllSites, Parts: 9, Retested: stdf.NoCount, Aborted: stdf.NoCount, Good: stdf.NoCount, Functional: stdf.NoCount}, &stdf.MRR{})
	l := readOne(t, filepath.Join(folderOf(t, "d", "lot.stdf", data), "lot.stdf"), Options{})
	if l.ID() != "A7" || l.Product() != "MP-N24" || l.Wafers()[0].ID != "03" {
		t.Errorf("lot %q, product %q, wafers %+v", l.ID(), l.Product(), l.Wafers())
	}
	if want := map[string]string{"test program": "ws1", "program revision": "C", "test temperature": "25 °C", "start time": "2023-11-14 22:13:20"}; !cmp.Equal(l.Attributes(), want) {
		t.Errorf("attributes %v", l.Attributes())
	}
	if testNames(l) != "ICBO VF #11 VF #12" {
		t.Errorf("tests %s", testNames(l))
	}
	x := l.Tests()[0]
	// float32(4.2e-9) is 4.19999990...e-9; its shortest decimal is 4.2e-9, and 5 nA
	// is at the limit of 5 nA, not beside it.
	if v := l.Values(0); v[0] != 4.2e-9 || v[1] == v[1] || v[2] != x.Upper || x.Upper != 5e-9 || x.Unit.Text != "nA" || x.Number != 10 {
		t.Errorf("values %v of %+v", l.Values(0), x)
	}
	if !cmp.Equal(l.X(), []int32{3, Missing, 4}) || !cmp.Equal(l.Touchdown(), []int32{1, 1, 2}) || !cmp.Equal(l.Pass(), []int8{1, 0, 1}) || !cmp.Equal(l.SoftBin(), []int32{2, Missing, 2}) {
		t.Errorf("%+v", viewOf(l))
	}
	if g := l.Geometry(); g.DiameterMM != 101.6 || g.DieWidthMM != 2.54 || g.DieHeightMM != 5.08 || g.Notch != "down" || g.CentreX != Missing {
		t.Errorf("geometry %+v", g)
	}
	if l.HardBinNames()[5] != "breakdown" || len(l.DieAttributes()) != 0 {
		t.Errorf("bins %v, attributes %v", l.HardBinNames(), l.DieAttributes())
	}
	for code, want := range map[string]string{"invalid-result": "test ICBO: 1 result is flagged", "same-test-text": `VF (11, 12)`, "functional-tests": "1 functional test with 1 results",
		"counts-disagree": "counts 9 parts, the file holds 3"} {
		if s := noteText(l, code); !strings.Contains(s, want) {
			t.Errorf("%s: %q, want %q", code, s, want)
		}
	}
	// All of it survives conversion.
	again := readOne(t, save(t, "lot.parquet", func(w io.Writer) error { return WriteParquet(w, l) }), Options{})
	if d := cmp.Diff(viewOf(l), viewOf(again), exactly); d != "" {
		t.Errorf("(-STDF +Parquet)\n%s", d)
	}
	if d := cmp.Diff(l.Geometry(), again.Geometry()); d != "" || again.HardBinNames()[5] != "breakdown" {
		t.Errorf("geometry %s, bins %v", d, again.HardBinNames())
	}
	// The retest policy is asked anew, as all measurements are kept.
	first := readOne(t, save(t, "lot.csv", func(w io.Writer) error {
		_, err := io.WriteString(w, table("LOT,WAFER,X,Y,BV,PARTID", "A,1,0,0,5,p", "A,1,1,0,6,q", "A,1,0,0,7,r", "A,1,0,0,8,s"))
		return err
	}), Options{Retest: RetestFirst})
	for _, policy := range []Retest{RetestFirst, RetestLast} {
		l := readOne(t, save(t, "lot.arrow", func(w io.Writer) error { return WriteArrow(w, first) }), Options{Retest: policy})
		want := map[Retest][]float64{RetestFirst: {5, 6}, RetestLast: {8, 6}}[policy]
		if v := slices.Clone(l.Values(0)); !cmp.Equal(v, want) || len(l.Earlier().Of) != 2 {
			t.Errorf("policy %s: values %v, earlier %+v", policy, v, l.Earlier())
		}
	}
}

// A file cut anywhere keeps its whole parts.
func TestSTDFCut(t *testing.T) {
	var b bytes.Buffer
	if err := aLot(1).WriteSTDF(&b, false); err != nil {
		t.Fatal(err)
	}
	whole := readOne(t, filepath.Join(folderOf(t, "d", "lot.stdf", b.String()), "lot.stdf"), Options{})
	for _, at := range []int{b.Len() / 3, b.Len() - 5} {
		path := filepath.Join(folderOf(t, "d", "lot.stdf", b.String()[:at]), "lot.stdf")
		l := readOne(t, path, Options{})
		if f := findingOf(l.Findings(), "cut-short"); f == nil || f.Severity != Severe || !regexp.MustCompile(`lot\.stdf: byte \d+: `).MatchString(f.Text) {
			t.Errorf("cut at %d: %+v", at, l.Findings())
		}
		if l.Len() == 0 || l.Len() > whole.Len() {
			t.Errorf("cut at %d: %d dice", at, l.Len())
		}
	}
}

// A sheet as people make it: a title, units, a date column, blanks at row ends,
// formulas, another sheet.
func TestWorkbook(t *testing.T) {
	path := save(t, "lot.xlsx", func(w io.Writer) error {
		f := excelize.NewFile()
		defer f.Close()
		for at, v := range map[string]any{"A1": "Lot: A7", "A3": "Wafer", "B3": "X", "C3": "Y", "D3": "Test Time", "E3": "ICBO", "F3": "BV",
			"E4": "nA", "F4": "V", "A5": 1, "B5": 0, "C5": 0, "D5": 45000.5, "E5": 1.23456789, "F5": 41.5, "A6": 1, "B6": 1, "C6": 0, "D6": 45001, "E6": 2.5, "A7": 1, "B7": 2, "C7": 0, "D7": 45002.25, "E7": "#N/A", "F7": 41.75} {
			f.SetCellValue("Sheet1", at, v)
		}
		style, _ := f.NewStyle(&excelize.Style{NumFmt: 22})
		short, _ := f.NewStyle(&excelize.Style{NumFmt: 2})
		f.SetCellStyle("Sheet1", "D5", "D7", style)
		f.SetCellStyle("Sheet1", "E5", "E5", short) // shows 1.23
		f.NewSheet("Notes")
		return f.Write(w)
	})
	l := readOne(t, path, Options{})
	if l.ID() != "A7" || l.Len() != 3 || testNames(l) != "ICBO BV" || l.Tests()[0].Unit.Text != "nA" {
		t.Fatalf("%+v", viewOf(l))
	}
	nan := l.Values(1)[1]
	if v := l.Values(0); v[0] != 1.23456789e-9 || v[1] != 2.5e-9 || v[2] == v[2] || nan == nan {
		t.Errorf("values %v, %v", v, l.Values(1))
	}
	if d := viewOf(l).DieAttributes["Test Time"]; !cmp.Equal(d, []string{"2023-03-15 12:00:00", "2023-03-16", "2023-03-17 06:00:00"}) {
		t.Errorf("times %q", d) // 45000 is 15 March 2023 by the day count of xlsx, 1 being 1 January 1900 (from memory)
	}
	if s := noteText(l, "other-sheets"); !strings.Contains(s, "Notes") {
		t.Errorf("%q", s)
	}
	if s := noteText(l, "missing-word"); !strings.Contains(s, "lot.xlsx:7: test ICBO") {
		t.Errorf("place: %q", s)
	}
}

// Files that are damaged or no such files: one line that names the file.
func TestDamagedFiles(t *testing.T) {
	l := readOne(t, save(t, "lot.csv", func(w io.Writer) error { return aLot(2).WriteWide(w, wideFormat) }), Options{})
	bytesOf := func(write func(io.Writer, *Lot) error) string {
		var b bytes.Buffer
		if err := write(&b, l); err != nil {
			t.Fatal(err)
		}
		return b.String()
	}
	pq, ipcFile, stream := bytesOf(WriteParquet), bytesOf(WriteArrow), bytesOf(WriteArrowStream)
	zipped := func(files ...string) string {
		var b bytes.Buffer
		asZip(files...)(&b)
		return b.String()
	}
	csv := table("LOT,WAFER,X,Y,BV", "A,1,0,0,5")
	var book bytes.Buffer
	asWorkbook(csv)(&book)
	var emptyBook bytes.Buffer
	excelize.NewFile().Write(&emptyBook)
	locked := []byte(zipped("lot.csv", csv))
	locked[6] |= 1 // the encryption flag, in the local header and the directory
	locked[bytes.Index(locked, []byte("PK\x01\x02"))+8] |= 1
	bomb := func() string {
		var b bytes.Buffer
		z := zip.NewWriter(&b)
		w, _ := z.Create("lot.csv")
		w.Write([]byte(csv))
		zeros := make([]byte, 1<<20)
		for range 300 {
			w.Write(zeros)
		}
		z.Close()
		return b.String()
	}
	for _, c := range []struct{ name, file, data, fails, code string }{
		{name: "Parquet cut", file: "a.parquet", data: pq[:len(pq)/2], fails: `the Parquet file is damaged or cut short`},
		{name: "Parquet of nothing", file: "a.parquet", data: "PAR1PAR1", fails: `the Parquet file is damaged`},
		{name: "Parquet with a bad footer", file: "a.parquet", data: pq[:len(pq)-60] + strings.Repeat("\xff", 52) + pq[len(pq)-8:], fails: `damaged`},
		{name: "Parquet with damaged pages", file: "a.parquet", data: pq[:4] + strings.Repeat("\xee", len(pq)/3) + pq[4+len(pq)/3:], fails: `damaged`},
		{name: "text named Parquet", file: "a.parquet", data: csv, code: ""},
		{name: "zeros named Parquet", file: "a.parquet", data: strings.Repeat("\x00", 500), fails: `the Parquet file is damaged`},
		{name: "Parquet packed", file: "a.parquet.gz", data: gzipped(pq), fails: `is packed with gzip .*; unpack it`},
		{name: "IPC file cut", file: "a.arrow", data: ipcFile[:len(ipcFile)/2], fails: `the Arrow IPC file is damaged or cut short`},
		{name: "IPC file, start only", file: "a.arrow", data: ipcFile[:10], fails: `the Arrow IPC file is damaged or cut short`},
		{name: "IPC stream cut in its batch", file: "a.arrows", data: stream[:len(stream)-2000], fails: `the Arrow IPC stream is damaged or cut short`},
		{name: "IPC stream cut in its schema", file: "a.arrows", data: stream[:100], fails: `the Arrow IPC stream is damaged or cut short`},
		{name: "zip cut", file: "a.zip", data: zipped("lot.csv", csv)[:60], fails: `the zip archive is damaged or cut short`},
		{name: "zip that is none", file: "a.zip", data: "PK\x03\x04 and no more", fails: `the zip archive is damaged`},
		{name: "zip without data", file: "a.zip", data: zipped("notes.pdf", "%PDF"), fails: `holds no data file; there are notes\.pdf`},
		{name: "empty zip", file: "a.zip", data: zipped(), fails: `holds no data file`},
		{name: "zip in a zip", file: "a.zip", data: zipped("b.zip", zipped("lot.csv", csv)), fails: `holds no data file; there are b\.zip`},
		{name: "zip with a bad file", file: "a.zip", data: zipped("a.csv", csv, "b.csv", "Dear colleague"), fails: `a\.zip/b\.csv:1: no table found`},
		{name: "zip with notes", file: "a.zip", data: zipped("a.csv", csv, "notes.pdf", "%PDF", "__MACOSX/x", "y"), code: "file-skipped"},
		{name: "zip of all formats", file: "a.zip", data: zipped("a.csv", csv, "b.parquet", pq, "c.arrow", ipcFile, "d.arrows", stream, "e.xlsx", book.String()), code: "same-die"},
		{name: "encrypted zip", file: "a.zip", data: string(locked), fails: `the entry "lot\.csv" is encrypted; unpack`},
		{name: "zip that unpacks without end", file: "a.zip", data: bomb(), fails: `unpacks to more than 200 times its size`},
		{name: "xlsx that is xls", file: "a.xlsx", data: "\xd0\xcf\x11\xe0\xa1\xb1\x1a\xe1" + strings.Repeat("\x00", 600), fails: `is an old spreadsheet file \(\.xls\)`},
		{name: "xlsx cut", file: "a.xlsx", data: book.String()[:book.Len()/2], fails: `damaged or cut short`},
		{name: "empty workbook", file: "a.xlsx", data: emptyBook.String(), fails: `is empty`},
		{name: "workbook without a sheet's part", file: "a.xlsx", data: zipped("[Content_Types].xml", "<Types/>", "xl/workbook.xml", "<workbook/>"), fails: `workbook`},
		{name: "STDF of version 3", file: "a.stdf", data: "\x02\x00\x00\x0a\x02\x03", fails: `is no STDF V4 file: .*version 3`},
		{name: "STDF without parts", file: "a.stdf", data: stdfBytes(t, stdf.LittleEndian, &stdf.MIR{LotID: "A"}, &stdf.MRR{}), fails: `holds no tested part`},
		{name: "text named STDF", file: "a.stdf", data: csv, fails: `is no STDF V4 file`},
		{name: "picture", file: "a.csv", data: "\x89PNG\r\n\x1a\n", fails: `is a picture`},
	} {
		t.Run(c.name, func(t *testing.T) {
			path := filepath.Join(t.TempDir(), c.file)
			if err := os.WriteFile(path, []byte(c.data), 0o644); err != nil {
				t.Fatal(err)
			}
			b, err := Read(context.Background(), []string{path}, Options{})
			if c.fails == "" {
				if err != nil {
					t.Fatal(err)
				}
				if c.code != "" && c.code != "same-die" && findingOf(b.Findings, c.code) == nil {
					t.Errorf("no finding %s in %+v", c.code, b.Findings)
				}
				return
			}
			var e *Error
			if !errors.As(err, &e) || e.Remedy == "" || !strings.HasPrefix(e.File, path) || strings.Contains(err.Error(), "\n") || !regexp.MustCompile(c.fails).MatchString(err.Error()) {
				t.Errorf("error %v, want one line like %q that names %s", err, c.fails, c.file)
			}
		})
	}
}

// A stream of several batches that is cut keeps the whole ones.
func TestStreamCutBetweenBatches(t *testing.T) {
	l := readOne(t, save(t, "lot.csv", func(w io.Writer) error { _, err := io.WriteString(w, manyRows(2*groupRows+100)); return err }), Options{})
	var b bytes.Buffer
	if err := WriteArrowStream(&b, l); err != nil {
		t.Fatal(err)
	}
	path := filepath.Join(folderOf(t, "d", "lot.arrows", b.String()[:b.Len()*9/10]), "lot.arrows")
	got := readOne(t, path, Options{})
	if f := findingOf(got.Findings(), "broken-off"); got.Len() != groupRows || f == nil || f.Severity != Severe {
		t.Errorf("%d dice, %+v", got.Len(), got.Findings())
	}
}

// Values that a file's unit cannot hold exactly are stored in SI.
func TestStoredUnit(t *testing.T) {
	nA := unit("nA")
	tab := NewTable("A", Test{Name: "I", Unit: nA, Lower: 1e-9, Upper: 5e-9}, Test{Name: "J", Unit: nA, Lower: 1e-9, Upper: 5e-9})
	odd := nA.ToSI(4.2)
	for k := uint64(1); k < 1000; k++ { // a float64 that no value in nA converts to
		if x := odd * (1 + float64(k)*2.3e-16); nA.ToSI(nA.FromSI(x)) != x {
			odd = x
			break
		}
	}
	for i := range 5 {
		tab.Add(Die{Wafer: "1", X: int32(i), Y: 0, HardBin: 1, Values: []float64{nA.ToSI(float64(i) + 0.25), odd}})
	}
	l, err := Build(tab, Options{})
	if err != nil {
		t.Fatal(err)
	}
	ct, err := newColumnTable(l)
	if err != nil {
		t.Fatal(err)
	}
	for name, want := range map[string]string{"I": "nA", "J": "A"} {
		f, _ := ct.schema.FieldsByName(name)
		if got := fieldMeta(f[0])["unit"]; got != want {
			t.Errorf("column %s stands in %q, want %q", name, got, want)
		}
	}
	got := readOne(t, save(t, "lot.parquet", func(w io.Writer) error { return WriteParquet(w, l) }), Options{})
	if d := cmp.Diff(viewOf(l), viewOf(got), exactly); d != "" {
		t.Error(d)
	}
}

// Parts of lots: without coordinates, with part ids, attributes of wafers and
// dice, sentinels, odd cells and duplicates: all of it comes back.
func TestConvertedLotIsTheLot(t *testing.T) {
	for name, text := range map[string]string{
		"attributes": "# fab: north\n# device = N24\n" + table("Lot,Wafer,X,Y,HBIN,P/F,Reactor,Card,Part ID,BATCH,BV [V],ICBO [nA]", "A,1,0,0,1,P,R1,c1,a,b1,41.5,1.25", "A,1,1,0,5,F,R1,c2,b,b1,OVL,-9999",
			"A,1,1,0,5,F,R1,c2,b,b1,OVL,-9999", "A,1,1,0,1,P,R1,c2,b,b1,41.6,1.5", "A,2,0,0,1,P,R2,c1,c,b1,x41,-9999", "A,2,1,0,1,,R2,c1,,b1,41.7,3.5", "A,2,,,1,P,R2,c1,d,b1,41.8,4.5"),
		"bounds":    table("Lot,Wafer,X,Y,BV [V],ICBO [nA]", "A,1,0,0,41.5,>1000", "A,1,1,0,OVL,1.5", "A,1,2,0,41,<0.01", "A,1,3,0,40.5,2.5", "A,1,3,0,OVL,"),
		"no places": table("Lot,Wafer,Site,BV [V]", "A,1,1,41.5", "A,1,2,41.6", "A,2,1,41.7"),
		"names":     table("Lot,Wafer,X,Y,lot_2,measurement,touchdown no,pass", "A,1,0,0,1.5,2.5,4,3.5", "A,1,1,0,1.25,2.25,5,3.25"),
		"made":      wideText(t, aLot(2), wideFormat),
	} {
		for _, policy := range []Retest{RetestLast, RetestBest} {
			opt := Options{Retest: policy}
			l := readOne(t, save(t, "lot.csv", func(w io.Writer) error { _, err := io.WriteString(w, text); return err }), opt)
			for file, write := range map[string]func(io.Writer, *Lot) error{"lot.parquet": WriteParquet, "lot.arrow": WriteArrow, "lot.arrows": WriteArrowStream} {
				path := save(t, file, func(w io.Writer) error { return write(w, l) })
				got := readOne(t, path, opt)
				if d := cmp.Diff(viewOf(l), viewOf(got), exactly); d != "" {
					t.Errorf("%s, %s, %s (-before +after)\n%.2500s", name, file, policy, d)
				}
				// And once more: what is carried stays.
				again := readOne(t, save(t, file, func(w io.Writer) error { return write(w, got) }), opt)
				if d := cmp.Diff(viewOf(l), viewOf(again), exactly); d != "" {
					t.Errorf("%s, %s, %s, the second time\n%.1500s", name, file, policy, d)
				}
			}
		}
	}
}
