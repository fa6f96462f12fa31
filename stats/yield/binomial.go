package yield

import (
	"math"

	"gonum.org/v1/gonum/stat/distuv"
	"kneepoint/stats"
)

// Wilson is the score interval of a proportion: k good ones of n independent
// trials. It keeps close to the stated confidence at all n and p and never
// leaves [0, 1]. With n = 0 nothing is known. Panics unless 0 <= k <= n and
// 0 < confidence < 1.
//
// Source: Wilson 1927, J. Amer. Statist. Assoc. 22, 209-212; recommended by
// Brown, Cai and DasGupta 2001, Statist. Sci. 16, 101-133.
func Wilson(k, n int, confidence float64) stats.Interval {
	check(k, n, confidence)
	if n == 0 {
		return stats.NoInterval("no dice")
	}
	z := distuv.UnitNormal.Quantile(0.5 + confidence/2)
	p, N := float64(k)/float64(n), float64(n)
	mid := (p + z*z/(2*N)) / (1 + z*z/N)
	half := z / (1 + z*z/N) * math.Sqrt(p*(1-p)/N+z*z/(4*N*N))
	iv := stats.Interval{Estimate: p, Lower: mid - half, Upper: mid + half, Method: "Wilson"}
	if k == 0 {
		iv.Lower = 0
	}
	if k == n {
		iv.Upper = 1
	}
	return iv
}

// ClopperPearson is the exact interval of a proportion: it covers with at least
// the stated confidence, at the price of being too wide on average. Limits and
// panics as for [Wilson].
//
// Source: Clopper and Pearson 1934, Biometrika 26, 404-413.
func ClopperPearson(k, n int, confidence float64) stats.Interval {
	check(k, n, confidence)
	if n == 0 {
		return stats.NoInterval("no dice")
	}
	lo, hi := clopperPearson(float64(k), float64(n), (1-confidence)/2)
	return stats.Interval{Estimate: float64(k) / float64(n), Lower: lo, Upper: hi, Method: "Clopper-Pearson"}
}

// clopperPearson works for counts that are not whole, too; alpha is the risk on
// each side.
func clopperPearson(k, n, alpha float64) (lo, hi float64) {
	lo, hi = 0, 1
	if k > 0 {
		lo = betaQuantile(alpha, k, n-k+1)
	}
	if k < n {
		hi = betaQuantile(1-alpha, k+1, n-k)
	}
	return lo, hi
}

// AgrestiCoull is the normal interval about (k + z^2/2)/(n + z^2). It is not
// clipped and may leave [0, 1] a little. Panics as for [Wilson].
//
// Source: Agresti and Coull 1998, Amer. Statist. 52, 119-126.
func AgrestiCoull(k, n int, confidence float64) stats.Interval {
	check(k, n, confidence)
	if n == 0 {
		return stats.NoInterval("no dice")
	}
	z := distuv.UnitNormal.Quantile(0.5 + confidence/2)
	N := float64(n) + z*z
	p := (float64(k) + z*z/2) / N
	half := z * math.Sqrt(p*(1-p)/N)
	return stats.Interval{Estimate: float64(k) / float64(n), Lower: p - half, Upper: p + half, Method: "Agresti-Coull"}
}

// UpperBound is the one-sided Clopper-Pearson bound: with the stated confidence
// the proportion is no larger. It is 1 for k = n. Panics as for [Wilson].
func UpperBound(k, n int, confidence float64) float64 {
	check(k, n, confidence)
	if k == n {
		return 1
	}
	return betaQuantile(confidence, float64(k)+1, float64(n-k))
}

func check(k, n int, confidence float64) {
	if k < 0 || k > n {
		panic("stats/yield: count outside 0..n")
	}
	if !(confidence > 0 && confidence < 1) {
		panic("stats/yield: confidence outside (0, 1)")
	}
}

func betaQuantile(p, a, b float64) float64 { return distuv.Beta{Alpha: a, Beta: b}.Quantile(p) }
