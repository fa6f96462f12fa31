package page

import (
	"slices"
	"strings"
	"testing"

	"golang.org/x/net/html"

	"kneepoint/reports"
)

// An outline lies on the dice that it was found on, whatever the picture's corner,
// the direction of y, the shape of the dice and the dice a pixel.
func TestOutlinesLieOnTheDice(t *testing.T) {
	s := []reports.Signature{{Kind: "blob", Outline: []reports.Path{{X: []reports.Number{10, 12}, Y: []reports.Number{5, 5}}}}}
	for _, c := range []struct {
		p    reports.Raster
		want string
	}{
		{reports.Raster{X0: 10, Y0: 5, Step: 1, Aspect: 1}, "M0.5 0.5L2.5 0.5"}, // the middle of the first pixel and of the third
		{reports.Raster{X0: 8, Y0: 9, Step: 1, Aspect: 0.5}, "M1.25 4.5L2.25 4.5"},
		{reports.Raster{X0: 8, Y0: 1, YDown: true, Step: 1, Aspect: 1}, "M2.5 4.5L4.5 4.5"},
		{reports.Raster{X0: 10, Y0: 5, Step: 2, Aspect: 1}, "M0.25 0.25L1.25 0.25"},
	} {
		if got := outlines(&c.p, s); !slices.Equal(got, []string{c.want}) {
			t.Errorf("%+v: %q, want %q", c.p, got, c.want)
		}
	}
}

// The outer edge of an edge ring is the wafer's, which is drawn anyway.
func TestEdgeRingHasItsInnerEdge(t *testing.T) {
	path := func(x reports.Number) reports.Path {
		return reports.Path{X: []reports.Number{x}, Y: []reports.Number{0}}
	}
	s := []reports.Signature{{Kind: "edge-ring", Outline: []reports.Path{path(20), path(17)}}}
	if got := outlines(&reports.Raster{Step: 1, Aspect: 1}, s); !slices.Equal(got, []string{"M17.5 0.5"}) {
		t.Errorf("%q", got)
	}
}

func TestPatternWords(t *testing.T) {
	ring := reports.Signature{Kind: "edge-ring", Loss: 0.013, PValue: 0.0078, Rate: 0.077, Background: 0.021, Text: "from a radius of 40.3 mm out to the edge"}
	for _, c := range []struct{ got, want string }{
		{briefly([]reports.Signature{ring, {Kind: "site", Loss: 0.2}}), "edge ring 1.3 %, test site 20.0 %"},
		{briefly([]reports.Signature{{Kind: "blob", Loss: 0.2}, ring, {Kind: "blob", Loss: 0.1}}), "blob 30.0 %, edge ring 1.3 %"},
		{briefly([]reports.Signature{{Kind: "random", Loss: 0.05}}), "no pattern"},
		{briefly([]reports.Signature{{Kind: "gradient", Loss: reports.NaN}}), "gradient"},
		{patternSentence(ring), "Edge ring from a radius of 40.3 mm out to the edge: loss 1.3 %, fails 7.7 % inside, 2.1 % without it, p 0.0078."},
		{patternSentence(reports.Signature{Kind: "none", Text: "too few fails to judge"}), "Too few fails to see a pattern."},
	} {
		if got := strings.ReplaceAll(c.got, space, " "); got != c.want {
			t.Errorf("got  %s\nwant %s", got, c.want)
		}
	}
}

// Every map of the page has its place in the data of the larger view, and every
// wafer with a pattern its outline.
func TestMapsOfThePage(t *testing.T) {
	r := fixture(t, 25, 12, 4)
	maps, signs := 0, 0
	var places []string
	walk(tree(t, render(t, r)), func(n *html.Node) {
		switch {
		case n.Data == "button" && attr(n, "class") == "map":
			maps++
			places = append(places, attr(n, "data-map"))
		case n.Data == "g" && attr(n, "class") == "signs":
			signs++
		}
	})
	if want := 25 + 1 + 3 + 2; maps != want {
		t.Errorf("%d maps, want %d", maps, want)
	}
	slices.Sort(places)
	if len(slices.Compact(places)) != maps {
		t.Error("two maps share a place in the data")
	}
	if want := 4 + 1 + 1; signs != want {
		t.Errorf("%d maps have outlines, want %d", signs, want)
	}
}
