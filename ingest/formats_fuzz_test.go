package ingest

import (
	"archive/zip"
	"bytes"
	"context"
	"errors"
	"io"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"kneepoint/ingest/stdf"
)

// fuzzFile holds what is true of any content under any name: no panic; an error
// is an *Error of one line that names the file and what to do; all rows are
// accounted for (Read itself panics otherwise); and what was read can be written
// as Parquet and read again as the same lot.
func fuzzFile(t *testing.T, name string, data []byte) {
	if len(data) > 256<<10 {
		return
	}
	path := filepath.Join(t.TempDir(), name)
	if err := os.WriteFile(path, data, 0o644); err != nil {
		t.Fatal(err)
	}
	b, err := Read(context.Background(), []string{path}, Options{Workers: 2})
	if err != nil {
		var e *Error
		if !errors.As(err, &e) || !strings.HasPrefix(e.File, path) || e.What == "" || strings.ContainsAny(err.Error(), "\n\r") {
			t.Fatalf("error %#v", err)
		}
		return
	}
	b.Overview()
	Draft(b)
	for _, l := range b.Lots {
		var out bytes.Buffer
		if err := WriteParquet(&out, l); err != nil {
			t.Fatalf("cannot be written: %v", err)
		}
		again := filepath.Join(t.TempDir(), "again.parquet")
		os.WriteFile(again, out.Bytes(), 0o644)
		got, err := Read(context.Background(), []string{again}, Options{Workers: 2})
		if err != nil {
			t.Fatalf("written, but cannot be read: %v", err)
		}
		if got.Lots[0].Len() != l.Len() || len(got.Lots[0].Earlier().Of) != len(l.Earlier().Of) || len(got.Lots[0].Tests()) != len(l.Tests()) {
			t.Fatalf("lot %q changed: %d dice, %d earlier, %d tests; was %d, %d, %d", l.ID(), got.Lots[0].Len(), len(got.Lots[0].Earlier().Of),
				len(got.Lots[0].Tests()), l.Len(), len(l.Earlier().Of), len(l.Tests()))
		}
	}
}

// seedLot is small, so that the fuzzer can work on all of it.
func seedLot(t testing.TB) *Lot {
	return readOne(t, save(t, "lot.csv", func(w io.Writer) error {
		_, err := io.WriteString(w, table("LOT,WAFER,X,Y,HBIN,PARTID,BV [V],ICBO [nA]", "A,1,0,0,1,p,41.5,1.5", "A,1,1,0,5,q,12.25,", "A,1,1,0,1,q,41,2.5", "A,2,0,0,1,r,41.75,3.5"))
		return err
	}), Options{})
}

func written(t testing.TB, l *Lot, write func(io.Writer, *Lot) error) []byte {
	var b bytes.Buffer
	if err := write(&b, l); err != nil {
		t.Fatal(err)
	}
	return b.Bytes()
}

func FuzzReadParquet(f *testing.F) {
	f.Add(written(f, seedLot(f), WriteParquet))
	for _, long := range []bool{false, true} {
		b, _ := os.ReadFile(foreignFile(f, ".parquet", foreign(long)))
		f.Add(b)
	}
	f.Fuzz(func(t *testing.T, data []byte) { fuzzFile(t, "lot.parquet", data) })
}

func FuzzReadArrow(f *testing.F) {
	l := seedLot(f)
	f.Add(written(f, l, WriteArrow))
	f.Add(written(f, l, WriteArrowStream))
	for _, kind := range []string{".arrow", ".arrows"} {
		b, _ := os.ReadFile(foreignFile(f, kind, foreign(false)))
		f.Add(b)
	}
	f.Fuzz(func(t *testing.T, data []byte) { fuzzFile(t, "lot.arrow", data) })
}

func FuzzReadXLSX(f *testing.F) {
	var b bytes.Buffer
	asWorkbook(table("LOT,WAFER,X,Y,BV", "A,1,0,0,5.5", "A,1,1,0,6.5"), "More")(&b)
	f.Add(b.Bytes())
	// Stored, so that what changes is the sheet and not what unpacks.
	f.Add(storedZip(f, b.Bytes()))
	f.Fuzz(func(t *testing.T, data []byte) { fuzzFile(t, "lot.xlsx", data) })
}

func FuzzReadZip(f *testing.F) {
	var b bytes.Buffer
	asZip("a.csv", table("LOT,WAFER,X,Y,BV", "A,1,0,0,5.5"), "b/w2.csv", table("X,Y,BV", "0,0,5.5"), "c.pdf", "%PDF")(&b)
	f.Add(b.Bytes())
	f.Add(storedZip(f, b.Bytes()))
	b.Reset()
	asZip("a.parquet", string(written(f, seedLot(f), WriteParquet)))(&b)
	f.Add(b.Bytes())
	f.Fuzz(func(t *testing.T, data []byte) { fuzzFile(t, "lot.zip", data) })
}

func FuzzReadSTDF(f *testing.F) {
	for _, order := range []stdf.Order{stdf.LittleEndian, stdf.BigEndian} {
		data := stdfBytes(f, order, &stdf.MIR{LotID: "A", StartTime: 5, PartType: "N24"}, &stdf.WIR{Head: 1, WaferID: "1"}, &stdf.PIR{Head: 1, Site: 1}, &stdf.PIR{Head: 1, Site: 2},
			&stdf.PTR{Number: 1, Head: 1, Site: 1, Result: 5, Text: "BV", Optional: &stdf.Optional{Present: 7, ResScale: 9, HiLimit: 6, Units: "A"}},
			&stdf.MPR{Number: 2, Head: 1, Site: 2, Results: []float32{1, 2}, Text: "LEAK"}, &stdf.FTR{Number: 3, Head: 1, Site: 1, Optional: 0xff},
			&stdf.PRR{Head: 1, Site: 1, HardBin: 1, SoftBin: 1, PartID: []byte("p")}, &stdf.PRR{Head: 1, Site: 2, Flag: stdf.PartFailed, HardBin: 5, SoftBin: 1, X: 1, PartID: []byte("q")},
			&stdf.WRR{Head: 1, Parts: 2}, &stdf.WCR{Units: 3, WaferSize: 100}, &stdf.MRR{})
		f.Add([]byte(data))
		f.Add([]byte(gzipped(data)))
	}
	f.Fuzz(func(t *testing.T, data []byte) { fuzzFile(t, "lot.stdf", data) })
}

// storedZip packs a zip archive again without compression.
func storedZip(t testing.TB, data []byte) []byte {
	r, err := zip.NewReader(bytes.NewReader(data), int64(len(data)))
	if err != nil {
		t.Fatal(err)
	}
	var b bytes.Buffer
	w := zip.NewWriter(&b)
	for _, e := range r.File {
		from, err := e.Open()
		if err != nil {
			t.Fatal(err)
		}
		to, err := w.CreateHeader(&zip.FileHeader{Name: e.Name, Method: zip.Store})
		if err != nil {
			t.Fatal(err)
		}
		if _, err := io.Copy(to, from); err != nil {
			t.Fatal(err)
		}
	}
	w.Close()
	return b.Bytes()
}
