package wafermap

import (
	"math"
	"math/rand/v2"
)

// fails draws fails: background, raised by each pattern up to its contrast.
func makeFails(random *rand.Rand, n int, background float64, patterns []*madePattern, contrast []float64, chained bool) []bool {
	fail := make([]bool, n)
	for i := range fail {
		rate := background
		if chained { // causes act one after the other on what is still good
			good := 1 - background
			for k, p := range patterns {
				if p.misses > 0 && random.Float64() < p.misses {
					continue
				}
				extra := background * (contrast[k] - 1) / (1 - background)
				good *= 1 - math.Min(1, extra)*p.weight[i]
			}
			rate = 1 - good
		} else {
			for k, p := range patterns {
				if p.misses > 0 && random.Float64() < p.misses {
					continue
				}
				rate *= 1 + (contrast[k]-1)*p.weight[i]
			}
		}
		fail[i] = random.Float64() < math.Min(rate, 0.97)
	}
	return fail
}

// oracle is the likelihood-ratio statistic, as z, of pattern k with its known weights, the
// other patterns being known too.
func oracle(fail []bool, patterns []*madePattern, k int) float64 {
	others := append([]*madePattern{}, patterns[:k]...)
	others = append(others, patterns[k+1:]...)
	gain := likelihood(fail, append([]*madePattern{patterns[k]}, others...)) - likelihood(fail, others)
	return math.Sqrt(2 * math.Max(0, gain))
}

// likelihood is the highest log-likelihood of a background rate raised by a factor for
// each pattern, by its known weights: one parameter after the other by golden section.
func likelihood(fail []bool, patterns []*madePattern) float64 {
	const steps = 20 // weights are rounded to a twentieth
	type kind struct{ o, n float64 }
	cells := map[[2]int]*kind{}
	var keys [][2]int
	total := kind{}
	for i, f := range fail {
		var key [2]int
		for k, p := range patterns {
			key[k] = int(math.Round(p.weight[i] * steps))
		}
		c := cells[key]
		if c == nil {
			c = &kind{}
			cells[key] = c
			keys = append(keys, key)
		}
		c.n++
		total.n++
		if f {
			c.o++
			total.o++
		}
	}
	if total.o == 0 || total.o == total.n {
		return 0
	}
	x := make([]float64, len(patterns)+1)
	x[0] = math.Log(total.o / total.n)
	like := func() float64 {
		l := 0.0
		for _, key := range keys {
			rate := math.Exp(x[0])
			for k := range patterns {
				rate *= 1 + (math.Exp(x[k+1])-1)*float64(key[k])/steps
			}
			rate = math.Min(rate, 0.97)
			l += cells[key].o*math.Log(rate) + (cells[key].n-cells[key].o)*math.Log(1-rate)
		}
		return l
	}
	best := like()
	for range 30 {
		before := best
		for k := range x {
			lo, hi := x[k]-1.5, x[k]+1.5
			if k > 0 {
				lo = math.Max(lo, 0)
			}
			const g = 0.6180339887498949
			a, b := hi-g*(hi-lo), lo+g*(hi-lo)
			old := x[k]
			x[k] = a
			fa := like()
			x[k] = b
			fb := like()
			for hi-lo > 1e-3 {
				if fa > fb {
					hi, b, fb = b, a, fa
					a = hi - g*(hi-lo)
					x[k] = a
					fa = like()
				} else {
					lo, a, fa = a, b, fb
					b = lo + g*(hi-lo)
					x[k] = b
					fb = like()
				}
			}
			x[k] = (lo + hi) / 2
			if v := like(); v > best {
				best = v
			} else {
				x[k] = old
			}
		}
		if best < before+1e-4 {
			break
		}
	}
	return best
}
