package stdf

import (
	"bytes"
	"fmt"
	"io"
	"math"
	"math/rand/v2"
	"testing"
	"testing/iotest"
)

// account tells all that can be known of a file's parts.
func account(in io.Reader, set func(*Parts)) (string, *Parts) {
	var b bytes.Buffer
	p := NewParts(NewReader(in))
	set(p)
	for p.Scan() {
		x := *p.Part()
		fmt.Fprintf(&b, "%d %d %q %d %d %d h%d s%d %d %d %d %d %x %d %d %v %v %q %q", x.Run, x.Wafer, x.WaferID, x.Number, x.Offset, x.Opened, x.Head, x.Site,
			x.HardBin, x.SoftBin, x.X, x.Y, x.Flag, x.Tests, x.TestTime, x.HasPIR, x.Damaged, x.ID(), x.Text())
		var results []Result
		for i := range x.Plain {
			results = append(results, x.PlainResult(i))
			if r := results[i]; r.Test != x.Program[i] || !Usable(r.Flag, r.Parm) {
				b.WriteString(" not plain")
			}
		}
		for _, r := range append(results, x.Results...) {
			fmt.Fprintf(&b, " %d %x %d %d %x %x", r.Test, math.Float32bits(r.Raw), r.Limits, r.Column, r.Flag, r.Parm)
		}
		fmt.Fprintf(&b, " ends %d\n", p.Reader().Position())
	}
	for _, t := range p.Tests() {
		fmt.Fprintln(&b, t.Kind, t.Number, t.Text, t.Records, t.Overridden, t.NotKept, len(t.Limits), t.Default, t.Columns, t.size)
	}
	for _, r := range p.Runs() {
		fmt.Fprintln(&b, r.Parts, r.Good, r.Retested, r.HardBins, r.SoftBins, len(r.Sites))
		for _, s := range r.Sites {
			fmt.Fprintln(&b, s.Head, s.Site, s.Parts, s.Good, s.Retested)
		}
	}
	for _, w := range p.Wafers() {
		fmt.Fprintln(&b, w.ID, w.Run, w.Parts, w.Good, w.Retested, w.Assumed)
	}
	for k := range kinds {
		fmt.Fprintln(&b, k, p.Reader().Count(k))
	}
	fmt.Fprintln(&b, p.Orphans(), p.Err(), p.Damages(), p.DamageCounts(), p.Reader().Skipped())
	return b.String(), p
}

// sameEachWay reads a file by the careful way and by the quick ones.
func sameEachWay(t *testing.T, what string, file []byte) (byProgram int) {
	t.Helper()
	want, _ := account(bytes.NewReader(file), func(p *Parts) { p.careful = true })
	for name, set := range map[string]func(*Parts){"quick": func(*Parts) {}, "compact": func(p *Parts) { p.Compact = true }} {
		got, p := account(bytes.NewReader(file), set)
		if got != want {
			t.Fatalf("%s, %s:\n%s", what, name, difference(want, got))
		}
		if p.program != nil {
			byProgram = len(p.program.steps)
		}
	}
	// Windows that end anywhere.
	if got, _ := account(iotest.HalfReader(bytes.NewReader(file)), func(p *Parts) { p.Compact = true }); got != want {
		t.Fatalf("%s, in pieces:\n%s", what, difference(want, got))
	}
	return byProgram
}

// difference gives the first line of each that the other has not.
func difference(want, got string) string {
	w, g := bytes.Split([]byte(want), []byte("\n")), bytes.Split([]byte(got), []byte("\n"))
	for i := range min(len(w), len(g)) {
		if !bytes.Equal(w[i], g[i]) {
			return fmt.Sprintf("line %d: %.600s\nwant    %.600s", i, g[i], w[i])
		}
	}
	return fmt.Sprintf("%d lines, want %d", len(g), len(w))
}

