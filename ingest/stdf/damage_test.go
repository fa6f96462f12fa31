package stdf

import (
	"bytes"
	"fmt"
	"math/rand/v2"
	"strings"
	"testing"
)

// damageFiles are what is cut and flipped: both byte orders, long and short
// records, one site and several.
var damageFiles = []madeFile{
	{wafers: 3, parts: 30, sites: 3, seed: 3},
	{wafers: 3, parts: 30, sites: 3, seed: 4, order: BigEndian, leaveOut: true},
	{wafers: 2, parts: 40, sites: 1, seed: 5, textOnly: true},
	{wafers: 2, parts: 40, sites: 4, seed: 6, leaveOut: true, plainOnly: true},
}

// ends are the offsets behind the PRRs of a sound file.
func ends(t testing.TB, file []byte) (ends []int64) {
	t.Helper()
	r := NewReader(bytes.NewReader(file))
	for r.Scan() {
		if r.Record().Kind() == KindPRR {
			ends = append(ends, r.Position())
		}
	}
	if r.Err() != nil || len(r.Damages()) > 0 {
		t.Fatal(r.Err(), r.Damages())
	}
	return ends
}

// tryLines is partLines for a file that may be no STDF at all. It checks what
// must hold of any input: offsets in range and in order, counts that add up.
func tryLines(t testing.TB, file []byte) ([]string, *Parts) {
	t.Helper()
	p := NewParts(NewReader(bytes.NewReader(file)))
	var lines []string
	var wafers []int
	last := int64(-1)
	for p.Scan() {
		part := p.Part()
		if part.Offset <= last || part.Offset >= int64(len(file)) || part.Opened >= part.Offset {
			t.Fatalf("part at %d, opened at %d, after %d, of %d bytes", part.Offset, part.Opened, last, len(file))
		}
		last = part.Offset
		lines = append(lines, resultLine(p, part))
		wafers = append(wafers, part.Wafer)
	}
	for i, w := range wafers {
		lines[i] = p.Wafers()[w].ID + " " + lines[i]
	}
	for _, d := range p.Damages() {
		if d.Offset < 0 || d.Offset > int64(len(file)) || d.Offset+d.Skipped > int64(len(file)) || d.Text == "" || d.Kind == "" {
			t.Fatalf("damage %+v in %d bytes", d, len(file))
		}
	}
	if pos := p.Reader().Position(); pos > int64(len(file)) {
		t.Fatalf("position %d in %d bytes", pos, len(file))
	}
	return lines, p
}

func resultLine(p *Parts, part *Part) string {
	var b strings.Builder
	fmt.Fprintf(&b, "h%d s%d hb %d x %d y %d id %q", part.Head, part.Site, part.HardBin, part.X, part.Y, part.ID())
	for _, r := range part.Results {
		fmt.Fprintf(&b, " %d.%d=%g", p.Tests()[r.Test].Number, r.Column, r.Raw)
	}
	return b.String()
}

// A file cut anywhere keeps every part whose PRR is whole, no other, and says
// where it was cut.
func TestCutAnywhere(t *testing.T) {
	rnd := rand.New(rand.NewPCG(1, 1))
	for _, m := range damageFiles {
		file := m.bytes(t)
		want, _ := tryLines(t, file)
		ends := ends(t, file)
		for range 2000 / len(damageFiles) {
			cut := rnd.IntN(len(file))
			lines, p := tryLines(t, file[:cut])
			whole := 0
			for whole < len(ends) && ends[whole] <= int64(cut) {
				whole++
			}
			if len(lines) != whole {
				t.Fatalf("cut at %d: %d parts, want %d: %v", cut, len(lines), whole, p.Damages())
			}
			for i := range lines {
				if lines[i] != want[i] {
					t.Fatalf("cut at %d: part %d is %s, want %s", cut, i, lines[i], want[i])
				}
			}
			if cut < 6 {
				continue
			}
			if p.Err() != nil {
				t.Fatalf("cut at %d: %v", cut, p.Err())
			}
			var d Damage
			for _, d = range p.Damages() {
				if d.Kind == DamageCut {
					break
				}
			}
			// At a record's end nothing is cut but the run.
			if d.Kind == DamageCut && (d.Offset > int64(cut) || d.Offset+d.Skipped != int64(cut)) {
				t.Fatalf("cut at %d: %+v", cut, d)
			}
			if len(p.Runs()) > 0 && (len(p.Damages()) == 0 || p.Runs()[0].MRR != nil) {
				t.Fatalf("cut at %d: nothing is said", cut)
			}
		}
	}
}

