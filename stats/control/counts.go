package control

import (
	"math"

	"kneepoint/stats"
)

// P charts the share of defectives among n_i items, with binomial limits
//
//	p -+ 3 sqrt(p(1-p)/n_i), p = all defectives / all items
//
// clipped to [0, 1]. It takes items as independent, which dice of a wafer are
// not: see [LaneyP]. A point with n_i = 0, or a NaN, is missing. It panics when
// lengths differ or a count is negative or above n_i.
//
// Source: NIST/SEMATECH e-Handbook 6.3.3.2.
func P(defectives, n []float64) Chart { return shares(defectives, n, false) }

// LaneyP charts shares whose level differs from point to point by more than the
// binomial law explains: limits are those of [P] times sigma_z, the mean moving
// range of the standardised points over d2(2). Points that differ by less (sigma_z
// below 1) get narrower limits, which says that counts are not independent or not
// honest.
//
// Source: Laney 2002, Quality Engineering 14, 531-537.
func LaneyP(defectives, n []float64) Chart { return shares(defectives, n, true) }

func shares(defectives, n []float64, laney bool) Chart {
	checkCounts(defectives, n)
	points := make([]float64, len(n))
	var bad, all float64
	for i, d := range defectives {
		if d > n[i] {
			panic("stats/control: more defectives than items")
		}
		points[i] = d / n[i]
		if points[i] == points[i] {
			bad += d
			all += n[i]
		}
	}
	if all == 0 {
		return empty(points, "no items")
	}
	p := bad / all
	width := make([]float64, len(n))
	for i := range n {
		width[i] = math.Sqrt(p * (1 - p) / n[i])
	}
	return counted(points, p, width, 1, laney)
}

// U charts counts per area (or per whatever is counted over), with Poisson limits
//
//	u -+ 3 sqrt(u/area_i), u = all counts / all area
//
// not below 0. A point without area, or a NaN, is missing. It panics when lengths
// differ or a number is negative. Source: NIST/SEMATECH e-Handbook 6.3.3.1.
func U(counts, area []float64) Chart { return rates(counts, area, false) }

// LaneyU is to [U] what [LaneyP] is to [P]. Source: Laney 2002.
func LaneyU(counts, area []float64) Chart { return rates(counts, area, true) }

// C charts counts over the same area each: [U] with areas of 1. Source:
// NIST/SEMATECH e-Handbook 6.3.3.1.
func C(counts []float64) Chart {
	area := make([]float64, len(counts))
	for i := range area {
		area[i] = 1
	}
	return rates(counts, area, false)
}

func rates(counts, area []float64, laney bool) Chart {
	checkCounts(counts, area)
	points := make([]float64, len(area))
	var sum, all float64
	for i, c := range counts {
		points[i] = math.NaN()
		if area[i] > 0 && c == c {
			points[i] = c / area[i]
			sum += c
			all += area[i]
		}
	}
	if all == 0 {
		return empty(points, "no area")
	}
	u := sum / all
	width := make([]float64, len(area))
	for i := range area {
		width[i] = math.Sqrt(u / area[i])
	}
	return counted(points, u, width, math.Inf(1), laney)
}

// counted draws limits of three widths, between 0 and top.
func counted(points []float64, center float64, width []float64, top float64, laney bool) Chart {
	sigma, factor := math.NaN(), 1.0
	why := ""
	if laney {
		z := make([]float64, len(points))
		for i, p := range points {
			z[i] = (p - center) / width[i]
		}
		factor = stats.Mean(movingRanges(z)) / ConstantsFor(2).MeanRange
		sigma = factor
		if factor != factor {
			why = "fewer than two neighbouring points that could differ"
		}
	}
	c := newChart(points, center, sigma, func(i int) (float64, float64) {
		half := 3 * width[i] * factor
		return math.Max(0, center-half), math.Min(top, center+half)
	})
	c.Why = why
	return c
}

func checkCounts(counts, of []float64) {
	if len(counts) != len(of) {
		panic("stats/control: slice length mismatch")
	}
	for i, c := range counts {
		if c < 0 || of[i] < 0 {
			panic("stats/control: negative count")
		}
	}
}