// unevenFile is one that goes by a program for the most part only: tests are
// left out or done twice, flags are set, limits change, sites come and go, a run
// follows another with other limits, a MIR stands among results.
func unevenFile(t *testing.T, rnd *rand.Rand, order Order, often float64) []byte {
	recs := []Record{&MIR{LotID: "A"}, &WIR{Head: 1, WaferID: "1"}}
	now := func() bool { return rnd.Float64() < often }
	limit := float32(5)
	tail := rnd.IntN(3)
	for touch := range 60 {
		sites := 1 + rnd.IntN(3)
		if now() {
			recs = append(recs, &MIR{LotID: fmt.Sprint("B", touch)})
			limit++
		}
		for s := range sites {
			if !now() {
				recs = append(recs, pir(uint8(s)))
			}
		}
		for i := range 6 {
			for s := range sites {
				m := &PTR{Number: uint32(100 + i), Head: 1, Site: uint8(s), Result: float32(rnd.NormFloat64())}
				if tail > 0 {
					m.Text = fmt.Sprint("test ", i)
				}
				if tail > 1 || touch == 0 && s == 0 {
					m.Text, m.Optional = fmt.Sprint("test ", i), &Optional{Present: 7, HiLimit: limit, LoLimit: -limit, Units: "V"}
				}
				if rnd.IntN(10) == 0 {
					m.Flag = Failed
				}
				if now() {
					m.Flag = TestFlag(1 << rnd.IntN(8))
				}
				if now() {
					m.Parm = ParmFlag(1 << rnd.IntN(8))
				}
				if now() {
					m.Result = [...]float32{none, float32(math.Inf(1)), 0}[rnd.IntN(3)]
				}
				if now() {
					m.Text, m.Optional = fmt.Sprint("test ", i), &Optional{Present: 7, HiLimit: 9, Units: "V"}
				}
				if now() {
					m.Text = "another text"
				}
				if now() {
					m.Site = 7
				}
				for range map[bool]int{true: rnd.IntN(3), false: 1}[now()] {
					recs = append(recs, m)
				}
				if now() {
					recs = append(recs, &FTR{Number: 900, Head: 1, Site: uint8(s), Optional: 0xff}, &DTR{Text: "a note"})
				}
			}
		}
		for s := range sites {
			m := prr(uint8(s), fmt.Sprint(touch))
			m.HardBin, m.SoftBin = uint16(rnd.IntN(3)), uint16(16*rnd.IntN(3))
			if now() {
				m.Flag = PartFlag(rnd.IntN(32))
			}
			if !now() {
				recs = append(recs, m)
			}
		}
		if now() {
			recs = append(recs, &WRR{Head: 1, WaferID: "1"}, &WIR{Head: 1, WaferID: fmt.Sprint(touch)})
		}
	}
	return write(t, order, append(recs, &WRR{Head: 1, WaferID: "1"}, &MRR{})...)
}

// The quick ways give what the careful one gives, of sound and damaged files,
// and sound ones go by them.
func TestQuickIsCareful(t *testing.T) {
	rnd := rand.New(rand.NewPCG(5, 17))
	for _, order := range []Order{LittleEndian, BigEndian} {
		for _, m := range []madeFile{{leaveOut: true}, {textOnly: true}, {plainOnly: true}, {plainOnly: true, leaveOut: true, sites: 1}} {
			m.order, m.wafers, m.parts, m.sites = order, 2, 30, max(m.sites, 3)
			file := m.bytes(t)
			if n := sameEachWay(t, fmt.Sprintf("%+v", m), file); n < len(madeTests) {
				t.Errorf("%+v: the program has %d steps", m, n)
			}
			for range 12 {
				bad := bytes.Clone(file)
				for range 1 + rnd.IntN(3) {
					bad[rnd.IntN(len(bad))] ^= 1 << rnd.IntN(8)
				}
				sameEachWay(t, "flipped", bad[:len(bad)-rnd.IntN(2)*rnd.IntN(len(bad)/2)])
			}
		}
		for i, often := range []float64{0, 0.001, 0.003, 0.01, 0.05, 0.2} {
			for range 8 {
				file := unevenFile(t, rnd, order, often)
				if n := sameEachWay(t, fmt.Sprint("uneven ", often), file); i == 0 && n != 6 {
					t.Errorf("the program has %d steps", n)
				}
				file[rnd.IntN(len(file))] ^= 0x40
				sameEachWay(t, "uneven and flipped", file)
			}
		}
	}
}
