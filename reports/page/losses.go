package page

import (
	"cmp"
	"fmt"
	"slices"

	"github.com/go-echarts/go-echarts/v2/charts"
	"github.com/go-echarts/go-echarts/v2/opts"

	"kneepoint/reports"
)

// chartedTests and chartedBins are how many bars a Pareto draws; its table has
// all of them.
const (
	chartedTests = 12
	chartedBins  = 12
)

// losses is the section on what was lost on which test and bin.
type losses struct {
	Tests     *table
	TestChart *chart
	TestWhy   string // why there is less to show
	Bins      *table
	BinCharts []chart
	Grades    *table
	Split     *lossSplit
}

// testPlace says where a test's card is on the page.
type testPlace struct {
	*reports.Test
	Anchor string
}

// byLoss returns the tests, worst first: by first loss, then by any loss, then
// by readings outside the limits, then as they were.
func byLoss(tests []reports.Test) []testPlace {
	places := make([]testPlace, len(tests))
	for i := range tests {
		places[i] = testPlace{&tests[i], fmt.Sprintf("test-%d", i+1)}
	}
	deref := func(p *int) int {
		if p == nil {
			return 0
		}
		return *p
	}
	slices.SortStableFunc(places, func(a, b testPlace) int {
		return cmp.Or(
			cmp.Compare(b.Loss.FirstDice, a.Loss.FirstDice),
			cmp.Compare(deref(b.Loss.AnyDice), deref(a.Loss.AnyDice)),
			cmp.Compare(b.LowFails+b.HighFails, a.LowFails+a.HighFails))
	})
	return places
}

func newLosses(r *reports.Report, tests []testPlace) (losses, error) {
	var l losses
	for _, t := range tests {
		if t.Loss.Why != "" {
			l.TestWhy = sentence(t.Loss.Why)
			break
		}
	}
	if len(tests) > 0 {
		l.Tests = testTable(tests)
		c, err := testPareto(tests)
		if err != nil {
			return l, err
		}
		l.TestChart = c
	}
	if err := l.addBins(r.Bins); err != nil {
		return l, err
	}
	l.Grades = gradeTable(r.Yield.Grades)
	var err error
	l.Split, err = newLossSplit(r.Yield)
	return l, err
}

func testTable(tests []testPlace) *table {
	t := &table{
		Caption:  "Loss by test, share of the tested dice",
		Sortable: true,
		Columns: []column{
			{Name: "Test"}, {Name: "Condition", Plain: true}, {Name: "Limits", Plain: true},
			{Name: "First", Numeric: true, Help: "dice whose first failing test this is"},
			{Name: "Alone", Numeric: true, Help: "dice that fail this test and no other"},
			{Name: "Any", Numeric: true, Help: "dice that fail this test, whatever else they fail"},
			{Name: "First, dice", Numeric: true}, {Name: "Alone, dice", Numeric: true}, {Name: "Any, dice", Numeric: true},
			{Name: "Low", Numeric: true, Help: "dice below the lower limit"}, {Name: "High", Numeric: true, Help: "dice above the upper limit"},
			{Name: "Marginal", Numeric: true, Help: "share of this test's fails that fail by little"},
		},
	}
	known := func(n *int, isKnown bool) cell {
		if n == nil || !isKnown {
			return text(notAvailable)
		}
		return counted(*n)
	}
	outside := func(n int, limit reports.Number) cell {
		if !limit.Valid() {
			return cell{} // no limit, nothing to be outside of
		}
		return counted(n)
	}
	for _, p := range tests {
		t.Rows = append(t.Rows, []cell{
			{Text: p.Name, Href: "#" + p.Anchor}, {Text: p.Condition, Class: "phrase"}, text(limits(p.Test)),
			number(percent(p.Loss.First), p.Loss.First), number(percent(p.Loss.Alone), p.Loss.Alone), number(percent(p.Loss.Any), p.Loss.Any),
			known(&p.Loss.FirstDice, p.Loss.First.Valid()), known(p.Loss.AloneDice, true), known(p.Loss.AnyDice, true),
			outside(p.LowFails, p.Lower), outside(p.HighFails, p.Upper), number(percent(p.Marginal), p.Marginal),
		})
		if t.Note == "" && p.MarginalMeans != "" {
			t.Note = "Marginal: " + p.MarginalMeans + "."
		}
	}
	return t
}

