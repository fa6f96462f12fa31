package rehearse

import (
	"crypto/sha256"
	_ "embed"
	"encoding/base64"
	"fmt"
	"html/template"
	"io"
	"math"
	"strings"
)

var (
	//go:embed page.html
	pageText string
	//go:embed page.css
	pageStyle string
)

var pageTemplate = template.Must(template.New("page").Funcs(template.FuncMap{
	"percents": percents,
	"share":    func(s Share) string { return fmt.Sprintf("%.0f %%", 100*s.Estimate()) },
	"percent":  func(v float64) string { return fmt.Sprintf("%.1f %%", 100*v) },
	"smallest": func(s Smallest) string { return s.text() },
	"inc":      func(i int) int { return i + 1 },
	"signed":   func(v float64) string { return fmt.Sprintf("%+.2f", v) },
	"two":      func(v float64) string { return fmt.Sprintf("%.2f", v) },
}).Parse(pageText))

// WriteHTML writes the result as one page that needs no network and no script:
// tables, and drawings as SVG.
func (r *Result) WriteHTML(w io.Writer) error {
	sum := sha256.Sum256([]byte(pageStyle))
	view := struct {
		*Result
		Policy   string
		Style    template.CSS
		Matrix   [][]cell
		Confused []Confused
		BestTest *Added
		Diagram  template.HTML
		Sizes    template.HTML
	}{r, "default-src 'none'; style-src 'sha256-" + base64.StdEncoding.EncodeToString(sum[:]) + "'", template.CSS(pageStyle),
		r.matrix(), r.confused(), r.Best(), r.diagram(), r.sizes()}
	var b strings.Builder
	if err := pageTemplate.Execute(&b, view); err != nil {
		return err
	}
	_, err := io.WriteString(w, b.String())
	return err
}

// cell is one of the confusion table, with a class of shade by its share of the row.
type cell struct {
	N     int
	Shade string
}

func (r *Result) matrix() [][]cell {
	out := make([][]cell, len(r.Confusion.Counts))
	for i, row := range r.Confusion.Counts {
		sum := 0
		for _, n := range row {
			sum += n
		}
		for j, n := range row {
			c := cell{N: n}
			if n > 0 {
				kind := "off"
				if i == j {
					kind = "on"
				}
				c.Shade = fmt.Sprintf("%s%d", kind, 1+min(int(4*float64(n)/float64(sum)), 3))
			}
			out[i] = append(out[i], c)
		}
	}
	return out
}

// svg collects a drawing. Every number goes through fmt; texts are names of causes,
// escaped.
type svg struct{ strings.Builder }

func (s *svg) line(class string, x1, y1, x2, y2 float64) {
	fmt.Fprintf(s, `<line class="%s" x1="%.1f" y1="%.1f" x2="%.1f" y2="%.1f"/>`, class, x1, y1, x2, y2)
}

func (s *svg) text(class string, x, y float64, text string) {
	fmt.Fprintf(s, `<text class="%s" x="%.1f" y="%.1f">%s</text>`, class, x, y, template.HTMLEscapeString(text))
}

// diagram is the reliability diagram: told against right, an interval a bin.
func (r *Result) diagram() template.HTML {
	const left, top, side = 52.0, 12.0, 320.0
	var s svg
	fmt.Fprintf(&s, `<svg viewBox="0 0 400 384" role="img" aria-label="Told probability against the share that was right, by ten bins">`)
	x := func(p float64) float64 { return left + side*p }
	y := func(p float64) float64 { return top + side*(1-p) }
	for i := 0; i <= 10; i += 2 {
		p := float64(i) / 10
		s.line("grid", x(0), y(p), x(1), y(p))
		s.line("grid", x(p), y(0), x(p), y(1))
		s.text("tick end", left-6, y(p)+4, fmt.Sprintf("%d %%", 10*i))
		s.text("tick mid", x(p), y(0)+16, fmt.Sprintf("%d %%", 10*i))
	}
	s.line("ideal", x(0), y(0), x(1), y(1))
	for _, b := range r.Reliability.Bins {
		s.line("whisker", x(b.Told), y(b.Lower), x(b.Told), y(b.Upper))
		fmt.Fprintf(&s, `<circle class="dot" cx="%.1f" cy="%.1f" r="4.5"><title>told %.0f %%, right %.0f %% of %d lots</title></circle>`,
			x(b.Told), y(b.Estimate()), 100*b.Told, 100*b.Estimate(), b.Lots)
	}
	s.text("label mid", x(0.5), y(0)+36, "told probability of the first cause")
	fmt.Fprintf(&s, `<text class="label mid" transform="translate(12 %.1f) rotate(-90)">share that was right</text></svg>`, y(0.5))
	return template.HTML(s.String()) //nolint // numbers and escaped names alone
}

// sizes draws the smallest losses that are found, on a scale of logs.
func (r *Result) sizes() template.HTML {
	const left, top, width, row = 190.0, 24.0, 430.0, 24.0
	var s svg
	height := top + row*float64(len(r.Causes)) + 44
	fmt.Fprintf(&s, `<svg viewBox="0 0 660 %.0f" role="img" aria-label="Loss at which each cause is named first nine times in ten">`, height)
	lo, hi := math.Log(rehearsalLeast), math.Log(mostLoss)
	x := func(v float64) float64 { return left + width*(math.Log(v)-lo)/(hi-lo) }
	bottom := height - 40
	for _, v := range []float64{0.01, 0.02, 0.05, 0.1, 0.2, 0.4} {
		s.line("grid", x(v), top-8, x(v), bottom)
		s.text("tick mid", x(v), bottom+16, fmt.Sprintf("%.0f %%", 100*v))
	}
	for i, c := range r.Causes {
		y := top + row*float64(i) + row/2
		s.text("tick end", left-10, y+4, c.Cause)
		m := c.Smallest
		if m.Why != "" {
			s.text("tick", left+6, y+4, m.Why)
			continue
		}
		s.line("whisker", x(m.Lower), y, x(m.Upper), y)
		class := "dot"
		if m.Beyond != 0 {
			class = "dot open"
		}
		fmt.Fprintf(&s, `<circle class="%s" cx="%.1f" cy="%.1f" r="4.5"><title>%s</title></circle>`, class, x(m.Loss), y, template.HTMLEscapeString(m.text()))
	}
	s.text("label mid", left+width/2, height-6, "loss of the lot's dice; open: at or beyond the end of what was tried")
	s.WriteString("</svg>")
	return template.HTML(s.String()) //nolint // numbers and escaped names alone
}
