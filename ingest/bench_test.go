package ingest

import (
	"bufio"
	"context"
	"encoding/csv"
	"fmt"
	"io"
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"runtime"
	"strconv"
	"sync/atomic"
	"testing"
	"time"

	"github.com/apache/arrow/go/v17/arrow"
	arrowcsv "github.com/apache/arrow/go/v17/arrow/csv"
	"github.com/klauspost/compress/gzip"
)

// lotSize is the size of the made file: 25 wafers of 88,000 dice as the
// largest lots have, a hundredth of it under -short, or KNEEPOINT_BENCH_DICE.
func lotSize() int {
	if n, err := strconv.Atoi(os.Getenv("KNEEPOINT_BENCH_DICE")); err == nil && n > 0 {
		return n
	}
	if testing.Short() {
		return 22_000
	}
	return 2_200_000
}

// writeLot writes a wide CSV of 25 wafers and 8 tests, about 89 bytes a die,
// from a seeded generator, and gives its size.
func writeLot(tb testing.TB, path string, dice int) int64 {
	tb.Helper()
	f, err := os.Create(path)
	if err != nil {
		tb.Fatal(err)
	}
	w := bufio.NewWriterSize(f, 1<<20)
	r := rand.New(rand.NewPCG(7, 11))
	fmt.Fprintln(w, "LOT,WAFER,DIE_X,DIE_Y,SITE,HBIN,BVCBO,BVCEO,BVEBO,ICBO,HFE1,HFE2,VCESAT,COB")
	var b []byte
	per := (dice + 24) / 25
	side := int(math.Sqrt(float64(per)*4/math.Pi)) + 2
	for wafer := 1; wafer <= 25; wafer++ {
		n := 0
		for y := -side / 2; y <= side/2+1 && n < per; y++ {
			for x := -side / 2; x <= side/2+1 && n < per; x++ {
				if 4*(x*x+y*y) > (side+1)*(side+1) {
					continue
				}
				n++
				b = append(b[:0], "K4471.1,"...)
				b = fmt.Appendf(b, "%02d", wafer)
				for _, v := range []int{x, y, n%4 + 1, 1 + r.IntN(20)/19*4} {
					b = strconv.AppendInt(append(b, ','), int64(v), 10)
				}
				for _, t := range [][3]float64{{41.9, 0.9, 3}, {24.8, 0.6, 3}, {7.6, 0.1, 4}, {1.2, 0.1, 5}, {131, 8, 3}, {143, 9, 3}, {0.0934, 0.004, 6}, {3.31, 0.02, 4}} {
					b = strconv.AppendFloat(append(b, ','), t[0]+t[1]*r.NormFloat64(), 'f', int(t[2]), 64)
				}
				w.Write(append(b, '\n'))
			}
		}
	}
	if err := w.Flush(); err != nil {
		tb.Fatal(err)
	}
	info, _ := f.Stat()
	if err := f.Close(); err != nil {
		tb.Fatal(err)
	}
	return info.Size()
}

// BenchmarkRead shows the read rate beside Go's encoding/csv (fields only, no
// numbers made of them) and Arrow's CSV reader with a schema, on the same file.
func BenchmarkRead(b *testing.B) {
	dice := lotSize()
	path := filepath.Join(b.TempDir(), "lot.csv")
	size := writeLot(b, path, dice)
	b.Run("kneepoint", func(b *testing.B) {
		defer rate(b, size)()
		for b.Loop() {
			batch, err := Read(context.Background(), []string{path}, Options{})
			if err != nil {
				b.Fatal(err)
			}
			if n := batch.Tally.Dice; n < dice*9/10 {
				b.Fatalf("%d dice", n)
			}
		}
	})
	b.Run("kneepoint-one-worker", func(b *testing.B) {
		defer rate(b, size)()
		for b.Loop() {
			if _, err := Read(context.Background(), []string{path}, Options{Workers: 1}); err != nil {
				b.Fatal(err)
			}
		}
	})
	b.Run("kneepoint-full-reader", func(b *testing.B) {
		defer rate(b, size)()
		for b.Loop() {
			if _, err := Read(context.Background(), []string{path}, Options{careful: true}); err != nil {
				b.Fatal(err)
			}
		}
	})
	b.Run("encoding-csv", func(b *testing.B) {
		defer rate(b, size)()
		for b.Loop() {
			readEncodingCSV(b, path)
		}
	})
	b.Run("arrow-csv", func(b *testing.B) {
		defer rate(b, size)()
		for b.Loop() {
			readArrowCSV(b, path)
		}
	})
	packed := filepath.Join(b.TempDir(), "lot.csv.gz")
	pack(b, path, packed)
	b.Run("kneepoint-gzip", func(b *testing.B) {
		defer rate(b, size)()
		for b.Loop() {
			if _, err := Read(context.Background(), []string{packed}, Options{}); err != nil {
				b.Fatal(err)
			}
		}
	})
	for name, p := range map[string]string{"memory": path, "memory-gzip": packed} {
		b.Run(name, func(b *testing.B) {
			for b.Loop() {
				peak, columns, n := peakMemory(b, p)
				b.ReportMetric(float64(peak)/float64(columns), "peak/columns")
				b.ReportMetric(float64(columns)/float64(n), "B/die")
				b.ReportMetric(float64(peak)/float64(n), "peakB/die")
			}
		})
	}
}

