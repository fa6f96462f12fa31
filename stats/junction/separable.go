package junction

import (
	"fmt"
	"math"
	"sort"

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
	}
	s.Sentences = append(s.Sentences, s.groups(params, j, norms, prior)...)
	if len(s.Unseen) > 0 {
		s.Sentences = append(s.Sentences, fmt.Sprintf("these tests know nothing of %s beyond what was believed before", join(s.Unseen)))
	}
	return s
}

// groups says, of each set of parameters that are alike in pairs, what combination
// is known instead of its members: the strongest times powers of the others.
func (s *Separability) groups(params []Param, j *mat.Dense, norms []float64, prior Prior) []string {
	group := make([]int, NumParams)
	for i := range group {
		group[i] = i
	}
	for _, x := range s.Alike {
		from, to := group[x.B], group[x.A]
		for i := range group {
			if group[i] == from {
				group[i] = to
			}
		}
	}
	var out []string
	for g := range group {
		var members []int // of params, strongest first
		for k, p := range params {
			if group[p] == g && norms[k] >= unseenNorm {
				members = append(members, k)
			}
		}
		if len(members) < 2 {
			continue
		}
		sort.SliceStable(members, func(a, b int) bool { return norms[members[a]] > norms[members[b]] })
		lead := members[0]
		names := []Param{params[lead]}
		known := params[lead].String()
		for _, k := range members[1:] {
			power := mat.Dot(j.ColView(k), j.ColView(lead)) / (norms[lead] * norms[lead]) * prior.Sigma[params[lead]] / prior.Sigma[params[k]]
			names = append(names, params[k])
			known += fmt.Sprintf(" x (%s)^%.2g", params[k], power)
		}
		text := fmt.Sprintf("these tests cannot tell %s apart: what is known is %s", join(names), known)
		if len(names) == 2 && group[EpiThickness] == group[UpDiffusion] && group[EpiThickness] == g {
			text += ", which is the net thickness, base to up-diffused tail"
		}
		if len(names) == 2 && group[BaseDepth] == group[EmitterDepth] && group[BaseDepth] == g {
			text += ", which is the base width"
		}
		out = append(out, text)
	}
	return out
}

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
