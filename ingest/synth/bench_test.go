package synth

import (
	"io"
	"testing"
)

// BenchmarkWriteWide makes and writes two wafers of the full lot.
func BenchmarkWriteWide(b *testing.B) {
	s := BenchSpec()
	s.Wafers = 2
	dice, _, _ := s.Grid.Dice()
	var n counter
	for b.Loop() {
		n = 0
		if err := s.WriteWide(&n, 1, Format{}); err != nil {
			b.Fatal(err)
		}
	}
	b.SetBytes(int64(n))
	b.ReportMetric(float64(n)/float64(s.Wafers*dice), "bytes/row")
}

// counter is a writer that counts.
type counter int64

func (c *counter) Write(p []byte) (int, error) {
	*c += counter(len(p))
	return io.Discard.Write(p)
}
