package text

import (
	"fmt"
	"strings"

	"kneepoint/reports"
)

const (
	causesShown  = 3
	becauseShown = 2
	// leastShown is the probability of a cause after the first that is worth a line.
	leastShown = 0.05
)

// causes are the likely ones, with the measurement that would tell most.
func (s *sheet) causes(r *reports.Report) {
	shown := 0
	for i := range r.Causes {
		c := &r.Causes[i]
		if !c.Probability.Valid() || shown == causesShown || shown > 0 && c.Probability < leastShown {
			break
		}
		s.add(i == 0, "cause     %s", causeLine(c))
		shown++
	}
	if len(r.Causes) > 0 && len(r.Causes[0].Next) > 0 {
		n := r.Causes[0].Next[0]
		s.add(false, "next      %s bits: %s", bits(n.InformationBits), n.Text)
	}
}

// causeLine is a cause with its probability, what it cost and where.
func causeLine(c *reports.Cause) string {
	line := strings.TrimSpace(c.Cause+" "+c.Direction) + " " + chance(c.Probability)
	if c.Loss.Estimate.Valid() {
		line += fmt.Sprintf(": cost %s", Percent(c.Loss.Estimate))
		if c.Loss.Lower.Valid() && c.Loss.Upper.Valid() {
			line += fmt.Sprintf(" (%s to %s)", Percent(c.Loss.Lower), Percent(c.Loss.Upper))
		}
	}
	switch n := len(c.Wafers); {
	case n == 1:
		line += ", wafer " + c.Wafers[0]
	case n > 1 && n <= 8:
		line += ", wafers " + strings.Join(c.Wafers, " ")
	case n > 8:
		line += ", " + plural(n, "wafer")
	}
	if len(c.Alike) > 0 {
		line += "; not told apart from " + strings.Join(c.Alike, ", ")
	}
	return line
}

// chance writes a probability; nothing is certain.
func chance(p reports.Number) string {
	switch {
	case p > 0.99:
		return "> 99 %"
	case p < 0.01:
		return "< 1 %"
	}
	return fmt.Sprintf("%.0f %%", 100*float64(p))
}

func bits(n reports.Number) string {
	if n < 0.01 {
		return "under 0.01"
	}
	return fmt.Sprintf("%.2g", float64(n))
}

// proposal is what to do with the lot, and what it would yield without the causes.
func (s *sheet) proposal(r *reports.Report) {
	d := &r.Disposition
	because := d.Because[:min(len(d.Because), becauseShown)]
	if len(because) == 0 {
		s.add(true, "proposal  %s", d.Proposal)
	}
	for i, b := range because {
		if i == 0 {
			s.add(true, "proposal  %s: %s", d.Proposal, b)
			continue
		}
		s.add(false, "          %s", b)
	}
	if y := d.YieldIfFixed; y.Estimate.Valid() {
		s.add(false, "          without the probable causes the yield would be %s (%s to %s)", Percent(y.Estimate), Percent(y.Lower), Percent(y.Upper))
	}
}
