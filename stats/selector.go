package stats

import (
	"math"
	"math/bits"
	"slices"
	"sync"
)

// Selector finds order statistics (medians, quantiles) and keeps its scratch
// memory, about 16 bytes a value, for the next call. The zero value is ready to
// use. A Selector must not be used from two goroutines at once; results do not
// depend on what it did before.
//
// It does not sort. A float64's bits, suitably flipped, order like the number
// itself; so values are counted into a few thousand buckets by their leading
// bits, and only the buckets that hold a wanted rank are looked into again, by
// their next bits. Each round takes five bits or more off the range, so the
// work is linear in n whatever the data look like: sorted, all equal, or with
// one reading at 1e30. There is no pivot to choose badly.
type Selector struct {
	a, b  []uint64 // keys, and the room they are gathered into
	count []uint32
	place []int32
	ranks []int
	found []float64
}

// selectors are those of the functions that are asked for one thing at a time.
var selectors = sync.Pool{New: func() any { return new(Selector) }}

const (
	bucketBits = 12 // at most
	fewKeys    = 48 // below this, sorting is quicker than counting
)

// key maps a float64 to an integer of the same order.
func key(v float64) uint64 {
	b := math.Float64bits(v)
	return b ^ (uint64(int64(b)>>63) | 1<<63)
}

func unkey(k uint64) float64 {
	return math.Float64frombits(k ^ (uint64(int64(^k)>>63) | 1<<63))
}

// load copies the keys of the values that are not NaN and returns how many.
func (s *Selector) load(x []float64) int {
	s.a = grow(s.a, len(x))
	n := 0
	for _, v := range x {
		if v == v {
			s.a[n] = key(v + 0) // -0 becomes 0
			n++
		}
	}
	return n
}

// loadDeviations copies the keys of |x-centre|.
func (s *Selector) loadDeviations(x []float64, centre float64) int {
	s.a = grow(s.a, len(x))
	n := 0
	for _, v := range x {
		if d := math.Abs(v - centre); d == d {
			s.a[n] = math.Float64bits(d) | 1<<63
			n++
		}
	}
	return n
}

func grow[T any](s []T, n int) []T {
	if cap(s) < n {
		return make([]T, n)
	}
	return s[:n]
}

// pick sets out[i] to the order statistic of rank ranks[i] (from 0, ascending)
// of the n loaded keys. It destroys them.
func (s *Selector) pick(n int, ranks []int, out []float64) {
	s.b = grow(s.b, n)
	s.narrow(s.a[:n], s.b[:n], 0, ranks, out)
}

// narrow finds the wanted ranks among keys, of which the first has rank base.
// room is as long as keys.
func (s *Selector) narrow(keys, room []uint64, base int, ranks []int, out []float64) {
	if len(ranks) == 0 {
		return
	}
	if len(keys) <= fewKeys {
		slices.Sort(keys)
		for i, r := range ranks {
			out[i] = unkey(keys[r-base])
		}
		return
	}
	lo, hi := keys[0], keys[0]
	for _, k := range keys {
		lo, hi = min(lo, k), max(hi, k)
	}
	if lo == hi {
		for i := range ranks {
			out[i] = unkey(lo)
		}
		return
	}
	wide := min(bucketBits, bits.Len(uint(len(keys)))) // about a bucket a key, where keys are few
	shift := uint(max(0, bits.Len64(hi-lo)-wide))
	mask := uint64(1)<<wide - 1
	s.count = grow(s.count, 1<<wide)
	s.place = grow(s.place, 1<<wide)
	count := s.count
	clear(count)
	for _, k := range keys {
		count[(k-lo)>>shift&mask]++
	}

	// Find the buckets that hold a wanted rank and give each a stretch of room.
	type stretch struct{ from, to, base, firstRank, ranks int }
	var wanted []stretch
	place := s.place
	for i := range place {
		place[i] = -1
	}
	below, next, used := base, 0, 0
	for b := 0; b < len(count) && next < len(ranks); b++ {
		c := int(count[b])
		if first := next; ranks[first] < below+c {
			for next < len(ranks) && ranks[next] < below+c {
				next++
			}
			place[b] = int32(used)
			wanted = append(wanted, stretch{used, used + c, below, first, next - first})
			used += c
		}
		below += c
	}
	for _, k := range keys {
		b := (k - lo) >> shift & mask
		if p := place[b]; p >= 0 {
			room[p] = k
			place[b] = p + 1
		}
	}
	for _, w := range wanted {
		r := w.firstRank
		s.narrow(room[w.from:w.to], keys[w.from:w.to], w.base, ranks[r:r+w.ranks], out[r:r+w.ranks])
	}
}
