package stdf

import (
	"bytes"
	"fmt"
	"sync"
	"testing"
	"time"

	"github.com/klauspost/compress/gzip"
	"github.com/klauspost/compress/zstd"
)

// A wafer lot's worth of parametric results: about 100 MB, 9 of 11 records PTR.
var benchFiles sync.Map

func benchFile(b *testing.B, m madeFile) []byte {
	b.Helper()
	if f, ok := benchFiles.Load(m); ok {
		return f.([]byte)
	}
	per := m
	per.parts = 1000
	size := len(per.bytes(b)) / per.wafers // of 1,000 parts
	m2 := m
	m2.parts = 1000 * (100_000_000 / m.wafers) / size
	f := m2.bytes(b)
	benchFiles.Store(m, f)
	return f
}

var benchForms = []struct {
	name string
	m    madeFile
}{
	// As the standard wants it: what the first PTR of a test says is left out later.
	{"short", madeFile{wafers: 10, sites: 4, leaveOut: true, plainOnly: true, seed: 1}},
	{"short-big-endian", madeFile{wafers: 10, sites: 4, leaveOut: true, plainOnly: true, seed: 1, order: BigEndian}},
	// The text in every record.
	{"text", madeFile{wafers: 10, sites: 4, textOnly: true, plainOnly: true, seed: 1}},
	// Everything in every record, as many testers write it.
	{"full", madeFile{wafers: 10, sites: 4, plainOnly: true, seed: 1}},
}

// reportCPU gives the rate per second of processor time.
func reportCPU(b *testing.B, since time.Duration, size int) {
	if d := cpuTime() - since; d > 0 {
		b.ReportMetric(float64(size)*float64(b.N)/1e6/d.Seconds(), "MB/cpu-s")
	}
}

func BenchmarkReader(b *testing.B) {
	for _, form := range benchForms {
		file := benchFile(b, form.m)
		b.Run(form.name, func(b *testing.B) {
			b.SetBytes(int64(len(file)))
			b.ReportAllocs()
			var records int
			cpu := cpuTime()
			for b.Loop() {
				records = 0
				r := NewReader(bytes.NewReader(file))
				sum := float32(0)
				for r.Scan() {
					records++
					if m, ok := r.Record().(*PTR); ok {
						sum += m.Result
					}
				}
				if r.Err() != nil || len(r.Damages()) > 0 || sum == 0 {
					b.Fatal(r.Err(), r.Damages())
				}
			}
			b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N)/float64(records), "ns/record")
			reportCPU(b, cpu, len(file))
		})
	}
}

func BenchmarkParts(b *testing.B) {
	for _, form := range benchForms {
		file := benchFile(b, form.m)
		for _, compact := range []bool{false, true} {
			name := form.name
			if compact {
				name += "-compact"
			}
			b.Run(name, func(b *testing.B) {
				b.SetBytes(int64(len(file)))
				b.ReportAllocs()
				cpu := cpuTime()
				for b.Loop() {
					p := NewParts(NewReader(bytes.NewReader(file)))
					p.Compact = compact
					sum := 0.0
					for p.Scan() {
						part := p.Part()
						for i := range part.Plain {
							sum += float64(part.Plain[i].Raw)
						}
						for i := range part.Results {
							sum += part.Results[i].Value()
						}
					}
					if p.Err() != nil || len(p.Damages()) > 0 || sum == 0 {
						b.Fatal(p.Err(), p.Damages())
					}
				}
				reportCPU(b, cpu, len(file))
			})
		}
	}
}

// Rates are of the unpacked bytes.
func BenchmarkPacked(b *testing.B) {
	file := benchFile(b, benchForms[2].m)[:20_000_000]
	var gz, zst bytes.Buffer
	g := gzip.NewWriter(&gz)
	g.Write(file)
	g.Close()
	z, _ := zstd.NewWriter(&zst)
	z.Write(file)
	z.Close()
	for name, packed := range map[string][]byte{"gzip": gz.Bytes(), "zstd": zst.Bytes()} {
		b.Run(name, func(b *testing.B) {
			b.SetBytes(int64(len(file)))
			for b.Loop() {
				r := NewReader(bytes.NewReader(packed))
				for r.Scan() {
				}
				if r.Err() != nil {
					b.Fatal(r.Err())
				}
			}
		})
	}
}

func BenchmarkWriter(b *testing.B) {
	rec := &PTR{Number: 1, Head: 1, Site: 1, Result: 1, Text: "BVCEO", Optional: &Optional{Present: 12, Units: "V"}}
	for _, leaveOut := range []bool{false, true} {
		b.Run(fmt.Sprintf("leaveOut=%v", leaveOut), func(b *testing.B) {
			var buf bytes.Buffer
			w := NewWriter(&buf, LittleEndian)
			w.LeaveOut = leaveOut
			for b.Loop() {
				if buf.Len() > 1<<20 {
					buf.Reset()
				}
				if err := w.Write(rec); err != nil {
					b.Fatal(err)
				}
			}
		})
	}
}
