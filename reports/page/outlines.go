package page

import (
	"slices"
	"strings"

	"kneepoint/reports"
)

// outlines are the paths of patterns' outlines on a picture, in its view's lengths.
func outlines(p *reports.Raster, patterns []reports.Signature) []string {
	step, a := float64(max(1, p.Step)), aspect(p)
	digits := 2
	if p.Rows > 100 {
		digits = 1
	}
	write := func(v float64) string {
		s := fixed(v, digits)
		if strings.Contains(s, ".") {
			s = strings.TrimRight(strings.TrimRight(s, "0"), ".")
		}
		return s
	}
	var out []string
	for _, s := range patterns {
		lines := s.Outline
		if s.Kind == "edge-ring" && len(lines) == 2 {
			lines = lines[1:] // the outer one is the wafer's edge
		}
		for _, line := range lines {
			var b strings.Builder
			for i := range min(len(line.X), len(line.Y)) {
				down := float64(p.Y0) - float64(line.Y[i])
				if p.YDown {
					down = -down
				}
				b.WriteString([]string{"M", "L"}[min(i, 1)] + write((float64(line.X[i])-float64(p.X0)+0.5)/step*a) + " " + write((down+0.5)/step))
			}
			if b.Len() > 0 {
				out = append(out, b.String())
			}
		}
	}
	return out
}

// kindWords writes a kind of pattern as a person says it.
func kindWords(kind string) string {
	switch kind {
	case "random":
		return "no pattern"
	case "none":
		return "too few fails to see a pattern"
	case "near-total":
		return "fails nearly all over"
	case "site":
		return "test site"
	}
	return strings.ReplaceAll(kind, "-", " ")
}

// where says where a pattern lies.
func where(s reports.Signature) string {
	if s.Kind == "random" || s.Kind == "none" || s.Kind == "near-total" {
		return ""
	}
	return s.Text
}

func patterned(s reports.Signature) bool { return s.Kind != "random" && s.Kind != "none" }

// mostBrief is how many patterns are named under a small map.
const mostBrief = 3

// briefly names patterns with the loss to each; those of a kind together.
func briefly(list []reports.Signature) string {
	var kinds []reports.Signature
	for _, s := range list {
		k := slices.IndexFunc(kinds, func(o reports.Signature) bool { return o.Kind == s.Kind })
		if k < 0 {
			kinds = append(kinds, reports.Signature{Kind: s.Kind, Loss: s.Loss})
		} else {
			kinds[k].Loss += s.Loss
		}
	}
	var parts []string
	for i, s := range kinds {
		if i == mostBrief {
			parts = append(parts, "…")
			break
		}
		parts = append(parts, withLoss(s))
	}
	return strings.Join(parts, ", ")
}

func withLoss(s reports.Signature) string {
	part := kindWords(s.Kind)
	if patterned(s) && s.Loss.Valid() {
		part += space + percent(s.Loss)
	}
	return part
}

// patternsWithLoss is a table's account of a wafer's patterns.
func patternsWithLoss(list []reports.Signature) string {
	var parts []string
	for _, s := range list {
		parts = append(parts, withLoss(s))
	}
	return strings.Join(parts, ", ")
}

// patternSentence says all of a pattern that a reader asks for.
func patternSentence(s reports.Signature) string {
	out := kindWords(s.Kind)
	if w := where(s); w != "" {
		out += " " + w
	}
	if !patterned(s) {
		return sentence(out)
	}
	if s.Loss.Valid() {
		out += ": loss " + percent(s.Loss)
	}
	if s.Rate.Valid() && s.Background.Valid() && s.Kind != "near-total" {
		out += ", fails " + percent(s.Rate) + " inside, " + percent(s.Background) + " without it"
	}
	if s.PValue.Valid() {
		out += ", p" + space + pValue(s.PValue)
	}
	return sentence(out)
}
