package causes

import (
	"math"
	"testing"

	"kneepoint/stats/junction"
)

// TestInformation: two hypotheses that put a reading one or two sigmas either way are
// the binary-input Gaussian channel. Its mutual information has no closed form; these
// values are the entropy of the mixture less that of the noise, by the midpoint rule
// with 200,000 points in Python, for amplitude and prior (1, 1/2), (2, 1/2), (1, 1/10).
// The first is the channel's known capacity at 0 dB, 0.486 bits (from memory).
func TestInformation(t *testing.T) {
	for _, c := range []struct{ amplitude, p, want float64 }{{1, 0.5, 0.485944}, {2, 0.5, 0.912822}, {1, 0.1, 0.204892}} {
		list := []outcome{
			{p: c.p, weight: []float64{1}, mean: []float64{c.amplitude}, sigma: []float64{1}},
			{p: 1 - c.p, weight: []float64{0.5, 0.5}, mean: []float64{-c.amplitude, -c.amplitude}, sigma: []float64{1, 1}},
		}
		if got := information(list); math.Abs(got-c.want) > 1e-5 {
			t.Errorf("amplitude %v, prior %v: %.6f bits, want %.6f", c.amplitude, c.p, got, c.want)
		}
	}
	same := []outcome{{p: 0.3, weight: []float64{1}, mean: []float64{0}, sigma: []float64{1}}, {p: 0.7, weight: []float64{1}, mean: []float64{0}, sigma: []float64{1}}}
	if got := information(same); got > 1e-9 {
		t.Errorf("a reading that tells nothing apart has %v bits", got)
	}
}

// TestCheckBits: a check with power 0.95 of an even cause is a binary symmetric channel
// of error 0.05, whose capacity is 1 - H(0.05) = 0.7136 bits (Cover and Thomas,
// Elements of Information Theory, section 7.1.4).
func TestCheckBits(t *testing.T) {
	if got := checkBits(0.5, 0.95); math.Abs(got-0.7136) > 5e-5 {
		t.Errorf("%.5f bits", got)
	}
	for _, p := range []float64{0, 1} {
		if got := checkBits(p, 0.95); got > 1e-12 {
			t.Errorf("of what is known already: %v bits", got)
		}
	}
}

// TestHazard: whatever reads a breakdown carries the caution of high voltage.
func TestHazard(t *testing.T) {
	for _, m := range []string{junction.BVceo, junction.BVcbo, junction.PlaneBV, junction.Multiplication} {
		if hazard(&junction.Test{Measures: m}) != "voltage" {
			t.Errorf("%s without a caution", m)
		}
	}
	if hazard(&junction.Test{Measures: junction.HFE, Voltage: 5}) != "" {
		t.Error("a gain at 5 V with one")
	}
	for _, kind := range []string{"acid", "voltage", "chemical"} {
		if (Measurement{Caution: kind}).AsText() == kind {
			t.Errorf("no words for %s", kind)
		}
	}
	for _, e := range Default().Causes {
		for _, c := range e.Checks {
			if c.Caution != "" && cautionText[c.Caution] == "" {
				t.Errorf("%s: no words for the caution %q", e.Cause, c.Caution)
			}
		}
	}
}
