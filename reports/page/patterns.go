package page

import (
	"fmt"
	"strings"

	"github.com/go-echarts/go-echarts/v2/charts"
	"github.com/go-echarts/go-echarts/v2/opts"

	"kneepoint/reports"
)

// patterns is the section on what wafers have in common on their maps.
type patterns struct {
	Texts    []string
	Chart    *chart
	Groups   *table
	Stacks   []mapRow
	Key      []swatch
	Tables   []table
	Surfaces []waferMap
	Shapes   []table
}

// mapRow is a row of maps under one title.
type mapRow struct {
	Title string
	Maps  []waferMap
}

func newPatterns(r *reports.Report, a *atlas) (patterns, error) {
	var p patterns
	if r.StacksWhy == "" && r.GroupsWhy != "" {
		p.Texts = append(p.Texts, sentence("The wafers are in no groups: "+r.GroupsWhy))
	}
	if why := noMaps(r); why != "" {
		p.Texts = append(p.Texts, sentence("Patterns, join counts and clusters: "+notAvailable+": "+why))
	}
	p.stackMaps(r, a)
	p.Groups = groupTable(r)
	for _, t := range []*table{stackTable(r), repeaterTable(r), waferPatterns(r), mapStatistics(r)} {
		if t != nil && len(t.Rows) > 0 {
			p.Tables = append(p.Tables, *t)
		}
	}
	p.surfaceMaps(r, a)
	if t := shapeTable(r); len(t.Rows) > 0 {
		p.Shapes = append(p.Shapes, t)
	}
	var err error
	p.Chart, err = groupChart(r)
	return p, err
}

// noMaps says why no wafer has an account of its map, "" when one has.
func noMaps(r *reports.Report) string {
	why := ""
	for i := range r.Wafers {
		s := &r.Wafers[i].Spatial
		if s.JoinCount != nil || s.Alike != nil || len(s.Clusters) > 0 || s.Why == "" {
			return ""
		}
		why = s.Why
	}
	return why
}

// stackMaps are the stacked maps of groups and tests.
func (p *patterns) stackMaps(r *reports.Report, a *atlas) {
	rows := []mapRow{{Title: "Each group of wafers, stacked"}, {Title: "Fails of a test, all wafers stacked"}}
	for i := range min(len(r.Stacks), len(r.Pictures.Stacks)) {
		s := &r.Stacks[i]
		row, name := 0, fmt.Sprintf("Group %d", s.Group)
		if s.Of == "test" {
			row, name = 1, s.Test
		}
		text := plural(s.Wafers, "wafer", "wafers") + ", fail rate " + percent(s.Rate)
		if m := a.add(&r.Pictures.Stacks[i], "Stacked map: "+strings.ToLower(name[:1])+name[1:], text, s.Signatures); m != nil {
			if s.Of == "test" {
				a.data[m.Index].Title = "Stacked map: fails of " + name
			}
			m.Name, m.Alt = name, a.data[m.Index].Title+", "+text
			rows[row].Maps = append(rows[row].Maps, *m)
			if p.Key == nil {
				p.Key = m.Key
			}
		}
	}
	for i := range p.Key { // shared by all: without counts
		p.Key[i].Dice, p.Key[i].Share = "", ""
	}
	for _, row := range rows {
		if len(row.Maps) > 0 {
			p.Stacks = append(p.Stacks, row)
		}
	}
}

// groupTable says what each group is.
func groupTable(r *reports.Report) *table {
	if len(r.Groups) == 0 {
		return nil
	}
	t := &table{Caption: "Groups of wafers with like maps", Columns: []column{{Name: "Group"}, {Name: "Wafers"}, {Name: "Yield", Numeric: true}, {Name: "Dice", Numeric: true}, {Name: "What it is", Plain: true}},
		Note: "Grouped by the fail rates of 27 parts of the wafer and by the loss to each kind of pattern (Ward's method, number of groups by the gap statistic)."}
	for _, g := range r.Groups {
		t.Rows = append(t.Rows, []cell{counted(g.ID), {Text: strings.Join(g.Wafers, ", "), Class: "phrase"}, number(percent(g.Yield), g.Yield), counted(g.Dice), {Text: g.Text, Class: "wide"}})
	}
	return t
}

