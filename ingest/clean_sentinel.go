package ingest

import (
	"fmt"
	"math"
	"slices"

	"kneepoint/config"
)

// sentinelNumbers are what test programs and exports write for "no reading", in
// the unit of the file. Common practice, no source, but for 9.91e37 and 9.9e37,
// which SCPI-1999 gives to not-a-number and infinity (from memory).
var sentinelNumbers = []float64{-999, 999, -9999, 9999, -99999, 99999, -999999, 999999, -9999999, 9999999, -999.9, 999.9, -999.99, 999.99,
	-9999.9, 9999.9, -9999.99, 9999.99, -99.99, -32768, 32767}

// hugeValue is a number that no reading has, in any unit of a file; beyond it
// even a single one is a sentinel (1e30, 9.91e37, 1e99).
const hugeValue = 1e30

// sentinel is one value found to stand for no reading.
type sentinel struct {
	value float64 // SI
	n     int
}

// findSentinels looks for sentinels in a column and turns them into NaN.
//
// A value of the list is one when it repeats and lies far outside the body of
// the other values: beyond their 1 % and 99 % quantiles by more than five times
// the distance between these, with fewer other values that far out than there
// are copies of it; or when it is negative and all others are not. The tester's
// clamp, where the product file gives one, is none.
func findSentinels(v []float64, e extremes, units []config.Unit, clamp, floor float64) []sentinel {
	candidates, huge := candidateValues(units)
	low, high := nearestZero(candidates)
	if e.most < high && e.least > low {
		return nil
	}
	counts := map[float64]int{}
	for _, x := range v {
		if !(x >= high || x <= low) {
			continue
		}
		if math.Abs(x) >= huge {
			counts[x]++
		} else if _, ok := slices.BinarySearch(candidates, x); ok {
			counts[x]++
		}
	}
	if len(counts) == 0 {
		return nil
	}
	body := bodyOf(v, counts)
	var found []sentinel
	for x, n := range counts {
		if math.Abs(x) >= huge || n >= 2 && differ(x, clamp) && differ(x, floor) && body.farOut(x, n, v, counts) {
			found = append(found, sentinel{x, n})
		}
	}
	if len(found) == 0 {
		return nil
	}
	slices.SortFunc(found, func(a, b sentinel) int {
		if a.n != b.n {
			return b.n - a.n
		}
		return compareFloat(a.value, b.value)
	})
	for i, x := range v {
		if n := counts[x]; n > 0 {
			for _, s := range found {
				if s.value == x {
					v[i] = math.NaN()
					break
				}
			}
		}
	}
	return found
}

func compareFloat(a, b float64) int {
	switch {
	case a < b:
		return -1
	case a > b:
		return 1
	}
	return 0
}

// candidateValues are the sentinels in SI, for every unit that a file gives the
// test, sorted; huge is the hugeValue of the smallest of these units.
func candidateValues(units []config.Unit) (c []float64, huge float64) {
	huge = math.Inf(1)
	for _, u := range units {
		for _, s := range sentinelNumbers {
			c = append(c, u.ToSI(s))
		}
		huge = math.Min(huge, u.ToSI(hugeValue))
	}
	slices.Sort(c)
	return slices.Compact(c), huge
}

// nearestZero gives the negative and the positive candidate nearest to zero.
func nearestZero(sorted []float64) (low, high float64) {
	i, _ := slices.BinarySearch(sorted, 0)
	return sorted[i-1], sorted[i]
}

// valueBody is the body of a column without the candidates.
type valueBody struct {
	n        int
	q01, q99 float64
	negative int // of a sample
}

// bodyOf takes an even sample of the column, which is enough for its quantiles.
func bodyOf(v []float64, not map[float64]int) valueBody {
	const most = 20_000
	step := max(1, len(v)/most)
	var s []float64
	var b valueBody
	for i := 0; i < len(v); i += step {
		if x := v[i]; x == x && not[x] == 0 {
			s = append(s, x)
			if x < 0 {
				b.negative++
			}
		}
	}
	b.n = len(s)
	if b.n > 0 {
		slices.Sort(s)
		b.q01, b.q99 = s[b.n/100], s[b.n-1-b.n/100]
	}
	return b
}

func (b *valueBody) farOut(x float64, n int, v []float64, not map[float64]int) bool {
	if x < 0 && b.negative == 0 && x < -math.Abs(b.q01) {
		return true // also when there is no other value at all
	}
	if b.n < 3 {
		return false
	}
	spread := b.q99 - b.q01
	middle := (x + b.q99) / 2
	switch {
	case x > b.q99+5*spread && x > 2*b.q99:
	case x < b.q01-5*spread:
		middle = (x + b.q01) / 2
	default:
		return false
	}
	beyond := 0
	for _, y := range v {
		if not[y] == 0 && (x > middle && y > middle || x < middle && y < middle) {
			beyond++
		}
	}
	return beyond < n
}

// sentinels cleans one test's column and says what was found.
func (d *draft) sentinels(test int) []Finding {
	info := &d.tests[test]
	if info.cleaned > 0 && info.cleaned == info.files {
		return nil // they were taken out when the file was written
	}
	var findings []Finding
	for _, s := range findSentinels(d.values[test], d.seen[test], info.fileUnits, info.clamp, info.floor) {
		u := info.fileUnits[0]
		findings = append(findings, Finding{Code: "sentinel", Severity: Warning, Dice: s.n,
			Text:   fmt.Sprintf("test %s: %d %s %s, a number that stands for no reading; taken as missing%s", info.name, s.n, plural(s.n, "reading is", "readings are"), show(s.value, u), d.unjudged(test, s.n)),
			Remedy: "leave the cell empty in the export; if the readings are real, say so to whoever owns the test program"})
	}
	return findings
}
