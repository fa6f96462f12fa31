package wafermap

import (
	"fmt"
	"math"
)

// LocalClass says what a die's surroundings are.
type LocalClass uint8

const (
	Ordinary LocalClass = iota // nothing beyond chance
	HotSpot                    // high among high
	ColdSpot                   // low among low
	HighAmongLow
	LowAmongHigh
)

func (c LocalClass) String() string {
	return [...]string{"ordinary", "hot spot", "cold spot", "high among low", "low among high"}[c]
}

// Local is a local indicator of association, by row. Dice without a value, and dice
// without neighbours in the case of LocalMoran, have NaN and Ordinary.
type Local struct {
	Z        []float64 // in standard deviations under randomisation
	P        []float64 // two-sided
	Adjusted []float64 // P adjusted for the number of dice looked at: false discovery rate
	Class    []LocalClass
	N        int // dice with a value
	Isolated int // of these, without neighbours
	Why      string
}

// HotSpots finds dice whose neighbourhood, the die itself included, has values above or
// below the wafer's average beyond chance: the statistic Gi* of Ord and Getis 1995
// (Geogr. Anal. 27, 286) with binary weights,
//
//	Gi* = (sum of the k values - k mean) / (s sqrt((n k - k^2)/(n-1)))
//
// s^2 being the mean square about the mean. Under randomisation the sum is that of k
// values drawn from all, which the normal law misses by orders of magnitude where fails
// are few or values skewed. For fails (values of 0 and 1) its tails are exact, by the
// hypergeometric law; else they come from 20,000 random draws for each k and, beyond their
// reach, go on as the saddlepoint approximation does (Lugannani and Rice 1980, Adv. Appl.
// Probab. 12, 475; in the form of Barndorff-Nielsen 1986, Biometrika 73, 307). P is adjusted to the false discovery rate
// (Benjamini and Hochberg 1995, J. R. Stat. Soc. B 57, 289; neighbourhoods overlap, which
// keeps it valid: Benjamini and Yekutieli 2001, Ann. Stat. 29, 1165), and dice with Adjusted
// at most level get a class.
func (g *Grid) HotSpots(value []float64, n Neighbours, level float64) Local {
	return g.local(value, n, level, true)
}

// FailSpots is HotSpots of a fail map.
func (g *Grid) FailSpots(fail []bool, n Neighbours, level float64) Local {
	g.check(len(fail))
	value := make([]float64, len(fail))
	for i, f := range fail {
		if f {
			value[i] = 1
		}
	}
	return g.local(value, n, level, true)
}

// LocalMoran finds dice that lie among neighbours with like or unlike values: with z the
// deviations from the mean, m2 their mean square and k neighbours,
//
//	I_i = z_i / m2 * sum of z_j over the neighbours / k
//
// (Anselin 1995, Geogr. Anal. 27, 93). P comes from the law of the sum of k values
// drawn from all, given the die's own, with tails as in HotSpots; Z has the sign of I.
func (g *Grid) LocalMoran(value []float64, n Neighbours, level float64) Local {
	return g.local(value, n, level, false)
}

func (g *Grid) local(value []float64, n Neighbours, level float64, own bool) Local {
	g.check(len(value))
	l := Local{Z: make([]float64, len(value)), P: make([]float64, len(value)), Adjusted: make([]float64, len(value)), Class: make([]LocalClass, len(value))}
	for i := range value {
		l.Z[i], l.P[i], l.Adjusted[i] = nan, nan, nan
	}
	present := make([]float64, 0, len(g.order))
	for _, r := range g.order {
		if v := value[r]; v-v == 0 { // neither NaN nor infinite
			present = append(present, v)
		}
	}
	l.N = len(present)
	if l.N < 8 {
		l.Why = fmt.Sprintf("%d dice with a value: at least 8 are needed", l.N)
		return l
	}
	steps := n.all()
	law := newSumLaw(present)
	law.most = min(len(steps)+1, l.N-1)
	if law.sd == 0 {
		l.Why = "the value is the same on all dice"
		return l
	}
	ways := g.ways(steps)
	for _, r := range g.order {
		v := value[r]
		if v-v != 0 {
			continue
		}
		k, sum := 0, 0.0
		for _, q := range ways.from(r) {
			if value[q]-value[q] == 0 {
				k++
				sum += value[q]
			}
		}
		if k == 0 {
			l.Isolated++
		}
		sign, side := 1.0, v > law.mean
		if own {
			k++
			sum += v
		} else if !side {
			sign = -1
		}
		if k == 0 || k >= l.N {
			continue
		}
		z, p := law.tails(k, sum)
		l.Z[r], l.P[r] = sign*z, p
	}
	l.adjust(g.order)
	for _, r := range g.order {
		if !(l.Adjusted[r] <= level) {
			continue
		}
		switch high := value[r] > law.mean; {
		case own && l.Z[r] > 0, !own && l.Z[r] > 0 && high:
			l.Class[r] = HotSpot
		case own, !own && l.Z[r] > 0:
			l.Class[r] = ColdSpot
		case high:
			l.Class[r] = HighAmongLow
		default:
			l.Class[r] = LowAmongHigh
		}
	}
	return l
}

// adjust fills in Adjusted.
func (l *Local) adjust(rows []int32) {
	place, p := make([]int32, 0, len(rows)), make([]float64, 0, len(rows))
	for _, r := range rows {
		if !math.IsNaN(l.P[r]) {
			place, p = append(place, r), append(p, l.P[r])
		}
	}
	order := ascending(p)
	least := 1.0
	for i := len(order) - 1; i >= 0; i-- {
		least = min(least, p[order[i]]*float64(len(order))/float64(i+1))
		l.Adjusted[place[order[i]]] = least
	}
}