// limits writes a test's limits in its unit.
func limits(t *reports.Test) string {
	lower, upper := t.Lower.Valid(), t.Upper.Valid()
	switch {
	case lower && upper:
		return exact(t.Lower) + " to " + withUnit(exact(t.Upper), t.Unit)
	case lower:
		return "≥" + space + withUnit(exact(t.Lower), t.Unit)
	case upper:
		return "≤" + space + withUnit(exact(t.Upper), t.Unit)
	}
	return "no limit"
}

func testPareto(tests []testPlace) (*chart, error) {
	shown := make([]testPlace, 0, chartedTests)
	hasAlone, hasAny := false, false
	for _, t := range tests {
		if len(shown) < chartedTests && (t.Loss.First > 0 || t.Loss.Any > 0) {
			shown = append(shown, t)
			hasAlone = hasAlone || t.Loss.Alone.Valid()
			hasAny = hasAny || t.Loss.Any.Valid()
		}
	}
	if len(shown) == 0 {
		return nil, nil
	}
	var names []string
	var first, alone, any []opts.BarData
	var rows [][]string
	for _, t := range shown {
		names = append(names, t.Name)
		first = append(first, opts.BarData{Value: plot(100 * t.Loss.First)})
		alone = append(alone, opts.BarData{Value: plot(100 * t.Loss.Alone)})
		any = append(any, opts.BarData{Value: plot(100 * t.Loss.Any)})
		rows = append(rows, []string{t.Name, percent(t.Loss.First), percent(t.Loss.Alone), percent(t.Loss.Any)})
	}
	c := chart{
		ID: "chart-tests", Label: "Loss by test: bars of the share of dice that fail each test first, alone and at all. The numbers are in the table below.",
		Key: []keyEntry{{"first", "first: its first failing test"}},
	}
	b := charts.NewBar()
	b.SetGlobalOptions(append(globals(c.ID, c.Label, "shadow", opts.Grid{Left: "8", Right: "24", Top: "8", Bottom: "40"}),
		charts.WithXAxisOpts(percentX("share of tested dice")), charts.WithYAxisOpts(categoryY(names)))...)
	bars := []seriesRows{each}
	add := func(name, colour string, data []opts.BarData) {
		b.AddSeries(name, data, charts.WithBarChartOpts(opts.BarChart{BarGap: "12%", BarCategoryGap: "32%"}), charts.WithItemStyleOpts(opts.ItemStyle{Color: colour}))
	}
	add("first", colourFirst, first)
	if hasAny {
		add("any", colourAny, any)
		c.Key = append(c.Key, keyEntry{"any", "any: fails it, whatever else"})
		bars = append(bars, each)
	}
	if hasAlone {
		add("alone", colourAlone, alone)
		c.Key = append(c.Key, keyEntry{"alone", "alone: fails nothing else"})
		bars = append(bars, each)
	}
	c.Height = 60 + len(names)*(14+10*len(bars))
	b.Accept(house{})
	c, err := c.finish(b.JSON(), []string{"Test", "First", "Alone", "Any"}, rows, bars...)
	return &c, err
}

// percentX is a share axis. Its data are in percent.
func percentX(name string) opts.XAxis {
	x := valueX(name)
	x.AxisLabel.Formatter = "{value} %"
	x.SplitLine = gridLines(true)
	x.Min = 0
	x.SplitNumber = 4
	return x
}

