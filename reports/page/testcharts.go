package page

import (
	"cmp"
	"math"
	"slices"

	"github.com/go-echarts/go-echarts/v2/charts"
	"github.com/go-echarts/go-echarts/v2/opts"

	"kneepoint/reports"
)

// histogram draws a test's distribution, failing dice on top of passing ones,
// with limits and median. It is drawn as stepped areas on a numeric axis, not
// as bars on a categorical one, so that limits stand where they are.
func histogram(p testPlace) (*chart, error) {
	t, h := p.Test, p.Histogram
	n := len(h.Pass)
	if n == 0 || len(h.Edges) != n+1 || len(h.Fail) != n || !h.Edges[0].Valid() || !h.Edges[n].Valid() {
		return nil, nil
	}
	s := span{Low: float64(h.Edges[0]), High: float64(h.Edges[n]), Log: h.Scale == "log" && h.Edges[0] > 0}
	width := s // of one bin beyond either end, where the steps return to zero
	c := chart{ID: p.Anchor + "-histogram", Height: 240, LogCounts: true, Numbers: "Histogram of " + t.Name + ", counts by bin",
		Label: "Histogram of " + t.Name + ", dice that pass and dice that fail, with limits and median. The numbers are in the table below.",
		Key:   []keyEntry{{"pass", "dice that pass"}, {"fail", "dice that fail any test"}}}
	marks := limitMarks(t, &s, &c)
	s.pad(0.03)
	pass, all, fitted, rows := steps(h, width)
	x := valueX(axisName(t))
	if s.Log {
		x.Type = "log"
		x.Name += ", log scale"
	}
	x.Min, x.Max = plot(reports.Number(s.Low)), plot(reports.Number(s.High))
	y := valueY("")
	y.Min = 0
	l := charts.NewLine()
	l.SetGlobalOptions(append(globals(c.ID, c.Label, "line", opts.Grid{Left: "8", Right: "16", Top: "44", Bottom: "40"}), charts.WithXAxisOpts(x), charts.WithYAxisOpts(y))...)
	area := func(colour string) []charts.SeriesOpts {
		return []charts.SeriesOpts{
			charts.WithLineChartOpts(opts.LineChart{Step: "middle", Symbol: "none"}), lineStyle(colour, 1, ""),
			charts.WithAreaStyleOpts(opts.AreaStyle{Color: colour, Origin: "start", Opacity: opts.Float(1)}),
		}
	}
	l.AddSeries("all", all, area(colourFail)...)
	l.AddSeries("pass", pass, append(area(colourPass), withMarks(placeLabels(marks, s)))...)
	stepRows := seriesRows{Offset: 1, Per: 1}
	series := []seriesRows{stepRows, stepRows}
	if len(h.Fitted) == n {
		l.AddSeries("fit", fitted, charts.WithLineChartOpts(opts.LineChart{Symbol: "none"}), lineStyle(colourInk, 1.5, "solid"))
		c.Key = append(c.Key, keyEntry{"line-fit", "fitted " + t.Fit.Distribution})
		series = append(series, stepRows)
	}
	l.Accept(house{xTicks: s.ticks(6)})
	unit := ""
	if t.Unit != "" {
		unit = ", " + t.Unit
	}
	done, err := c.finish(l.JSON(), []string{"From" + unit, "To" + unit, "Pass", "Fail", "Fit expects"}, rows, series...)
	return &done, err
}

func axisName(t *reports.Test) string {
	if t.Unit == "" {
		return t.Name
	}
	return t.Name + ", " + t.Unit
}

