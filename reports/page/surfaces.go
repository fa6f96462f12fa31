package page

import "kneepoint/reports"

// surfaceMaps draws the typical wafer of the tests that matter.
func (p *patterns) surfaceMaps(r *reports.Report, a *atlas) {
	share := map[string]reports.Number{}
	for i := range r.Tests {
		if s := r.Tests[i].Surface; s != nil && s.Smooth.Valid() {
			share[r.Tests[i].Name] = s.Smooth
		}
	}
	for i := range r.Pictures.Surfaces {
		s := &r.Pictures.Surfaces[i]
		of := ""
		if v, ok := share[s.Test]; ok {
			of = ", " + percent(v) + " of the variance"
		}
		for _, part := range []struct {
			raster *reports.Raster
			name   string
		}{{&s.Smooth, "smooth part" + of}, {&s.Residual, "what is left"}} {
			if m := a.add(part.raster, s.Test+", "+part.name, "typical wafer", nil); m != nil {
				m.Name, m.Text = s.Test, part.name
				for k := range m.Key {
					m.Key[k].Dice, m.Key[k].Share = "", ""
				}
				p.Surfaces = append(p.Surfaces, *m)
			}
		}
	}
}

// shapeTable gives the shape of every test on the typical wafer.
func shapeTable(r *reports.Report) table {
	t := table{Caption: "Shape of the tests over the typical wafer", Sortable: true, Columns: []column{{Name: "Test"}, {Name: "Unit", Plain: true}, {Name: "Smooth", Numeric: true, Help: "share of the variance of the typical wafer that is smooth"},
		{Name: "Site", Numeric: true, Help: "share between test sites"}, {Name: "Die to die", Numeric: true}, {Name: "Terms", Numeric: true, Help: "Zernike terms, chosen by cross-validation"},
		{Name: "Bowl", Numeric: true, Help: "edge less centre, by the parabola"}, {Name: "Tilt", Numeric: true, Help: "from edge to edge"}, {Name: "towards", Numeric: true, Help: "degrees counter-clockwise from +x"},
		{Name: "Roll-off", Numeric: true, Help: "of the last fifth of the radius, beyond bowl and tilt"}, {Name: "Moran’s I", Numeric: true}, {Name: "p", Numeric: true}},
		Note: "Bowl, tilt and roll-off with 95 % intervals, in the test's unit, or as natural logarithm (ln) where the test spreads by ratios. Zernike terms, robust to outliers."}
	for i := range r.Tests {
		test := &r.Tests[i]
		s := test.Surface
		if s == nil {
			if test.SurfaceWhy != "" && test.SurfaceWhy != "the data have no die coordinates" {
				row := []cell{text(test.Name), text(""), text(notAvailable + ": " + test.SurfaceWhy)}
				row[2].Class = "loose"
				for len(row) < len(t.Columns) {
					row = append(row, text(""))
				}
				t.Rows = append(t.Rows, row)
			}
			continue
		}
		row := []cell{text(test.Name), text(s.Unit), {Text: orWhy(percent(s.Smooth), s.Why), Sort: sortKey(float64(s.Smooth))}, number(percent(s.Site), s.Site), number(percent(s.Die), s.Die), counted(s.Terms)}
		for _, v := range []reports.Interval{s.Bowl, s.Tilt, s.RollOff} {
			c := number(trimmed(v.Estimate, 3), v.Estimate)
			if v.Lower.Valid() {
				c.Text += " (" + trimmed(v.Lower, 3) + " to " + trimmed(v.Upper, 3) + ")"
			}
			row = append(row, c)
		}
		moran, p := text(notAvailable), text(notAvailable)
		if s.Alike != nil {
			moran, p = number(trimmed(s.Alike.Moran.Value, 3), s.Alike.Moran.Value), number(pValue(s.Alike.Moran.PValue), s.Alike.Moran.PValue)
		}
		direction := number(withUnit(trimmed(s.Direction, 3), "°"), s.Direction)
		row = append(row[:8], append([]cell{direction}, row[8:]...)...)
		t.Rows = append(t.Rows, append(row, moran, p))
	}
	return t
}
