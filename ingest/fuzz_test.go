package ingest

import (
	"context"
	"errors"
	"os"
	"path/filepath"
	"testing"

	"github.com/google/go-cmp/cmp"
)

// FuzzReadDelimited holds what is true of any input: no panic; an error names
// the file; every row is accounted for (Read itself panics otherwise); and the
// fast path gives what the full reader gives, in blocks of any size, bit for
// bit.
func FuzzReadDelimited(f *testing.F) {
	s := makeSample()
	short := sampleLot{tests: s.tests, units: s.units, lower: s.lower, upper: s.upper, rows: s.rows[:6]}
	for _, text := range []string{short.wide(",", false), short.wide(";", true), short.long("\t", false), plain(), oneValue(),
		quoted(short.wide(",", false), ","), gzipped(plain()), zstded(plain()), "\xef\xbb\xbf" + plain()} {
		f.Add([]byte(text))
	}
	for _, o := range odds {
		if len(o.text) < 2000 {
			f.Add([]byte(o.text))
		}
	}
	f.Fuzz(func(t *testing.T, data []byte) {
		if len(data) > 64<<10 {
			return
		}
		path := filepath.Join(t.TempDir(), "lot.csv")
		if err := os.WriteFile(path, data, 0o644); err != nil {
			t.Fatal(err)
		}
		want, err := Read(context.Background(), []string{path}, Options{Workers: 1, careful: true})
		var e *Error
		if err != nil && (!errors.As(err, &e) || e.File != path || e.What == "") {
			t.Fatalf("error %#v", err)
		}
		got, err2 := Read(context.Background(), []string{path}, Options{Workers: 2, block: 50})
		if (err == nil) != (err2 == nil) || err != nil && err.Error() != err2.Error() {
			t.Fatalf("full reader: %v\nfast: %v", err, err2)
		}
		if err != nil {
			return
		}
		if d := cmp.Diff(views(want), views(got), exactly); d != "" {
			t.Fatalf("(-full reader +fast)\n%s", d)
		}
		if d := cmp.Diff(want.Tally, got.Tally); d != "" {
			t.Fatalf("tally (-full reader +fast)\n%s", d)
		}
		want.Overview()
		Draft(want)
	})
}