// A byte flipped anywhere: every part that ended before it is kept as it was,
// and what is lost behind it is little.
func TestFlipAnywhere(t *testing.T) {
	rnd := rand.New(rand.NewPCG(2, 1))
	lost, added, silent, flips := 0, 0, 0, 0
	for _, m := range damageFiles {
		file := m.bytes(t)
		want, _ := tryLines(t, file)
		ends := ends(t, file)
		for range 2000 / len(damageFiles) {
			flip := rnd.IntN(len(file))
			bad := bytes.Clone(file)
			bad[flip] ^= byte(1 + rnd.IntN(255))
			lines, p := tryLines(t, bad)
			if p.Err() != nil {
				// Only the byte that says which version it is can make the
				// file one that is not read.
				if flip != 5 {
					t.Fatalf("flip at %d: %v", flip, p.Err())
				}
				continue
			}
			before := 0
			for before < len(ends) && ends[before] <= int64(flip) {
				before++
			}
			if len(lines) < before {
				t.Fatalf("flip at %d: %d parts, %d were before it: %v", flip, len(lines), before, p.Damages())
			}
			for i := range before {
				if lines[i] != want[i] {
					t.Fatalf("flip at %d: part %d is %s, want %s", flip, i, lines[i], want[i])
				}
			}
			flips++
			lost += max(0, len(want)-len(lines))
			added += max(0, len(lines)-len(want))
			if len(lines) != len(want) && len(p.Damages()) == 0 {
				silent++
				t.Errorf("flip at %d: %d parts of %d, and nothing is said", flip, len(lines), len(want))
			}
			if len(lines) < len(want)-m.sites-1 {
				t.Errorf("flip at %d (%02x to %02x): %d parts of %d: %v", flip, file[flip], bad[flip], len(lines), len(want), p.Damages())
			}
		}
	}
	t.Logf("%d flips: %d parts lost, %d added", flips, lost, added)
	if lost > flips/10 {
		t.Errorf("%d parts lost by %d flips", lost, flips)
	}
}

// Stretches of bytes lost, doubled, or overwritten with zeros, noise or text.
func TestStretches(t *testing.T) {
	rnd := rand.New(rand.NewPCG(3, 1))
	for _, m := range damageFiles {
		file := m.bytes(t)
		want, _ := tryLines(t, file)
		ends := ends(t, file)
		for i := range 200 {
			at := 6 + rnd.IntN(len(file)-6)
			n := min(1+rnd.IntN(3000), len(file)-at)
			var bad []byte
			switch i % 5 {
			case 0:
				bad = append(bytes.Clone(file[:at]), file[at+n:]...)
			case 1:
				bad = append(bytes.Clone(file[:at+n]), file[at:]...)
			case 2, 3, 4:
				bad = bytes.Clone(file)
				for j := range n {
					switch i % 5 {
					case 2:
						bad[at+j] = 0
					case 3:
						bad[at+j] = byte(rnd.IntN(256))
					case 4:
						bad[at+j] = "line of text, "[j%14]
					}
				}
			}
			lines, p := tryLines(t, bad)
			before := 0
			for before < len(ends) && ends[before] <= int64(at) {
				before++
			}
			if len(lines) < before {
				t.Fatalf("case %d at %d: %d parts, %d were before it", i%5, at, len(lines), before)
			}
			for k := range before {
				if lines[k] != want[k] {
					t.Fatalf("case %d at %d: part %d is %s, want %s", i%5, at, k, lines[k], want[k])
				}
			}
			// What is delivered behind the damage must be of the file, but for
			// results that were left out with the bytes.
			real := map[string]bool{}
			for _, w := range want {
				real[w] = true
			}
			wrong := 0
			for _, l := range lines {
				if !real[l] {
					wrong++
				}
			}
			if i%5 != 1 && wrong > m.sites+1 {
				t.Errorf("case %d at %d, %d bytes: %d parts that are not of the file; %v", i%5, at, n, wrong, p.Damages())
			}
			after := 0
			for _, e := range ends {
				if e > int64(at+n+2000) {
					after++
				}
			}
			if i%5 != 1 && len(lines) < before+after-m.sites {
				t.Errorf("case %d at %d, %d bytes: %d parts, %d before and %d well behind: %v", i%5, at, n, len(lines), before, after, p.Damages())
			}
		}
	}
}

// Whatever the length field of a record says, the record itself tells its
// length: nothing is lost.
func TestWrongLengths(t *testing.T) {
	for _, m := range damageFiles {
		file := m.bytes(t)
		want, _ := tryLines(t, file)
		r := NewReader(bytes.NewReader(file))
		n := 0
		for r.Scan() {
			if n++; n < 5 || n%7 != 0 || r.Record().Kind() == KindMIR {
				continue
			}
			at := r.Offset()
			for _, change := range []struct{ lo, hi byte }{{0, 0x40}, {0x11, 0}, {0, 1}, {0xff, 0}} {
				bad := bytes.Clone(file)
				if m.order == BigEndian {
					change.lo, change.hi = change.hi, change.lo
				}
				bad[at] ^= change.lo
				bad[at+1] ^= change.hi
				lines, p := tryLines(t, bad)
				if len(lines) < len(want) {
					t.Errorf("%v at %d, length changed by %02x %02x: %d parts of %d: %v", r.Record().Kind(), at, change.lo, change.hi, len(lines), len(want), p.Damages())
				}
				if len(p.Damages()) == 0 {
					t.Errorf("%v at %d: nothing is said", r.Record().Kind(), at)
				}
			}
		}
	}
}
