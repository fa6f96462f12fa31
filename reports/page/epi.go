package page

import (
	"math"
	"strings"

	"github.com/go-echarts/go-echarts/v2/charts"
	"github.com/go-echarts/go-echarts/v2/opts"

	"kneepoint/reports"
)

// epi is what the electrical data say of the epitaxial layer.
type epi struct {
	Texts    []string
	Facts    []fact
	Charts   []chart
	MapTitle string
	Maps     []waferMap
	Tables   []table
	Notes    []string
}

// epiRow is the lot or a wafer.
type epiRow struct {
	name string
	*reports.Epi
}

// newEpi returns nil without an account; the record then says why.
func newEpi(r *reports.Report) (*epi, error) {
	var list []epiRow
	for i := range r.Wafers {
		if r.Wafers[i].Epi != nil {
			list = append(list, epiRow{r.Wafers[i].ID, r.Wafers[i].Epi})
		}
	}
	e := &epi{}
	var err error
	if e.Charts, err = epiCharts(list); err != nil {
		return nil, err
	}
	if r.Epi != nil {
		list = append([]epiRow{{"typical wafer", r.Epi}}, list...)
		e.say(r.Epi)
	} else if r.EpiWhy != "" && len(list) > 0 {
		e.Texts = append(e.Texts, sentence(r.EpiWhy))
	}
	if len(list) == 0 {
		return nil, nil
	}
	e.maps(r.Pictures.Epi)
	e.Tables = append(e.Tables, epiTable(list))
	for _, t := range []table{epiZoneTable(list), epiParameterTable(r.Epi), epiReadingTable(r.Epi)} {
		if len(t.Rows) > 0 {
			e.Tables = append(e.Tables, t)
		}
	}
	if r.Epi != nil && len(r.Epi.Next) > 0 {
		t := table{Caption: "Measurements that would tell more of the layer", Columns: []column{{Name: "Measurement"}, {Name: "Information, bits", Numeric: true}}}
		for _, n := range r.Epi.Next {
			t.Rows = append(t.Rows, []cell{{Text: n.Text, Class: "wide"}, text(significant(float64(n.InformationBits), 2))})
		}
		e.Tables = append(e.Tables, t)
	}
	return e, nil
}

// signs writes units of plain text as the page does.
var signs = strings.NewReplacer(" um", " µm", "cm^-3", "cm⁻³")

// say puts the lot's account in words.
func (e *epi) say(x *reports.Epi) {
	interval := func(i reports.Interval, unit string) string {
		return value(i.Estimate) + space + unit + " (" + valueRange(i) + ")"
	}
	line := "Typical wafer: net epi, which is what the tests see, " + interval(x.NetThicknessUM, "µm")
	line += "; as grown " + interval(x.ThicknessUM.Interval, "µm") + verdictWords(x.ThicknessUM)
	line += "; resistivity " + interval(x.ResistivityOhmCM.Interval, "Ω cm") + verdictWords(x.ResistivityOhmCM) + "."
	e.Texts = append(e.Texts, line)
	if s := x.BetweenWafers; s != nil && s.Text != "" {
		e.Texts = append(e.Texts, signs.Replace(sentence(s.Text)))
	}
	seen := func(ok bool, share reports.Number) string {
		if ok {
			return "yes: data bound it from both sides; the interval is " + percent(share) + " as wide as beforehand"
		}
		return "no: the data do not bound it from both sides, and values rest on what was believed beforehand"
	}
	e.Facts = []fact{{"regime", x.Regime + ", net epi over depletion width " + ratio(x.DepletionRatio.Estimate) + " (" + ratioRange(x.DepletionRatio) + ")"},
		{"thickness seen", seen(x.ThicknessObservable, x.ThicknessShare)}, {"doping seen", seen(x.DopingObservable, x.DopingShare)}}
	if x.Separable {
		e.Facts = append(e.Facts, fact{"told apart", "thickness and doping are told apart"})
	} else {
		e.Facts = append(e.Facts, fact{"told apart", "these tests alone do not tell thickness from doping"})
	}
	between := ""
	if x.BetweenWafers != nil {
		between = x.BetweenWafers.Text
	}
	for _, s := range strings.SplitAfter(x.Note, ". ") {
		s = strings.TrimSpace(s)
		if s != "" && !strings.EqualFold(strings.TrimSuffix(s, "."), between) {
			e.Notes = append(e.Notes, signs.Replace(s))
		}
	}
}

