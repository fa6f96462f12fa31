package page

import (
	"bytes"
	"encoding/json"
	"fmt"
	"image"
	"io"
	"math/rand/v2"
	"regexp"
	"slices"
	"strings"
	"testing"

	"golang.org/x/net/html"

	"kneepoint/reports"
)

func render(t testing.TB, r *reports.Report) string {
	t.Helper()
	var b bytes.Buffer
	if err := Render(&b, r); err != nil {
		t.Fatal(err)
	}
	return b.String()
}

// pages are the reports that every page must be sound for.
func pages(t testing.TB) map[string]*reports.Report {
	stop := fixture(t, 3, 8, 9)
	stop.Program.StopOnFail = true
	for i := range stop.Tests {
		l := &stop.Tests[i].Loss
		l.Alone, l.Any, l.AloneDice, l.AnyDice, l.Why = reports.NaN, reports.NaN, nil, nil, "the program stops at the first fail"
	}
	return map[string]*reports.Report{
		"whole lot": fixture(t, 25, 21, 9), "bare": bareReport(), "stop on fail": stop, "hostile": hostileReport(t), "nothing computed": blankReport(),
	}
}

// blankReport has wafers and tests, and nothing known of them.
func blankReport() *reports.Report {
	r := bareReport()
	nan := reports.Interval{Estimate: reports.NaN, Lower: reports.NaN, Upper: reports.NaN, Why: "too few dice"}
	r.Wafers = []reports.Wafer{{ID: "7", Yield: nan, FirstPass: reports.NaN, Spatial: reports.Spatial{Why: "no coordinates"}}}
	r.Causes = []reports.Cause{{Cause: "unexplained", Probability: reports.NaN, Why: "the diagnosis needs a product file", Loss: nan}}
	r.Tests = []reports.Test{{
		Name: "BVCEO", Lower: reports.NaN, Upper: reports.NaN, Mean: reports.NaN, SD: reports.NaN, Median: reports.NaN, MADSigma: reports.NaN, Min: reports.NaN, Max: reports.NaN,
		Skewness: reports.NaN, Kurtosis: reports.NaN, Why: "no readings", Marginal: reports.NaN,
		Loss:       reports.Loss{First: reports.NaN, Alone: reports.NaN, Any: reports.NaN},
		Capability: &reports.Capability{Cp: nan, Cpk: nan, Pp: nan, Ppk: nan, Within: reports.NaN, Overall: reports.NaN, Why: "fewer than 30 dice"},
		ByWafer:    []reports.WaferLevel{{Wafer: "7", Median: reports.NaN, MADSigma: reports.NaN, Q05: reports.NaN, Q25: reports.NaN, Q75: reports.NaN, Q95: reports.NaN}},
		LimitCurve: []reports.LimitPoint{{Limit: "lower", Shift: 0, Value: reports.NaN, Yield: reports.NaN}},
	}}
	r.Zones = []reports.Zone{{Kind: "ring", Index: 0, Name: "ring 1", From: 0, To: 10, Yield: nan}}
	return r
}

const attack = `</script><img src=x onerror=alert(1)>"'` + "`{{.}}\u2028"

