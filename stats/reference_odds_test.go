package stats_test

import "math"

// The odds ratios of the reference come out of a root finder that stops at an
// absolute 1.2e-4 (R's uniroot with its default tolerance, on the odds ratio or
// its reciprocal), so that they are good to two or three digits only: -12-188-5-295
// has its upper limit at 13.8354 where the root is at 13.8323. The driver
// therefore takes the same steps with functions of its own, summed term by term,
// and compares those; and it checks that the exact roots of compare.Fisher solve
// the same equations.

// zeroin is Brent's root finder. Source: Brent 1973, Algorithms for Minimization
// without Derivatives, chapter 4.
func zeroin(f func(float64) float64, a, b float64) float64 {
	tolerance := math.Sqrt(math.Sqrt(0x1p-52))
	fa, fb := f(a), f(b)
	c, fc := a, fa
	for range 1000 {
		previous := b - a
		if math.Abs(fc) < math.Abs(fb) {
			a, b, c = b, c, b
			fa, fb, fc = fb, fc, fb
		}
		enough := 2*0x1p-52*math.Abs(b) + tolerance/2
		step := (c - b) / 2
		if math.Abs(step) <= enough || fb == 0 {
			return b
		}
		if math.Abs(previous) >= enough && math.Abs(fa) > math.Abs(fb) {
			var p, q float64
			if a == c {
				p, q = (c-b)*fb/fa, 1-fb/fa
			} else {
				u, v, w := fa/fc, fb/fc, fb/fa
				p = w * ((c-b)*u*(u-v) - (b-a)*(v-1))
				q = (u - 1) * (v - 1) * (w - 1)
			}
			if p > 0 {
				q = -q
			} else {
				p = -p
			}
			if p < 0.75*(c-b)*q-math.Abs(enough*q)/2 && p < math.Abs(previous*q/2) {
				step = p / q
			}
		}
		if math.Abs(step) < enough {
			step = math.Copysign(enough, step)
		}
		a, fa = b, fb
		b += step
		fb = f(b)
		if fb > 0 == (fc > 0) {
			c, fc = a, fa
		}
	}
	return b
}

// odds are the functions of the odds ratio for a table: mean of the upper left
// count, and the probabilities of at most and of at least the observed one.
func odds(t [2][2]int) (mean, atMost, atLeast func(float64) float64) {
	a, b, c, d := t[0][0], t[0][1], t[1][0], t[1][1]
	lo, hi := max(0, a-d), a+min(b, c)
	choose := func(n, k int) float64 {
		u, _ := math.Lgamma(float64(n + 1))
		v, _ := math.Lgamma(float64(k + 1))
		w, _ := math.Lgamma(float64(n - k + 1))
		return u - v - w
	}
	sums := func(ratio float64) (all, first, below, above float64) {
		top := math.Inf(-1)
		logs := make([]float64, hi-lo+1)
		for k := lo; k <= hi; k++ {
			logs[k-lo] = choose(a+c, k) + choose(b+d, a+b-k) + float64(k)*math.Log(ratio)
			top = math.Max(top, logs[k-lo])
		}
		for k := lo; k <= hi; k++ {
			w := math.Exp(logs[k-lo] - top)
			all += w
			first += w * float64(k)
			if k <= a {
				below += w
			}
			if k >= a {
				above += w
			}
		}
		return all, first, below, above
	}
	at := func(pick func(all, first, below, above float64) float64, none float64) func(float64) float64 {
		return func(ratio float64) float64 {
			if ratio == 0 {
				return none
			}
			return pick(sums(ratio))
		}
	}
	whole := func(ok bool) float64 {
		if ok {
			return 1
		}
		return 0
	}
	mean = at(func(all, first, _, _ float64) float64 { return first / all }, float64(lo))
	atMost = at(func(all, _, below, _ float64) float64 { return below / all }, 1)
	atLeast = at(func(all, _, _, above float64) float64 { return above / all }, whole(a == lo))
	return mean, atMost, atLeast
}

// coarse solves f(ratio) = 0 as the reference does.
func coarse(f func(float64) float64, above bool) float64 {
	if above {
		return 1 / zeroin(func(t float64) float64 { return f(1 / t) }, 0x1p-52, 1)
	}
	return zeroin(f, 0, 1)
}

// coarseOdds are estimate, lower and upper limit, NaN where infinite.
func coarseOdds(t [2][2]int, alpha float64) (estimate, lower, upper float64) {
	a := t[0][0]
	lo, hi := max(0, a-t[1][1]), a+min(t[0][1], t[1][0])
	mean, atMost, atLeast := odds(t)
	estimate, lower, upper = 0, 0, math.NaN()
	if a > lo {
		estimate = math.NaN()
		lower = coarse(func(r float64) float64 { return atLeast(r) - alpha }, atLeast(1) < alpha)
	}
	if a < hi {
		upper = coarse(func(r float64) float64 { return atMost(r) - alpha }, atMost(1) > alpha)
		if a > lo {
			estimate = coarse(func(r float64) float64 { return mean(r) - float64(a) }, mean(1) < float64(a))
		}
	}
	return estimate, lower, upper
}

// solves says whether the exact odds ratios solve the equations.
func solves(t [2][2]int, alpha, estimate, lower, upper float64) bool {
	mean, atMost, atLeast := odds(t)
	ok := func(ratio, got, want float64) bool {
		return ratio == 0 || math.IsInf(ratio, 1) || math.Abs(got-want) <= 1e-9*want
	}
	return ok(estimate, mean(estimate), float64(t[0][0])) && ok(lower, atLeast(lower), alpha) && ok(upper, atMost(upper), alpha)
}
