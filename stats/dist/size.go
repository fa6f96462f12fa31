package dist

import (
	"fmt"
	"math"

	"kneepoint/stats"
)

// Misfit says how far readings are from a fitted distribution in terms that do
// not grow with their number.
type Misfit struct {
	// Gap is the largest distance between the empirical and the fitted
	// distribution function: that share of the readings would have to move. At is
	// where it is, in the readings' unit. Chance is the gap that sampling alone
	// exceeds in one of twenty samples of this size.
	Gap, At, Chance float64
	// Low and High compare tails: by how many fitted standard deviations the 1 %
	// and the 99 % quantile of the readings lie outside those of the fit, below 0
	// inside. NaN where bounds hide them, or with fewer than 100 readings.
	Low, High float64
	N         int
	Verdict   Verdict
	// Text says it in a sentence.
	Text string
}

// Verdict is the practical meaning of a misfit.
type Verdict int

const (
	Unknown Verdict = iota // nothing to compare
	Close                  // the fit may stand for the readings
	Fair                   // for the middle, with care in the tails
	Poor                   // it may not
)

// The sizes that decide; common practice, no source.
const (
	closeGap, fairGap   = 0.02, 0.05 // share of the readings
	closeTail, fairTail = 0.25, 0.6  // fitted standard deviations
)

// SizeOfMisfit compares readings, marked as in [FitNormal], with a distribution
// fitted to them. With 88,000 dice a wafer every test of fit rejects every
// distribution; what matters is whether the difference is large enough to
// mislead. A gap that sampling alone would give counts as none. NaNs are
// skipped; it panics when lengths differ.
//
// Chance is 0.886/sqrt(n), Lilliefors' 5 % point for a normal distribution with
// both parameters estimated; those of the other families are near it.
func SizeOfMisfit(x []float64, censor []int8, d Distribution) Misfit {
	s := Empirical(x, censor)
	m := Misfit{Low: math.NaN(), High: math.NaN(), N: s.N}
	if len(s.X) == 0 || math.IsNaN(s.Below) {
		m.Text = "no exact readings to compare"
		return m
	}
	before := s.Below
	for i, v := range s.X {
		f := d.CDF(v)
		for _, gap := range [2]float64{math.Abs(s.P[i] - f), math.Abs(before - f)} {
			if gap > m.Gap {
				m.Gap, m.At = gap, v
			}
		}
		before = s.P[i]
	}
	m.Chance = 0.886 / math.Sqrt(float64(s.N))
	sigma := (d.Quantile(0.8413447460685429) - d.Quantile(0.15865525393145705)) / 2
	if s.N >= 100 {
		m.Low = (d.Quantile(0.01) - s.quantile(0.01)) / sigma
		m.High = (s.quantile(0.99) - d.Quantile(0.99)) / sigma
	}
	// Chance in the tails: the standard error of a 1 % quantile is 3.7 sigma/sqrt(n)
	// for a normal distribution; two of them count as none.
	slack := 7.4 / math.Sqrt(float64(s.N))
	gap, worst := math.Max(0, m.Gap-m.Chance), 0.0
	for _, t := range [2]float64{m.Low, m.High} {
		if t == t {
			worst = math.Max(worst, math.Abs(t)-slack)
		}
	}
	switch {
	case gap <= closeGap && worst <= closeTail:
		m.Verdict = Close
	case gap <= fairGap && worst <= fairTail:
		m.Verdict = Fair
	default:
		m.Verdict = Poor
	}
	m.Text = m.text(d)
	return m
}

func (m Misfit) text(d Distribution) string {
	meaning := map[Verdict]string{
		Close: "close enough to stand for the readings",
		Fair:  "usable for the middle; tails need care",
		Poor:  "not a description of these readings",
	}[m.Verdict]
	t := fmt.Sprintf("%s: the largest gap between readings and fit is %.2g %% of the readings", d.Family(), 100*m.Gap)
	if m.Gap <= m.Chance {
		t += fmt.Sprintf(" (%d readings of that distribution would show up to %.2g %%)", m.N, 100*m.Chance)
	}
	side := func(v float64, name string) string {
		word := "outside"
		if v < 0 {
			word = "inside"
		}
		return fmt.Sprintf("the %s quantile is %.2g sigma %s the fitted one", name, math.Abs(v), word)
	}
	switch low, high := m.Low == m.Low, m.High == m.High; {
	case low && high:
		t += ", " + side(m.Low, "1 %") + " and " + side(m.High, "99 %")
	case low:
		t += ", " + side(m.Low, "1 %")
	case high:
		t += ", " + side(m.High, "99 %")
	}
	return t + ": " + meaning
}

// quantile is the value at which the steps pass p; NaN where bounds hide it.
func (s Steps) quantile(p float64) float64 {
	if p <= s.Below || p > s.P[len(s.P)-1] {
		return math.NaN()
	}
	lo, hi := 0, len(s.P)-1
	for lo < hi {
		if mid := (lo + hi) / 2; s.P[mid] < p {
			lo = mid + 1
		} else {
			hi = mid
		}
	}
	return s.X[lo]
}

// skewness is that of the exact readings, for words.
func skewness(x []float64, censor []int8) float64 {
	if censor != nil {
		only := make([]float64, 0, len(x))
		for i, v := range x {
			if censor[i] == 0 {
				only = append(only, v)
			}
		}
		x = only
	}
	return stats.MomentsOf(x).Skewness()
}