// hostileReport has the attack in every text that data can reach.
func hostileReport(t testing.TB) *reports.Report {
	r := fixture(t, 2, 6, 3)
	r.Lot, r.Product, r.Inputs[0].File, r.Baseline.ID, r.Program.Text = attack, attack, attack, attack, attack
	for i := range r.Tests {
		r.Tests[i].Name, r.Tests[i].Unit, r.Tests[i].Condition, r.Tests[i].Why = attack+fmt.Sprint(i), attack, attack, attack
		for j := range r.Tests[i].ByWafer {
			r.Tests[i].ByWafer[j].Wafer = attack
		}
		r.Tests[i].Histogram.Rule = attack
	}
	for i := range r.Wafers {
		r.Wafers[i].ID = attack + fmt.Sprint(i)
		r.Wafers[i].Attributes = map[string]string{attack: attack}
		r.Wafers[i].MainLoss = []reports.Share{{Name: attack, Share: 0.1, Dice: 3}}
		r.Pictures.Wafers[i].Name = r.Wafers[i].ID
		for j := range r.Pictures.Wafers[i].Legend {
			r.Pictures.Wafers[i].Legend[j].Label = attack
		}
	}
	for i := range r.Zones {
		r.Zones[i].Name = attack
	}
	for i := range r.Stacks {
		r.Stacks[i].Test, r.Groups[0].Text, r.Groups[0].Wafers[0] = attack, attack, attack
		r.Stacks[i].Signatures[0].Text, r.Stacks[i].Signatures[0].Wafers, r.Wafers[0].Signatures[0].Text = attack, []string{attack}, attack
	}
	r.Repeaters[0].Main, r.Pictures.Surfaces[0].Test, r.Wafers[0].Spatial.Scan.Unit = attack, attack, attack
	for i := range r.Bins {
		r.Bins[i].Name = attack
	}
	for i := range r.Quality {
		r.Quality[i].Text, r.Quality[i].Severity, r.Quality[i].Remedy, r.Quality[i].Code = attack, attack, attack, attack
	}
	r.Disposition.Proposal, r.Disposition.Because, r.Cautions = attack, []string{attack}, []string{attack}
	r.Causes[0].Cause, r.Causes[0].For[0].Text = attack, attack
	return r
}

// tree parses the page with the HTML5 algorithm.
func tree(t *testing.T, page string) *html.Node {
	t.Helper()
	n, err := html.Parse(strings.NewReader(page))
	if err != nil {
		t.Fatal(err)
	}
	return n
}

func walk(n *html.Node, f func(*html.Node)) {
	f(n)
	for c := n.FirstChild; c != nil; c = c.NextSibling {
		walk(c, f)
	}
}

func attr(n *html.Node, name string) string {
	for _, a := range n.Attr {
		if a.Key == name {
			return a.Val
		}
	}
	return ""
}

// shown is the page's text as a reader has it, without scripts and styles.
func shown(n *html.Node) string {
	var b strings.Builder
	walk(n, func(n *html.Node) {
		if n.Type == html.TextNode && n.Parent.Data != "script" && n.Parent.Data != "style" && n.Parent.Data != "pre" {
			b.WriteString(n.Data + "\n")
		}
	})
	return b.String()
}

func TestSamePageEachTime(t *testing.T) {
	for name, r := range pages(t) {
		first := render(t, r)
		for range 3 {
			if render(t, r) != first {
				t.Fatalf("%s: the same report gave two different pages", name)
			}
		}
	}
}

func TestRenderLeavesTheReportAlone(t *testing.T) {
	r := fixture(t, 4, 8, 9)
	before, err := json.Marshal(r)
	if err != nil {
		t.Fatal(err)
	}
	render(t, r)
	if after, _ := json.Marshal(r); !bytes.Equal(before, after) {
		t.Error("Render changed the report")
	}
}

// A page's elements must close in the order they opened: what the parser had
// to guess shows as a stray or a missing end tag.
func TestPageIsBalanced(t *testing.T) {
	void := []string{"meta", "input", "br", "img", "link", "hr"}
	for name, r := range pages(t) {
		z := html.NewTokenizer(strings.NewReader(render(t, r)))
		var open []string
		for z.Next() != html.ErrorToken {
			token := z.Token()
			switch token.Type {
			case html.StartTagToken:
				if !slices.Contains(void, token.Data) {
					open = append(open, token.Data)
				}
			case html.EndTagToken:
				if len(open) == 0 || open[len(open)-1] != token.Data {
					t.Fatalf("%s: </%s> closes %v", name, token.Data, open)
				}
				open = open[:len(open)-1]
			}
		}
		if z.Err() != io.EOF || len(open) > 0 {
			t.Errorf("%s: left open: %v (%v)", name, open, z.Err())
		}
	}
}

