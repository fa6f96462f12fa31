package main

import (
	"encoding/json"
	"errors"
	"io"
	"os/exec"
	"strings"
	"testing"
)

// arrows is the plan of the house: which of our packages each room may import.
// An entry covers the packages below it unless they have an entry of their own.
var arrows = map[string][]string{
	"config":       {},
	"stats":        {"stats"},
	"wafermap":     {"stats", "wafermap"},
	"ingest":       {"config", "ingest"},
	"ingest/stdf":  {},
	"ingest/synth": {"config", "stats/junction", "ingest/stdf"},
	// Hands made-up lots over as Lots; apart from synth, which ingest's own tests use.
	"ingest/synth/memory": {"config", "ingest", "ingest/synth"},
	"reports":             {},
	"reports/build":       {"config", "ingest", "stats", "wafermap", "reports", "reports/causes"},
	"reports/causes":      {"stats", "wafermap", "reports"},
	"reports/page":        {"reports"},
	"reports/text":        {"reports"},
	"reports/ledger":      {"reports"},
	"reports/epi":         {"reports", "reports/build", "reports/ledger", "reports/page"},
	"reports/weekly":      {"reports", "reports/build", "reports/ledger", "reports/page"},
	"reports/rehearse":    {"config", "stats", "wafermap", "ingest", "ingest/synth", "ingest/synth/memory", "reports", "reports/build", "reports/causes", "reports/ledger", "reports/page"},
	"cmd":                 {"config", "ingest", "stats", "wafermap", "reports"},
}

// closed rooms let nobody import the packages below them by an entry for the
// room itself: ingest/synth is for commands and rehearsal only.
var closed = map[string]bool{"ingest/synth": true}

func TestArrows(t *testing.T) {
	out, err := exec.Command("go", "list", "-json=ImportPath,Imports", "kneepoint/...").Output()
	if err != nil {
		t.Fatalf("go list: %v", err)
	}
	seen := 0
	for dec := json.NewDecoder(strings.NewReader(string(out))); ; {
		var p struct {
			ImportPath string
			Imports    []string
		}
		if err := dec.Decode(&p); errors.Is(err, io.EOF) {
			break
		} else if err != nil {
			t.Fatal(err)
		}
		seen++
		from := strings.TrimPrefix(p.ImportPath, "kneepoint/")
		for _, imp := range p.Imports {
			if to, ours := strings.CutPrefix(imp, "kneepoint/"); ours && !mayImport(from, to) {
				t.Errorf("%s imports %s, against the plan of DEVELOPERS.md", from, to)
			}
		}
	}
	if seen < 5 {
		t.Fatalf("go list found only %d packages", seen)
	}
}

func mayImport(from, to string) bool {
	if strings.HasPrefix(from, room(from)+"/") && to == room(from) {
		return true // a sub-package may use the types of its own room
	}
	for _, allowed := range arrows[room(from)] {
		if to == allowed || (strings.HasPrefix(to, allowed+"/") && (!closed[to] || strings.HasPrefix(from, "cmd") || strings.HasPrefix(from, to+"/"))) {
			// an entry covers sub-packages, but of reports only the package itself:
			// page must not reach build.
			if allowed != "reports" || to == allowed || strings.HasPrefix(from, "cmd") {
				return true
			}
		}
	}
	return false
}

// room is the longest entry of arrows that a package lies in.
func room(pkg string) string {
	for p := pkg; p != ""; {
		if _, ok := arrows[p]; ok {
			return p
		}
		i := strings.LastIndexByte(p, '/')
		if i < 0 {
			return p
		}
		p = p[:i]
	}
	return pkg
}

// TestArrowsRefuse guards the guard: a rule that allows everything would pass
// TestArrows too.
func TestArrowsRefuse(t *testing.T) {
	for _, c := range []struct {
		from, to string
		want     bool
	}{
		{"stats/yield", "stats", true},
		{"stats", "ingest", false},
		{"stats/yield", "wafermap", false},
		{"wafermap", "stats/yield", true},
		{"wafermap", "reports", false},
		{"ingest", "stats", false},
		{"ingest", "config", true},
		{"ingest", "ingest/stdf", true},
		{"ingest", "ingest/synth", false},
		{"ingest/synth", "ingest", false},
		{"ingest/synth/memory", "ingest", true},
		{"ingest/synth/memory", "ingest/synth", true},
		{"ingest/synth/memory", "reports", false},
		{"reports", "stats", false},
		{"reports/page", "reports/build", false},
		{"reports/page", "reports", true},
		{"reports/build", "reports/page", false},
		{"reports/build", "ingest", true},
		{"reports/build", "ingest/synth", false},
		{"reports/causes", "ingest", false},
		{"reports/rehearse", "ingest/synth", true},
		{"reports/rehearse", "ingest/synth/memory", true},
		{"reports/page", "reports/rehearse", false},
		{"cmd/kneepoint", "ingest/synth", true},
		{"cmd/kneepoint", "reports/page", true},
	} {
		if got := mayImport(c.from, c.to); got != c.want {
			t.Errorf("mayImport(%s, %s) = %v, want %v", c.from, c.to, got, c.want)
		}
	}
}
