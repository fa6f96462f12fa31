package ingest

import (
	"context"
	"os"
	"path/filepath"
	"testing"
)

// read reads one text as a file.
func readText(t testing.TB, text string, opt Options) (*Batch, error) {
	t.Helper()
	path := filepath.Join(t.TempDir(), "LOT7.csv")
	if err := os.WriteFile(path, []byte(text), 0o644); err != nil {
		t.Fatal(err)
	}
	return Read(context.Background(), []string{path}, opt)
}

func TestOxide(t *testing.T) {
	b, err := Read(context.Background(), []string{"../testdata/ingest/oxide.csv"}, Options{})
	if err != nil {
		t.Fatal(err)
	}
	for _, l := range b.Lots {
		t.Log(l.ID(), l.Len(), l.Wafers(), l.Tests(), l.Values(0), l.Attributes(), l.Findings(), l.HasCoordinates(), l.Site())
	}
	t.Logf("%+v", b.Tally)
}
