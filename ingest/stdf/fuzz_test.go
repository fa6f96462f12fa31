package stdf

import (
	"bytes"
	"flag"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"strconv"
	"testing"
	"testing/iotest"
)

var writeSeeds = flag.Bool("seeds", false, "write the seeds of FuzzReader to testdata/fuzz")

// seeds are small files of every record type, sound and damaged.
func seeds(t testing.TB) map[string][]byte {
	little := madeFile{wafers: 1, parts: 4, sites: 2}.bytes(t)
	big := madeFile{wafers: 2, parts: 3, sites: 1, order: BigEndian, leaveOut: true}.bytes(t)
	every := [2][]byte{farBytes(false), farBytes(true)}
	for i, big := range []bool{false, true} {
		for _, rec := range handMade {
			every[i] = append(every[i], rec.bytes(big)...)
		}
	}
	bad := bytes.Clone(little)
	bad[700] ^= 0x10
	length := bytes.Clone(big)
	length[200], length[201] = 0xff, 0xff
	own := append(farBytes(false), "\x03\x00\xb4\x01abc\x05\x00\x05\x0a\x01\x01abc"...)
	own = append(own, write(t, LittleEndian, &MIR{}, pir(1), prr(1, "p"), &MRR{})[6:]...)
	vax := bytes.Clone(little)
	vax[4] = 0
	return map[string][]byte{
		"little": little, "big": big, "every-little": every[0], "every-big": every[1], "flipped": bad, "length": length,
		"cut": little[:len(little)-50], "no-far": big[6:], "makers-own": own, "appended": append(bytes.Clone(big), little...),
		"padded": append(bytes.Clone(every[0]), make([]byte, 64)...), "cpu-0": vax,
		"gzip": packed(t, every[0])["gzip"], "zstd": packed(t, every[1])["zstd"],
	}
}

// The seeds in testdata are those of the function above: go test -run Seeds -seeds
// writes them anew.
func TestSeeds(t *testing.T) {
	for name, seed := range seeds(t) {
		file := filepath.Join("testdata", "fuzz", "FuzzReader", name)
		want := "go test fuzz v1\n[]byte(" + strconv.Quote(string(seed)) + ")\n"
		if *writeSeeds {
			if err := os.MkdirAll(filepath.Dir(file), 0o755); err != nil {
				t.Fatal(err)
			}
			if err := os.WriteFile(file, []byte(want), 0o644); err != nil {
				t.Fatal(err)
			}
		}
		if name == "gzip" || name == "zstd" {
			continue // another release of the packer may pack in other bytes
		}
		if got, err := os.ReadFile(file); err != nil || string(got) != want {
			t.Errorf("%s is not what seeds makes: %v", file, err)
		}
	}
}

// Any input: no panic, places in range and in order, all of it accounted for,
// the same however it is served; what is read can be written and reads the same.
func FuzzReader(f *testing.F) {
	f.Fuzz(func(t *testing.T, file []byte) {
		plain := len(file) < 2 || file[0] != 0x1f && file[0] != 0x28
		if plain {
			tryLines(t, file)
		}
		first, records := fuzzRead(t, bytes.NewReader(file), plain, int64(len(file)))
		again, _ := fuzzRead(t, iotest.HalfReader(iotest.DataErrReader(bytes.NewReader(file))), plain, int64(len(file)))
		if first != again {
			t.Fatalf("served in pieces it reads\n%s\nand whole\n%s", again, first)
		}
		sameEachWay(t, "fuzzed", file)
		for _, order := range []Order{LittleEndian, BigEndian} {
			fuzzRewrite(t, order, records)
		}
	})
}

// fuzzRead reads to a summary, and keeps the sound records.
func fuzzRead(t *testing.T, in io.Reader, plain bool, size int64) (string, []Record) {
	r := NewReader(in)
	var sum bytes.Buffer
	var keep []Record
	var bytesRead, last int64
	last = -1
	for r.Scan() {
		if r.Offset() <= last {
			t.Fatalf("a record at %d after one at %d", r.Offset(), last)
		}
		last = r.Offset()
		bytesRead += r.Position() - r.Offset()
		fmt.Fprintln(&sum, r.Offset(), r.Record().Kind())
		if rec := r.Record(); rec.Kind() != KindFAR && len(keep) < 100 {
			keep = append(keep, Clone(rec))
		}
	}
	for _, s := range r.Skipped() {
		bytesRead += s.Bytes
	}
	for _, c := range r.DamageCounts() {
		bytesRead += c.Skipped
	}
	if r.Err() == nil && plain && bytesRead != size {
		t.Fatalf("%d bytes of %d are accounted for: %v", bytesRead, size, r.Damages())
	}
	fmt.Fprintln(&sum, r.Err(), r.Damages())
	return sum.String(), keep
}

// fuzzRewrite writes records, reads them and writes them again: the bytes are
// the same. (Texts above ASCII come back as UTF-8, which may be longer than a
// field, and texts of bytes that no text has may hold the headers of other
// records: such records are not written.)
func fuzzRewrite(t *testing.T, order Order, records []Record) {
	var first, again bytes.Buffer
	w := NewWriter(&first, order)
	w.Write(&FAR{})
	for _, rec := range records {
		if sound(rec, order) {
			w.Write(rec)
		}
	}
	w.Flush()
	w = NewWriter(&again, order)
	r := NewReader(bytes.NewReader(first.Bytes()))
	for r.Scan() {
		if err := w.Write(r.Record()); err != nil {
			t.Fatal(err)
		}
	}
	w.Flush()
	if !bytes.Equal(first.Bytes(), again.Bytes()) {
		t.Fatalf("written\n%x\nand, when read, written as\n%x\n%v", first.Bytes(), again.Bytes(), r.Damages())
	}
}

// sound says whether a record's fields can be told from damage: that they end
// with it, and that its texts hold what texts may.
func sound(rec Record, order Order) bool {
	var file bytes.Buffer
	w := NewWriter(&file, order)
	if w.Write(rec) != nil || w.Flush() != nil {
		return false
	}
	r := NewReader(nil)
	r.c.big = bool(order)
	return r.read(rec.Kind(), file.Bytes()[4:]) == exact
}
