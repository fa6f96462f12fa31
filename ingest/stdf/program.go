package stdf

import (
	"bytes"
	"encoding/binary"
	"math"
	"math/bits"
)

// Testers run the same tests in the same order on part after part, and their
// records differ in nothing but the result. This file takes such parts from the
// window with a few comparisons a record. Whatever is out of the ordinary ends
// that, at the start of its record, and goes the way of all records.

// Reading is a result whose place in the program tells its test. It was judged
// by the test's default limits and is to be used; see Usable.
type Reading struct {
	Raw  float32 // as in Result
	Flag TestFlag
	Parm ParmFlag
}

// program is the tests of a part in their order, which never change, with what
// their records look like.
type program struct {
	run   int // of the Reader: defaults hold within one
	tests []int32
	steps []step
}

// step is a test of a program.
type step struct {
	lead  uint64 // how its records start: header and TEST_NUM
	size  int    // of their bodies
	test  *Test
	tail  []byte // what stands behind RESULT
	which int16  // of the test's limits, its default as long as the program holds
}

const (
	// maxSteps bounds a program. What a part has beyond it is in its Results.
	maxSteps = 1 << 12
	// notPlain are the flags of a result that is not to be used, TEST_FLG and
	// PARM_FLG in the upper half.
	notPlain = uint32(Alarm|ResultInvalid|Unreliable|Timeout|NotExecuted|Aborted)<<16 | uint32(ScaleError|DriftError|Oscillation)<<24
)

// quick takes records as long as they are as usual, and says whether one has
// ended a part.
func (p *Parts) quick() bool {
	r := p.r
	if p.careful || r.c.vax || p.gaps != r.gaps {
		return false
	}
	for {
		p.quickPTRs()
		b := r.buf[r.pos:r.end]
		if len(b) < 4 {
			return false
		}
		h := parseHeader(b, r.c.big)
		whole := 4 + h.size
		if whole+4 > len(b) || !r.likely(parseHeader(b[whole:], r.c.big)) {
			return false
		}
		switch {
		case h.kind == KindPIR && h.size == 2:
			r.pir = PIR{b[4], b[5]}
			r.advance(KindPIR, 2)
			r.shapes[KindPIR] = 1
			p.begin(&r.pir)
		case h.kind == KindPRR && h.size >= 17 && r.prr.read(&r.c, b[4:whole]) == exact:
			r.advance(KindPRR, h.size)
			r.shapes[KindPRR] = r.shape(KindPRR)
			p.end(&r.prr)
			return true
		default:
			return false
		}
	}
}

// quickPTRs takes the PTRs that are the next of their parts' program.
func (p *Parts) quickPTRs() {
	r, s := p.r, p.last
	b, at, before, n, big := r.buf[:r.end], r.pos, 0, int64(0), r.c.big
	var step *step
	for at+16+4 <= len(b) {
		rec := b[at : at+16+4]
		lead := binary.LittleEndian.Uint64(rec)
		// Where the next record starts is taken from the header itself, so that the
		// processor need not wait for all that follows to go on.
		size := int(uint16(lead))
		if big {
			size = int(bits.ReverseBytes16(uint16(lead)))
		}
		next := at + 4 + size
		if size < 12 || next+4 > len(b) {
			break
		}
		place := binary.LittleEndian.Uint32(rec[8:]) // HEAD_NUM, SITE_NUM, TEST_FLG, PARM_FLG
		if s == nil || s.place != uint16(place) {
			if s = p.turn(s, uint16(place)); s == nil {
				break
			}
		}
		if s.due < 0 || place&notPlain != 0 {
			break
		}
		x := &s.steps[s.due]
		if x.lead != lead || size > 12 && string(x.tail) != string(b[at+16:next]) {
			break
		}
		if binary.LittleEndian.Uint32(b[next:]) != uint32(lead) && !r.likely(parseHeader(b[next:], big)) {
			break
		}
		raw := binary.LittleEndian.Uint32(rec[12:])
		if big {
			raw = bits.ReverseBytes32(raw)
		}
		s.read(Reading{math.Float32frombits(raw), TestFlag(place >> 16), ParmFlag(place >> 24)})
		step = x
		step.test.Records++
		step.test.size = size
		n++
		before, at = at, next
	}
	if n > 0 {
		p.last, r.pos, r.tests.last = s, at, step.test
		r.at = r.base + int64(before)
		r.counts[KindPTR] += n
	}
}

