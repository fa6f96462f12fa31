package text

import (
	"fmt"
	"math"

	"kneepoint/reports"
)

// epiLine is the layer of the lot's typical wafer, "" without an account of it.
func epiLine(r *reports.Report) string {
	e := r.Epi
	if e == nil || !e.NetThicknessUM.Estimate.Valid() {
		return ""
	}
	line := fmt.Sprintf("epi       net %s um", between(e.NetThicknessUM))
	if b := e.BetweenWafers; b != nil && b.Differ && b.NetThicknessUM.Lower.Valid() {
		line += fmt.Sprintf(", wafers %.3g to %.3g", float64(b.NetThicknessUM.Lower), float64(b.NetThicknessUM.Upper))
	}
	if !e.ThicknessObservable {
		return line + "; these tests do not see it"
	}
	in, out, all := 0, 0, 0
	for i := range r.Wafers {
		w := r.Wafers[i].Epi
		if w == nil {
			continue
		}
		all++
		if v := w.ThicknessUM.InSpec; v != nil && *v {
			in++
		} else if v != nil {
			out++
		}
	}
	if spec := e.ThicknessUM; spec.SpecLower.Valid() || spec.SpecUpper.Valid() {
		line += fmt.Sprintf("; as grown in spec on %d of %s, out on %d", in, plural(all, "wafer"), out)
	}
	return line
}

// between writes an estimate with its interval, as many decimals as tell the two apart.
func between(i reports.Interval) string {
	d := max(0, 2-int(math.Floor(math.Log10(float64(i.Estimate)))))
	return fmt.Sprintf("%.*f (%.*f to %.*f)", d, float64(i.Estimate), d, float64(i.Lower), d, float64(i.Upper))
}