// steps are the points of the two stepped lines: bin centres, with an empty
// bin before and after. A step in the middle between two centres is an edge,
// on a log axis as well, as edges then are equal steps of the logarithm.
func steps(h *reports.Histogram, s span) (pass, all, fitted []opts.LineData, rows [][]string) {
	n := len(h.Pass)
	centre := func(i int) float64 {
		at := func(i float64) float64 { // the edge i, also beyond the ends
			if s.Log {
				return s.Low * math.Pow(s.High/s.Low, i/float64(n))
			}
			return s.Low + (s.High-s.Low)*i/float64(n)
		}
		return at(float64(i) + 0.5)
	}
	for i := -1; i <= n; i++ {
		p, f := 0, 0
		if i >= 0 && i < n {
			p, f = h.Pass[i], h.Fail[i]
			expects := ""
			if len(h.Fitted) == n && h.Fitted[i].Valid() {
				expects = significant(float64(h.Fitted[i]), 3)
			}
			rows = append(rows, []string{value(h.Edges[i]), value(h.Edges[i+1]), count(p), count(f), expects})
		}
		x := plot(reports.Number(centre(i)))
		pass = append(pass, opts.LineData{Value: []any{x, p}})
		all = append(all, opts.LineData{Value: []any{x, p + f}})
		var e any
		if i >= 0 && i < n && len(h.Fitted) == n {
			e = plot(h.Fitted[i])
		}
		fitted = append(fitted, opts.LineData{Value: []any{x, e}})
	}
	return pass, all, fitted, rows
}

// limitMarks are the lines of a test's limits and median; the span is
// stretched to them where they are near, and the chart's note names the others.
func limitMarks(t *reports.Test, s *span, c *chart) []mark {
	var marks []mark
	for _, l := range []struct {
		name  string
		value reports.Number
	}{{"lower", t.Lower}, {"upper", t.Upper}} {
		if !l.value.Valid() {
			continue
		}
		if !s.include(float64(l.value)) {
			c.Note += "The " + l.name + " limit, " + withUnit(exact(l.value), t.Unit) + ", lies outside the range drawn. "
			continue
		}
		marks = append(marks, mark{Name: l.name, XAxis: plot(l.value), Label: &opts.Label{Formatter: l.name + " " + exact(l.value)},
			LineStyle: &opts.LineStyle{Color: colourInk, Width: 1.5, Type: "dashed"}})
	}
	if t.Median.Valid() && s.include(float64(t.Median)) {
		marks = append(marks, mark{Name: "median", XAxis: plot(t.Median), Label: &opts.Label{Formatter: "median " + value(t.Median) + "\n"},
			LineStyle: &opts.LineStyle{Color: colourInk, Width: 1.5, Type: "dotted"}})
	}
	return marks
}

// placeLabels keeps the labels of reference lines apart: limits on the lower
// of two rows and each on the side away from the other, the median above.
func placeLabels(marks []mark, s span) []mark {
	for i := range marks {
		m := &marks[i]
		at := s.place(m.XAxis.(float64))
		align := "center"
		switch {
		case at < 0.14 || m.Name == "upper" && at < 0.84:
			align = "left"
		case at > 0.86 || m.Name == "lower":
			align = "right"
		}
		if m.Name == "median" && at > 0.14 && at < 0.86 {
			align = "center"
		}
		m.Label.Show, m.Label.Position, m.Label.Align = opts.Bool(true), "end", align
		m.Label.Color, m.Label.FontSize = colourInk, 11
	}
	return marks
}

