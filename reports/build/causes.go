package build

import (
	"context"
	"math"

	"kneepoint/reports"
	"kneepoint/reports/causes"
)

const (
	// leastProbability of a cause that a report tells of; the first few are told
	// whatever theirs is.
	leastProbability = 0.02
	fewestCauses     = 5
	// probable is the probability from which a cause is acted upon.
	probable = 0.5
)

// usualWeights says what probabilities are worth that no calibration stands behind.
const usualWeights = "weighed with usual weights, not calibrated on this product: read the probabilities as an order, not as frequencies"

// explain weighs the causes and tells of them.
func (w *lotwork) explain(ctx context.Context) error {
	d := w.in.Diagnosis
	if d == nil {
		var err error
		if d, err = NewDiagnosis(w.in.Product); err != nil {
			return err
		}
	}
	evidence, err := causes.Observe(ctx, w.columns(d), d.Catalogue)
	if err != nil {
		return err
	}
	v := causes.Weigh(evidence, d.Catalogue, d.Weights)
	w.verdict = v.Accounts(leastProbability, fewestCauses)
	w.rep.CausesBy = usualWeights
	if d.Calibrated != "" {
		w.rep.CausesBy = "weights calibrated on made-up lots of this product: " + d.Calibrated
	}
	switch {
	case d.product == nil:
		w.rep.CausesBy += "; without a product file no test is known for what it measures, and little is left to tell causes by"
	case d.product.Baseline == nil:
		w.rep.CausesBy += "; without a baseline a lot that is off as a whole does not show"
	}
	for i := range w.verdict {
		if !w.verdict[i].Listed {
			break // they come by falling probability
		}
		w.rep.Causes = append(w.rep.Causes, w.cause(&w.verdict[i]))
	}
	return nil
}

// cause puts an account into the report's form.
func (w *lotwork) cause(a *causes.Account) reports.Cause {
	c := reports.Cause{Cause: a.Cause, Text: a.Text, Direction: a.Direction, Probability: num(a.Probability), Prior: num(a.Prior),
		Wafers: a.Wafers, Alike: a.Alike, For: evidenceOf(a.For), Against: evidenceOf(a.Against)}
	switch a.Cause {
	case causes.Nothing:
		c.Text = "nothing is wrong beyond what healthy lots have"
		c.Loss = unknown("nothing is charged to it")
	case causes.Unknown:
		c.Text = "something is wrong, and nothing known explains it"
		c.Loss = w.lossOf(a.Dice, "fails beyond the healthy loss that no listed cause is charged with")
	default:
		c.Loss = w.lossOf(a.Dice, "judged again without the cause; dice that several causes claim shared by probability")
	}
	if w.unjudged != "" {
		c.Loss = unknown(w.unjudged)
	} else if a.Cause != causes.Nothing {
		c.Dice = int(math.Round(a.Dice.Value))
	}
	for _, n := range a.Next {
		c.Next = append(c.Next, reports.Next{Text: n.Text, InformationBits: num(n.Bits), Caution: n.AsText()})
	}
	return c
}

func (w *lotwork) lossOf(a causes.Amount, method string) reports.Interval {
	n := math.Max(float64(w.lot.Len()), 1)
	return reports.Interval{Estimate: num(a.Value / n), Lower: num(a.Lower / n), Upper: num(a.Upper / n), Method: method}
}

func evidenceOf(list []causes.Reason) []reports.Evidence {
	var out []reports.Evidence
	for _, r := range list {
		out = append(out, reports.Evidence{Text: r.Text, LogOdds: num(r.LogOdds), Test: r.Test, Wafers: r.Wafers})
	}
	return out
}
