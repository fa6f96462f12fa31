package stdf

import "fmt"

// step takes the reader on where the usual case does not hold: at the start, at
// the end of the window or file, at types that are not delivered, and where
// something is wrong. It says whether it has delivered a record.
func (r *Reader) step() bool {
	if !r.begun && !r.begin() {
		r.done = true
		return false
	}
	n := r.need(4)
	if n < 4 {
		r.finish(n)
		return false
	}
	h := parseHeader(r.buf[r.pos:], r.c.big)
	whole := 4 + h.size
	n = r.need(whole + 4)
	b := r.buf[r.pos : r.pos+n]
	switch {
	case r.otherOrder(b):
		r.c.big = !r.c.big
		return false
	case h.size == 0 && h.code == 0:
		r.zeros()
		return false
	case n < whole:
		return r.cut(h, n)
	case r.offset() < r.trusted:
		return r.take(h)
	case !r.likely(h):
		return r.judge(h, 1, false)
	}
	// Trailing bytes too few for a header are for the next step to report.
	follows := n < whole+4 || r.likely(parseHeader(b[whole:], r.c.big)) || r.otherOrder(b[whole:])
	fits := h.kind == Unknown || h.kind > delivered || r.read(h.kind, b[4:whole]) == exact
	if follows && fits {
		return r.take(h)
	}
	return r.judge(h, 5, fits && h.kind <= delivered) // the header is sound as such: what is in doubt is its length
}

// otherOrder says whether b starts with the file attributes record of a file
// in the other byte order, appended to this one.
func (r *Reader) otherOrder(b []byte) bool {
	big, ok := far(b)
	return ok && big != r.c.big && len(b) >= 6 && b[5] == 4 && (b[4] == 1) == big
}

// pass counts a record that is not delivered.
func (r *Reader) pass(h header) {
	if r.skipped == nil {
		r.skipped = make(map[code]*SkippedType)
	}
	s := r.skipped[h.code]
	if s == nil {
		s = &SkippedType{Type: h.code.typ(), Sub: h.code.sub(), Name: h.kind.String(), First: r.offset()}
		r.skipped[h.code] = s
	}
	s.Records++
	s.Bytes += int64(4 + h.size)
	r.counts[h.kind]++
	r.pos += 4 + h.size
}

// take takes a record whose length is known to be right.
func (r *Reader) take(h header) bool {
	switch {
	case h.kind == Unknown || h.kind > delivered:
		r.pass(h)
		return false
	case r.read(h.kind, r.buf[r.pos+4:r.pos+4+h.size]) == exact:
		r.deliver(h)
		return true
	}
	return r.odd(h)
}

// finish ends the file: n bytes are left, too few for a header.
func (r *Reader) finish(n int) {
	r.done = true
	if n > 0 && r.err == nil {
		r.damages.add(r.offset(), DamageCut, int64(n), "the file ends at byte %d, %s into a record header; the records before byte %d are whole",
			r.offset()+int64(n), plural(n, "byte"), r.offset())
		r.noteGap(int64(n))
	}
	r.pos = r.end
}

// cut handles a record that runs over the end of the file. Its length may be
// what is wrong: then headers chain inside of it. It says whether it has
// delivered a record.
func (r *Reader) cut(h header, n int) bool {
	if s, ok := r.search(5); ok {
		if r.repair(h, s) {
			return true
		}
		r.skip(s, h)
		return false
	}
	r.done = true
	if r.err == nil {
		what := h.kind.String() + " record"
		if h.kind == Unknown {
			what = fmt.Sprintf("record of unknown type %d, %d", h.code.typ(), h.code.sub())
		}
		r.damages.add(r.offset(), DamageCut, int64(n), "the file ends at byte %d inside a %s that wants %s more; the records before byte %d are whole",
			r.offset()+int64(n), what, plural(4+h.size-n, "byte"), r.offset())
		r.noteGap(int64(n))
	}
	r.pos = r.end
	return false
}

// zeros handles zero bytes where a header should be: the padding of the last
// block at the end of a file, damage elsewhere.
func (r *Reader) zeros() {
	at := r.offset()
	for r.need(1<<12) > 0 {
		i := r.pos
		for i < r.end && r.buf[i] == 0 {
			i++
		}
		if i < r.end || r.offset()-at > maxSkip {
			r.pos = max(r.pos, i-3) // a header may start with zero bytes
			r.resume(at, func() string { return "zero bytes stand where a record should start" })
			return
		}
		r.pos = i
	}
	if r.err == nil {
		r.damages.add(at, DamagePadding, r.offset()-at, "%d zero bytes stand behind the last record", r.offset()-at)
	}
	r.done = true
}

func plural(n int, noun string) string {
	if n == 1 {
		return "1 " + noun
	}
	return fmt.Sprintf("%d %ss", n, noun)
}
