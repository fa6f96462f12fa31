package stdf

import (
	"encoding/binary"
	"math"
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

// program is the tests of a part in their order, with what their records look
// like. It is never changed.
type program struct {
	run   int // of the Reader: defaults hold within one
	tests []int32
	steps []step
}

// step is a test of a program.
type step struct {
	lead uint64 // how its records start: header and TEST_NUM
	size int    // of their bodies
	test *Test
	tail []byte // what stands behind RESULT
}

const (
	// maxSteps bounds a program. What a part has beyond it is in its Results.
	maxSteps = 1 << 12
	// notPlain are flags, as bits of TEST_FLG and PARM_FLG, of a result that is
	// not to be used.
	notPlain = uint32(Alarm|ResultInvalid|Unreliable|Timeout|NotExecuted|Aborted) | uint32(ScaleError|DriftError|Oscillation)<<8
)

// quick takes records as long as they are as usual, and says whether one has
// ended a part.
func (p *Parts) quick() bool {
	r := p.r
	if r.c.vax || p.gaps != r.gaps {
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
		if h.kind != KindPIR && h.kind != KindPRR || whole+4 > len(b) || !r.likely(parseHeader(b[whole:], r.c.big)) ||
			r.read(h.kind, b[4:whole]) != exact {
			return false
		}
		r.deliver(h)
		if h.kind == KindPRR {
			p.end(&r.prr)
			return true
		}
		p.begin(&r.pir)
	}
}

// quickPTRs takes the PTRs that are the next of their part's program.
func (p *Parts) quickPTRs() {
	r, s := p.r, p.last
	b, at, n := r.buf[:r.end], r.pos, int64(0)
	var last *Test
	for at+16+4 <= len(b) {
		lead, place, flags := binary.LittleEndian.Uint64(b[at:]), binary.LittleEndian.Uint16(b[at+8:]), binary.LittleEndian.Uint16(b[at+10:])
		if s == nil || s.place != place {
			if s = p.opened(b[at+8], b[at+9]); s == nil {
				break
			}
		}
		k := len(s.plain)
		if k >= len(s.steps) || len(s.results) > 0 || uint32(flags)&notPlain != 0 {
			break
		}
		step := &s.steps[k]
		next := at + 4 + step.size
		if step.lead != lead || next+4 > len(b) || len(step.tail) > 0 && string(step.tail) != string(b[at+16:next]) {
			break
		}
		if binary.LittleEndian.Uint32(b[next:]) != uint32(lead) && !r.likely(parseHeader(b[next:], r.c.big)) {
			break
		}
		s.plain = append(s.plain, Reading{math.Float32frombits(u4(b[at+12:], r.c.big)), TestFlag(flags), ParmFlag(flags >> 8)})
		last = step.test
		last.Records++
		last.size = step.size
		n++
		r.at = r.base + int64(at)
		at = next
	}
	if n > 0 {
		p.last, r.pos, r.tests.last = s, at, last
		r.counts[KindPTR] += n
	}
}

// opened is the slot of a site if a part is open there that goes by a program.
func (p *Parts) opened(head, site uint8) *slot {
	if h := p.heads[head]; h != nil && h[site] != nil && h[site].isOpen && h[site].steps != nil {
		return h[site]
	}
	return nil
}

// follow sets a part that begins to go by the program.
func (p *Parts) follow(s *slot) {
	if s.program = p.program; s.program != nil && s.program.run == p.r.run {
		s.steps = s.program.steps
	} else {
		s.program, s.steps = nil, nil
	}
}

// learn makes a program of the tests of a part that ended, when it went further
// than the one there is. Parts that take turns in their tests are not followed
// each time.
func (p *Parts) learn(s *slot) {
	last := p.program
	if last != nil && last.run == p.r.run && s.program != last || p.learned > 8+p.number/256 {
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
		g.steps = append(g.steps, p.stepOf(t))
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

// stepOf says what the records of a test look like. Whether the test had a
// record of that kind in this run, learn has looked.
func (p *Parts) stepOf(t *Test) step {
	tail := t.tail.raw
	c := coder{big: p.r.c.big}
	c.putU2(uint16(12 + len(tail)))
	c.out = append(c.out, forms[KindPTR].typ, forms[KindPTR].sub)
	c.putU4(t.Number)
	return step{lead: binary.LittleEndian.Uint64(c.out), size: 12 + len(tail), test: t, tail: append([]byte(nil), tail...)}
}

// result is reading k of a program as a result.
func (g *program) result(k int, m Reading) Result {
	t := g.steps[k].test
	return Result{int32(t.Index), m.Raw, int16(t.Default), 0, m.Flag, m.Parm}
}

// spill puts the readings of a part among its results, as the program no longer
// holds.
func (s *slot) spill() {
	if len(s.plain) > 0 {
		s.results = s.all(nil)
	}
	s.plain, s.program, s.steps = s.plain[:0], nil, nil
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

// drop takes all that a part has from it.
func (s *slot) drop() { s.plain, s.results, s.steps = s.plain[:0], s.results[:0], nil }