// strip draws a test's level on each wafer: 5 to 95 % as a thin line, the
// middle half as a thick one, and the median.
func strip(p testPlace) (*chart, error) {
	t := p.Test
	if len(t.ByWafer) == 0 {
		return nil, nil
	}
	s, cut, ok := stripSpan(t)
	if !ok {
		return nil, nil
	}
	c := chart{ID: p.Anchor + "-wafers", Height: 240, Numbers: t.Name + " by wafer",
		Label: t.Name + " by wafer: median, middle half, and 5 to 95 % range. The numbers are in the table below.",
		Key:   []keyEntry{{"dot", "median"}, {"box", "middle half"}, {"line-thin", "5 to 95" + space + "%"}}}
	var marks []mark
	for _, m := range limitMarks(t, &s, &c) {
		m.YAxis, m.XAxis, m.Label = m.XAxis, nil, hidden()
		marks = append(marks, m)
		line := keyEntry{"line-dashed", "limit"}
		if m.Name == "median" {
			line = keyEntry{"line-dotted", "lot"}
		}
		if !slices.Contains(c.Key, line) {
			c.Key = append(c.Key, line)
		}
	}
	if cut {
		c.Note += "Some 5 to 95" + space + "% lines run beyond the range drawn. "
	}
	s.pad(0.05)
	var names []string
	var q05, q25, q75, q95, median []any
	var rows [][]string
	for _, w := range t.ByWafer {
		names = append(names, w.Wafer)
		q05, q25, q75, q95, median = append(q05, plot(w.Q05)), append(q25, plot(w.Q25)), append(q75, plot(w.Q75)), append(q95, plot(w.Q95)), append(median, plot(w.Median))
		rows = append(rows, []string{w.Wafer, count(w.N), value(w.Median), value(w.MADSigma), value(w.Q05), value(w.Q25), value(w.Q75), value(w.Q95), count(w.Fails)})
	}
	y := valueY(axisName(t))
	if s.Log {
		y.Type = "log"
	}
	y.Min, y.Max = plot(reports.Number(s.Low)), plot(reports.Number(s.High))
	l := charts.NewLine()
	l.SetGlobalOptions(append(globals(c.ID, c.Label, "shadow", opts.Grid{Left: "8", Right: "12", Top: "44", Bottom: "40"}),
		charts.WithXAxisOpts(categoryX("wafer", names)), charts.WithYAxisOpts(y))...)
	thick := float32(clamp(160/float64(len(names)), 3, 9))
	l.AddSeries("5 to 95 %", segments(q05, q95), lineStyle(colourSpread, 1.5, ""), withMarks(marks))
	l.AddSeries("middle half", segments(q25, q75), lineStyle(colourBox, thick, ""))
	d := charts.NewScatter()
	d.AddSeries("median", dots(median), scatter("circle", 6, colourFirst)...)
	l.Overlap(d)
	l.Accept(house{yTicks: s.ticks(6)})
	done, err := c.finish(l.JSON(), []string{"Wafer", "Dice", "Median", "MAD sigma", "5 %", "25 %", "75 %", "95 %", "Outside limits"}, rows, segmentRows, segmentRows, each)
	return &done, err
}

// stripSpan covers the middle halves of all wafers, and their 5 to 95 % ranges
// as far as those are within one and a half lengths of that: on one wafer with
// many opens the range would flatten all others. It reports whether it cut any,
// and whether there is anything to draw.
func stripSpan(t *reports.Test) (s span, cut, ok bool) {
	core, all := span{Low: math.Inf(1), High: math.Inf(-1)}, span{Low: math.Inf(1), High: math.Inf(-1)}
	cover := func(s *span, values ...reports.Number) {
		for _, v := range values {
			if v.Valid() {
				s.Low, s.High = min(s.Low, float64(v)), max(s.High, float64(v))
			}
		}
	}
	for _, w := range t.ByWafer {
		cover(&core, w.Q25, w.Median, w.Q75)
		cover(&all, w.Q05, w.Q25, w.Median, w.Q75, w.Q95)
	}
	if all.Low > all.High {
		return s, false, false
	}
	if core.Low >= core.High {
		core = all
	}
	all.Log = t.Histogram != nil && t.Histogram.Scale == "log" && all.Low > 0
	core.Log = all.Log
	s = core
	s.pad(1.5)
	s.Low, s.High = max(s.Low, all.Low), min(s.High, all.High)
	s.Log = all.Log
	return s, s.Low > all.Low || s.High < all.High, true
}

