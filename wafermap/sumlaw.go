package wafermap

import (
	"math"
	"math/rand/v2"
	"slices"
)

// sumLaw is the law of a sum of values drawn from a wafer without putting them back.
type sumLaw struct {
	n        int
	mean, sd float64
	fails    int // values of 1 where all are 0 or 1, else -1
	// else the values in groups, about the mean
	values       []float64
	at, share    []float64
	most         int         // values in a sum
	above, below []sumCounts // by number of values less 1: draws at least so far out
	tables       []*sumTable // by number of values
}

func newSumLaw(values []float64) *sumLaw {
	l := &sumLaw{n: len(values), values: values}
	for i, v := range values {
		l.mean += (v - l.mean) / float64(i+1)
		if v == 1 && l.fails >= 0 {
			l.fails++
		} else if v != 0 {
			l.fails = -1
		}
	}
	for _, v := range values {
		l.sd += sq(v-l.mean) / float64(l.n)
	}
	if l.sd = math.Sqrt(l.sd); !(l.sd > 1e-12*math.Abs(l.mean)) {
		l.sd = 0
		return l
	}
	if l.fails >= 0 {
		return l
	}
	sorted := make([]float64, len(values))
	for i, k := range ascending(values) {
		sorted[i] = values[k]
	}
	l.group(sorted)
	return l
}

// group replaces sorted values by the means of groups: single ones at the ends, which
// make the tails, and ever more towards the middle.
func (l *sumLaw) group(sorted []float64) {
	const singles, growth = 12, 1.25
	take := func(from, to int) {
		sum := 0.0
		for _, v := range sorted[from:to] {
			sum += v - l.mean
		}
		l.at, l.share = append(l.at, sum/float64(to-from)), append(l.share, float64(to-from)/float64(l.n))
	}
	size := 1.0
	for lo, hi, k := 0, len(sorted), 0; lo < hi; k++ {
		if k >= singles {
			size *= growth
		}
		n := min(int(size), hi-lo)
		take(lo, lo+n)
		if lo += n; lo < hi {
			n = min(int(size), hi-lo)
			take(hi-n, hi)
			hi -= n
		}
	}
}

// tails returns a sum of k values in standard deviations, and its two-sided chance: twice
// that of a sum as far out or further on its side.
func (l *sumLaw) tails(k int, sum float64) (z, p float64) {
	if k >= len(l.tables) {
		l.tables = append(l.tables, make([]*sumTable, k+1-len(l.tables))...)
	}
	t := l.tables[k]
	if t == nil {
		if l.fails >= 0 {
			t = hypergeometric(l.n, l.fails, k)
		} else {
			t = l.drawn(k)
		}
		n, count := float64(l.n), float64(k)
		t.mean, t.sd = count*l.mean, l.sd*math.Sqrt(count*(n-count)/(n-1))
		l.tables[k] = t
	}
	z = (sum - t.mean) / t.sd
	return z, min(1, 2*t.tail(z, sum))
}

// sumTable holds upper and lower tails: by the sum for fails, else by z with the
// logarithm to interpolate.
type sumTable struct {
	exact        bool
	mean, sd     float64 // of the sum
	upper, lower []float64
}

const (
	draws       = 20000
	saddleStep  = 0.25 // standard deviations
	saddleSteps = 160
)

// sumCounts are numbers of draws by how far out they are.
type sumCounts [saddleSteps + 1]int32

func (t *sumTable) tail(z, sum float64) float64 {
	if t.exact {
		k := int(math.Round(sum))
		return min(t.upper[k], t.lower[k])
	}
	side := t.upper
	if z < 0 {
		side, z = t.lower, -z
	}
	at := z / saddleStep
	i := int(at)
	if i >= len(side)-1 {
		return math.Exp(side[max(0, len(side)-1)] - z) // not reached by any draw
	}
	return math.Exp(side[i] + (at-float64(i))*(side[i+1]-side[i]))
}

// hypergeometric tails of the number of fails among k of n dice.
func hypergeometric(n, fails, k int) *sumTable {
	t := &sumTable{exact: true, upper: make([]float64, k+2), lower: make([]float64, k+1)}
	choose := func(n, k int) float64 {
		a, _ := math.Lgamma(float64(n) + 1)
		b, _ := math.Lgamma(float64(k) + 1)
		c, _ := math.Lgamma(float64(n-k) + 1)
		return a - b - c
	}
	p := make([]float64, k+1)
	for j := range p {
		if j <= fails && k-j <= n-fails {
			p[j] = math.Exp(choose(fails, j) + choose(n-fails, k-j) - choose(n, k))
		}
	}
	for j := k; j >= 0; j-- {
		t.upper[j] = t.upper[j+1] + p[j]
	}
	sum := 0.0
	for j := range p {
		sum += p[j]
		t.lower[j] = sum
	}
	return t
}

