package stdf

import (
	"bytes"
	"strings"
	"testing"
)

// An odd record marks the part that it belongs to, and no other.
func TestOddRecords(t *testing.T) {
	file := write(t, LittleEndian, &MIR{}, pir(1), pir(2), res(1, "A", 1), res(2, "A", 2), res(1, "B", 3), res(2, "B", 4), prr(1, "p"), prr(2, "q"),
		&WRR{Head: 1, Parts: 2, Good: 2}, &MRR{})
	find := func(s string) int {
		i := bytes.Index(file, []byte(s))
		if i < 0 || bytes.Contains(file[i+1:], []byte(s)) {
			t.Fatalf("%q is not there once", s)
		}
		return i
	}
	for _, c := range []struct {
		name  string
		at    int
		to    byte
		lines []string
		kinds string
	}{
		// The first A is of site 1; its text claims to be longer than the record.
		{"a text runs over", bytes.Index(file, []byte("\x01A")), 9, []string{"A=1 B=3 damaged", "A=2 B=4"}, "odd-record part-with-gap"},
		// PART_ID q
		{"a part id runs over", find("\x01q"), 200, []string{"A=1 B=3", "A=2 B=4 damaged"}, "odd-record part-with-gap"},
		// The same for the B of site 1, whose text ends early: what follows it does not fit.
		{"a text ends early", bytes.Index(file, []byte("\x01B")), 0, []string{"A=1 B=3 damaged", "A=2 B=4"}, "odd-record part-with-gap"},
	} {
		bad := bytes.Clone(file)
		bad[c.at] = c.to
		lines, p := partLines(t, bad)
		if len(lines) != len(c.lines) {
			t.Fatalf("%s: %d parts, %v", c.name, len(lines), p.Damages())
		}
		for i, want := range c.lines {
			if !strings.HasSuffix(lines[i], `" `+want) {
				t.Errorf("%s: part %d is %s, want %s", c.name, i, lines[i], want)
			}
		}
		if kindsOf(p) != c.kinds {
			t.Errorf("%s: %v", c.name, p.Damages())
		}
	}
}
