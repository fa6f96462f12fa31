package causes

import (
	"math"

	"gonum.org/v1/gonum/optimize"
)

// Known is a made-up lot whose causes are known, ready to fit weights on.
type Known struct {
	// Truth are the causes that are there, by name; empty: nothing is wrong. Unknown
	// alone: something is wrong that no cause of the catalogue explains.
	Truth []string

	rows []knownRow
}

type knownRow struct {
	hypothesis
	right bool // exactly the true causes
	part  bool // one of two true causes, alone
}

// Remember judges a lot of known causes and keeps what fitting needs: a few
// kilobytes.
func Remember(e *Evidence, k *Catalogue, truth []string) Known {
	j := judge(e, k)
	out := Known{Truth: truth}
	for _, h := range j.all {
		r := knownRow{hypothesis: hypothesis{causes: h.causes, unknown: h.unknown, odds: h.odds, views: h.views}}
		switch {
		case len(truth) == 0:
			r.right = h.nothing()
		case truth[0] == Unknown:
			r.right = h.unknown
		default:
			hits := 0
			for _, c := range h.causes {
				for _, t := range truth {
					if j.k.Causes[c].Cause == t {
						hits++
					}
				}
			}
			r.right = hits == len(truth) && hits == len(h.causes)
			r.part = hits > 0 && hits == len(h.causes) && hits < len(truth)
		}
		out.rows = append(out.rows, r)
	}
	return out
}

// Fit finds the weights that give the known causes the highest probability, drawn
// towards the usual ones: maximum likelihood with a Gaussian penalty, by BFGS. Lots
// in which the right answer is not among the hypotheses (a pair that was not
// tried) count by their part of it.
//
// The objective is smooth and has few parameters; the result does not depend on
// the number of cores.
func Fit(lots []Known) Weights {
	usual := UsualWeights()
	if len(lots) == 0 {
		return usual
	}
	start := usual.vector()
	problem := optimize.Problem{
		Func: func(x []float64) float64 { return loss(lots, start, x, nil) },
		Grad: func(grad, x []float64) { loss(lots, start, x, grad) },
	}
	result, err := optimize.Minimize(problem, append([]float64(nil), start...), &optimize.Settings{MajorIterations: 200}, &optimize.BFGS{})
	if result == nil || (err != nil && !(loss(lots, start, result.X, nil) < loss(lots, start, start, nil))) {
		return usual
	}
	return weightsOf(result.X)
}

const numWeights = numViews + 3

// vector holds the logs of the views' weights, which keeps them above zero, and
// the three offsets.
func (w *Weights) vector() []float64 {
	x := make([]float64, numWeights)
	for i, v := range w.View {
		x[i] = math.Log(max(v, 1e-3))
	}
	x[numViews], x[numViews+1], x[numViews+2] = w.Nothing, w.Unknown, w.Pair
	return x
}

func weightsOf(x []float64) Weights {
	w := Weights{Nothing: x[numViews], Unknown: x[numViews+1], Pair: x[numViews+2]}
	for i := range w.View {
		w.View[i] = math.Exp(x[i])
	}
	return w
}

// loss is the penalised negative log likelihood, with its gradient.
func loss(lots []Known, start, x, grad []float64) float64 {
	w := weightsOf(x)
	for i := range grad {
		grad[i] = 0
	}
	total := 0.0
	var p, d []float64
	for n := range lots {
		rows := lots[n].rows
		p = p[:0]
		top := math.Inf(-1)
		for i := range rows {
			s := rows[i].score(&w)
			p = append(p, s)
			top = max(top, s)
		}
		sum, right := 0.0, 0.0
		for i := range rows {
			p[i] = math.Exp(p[i] - top)
			sum += p[i]
			right += p[i] * rows[i].credit()
		}
		// As told: with what is kept back for lots that are like no model. So a lot
		// that no weights explain does not bend them.
		share, rest := (1-keptBack)*right/sum, keptBack/float64(len(rows))
		total -= math.Log(share + rest)
		if grad == nil || right <= 0 {
			continue
		}
		told := share / (share + rest)
		for i := range rows {
			by := told * (p[i]/sum - p[i]*rows[i].credit()/right)
			d = rows[i].derivative(d[:0], &w)
			for k := range d {
				grad[k] += by * d[k]
			}
		}
	}
	for i := range x {
		sigma := 1.0
		if i >= numViews {
			sigma = 2
		}
		z := (x[i] - start[i]) / sigma
		total += z * z / 2
		if grad != nil {
			grad[i] += z / sigma
		}
	}
	return total
}

// credit is how right a hypothesis is.
func (r *knownRow) credit() float64 {
	switch {
	case r.right:
		return 1
	case r.part:
		return 0.3
	}
	return 0
}

func (r *knownRow) derivative(d []float64, w *Weights) []float64 {
	for i, v := range r.views {
		d = append(d, w.View[i]*v)
	}
	one := func(b bool) float64 {
		if b {
			return 1
		}
		return 0
	}
	return append(d, one(r.nothing()), one(r.unknown), one(r.pair()))
}