func verdictWords(s reports.SpecInterval) string {
	limits := specLimits(s)
	switch {
	case limits == "":
		return ""
	case s.InSpec == nil:
		return ", against the spec of " + limits + " not decided by these data"
	case *s.InSpec:
		return ", in the spec of " + limits
	}
	return ", out of the spec of " + limits
}

func specLimits(s reports.SpecInterval) string {
	switch {
	case s.SpecLower.Valid() && s.SpecUpper.Valid():
		return exact(s.SpecLower) + " to " + exact(s.SpecUpper)
	case s.SpecLower.Valid():
		return "at least " + exact(s.SpecLower)
	case s.SpecUpper.Valid():
		return "at most " + exact(s.SpecUpper)
	}
	return ""
}

func verdict(s reports.SpecInterval) cell {
	switch {
	case specLimits(s) == "":
		return text("no spec")
	case s.InSpec == nil:
		return text("not decided")
	case *s.InSpec:
		return text("in")
	}
	return text("out")
}

// epiCharts draw the layer by wafer: with the prior as dot and thick bar, data alone
// as diamond and thin line.
func epiCharts(list []epiRow) ([]chart, error) {
	if len(list) == 0 {
		return nil, nil
	}
	var out []chart
	for _, q := range []struct {
		id, name, unit string
		of             func(*reports.Epi) (reports.Interval, reports.Interval, *reports.SpecInterval)
	}{
		{"net", "net thickness", "µm", func(x *reports.Epi) (reports.Interval, reports.Interval, *reports.SpecInterval) {
			return x.NetThicknessUM, x.DataOnly.NetThicknessUM.Interval, nil
		}},
		{"grown", "thickness as grown", "µm", func(x *reports.Epi) (reports.Interval, reports.Interval, *reports.SpecInterval) {
			return x.ThicknessUM.Interval, x.DataOnly.ThicknessUM.Interval, &x.ThicknessUM
		}},
		{"resistivity", "resistivity", "Ω cm", func(x *reports.Epi) (reports.Interval, reports.Interval, *reports.SpecInterval) {
			return x.ResistivityOhmCM.Interval, x.DataOnly.ResistivityOhmCM.Interval, &x.ResistivityOhmCM
		}},
	} {
		c := chart{ID: "chart-epi-" + q.id, Height: 260, Label: "Epi " + q.name + " by wafer, with 95 % intervals, with the prior and from data alone. The numbers are in the table below.",
			Key: []keyEntry{{"dot", q.name + ", 95" + space + "% interval"}, {"diamond", "data alone"}}}
		var names []string
		var lower, upper, at, dataLower, dataUpper, dataAt []any
		var rows [][]string
		s := span{Low: math.Inf(1), High: math.Inf(-1)}
		var spec *reports.SpecInterval
		for _, x := range list {
			prior, data, limits := q.of(x.Epi)
			spec = limits
			names = append(names, x.name)
			lower, upper, at = append(lower, plot(prior.Lower)), append(upper, plot(prior.Upper)), append(at, plot(prior.Estimate))
			low, high := data.Lower, data.Upper
			if !data.Estimate.Valid() { // a one-sided bound is in the numbers, not in the picture
				low, high = reports.NaN, reports.NaN
			}
			dataLower, dataUpper, dataAt = append(dataLower, plot(low)), append(dataUpper, plot(high)), append(dataAt, plot(data.Estimate))
			for _, v := range []reports.Number{prior.Lower, prior.Upper, low, high} {
				if v.Valid() {
					s.Low, s.High = min(s.Low, float64(v)), max(s.High, float64(v))
				}
			}
			rows = append(rows, []string{x.name, value(prior.Estimate), valueRange(prior), value(data.Estimate), valueRange(data)})
		}
		if s.Low > s.High {
			continue
		}
		var marks []mark
		if spec != nil {
			for _, v := range []reports.Number{spec.SpecLower, spec.SpecUpper} {
				if v.Valid() && s.include(float64(v)) {
					marks = append(marks, mark{YAxis: plot(v), Label: hidden(), LineStyle: &opts.LineStyle{Color: colourInk, Width: 1.5, Type: "dashed"}})
				}
			}
			if limits := specLimits(*spec); limits != "" {
				c.Key = append(c.Key, keyEntry{"line-dashed", "spec " + limits})
			}
		}
		s.pad(0.05)
		y := valueY(q.name + ", " + q.unit)
		y.Min, y.Max = plot(reports.Number(s.Low)), plot(reports.Number(s.High))
		l := charts.NewLine()
		l.SetGlobalOptions(append(globals(c.ID, c.Label, "shadow", opts.Grid{Left: "8", Right: "12", Top: "28", Bottom: "40"}),
			charts.WithXAxisOpts(categoryX("wafer", names)), charts.WithYAxisOpts(y))...)
		l.AddSeries("interval", segments(lower, upper), lineStyle(colourBox, 6, ""), withMarks(marks))
		l.AddSeries("data alone, interval", segments(dataLower, dataUpper), lineStyle(colourMuted, 1, ""))
		m := charts.NewScatter()
		m.AddSeries(q.name, dots(at), scatter("circle", 7, colourFirst)...)
		m.AddSeries("data alone", dots(dataAt), scatter("diamond", 8, colourLow)...)
		l.Overlap(m)
		l.Accept(house{yTicks: s.ticks(5)})
		done, err := c.finish(l.JSON(), []string{"Wafer", q.name + ", " + q.unit, "95 % interval", "Data alone", "95 % interval"}, rows, segmentRows, segmentRows, each, each)
		if err != nil {
			return nil, err
		}
		out = append(out, done)
	}
	return out, nil
}

