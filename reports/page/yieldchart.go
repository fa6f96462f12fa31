package page

import (
	"math"
	"slices"

	"github.com/go-echarts/go-echarts/v2/charts"
	"github.com/go-echarts/go-echarts/v2/opts"

	"kneepoint/reports"
)

// yieldChart draws yields with their intervals side by side: wafers or zones.
type yieldChart struct {
	ID, Label string
	Axis      string // name of what stands side by side
	Names     []string
	Yields    []reports.Interval
	StandsLow []bool // nil when none is marked
	From      float64
	Lot       reports.Number
	Baseline  reports.Number
	Columns   []string
	Rows      [][]string
}

// scaleFrom is where a yield scale begins: a full ten percent at or below the
// lowest bound.
func scaleFrom(yields []reports.Interval) float64 {
	low := 1.0
	for _, y := range yields {
		for _, v := range []reports.Number{y.Lower, y.Estimate} {
			if v.Valid() {
				low = min(low, float64(v))
			}
		}
	}
	return clamp(math.Floor(10*low-1e-9)/10, 0, 0.9)
}

// draw returns nil when no yield is known.
func (p yieldChart) draw() (*chart, error) {
	if !slices.ContainsFunc(p.Yields, func(y reports.Interval) bool { return y.Estimate.Valid() }) {
		return nil, nil
	}
	c := chart{ID: p.ID, Height: 260, Label: p.Label, Key: []keyEntry{{"dot", "yield with 95" + space + "% interval"}}}
	var lower, upper, normal, out []any
	anyLow := false
	for i, y := range p.Yields {
		lower, upper = append(lower, plot(100*y.Lower)), append(upper, plot(100*y.Upper))
		at := plot(100 * y.Estimate)
		if p.StandsLow != nil && p.StandsLow[i] {
			anyLow = true
			normal, out = append(normal, nil), append(out, at)
		} else {
			normal, out = append(normal, at), append(out, nil)
		}
	}
	rows := []seriesRows{segmentRows, each}
	s := charts.NewScatter()
	s.AddSeries("yield", dots(normal), scatter("circle", 8, colourFirst)...)
	if anyLow {
		s.AddSeries("stands out low", dots(out), scatter("diamond", 12, colourLow)...)
		c.Key = append(c.Key, keyEntry{"diamond", "stands out low"})
		rows = append(rows, each)
	}
	var marks []mark
	if p.Lot.Valid() {
		marks = append(marks, mark{YAxis: plot(100 * p.Lot), Label: hidden(), LineStyle: &opts.LineStyle{Color: colourMuted, Width: 1, Type: "solid"}})
		c.Key = append(c.Key, keyEntry{"line-solid", "lot " + percent(p.Lot)})
	}
	if p.Baseline.Valid() {
		marks = append(marks, mark{YAxis: plot(100 * p.Baseline), Label: hidden(), LineStyle: &opts.LineStyle{Color: colourInk, Width: 1.5, Type: "dashed"}})
		c.Key = append(c.Key, keyEntry{"line-dashed", "baseline " + percent(p.Baseline)})
	}
	y := valueY("yield")
	y.AxisLabel.Formatter = "{value} %"
	y.Min, y.Max = plot(reports.Number(100*p.From)), 100
	l := charts.NewLine()
	l.SetGlobalOptions(append(globals(c.ID, c.Label, "shadow", opts.Grid{Left: "8", Right: "12", Top: "28", Bottom: "40"}),
		charts.WithXAxisOpts(categoryX(p.Axis, p.Names)), charts.WithYAxisOpts(y))...)
	l.AddSeries("interval", segments(lower, upper), lineStyle(colourSpread, 2, ""), withMarks(marks))
	l.Overlap(s)
	l.Accept(house{})
	done, err := c.finish(l.JSON(), p.Columns, p.Rows, rows...)
	return &done, err
}

func scatter(symbol string, size int, colour string) []charts.SeriesOpts {
	return []charts.SeriesOpts{
		charts.WithScatterChartOpts(opts.ScatterChart{Symbol: symbol, SymbolSize: size}),
		charts.WithItemStyleOpts(opts.ItemStyle{Color: colour, Opacity: opts.Float(1)}),
	}
}

func hidden() *opts.Label { return &opts.Label{Show: opts.Bool(false)} }
