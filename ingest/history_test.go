package ingest

import (
	"os"
	"path/filepath"
	"strings"
	"testing"
)

func historyFile(t *testing.T, content string) string {
	t.Helper()
	path := filepath.Join(t.TempDir(), "history.csv")
	if err := os.WriteFile(path, []byte(content), 0o644); err != nil {
		t.Fatal(err)
	}
	return path
}

func TestHistory(t *testing.T) {
	data := filepath.Join(t.TempDir(), "lot.csv")
	os.WriteFile(data, []byte("LOT,WAFER,X,Y,BV\nA,1,0,0,25\nA,1,1,0,26\nA,2,0,0,25\nA,2,1,0,24\nA,3,0,0,25\n"), 0o644)
	h, err := ReadHistory(historyFile(t, "\xef\xbb\xbf# from the epi log\nLot;Wafer;Run;Reactor\na;W01;77;R2\nA;02;77;R1\nA;02;78;\nB;3;1;R9\n"))
	if err != nil {
		t.Fatal(err)
	}
	b, err := Read(t.Context(), []string{data}, Options{History: h})
	if err != nil {
		t.Fatal(err)
	}
	l := b.Lots[0]
	for i, want := range []map[string]string{{"Run": "77", "Reactor": "R2"}, {"Run": "78"}, {}} {
		got := l.Wafers()[i].Attributes
		for _, k := range []string{"Run", "Reactor"} {
			if got[k] != want[k] {
				t.Errorf("wafer %s: %s is %q, want %q", l.Wafers()[i].ID, k, got[k], want[k])
			}
		}
	}
	codes := map[string]bool{}
	for _, f := range l.Findings() {
		codes[f.Code] = true
	}
	for _, c := range []string{"wafer-without-history", "history-twice"} {
		if !codes[c] {
			t.Errorf("no finding %s in %v", c, l.Findings())
		}
	}
	if in := l.Inputs(); len(in) != 2 || in[1].Format != "wafer history" || in[1].SHA256 == "" || in[1].Rows != 4 {
		t.Errorf("inputs %+v", in)
	}
}

func TestHistoryErrors(t *testing.T) {
	for _, c := range []struct{ name, content, want string }{
		{"empty", "", "empty"},
		{"no wafer column", "LOT,REACTOR\nA,1\n", "wafer"},
		{"no rows", "LOT,WAFER,REACTOR\n", "no rows"},
		{"quotes", "LOT,WAFER,R\nA,1,\"x\nA,2,y\n", "quotes"},
		{"UTF-16", "\xff\xfeL\x00", "plain text"},
	} {
		_, err := ReadHistory(historyFile(t, c.content))
		if err == nil || !strings.Contains(err.Error(), c.want) || !strings.Contains(err.Error(), "history.csv") || strings.Contains(err.Error(), "\n") {
			t.Errorf("%s: error %v, want one line with the file and %q", c.name, err, c.want)
		}
	}
	if _, err := ReadHistory("nowhere.csv"); err == nil {
		t.Error("a missing file is read")
	}
}

func FuzzReadHistory(f *testing.F) {
	f.Add([]byte("LOT,WAFER,REACTOR\nA,1,R1\n"))
	f.Add([]byte("wafer;slot\n1;\"a;b\"\n"))
	f.Add([]byte("# c\n\nw\n\"\n"))
	dir := f.TempDir()
	f.Fuzz(func(t *testing.T, data []byte) {
		path := filepath.Join(dir, "h.csv")
		os.WriteFile(path, data, 0o644)
		h, err := ReadHistory(path)
		if err != nil {
			if !strings.Contains(err.Error(), "h.csv") {
				t.Errorf("%v does not name the file", err)
			}
			return
		}
		for _, r := range h.rows {
			if len(r.values) != len(h.columns) {
				t.Errorf("row with %d values for %d columns", len(r.values), len(h.columns))
			}
		}
	})
}