// groupChart shows each wafer's group in the order of the wafers.
func groupChart(r *reports.Report) (*chart, error) {
	if len(r.Groups) == 0 {
		return nil, nil
	}
	c := chart{ID: "chart-groups", Height: 70 + 24*len(r.Groups), Numbers: "Groups of wafers in their order",
		Label: "Group of each wafer, in the order of the wafers. The numbers are in the table below the chart.", Key: []keyEntry{{"dot", "wafer"}}}
	var names, groups []string
	var at []any
	var rows [][]string
	for _, g := range r.Groups {
		groups = append(groups, fmt.Sprintf("group %d", g.ID))
	}
	for i := range r.Wafers {
		w := &r.Wafers[i]
		names = append(names, w.ID)
		group := "none"
		if w.Group > 0 {
			at, group = append(at, w.Group-1), fmt.Sprint(w.Group)
		} else {
			at = append(at, nil)
		}
		rows = append(rows, []string{w.ID, group, percent(w.Yield.Estimate), briefly(w.Signatures)})
	}
	s := charts.NewScatter()
	s.SetGlobalOptions(append(globals(c.ID, c.Label, "shadow", opts.Grid{Left: "8", Right: "12", Top: "8", Bottom: "40", ContainLabel: opts.Bool(true)}),
		charts.WithXAxisOpts(categoryX("wafer", names)), charts.WithYAxisOpts(categoryY(groups)))...)
	s.AddSeries("group", dots(at), scatter("circle", 10, colourFirst)...)
	s.Accept(house{})
	done, err := c.finish(s.JSON(), []string{"Wafer", "Group", "Yield", "Patterns"}, rows, each)
	return &done, err
}

// stackTable lists the patterns of all stacked maps.
func stackTable(r *reports.Report) *table {
	t := &table{Caption: "Patterns of the stacked maps", Columns: []column{{Name: "Stack"}, {Name: "Wafers", Numeric: true}, {Name: "Fail rate", Numeric: true}, {Name: "Pattern"}, {Name: "Where", Plain: true},
		{Name: "Loss", Numeric: true, Help: "share of the stack's dice lost to it"}, {Name: "Inside", Numeric: true, Help: "fail rate inside its outline"}, {Name: "Outside", Numeric: true, Help: "fail rate outside of all outlines"},
		{Name: "p", Numeric: true}, {Name: "On wafers", Plain: true, Help: "wafers that fail more inside than outside, beyond chance"}},
		Note: "Patterns are looked for in the positions that fail on more wafers than usual; loss and rates are of all dice."}
	add := func(name string, wafers int, rate reports.Number, list []reports.Signature) {
		for _, s := range list {
			t.Rows = append(t.Rows, []cell{text(name), counted(wafers), number(percent(rate), rate), text(kindWords(s.Kind)), {Text: where(s), Class: "wide"},
				lossCell(s), number(percent(s.Rate), s.Rate), number(percent(s.Background), s.Background), number(pValue(s.PValue), s.PValue), {Text: strings.Join(s.Wafers, ", "), Class: "phrase"}})
			if !patterned(s) {
				row := t.Rows[len(t.Rows)-1]
				row[6], row[7] = text(""), text("")
			}
		}
	}
	if len(r.Signatures) > 0 {
		lot := reports.Number(1) - r.Yield.Estimate
		add("all wafers", len(r.Wafers), lot, r.Signatures)
	}
	for _, s := range r.Stacks {
		name := s.Test
		if s.Of == "group" {
			name = fmt.Sprintf("group %d", s.Group)
		}
		add(name, s.Wafers, s.Rate, s.Signatures)
	}
	return t
}

// waferPatterns lists the patterns of every wafer's map.
func waferPatterns(r *reports.Report) *table {
	t := &table{Caption: "Patterns of the wafers’ fail maps", Sortable: true, Columns: []column{{Name: "Wafer"}, {Name: "Pattern"}, {Name: "Where", Plain: true},
		{Name: "Loss", Numeric: true, Help: "share of the wafer's dice lost to it"}, {Name: "Of the fails", Numeric: true, Help: "share of the wafer's fails that are due to it"},
		{Name: "Inside", Numeric: true, Help: "fail rate inside its outline"}, {Name: "Without it", Numeric: true, Help: "fail rate that would be there without it, or outside of all outlines"}, {Name: "p", Numeric: true, Help: "chance that fails without it show any place that stands out as much"}},
		Note: "Wafers without a pattern are left out: their fails have no structure beyond chance, or are too few to judge."}
	for i := range r.Wafers {
		for _, s := range r.Wafers[i].Signatures {
			if patterned(s) {
				t.Rows = append(t.Rows, []cell{text(r.Wafers[i].ID), text(kindWords(s.Kind)), {Text: where(s), Class: "wide"}, lossCell(s), number(percent(s.Strength), s.Strength),
					number(percent(s.Rate), s.Rate), number(percent(s.Background), s.Background), number(pValue(s.PValue), s.PValue)})
			}
		}
	}
	return t
}

func lossCell(s reports.Signature) cell {
	if !patterned(s) {
		return text("")
	}
	return number(percent(s.Loss), s.Loss)
}

