package ingest

import (
	"context"
	"errors"
	"fmt"
	"io"
	"math"
	"math/rand/v2"
	"runtime"
	"strings"
	"testing"

	"kneepoint/ingest/stdf"
)

// manyPartsSTDF is a file of several batches of parts that go by a program for the
// most part: tests are left out or done twice, results are flagged or infinite,
// some parts have functional and multiple results.
func manyPartsSTDF(t *testing.T, order stdf.Order, parts int) string {
	rnd := rand.New(rand.NewPCG(3, 8))
	now := func(often float64) bool { return rnd.Float64() < often }
	recs := []stdf.Record{&stdf.MIR{LotID: "A"}, &stdf.WIR{Head: 1, WaferID: "1"}}
	for i := range parts {
		recs = append(recs, &stdf.PIR{Head: 1, Site: 1})
		program := 5
		if i > parts/2 {
			program = 9 // tests are added on the way
		}
		for k := range program {
			if now(0.01) {
				continue
			}
			for again := true; again; again = now(0.01) {
				m := &stdf.PTR{Number: uint32(10 * (k + 1)), Head: 1, Site: 1, Result: float32(rnd.IntN(5000)) / 100, Text: fmt.Sprint("T", k)}
				switch {
				case now(0.01):
					m.Flag = stdf.Alarm
				case now(0.01):
					m.Flag = stdf.NotExecuted
				case now(0.01):
					m.Result = float32(math.Inf(1 - 2*rnd.IntN(2)))
				case now(0.01):
					m.Result = math.Float32frombits(0x7fa00001 + uint32(rnd.IntN(9)))
				}
				recs = append(recs, m)
			}
		}
		if i > 300 && now(0.1) {
			recs = append(recs, &stdf.FTR{Number: 500, Head: 1, Site: 1, Optional: 0xff, Text: "F"},
				&stdf.MPR{Number: 600, Head: 1, Site: 1, Results: []float32{1, float32(i)}, Text: "M"})
		}
		recs = append(recs, &stdf.PRR{Head: 1, Site: 1, HardBin: 1, SoftBin: 1, X: int16(i % 100), Y: int16(i / 100)})
	}
	return stdfBytes(t, order, append(recs, &stdf.WRR{Head: 1, Parts: uint32(parts)}, &stdf.MRR{})...)
}

// Columns hold what the parts have, one by one: of a test that a part has twice the
// last usable result counts.
func TestColumnsOfSTDF(t *testing.T) {
	for _, order := range []stdf.Order{stdf.LittleEndian, stdf.BigEndian} {
		data := manyPartsSTDF(t, order, 5000)
		path := save(t, "lot.stdf", func(w io.Writer) error { _, err := io.WriteString(w, data); return err })
		found, err := findInputs([]string{path})
		if err != nil {
			t.Fatal(err)
		}
		d, err := readSTDF(context.Background(), found.inputs[0], 0, newSchema(), nil)
		if err != nil {
			t.Fatal(err)
		}
		columns := map[string][]float64{}
		for i, c := range d.layout.columns {
			columns[c.name] = d.data.values[d.layout.fields[d.layout.columns[i].field].slot]
		}
		p := stdf.NewParts(stdf.NewReader(strings.NewReader(data)))
		row, again := 0, 0
		for ; p.Scan(); row++ {
			want := map[string]float64{}
			for _, r := range p.Part().Results {
				test := p.Tests()[r.Test]
				name, v := test.Text, stdf.Decimal(r.Raw)
				if test.Kind == stdf.KindFTR || r.Flag&stdf.NotExecuted != 0 {
					continue
				}
				if test.Kind == stdf.KindMPR {
					name += " " + p.ColumnName(test, int(r.Column))
				}
				switch {
				case !stdf.Usable(r.Flag, r.Parm):
					v = oddNaN[cellInvalid]
				case math.IsInf(v, 0):
					v = oddNaN[infinityIs(v)]
				case v != v:
					continue
				}
				if old, ok := want[name]; ok && old == old {
					if again++; v != v {
						continue
					}
				}
				want[name] = v
			}
			for name, c := range columns {
				w, ok := want[name]
				if !ok {
					w = math.NaN()
				}
				if math.Float64bits(c[row]) != math.Float64bits(w) {
					t.Fatalf("row %d, %s: %v (%x), want %v (%x)", row, name, c[row], math.Float64bits(c[row]), w, math.Float64bits(w))
				}
			}
		}
		if row != 5000 || d.data.n != row || len(columns) != 11 || again < 50 {
			t.Errorf("%d rows of %d, %d columns, %d results again", d.data.n, row, len(columns), again)
		}
		if !hasFinding(d.notes, "result-again", fmt.Sprintf("%d results", again)) {
			t.Errorf("%d results are there again; %v", again, d.notes)
		}
	}
}

func hasFinding(findings []Finding, code, text string) bool {
	for _, f := range findings {
		if f.Code == code && strings.Contains(f.Text, text) {
			return true
		}
	}
	return false
}

// A small zstd file may claim a window of gigabytes, for which the unpacker would
// make room at once (RFC 8878, 3.1.1.1.2): it is refused in one line.
func TestHugeZstdWindow(t *testing.T) {
	stdfFile := stdfBytes(t, stdf.LittleEndian, &stdf.MIR{LotID: "A"}, &stdf.PIR{Head: 1, Site: 1}, &stdf.PRR{Head: 1, Site: 1, HardBin: 1, X: 1, Y: 1}, &stdf.MRR{})
	for name, body := range map[string]string{"lot.csv.zst": "WAFER,X,Y,BV\n1,1,1,5\n1,1,2,6\n", "lot.stdf.zst": stdfFile} {
		for _, window := range []byte{0x90, 0xa0, 0xf8} { // 2^28, 2^30, 2^41 bytes
			// magic; no checksum, no size; window; one raw block, the last
			frame := append([]byte{0x28, 0xb5, 0x2f, 0xfd, 0, window}, byte(len(body)<<3|1), byte(len(body)>>5), byte(len(body)>>13))
			frame = append(frame, body...)
			path := save(t, name, func(w io.Writer) error { _, err := w.Write(frame); return err })
			var before, after runtime.MemStats
			runtime.ReadMemStats(&before)
			_, err := Read(context.Background(), []string{path}, Options{})
			runtime.ReadMemStats(&after)
			var e *Error
			if !errors.As(err, &e) || strings.ContainsAny(err.Error(), "\n\r") || !strings.Contains(err.Error(), "zstd") {
				t.Errorf("%s, window %02x: %v", name, window, err)
			}
			if n := after.TotalAlloc - before.TotalAlloc; n > 40<<20 {
				t.Errorf("%s, window %02x: %d bytes allocated", name, window, n)
			}
		}
		// The same frame with a window of 8 MB is read.
		frame := append([]byte{0x28, 0xb5, 0x2f, 0xfd, 0, 0x68}, byte(len(body)<<3|1), byte(len(body)>>5), byte(len(body)>>13))
		path := save(t, name, func(w io.Writer) error { _, err := w.Write(append(frame, body...)); return err })
		if _, err := Read(context.Background(), []string{path}, Options{}); err != nil {
			t.Errorf("%s: %v", name, err)
		}
	}
}
