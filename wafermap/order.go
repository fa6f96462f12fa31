package wafermap

import (
	"cmp"
	"math"
	"slices"
)

// findSite looks for the test sites whose dice fail more than those of the others.
func (f *field) findSite() *pattern {
	if f.in.Site == nil {
		return nil
	}
	at := map[int32]int{}
	var names []int32
	var sites []tally
	for i, r := range f.rows {
		s := f.in.Site[r]
		if s == Missing {
			continue
		}
		k, ok := at[s]
		if !ok {
			k = len(sites)
			at[s] = k
			names, sites = append(names, s), append(sites, tally{})
		}
		sites[k].n++
		sites[k].e += f.p[i]
		if f.fail[i] {
			sites[k].o++
		}
	}
	if len(sites) < 2 {
		return nil
	}
	order := make([]int, len(sites))
	for k := range order {
		order[k] = k
	}
	over := func(k int) float64 { return (sites[k].o - sites[k].e) / math.Sqrt(sites[k].e+1e-9) }
	slices.SortFunc(order, func(a, b int) int { return cmp.Or(cmp.Compare(over(b), over(a)), cmp.Compare(names[a], names[b])) })
	var best *pattern
	var t tally
	var chosen []int32
	choices := 0.0
	for k, c := range order {
		if k >= (len(sites)+1)/2 {
			break
		}
		t = t.plus(sites[c])
		chosen = append(chosen, names[c])
		choices += math.Log(float64(len(sites)-k) / float64(k+1))
		if gain := f.gain(t); gain > 0 && (best == nil || gain-choices > best.gain-best.cost) {
			best = &pattern{shape: shapeSite, sites: slices.Sorted(slices.Values(chosen)), tally: t, gain: gain, cost: choices}
		}
	}
	return best
}

// findOrder looks for a stretch of the test order.
func (f *field) findOrder() *pattern {
	if f.in.Order == nil {
		return nil
	}
	var orders []int32
	sums := []tally{{}}
	for _, i := range f.inOrder() {
		o := f.in.Order[f.rows[i]]
		if len(orders) == 0 || orders[len(orders)-1] != o {
			orders = append(orders, o)
			sums = append(sums, sums[len(sums)-1])
		}
		t := &sums[len(sums)-1]
		t.n++
		t.e += f.p[i]
		if f.fail[i] {
			t.o++
		}
	}
	p := f.scanSums(sums, 0.5)
	if p == nil {
		return nil
	}
	p.shape = shapeOrder
	p.from, p.to = int(orders[p.from]), int(orders[p.to-1])+1
	return p
}

// inOrder lists the dice whose place in the test order is known, in that order.
func (f *field) inOrder() []int32 {
	if f.ordered != nil {
		return f.ordered
	}
	dice := make([]int32, 0, len(f.rows))
	lo, hi := math.MaxInt32, math.MinInt32
	for i, r := range f.rows {
		if o := int(f.in.Order[r]); o != Missing {
			dice = append(dice, int32(i))
			lo, hi = min(lo, o), max(hi, o)
		}
	}
	order := func(i int32) int { return int(f.in.Order[f.rows[i]]) }
	f.ordered = dice
	if hi-lo > 16*len(dice) {
		slices.SortStableFunc(dice, func(a, b int32) int { return cmp.Compare(order(a), order(b)) })
		return dice
	}
	next := make([]int32, max(0, hi-lo+2)) // where the next die of each number goes
	for _, i := range dice {
		next[order(i)-lo+1]++
	}
	for k := 1; k < len(next); k++ {
		next[k] += next[k-1]
	}
	f.ordered = make([]int32, len(dice))
	for _, i := range dice {
		to := &next[order(i)-lo]
		f.ordered[*to] = i
		*to++
	}
	return f.ordered
}

// findBand looks for rows or columns of the grid next to each other, right across.
func (f *field) findBand() *pattern {
	var best *pattern
	for axis := range 2 {
		sums := []tally{{}}
		if axis == 0 {
			for j := range f.lines {
				c, e := f.along.span(j, 0, f.cols)
				sums = append(sums, sums[j].plus(unpack(c, e)))
			}
		} else {
			for i := range f.cols {
				c, e := f.across.span(i, 0, f.lines)
				sums = append(sums, sums[i].plus(unpack(c, e)))
			}
		}
		p := f.scanSums(sums, 0.4)
		if p == nil || best != nil && p.gain-p.cost <= best.gain-best.cost {
			continue
		}
		p.shape, p.axis = shapeBand, axis
		if axis == 0 {
			p.from, p.to = f.y0+p.from*f.stepY, f.y0+p.to*f.stepY
		} else {
			p.from, p.to = f.x0+p.from*f.stepX, f.x0+p.to*f.stepX
		}
		best = p
	}
	return best
}

// scanSums looks for the stretch with the highest gain in a row of running sums, of at
// most a share of its dice: stretches of all lengths first, then the best one's ends.
func (f *field) scanSums(sums []tally, share float64) *pattern {
	n := len(sums) - 1
	value := func(from, to int) float64 {
		if from < 0 || to > n || from >= to {
			return 0
		}
		t := sums[to].minus(sums[from])
		if t.o < 3 || t.n > share*f.total.n {
			return 0
		}
		return f.gain(t) - sizeCost(t, f.total)
	}
	top, from, to := 0.0, 0, 0
	for length := 1.0; length <= float64(n); length = max(length+1, length*1.2) {
		l := int(length)
		for a := 0; a+l <= n; a += max(1, l/8) {
			t := sums[a+l].minus(sums[a])
			if t.n == 0 || f.hopeless(t, top) || f.hopeless(t, top+sizeCost(t, f.total)) {
				continue
			}
			if v := value(a, a+l); v > top {
				top, from, to = v, a, a+l
			}
		}
	}
	if top <= 0 {
		return nil
	}
	for reach := max(1, (to-from)/8); reach > 0; reach /= 2 {
		for moved := true; moved; {
			moved = false
			for _, d := range [4][2]int{{reach, 0}, {-reach, 0}, {0, reach}, {0, -reach}} {
				if v := value(from+d[0], to+d[1]); v > top {
					top, from, to, moved = v, from+d[0], to+d[1], true
				}
			}
		}
	}
	t := sums[to].minus(sums[from])
	return &pattern{from: from, to: to, tally: t, gain: f.gain(t), cost: sizeCost(t, f.total)}
}
