package sketch

import (
	"encoding/binary"
	"errors"
	"hash/crc32"
	"math"
)

// The stored form: a mark and a version, the bits, counts as varints, extremes as
// bits, then the buckets that are not empty, negative ones first, as their distance
// from the one before and their count, and a checksum (CRC-32, IEEE). The same
// readings give the same bytes.
const (
	storedMark    = "kpq"
	storedVersion = 1
)

// ErrStored is why stored bytes are not a sketch.
var ErrStored = errors.New("stats/sketch: not a stored sketch, or a damaged one")

// MarshalBinary stores the sketch.
func (q *Quantiles) MarshalBinary() ([]byte, error) {
	b := append([]byte(storedMark), storedVersion, byte(q.bits))
	for _, n := range []int{q.n, q.missing, q.zero, q.below, q.above} {
		b = binary.AppendUvarint(b, uint64(n))
	}
	b = binary.LittleEndian.AppendUint64(b, math.Float64bits(q.min))
	b = binary.LittleEndian.AppendUint64(b, math.Float64bits(q.max))
	for _, pages := range []map[uint16][]int{q.negative, q.positive} {
		var body []byte
		used := 0
		last := uint64(0)
		for _, o := range sortedOctaves(pages) {
			for i, n := range pages[o] {
				if n > 0 {
					at := uint64(o)<<q.bits + uint64(i)
					body = binary.AppendUvarint(body, at-last)
					body = binary.AppendUvarint(body, uint64(n))
					last = at
					used++
				}
			}
		}
		b = binary.AppendUvarint(b, uint64(used))
		b = append(b, body...)
	}
	return binary.LittleEndian.AppendUint32(b, crc32.ChecksumIEEE(b)), nil
}

// UnmarshalBinary reads a stored sketch. Anything else than what MarshalBinary
// writes fails with [ErrStored] and leaves the sketch as it was.
func (q *Quantiles) UnmarshalBinary(data []byte) error {
	head := len(storedMark)
	if len(data) < head+2+4 || string(data[:head]) != storedMark || data[head] != storedVersion {
		return ErrStored
	}
	body, sum := data[:len(data)-4], binary.LittleEndian.Uint32(data[len(data)-4:])
	if crc32.ChecksumIEEE(body) != sum {
		return ErrStored
	}
	bits := int(data[head+1])
	if bits < 3 || bits > 14 {
		return ErrStored
	}
	r := reader{rest: body[head+2:]}
	s := New(bits)
	for _, p := range []*int{&s.n, &s.missing, &s.zero, &s.below, &s.above} {
		*p = r.count()
	}
	s.min, s.max = r.float(), r.float()
	total := s.zero + s.below + s.above
	for _, negative := range []bool{true, false} {
		at := uint64(0)
		for i := range r.count() {
			step, n := r.uvarint(), r.count()
			if r.bad || n == 0 || i > 0 && step == 0 || step > 1<<(11+bits) {
				return ErrStored
			}
			at += step
			octave := at >> bits
			if octave == 0 || octave >= 2047 {
				return ErrStored
			}
			s.page(negative, uint16(octave))[at&(1<<bits-1)] = n
			total += n
		}
	}
	if r.bad || len(r.rest) > 0 || total != s.n || !s.sound() {
		return ErrStored
	}
	*q = *s
	return nil
}

// sound says whether the extremes are those of the buckets.
func (q *Quantiles) sound() bool {
	if q.n == 0 {
		return math.IsInf(q.min, 1) && math.IsInf(q.max, -1)
	}
	list := q.buckets()
	in := func(x float64, b bucket) bool { return x >= b.lower && x <= b.upper }
	return in(q.min, list[0]) && in(q.max, list[len(list)-1]) && q.min <= q.max
}

// reader takes numbers off bytes; after the first that is not there it is bad.
type reader struct {
	rest []byte
	bad  bool
}

func (r *reader) uvarint() uint64 {
	v, n := binary.Uvarint(r.rest)
	if n <= 0 {
		r.bad = true
		r.rest = nil
		return 0
	}
	r.rest = r.rest[n:]
	return v
}

func (r *reader) count() int {
	v := r.uvarint()
	if v > 1<<48 { // sums stay far from overflow
		r.bad = true
		return 0
	}
	return int(v)
}

func (r *reader) float() float64 {
	if len(r.rest) < 8 {
		r.bad = true
		r.rest = nil
		return 0
	}
	v := math.Float64frombits(binary.LittleEndian.Uint64(r.rest))
	r.rest = r.rest[8:]
	return v
}
