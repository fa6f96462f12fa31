package stdf

import (
	"bytes"
	"math"
	"slices"
)

// What a result means beyond its own bytes: whose test it is, and which unit
// and limits hold for it. This happens when it is sure that the record is one.

// test finds the test of a result and counts it.
func (r *Reader) test(k Kind, number uint32, text []byte) *Test {
	t := r.tests.find(k, number, text)
	t.Records++
	if t.Index < 0 {
		r.damages.add(r.at, DamageTests, 0, "test %d: there are too many tests, or too many texts for one number; its results are left out", number)
	}
	return t
}

// recordText is the text of a record as a string, without making a new one
// each time.
func recordText(t *Test, raw []byte, c *coder) string {
	if len(raw) == 0 {
		return ""
	}
	if t.Index >= 0 {
		return t.text
	}
	return c.strings.get(raw)
}

// quickPTR delivers a PTR that is like one before: of the test that is due, with
// an optional part that it remembers or none. Such a one needs no further look.
func (r *Reader) quickPTR(body []byte) bool {
	m := &r.ptr
	if len(body) < 12 || !m.cut(&r.c, body) || len(m.alarmRaw) > 0 {
		return r.plainPTR(body)
	}
	t := r.tests.due(KindPTR, m.Number, m.textRaw)
	if t == nil {
		return r.plainPTR(body)
	}
	m.Optional, m.limits, m.which = nil, t.Limits[t.Default], t.Default
	if len(m.optRaw) > 0 {
		s := t.recall(m.optRaw, r.run)
		if s == nil {
			return r.plainPTR(body)
		}
		m.Optional, m.limits, m.which = &s.opt, s.limits, s.which
		if m.which != t.Default {
			t.override(m.which)
		}
	}
	r.tests.last = t
	r.advance(KindPTR, len(body))
	m.Test, m.Text, m.Alarm = t, "", ""
	if len(m.textRaw) > 0 {
		m.Text = t.text
	}
	t.size = len(body)
	t.Records++
	if m.which == t.Default && !(t.tail.known && t.tail.run == r.run && t.tail.which == m.which && bytes.Equal(t.tail.raw, body[12:])) {
		t.tail = ptrTail{append(t.tail.raw[:0], body[12:]...), r.run, m.which, true}
	}
	return true
}

// plainRun delivers the PTRs that follow, as long as each is like one of its test
// before but for its result: those that quickPTR would take, without a word on
// each. It may stop at any record, and leaves that to Scan.
func (r *Reader) plainRun(p *Parts) {
	if r.c.vax {
		return
	}
	for {
		b := r.buf[r.pos:r.end]
		if len(b) < 4+12+4 {
			return
		}
		h := parseHeader(b, r.c.big)
		whole := 4 + h.size
		if h.kind != KindPTR || h.size < 12 || whole+4 > len(b) || !r.likely(parseHeader(b[whole:], r.c.big)) {
			return
		}
		body := b[4:whole]
		number, last := u4(body, r.c.big), r.tests.last
		if last == nil {
			return
		}
		t := last.next
		if t == nil || t.Number != number {
			t = last
		}
		flag := TestFlag(body[6])
		if t.Number != number || t.Kind != KindPTR || t.Index < 0 || flag&NotExecuted != 0 || !t.tail.known || t.tail.run != r.run || t.tail.which != t.Default ||
			!bytes.Equal(t.tail.raw, body[12:]) {
			return
		}
		s := p.last
		if s == nil || s.head != body[4] || s.site != body[5] || !s.isOpen {
			if s = p.slot(body[4], body[5]); !s.isOpen {
				return // its first result opens a part; see Parts.at
			}
			p.last = s
		}
		if s.due >= 0 {
			return // see Parts.quick
		}
		r.tests.last = t
		r.at = r.offset()
		r.pos += whole
		r.counts[KindPTR]++
		t.size = h.size
		t.Records++
		s.add(Result{int32(t.Index), math.Float32frombits(u4(body[8:], r.c.big)), int16(t.Default), 0, flag, ParmFlag(body[7])})
	}
}

// plainPTR delivers any PTR whose fields fit.
func (r *Reader) plainPTR(body []byte) bool {
	if r.read(KindPTR, body) != exact {
		return false
	}
	r.advance(KindPTR, len(body))
	r.settlePTR(len(body))
	return true
}

// settlePTR finds the test of a PTR and what limits hold for it.
func (r *Reader) settlePTR(size int) {
	m := &r.ptr
	t := r.test(KindPTR, m.Number, m.textRaw)
	t.size = size
	m.Test = t
	m.Text = recordText(t, m.textRaw, &r.c)
	m.Alarm = r.c.strings.get(m.alarmRaw)
	m.Optional, m.limits, m.which = nil, t.Limits[t.Default], t.Default
	if len(m.optRaw) == 0 {
		return
	}
	s := t.recall(m.optRaw, r.run)
	if s == nil {
		s = r.learn(t, m.optRaw)
	}
	m.Optional, m.limits, m.which = &s.opt, s.limits, s.which
	if m.which != t.Default {
		t.override(m.which)
	}
}

// learn reads an optional part that the test does not remember.
func (r *Reader) learn(t *Test, raw []byte) *seen {
	s := t.place()
	r.c.read(raw)
	s.opt.layout(&r.c)
	own := s.opt.ownPTR()
	s.raw = append(s.raw[:0], raw...)
	if s.limits, s.which = r.settle(t, &own); s.which < 0 {
		s.own = *s.limits
		s.limits = &s.own
	}
	return s
}

// settle is Test.settle, for tests beyond the bounds too, which have no
// defaults. Limits that the test does not keep are copied out of the way of
// the next record.
func (r *Reader) settle(t *Test, own *Limits) (*Limits, int) {
	if t.Index < 0 {
		r.scratch = noLimits
		r.scratch.take(own, own.has)
		return &r.scratch, -1
	}
	was := t.Default
	l, which := t.settle(own, r.run, &r.scratch)
	if t.Default != was {
		r.moved++
	}
	return l, which
}

func (t *Test) override(which int) {
	t.Overridden++
	if which < 0 {
		t.NotKept++
	}
}

// settleMPR finds the test of an MPR and what limits hold for it.
func (r *Reader) settleMPR() {
	m := &r.mpr
	t := r.test(KindMPR, m.Number, m.textRaw)
	m.Test = t
	m.Text = recordText(t, m.textRaw, &r.c)
	t.Columns = max(t.Columns, len(m.Results))
	m.limits, m.which = t.Limits[t.Default], t.Default
	if r.mprOpt.Present == 0 {
		m.Optional = nil
		return
	}
	own := m.Optional.ownMPR()
	m.limits, m.which = r.settle(t, &own)
	if m.which != t.Default {
		t.override(m.which)
	}
	if len(t.Pins) == 0 && len(m.Optional.Pins) > 0 && t.Index >= 0 {
		t.Pins = slices.Clone(m.Optional.Pins)
	}
}
