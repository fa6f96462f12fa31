package ingest

import (
	"context"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"runtime"
	"testing"

	"kneepoint/ingest/synth"
)

// benchFile writes part of the lot that speed is measured on, once a process.
func benchFile(b *testing.B, name string, wafers int, write func(io.Writer, *synth.Lot, *Lot) error) (string, *Lot) {
	b.Helper()
	s := synth.BenchSpec()
	s.Wafers = wafers
	if testing.Short() {
		s.Grid.DicePerWafer = 2000
	}
	lot := s.Generate(1)
	dir := b.TempDir()
	csv := filepath.Join(dir, "lot.csv")
	f, err := os.Create(csv)
	if err != nil {
		b.Fatal(err)
	}
	if err := lot.WriteWide(f, wideFormat); err != nil {
		b.Fatal(err)
	}
	f.Close()
	l := readOne(b, csv, Options{})
	path := filepath.Join(dir, name)
	f, err = os.Create(path)
	if err != nil {
		b.Fatal(err)
	}
	if err := write(f, lot, l); err != nil {
		b.Fatal(err)
	}
	if err := f.Close(); err != nil {
		b.Fatal(err)
	}
	return path, l
}

// benchRead reads a file again and again; MB/s are of the lot's columns or, with
// ofFile, of the file.
func benchRead(b *testing.B, path string, ofFile bool) {
	info, err := os.Stat(path)
	if err != nil {
		b.Fatal(err)
	}
	l := readOne(b, path, Options{})
	size := l.Bytes()
	if ofFile {
		size = info.Size()
	}
	l = nil
	runtime.GC()
	b.ReportAllocs()
	b.ResetTimer()
	defer rate(b, size)()
	for b.Loop() {
		batch, err := Read(context.Background(), []string{path}, Options{})
		if err != nil {
			b.Fatal(err)
		}
		if batch.Lots[0].Len() == 0 {
			b.Fatal("no dice")
		}
	}
}

func BenchmarkReadParquet(b *testing.B) {
	path, _ := benchFile(b, "lot.parquet", 10, func(w io.Writer, _ *synth.Lot, l *Lot) error { return WriteParquet(w, l) })
	benchRead(b, path, false)
}

func BenchmarkReadArrow(b *testing.B) {
	path, _ := benchFile(b, "lot.arrow", 10, func(w io.Writer, _ *synth.Lot, l *Lot) error { return WriteArrow(w, l) })
	benchRead(b, path, false)
}

func BenchmarkReadSTDF(b *testing.B) {
	path, _ := benchFile(b, "lot.stdf", 5, func(w io.Writer, s *synth.Lot, _ *Lot) error { return s.WriteSTDF(w, false) })
	benchRead(b, path, true)
}

// Peak memory while a file is read, beside the lot's own columns.
func BenchmarkReadMemory(b *testing.B) {
	stdfFile, _ := benchFile(b, "lot.stdf", 5, func(w io.Writer, s *synth.Lot, _ *Lot) error { return s.WriteSTDF(w, false) })
	parquetFile, _ := benchFile(b, "lot.parquet", 5, func(w io.Writer, _ *synth.Lot, l *Lot) error { return WriteParquet(w, l) })
	packed := filepath.Join(b.TempDir(), "lot.stdf.gz")
	pack(b, stdfFile, packed)
	for _, path := range []string{stdfFile, packed, parquetFile} {
		b.Run(filepath.Base(path), func(b *testing.B) {
			for b.Loop() {
				peak, columns, n := peakMemory(b, path)
				b.ReportMetric(float64(peak)/float64(columns), "peak/columns")
				b.ReportMetric(float64(peak)/float64(n), "peakB/die")
			}
		})
	}
}

// Decoding alone, without cleaning: columns in memory as they stand in the file.
func BenchmarkDecodeParquet(b *testing.B) {
	path, l := benchFile(b, "lot.parquet", 10, func(w io.Writer, _ *synth.Lot, l *Lot) error { return WriteParquet(w, l) })
	size := l.Bytes()
	l = nil
	runtime.GC()
	defer rate(b, size)()
	for b.Loop() {
		found, err := findInputs([]string{path})
		if err != nil {
			b.Fatal(err)
		}
		d, err := readColumns(context.Background(), found.inputs[0], 0, newSchema(), &Options{Workers: runtime.GOMAXPROCS(0)}, nil)
		if err != nil || d.data.n == 0 {
			b.Fatal(fmt.Sprint(err))
		}
	}
}

func BenchmarkWriteParquet(b *testing.B) {
	_, l := benchFile(b, "lot.parquet", 5, func(w io.Writer, _ *synth.Lot, l *Lot) error { return WriteParquet(w, l) })
	b.SetBytes(l.Bytes())
	for b.Loop() {
		if err := WriteParquet(io.Discard, l); err != nil {
			b.Fatal(err)
		}
	}
}
