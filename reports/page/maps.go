package page

import (
	"encoding/base64"
	"encoding/json"
	"fmt"
	"html/template"
	"math"
	"strconv"

	"kneepoint/reports"
)

// gallery is the overview of all wafers' maps, with the stacked map beside it.
type gallery struct {
	Wafers  []waferMap
	Stacked *waferMap
	Key     []swatch // over all wafers, with counts
	Data    template.JS
	Why     string
}

// waferMap is one raster as the page draws it: the picture stretched to the
// shape of the dice, under the wafer's outline. Lengths are in die heights.
type waferMap struct {
	Index  int // in the page's map data
	Name   string
	Text   string // yield, or what is stacked
	Alt    string
	Low    bool // stands out low
	Order  int
	Sort   string // yield, for sorting
	Image  template.URL
	Fine   bool // more dice than a thumbnail has pixels: averaged, not picked, when small
	Width  string
	Height string
	View   string // view box
	CX, CY string // outline; empty when the wafer's radius is not known
	RX, RY string
	Notch  string // path
	Key    []swatch
	Ratio  string // width over height of the view box
}

type swatch struct {
	Colour template.CSS
	Label  string
	Dice   string
	Share  string
}

// mapData is what the page's script needs to read a die back from a picture.
type mapData struct {
	Name    string  `json:"name"`
	Text    string  `json:"text"`
	Columns int     `json:"columns"`
	Rows    int     `json:"rows"`
	X0      int     `json:"x0"`
	Y0      int     `json:"y0"`
	YDown   bool    `json:"yDown"`
	Step    int     `json:"step"`
	Aspect  float64 `json:"aspect"`
	Legend  []entry `json:"legend"`
}

type entry struct {
	Colour [3]uint8 `json:"colour"`
	Label  string   `json:"label"`
	Dice   string   `json:"dice"`
}

// thumbnailPixels is how many dice across a small map shows one by one.
const thumbnailPixels = 130

func newGallery(r *reports.Report) (gallery, error) {
	g := gallery{Why: r.Pictures.Why}
	byID := make(map[string]*reports.Wafer, len(r.Wafers))
	for i := range r.Wafers {
		byID[r.Wafers[i].ID] = &r.Wafers[i]
	}
	var data []mapData
	add := func(p *reports.Raster) *waferMap {
		m := newWaferMap(p)
		m.Index = len(data)
		d := mapData{
			Name: p.Name, Columns: p.Columns, Rows: p.Rows, X0: p.X0, Y0: p.Y0, YDown: p.YDown, Step: max(1, p.Step), Aspect: aspect(p),
			Legend: []entry{}, // never null for the script
		}
		for _, s := range p.Legend {
			d.Legend = append(d.Legend, entry{[3]uint8{s.R, s.G, s.B}, s.Label, count(s.Dice)})
		}
		data = append(data, d)
		return &m
	}
	for i := range r.Pictures.Wafers {
		p := &r.Pictures.Wafers[i]
		if len(p.PNG) == 0 || p.Columns <= 0 || p.Rows <= 0 {
			continue
		}
		m := add(p)
		m.Order, m.Alt, m.Sort = i, "Map of wafer "+p.Name, ""
		if w := byID[p.Name]; w != nil {
			m.Text, m.Low, m.Sort = percent(w.Yield.Estimate), w.Stands == "low", sortKey(float64(w.Yield.Estimate))
			m.Alt += ", yield " + m.Text
			data[m.Index].Text = "yield " + m.Text + " (" + percentRange(w.Yield) + "), " + plural(w.Dice, "die", "dice")
		}
		g.Wafers = append(g.Wafers, *m)
	}
	if p := r.Pictures.Stacked; p != nil && len(p.PNG) > 0 && p.Columns > 0 && p.Rows > 0 {
		m := add(p)
		m.Alt = "Stacked map: " + p.Name
		m.Text = p.Name
		data[m.Index].Text = "all wafers, one above the other"
		g.Stacked = m
	}
	g.Key = sumLegends(r.Pictures.Wafers)
	b, err := json.Marshal(data)
	g.Data = template.JS(b)
	return g, err
}

