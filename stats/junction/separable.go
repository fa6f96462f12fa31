package junction

import (
	"fmt"
	"math"

	"gonum.org/v1/gonum/mat"
)

// Alike is a pair of parameters that a set of tests cannot tell apart: their
// whitened columns of sensitivities point the same way (or opposite ways).
type Alike struct {
	A, B Param
	Cos  float64
}

// Separability is what a set of tests can tell apart, by the sensitivities at
// nominal over the readings' sigmas (whitened), each parameter in its prior sigma.
type Separability struct {
	// Singular values of the whitened, prior-scaled Jacobian, largest first. One
	// above 1 is a combination of parameters that the tests know better than the
	// prior does.
	Singular []float64
	Resolved int     // how many of them exceed 1
	Unseen   []Param // parameters with a prior that these tests know nothing of
	Alike    []Alike // |cos| above 0.95
	// ThicknessFromDoping is whether thickness and doping are both seen and not alike.
	ThicknessFromDoping bool
	Sentences           []string
}

// alikeCos is the |cos| from which two columns count as the same, and unseenNorm
// how many readings' sigmas a prior sigma must move the tests to be seen at all.
const alikeCos, unseenNorm = 0.95, 0.5

// Separability computes what readings of these tests could tell apart. Only Test and
// Sigma of the readings matter.
func (m *Model) Separability(readings []Reading, prior Prior) Separability {
	var s Separability
	var params []Param
	for i := range NumParams {
		if prior.Sigma[i] > 0 {
			params = append(params, Param(i))
		}
	}
	if len(readings) == 0 || len(params) == 0 {
		s.Unseen = params
		s.Sentences = []string{"there are no readings: nothing is known beyond the prior"}
		return s
	}
	j := mat.NewDense(len(readings), len(params), nil)
	for i, r := range readings {
		sigma := r.Sigma
		if !(sigma > 0) {
			sigma = UsualSigma(m.Tests[r.Test].Measures)
		}
		row := m.Sensitivity(r.Test)
		for k, p := range params {
			if v := row[p]; !math.IsNaN(v) && !math.IsInf(v, 0) {
				j.Set(i, k, v*prior.Sigma[p]/sigma)
			}
		}
	}
	var svd mat.SVD
	if svd.Factorize(j, mat.SVDNone) {
		s.Singular = svd.Values(nil)
	}
	for _, v := range s.Singular {
		if v > 1 {
			s.Resolved++
		}
	}
	norms := make([]float64, len(params))
	for k := range params {
		norms[k] = mat.Norm(j.ColView(k), 2)
		if norms[k] < unseenNorm {
			s.Unseen = append(s.Unseen, params[k])
		}
	}
	s.ThicknessFromDoping = true
	for a := range params {
		for b := range a {
			if norms[a] < unseenNorm || norms[b] < unseenNorm {
				continue
			}
			if c := mat.Dot(j.ColView(a), j.ColView(b)) / (norms[a] * norms[b]); math.Abs(c) > alikeCos {
				s.Alike = append(s.Alike, Alike{params[b], params[a], c})
			}
		}
	}
	for k, p := range params {
		if (p == EpiThickness || p == EpiDoping) && norms[k] < unseenNorm {
			s.ThicknessFromDoping = false
		}
	}
	for _, x := range s.Alike {
		if x.A == EpiThickness && x.B == EpiDoping {
			s.ThicknessFromDoping = false
		}
		s.Sentences = append(s.Sentences, m.alikeWords(x, prior))
	}
	if len(s.Unseen) > 0 {
		s.Sentences = append(s.Sentences, fmt.Sprintf("these tests know nothing of %s beyond what was believed before", join(s.Unseen)))
	}
	return s
}

// alikeWords says what is known of a pair instead of its members.
func (m *Model) alikeWords(x Alike, prior Prior) string {
	switch {
	case x.A == EpiThickness && x.B == UpDiffusion:
		return "epi thickness and up-diffusion act as one: what is known is the net thickness, base to up-diffused tail"
	case x.A == BaseDepth && x.B == EmitterDepth:
		return "base and emitter depth act as one: what is known is the base width between them"
	case x.Cos > 0:
		return fmt.Sprintf("a rise of %s and a rise of %s look the same (|cos| %.2f): what is known is their sum in shares of %s and %s",
			x.A, x.B, math.Abs(x.Cos), percent(prior.Sigma[x.A]), percent(prior.Sigma[x.B]))
	}
	return fmt.Sprintf("a rise of %s and a fall of %s look the same (|cos| %.2f): what is known is their difference in shares of %s and %s",
		x.A, x.B, math.Abs(x.Cos), percent(prior.Sigma[x.A]), percent(prior.Sigma[x.B]))
}

func percent(x float64) string { return fmt.Sprintf("%.3g %%", 100*x) }

func join(ps []Param) string {
	s := ""
	for i, p := range ps {
		switch {
		case i == 0:
		case i == len(ps)-1:
			s += " and "
		default:
			s += ", "
		}
		s += p.String()
	}
	return s
}
