// Package page draws a Report as one HTML file that needs nothing else: no
// network, no font, no second file. It computes nothing; it sorts, writes
// numbers as a person reads them (numbers.go), and lays them out in the order
// in which a product engineer with ten minutes before a meeting wants them.
//
// Charts are option objects made here with go-echarts and drawn in the
// reader's browser by the echarts script that is part of the page. A chart is
// drawn when it comes into view, so that a report on hundreds of tests still
// opens at once, and every chart is drawn before the page prints.
//
// All text of the data goes through html/template or through JSON with <, >
// and & escaped, and the page's script writes it with textContent; the page
// also carries a content security policy that lets only its own two scripts
// run and nothing load. A lot called "</script>" is just a strange name.
package page

import (
	"bytes"
	"crypto/sha256"
	"embed"
	"encoding/base64"
	"html/template"
	"io"
	"strings"

	"kneepoint/reports"
)

//go:embed assets/*.css assets/*.js assets/ECHARTS-* templates/*.html
var files embed.FS

// ownScripts are joined to one script with a scope of its own, in this order.
var ownScripts = []string{"assets/charts.js", "assets/maps.js", "assets/tables.js", "assets/page.js"}

var layout = template.Must(template.ParseFS(files, "templates/*.html"))

// Render writes the report as an HTML page. The same report gives the same
// bytes. On an error nothing is written, unless the writer itself failed.
func Render(w io.Writer, r *reports.Report) error {
	v, err := newView(r)
	if err != nil {
		return err
	}
	var b bytes.Buffer
	if err := layout.ExecuteTemplate(&b, "page.html", v); err != nil {
		return err
	}
	_, err = w.Write(b.Bytes())
	return err
}

// view is all that the templates show.
type view struct {
	Title     string
	Policy    string
	Style     template.CSS
	Echarts   template.JS
	Script    template.JS
	License   string
	Notice    string
	EchartsIs string
	Head      head
	Why       *why
	Epi       *epi
	Losses    losses
	Wafers    wafers
	Patterns  patterns
	MapData   template.JS
	Zones     zones
	Tests     []testCard
	Others    others
	Record    record
	Tool      reports.Tool
}

func newView(r *reports.Report) (*view, error) {
	v := &view{
		Title:     "Lot " + r.Lot,
		Style:     template.CSS(asset("assets/style.css")),
		Echarts:   template.JS(asset("assets/echarts.min.js")),
		License:   asset("assets/ECHARTS-LICENSE"),
		Notice:    asset("assets/ECHARTS-NOTICE"),
		EchartsIs: strings.TrimSpace(asset("assets/ECHARTS-VERSION")),
		Tool:      r.Tool,
	}
	if r.Product != "" {
		v.Title += ", " + r.Product
	}
	var own strings.Builder
	own.WriteString("(() => {\n\"use strict\";\n")
	for _, name := range ownScripts {
		own.WriteString(asset(name))
	}
	own.WriteString("})();\n")
	v.Script = template.JS(own.String())
	v.Policy = policy(string(v.Echarts), string(v.Script))
	tests := byLoss(r.Tests)
	v.Head = newHead(r, tests)
	v.Why = newWhy(r)
	v.Record = newRecord(r)
	var err error
	if v.Epi, err = newEpi(r); err != nil {
		return nil, err
	}
	if v.Losses, err = newLosses(r, tests); err != nil {
		return nil, err
	}
	var maps atlas
	if v.Wafers, err = newWafers(r, &maps); err != nil {
		return nil, err
	}
	if v.Patterns, err = newPatterns(r, &maps); err != nil {
		return nil, err
	}
	if v.MapData, err = maps.script(); err != nil {
		return nil, err
	}
	if v.Others, err = newOthers(r); err != nil {
		return nil, err
	}
	if v.Zones, err = newZones(r); err != nil {
		return nil, err
	}
	v.Tests, err = newTestCards(tests)
	return v, err
}

func asset(name string) string {
	b, err := files.ReadFile(name)
	if err != nil {
		panic("page: " + err.Error()) // embedded: cannot fail
	}
	return string(b)
}

// policy is the page's content security policy: nothing is loaded, pictures
// are inside the page, and of all scripts only those with these hashes run.
// Styles are inline because echarts writes its tooltip with them.
func policy(scripts ...string) string {
	s := "default-src 'none'; base-uri 'none'; form-action 'none'; img-src data:; style-src 'unsafe-inline'; script-src"
	for _, code := range scripts {
		sum := sha256.Sum256([]byte(code))
		s += " 'sha256-" + base64.StdEncoding.EncodeToString(sum[:]) + "'"
	}
	return s
}