// maps are the pictures of the farthest wafer.
func (e *epi) maps(pictures []reports.Raster) {
	for i := range pictures {
		p := &pictures[i]
		if len(p.PNG) == 0 || p.Columns <= 0 || p.Rows <= 0 {
			continue
		}
		m := newWaferMap(p)
		wafer, what, _ := strings.Cut(p.Name, ", ")
		name, unit, _ := strings.Cut(what, ", ")
		m.Text = strings.ToUpper(name[:1]) + name[1:] + ", " + signs.Replace(" " + unit)[1:] + ", die by die"
		m.Alt = "Map of " + name + " on wafer " + wafer
		e.MapTitle = "Die by die on wafer " + wafer + ", the one farthest from the baseline"
		e.Maps = append(e.Maps, m)
	}
}

// tenfold is the power of ten that dopings are written in, and its name.
func tenfold(rows []epiRow) (float64, string) {
	for _, r := range rows {
		if v := float64(r.DopingCM3.Estimate); v > 0 {
			e := math.Floor(math.Log10(v))
			return math.Pow(10, e), "1e" + fixed(e, 0)
		}
	}
	return 1, "1"
}

func epiTable(rows []epiRow) table {
	ten, unit := tenfold(rows)
	t := table{Caption: "Epi layer inferred from electrical data, with 95 % intervals", Sortable: true, Columns: []column{{Name: "Of"},
		{Name: "Net thickness, µm", Numeric: true}, {Name: "Data alone", Numeric: true}, {Name: "As grown, µm", Numeric: true}, {Name: "Spec"},
		{Name: "Doping, " + unit + " cm⁻³", Numeric: true}, {Name: "Data alone", Numeric: true}, {Name: "Resistivity, Ω cm", Numeric: true}, {Name: "Spec"}},
		Note: "With the prior that the product's spec stands for, and from data alone, which charts over lots and drift must use. A verdict needs data that decide it: what rests on the prior is not decided."}
	with := func(i reports.Interval, unit float64) cell {
		if !i.Estimate.Valid() {
			return text(orWhy(notAvailable, i.Why))
		}
		at := func(v reports.Number) string { return significant(float64(v)/unit, 3) }
		return number(at(i.Estimate)+" ("+at(i.Lower)+" to "+at(i.Upper)+")", i.Estimate)
	}
	alone := func(s reports.SightInterval, unit float64) cell {
		switch {
		case s.Sight == "lower bound only":
			return number("at least "+significant(float64(s.Lower)/unit, 3), s.Lower)
		case s.Sight == "upper bound only":
			return number("at most "+significant(float64(s.Upper)/unit, 3), s.Upper)
		case !s.Estimate.Valid():
			return number("not seen", reports.NaN)
		}
		return with(s.Interval, unit)
	}
	for _, r := range rows {
		t.Rows = append(t.Rows, []cell{text(r.name), with(r.NetThicknessUM, 1), alone(r.DataOnly.NetThicknessUM, 1), with(r.ThicknessUM.Interval, 1), verdict(r.ThicknessUM),
			with(r.DopingCM3, ten), alone(r.DataOnly.DopingCM3, ten), with(r.ResistivityOhmCM.Interval, 1), verdict(r.ResistivityOhmCM)})
	}
	return t
}