func TestNoLeftoversInTheText(t *testing.T) {
	leftover := regexp.MustCompile(`NaN|Inf\b|%!|<nil>|\{\{|\}\}|ZgotmplZ|<no value>|map\[`)
	for name, r := range pages(t) {
		if name == "hostile" {
			continue // its data have them
		}
		page := render(t, r)
		if found := leftover.FindString(shown(tree(t, page))); found != "" {
			t.Errorf("%s: %q in the text", name, found)
		}
		if strings.Contains(page, "ZgotmplZ") {
			t.Errorf("%s: a value was refused by its place in the page", name)
		}
	}
}

func TestIDsAreUniqueAndLinksLead(t *testing.T) {
	for name, r := range pages(t) {
		ids, links := map[string]bool{}, []string{}
		walk(tree(t, render(t, r)), func(n *html.Node) {
			if id := attr(n, "id"); id != "" {
				if ids[id] {
					t.Errorf("%s: id %q twice", name, id)
				}
				ids[id] = true
			}
			for _, ref := range []string{"aria-labelledby", "aria-describedby"} {
				if v := attr(n, ref); v != "" {
					links = append(links, "#"+v)
				}
			}
			if n.Data == "a" {
				links = append(links, attr(n, "href"))
			}
		})
		for _, l := range links {
			if !strings.HasPrefix(l, "#") || !ids[l[1:]] {
				t.Errorf("%s: link %q leads nowhere on the page", name, l)
			}
		}
	}
}

// Nothing of the data may become markup: the scripts of the page are its own
// two and JSON, and no element has a handler or fetches anything.
func TestHostileDataAreHarmless(t *testing.T) {
	page := render(t, hostileReport(t))
	scripts := 0
	walk(tree(t, page), func(n *html.Node) {
		if n.Type != html.ElementNode {
			return
		}
		switch n.Data {
		case "img", "iframe", "object", "embed", "link", "base", "form":
			t.Errorf("an element <%s> came out of the data", n.Data)
		case "script":
			if attr(n, "type") != "application/json" {
				scripts++
			} else if n.FirstChild == nil || !json.Valid([]byte(n.FirstChild.Data)) {
				t.Errorf("the data of %s are no JSON", attr(n, "id"))
			}
			if attr(n, "src") != "" {
				t.Error("a script is fetched")
			}
		}
		for _, a := range n.Attr {
			if strings.HasPrefix(a.Key, "on") {
				t.Errorf("<%s> has a handler %s", n.Data, a.Key)
			}
			if (a.Key == "src" || a.Key == "href") && !strings.HasPrefix(a.Val, "#") && !strings.HasPrefix(a.Val, "data:image/png;base64,") {
				t.Errorf("<%s> fetches %q", n.Data, a.Val)
			}
		}
	})
	if scripts != 2 {
		t.Errorf("%d scripts run on the page, want the library and our own", scripts)
	}
	if !strings.Contains(shown(tree(t, page)), attack) {
		t.Error("the lot's name is not shown as it is")
	}
}

func TestPolicyAndLicenceTravel(t *testing.T) {
	page := render(t, bareReport())
	for _, want := range []string{
		"default-src &#39;none&#39;", "script-src &#39;sha256-", "img-src data:",
		"Apache License", "The Apache Software Foundation", "Apache ECharts 6.1.0", `<html lang="en">`,
	} {
		if !strings.Contains(page, want) {
			t.Errorf("the page lacks %q", want)
		}
	}
	if v := strings.TrimSpace(asset("assets/ECHARTS-VERSION")); !strings.Contains(asset("assets/echarts.min.js"), `version="`+v+`"`) {
		t.Errorf("ECHARTS-VERSION says %s, the script something else", v)
	}
}

