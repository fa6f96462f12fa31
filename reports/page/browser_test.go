package page

import (
	"bytes"
	"context"
	"fmt"
	"image"
	"image/png"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"sync"
	"testing"
	"time"

	"github.com/chromedp/cdproto/cdp"
	cdplog "github.com/chromedp/cdproto/log"
	"github.com/chromedp/cdproto/network"
	cdppage "github.com/chromedp/cdproto/page"
	"github.com/chromedp/cdproto/runtime"
	"github.com/chromedp/chromedp"
	"github.com/chromedp/chromedp/kb"

	"kneepoint/reports"
)

// chromium finds a browser, or skips the test.
func chromium(t *testing.T) string {
	t.Helper()
	if path := os.Getenv("KNEEPOINT_CHROMIUM"); path != "" {
		return path
	}
	for _, name := range []string{"chromium", "chromium-browser", "google-chrome"} {
		if path, err := exec.LookPath(name); err == nil {
			return path
		}
	}
	t.Skip("no Chromium: install chromium, or say where one is in KNEEPOINT_CHROMIUM")
	return ""
}

// browser is a headless Chromium of this test's own, with nothing to talk to.
func browser(t *testing.T) context.Context {
	t.Helper()
	options := append(chromedp.DefaultExecAllocatorOptions[:],
		chromedp.ExecPath(chromium(t)), chromedp.NoSandbox, chromedp.DisableGPU, chromedp.UserDataDir(t.TempDir()),
		chromedp.Flag("disable-component-update", true), chromedp.Flag("host-resolver-rules", "MAP * ~NOTFOUND"))
	ctx, stop := chromedp.NewExecAllocator(context.Background(), options...)
	t.Cleanup(stop)
	ctx, closeAll := chromedp.NewContext(ctx)
	t.Cleanup(closeAll)
	if err := chromedp.Do(ctx); err != nil {
		t.Fatalf("starting the browser: %v", err)
	}
	return ctx
}

// tab is one open page and what went wrong on it.
type tab struct {
	t        *testing.T
	ctx      context.Context
	mu       sync.Mutex
	problems []string
	requests []string
}

func open(t *testing.T, browser context.Context, r *reports.Report, width int64) *tab {
	t.Helper()
	file := filepath.Join(t.TempDir(), "report.html")
	if err := os.WriteFile(file, []byte(render(t, r)), 0o600); err != nil {
		t.Fatal(err)
	}
	ctx, closeTab := chromedp.NewContext(browser)
	t.Cleanup(closeTab)
	p := &tab{t: t, ctx: ctx}
	p.check(chromedp.Listen(ctx, p.hear))
	p.do(chromedp.EmulateViewport(width, 900))
	_, err := chromedp.Call(ctx, network.Enable, network.EnableParams{})
	p.check(err)
	_, err = chromedp.Call(ctx, cdppage.BringToFront, cdp.Empty{}) // a tab behind another draws no frames
	p.check(err)
	p.do(chromedp.Navigate("file://" + file))
	return p
}

func (p *tab) hear(event any) {
	p.mu.Lock()
	defer p.mu.Unlock()
	switch e := event.(type) {
	case *runtime.EventConsoleAPICalled:
		p.problems = append(p.problems, fmt.Sprintf("console %s: %d arguments", e.Type, len(e.Args)))
	case *runtime.EventExceptionThrown:
		p.problems = append(p.problems, "exception: "+e.ExceptionDetails.Text)
	case *cdplog.EventEntryAdded:
		p.problems = append(p.problems, fmt.Sprintf("log %s: %s", e.Entry.Level, e.Entry.Text))
	case *cdppage.EventJavascriptDialogOpening:
		p.problems = append(p.problems, "a box opened: "+e.Message)
	case *network.EventRequestWillBeSent:
		if u := e.Request.URL; !strings.HasPrefix(u, "data:") {
			p.requests = append(p.requests, u)
		}
	}
}

func (p *tab) check(err error) {
	p.t.Helper()
	if err != nil {
		p.t.Fatal(err)
	}
}

func (p *tab) do(action chromedp.Action[chromedp.Void]) {
	p.t.Helper()
	ctx, cancel := context.WithTimeout(p.ctx, 60*time.Second)
	defer cancel()
	p.check(chromedp.Do(ctx, action))
}

// eval runs a script's body, which may wait, and returns what it returns.
func eval[T any](p *tab, body string) T {
	p.t.Helper()
	ctx, cancel := context.WithTimeout(p.ctx, 60*time.Second)
	defer cancel()
	v, err := chromedp.Run(ctx, chromedp.Evaluate[T](`(async () => {
		const wait = async (ready) => { for (let i = 0; i < 800 && !ready(); i++) await new Promise((r) => setTimeout(r, 25)); return ready(); };
		`+body+`})()`, chromedp.EvalAwaitPromise))
	p.check(err)
	return v
}

// scroll goes down the page as a reader does.
func (p *tab) scroll() {
	p.t.Helper()
	eval[bool](p, `for (let y = 0; y < document.documentElement.scrollHeight; y += 1000) { scrollTo(0, y); await new Promise((r) => { requestAnimationFrame(r); setTimeout(r, 100); }); }
		return wait(() => [...document.querySelectorAll(".chart")].every((c) => c.dataset.drawn || !c.checkVisibility()))`)
}

