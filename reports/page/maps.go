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
	Signs   bool     // some map has an outline of a pattern
	Why     string
}

// waferMap is one raster as the page draws it: the picture stretched to the
// shape of the dice, under the wafer's outline. Lengths are in die heights.
type waferMap struct {
	Index  int // in the page's map data
	Name   string
	Text   string // yield, or what is stacked
	Words  string // its patterns, briefly
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
	Notch  string   // path
	Signs  []string // paths of its patterns' outlines
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
	Title   string   `json:"title"`
	Text    string   `json:"text"`
	Signs   []string `json:"signs"`
	Columns int      `json:"columns"`
	Rows    int      `json:"rows"`
	X0      int      `json:"x0"`
	Y0      int      `json:"y0"`
	YDown   bool     `json:"yDown"`
	Step    int      `json:"step"`
	Aspect  float64  `json:"aspect"`
	Legend  []entry  `json:"legend"`
}

type entry struct {
	Colour [3]uint8 `json:"colour"`
	Label  string   `json:"label"`
	Dice   string   `json:"dice"`
}

// thumbnailPixels is how many dice across a small map shows one by one.
const thumbnailPixels = 130

// atlas collects what the script needs of all maps of the page.
type atlas struct{ data []mapData }

// add takes a map in; nil for a picture without pixels.
func (a *atlas) add(p *reports.Raster, title, text string, patterns []reports.Signature) *waferMap {
	if p == nil || len(p.PNG) == 0 || p.Columns <= 0 || p.Rows <= 0 {
		return nil
	}
	m := newWaferMap(p)
	m.Index, m.Alt, m.Text = len(a.data), title, text
	m.Signs = outlines(p, patterns)
	m.Words = briefly(patterns)
	d := mapData{
		Title: title, Text: text, Signs: []string{}, Columns: p.Columns, Rows: p.Rows, X0: p.X0, Y0: p.Y0, YDown: p.YDown, Step: max(1, p.Step), Aspect: aspect(p),
		Legend: []entry{}, // never null for the script
	}
	for _, s := range patterns {
		d.Signs = append(d.Signs, patternSentence(s))
	}
	for _, s := range p.Legend {
		d.Legend = append(d.Legend, entry{[3]uint8{s.R, s.G, s.B}, s.Label, count(s.Dice)})
	}
	a.data = append(a.data, d)
	return &m
}

// script is the collected data; empty without maps.
func (a *atlas) script() (template.JS, error) {
	if len(a.data) == 0 {
		return "", nil
	}
	b, err := json.Marshal(a.data)
	return template.JS(b), err
}

func newGallery(r *reports.Report, a *atlas) gallery {
	g := gallery{Why: r.Pictures.Why}
	byID := make(map[string]*reports.Wafer, len(r.Wafers))
	for i := range r.Wafers {
		byID[r.Wafers[i].ID] = &r.Wafers[i]
	}
	for i := range r.Pictures.Wafers {
		p := &r.Pictures.Wafers[i]
		w := byID[p.Name]
		var patterns []reports.Signature
		text := ""
		if w != nil {
			patterns = w.Signatures
			text = "yield " + percent(w.Yield.Estimate) + " (" + percentRange(w.Yield) + "), " + plural(w.Dice, "die", "dice")
		}
		m := a.add(p, "Wafer "+p.Name, text, patterns)
		if m == nil {
			continue
		}
		m.Order, m.Alt = i, "Map of wafer "+p.Name
		if w != nil {
			m.Text, m.Low, m.Sort = percent(w.Yield.Estimate), w.Stands == "low", sortKey(float64(w.Yield.Estimate))
			m.Alt += ", yield " + m.Text
			if m.Words != "" {
				m.Alt += ", " + m.Words
			}
		}
		g.Signs = g.Signs || len(m.Signs) > 0
		g.Wafers = append(g.Wafers, *m)
	}
	if m := a.add(r.Pictures.Stacked, "Stacked map", "all wafers, one above the other", r.Signatures); m != nil {
		m.Alt, m.Text = "Stacked map: "+r.Pictures.Stacked.Name, r.Pictures.Stacked.Name
		g.Stacked = m
	}
	g.Key = sumLegends(r.Pictures.Wafers)
	return g
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
