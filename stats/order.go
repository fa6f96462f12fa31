package stats

import "math"

// Order returns the indexes of the values of x in ascending order of the values;
// equal values keep their order. NaNs are left out; -0 and 0 are equal. x is not
// modified.
//
// Keys that order like the numbers (see [Selector]) are sorted digit by digit,
// eleven bits at a time, which takes the same few walks over the data whatever
// they look like.
func Order(x []float64) []int32 {
	if len(x) > math.MaxInt32 {
		panic("stats: more than 2^31 values to order")
	}
	keys, at := make([]uint64, 0, len(x)), make([]int32, 0, len(x))
	for i, v := range x {
		if v == v {
			keys, at = append(keys, key(v+0)), append(at, int32(i))
		}
	}
	_, at = radix(keys, at)
	return at
}

// Sorted returns the values of x in ascending order, NaNs left out.
func Sorted(x []float64) []float64 {
	keys := make([]uint64, 0, len(x))
	for _, v := range x {
		if v == v {
			keys = append(keys, key(v+0))
		}
	}
	keys, _ = radix(keys, nil)
	out := make([]float64, len(keys))
	for i, k := range keys {
		out[i] = unkey(k)
	}
	return out
}

const digitBits = 11

// radix sorts keys, and at with them unless it is nil. Digits that all keys
// share, as readings of one unit and magnitude share many, cost one walk for all
// of them.
func radix(keys []uint64, at []int32) ([]uint64, []int32) {
	var differ uint64
	for _, k := range keys {
		differ |= k ^ keys[0]
	}
	keys2, at2 := make([]uint64, len(keys)), make([]int32, len(at))
	var from [1 << digitBits]int
	for shift := 0; shift < 64; shift += digitBits {
		if differ>>shift&(1<<digitBits-1) == 0 {
			continue
		}
		clear(from[:])
		for _, k := range keys {
			from[k>>shift&(1<<digitBits-1)]++
		}
		sum := 0
		for d, c := range from {
			from[d] = sum
			sum += c
		}
		for i, k := range keys {
			d := k >> shift & (1<<digitBits - 1)
			keys2[from[d]] = k
			if len(at) > 0 {
				at2[from[d]] = at[i]
			}
			from[d]++
		}
		keys, keys2, at, at2 = keys2, keys, at2, at
	}
	return keys, at
}

// Ranks returns the rank of each value, from 1, equal values sharing the mean of
// their ranks (midranks), and the tie sum
//
//	ties = sum (t^3 - t)
//
// over groups of t equal values, by which rank statistics correct their
// variance. The rank of a NaN is NaN and it takes no rank from others.
func Ranks(x []float64) (ranks []float64, ties float64) {
	ranks = make([]float64, len(x))
	for i := range ranks {
		ranks[i] = math.NaN()
	}
	order := Order(x)
	for i := 0; i < len(order); {
		j := i + 1
		for j < len(order) && x[order[j]] == x[order[i]] {
			j++
		}
		t := float64(j - i)
		ties += t*t*t - t
		for mid := float64(i+j+1) / 2; i < j; i++ {
			ranks[order[i]] = mid
		}
	}
	return ranks, ties
}
