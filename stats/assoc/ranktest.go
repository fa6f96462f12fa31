package assoc

import (
	"math"

	"gonum.org/v1/gonum/mathext"
	"kneepoint/stats"
)

// groupTest asks whether values differ by group, on ranks. With blocks (several
// lots, or wafers with a value for each site) values are first taken relative to
// their block's median, and the degrees of freedom shrink by the blocks.
//
// The statistic is F of a one-way layout of the ranks. Where cases can be dealt to
// groups (within blocks) in no more than exactDeals ways its p is by all of them,
// else by the F distribution.
type groupTest struct {
	p, strength float64
	n           int
	why         string
}

const exactDeals = 20000

// rankGroups tests; groups are from 0 to k-1, all of them present. block may be
// nil.
func rankGroups(value []float64, group []int32, k int, block []int32) groupTest {
	t := groupTest{p: math.NaN(), strength: math.NaN(), n: len(value)}
	blocks := 1
	aligned := value
	if block != nil {
		aligned, blocks = align(value, block)
	}
	df1, df2 := float64(k-1), float64(t.n-k-(blocks-1))
	if k < 2 {
		t.why = "one group only"
		return t
	}
	if df2 < 1 {
		t.why = "too few cases for so many groups"
		return t
	}
	rank, _ := stats.Ranks(aligned)
	size := make([]float64, k)
	sum := make([]float64, k)
	mid := float64(t.n+1) / 2
	total := 0.0
	for i, r := range rank {
		size[group[i]]++
		sum[group[i]] += r - mid
		total += (r - mid) * (r - mid)
	}
	if total == 0 {
		t.why = "all cases are equal"
		return t
	}
	between := squares(sum, size)
	share := math.Min(1, between/total)
	t.strength = math.Max(0, 1-(1-share)*(df1+df2)/df2)
	if p, ok := dealt(rank, group, block, size, between); ok {
		t.p = p
		return t
	}
	f := (share / df1) / ((1 - share) / df2)
	t.p = upperF(f, df1, df2)
	return t
}

func squares(sum, size []float64) float64 {
	s := 0.0
	for g := range sum {
		s += sum[g] * sum[g] / size[g]
	}
	return s
}

// upperF is the chance of an F beyond f.
func upperF(f, df1, df2 float64) float64 {
	if math.IsInf(f, 1) {
		return 0
	}
	return mathext.RegIncBeta(df2/2, df1/2, df2/(df2+df1*f))
}

// align takes each block's median off its values, and counts blocks.
func align(value []float64, block []int32) (aligned []float64, blocks int) {
	members := map[int32][]float64{}
	for i, b := range block {
		members[b] = append(members[b], value[i])
	}
	middle := map[int32]float64{}
	for b, v := range members {
		middle[b] = stats.Median(v)
	}
	aligned = make([]float64, len(value))
	for i, b := range block {
		aligned[i] = value[i] - middle[b]
	}
	return aligned, len(members)
}

// dealt is the share of all ways to deal the cases of each block to its groups
// that are as far apart as the one seen; not ok when there are too many.
func dealt(rank []float64, group, block []int32, size []float64, seen float64) (p float64, ok bool) {
	if block == nil {
		block = make([]int32, len(rank))
	}
	var order []int32
	rows := map[int32][]int{}
	for i, b := range block {
		if rows[b] == nil {
			order = append(order, b)
		}
		rows[b] = append(rows[b], i)
	}
	ways := 1.0
	counts := make([][]int, len(order)) // of each group in each block
	for k, b := range order {
		counts[k] = make([]int, len(size))
		for j, i := range rows[b] {
			counts[k][group[i]]++
			ways *= float64(j + 1)
		}
		for _, c := range counts[k] {
			for j := range c {
				ways /= float64(j + 1)
			}
		}
		if ways > exactDeals*1e6 {
			return 0, false
		}
	}
	if ways > exactDeals {
		return 0, false
	}
	mid := float64(len(rank)+1) / 2
	sum := make([]float64, len(size))
	all, far := 0, 0
	var deal func(k, j int)
	deal = func(k, j int) {
		if k == len(order) {
			all++
			if squares(sum, size) >= seen*(1-1e-12) {
				far++
			}
			return
		}
		members := rows[order[k]]
		if j == len(members) {
			deal(k+1, 0)
			return
		}
		r := rank[members[j]] - mid
		for g := range counts[k] {
			if counts[k][g] > 0 {
				counts[k][g]--
				sum[g] += r
				deal(k, j+1)
				sum[g] -= r
				counts[k][g]++
			}
		}
	}
	deal(0, 0)
	return float64(far) / float64(all), true
}

// oneSample is Student's t of values against zero.
func oneSample(x []float64) (mean, se, p float64) {
	m := stats.MomentsOf(x)
	n := float64(m.N)
	se = m.SD() / math.Sqrt(n)
	if m.N < 2 {
		return m.Mean, math.NaN(), math.NaN()
	}
	if se == 0 {
		if m.Mean == 0 {
			return 0, 0, 1
		}
		return m.Mean, 0, 0
	}
	t := m.Mean / se
	return m.Mean, se, mathext.RegIncBeta((n-1)/2, 0.5, (n-1)/(n-1+t*t))
}