// repeaterTable lists the die positions that fail again and again.
func repeaterTable(r *reports.Report) *table {
	t := &table{Caption: "Die positions that fail on many wafers", Sortable: true, Columns: []column{{Name: "Position"}, {Name: "x", Numeric: true}, {Name: "y", Numeric: true}, {Name: "Radius, mm", Numeric: true},
		{Name: "Failing wafers", Numeric: true}, {Name: "of", Numeric: true}, {Name: "By chance", Numeric: true, Help: "failing wafers expected"}, {Name: "p", Numeric: true}, {Name: "p, all positions", Numeric: true, Help: "adjusted for all positions: false discovery rate"}, {Name: "Mostly fails first"}}}
	for i, p := range r.Repeaters {
		t.Rows = append(t.Rows, []cell{counted(i + 1), counted(p.X), counted(p.Y), number(trimmed(p.RadiusMM, 3), p.RadiusMM), counted(p.Failing), counted(p.Tested), number(trimmed(p.Expected, 2), p.Expected),
			number(pValue(p.PValue), p.PValue), number(pValue(p.Adjusted), p.Adjusted), text(p.Main)})
	}
	if r.RepeatersAll > len(r.Repeaters) {
		t.Note = fmt.Sprintf("The first %d of %s.", len(r.Repeaters), count(r.RepeatersAll))
	}
	return t
}

// mapStatistics are the statistics of every wafer's fail map.
func mapStatistics(r *reports.Report) *table {
	t := &table{Caption: "Statistics of the wafers’ fail maps", Sortable: true, Columns: []column{{Name: "Wafer"},
		{Name: "Joins z", Numeric: true, Help: "fail-fail joins against chance, in standard deviations"}, {Name: "p", Numeric: true, Help: "chance of so many joins or more, fails scattered at random"},
		{Name: "Moran’s I", Numeric: true, Help: "0 by chance, towards 1 where neighbours are alike"}, {Name: "p", Numeric: true},
		{Name: "Geary’s C", Numeric: true, Help: "1 by chance, towards 0 where neighbours are alike"}, {Name: "p", Numeric: true},
		{Name: "Largest cluster", Numeric: true, Help: "dice of the largest connected group of fails, its centre, and that one's distance from the wafer's"},
		{Name: "Hot dice", Numeric: true, Help: "dice among more fails than chance allows (Getis and Ord, false discovery rate 5 %)"},
		{Name: "Scan p", Numeric: true, Help: "chance that random fails make any circle as unlikely (Kulldorff)"}, {Name: "Most unlikely circle", Plain: true}},
		Note: "Joins: failing neighbours of failing dice, against what chance gives; a large z with a small p says that the fails are clustered. Geary’s C also falls where fails lie at the rim, whose dice have fewer neighbours."}
	for i := range r.Wafers {
		s := &r.Wafers[i].Spatial
		if s.JoinCount == nil && s.Alike == nil && len(s.Clusters) == 0 {
			continue
		}
		moran, geary, hot, scan, circle := [2]cell{text(notAvailable), text(notAvailable)}, [2]cell{text(notAvailable), text(notAvailable)}, text(notAvailable), text(notAvailable), text("")
		if a := s.Alike; a != nil {
			moran = [2]cell{number(trimmed(a.Moran.Value, 3), a.Moran.Value), number(pValue(a.Moran.PValue), a.Moran.PValue)}
			geary = [2]cell{number(trimmed(a.Geary.Value, 3), a.Geary.Value), number(pValue(a.Geary.PValue), a.Geary.PValue)}
		}
		if s.HotSpots != nil {
			hot = counted(s.HotSpots.Dice)
		}
		if s.Scan != nil {
			scan, circle = number(pValue(s.Scan.PValue), s.Scan.PValue), cell{Text: circleWords(s.Scan), Class: "wide"}
		}
		joins := spatialCells(s)
		t.Rows = append(t.Rows, []cell{text(r.Wafers[i].ID), joins[0], joins[1], moran[0], moran[1], geary[0], geary[1], joins[2], hot, scan, circle})
	}
	return t
}

func spatialCells(s *reports.Spatial) []cell {
	z, p := text(notAvailable), text(notAvailable)
	if s.Why != "" {
		p = text(notAvailable + ": " + s.Why)
	}
	if j := s.JoinCount; j != nil {
		z, p = number(score(j.Z), j.Z), number(pValue(j.PValue), j.PValue)
	}
	largest := text("none")
	if len(s.Clusters) > 0 {
		c := s.Clusters[0]
		largest = counted(c.Dice)
		largest.Class = "loose"
		if c.X.Valid() && c.Y.Valid() {
			largest.Text += fmt.Sprintf(" at x%s%s, y%s%s", space, fixed(float64(c.X), 0), space, fixed(float64(c.Y), 0))
		}
		if c.RadiusMM.Valid() {
			largest.Text += ", r" + space + fixed(float64(c.RadiusMM), 1) + space + "mm"
		}
	} else if s.Why != "" {
		largest = text(notAvailable)
	}
	return []cell{z, p, largest}
}

func circleWords(s *reports.Scan) string {
	if !s.X.Valid() {
		return s.Why
	}
	return fmt.Sprintf("%d of %s dice fail, %s expected; radius %s at x%s%s, y%s%s", s.Fails, count(s.Dice), trimmed(s.Expected, 3), withUnit(trimmed(s.Radius, 3), s.Unit), space, trimmed(s.X, 3), space, trimmed(s.Y, 3))
}