func (l *losses) addBins(bins []reports.Bin) error {
	if len(bins) == 0 {
		return nil
	}
	sorted := slices.Clone(bins)
	slices.SortStableFunc(sorted, func(a, b reports.Bin) int {
		passLast := func(x reports.Bin) int {
			if x.Pass {
				return 1
			}
			return 0
		}
		return cmp.Or(cmp.Compare(a.Kind, b.Kind), cmp.Compare(passLast(a), passLast(b)), cmp.Compare(b.Dice, a.Dice), cmp.Compare(a.Bin, b.Bin))
	})
	l.Bins = &table{
		Caption: "Bins: failing ones by falling count, then passing ones", Sortable: true,
		Columns: []column{{Name: "Bin", Numeric: true}, {Name: "Kind"}, {Name: "Name"}, {Name: "Result"}, {Name: "Dice", Numeric: true}, {Name: "Share", Numeric: true},
			{Name: "Cumulative", Numeric: true, Help: "share of all failing dice up to this bin"}},
	}
	for _, b := range sorted {
		result, cumulative := "fail", number(percent(b.Cumulative), b.Cumulative)
		if b.Pass {
			result = "pass"
			if !b.Cumulative.Valid() {
				cumulative = cell{} // a Pareto is over failing bins
			}
		}
		l.Bins.Rows = append(l.Bins.Rows, []cell{counted(b.Bin), text(b.Kind), text(b.Name), text(result), counted(b.Dice), number(percent(b.Share), b.Share), cumulative})
	}
	for _, kind := range []string{"hard", "soft"} {
		var failing []reports.Bin
		for _, b := range sorted {
			if b.Kind == kind && !b.Pass && b.Dice > 0 && len(failing) < chartedBins {
				failing = append(failing, b)
			}
		}
		if len(failing) == 0 {
			continue
		}
		c, err := binPareto(kind, failing)
		if err != nil {
			return err
		}
		l.BinCharts = append(l.BinCharts, c)
	}
	return nil
}

func binPareto(kind string, failing []reports.Bin) (chart, error) {
	var names []string
	var data []opts.BarData
	var rows [][]string
	for _, b := range failing {
		name := fmt.Sprint(b.Bin)
		if b.Name != "" {
			name += " " + b.Name
		}
		names = append(names, name)
		data = append(data, opts.BarData{Value: plot(100 * b.Share)})
		rows = append(rows, []string{name, count(b.Dice), percent(b.Share), percent(b.Cumulative)})
	}
	c := chart{
		ID: "chart-bins-" + kind, Height: 60 + 24*len(names),
		Label: "Failing " + kind + " bins: bars of their share of the tested dice. The numbers are in the table below.",
		Key:   []keyEntry{{"fail", "failing " + kind + " bins"}},
	}
	b := charts.NewBar()
	b.SetGlobalOptions(append(globals(c.ID, c.Label, "shadow", opts.Grid{Left: "8", Right: "24", Top: "8", Bottom: "40"}),
		charts.WithXAxisOpts(percentX("share of tested dice")), charts.WithYAxisOpts(categoryY(names)))...)
	b.AddSeries("share", data, charts.WithBarChartOpts(opts.BarChart{BarCategoryGap: "40%"}), charts.WithItemStyleOpts(opts.ItemStyle{Color: colourFail}))
	b.Accept(house{})
	return c.finish(b.JSON(), []string{"Bin", "Dice", "Share", "Cumulative"}, rows, each)
}

func gradeTable(grades []reports.Grade) *table {
	if len(grades) == 0 {
		return nil
	}
	t := &table{Caption: "Grades: passing bins, share of all tested dice",
		Columns: []column{{Name: "Bin", Numeric: true}, {Name: "Grade"}, {Name: "Dice", Numeric: true}, {Name: "Share", Numeric: true}, {Name: "", Plain: true}}}
	longest := reports.Number(0)
	for _, g := range grades {
		if g.Share > longest {
			longest = g.Share
		}
	}
	for _, g := range grades {
		t.Rows = append(t.Rows, []cell{counted(g.Bin), text(g.Name), counted(g.Dice), number(percent(g.Share), g.Share), {Bar: shareBar(g.Share, longest)}})
	}
	return t
}