func TestEmptyListsLeaveNoHeadings(t *testing.T) {
	text := shown(tree(t, render(t, bareReport())))
	for _, heading := range []string{"Why, and what to do", "Epi layer", "What was lost", "Rings and sectors", "Stacked map", "More findings", "Cautions", "Grades", "Yield by wafer"} {
		if strings.Contains(text, heading) {
			t.Errorf("a report without it has the heading %q", heading)
		}
	}
	for _, want := range []string{"n/a: no dice", "n/a: the data have no die coordinates"} {
		if !strings.Contains(text, want) {
			t.Errorf("the text lacks the reason %q", want)
		}
	}
}

func TestWhyStandsWhereANumberIsMissing(t *testing.T) {
	text := shown(tree(t, render(t, blankReport())))
	for _, want := range []string{
		"n/a: too few dice", "n/a: no coordinates", "No readings.", "Capability n/a: fewer than 30 dice", "Probabilities are n/a: the diagnosis needs a product file.",
	} {
		if !strings.Contains(strings.ToLower(text), strings.ToLower(want)) {
			t.Errorf("the text lacks %q", want)
		}
	}
}

func TestHeadSaysWhatMattersMost(t *testing.T) {
	r := fixture(t, 25, 21, 9)
	var head string
	walk(tree(t, render(t, r)), func(n *html.Node) {
		if attr(n, "id") == "summary" {
			head = strings.ReplaceAll(shown(n), space, " ")
		}
	})
	worst := slices.MaxFunc(r.Tests, func(a, b reports.Test) int { return a.Loss.FirstDice - b.Loss.FirstDice })
	for _, want := range []string{
		"KP-0417", "MP-N24",
		fmt.Sprintf("%s of %s tested dice pass", count(r.Yield.Passing), count(r.Dice)),
		"The baseline (product file) is 95.0 %", "the interval excludes the baseline",
		worst.Name + " loses most", "all below the lower limit",
		"stand out low", "The other 21 yield",
		"6 dice pass by bin and fail a limit of the product file.",
		"Epi-thickness, low (86 %)", "Hold. This is advice, never a release", "On first pass",
	} {
		if !strings.Contains(head, want) {
			t.Errorf("the head lacks %q:\n%s", want, head)
		}
	}
}

func TestWafersThatStandOut(t *testing.T) {
	w := func(id string, y float64, stands string) reports.Wafer {
		return reports.Wafer{ID: id, Stands: stands, Yield: reports.Interval{Estimate: reports.Number(y)}}
	}
	for _, c := range []struct {
		wafers []reports.Wafer
		want   string
	}{
		{[]reports.Wafer{w("1", 0.9, ""), w("2", 0.95, "")}, "No wafer stands out from the rest of the lot; all yield 90.0 to 95.0 %."},
		{[]reports.Wafer{w("1", 0.5, "low"), w("2", 0.95, "")}, "Wafer 1 (50.0 %) stands out low. The other wafer yields 95.0 %."},
		{[]reports.Wafer{w("1", 0.6, "low"), w("2", 0.5, "low"), w("3", 0.99, "high")}, "Wafers 2 (50.0 %) and 1 (60.0 %) stand out low. Wafer 3 (99.0 %) stands out high."},
	} {
		if got := strings.ReplaceAll(waferText(c.wafers), space, " "); got != c.want {
			t.Errorf("got  %s\nwant %s", got, c.want)
		}
	}
}