func epiZoneTable(rows []epiRow) table {
	ten, unit := tenfold(rows)
	t := table{Caption: "Across the wafer: net thickness in µm and doping in " + unit + " cm⁻³, means of zones of equal area on the wafer's own estimate", Sortable: true, Columns: []column{{Name: "Wafer"}}}
	for _, r := range rows {
		if len(r.Zones) == 0 {
			continue
		}
		if len(t.Columns) == 1 {
			for _, q := range []string{"Thickness, ", "Doping, "} {
				for _, z := range r.Zones {
					t.Columns = append(t.Columns, column{Name: q + z.Name, Numeric: true})
				}
			}
		}
		row := []cell{text(r.name)}
		for _, z := range r.Zones {
			row = append(row, number(significant(float64(z.NetThicknessUM), 3), z.NetThicknessUM))
		}
		for _, z := range r.Zones {
			row = append(row, number(significant(float64(z.DopingCM3)/ten, 3), z.DopingCM3))
		}
		t.Rows = append(t.Rows, row)
	}
	return t
}

func epiParameterTable(x *reports.Epi) table {
	t := table{Caption: "What else the same tests say of the typical wafer, over the baseline", Columns: []column{{Name: "Parameter"}, {Name: "Ratio", Numeric: true},
		{Name: "95 % interval", Numeric: true}, {Name: "Beforehand", Numeric: true}, {Name: "Data alone", Numeric: true}}}
	if x == nil {
		return t
	}
	for _, p := range x.Parameters {
		alone := "not seen"
		if p.Seen {
			alone = ratio(p.DataOnly.Estimate) + " (" + ratioRange(p.DataOnly) + ")"
		}
		t.Rows = append(t.Rows, []cell{text(p.Name), text(ratio(p.Estimate)), text(ratioRange(p.Interval)), text(ratioRange(p.Prior)), text(alone)})
	}
	return t
}

func epiReadingTable(x *reports.Epi) table {
	t := table{Caption: "Levels that went in: medians of dice that are neither open nor short, over the baseline", Columns: []column{{Name: "Test"}, {Name: "Ratio", Numeric: true},
		{Name: "Sigma", Numeric: true, Help: "of measurement and sampling"}, {Name: "Wafers", Numeric: true}}}
	if x == nil {
		return t
	}
	for _, v := range x.Readings {
		at := fixed(float64(v.Ratio), 3)
		if v.Bound != "" {
			at = v.Bound + " " + at
		}
		t.Rows = append(t.Rows, []cell{text(v.Test), text(at), text(percent(v.Sigma)), counted(v.Dice)})
	}
	return t
}