// rate reports bytes per second, and per second of processor time: other work on
// the machine slows the first and hardly the second.
func rate(b *testing.B, size int64) (end func()) {
	b.SetBytes(size)
	start := cpuTime()
	return func() {
		if d := cpuTime() - start; d > 0 {
			b.ReportMetric(float64(size)*float64(b.N)/1e6/d.Seconds(), "MB/cpu-s")
		}
	}
}

func pack(b *testing.B, from, to string) {
	b.Helper()
	in, err := os.Open(from)
	if err != nil {
		b.Fatal(err)
	}
	defer in.Close()
	out, err := os.Create(to)
	if err != nil {
		b.Fatal(err)
	}
	w, _ := gzip.NewWriterLevel(out, gzip.BestSpeed)
	if _, err := io.Copy(w, in); err != nil {
		b.Fatal(err)
	}
	if err := w.Close(); err != nil {
		b.Fatal(err)
	}
	if err := out.Close(); err != nil {
		b.Fatal(err)
	}
}

func readEncodingCSV(b *testing.B, path string) {
	f, err := os.Open(path)
	if err != nil {
		b.Fatal(err)
	}
	defer f.Close()
	r := csv.NewReader(bufio.NewReaderSize(f, 1<<20))
	r.ReuseRecord = true
	for {
		if _, err := r.Read(); err == io.EOF {
			return
		} else if err != nil {
			b.Fatal(err)
		}
	}
}

func readArrowCSV(b *testing.B, path string) {
	f, err := os.Open(path)
	if err != nil {
		b.Fatal(err)
	}
	defer f.Close()
	fields := []arrow.Field{{Name: "LOT", Type: arrow.BinaryTypes.String}, {Name: "WAFER", Type: arrow.BinaryTypes.String}}
	for _, n := range []string{"DIE_X", "DIE_Y", "SITE", "HBIN"} {
		fields = append(fields, arrow.Field{Name: n, Type: arrow.PrimitiveTypes.Int32})
	}
	for _, n := range []string{"BVCBO", "BVCEO", "BVEBO", "ICBO", "HFE1", "HFE2", "VCESAT", "COB"} {
		fields = append(fields, arrow.Field{Name: n, Type: arrow.PrimitiveTypes.Float64})
	}
	r := arrowcsv.NewReader(bufio.NewReaderSize(f, 1<<20), arrow.NewSchema(fields, nil), arrowcsv.WithHeader(true), arrowcsv.WithChunk(64<<10))
	defer r.Release()
	rows := int64(0)
	for r.Next() {
		rows += r.Record().NumRows()
	}
	if r.Err() != nil || rows == 0 {
		b.Fatal(rows, r.Err())
	}
}

// peakMemory samples the heap while a file is read.
func peakMemory(b *testing.B, path string) (peak uint64, columns int64, dice int) {
	runtime.GC()
	var start runtime.MemStats
	runtime.ReadMemStats(&start)
	var most atomic.Uint64
	stop := make(chan struct{})
	done := make(chan struct{})
	go func() {
		defer close(done)
		var m runtime.MemStats
		for {
			runtime.ReadMemStats(&m)
			if v := m.HeapInuse - min(start.HeapInuse, m.HeapInuse); v > most.Load() {
				most.Store(v)
			}
			select {
			case <-stop:
				return
			case <-time.After(2 * time.Millisecond):
			}
		}
	}()
	batch, err := Read(context.Background(), []string{path}, Options{})
	close(stop)
	<-done
	if err != nil {
		b.Fatal(err)
	}
	for _, l := range batch.Lots {
		columns += l.Bytes()
		dice += l.Len()
	}
	return most.Load(), columns, dice
}