func aspect(p *reports.Raster) float64 {
	if p.Aspect > 0 && !math.IsInf(p.Aspect, 0) {
		return p.Aspect
	}
	return 1
}

func newWaferMap(p *reports.Raster) waferMap {
	a := aspect(p)
	w, h := float64(p.Columns)*a, float64(p.Rows)
	x0, y0, x1, y1 := 0.0, 0.0, w, h
	m := waferMap{
		Name: p.Name, Fine: p.Columns > thumbnailPixels || p.Rows > thumbnailPixels,
		Image: template.URL("data:image/png;base64," + base64.StdEncoding.EncodeToString(p.PNG)),
		Width: short(w), Height: short(h),
	}
	cx, cy, rx, ry := p.CentreColumn*a, p.CentreRow, p.RadiusColumns*a, p.RadiusRows
	if rx > 0 && ry > 0 && !math.IsInf(rx+ry+cx+cy, 0) {
		m.CX, m.CY, m.RX, m.RY = short(cx), short(cy), short(rx), short(ry)
		m.Notch = notch(p.Notch, cx, cy, rx, ry)
		x0, y0, x1, y1 = min(x0, cx-rx), min(y0, cy-ry), max(x1, cx+rx), max(y1, cy+ry)
	}
	pad := 0.015 * max(x1-x0, y1-y0)
	x0, y0, x1, y1 = x0-pad, y0-pad, x1+pad, y1+pad
	m.View = short(x0) + " " + short(y0) + " " + short(x1-x0) + " " + short(y1-y0)
	m.Ratio = short((x1 - x0) / (y1 - y0))
	total := 0
	for _, s := range p.Legend {
		total += s.Dice
	}
	for _, s := range p.Legend {
		m.Key = append(m.Key, newSwatch(s, total))
	}
	return m
}

// notch is a small wedge at the wafer's edge, pointing to its centre.
func notch(side string, cx, cy, rx, ry float64) string {
	dx, dy := 0.0, 0.0
	switch side {
	case "down":
		dy = 1
	case "up":
		dy = -1
	case "right":
		dx = 1
	case "left":
		dx = -1
	default:
		return ""
	}
	const depth, half = 0.055, 0.035
	at := func(along, across float64) string {
		return short(cx+rx*(dx*along-dy*across)) + " " + short(cy+ry*(dy*along+dx*across))
	}
	return "M" + at(1.002, -half) + " L" + at(1-depth, 0) + " L" + at(1.002, half) + " Z"
}

func short(v float64) string { return strconv.FormatFloat(round3(v), 'f', -1, 64) }

func round3(v float64) float64 {
	f, _ := strconv.ParseFloat(strconv.FormatFloat(v, 'f', 3, 64), 64)
	return f + 0 // no negative zero
}

func newSwatch(s reports.Swatch, total int) swatch {
	out := swatch{Colour: template.CSS(fmt.Sprintf("#%02x%02x%02x", s.R, s.G, s.B)), Label: s.Label, Dice: count(s.Dice)}
	if total > 0 {
		out.Share = percent(reports.Number(float64(s.Dice) / float64(total)))
	}
	return out
}

// sumLegends adds up the legends of all wafers in order of first appearance.
func sumLegends(rasters []reports.Raster) []swatch {
	type key struct {
		r, g, b uint8
		label   string
	}
	place := map[key]int{}
	var sums []reports.Swatch
	total := 0
	for _, p := range rasters {
		for _, s := range p.Legend {
			k := key{s.R, s.G, s.B, s.Label}
			i, ok := place[k]
			if !ok {
				i = len(sums)
				place[k] = i
				sums = append(sums, reports.Swatch{R: s.R, G: s.G, B: s.B, Label: s.Label})
			}
			sums[i].Dice += s.Dice
			total += s.Dice
		}
	}
	out := make([]swatch, len(sums))
	for i, s := range sums {
		out[i] = newSwatch(s, total)
	}
	return out
}
