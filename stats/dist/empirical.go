package dist

import (
	"math"
	"slices"

	"kneepoint/stats"
)

// Steps is the distribution function that readings show by themselves, without
// the assumption of a family: at each different exact value, the share of the
// population up to it.
type Steps struct {
	X []float64 // different exact values, ascending
	P []float64 // share up to and including X[i]; never falls
	// Below is the share below the first value: nonzero where readings are only
	// known to be at most something. P of the last value is less than 1 where some
	// are only known to be at least something.
	Below float64
	N     int // readings, bounds included
}

// Empirical computes [Steps] of readings marked as in [FitNormal]. Without marks
// P is the plain count; with readings "at least" it is the Kaplan-Meier
// estimate, with "at most" its mirror, and with both Turnbull's self-consistent
// one. A bound at an exact value counts as beyond it. NaNs are skipped; it
// panics when lengths differ.
//
// Sources: Kaplan and Meier 1958, J. Amer. Statist. Assoc. 53, 457-481; Turnbull
// 1974, ibid. 69, 169-173.
func Empirical(x []float64, censor []int8) Steps {
	if censor != nil && len(censor) != len(x) {
		panic("stats/dist: slice length mismatch")
	}
	if censor == nil {
		return plain(stats.Sorted(x))
	}
	var only, least, most []float64
	for i, v := range x {
		switch {
		case v != v:
		case censor[i] == 0:
			only = append(only, v)
		case censor[i] > 0:
			least = append(least, v)
		default:
			most = append(most, v)
		}
	}
	s := plain(stats.Sorted(only))
	n := float64(s.N)
	count := make([]float64, len(s.X))
	for i, p := range s.P {
		count[i] = p * n
		if i > 0 {
			count[i] -= s.P[i-1] * n
		}
		count[i] = math.Round(count[i])
	}
	slices.Sort(least)
	slices.Sort(most)
	s.N += len(least) + len(most)
	switch {
	case len(most) == 0:
		s.kaplanMeier(count, least)
	case len(least) == 0:
		s.mirrored(count, most)
	default:
		s.turnbull(count, least, most)
	}
	return s
}

func plain(v []float64) Steps {
	s := Steps{N: len(v)}
	for i := 0; i < len(v); {
		j := i + 1
		for j < len(v) && v[j] == v[i] {
			j++
		}
		s.X, s.P = append(s.X, v[i]), append(s.P, float64(j)/float64(len(v)))
		i = j
	}
	return s
}

// kaplanMeier walks upwards: of those still at risk, how many stop here.
func (s *Steps) kaplanMeier(count, least []float64) {
	risk, left, k := float64(s.N), 1.0, 0
	for i, v := range s.X {
		for k < len(least) && least[k] < v {
			risk--
			k++
		}
		left *= 1 - count[i]/risk
		risk -= count[i]
		s.P[i] = 1 - left
	}
}

// mirrored walks downwards.
func (s *Steps) mirrored(count, most []float64) {
	risk, below, k := float64(s.N), 1.0, len(most)-1
	for i := len(s.X) - 1; i >= 0; i-- {
		for k >= 0 && most[k] > s.X[i] {
			risk--
			k--
		}
		s.P[i] = below
		below *= 1 - count[i]/risk
		risk -= count[i]
	}
	s.Below = below
}

// turnbull shares each bound out over the values beyond it, by the shares found
// so far, until these stand still.
func (s *Steps) turnbull(count, least, most []float64) {
	k := len(s.X)
	if k == 0 {
		s.Below = math.NaN()
		return
	}
	// Places: 0 below all, 1..k the values, k+1 above all. first[i] counts the
	// bounds "at least" whose values begin at place i, last[i] those "at most" that
	// end there.
	first, last := make([]float64, k+2), make([]float64, k+2)
	for _, v := range least {
		i, _ := slices.BinarySearch(s.X, v)
		for i < k && s.X[i] <= v {
			i++
		}
		first[i+1]++
	}
	for _, v := range most {
		i, _ := slices.BinarySearch(s.X, v)
		last[i]++
	}
	n := float64(s.N)
	mass := make([]float64, k+2)
	for i := range mass {
		mass[i] = 1 / float64(k+2)
	}
	next, up, down := make([]float64, k+2), make([]float64, k+2), make([]float64, k+2)
	for range 2000 {
		// Each place gets, of every bound that covers it, its part of the bound's mass.
		above, part := 0.0, 0.0
		for i := k + 1; i >= 0; i-- {
			above += mass[i]
			up[i] = above
		}
		below := 0.0
		for i := range mass {
			below += mass[i]
			down[i] = below
		}
		for i := range mass {
			if first[i] > 0 && up[i] > 0 {
				part += first[i] / up[i]
			}
			next[i] = part * mass[i]
		}
		part = 0
		for i := k + 1; i >= 0; i-- {
			if last[i] > 0 && down[i] > 0 {
				part += last[i] / down[i]
			}
			next[i] += part * mass[i]
			if i >= 1 && i <= k {
				next[i] += count[i-1]
			}
			next[i] /= n
		}
		move := 0.0
		for i := range mass {
			move = math.Max(move, math.Abs(next[i]-mass[i]))
		}
		mass, next = next, mass
		if move < 1e-12 {
			break
		}
	}
	s.Below = mass[0]
	sum := mass[0]
	for i := range s.X {
		sum += mass[i+1]
		s.P[i] = math.Min(1, sum)
	}
}
