package rehearse

import (
	"math"
	"math/rand/v2"
	"sort"
)

// Smallest is the loss at which a cause is named first nine times in ten.
type Smallest struct {
	Cause string `json:"cause"`
	Lots  int    `json:"lots"`
	Found int    `json:"found"`
	// Loss with its 95 % interval, as shares of the dice. Outside of the range of
	// losses that were tried it is held at the range's end, and Beyond says so: -1 even
	// the smallest are found, +1 not even the largest.
	Loss   float64 `json:"loss"`
	Lower  float64 `json:"lower"`
	Upper  float64 `json:"upper"`
	Beyond int     `json:"beyond"`
	Why    string  `json:"why,omitempty"` // why there is no such loss
}

// trial is one lot: the log of what the cause costs, and whether it was found.
type trial struct {
	x     float64
	found bool
}

const (
	fewestTrials = 8
	resamples    = 200
	ninetenths   = 2.1972245773362196 // logit of 0.9
)

// smallest fits the chance of being found as a logistic curve over the log of the
// loss that does not fall (maximum likelihood with a weak Gaussian prior, which keeps
// the slope finite when large and small losses part without overlap), and reads it at
// 0.9. The interval is that of the percentiles of resampled lots (bootstrap, Efron and
// Tibshirani 1993), seeded by the cause's name.
func smallest(cause string, trials []trial, least, most float64) Smallest {
	s := Smallest{Cause: cause, Lots: len(trials)}
	for _, t := range trials {
		if t.found {
			s.Found++
		}
	}
	if s.Lots < fewestTrials {
		s.Why = "too few lots"
		return s
	}
	lo, hi := math.Log(least), math.Log(most)
	hold := func(x float64) float64 { return math.Exp(min(max(x, lo), hi)) }
	at := ninety(trials, lo, hi)
	switch {
	case at <= lo:
		s.Beyond = -1
	case at >= hi:
		s.Beyond = 1
	}
	s.Loss = hold(at)
	seed := uint64(len(cause))
	for _, c := range []byte(cause) {
		seed = seed*131 + uint64(c)
	}
	r := rand.New(rand.NewPCG(seed, uint64(len(trials))))
	again := make([]trial, len(trials))
	var all []float64
	for range resamples {
		for i := range again {
			again[i] = trials[r.IntN(len(trials))]
		}
		all = append(all, ninety(again, lo, hi))
	}
	sort.Float64s(all)
	s.Lower, s.Upper = hold(all[resamples/40]), hold(all[resamples-1-resamples/40])
	return s
}

// ninety is the log loss at which the curve reaches 0.9; beyond the range when it
// does not reach it there.
func ninety(trials []trial, lo, hi float64) float64 {
	mid, half := (lo+hi)/2, (hi-lo)/2
	a, b := logistic(trials, mid, half)
	switch {
	case a-b >= ninetenths:
		return lo - 1
	case a+b <= ninetenths:
		return hi + 1
	}
	return mid + half*(ninetenths-a)/b
}

// logistic fits logit P = a + b (x - mid) / half with b >= 0 by Newton steps on the
// penalised likelihood; a ~ N(1, 3), b ~ N(2, 2).
func logistic(trials []trial, mid, half float64) (a, b float64) {
	const ma, sa, mb, sb = 1, 3, 2, 2
	a, b = ma, mb
	for range 50 {
		ga, gb := (ma-a)/(sa*sa), (mb-b)/(sb*sb)
		haa, hab, hbb := 1.0/(sa*sa), 0.0, 1.0/(sb*sb)
		for _, t := range trials {
			z := (t.x - mid) / half
			p := 1 / (1 + math.Exp(-a-b*z))
			d := -p
			if t.found {
				d = 1 - p
			}
			w := p * (1 - p)
			ga, gb = ga+d, gb+d*z
			haa, hab, hbb = haa+w, hab+w*z, hbb+w*z*z
		}
		det := haa*hbb - hab*hab
		da, db := (hbb*ga-hab*gb)/det, (haa*gb-hab*ga)/det
		if b+db < 0 { // on the bound: the level alone
			db = -b
			da = (ga - hab*db) / haa
		}
		step := min(1, 2/max(math.Abs(da), math.Abs(db), 1e-12))
		a, b = a+step*da, b+step*db
		if math.Abs(da) < 1e-9 && math.Abs(db) < 1e-9 {
			break
		}
	}
	return a, b
}
