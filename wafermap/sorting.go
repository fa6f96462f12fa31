package wafermap

import "math"

// ascending returns the places of values in ascending order, equal ones in their own order;
// NaN comes last. Counting sort by eleven bits at a time, first by the leading ones alone:
// where values are not of a kind, that leaves next to nothing to move.
func ascending(values []float64) []int32 {
	const few = 4 // moves a value
	keys, order := leading(values, sortTurns/2)
	left := few * len(keys)
	for i := 1; i < len(keys); i++ {
		k, o, at := keys[i], order[i], i
		for ; at > 0 && keys[at-1] > k; at-- {
			keys[at], order[at] = keys[at-1], order[at-1]
		}
		keys[at], order[at] = k, o
		if left -= i - at; left < 0 {
			_, order = leading(values, sortTurns)
			return order
		}
	}
	return order
}

const sortBits, sortTurns = 11, 6

// leading sorts by the leading bits of values, eleven a turn; six turns sort wholly.
func leading(values []float64, turns int) (keys []uint64, order []int32) {
	keys, order = make([]uint64, len(values)), make([]int32, len(values))
	var counts [sortTurns][1 << sortBits]int32
	first := sortTurns - turns
	for i, v := range values {
		k := math.Float64bits(v)
		switch {
		case v != v:
			k = math.MaxUint64
		case v == 0: // of either sign
			k = 1 << 63
		case k>>63 == 1:
			k = ^k
		default:
			k |= 1 << 63
		}
		keys[i], order[i] = k, int32(i)
		for t := first; t < sortTurns; t++ {
			counts[t][k>>(sortBits*t)&(1<<sortBits-1)]++
		}
	}
	nextKeys, next := make([]uint64, len(values)), make([]int32, len(values))
	for t := first; t < sortTurns; t++ {
		count := &counts[t]
		sum := int32(0)
		alike := false // in these bits
		for d, c := range count {
			alike = alike || int(c) == len(values)
			count[d] = sum
			sum += c
		}
		if alike {
			continue
		}
		for i, k := range keys {
			to := &count[k>>(sortBits*t)&(1<<sortBits-1)]
			nextKeys[*to], next[*to] = k, order[i]
			*to++
		}
		keys, nextKeys = nextKeys, keys
		order, next = next, order
	}
	return keys, order
}
