package stdf

import (
	"bytes"
	"errors"
	"fmt"
	"io"
	"strings"
	"testing"
	"testing/iotest"

	"github.com/klauspost/compress/gzip"
	"github.com/klauspost/compress/zstd"
)

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

// Input that cannot be read is an error, not damage; what came before it counts.
func TestReadError(t *testing.T) {
	file := madeFile{wafers: 1, parts: 50, sites: 2}.bytes(t)
	broken := errors.New("the drive is gone")
	for name, in := range map[string]io.Reader{
		"plain": io.MultiReader(bytes.NewReader(file[:len(file)/2]), iotest.ErrReader(broken)),
		"gzip":  io.MultiReader(bytes.NewReader(packed(t, file)["gzip"][:1000]), iotest.ErrReader(broken)),
		"zstd":  io.MultiReader(bytes.NewReader(packed(t, file)["zstd"][:1000]), iotest.ErrReader(broken)),
		"start": iotest.ErrReader(broken),
		"small": io.MultiReader(bytes.NewReader(file[:3000]), iotest.ErrReader(broken)),
		"label": io.MultiReader(bytes.NewReader(append([]byte("label"), file[:3000]...)), iotest.ErrReader(broken)),
	} {
		p := NewParts(NewReader(in))
		n := 0
		for p.Scan() {
			n++
		}
		if !errors.Is(p.Err(), broken) {
			t.Errorf("%s: error %v", name, p.Err())
		}
		if name == "plain" && n < 20 || name == "small" && n < 2 || name == "label" && n < 2 {
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