// sound fails the test when the page complained or asked for anything.
func (p *tab) sound() {
	p.t.Helper()
	p.mu.Lock()
	defer p.mu.Unlock()
	for _, problem := range p.problems {
		p.t.Error(problem)
	}
	if len(p.requests) != 1 || !strings.HasPrefix(p.requests[0], "file://") {
		p.t.Errorf("the page asked for %q", p.requests)
	}
}

// empty lists the charts that show too little to be one.
const empty = `[...document.querySelectorAll(".chart")].filter((c) => c.checkVisibility() && (c.querySelectorAll("svg path").length < 4 || c.querySelectorAll("svg text").length < 2)).map((c) => c.id)`

func TestPageInBrowser(t *testing.T) {
	b := browser(t)
	lot := fixture(t, 25, 21, 9)

	t.Run("draws every chart", func(t *testing.T) {
		p := open(t, b, lot, 1440)
		p.scroll()
		if none := eval[[]string](p, "return "+empty); len(none) > 0 {
			t.Errorf("empty charts: %v", none)
		}
		if n := eval[int](p, `return document.querySelectorAll(".chart[data-drawn]").length`); n != 6+27 {
			t.Errorf("%d charts drawn, want 33", n)
		}
		if n := eval[int](p, `document.querySelector('[data-counts="log"]').click();
			document.querySelector("#tests details.numbers summary").click();
			await wait(() => document.querySelector("#tests details.numbers table"));
			return document.querySelector("#tests details.numbers tbody").rows.length`); n != 70 {
			t.Errorf("the histogram's table has %d rows, want 70", n)
		}
		if none := eval[[]string](p, "return "+empty); len(none) > 0 {
			t.Errorf("empty charts with log counts: %v", none)
		}
		p.sound()
	})

	t.Run("sorts", func(t *testing.T) {
		p := open(t, b, lot, 1440)
		sorted := func(direction string) []string {
			return eval[[]string](p, `const heading = [...document.querySelectorAll("#wafers th.sorts")].find((th) => th.textContent.trim().startsWith("Yield"));
				heading.querySelector("button").click();
				if (heading.getAttribute("aria-sort") !== "`+direction+`") return [heading.getAttribute("aria-sort")];
				return [...heading.closest("table").tBodies[0].rows].map((r) => r.cells[0].textContent)`)
		}
		up, down := sorted("ascending"), sorted("descending")
		want := byYield(lot.Wafers)
		if strings.Join(up, " ") != strings.Join(want, " ") {
			t.Errorf("ascending: %v\nwant %v", up, want)
		}
		if down[0] != want[len(want)-1] || down[len(down)-1] != want[0] {
			t.Errorf("descending: %v", down)
		}
		maps := eval[[]string](p, `document.querySelector('[data-order="loss"]').click(); return [...document.querySelectorAll("#gallery figcaption b")].map((b) => b.textContent)`)
		if strings.Join(maps, " ") != strings.Join(want, " ") {
			t.Errorf("maps by loss: %v\nwant %v", maps, want)
		}
		p.sound()
	})

	t.Run("reads a die from the keyboard", func(t *testing.T) {
		p := open(t, b, lot, 1440)
		title := `return document.getElementById("viewer").open ? document.getElementById("viewer-title").textContent : "closed"`
		if hidden := eval[bool](p, `const button = document.querySelector("[data-signs]"), shown = () => getComputedStyle(document.querySelector("#gallery .signs")).display !== "none";
			const before = shown(); button.click(); const after = shown(); button.click(); return before && !after && shown()`); !hidden {
			t.Error("the outlines do not go and come with their button")
		}
		eval[bool](p, `document.querySelector('button.map[data-map="2"]').focus(); return true`)
		p.do(chromedp.KeyEvent(kb.Enter))
		if got := eval[string](p, title); got != "Wafer 03" {
			t.Fatalf("Enter on the third map shows %q", got)
		}
		p.do(chromedp.KeyEvent(kb.ArrowRight))
		p.do(chromedp.KeyEvent(kb.ArrowRight))
		p.do(chromedp.KeyEvent(kb.ArrowLeft))
		if got := eval[string](p, title); got != "Wafer 04" {
			t.Errorf("right, right, left from wafer 03 shows %q", got)
		}
		raster := lot.Pictures.Wafers[3]
		column, row := raster.Columns/2, raster.Rows/2
		eval[bool](p, `document.getElementById("viewer-map").focus(); return true`)
		for range 6 {
			p.do(chromedp.KeyEvent(kb.ArrowDown))
			row++
		}
		p.do(chromedp.KeyEvent(kb.ArrowRight))
		column++
		die := `return document.getElementById("viewer-die").textContent`
		want := fmt.Sprintf("x %d, y %d", raster.X0+column, raster.Y0-row) + labelAt(t, raster, column, row)
		if got := eval[string](p, `await wait(() => document.getElementById("viewer-die").textContent === `+fmt.Sprintf("%q", want)+`);`+die); got != want {
			t.Errorf("the die reads %q, want %q", got, want)
		}
		// The pointer reads the same way: put it on another die.
		column, row = column-9, row-3
		at := eval[[]float64](p, fmt.Sprintf(`const svg = document.querySelector("#viewer-map svg"), m = svg.getScreenCTM();
			const at = new DOMPoint((%d + 0.5) * %g, %d + 0.5).matrixTransform(m); return [at.x, at.y]`, column, raster.Aspect, row))
		p.do(chromedp.MouseEvent(chromedp.MouseMoved, at[0], at[1]))
		want = fmt.Sprintf("x %d, y %d", raster.X0+column, raster.Y0-row) + labelAt(t, raster, column, row)
		if got := eval[string](p, `await wait(() => document.getElementById("viewer-die").textContent === `+fmt.Sprintf("%q", want)+`);`+die); got != want {
			t.Errorf("under the pointer the die reads %q, want %q", got, want)
		}
		p.do(chromedp.KeyEvent(kb.Escape))
		if got := eval[string](p, title); got != "closed" {
			t.Errorf("Escape left %q open", got)
		}
		if got := eval[string](p, `return document.activeElement.dataset.map`); got != "3" {
			t.Errorf("after closing, the focus is on map %q, want 3", got)
		}
		p.sound()
	})

	t.Run("draws closed cards when opened or printed", func(t *testing.T) {
		p := open(t, b, fixture(t, 4, 8, openCards+2), 1440)
		if n := eval[int](p, `document.querySelector("details.test:not([open])").scrollIntoView(); await new Promise((r) => setTimeout(r, 200));
			return document.querySelectorAll("details.test:not([open]) .chart[data-drawn]").length`); n != 0 {
			t.Errorf("%d charts of closed cards are drawn", n)
		}
		if !eval[bool](p, `const card = document.querySelector("details.test:not([open])"); card.open = true;
			return wait(() => [...card.querySelectorAll(".chart")].every((c) => c.dataset.drawn))`) {
			t.Error("an opened card's charts are not drawn")
		}
		if none := eval[[]string](p, `dispatchEvent(new Event("beforeprint")); return `+empty); len(none) > 0 {
			t.Errorf("empty charts on paper: %v", none)
		}
		if n := eval[int](p, `return document.querySelectorAll(".chart:not([data-drawn])").length`); n != 0 {
			t.Errorf("%d charts are not drawn before printing", n)
		}
		if n := eval[int](p, `dispatchEvent(new Event("afterprint")); return document.querySelectorAll("details.test[open]").length`); n != openCards+1 {
			t.Errorf("%d cards are open after printing, want %d as before", n, openCards+1)
		}
		p.sound()
	})

	for name, r := range map[string]*reports.Report{"whole lot": fixture(t, 25, 12, 4), "hostile": hostileReport(t), "nothing computed": blankReport()} {
		t.Run("fits a narrow screen: "+name, func(t *testing.T) {
			p := open(t, b, r, 390)
			p.scroll()
			if w := eval[int](p, `return document.documentElement.scrollWidth`); w > 390 {
				wide := eval[[]string](p, `return [...document.querySelectorAll("main *")].filter((e) => !e.closest(".scroll") && e.getBoundingClientRect().right > 391).map((e) => e.tagName + "." + e.className + "#" + e.id).slice(0, 5)`)
				t.Errorf("the page is %d pixels wide: %v", w, wide)
			}
			if none := eval[[]string](p, "return "+empty); len(none) > 0 && name != "nothing computed" {
				t.Errorf("empty charts: %v", none)
			}
			p.sound()
		})
	}

	// A page whose escaping failed would still be held by its policy.
	t.Run("stops foreign scripts", func(t *testing.T) {
		p := open(t, b, bareReport(), 800)
		if eval[bool](p, `document.body.insertAdjacentHTML("beforeend", "<img src='data:,' onerror='window.ran = true'>");
			const script = document.createElement("script"); script.textContent = "window.ran = true"; document.body.append(script);
			await new Promise((r) => setTimeout(r, 200));
			return window.ran === true`) {
			t.Error("a script that is not the page's own ran")
		}
	})
}

func byYield(wafers []reports.Wafer) []string {
	var ids []string
	for rank := 0; len(ids) < len(wafers); rank++ {
		best := -1
		for i, w := range wafers {
			taken := false
			for _, id := range ids {
				taken = taken || id == w.ID
			}
			if !taken && (best < 0 || w.Yield.Estimate < wafers[best].Yield.Estimate) {
				best = i
			}
		}
		ids = append(ids, wafers[best].ID)
	}
	return ids
}

// labelAt reads a die of a raster as an image library does.
func labelAt(t *testing.T, r reports.Raster, column, row int) string {
	t.Helper()
	img, err := png.Decode(bytes.NewReader(r.PNG))
	if err != nil {
		t.Fatal(err)
	}
	palette := img.(*image.Paletted)
	i := palette.ColorIndexAt(column, row)
	if i == 0 {
		return "no die here"
	}
	return r.Legend[i-1].Label
}
