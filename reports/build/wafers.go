package build

import (
	"math"
	"sort"

	"kneepoint/reports"
	"kneepoint/stats"
	"kneepoint/stats/compare"
	"kneepoint/stats/yield"
)

// waferAccount makes the account of wafer i.
func (w *lotwork) waferAccount(i int) reports.Wafer {
	wafer := w.lot.Wafers()[i]
	pass := w.pass[wafer.Lo:wafer.Hi]
	n, passing := len(pass), count(pass)
	r := reports.Wafer{ID: wafer.ID, Dice: n, Passing: passing, Retested: w.retested[i],
		FirstPass: share(w.firstPassing[i], n), Attributes: wafer.Attributes}
	if w.unjudged != "" {
		r.Passing, r.FirstPass, r.Yield = 0, reports.NaN, unknown(w.unjudged)
		w.spatial(i, &r)
		return r
	}
	y := yield.Wilson(passing, n, confidence)
	y.Method = "Wilson, counting only"
	r.Yield = interval(y)
	r.MainLoss = w.mainLoss(wafer.Lo, wafer.Hi)
	w.spatial(i, &r)
	return r
}

// mainLoss lists the tests that lose most of rows [lo, hi) by first fail, at
// most three.
func (w *lotwork) mainLoss(lo, hi int) []reports.Share {
	counts := make([]int, len(w.data))
	for _, t := range w.first[lo:hi] {
		if t >= 0 {
			counts[t]++
		}
	}
	var out []reports.Share
	for _, t := range fallingOrder(counts) {
		if counts[t] == 0 || len(out) == 3 {
			break
		}
		out = append(out, reports.Share{Name: w.lot.Tests()[t].Name, Dice: counts[t], Share: share(counts[t], hi-lo)})
	}
	return out
}

// standsOut is how many sigmas off the lot's median yield a wafer must be to
// stand out. Among 25 like wafers one in fifteen lots has one at 3.
const standsOut = 3

// compareWafers ranks the wafers and marks those that stand out. The yardstick is
// the median wafer yield, with the robust spread between wafers and the
// binomial spread of the wafer's own count, so that a lot of unlike wafers marks
// few and one bad wafer cannot hide itself by widening the spread. The binomial
// spread is of the median yield drawn in by two dice of either kind (Agresti and
// Coull 1998), so that it is not nothing where most wafers pass whole. Fewer than
// four wafers are compared each with the others, by Fisher's exact test, with
// Bonferroni's adjustment for the wafers.
func (w *lotwork) compareWafers() {
	wafers := w.rep.Wafers
	order := make([]int, len(wafers))
	yields := make([]float64, len(wafers))
	for i := range wafers {
		order[i] = i
		yields[i] = float64(wafers[i].Yield.Estimate)
	}
	sort.SliceStable(order, func(a, b int) bool { return yields[order[a]] < yields[order[b]] })
	for rank, i := range order {
		wafers[i].Rank = rank + 1
	}
	if w.unjudged != "" {
		return
	}
	if len(wafers) < 4 {
		w.compareFew()
		return
	}
	median, spread := stats.Median(yields), stats.MADSigma(yields)
	for i := range wafers {
		n := float64(wafers[i].Dice)
		drawn := (median*n + 2) / (n + 4)
		sigma := math.Sqrt(spread*spread + drawn*(1-drawn)/(n+4))
		switch d := yields[i] - median; {
		case d < -standsOut*sigma:
			wafers[i].Stands = "low"
		case d > standsOut*sigma:
			wafers[i].Stands = "high"
		}
	}
}

func (w *lotwork) compareFew() {
	wafers := w.rep.Wafers
	if len(wafers) < 2 {
		return
	}
	passing, dice := 0, 0
	for _, x := range wafers {
		passing, dice = passing+x.Passing, dice+x.Dice
	}
	for i := range wafers {
		x := &wafers[i]
		others, failing := passing-x.Passing, dice-passing-(x.Dice-x.Passing)
		p := compare.Fisher([2][2]int{{x.Passing, x.Dice - x.Passing}, {others, failing}}, confidence).P
		if p*float64(len(wafers)) > 0.0027 { // 3 sigma, two-sided, as above
			continue
		}
		x.Stands = "low"
		if float64(x.Passing)*float64(dice-x.Dice) > float64(others)*float64(x.Dice) {
			x.Stands = "high"
		}
	}
}

// fallingOrder returns the indexes of counts by falling count, ties in order.
func fallingOrder(counts []int) []int {
	order := make([]int, len(counts))
	for i := range order {
		order[i] = i
	}
	sort.SliceStable(order, func(a, b int) bool { return counts[order[a]] > counts[order[b]] })
	return order
}

func count(flags []bool) int {
	n := 0
	for _, f := range flags {
		if f {
			n++
		}
	}
	return n
}