// read takes the reading that is due.
func (s *slot) read(m Reading) {
	s.plain = append(s.plain, m)
	if s.due++; s.due == len(s.steps) {
		s.due = -1
	}
}

// add takes a result that the program does not foresee. All that come after are such,
// as readings stand before results.
func (s *slot) add(x Result) {
	s.results = append(s.results, x)
	s.due = -1
}

// turn is the slot of a site if a part is open there that goes by a program, else
// nil. Sites take turns, so that of the last time is tried first.
func (p *Parts) turn(last *slot, place uint16) *slot {
	if last != nil && last.after != nil && last.after.place == place {
		return last.after
	}
	h := p.heads[uint8(place)]
	if h == nil || h[place>>8] == nil {
		return nil
	}
	s := h[place>>8]
	if last != nil {
		last.after = s
	}
	return s
}

// follow sets a part that begins to go by the program.
func (p *Parts) follow(s *slot) {
	if p.program != nil && p.program.run == p.r.run {
		s.program, s.steps, s.due = p.program, p.program.steps, 0
	}
}

// learn makes a program of the tests of a part that ended, when it went further
// than the one there is. Parts that take turns in their tests are not followed
// each time.
func (p *Parts) learn(s *slot) {
	last := p.program
	if p.careful || last != nil && last.run == p.r.run && s.program != last || p.learned > 8+p.number/256 {
		return
	}
	more := p.steps(s)
	if more == 0 {
		return
	}
	p.learned++
	g := &program{run: p.r.run}
	add := func(t *Test) {
		g.tests = append(g.tests, int32(t.Index))
		x := step{test: t, which: int16(t.Default)}
		x.look(p.r.c.big)
		g.steps = append(g.steps, x)
	}
	for i := range s.plain {
		add(s.program.steps[i].test)
	}
	for _, x := range s.results[:more] {
		add(p.r.tests.list[x.Test])
	}
	p.program = g
}

// steps counts the results of a part that could be steps of a program.
func (p *Parts) steps(s *slot) (n int) {
	for i := range s.plain {
		s.program.steps[i].test.part = p.number
	}
	for i := range s.results[:min(len(s.results), maxSteps-len(s.plain))] {
		t := p.r.tests.list[s.results[i].Test]
		if t.part == p.number || t.Kind != KindPTR || !t.tail.known || t.tail.run != p.r.run || t.tail.which != t.Default {
			break
		}
		t.part = p.number
		n++
	}
	return n
}

// look takes over what the last record of the step's test looked like, of those
// that were judged by the defaults.
func (x *step) look(big bool) {
	tail := x.test.tail.raw
	if x.size == 12+len(tail) && bytes.Equal(x.tail, tail) {
		return
	}
	x.size, x.tail = 12+len(tail), append(x.tail[:0], tail...)
	c := coder{big: big, out: make([]byte, 0, 8)}
	c.putU2(uint16(x.size))
	c.out = append(c.out, forms[KindPTR].typ, forms[KindPTR].sub)
	c.putU4(x.test.Number)
	x.lead = binary.LittleEndian.Uint64(c.out)
}

// expected takes a PTR that went the way of all records, and yet is the next of its
// part's program; else it is false.
func (p *Parts) expected(s *slot, m *PTR) bool {
	k, t := s.due, m.Test
	if k < 0 || s.steps[k].test != t || m.which != t.Default || !Usable(m.Flag, m.Parm) {
		return false
	}
	s.read(Reading{m.Result, m.Flag, m.Parm})
	if t.tail.known && t.tail.run == p.r.run && t.tail.which == t.Default {
		s.steps[k].look(p.r.c.big)
	}
	return true
}

// result is reading k of a program as a result.
func (g *program) result(k int, m Reading) Result {
	x := &g.steps[k]
	return Result{int32(x.test.Index), m.Raw, x.which, 0, m.Flag, m.Parm}
}

// stop ends the program, as a test has other defaults from here on. What was read
// by it stays.
func (p *Parts) stop() {
	p.moved, p.program = p.r.moved, nil
	for _, s := range p.open {
		s.due = -1
	}
}

// all adds the readings and results of a part to a list.
func (s *slot) all(list []Result) []Result {
	for k, m := range s.plain {
		list = append(list, s.program.result(k, m))
	}
	return append(list, s.results...)
}

// number is how many results a part has.
func (s *slot) number() int { return len(s.plain) + len(s.results) }

// drop takes all that a part has from it, and its program.
func (s *slot) drop() {
	s.plain, s.results = s.plain[:0], s.results[:0]
	s.program, s.steps, s.due = nil, nil, -1
}
