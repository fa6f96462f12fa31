package page

import (
	"bytes"
	"os"
	"testing"
)

func TestDump(t *testing.T) {
	for name, r := range map[string]func() error{
		"std": func() error {
			var b bytes.Buffer
			e := Render(&b, fixture(t, 25, 21, 9))
			os.WriteFile("/tmp/page/std.html", b.Bytes(), 0o644)
			return e
		},
		"bare": func() error {
			var b bytes.Buffer
			e := Render(&b, bareReport())
			os.WriteFile("/tmp/page/bare.html", b.Bytes(), 0o644)
			return e
		},
	} {
		if err := r(); err != nil {
			t.Fatal(name, err)
		}
	}
}
