package sketch_test

import (
	"bytes"
	"encoding/binary"
	"hash/crc32"
	"math"
	"testing"

	"kneepoint/stats/sketch"
)

// Any bytes either fail or are a sketch that stores as the same bytes. The
// checksum is made right, so that what is behind it is tried too.
func FuzzUnmarshal(f *testing.F) {
	for _, x := range [][]float64{nil, {1}, {-3, 0, 42.5, math.Inf(1)}, {1e-9, 2e-9, 2e-9}} {
		q := sketch.New(6)
		q.AddAll(x)
		b, _ := q.MarshalBinary()
		f.Add(b[:len(b)-4])
	}
	f.Fuzz(func(t *testing.T, body []byte) {
		b := binary.LittleEndian.AppendUint32(bytes.Clone(body), crc32.ChecksumIEEE(body))
		q := sketch.New(4)
		if q.UnmarshalBinary(b) != nil {
			return
		}
		if p := q.Quantile(0.5); q.Count() > 0 && !(q.Min() <= p && p <= q.Max()) {
			t.Errorf("median %v outside %v to %v", p, q.Min(), q.Max())
		}
		again, _ := q.MarshalBinary()
		r := sketch.New(4)
		if err := r.UnmarshalBinary(again); err != nil {
			t.Errorf("stored again: %v", err)
		}
		if twice, _ := r.MarshalBinary(); !bytes.Equal(again, twice) {
			t.Error("storing twice differs")
		}
	})
}
