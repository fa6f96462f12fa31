package build

import (
	"kneepoint/ingest"
	"kneepoint/reports"
	"kneepoint/wafermap"
)

// pictures draws the map of every wafer and the stacked map, all over one box of
// die positions, so that they line up.
func (w *lotwork) pictures() error {
	p := &w.rep.Pictures
	if !w.lot.HasCoordinates() {
		p.Why = "the data have no die coordinates"
		return nil
	}
	x, y := w.lot.X(), w.lot.Y()
	box := w.geo.Box(x, y)
	lead := w.leadingTest()
	leadName := ""
	if lead >= 0 {
		leadName = w.lot.Tests()[lead].Name
	}
	labels := wafermap.StateLabels(leadName)
	state := make([]uint8, w.lot.Len())
	for i := range state {
		switch {
		case w.unjudged != "":
			state[i] = wafermap.StateOther
		case w.pass[i]:
			state[i] = wafermap.StatePass
		case lead >= 0 && w.first[i] == int32(lead):
			state[i] = wafermap.StateLead
		default:
			state[i] = wafermap.StateFail
		}
	}
	for _, wafer := range w.lot.Wafers() {
		picture, err := wafermap.PaintStates(x[wafer.Lo:wafer.Hi], y[wafer.Lo:wafer.Hi], state[wafer.Lo:wafer.Hi], wafermap.DefaultPalette, box)
		if err != nil {
			return err
		}
		r := w.raster(wafer.ID, picture)
		for s := wafermap.StatePass; int(s) < len(labels); s++ {
			c := wafermap.DefaultPalette[s]
			if picture.Counts[s] > 0 || w.unjudged == "" && (s == wafermap.StatePass || s == wafermap.StateFail) {
				r.Legend = append(r.Legend, reports.Swatch{R: c.R, G: c.G, B: c.B, Label: labels[s], Dice: picture.Counts[s]})
			}
		}
		p.Wafers = append(p.Wafers, r)
	}
	return w.stackPictures(box)
}

// leadingTest is the test with the largest first loss, -1 when none loses.
func (w *lotwork) leadingTest() int {
	best := -1
	for t, l := range w.losses.Tests {
		if l.First > 0 && (best < 0 || l.First > w.losses.Tests[best].First) {
			best = t
		}
	}
	return best
}

func (w *lotwork) raster(name string, p wafermap.Picture) reports.Raster {
	r := reports.Raster{Name: name, Columns: p.Columns, Rows: p.Rows, X0: p.X0, Y0: p.Y0, YDown: p.YDown, Step: p.Step, Aspect: 1, Notch: w.geo.Notch, PNG: p.PNG}
	if !finite(w.geo.CentreX) {
		return r
	}
	if w.geo.DieWidthMM > 0 && w.geo.DieHeightMM > 0 {
		r.Aspect = w.geo.DieWidthMM / w.geo.DieHeightMM
	}
	step := float64(p.Step)
	r.CentreColumn = (w.geo.CentreX-float64(p.X0))/step + 0.5/step
	r.CentreRow = (float64(p.Y0)-w.geo.CentreY)/step + 0.5/step
	if p.YDown {
		r.CentreRow = (w.geo.CentreY-float64(p.Y0))/step + 0.5/step
	}
	if radius := w.geo.Radius(); finite(radius) && w.geo.DieWidthMM > 0 {
		r.RadiusColumns = radius / w.geo.DieWidthMM / step
		r.RadiusRows = radius / w.geo.DieHeightMM / step
	}
	return r
}

// leaveOutEdge drops the dice in the edge exclusion from the lot, when the
// settings ask for it; the count is told.
func (w *lotwork) leaveOutEdge() {
	if !w.lot.HasCoordinates() {
		return
	}
	geo := wafermap.FindGeometry(w.lot.X(), w.lot.Y(), w.known())
	x, y := w.lot.X(), w.lot.Y()
	keep := make([]bool, w.lot.Len())
	out := 0
	for i := range keep {
		keep[i] = x[i] == ingest.Missing || y[i] == ingest.Missing || !geo.InExclusion(x[i], y[i])
		if !keep[i] {
			out++
		}
	}
	if out == 0 {
		return
	}
	w.lot = w.lot.Select(keep)
	w.note("edge-dice-left-out", reports.Quality{Severity: "info", Dice: out,
		Text: "dice in the edge exclusion are left out, as the settings ask"})
}