// Every chart has its numbers as a table: its own, built on request from rows
// that are all there, or one that stands on the page.
func TestChartsHaveTheirNumbers(t *testing.T) {
	r := fixture(t, 25, 21, 9)
	charts := 0
	walk(tree(t, render(t, r)), func(n *html.Node) {
		if n.Data != "script" || !strings.HasSuffix(attr(n, "id"), "-data") || attr(n, "id") == "map-data" {
			return
		}
		charts++
		var p payload
		if err := json.Unmarshal([]byte(n.FirstChild.Data), &p); err != nil {
			t.Fatal(err)
		}
		series := p.Option["series"].([]any)
		if len(series) != len(p.Series) {
			t.Fatalf("%s: %d series, rows for %d", attr(n, "id"), len(series), len(p.Series))
		}
		for i, s := range series {
			items, rows := len(s.(map[string]any)["data"].([]any)), p.Series[i]
			if got := (items - 2*rows.Offset) / rows.Per; got != len(p.Rows) {
				t.Errorf("%s, series %d: %d items for %d rows", attr(n, "id"), i, got, len(p.Rows))
			}
		}
		for _, row := range p.Rows {
			if len(row) != len(p.Columns) {
				t.Errorf("%s: a row has %d fields under %d names", attr(n, "id"), len(row), len(p.Columns))
			}
		}
	})
	if want := 2 + 1 + 1 + 2 + 3*9; charts != want {
		t.Errorf("%d charts, want %d", charts, want)
	}
}

func TestMissingSecondLimitLeavesNoColumn(t *testing.T) {
	c, err := limitCurve(testPlace{&fixture(t, 2, 6, 9).Tests[0], "test-1"})
	if err != nil {
		t.Fatal(err)
	}
	var p payload
	if err := json.Unmarshal([]byte(c.Payload), &p); err != nil {
		t.Fatal(err)
	}
	if want := []string{"Limit moved by", "Lower limit", "Yield, lower moved"}; !slices.Equal(p.Columns, want) {
		t.Errorf("columns %q, want %q", p.Columns, want)
	}
	if len(p.Rows) != 21 || p.Rows[0][0] != "-10.0"+space+"%" {
		t.Errorf("rows %q", p.Rows)
	}
}

// The design allows 8 MB for a full lot: 25 wafers of 88,000 dice. This is
// harder than one: fails scattered at random, which compress worst, and 120
// tests.
func TestFullLotStaysLight(t *testing.T) {
	page := render(t, fullLot(t, 120))
	t.Logf("%.2f MB", float64(len(page))/1e6)
	if len(page) > 8_000_000 {
		t.Errorf("the page has %d bytes, more than 8 MB", len(page))
	}
	open := strings.Count(page, `class="card test"`) - strings.Count(page, `open>`)
	if open != 120-openCards {
		t.Errorf("%d tests are closed, want %d", open, 120-openCards)
	}
}

func fullLot(t testing.TB, tests int) *reports.Report {
	r := fixture(t, 25, 10, tests)
	rng := rand.New(rand.NewPCG(3, 4))
	f := &fixtureLot{t: t, radius: 159}
	size, wide := 2*f.radius+1, 2*f.half()+1
	for i := range r.Pictures.Wafers {
		img := image.NewPaletted(image.Rect(0, 0, wide, size), fixturePalette)
		counts := make([]int, len(fixturePalette))
		for row := range size {
			for column := range wide {
				x, y := fixtureAspect*float64(column-f.half()), float64(row-f.radius)
				if x*x+y*y > float64(f.radius*f.radius) {
					continue
				}
				c := uint8(1)
				if rng.Float64() < 0.15 {
					c = uint8(2 + rng.IntN(4))
				}
				counts[c]++
				img.SetColorIndex(column, row, c)
			}
		}
		old := r.Pictures.Wafers[i]
		labels := []string{""}
		for _, s := range old.Legend {
			labels = append(labels, s.Label)
		}
		r.Pictures.Wafers[i] = f.raster(old.Name, img, counts, labels)
	}
	return r
}

func BenchmarkRender(b *testing.B) {
	r := fullLot(b, 9)
	var size int
	b.ReportAllocs()
	for b.Loop() {
		var buf bytes.Buffer
		if err := Render(&buf, r); err != nil {
			b.Fatal(err)
		}
		size = buf.Len()
	}
	b.ReportMetric(float64(size)/1e6, "MB/page")
}
