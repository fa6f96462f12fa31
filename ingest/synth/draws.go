package synth

import "math"

// draws is a run of random numbers under one key, for what is drawn once a lot:
// there the order is fixed by the program.
type draws struct {
	k key
	n uint64
}

func newDraws(k key) *draws { return &draws{k: k} }

// under starts a run of its own, so that more numbers there move none here.
func (d *draws) under(n uint64) *draws { return &draws{k: d.k.at(1<<32 + n)} }

func (d *draws) uniform() float64 {
	d.n++
	return d.k.at(d.n).uniform()
}

func (d *draws) normal() float64 {
	d.n++
	return min(max(d.k.at(d.n).normal(), -3), 3)
}

func (d *draws) chance(p float64) bool { return d.uniform() < p }

func (d *draws) between(lo, hi float64) float64 { return lo + (hi-lo)*d.uniform() }

// logBetween is uniform in the logarithm.
func (d *draws) logBetween(lo, hi float64) float64 { return lo * math.Pow(hi/lo, d.uniform()) }

// factor is lognormal around 1.
func (d *draws) factor(sigma float64) float64 { return math.Exp(sigma * d.normal()) }

// below is one of 0..n-1.
func (d *draws) below(n int) int { return min(int(d.uniform()*float64(n)), n-1) }

// weighted picks an index by weights.
func (d *draws) weighted(weights ...float64) int {
	sum := 0.0
	for _, w := range weights {
		sum += w
	}
	at := d.uniform() * sum
	for i, w := range weights {
		if at -= w; at < 0 {
			return i
		}
	}
	return len(weights) - 1
}

// oneOf picks one of several.
func oneOf[T any](d *draws, of ...T) T { return of[d.below(len(of))] }

// some picks k of 0..n-1, ascending.
func (d *draws) some(k, n int) []int {
	var out []int
	for i := range n {
		if d.uniform() < float64(k-len(out))/float64(n-i) {
			out = append(out, i)
		}
	}
	return out
}
