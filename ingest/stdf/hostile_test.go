package stdf

import (
	"bytes"
	"fmt"
	"runtime"
	"strings"
	"testing"
)

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
