package page

import "kneepoint/reports"

// zones is the section on rings and sectors.
type zones struct {
	Charts []chart
	Tables []table
}

// shortName fits eight sectors side by side.
func shortName(z reports.Zone) string {
	if z.Kind == "sector" && len(z.Name) > 6 && z.From.Valid() && z.To.Valid() {
		return trimmed(z.From, 4) + "–" + trimmed(z.To, 4) + "°"
	}
	return z.Name
}

func newZones(r *reports.Report) (zones, error) {
	var z zones
	for _, kind := range []struct{ name, title, unit, note string }{
		{"ring", "Rings, over all wafers", "mm", ""},
		{"sector", "Sectors, over all wafers", "°", "Angles run counter-clockwise from +x (right)."},
	} {
		p := yieldChart{
			ID: "chart-zones-" + kind.name, Label: "Yield by " + kind.name + " over all wafers, with 95 % intervals. The numbers are in the table below.",
			Axis: kind.name, Lot: r.Yield.Estimate, Baseline: reports.NaN, Columns: []string{"Zone", "Yield", "95 % interval", "Dice"},
		}
		t := table{Caption: kind.title, Note: kind.note, Sortable: true, Columns: []column{
			{Name: "Zone"}, {Name: "From, " + kind.unit, Numeric: true}, {Name: "To, " + kind.unit, Numeric: true}, {Name: "Dice", Numeric: true},
			{Name: "Yield", Numeric: true}, {Name: "95" + space + "% interval", Numeric: true, Plain: true}}}
		for _, zone := range r.Zones {
			if zone.Kind != kind.name {
				continue
			}
			p.Names, p.Yields = append(p.Names, shortName(zone)), append(p.Yields, zone.Yield)
			p.Rows = append(p.Rows, []string{zone.Name, percent(zone.Yield.Estimate), percentRange(zone.Yield), count(zone.Dice)})
			t.Rows = append(t.Rows, []cell{text(zone.Name), number(trimmed(zone.From, 4), zone.From), number(trimmed(zone.To, 4), zone.To), counted(zone.Dice),
				number(percent(zone.Yield.Estimate), zone.Yield.Estimate), text(orWhy(percentRange(zone.Yield), zone.Yield.Why))})
		}
		if len(t.Rows) == 0 {
			continue
		}
		p.From = scaleFrom(p.Yields)
		c, err := p.draw()
		if err != nil {
			return z, err
		}
		if c != nil {
			z.Charts = append(z.Charts, *c)
		}
		z.Tables = append(z.Tables, t)
	}
	return z, nil
}
