package yield

import (
	"fmt"
	"math"
)

// Model ties the yield of a die to the mean number of killing defects on it, A D0.
// All start at 1 with slope -1, that of Seeds' root apart; they differ in how much
// the defects cluster: the more they do, the more dice they leave alone.
//
// Two models go by the name of Seeds, so they are named by their formula here.
type Model struct {
	kind  kind
	param float64
}

type kind int

const (
	poisson kind = iota
	murphy
	negativeBinomial
	boseEinstein
	root
)

var (
	// Poisson: defects fall independently, Y = exp(-AD0). Source: Wallmark 1960,
	// Proc. IRE 48, 293-300 (from memory).
	Poisson = Model{kind: poisson}
	// Murphy: the density varies from die to die by a triangular law,
	// Y = ((1-exp(-AD0))/AD0)^2. Source: Murphy 1964, Proc. IEEE 52, 1537-1545.
	Murphy = Model{kind: murphy}
	// Exponential: the density varies by an exponential law, Y = 1/(1+AD0), also
	// called Price's and Seeds' model. Source: Price 1970, Proc. IEEE 58, 1290-1291.
	Exponential = Model{kind: negativeBinomial, param: 1}
	// SeedsRoot is Y = exp(-sqrt(AD0)). Source: Seeds 1967, IEEE International
	// Convention Record 15(6), 60-61 (from memory).
	SeedsRoot = Model{kind: root}
)

// BoseEinstein shares the defects evenly among so many critical layers, each with
// an exponential law: Y = (1 + AD0/layers)^-layers, AD0 being that of all layers
// together. It panics unless layers is positive. Source: Price 1970.
func BoseEinstein(layers float64) Model {
	checkParameter(layers)
	return Model{boseEinstein, layers}
}

// NegativeBinomial has the density vary by a gamma law with clustering parameter
// alpha: Y = (1 + AD0/alpha)^-alpha. Small alpha is strong clustering; an infinite
// one is Poisson. [FitDefects] estimates it. It panics unless alpha is positive.
// Source: Stapper 1973, IBM J. Res. Develop. 17, 443-450 (from memory).
func NegativeBinomial(alpha float64) Model {
	checkParameter(alpha)
	return Model{negativeBinomial, alpha}
}

func checkParameter(a float64) {
	if !(a > 0) {
		panic("stats/yield: parameter of a yield model not positive")
	}
}

// String names the model.
func (m Model) String() string {
	switch m.kind {
	case poisson:
		return "Poisson"
	case murphy:
		return "Murphy"
	case boseEinstein:
		return fmt.Sprintf("Bose-Einstein, %g layers", m.param)
	case root:
		return "Seeds, exp(-sqrt(AD0))"
	}
	if m.param == 1 {
		return "exponential, 1/(1+AD0)"
	}
	return fmt.Sprintf("negative binomial, alpha %.3g", m.param)
}

// Yield is the share of good dice when a die has ad0 killing defects on average.
// NaN for a negative or NaN ad0.
func (m Model) Yield(ad0 float64) float64 {
	switch {
	case !(ad0 >= 0):
		return math.NaN()
	case ad0 == 0:
		return 1
	case math.IsInf(ad0, 1):
		return 0
	}
	switch m.kind {
	case murphy:
		f := -math.Expm1(-ad0) / ad0
		return f * f
	case root:
		return math.Exp(-math.Sqrt(ad0))
	case negativeBinomial, boseEinstein:
		if !math.IsInf(m.param, 1) {
			return math.Exp(-m.param * math.Log1p(ad0/m.param))
		}
	}
	return math.Exp(-ad0)
}

// Defects is the mean number of killing defects on a die that gives a yield: the
// inverse of [Model.Yield]. It is +Inf for a yield of 0, and NaN outside [0, 1].
func (m Model) Defects(yield float64) float64 {
	switch {
	case !(yield >= 0 && yield <= 1):
		return math.NaN()
	case yield == 0:
		return math.Inf(1)
	case yield == 1:
		return 0
	}
	l := -math.Log(yield)
	switch m.kind {
	case murphy:
		return murphyDefects(yield)
	case root:
		return l * l
	case negativeBinomial, boseEinstein:
		if !math.IsInf(m.param, 1) {
			return m.param * math.Expm1(l/m.param)
		}
	}
	return l
}

// murphyDefects solves (1-exp(-a))/a = sqrt(y) by Newton's method, which from the
// left of the root of a convex function does not overshoot: start at Poisson's a,
// which is smaller.
func murphyDefects(y float64) float64 {
	a, target := -math.Log(y), math.Sqrt(y)
	for range 100 {
		e := math.Exp(-a)
		f := -math.Expm1(-a)/a - target
		slope := (e*(1+a) - 1) / (a * a)
		if a < 1e-3 { // the difference above loses its digits
			slope = -0.5 + a/3 - a*a/8
		}
		step := f / slope
		a -= step
		if math.Abs(step) <= 1e-15*a {
			break
		}
	}
	return a
}