// limitCurve draws the lot's yield with a limit of the test moved.
func limitCurve(p testPlace) (*chart, error) {
	t := p.Test
	if len(t.LimitCurve) == 0 {
		return nil, nil
	}
	type pair struct{ lower, upper *reports.LimitPoint }
	at := map[reports.Number]*pair{}
	var shifts []reports.Number
	low, high := math.Inf(1), math.Inf(-1)
	for i := range t.LimitCurve {
		q := &t.LimitCurve[i]
		if !q.Shift.Valid() || !q.Yield.Valid() {
			continue
		}
		if at[q.Shift] == nil {
			at[q.Shift] = &pair{}
			shifts = append(shifts, q.Shift)
		}
		if q.Limit == "lower" {
			at[q.Shift].lower = q
		} else {
			at[q.Shift].upper = q
		}
		low, high = min(low, float64(q.Yield)), max(high, float64(q.Yield))
	}
	if len(shifts) == 0 {
		return nil, nil
	}
	slices.SortFunc(shifts, func(a, b reports.Number) int { return cmp.Compare(a, b) })
	c := chart{ID: p.Anchor + "-limits", Height: 240, Numbers: "Yield of the lot with a limit of " + t.Name + " moved",
		Label: "Yield of the lot with a limit of " + t.Name + " moved by up to ten percent. The numbers are in the table below."}
	var lower, upper []opts.LineData
	var rows [][]string
	hasLower, hasUpper := false, false
	for _, s := range shifts {
		row := []string{signedPercent(s), notAvailable, notAvailable, notAvailable, notAvailable}
		item := func(q *reports.LimitPoint, column int) opts.LineData {
			if q == nil {
				return opts.LineData{Value: []any{plot(100 * s), nil}}
			}
			row[column], row[column+1] = value(q.Value), percent(q.Yield)
			return opts.LineData{Value: []any{plot(100 * s), plot(100 * q.Yield)}}
		}
		lower, upper = append(lower, item(at[s].lower, 1)), append(upper, item(at[s].upper, 3))
		hasLower, hasUpper = hasLower || at[s].lower != nil, hasUpper || at[s].upper != nil
		rows = append(rows, row)
	}
	columns := []string{"Limit moved by", "Lower limit", "Yield, lower moved", "Upper limit", "Yield, upper moved"}
	x := valueX("limit moved by, % of its value")
	x.Min, x.Max = plot(100*shifts[0]), plot(100*shifts[len(shifts)-1])
	y := valueY("yield of the lot")
	s := span{Low: 100 * low, High: 100 * high}
	if s.High-s.Low < 0.5 { // a curve this flat must look flat
		s.Low, s.High = s.Low-0.25, s.High+0.25
	}
	s.pad(0.08)
	y.Min, y.Max = plot(reports.Number(s.Low)), plot(reports.Number(s.High))
	y.AxisLabel.Formatter = "{value} %"
	l := charts.NewLine()
	l.SetGlobalOptions(append(globals(c.ID, c.Label, "line", opts.Grid{Left: "8", Right: "20", Top: "44", Bottom: "40"}), charts.WithXAxisOpts(x), charts.WithYAxisOpts(y))...)
	marks := withMarks([]mark{{XAxis: 0, Label: hidden(), LineStyle: &opts.LineStyle{Color: colourMuted, Width: 1, Type: "solid"}}})
	var series []seriesRows
	if hasLower {
		l.AddSeries("lower", lower, lineStyle(colourFirst, 2, ""), marks)
		c.Key, series = append(c.Key, keyEntry{"line-first", "lower limit moved"}), append(series, each)
	}
	if hasUpper {
		l.AddSeries("upper", upper, lineStyle(colourAlone, 2, "dashed"), marks)
		c.Key, series = append(c.Key, keyEntry{"line-alone", "upper limit moved"}), append(series, each)
	}
	if !hasLower || !hasUpper {
		keep := []int{0, 1, 2}
		if hasUpper {
			keep = []int{0, 3, 4}
		}
		columns, rows = pick(columns, keep), pickRows(rows, keep)
	}
	l.Accept(house{yTicks: s.ticks(5)})
	done, err := c.finish(l.JSON(), columns, rows, series...)
	return &done, err
}

func pick(row []string, keep []int) []string {
	out := make([]string, len(keep))
	for i, k := range keep {
		out[i] = row[k]
	}
	return out
}

func pickRows(rows [][]string, keep []int) [][]string {
	out := make([][]string, len(rows))
	for i, r := range rows {
		out[i] = pick(r, keep)
	}
	return out
}
