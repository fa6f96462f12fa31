package page

import (
	"encoding/json"
	"html/template"

	"github.com/go-echarts/go-echarts/v2/charts"
	"github.com/go-echarts/go-echarts/v2/opts"
	"github.com/go-echarts/go-echarts/v2/types"
)

// Colours are names of style.css's custom properties, so that the page's light,
// dark and printed forms each give a chart their own, with no second drawing.
// The hues keep apart for colour-blind readers, and their lightness keeps them
// apart on grey paper.
const (
	colourInk    = "var(--ink)"
	colourMuted  = "var(--muted)"
	colourRule   = "var(--rule)"
	colourPass   = "var(--pass)"
	colourFail   = "var(--fail)"
	colourFirst  = "var(--first)"
	colourAlone  = "var(--alone)"
	colourAny    = "var(--any)"
	colourSpread = "var(--spread)"
	colourBox    = "var(--box)"
	colourLow    = "var(--low)"
	fontFamily   = "system-ui, -apple-system, 'Segoe UI', Roboto, 'Helvetica Neue', Arial, sans-serif"
)

// chart is one drawing: the option object that echarts draws, what the pointer
// reads, a key, and where its numbers stand as a table.
type chart struct {
	ID      string
	Height  int // pixels
	Label   string
	Key     []keyEntry
	Payload template.JS
	Note    string
	Numbers string // caption of the table of numbers built on request; "" when the page has them elsewhere
	// LogCounts says that the reader may switch the y axis to a log scale.
	LogCounts bool
}

// keyEntry explains one mark. Mark is a class of style.css.
type keyEntry struct{ Mark, Text string }

// payload is what the page's script gets for one chart. Every text in it was
// formatted here; the script writes texts with textContent only.
type payload struct {
	Option  map[string]any `json:"option"`
	Columns []string       `json:"columns"`
	Rows    [][]string     `json:"rows"`
	// Series says for each series which row its data item i stands for: row
	// (i-Offset)/Per.
	Series []seriesRows `json:"series"`
	// LogCounts marks a chart whose y axis may be switched to a log scale.
	LogCounts bool `json:"logCounts,omitempty"`
}

type seriesRows struct {
	Offset int `json:"offset"`
	Per    int `json:"per"`
}

// each says that a series has one item a row.
var each = seriesRows{Per: 1}

// finish turns options into a chart. Its JSON escapes <, > and &, so that no
// text of the data can end the script element that holds it.
func (c chart) finish(option map[string]any, columns []string, rows [][]string, series ...seriesRows) (chart, error) {
	p := payload{Option: option, Columns: columns, Rows: rows, Series: series, LogCounts: c.LogCounts}
	b, err := json.Marshal(p)
	if err != nil {
		return chart{}, err
	}
	c.Payload = template.JS(b)
	return c, nil
}

// house is the part of every chart's options that is the same.
type house struct {
	charts.BaseConfigurationVisitor
	xTicks, yTicks []float64 // where the axes are labelled; nil for echarts' choice
}

// Visit sets what go-echarts has no field for: the font, and that charts are
// read by their axis and not by hovering single marks.
func (h house) Visit(option map[string]any) {
	option["textStyle"] = map[string]any{"fontFamily": fontFamily, "fontSize": 12}
	delete(option, "title")
	delete(option, "toolbox")
	delete(option, "legend") // the key is part of the page, where it wraps and prints
	option["backgroundColor"] = "transparent"
}

// VisitSeriesOpt switches off what moves or changes colour under the pointer.
func (h house) VisitSeriesOpt(series charts.MultiSeries) any {
	return adapt(series, func(s map[string]any) {
		s["silent"] = true
		s["emphasis"] = map[string]any{"disabled": true}
		if s["type"] == types.ChartLine {
			s["animation"] = false
			s["symbol"] = orDefault(s["symbol"], "none")
		}
		if s["type"] == types.ChartScatter {
			s["z"] = 4 // over the lines of its interval, which lie at 3
		}
		if m, ok := s["markLine"].(map[string]any); ok {
			m["silent"] = true
			m["animation"] = false
		}
	})
}

// VisitXAxis and VisitYAxis put the chosen ticks in.
func (h house) VisitXAxis(axes []opts.XAxis) any {
	return adapt(axes, func(a map[string]any) { nameStyle(a); setTicks(a, h.xTicks) })
}

func (h house) VisitYAxis(axes []opts.YAxis) any {
	return adapt(axes, func(a map[string]any) { nameStyle(a); setTicks(a, h.yTicks) })
}

func nameStyle(axis map[string]any) {
	axis["nameTextStyle"] = map[string]any{"color": colourMuted, "fontSize": 11}
}

func setTicks(axis map[string]any, ticks []float64) {
	if ticks == nil {
		return
	}
	for _, part := range []string{"axisLabel", "axisTick"} {
		m, ok := axis[part].(map[string]any)
		if !ok {
			m = map[string]any{}
			axis[part] = m
		}
		m["customValues"] = ticks
	}
}

