package page

import (
	"math"

	"github.com/go-echarts/go-echarts/v2/charts"
	"github.com/go-echarts/go-echarts/v2/opts"

	"kneepoint/reports"
)

// lossSplit is how the loss divides into what dice lose one by one and what they
// lose together.
type lossSplit struct {
	Facts []fact
	Chart *chart
	Table *table
}

func newLossSplit(y reports.LotYield) (*lossSplit, error) {
	if y.LossSplit == nil {
		return nil, nil
	}
	s := y.LossSplit
	with := func(i reports.Interval) string {
		if !i.Lower.Valid() {
			return orWhy(percent(i.Estimate), "")
		}
		return percent(i.Estimate) + " (95" + space + "%: " + percentRange(i) + ")"
	}
	out := &lossSplit{Facts: []fact{
		{"systematic: dice lost together", with(s.Systematic)},
		{"random: dice lost one by one", with(s.Random)},
		{"chance that a die elsewhere fails by itself", with(s.RandomRate)},
	}}
	out.Table = &table{Caption: "Windows of neighbouring dice, all of them good", Columns: []column{{Name: "Window, dice"}, {Name: "Windows", Numeric: true}, {Name: "Yield", Numeric: true}, {Name: "Fitted", Numeric: true}}}
	c := chart{ID: "chart-windows", Height: 240, Label: "Yield of windows of neighbouring dice against the dice in a window, observed and fitted. The numbers are in the table beside.",
		Key: []keyEntry{{"dot", "observed"}, {"line-fit", "fitted"}}}
	var seen []opts.ScatterData
	var fit []opts.LineData
	var rows [][]string
	for _, w := range s.Windows {
		name := count(w.Wide) + " x " + count(w.High)
		row := []string{name, count(w.Count), percent(w.Yield), percent(w.Fitted)}
		rows = append(rows, row)
		out.Table.Rows = append(out.Table.Rows, []cell{text(row[0]), text(row[1]), text(row[2]), text(row[3])})
		dice := w.Wide * w.High
		seen = append(seen, opts.ScatterData{Value: []any{dice, plot(100 * w.Yield)}})
		fit = append(fit, opts.LineData{Value: []any{dice, plot(100 * w.Fitted)}})
	}
	x, yAxis := valueX("dice in a window"), valueY("yield")
	x.Min = 0
	yAxis.AxisLabel.Formatter = "{value} %"
	low := 100.0
	for _, w := range s.Windows {
		low = min(low, 100*float64(w.Yield))
	}
	yAxis.Min, yAxis.Max = plot(reports.Number(clamp(10*math.Floor(low/10), 0, 90))), 100
	l := charts.NewLine()
	l.SetGlobalOptions(append(globals(c.ID, c.Label, "line", opts.Grid{Left: "8", Right: "16", Top: "28", Bottom: "40"}), charts.WithXAxisOpts(x), charts.WithYAxisOpts(yAxis))...)
	l.AddSeries("fitted", fit, charts.WithLineChartOpts(opts.LineChart{Symbol: "none"}), lineStyle(colourInk, 1.5, "solid"))
	d := charts.NewScatter()
	d.AddSeries("observed", seen, scatter("circle", 8, colourFirst)...)
	l.Overlap(d)
	l.Accept(house{})
	done, err := c.finish(l.JSON(), []string{"Window, dice", "Windows", "Yield", "Fitted"}, rows, each, each)
	out.Chart = &done
	return out, err
}

// spreadChart draws the share of each level in the spread of each test.
func spreadChart(rows []reports.Variance) (*chart, error) {
	levels := []struct{ name, mark, colour, text string }{
		{"wafer", "first", colourFirst, "between wafers"},
		{"zone, pattern", "alone", colourAlone, "zones, the same on all wafers"},
		{"zone", "any", colourAny, "zones, each wafer its own"},
		{"die", "pass", colourPass, "between neighbouring dice"},
	}
	var tests []string
	shares := map[[2]string]reports.Number{}
	for _, v := range rows {
		if !v.Share.Valid() {
			continue
		}
		if len(tests) == 0 || tests[len(tests)-1] != v.Test {
			tests = append(tests, v.Test)
		}
		shares[[2]string{v.Test, v.Level}] = v.Share
	}
	if len(tests) == 0 {
		return nil, nil
	}
	tests = tests[:min(len(tests), 2*chartedTests)]
	c := chart{ID: "chart-spread", Label: "Share of each level in the spread of each test. The numbers are in the table below.", Height: 60 + 24*len(tests)}
	b := charts.NewBar()
	x := percentX("share of the variance of passing dice")
	x.Max = 100
	b.SetGlobalOptions(append(globals(c.ID, c.Label, "shadow", opts.Grid{Left: "8", Right: "24", Top: "8", Bottom: "40"}), charts.WithXAxisOpts(x), charts.WithYAxisOpts(categoryY(tests)))...)
	table := make([][]string, len(tests))
	columns := []string{"Test"}
	for i, t := range tests {
		table[i] = []string{t}
	}
	var series []seriesRows
	for _, level := range levels {
		var data []opts.BarData
		any := false
		for i, t := range tests {
			v, ok := shares[[2]string{t, level.name}]
			if !ok {
				v = reports.NaN
			}
			any = any || ok
			data = append(data, opts.BarData{Value: plot(100 * v)})
			table[i] = append(table[i], percent(v))
		}
		columns = append(columns, level.text)
		if !any {
			continue
		}
		b.AddSeries(level.name, data, charts.WithBarChartOpts(opts.BarChart{Stack: "share", BarCategoryGap: "32%"}), charts.WithItemStyleOpts(opts.ItemStyle{Color: level.colour}))
		c.Key = append(c.Key, keyEntry{level.mark, level.text})
		series = append(series, each)
	}
	b.Accept(house{})
	done, err := c.finish(b.JSON(), columns, table, series...)
	return &done, err
}

// screenChart draws what each screen would cost in yield.
func screenChart(screens []reports.Screen) (*chart, error) {
	var names []string
	var data []opts.BarData
	var rows [][]string
	for _, s := range screens {
		if !s.Loss.Valid() || s.Dice == 0 || len(names) == 2*chartedTests {
			continue
		}
		name := s.Name
		if s.Test != "" {
			name = s.Test
		}
		names = append(names, name)
		data = append(data, opts.BarData{Value: plot(100 * s.Loss)})
		rows = append(rows, []string{name, count(s.Dice), percent(s.Loss)})
	}
	if len(names) == 0 {
		return nil, nil
	}
	c := chart{ID: "chart-screens", Height: 60 + 22*len(names), Label: "Yield that each screen would cost. The numbers are in the table below.", Key: []keyEntry{{"any", "yield cost of each screen; a test's name stands for its part average limits"}}}
	b := charts.NewBar()
	b.SetGlobalOptions(append(globals(c.ID, c.Label, "shadow", opts.Grid{Left: "8", Right: "24", Top: "8", Bottom: "40"}), charts.WithXAxisOpts(percentX("share of tested dice")), charts.WithYAxisOpts(categoryY(names)))...)
	b.AddSeries("cost", data, charts.WithBarChartOpts(opts.BarChart{BarCategoryGap: "40%"}), charts.WithItemStyleOpts(opts.ItemStyle{Color: colourAny}))
	b.Accept(house{})
	done, err := c.finish(b.JSON(), []string{"Screen", "Dice", "Yield cost"}, rows, each)
	return &done, err
}