// drawSums counts, for sums of 1, 2, ... most values, how many of 20,000 random draws of so
// many lie in each step of saddleStep standard deviations above and below the mean. The
// sums share their draws.
func (l *sumLaw) drawSums(most int) {
	random := rand.New(rand.NewPCG(0x6c6f63616c, uint64(l.n)<<16|uint64(most)))
	l.above, l.below = make([]sumCounts, most), make([]sumCounts, most)
	chosen := make([]int, most)
	units := make([]float64, most)
	n := float64(l.n)
	for k := range units {
		count := float64(k + 1)
		units[k] = l.sd * math.Sqrt(count*(n-count)/(n-1))
	}
	for range draws {
		sum := 0.0
		for i := 0; i < most; {
			c := random.IntN(l.n)
			if slices.Contains(chosen[:i], c) {
				continue
			}
			chosen[i] = c
			sum += l.values[c] - l.mean
			z := sum / units[i] / saddleStep
			if z >= 0 {
				l.above[i][int(min(z, saddleSteps))]++
			}
			if z <= 0 {
				l.below[i][int(min(-z, saddleSteps))]++
			}
			i++
		}
	}
	for i := range most { // from counts in steps to counts beyond
		for s := saddleSteps - 1; s >= 0; s-- {
			l.above[i][s] += l.above[i][s+1]
			l.below[i][s] += l.below[i][s+1]
		}
	}
}

// drawn tabulates tails of a sum of k values: from random draws as far out as at least a
// hundred of them reach, and from there on as the saddlepoint tail goes on.
func (l *sumLaw) drawn(k int) *sumTable {
	const sure = 100
	if k > len(l.above) {
		l.drawSums(max(k, l.most))
	}
	t := &sumTable{}
	for _, sign := range [2]float64{1, -1} {
		var side []float64
		beyond := &l.above[k-1]
		if sign < 0 {
			beyond = &l.below[k-1]
		}
		s, offset := 0.0, nan // saddlepoint
		for step := range saddleSteps + 1 {
			x := saddleStep * float64(step)
			value, next, ok := l.lugannaniRice(x*l.sd/math.Sqrt(float64(k)), sign, float64(k), s)
			if beyond[step] >= sure {
				side = append(side, math.Log(float64(beyond[step])/draws))
				offset = side[len(side)-1] - value
			} else if ok && !math.IsNaN(offset) {
				side = append(side, min(side[len(side)-1], value+offset))
			} else {
				break // further out than any sum
			}
			if ok {
				s = next
			}
		}
		if sign > 0 {
			t.upper = side
		} else {
			t.lower = side
		}
	}
	return t
}

// lugannaniRice is the logarithm of the chance that the mean of k values lies target
// beyond the mean on the side of sign. s is where to start looking for the saddlepoint.
func (l *sumLaw) lugannaniRice(target, sign, k, s float64) (value, saddle float64, ok bool) {
	if target < 1e-9*l.sd {
		return math.Log(0.5), 0, true
	}
	var cumulant, second float64
	for range 60 {
		// moments of the values tilted by exp(s x), scaled against overflow
		top := math.Inf(-1)
		for _, x := range l.at {
			top = max(top, s*sign*x)
		}
		var m0, m1, m2 float64
		for i, x := range l.at {
			w := l.share[i] * math.Exp(s*sign*x-top)
			m0 += w
			m1 += w * sign * x
			m2 += w * x * x
		}
		mean := m1 / m0
		second = m2/m0 - mean*mean
		cumulant = top + math.Log(m0)
		if !(second > 1e-12*l.sd*l.sd) {
			return 0, 0, false // beyond the largest value
		}
		step := (target - mean) / second
		s += math.Max(-0.5*s, math.Min(step, 2/l.sd+s))
		if math.Abs(target-mean) < 1e-7*l.sd {
			break
		}
	}
	w2 := 2 * k * (s*target - cumulant)
	if !(w2 > 0) {
		return math.Log(0.5), s, true
	}
	w, u := math.Sqrt(w2), s*math.Sqrt(k*second)
	if w < 0.05 { // the formula loses its digits near the mean
		return math.Log(upperNormal(w)), s, true
	}
	// Barndorff-Nielsen's form of the same: positive at any distance
	r := w + math.Log(u/w)/w
	if r > 35 {
		return -r*r/2 - math.Log(r*math.Sqrt(2*math.Pi)), s, true
	}
	return math.Log(upperNormal(r)), s, true
}