// adapt turns a list of option structs into maps and changes each.
func adapt[T any](list []T, change func(map[string]any)) any {
	b, err := json.Marshal(list)
	if err != nil {
		return list
	}
	var maps []map[string]any
	if err := json.Unmarshal(b, &maps); err != nil {
		return list
	}
	for _, m := range maps {
		change(m)
	}
	return maps
}

func orDefault(v any, otherwise any) any {
	if v == nil || v == "" {
		return otherwise
	}
	return v
}

// globals are the options that every chart starts from.
func globals(id, label string, pointer string, grid opts.Grid) []charts.GlobalOpts {
	return []charts.GlobalOpts{
		charts.WithInitializationOpts(opts.Initialization{ChartID: id, Renderer: "svg"}),
		charts.WithAnimation(false),
		charts.WithAriaOpts(&opts.Aria{
			Enabled: opts.Bool(true),
			Label:   &opts.AriaLabel{Enabled: opts.Bool(true), Description: label},
		}),
		charts.WithTooltipOpts(opts.Tooltip{
			Show: opts.Bool(true), Trigger: "axis",
			BackgroundColor: "var(--paper)", BorderColor: "var(--rule-strong)",
			AxisPointer: &opts.AxisPointer{Type: pointer, Label: &opts.Label{Show: opts.Bool(false)}},
		}),
		charts.WithGridOpts(grid),
	}
}

func axisLabel() *opts.AxisLabel {
	return &opts.AxisLabel{Color: colourMuted, FontSize: 11, HideOverlap: opts.Bool(true)}
}

func axisLine(show bool) *opts.AxisLine {
	return &opts.AxisLine{Show: opts.Bool(show), OnZero: opts.Bool(false), LineStyle: &opts.LineStyle{Color: "var(--rule-strong)"}}
}

func gridLines(show bool) *opts.SplitLine {
	return &opts.SplitLine{Show: opts.Bool(show), LineStyle: &opts.LineStyle{Color: colourRule, Width: 1}}
}

// valueX and its sisters are axes in the house's style.
func valueX(name string) opts.XAxis {
	return opts.XAxis{Type: "value", Name: name, NameLocation: "middle", NameGap: 28, AxisLabel: axisLabel(), AxisLine: axisLine(true), SplitLine: gridLines(false),
		AxisTick: &opts.AxisTick{Show: opts.Bool(true), LineStyle: &opts.LineStyle{Color: "var(--rule-strong)"}}}
}

func categoryX(name string, names []string) opts.XAxis {
	x := valueX(name)
	x.Type = "category"
	x.Data = names
	x.AxisTick = &opts.AxisTick{Show: opts.Bool(false)}
	return x
}

func valueY(name string) opts.YAxis {
	return opts.YAxis{Type: "value", Name: name, NameLocation: "end", NameGap: 10, AxisLabel: axisLabel(), AxisLine: axisLine(false), SplitLine: gridLines(true)}
}

// categoryY lists names from top to bottom.
func categoryY(names []string) opts.YAxis {
	l := axisLabel()
	l.Color = colourInk
	l.FontSize = 12
	l.Width = 120
	l.Overflow = "truncate"
	return opts.YAxis{Type: "category", Data: names, Inverse: opts.Bool(true), AxisLabel: l, AxisLine: axisLine(true), SplitLine: gridLines(false)}
}

// segments draws one line from low to high at each place: the whiskers and
// boxes of a strip, and the intervals of estimates. Each takes three items, the
// third one empty, so that the lines do not join.
func segments(low, high []any) []opts.LineData {
	data := make([]opts.LineData, 0, 3*len(low))
	for i := range low {
		a, b := low[i], high[i]
		if a == nil || b == nil {
			a, b = nil, nil
		}
		data = append(data,
			opts.LineData{Value: []any{i, a}}, opts.LineData{Value: []any{i, b}}, opts.LineData{Value: []any{i, nil}})
	}
	return data
}

var segmentRows = seriesRows{Per: 3}

// dots are single marks at each place.
func dots(values []any) []opts.ScatterData {
	data := make([]opts.ScatterData, len(values))
	for i, v := range values {
		data[i] = opts.ScatterData{Value: []any{i, v}}
	}
	return data
}

func lineStyle(colour string, width float32, kind string) charts.SeriesOpts {
	return charts.WithLineStyleOpts(opts.LineStyle{Color: colour, Width: width, Type: kind})
}

// mark is a reference line across a chart: a limit, a median, a baseline.
type mark struct {
	Name      string          `json:"name,omitempty"`
	XAxis     any             `json:"xAxis,omitempty"`
	YAxis     any             `json:"yAxis,omitempty"`
	Label     *opts.Label     `json:"label,omitempty"`
	LineStyle *opts.LineStyle `json:"lineStyle,omitempty"`
}

func withMarks(marks []mark) charts.SeriesOpts {
	return charts.WithSeriesOpts(func(s *charts.SingleSeries) {
		if len(marks) == 0 {
			return
		}
		s.MarkLines = &opts.MarkLines{MarkLineStyle: opts.MarkLineStyle{Symbol: []string{"none", "none"}}}
		for _, m := range marks {
			s.MarkLines.Data = append(s.MarkLines.Data, m)
		}
	})
}
