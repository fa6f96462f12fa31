package stdf

import (
	"bytes"
	"errors"
	"fmt"
	"io"
	"math/rand/v2"
	"runtime"
	"strings"
	"testing"
	"testing/iotest"

	"github.com/klauspost/compress/gzip"
	"github.com/klauspost/compress/zstd"
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

// Odd starts: each is read, and said; what is no STDF is refused with a reason.
func TestStarts(t *testing.T) {
	little := madeFile{wafers: 1, parts: 9, sites: 3}.bytes(t)
	big := madeFile{wafers: 1, parts: 9, sites: 3, order: BigEndian}.bytes(t)
	put := func(file []byte, at int, b ...byte) []byte {
		return append(append(bytes.Clone(file[:at]), b...), file[at+len(b):]...)
	}
	for _, c := range []struct {
		name  string
		file  []byte
		parts int
		kinds string
		err   string
	}{
		{"sound", little, 9, "", ""},
		{"sound, big-endian", big, 9, "", ""},
		{"CPU type of the other order", put(little, 4, 1), 9, "odd-start", ""},
		{"CPU type of the other order, big-endian", put(big, 4, 2), 9, "odd-start", ""},
		{"CPU type of the maker's own", put(little, 4, 200), 9, "odd-start", ""},
		{"CPU type 0 with IEEE floats", put(little, 4, 0), 9, "odd-start", ""},
		{"version 5", put(big, 5, 5), 9, "odd-start", ""},
		{"length of the other order", put(little, 0, 0, 2), 9, "odd-start", ""},
		{"no FAR", little[6:], 9, "odd-start", ""},
		{"no FAR, big-endian", big[6:], 9, "odd-start", ""},
		{"FAR overwritten", put(little, 0, 'g', 'a', 'r', 'b', 'l', 'e'), 9, "odd-start", ""},
		{"a label before it", append([]byte("VOL1 a label of the tape  "), big...), 9, "odd-start", ""},
		{"padding behind it", append(bytes.Clone(little), make([]byte, 1000)...), 9, "padding", ""},
		{"version 3", put(little, 5, 3), 0, "", "STDF version 3"},
		{"empty", nil, 0, "", "the file is empty"},
		{"two bytes", little[:2], 0, "", "no STDF records"},
		{"cut in its FAR", little[:5], 0, "cut-short", ""},
		{"only a FAR", little[:6], 0, "", ""},
		{"text", []byte(strings.Repeat("LOT,WAFER,DIE_X,DIE_Y,HBIN\nL7,1,2,3,1\n", 5000)), 0, "", "no STDF records"},
		{"zeros", make([]byte, 100_000), 0, "", "no STDF records"},
		{"sent as text", bytes.ReplaceAll(little, []byte{10}, []byte{13, 10}), 0, "", "transfer in text mode"},
	} {
		lines, p := tryLines(t, c.file)
		if len(lines) != c.parts || kindsOf(p) != c.kinds {
			t.Errorf("%s: %d parts, damages %v, want %d, %s", c.name, len(lines), p.Damages(), c.parts, c.kinds)
		}
		switch err := p.Err(); {
		case err == nil && c.err != "", err != nil && (c.err == "" || !strings.Contains(err.Error(), c.err)):
			t.Errorf("%s: error %v, want %q", c.name, err, c.err)
		case err != nil:
			var format *FormatError
			if !errors.As(err, &format) || format.Remedy == "" {
				t.Errorf("%s: error %#v", c.name, err)
			}
		}
	}
}

// CPU type 0 means VAX floats, when they are.
func TestVAXFile(t *testing.T) {
	file := bytes.Clone(write(t, LittleEndian, &MIR{}, pir(1), res(1, "A", 1), res(1, "B", -0.5), res(1, "C", 0), prr(1, "p"), &MRR{}))
	file[4] = 0
	for ieee, vax := range map[string]string{"\x00\x00\x80\x3f": "\x80\x40\x00\x00", "\x00\x00\x00\xbf": "\x00\xc0\x00\x00"} {
		file = bytes.Replace(file, []byte(ieee), []byte(vax), 1)
	}
	lines, p := tryLines(t, file)
	if len(lines) != 1 || !strings.HasSuffix(lines[0], " 65.0=1 66.0=-0.5 67.0=0") || len(p.Damages()) > 0 {
		t.Errorf("%v, %v", lines, p.Damages())
	}
}

// Records of types that are not delivered are passed over and counted, and do
// not upset what is around them; so are bytes that a maker adds to records.
func TestMakersOwn(t *testing.T) {
	var file []byte
	add := func(b ...byte) { file = append(file, b...) }
	own := func(typ, sub byte, n int) {
		add(byte(n), byte(n>>8), typ, sub)
		add(bytes.Repeat([]byte{0x5a}, n)...)
	}
	add(farBytes(false)...)
	own(180, 1, 300) // before all
	own(180, 2, 0)
	own(181, 7, 70)
	add(write(t, LittleEndian, &MIR{LotID: "L"})[6:]...)
	own(1, 63, 9) // PLR: known, not delivered
	for i := range 50 {
		add(5, 0, 5, 10, 1, 1, 9, 9, 9) // PIR with three bytes of the maker's own
		own(180, 1, 17)
		add(write(t, LittleEndian, res(1, "A", float32(i)))[6:]...)
		own(180, 3, 40)
		own(180, 3, 41)
		own(180, 4, 1)
		add(write(t, LittleEndian, prr(1, "p"))[6:]...)
	}
	add(write(t, LittleEndian, &MRR{})[6:]...)
	own(180, 9, 5)
	lines, p := tryLines(t, file)
	if len(lines) != 50 || p.Orphans() != 0 {
		t.Errorf("%d parts, %d orphans: %v", len(lines), p.Orphans(), p.Damages())
	}
	for i, l := range lines {
		if !strings.HasSuffix(l, fmt.Sprintf(" 65.0=%d", i)) {
			t.Fatalf("part %d: %s", i, l)
		}
	}
	if got := kindsOf(p); strings.ReplaceAll(got, "odd-record", "") != strings.Repeat(" ", strings.Count(got, "odd-record")-1) {
		t.Errorf("damages %v", p.Damages())
	}
	var got []string
	for _, s := range p.Reader().Skipped() {
		got = append(got, fmt.Sprintf("%d,%d %s x%d %d bytes from %d", s.Type, s.Sub, s.Name, s.Records, s.Bytes, s.First))
	}
	want := []string{"1,63 PLR x1", "180,1 ? x51", "180,2 ? x1", "180,3 ? x100", "180,4 ? x50", "180,9 ? x1", "181,7 ? x1"}
	if len(got) != len(want) {
		t.Fatalf("skipped %q", got)
	}
	for i := range want {
		if !strings.HasPrefix(got[i], want[i]+" ") {
			t.Errorf("skipped %s, want %s", got[i], want[i])
		}
	}
	if got[1] != "180,1 ? x51 1354 bytes from 6" { // 304 + 50 x 21
		t.Errorf("skipped %s", got[1])
	}
}

func packed(t testing.TB, file []byte) map[string][]byte {
	t.Helper()
	var gz, zst bytes.Buffer
	g := gzip.NewWriter(&gz)
	g.Write(file)
	z, err := zstd.NewWriter(&zst)
	if err != nil {
		t.Fatal(err)
	}
	z.Write(file)
	if err := errors.Join(g.Close(), z.Close()); err != nil {
		t.Fatal(err)
	}
	return map[string][]byte{"gzip": gz.Bytes(), "zstd": zst.Bytes()}
}

func TestPacked(t *testing.T) {
	file := madeFile{wafers: 3, parts: 400, sites: 2}.bytes(t)
	want, _ := tryLines(t, file)
	for name, z := range packed(t, file) {
		for _, form := range []struct {
			name string
			in   io.Reader
		}{{"whole", bytes.NewReader(z)}, {"byte by byte", iotest.OneByteReader(bytes.NewReader(z))}, {"with EOF", iotest.DataErrReader(bytes.NewReader(z))}} {
			p := NewParts(NewReader(form.in))
			n := 0
			for p.Scan() {
				if l := resultLine(p, p.Part()); !strings.HasSuffix(want[n], " "+l) {
					t.Fatalf("%s %s: part %d is %s, want %s", name, form.name, n, l, want[n])
				}
				n++
			}
			if p.Err() != nil || len(p.Damages()) > 0 || n != len(want) {
				t.Errorf("%s %s: %d parts, %v, %v", name, form.name, n, p.Err(), p.Damages())
			}
		}
		// Cut and damaged: what could be unpacked is kept.
		for i := range 40 {
			bad := z[:len(z)*i/40]
			if i%2 == 1 {
				bad = bytes.Clone(z)
				bad[len(z)*i/40] ^= 0x55
			}
			p := NewParts(NewReader(bytes.NewReader(bad)))
			n := 0
			for p.Scan() {
				if l := resultLine(p, p.Part()); i%2 == 0 && !strings.HasSuffix(want[n], " "+l) {
					t.Fatalf("%s cut: part %d is %s, want %s", name, n, l, want[n])
				}
				n++
			}
			var format *FormatError
			if err := p.Err(); err != nil && !errors.As(err, &format) {
				t.Errorf("%s %d: %v", name, i, err)
			} else if err == nil && len(p.Damages()) == 0 {
				t.Errorf("%s %d: %d parts, and nothing is said", name, i, n)
			}
			if i == 38 && (n < len(want)/4 || !strings.Contains(kindsOf(p), "unpacking")) {
				t.Errorf("%s cut near its end: %d parts of %d, %v", name, n, len(want), p.Damages())
			}
		}
	}
}

// A zstd frame may ask for a window of gigabytes: what is given is bounded by
// the size of a small file.
func TestHostileZstdWindow(t *testing.T) {
	body := write(t, LittleEndian, &MIR{}, pir(1), prr(1, "p"), &MRR{})
	for window, parts := range map[byte]int{0x40: 1, 0x60: 1, 0x88: 0, 0xf8: 0} { // 2^18, 2^22, 2^27, 2^41 (RFC 8878, 3.1.1.1.2)
		// magic; no checksum, no size; window; one raw block, the last
		n := len(body)<<3 | 1
		frame := append([]byte{0x28, 0xb5, 0x2f, 0xfd, 0, window, byte(n), byte(n >> 8), byte(n >> 16)}, body...)
		var p *Parts
		var lines []string
		if n := allocated(func() { lines, p = tryLines(t, frame) }); n > 20<<20 {
			t.Errorf("window %02x: %d bytes allocated", window, n)
		}
		if len(lines) != parts || (p.Err() == nil) != (parts == 1) {
			t.Errorf("window %02x: %d parts, %v", window, len(lines), p.Err())
		}
		if err := p.Err(); err != nil && !strings.Contains(err.Error(), "zstd data cannot be unpacked") {
			t.Errorf("window %02x: %v", window, err)
		}
	}
}

// Input that cannot be read is an error, not damage; what came before it counts.
func TestReadError(t *testing.T) {
	file := madeFile{wafers: 1, parts: 50, sites: 2}.bytes(t)
	broken := errors.New("the drive is gone")
	for name, in := range map[string]io.Reader{
		"plain": io.MultiReader(bytes.NewReader(file[:len(file)/2]), iotest.ErrReader(broken)),
		"gzip":  io.MultiReader(bytes.NewReader(packed(t, file)["gzip"][:1000]), iotest.ErrReader(broken)),
		"zstd":  io.MultiReader(bytes.NewReader(packed(t, file)["zstd"][:1000]), iotest.ErrReader(broken)),
		"start": iotest.ErrReader(broken),
	} {
		p := NewParts(NewReader(in))
		n := 0
		for p.Scan() {
			n++
		}
		if !errors.Is(p.Err(), broken) {
			t.Errorf("%s: error %v", name, p.Err())
		}
		if name == "plain" && n < 20 {
			t.Errorf("%s: %d parts", name, n)
		}
		for _, d := range p.Damages() {
			if d.Kind == DamageCut || d.Kind == DamageUnpacking {
				t.Errorf("%s: %+v", name, d)
			}
		}
	}
}

// The same records come out however the input is served.
func TestServedInPieces(t *testing.T) {
	file := madeFile{wafers: 2, parts: 50, sites: 3, seed: 9}.bytes(t)
	file[3000] ^= 0x77
	file[9000] ^= 0x11
	want, p := tryLines(t, file)
	for name, in := range map[string]io.Reader{
		"bytes": iotest.OneByteReader(bytes.NewReader(file)), "halves": iotest.HalfReader(bytes.NewReader(file)),
		"EOF with data": iotest.DataErrReader(bytes.NewReader(file)),
	} {
		q := NewParts(NewReader(in))
		n := 0
		for q.Scan() {
			if l := resultLine(q, q.Part()); !strings.HasSuffix(want[n], " "+l) {
				t.Fatalf("%s: part %d is %s, want %s", name, n, l, want[n])
			}
			n++
		}
		if n != len(want) || fmt.Sprint(q.Damages()) != fmt.Sprint(p.Damages()) {
			t.Errorf("%s: %d parts, want %d; %v, want %v", name, n, len(want), q.Damages(), p.Damages())
		}
	}
	stuck := NewReader(stuckReader{})
	if stuck.Scan() || !errors.Is(stuck.Err(), io.ErrNoProgress) {
		t.Errorf("a reader that gives nothing: %v", stuck.Err())
	}
}

type stuckReader struct{}

func (stuckReader) Read([]byte) (int, error) { return 0, nil }

// allocated is how many bytes f allocates in all.
func allocated(f func()) uint64 {
	var before, after runtime.MemStats
	runtime.GC()
	runtime.ReadMemStats(&before)
	f()
	runtime.ReadMemStats(&after)
	return after.TotalAlloc - before.TotalAlloc
}

// Hostile lengths and counts: no record makes the reader allocate by what it
// claims. Each file is 20 copies of a small record that claims the most.
func TestHostileCounts(t *testing.T) {
	for _, big := range []bool{false, true} {
		for name, body := range map[string]string{
			"MPR": "\x07\x00\x00\x00\x01\x01\x00\x00\xff\xff\xff\xff\x21\x43",
			"FTR": "\x07\x00\x00\x00\x01\x01\x00\x00" + strings.Repeat("\x01", 26) + "\xff\xff\xff\xff\x01\x00",
			"PGR": "\x01\x01\x01g\xff\xff\x01\x00",
			"RDR": "\xff\xff\x01\x00",
			"SDR": "\x01\x01\xff\x01",
			"GDR": "\xff\xff\x0c\xff\xff\x01",
			"DTR": "\xfftext",
			"PRR": "\x01\x01\x00\x01\x00\x01\x00\x01\x00\x01\x00\x01\x00\x01\x00\x00\x00\xffid",
			"PTR": "\x01\x00\x00\x00\x01\x01\x00\x00\x00\x00\x80\x3f\xffname",
		} {
			file := farBytes(big)
			kind := Unknown
			for k := range kinds {
				if k.String() == name {
					kind = k
				}
			}
			typ, sub := kind.Code()
			for range 20 {
				if n := byte(len(body)); big {
					file = append(file, 0, n, typ, sub)
				} else {
					file = append(file, n, 0, typ, sub)
				}
				file = append(file, body...)
			}
			file = append(file, write(t, Order(big), &MIR{}, pir(1), prr(1, "p"), &MRR{})[6:]...)
			n := allocated(func() { tryLines(t, file) })
			// The window is 128 KiB; the rest is the damages' texts.
			if n > 400<<10 {
				t.Errorf("%s: %d bytes allocated for a file of %d", name, n, len(file))
			}
			if lines, p := tryLines(t, file); len(lines) == 0 || !strings.Contains(kindsOf(p), "odd-record") {
				t.Errorf("%s: %d parts, damages %v", name, len(lines), p.Damages())
			}
		}
		// A header that claims 65,535 bytes of a file of a few.
		for k := range kinds {
			typ, sub := k.Code()
			file := append(farBytes(big), 0xff, 0xff, typ, sub, 1, 2, 3, 4)
			if n := allocated(func() { tryLines(t, file) }); n > 300<<10 {
				t.Errorf("%v: %d bytes allocated", k, n)
			}
		}
	}
}

// Floods: many tests, texts, wafers, runs and bins stay within their bounds,
// and what is left out is said.
func TestFloods(t *testing.T) {
	var recs []Record
	add := func(rec ...Record) { recs = append(recs, rec...) }
	add(&MIR{})
	for i := range maxTests + 500 {
		add(&PTR{Number: uint32(i), Head: 1, Site: 1, Result: 1})
	}
	add(prr(1, "p"))
	for i := range maxSiblings + 500 {
		add(&PTR{Number: 1, Head: 1, Site: 1, Result: 1, Text: fmt.Sprint("text ", i)})
	}
	for range maxWafers + 10 {
		add(&WIR{Head: 1})
	}
	add(prr(1, "q"))
	for range maxRuns + 10 {
		add(&MIR{}, &MRR{})
	}
	file := write(t, LittleEndian, recs...)
	p := NewParts(NewReader(bytes.NewReader(file)))
	n := 0
	for p.Scan() {
		n++
		if n == 1 && len(p.Part().Results) != maxTests {
			t.Errorf("%d results", len(p.Part().Results))
		}
	}
	counts := map[DamageKind]int64{}
	for _, c := range p.DamageCounts() {
		counts[c.Kind] = c.Count
	}
	if n != 2 || len(p.Tests()) != maxTests || len(p.Wafers()) != maxWafers || len(p.Runs()) != maxRuns {
		t.Errorf("%d parts, %d tests, %d wafers, %d runs", n, len(p.Tests()), len(p.Wafers()), len(p.Runs()))
	}
	if counts[DamageTests] != 500+maxSiblings+500-1 || counts[DamageTooMany] != 22 {
		t.Errorf("counts %v", counts)
	}
	if len(p.Damages()) > 3*keptDamages+10 {
		t.Errorf("%d damages kept", len(p.Damages()))
	}
}
