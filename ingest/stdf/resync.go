package stdf

import "fmt"

// judge decides what to make of a record that is suspect: of an unknown type,
// of a length that its type cannot have, with fields that do not fit it, or
// with no header behind it. From is where a next record may start at the
// earliest; fits says that its fields fit its length. The readings are:
//
//   - It is an odd record in a sound file: its length leads to the next sound
//     chain of headers, directly or over more odd records.
//   - Its length is damaged and the rest is not: its fields end just where the
//     next chain starts. It is read with the length that fits.
//   - It fits, and no chain starts inside of it: the damage is behind it.
//   - Anything else: the stream is taken up where the next chain starts.
//
// It says whether it has delivered a record.
func (r *Reader) judge(h header, from int, fits bool) bool {
	s, found := r.search(from)
	whole := 4 + h.size
	switch {
	case found && s >= whole && r.leads(whole, s):
		r.trusted = r.offset() + int64(s)
	case !found && r.eof && r.leads(whole, r.end-r.pos):
		r.trusted = r.base + int64(r.end)
	case found && r.repair(h, s):
		return true
	case fits && (!found || s > whole):
		return r.take(h)
	default:
		r.skip(s, h)
		return false
	}
	if h.kind == Unknown {
		if r.learned == nil {
			r.learned = make(map[code]bool)
		}
		r.learned[h.code] = true
	}
	return r.take(h)
}

// repair delivers a record with a wrong length, if its fields end just where
// the next chain starts, s bytes on.
func (r *Reader) repair(h header, s int) bool {
	if s < 4 || h.kind == Unknown || h.kind > delivered {
		return false
	}
	right := h
	right.size = s - 4
	if !right.strict() || r.read(h.kind, r.buf[r.pos+4:r.pos+s]) != exact || !r.familiar(right) {
		return false
	}
	r.damages.add(r.offset(), DamageRecord, 0, "a %s record says that it is %s long; its fields and the records behind it say %d, and it is read so",
		h.kind, plural(h.size, "byte"), right.size)
	r.deliver(right)
	return true
}

// familiar says whether the record that was read ends after the same field as
// the last one of its kind: of its test, for a PTR. Records may leave out fields
// at their end, so one that lost its tail often fits what is left of it.
func (r *Reader) familiar(h header) bool {
	if h.kind == KindPTR {
		t := r.tests.byNum[numKey(KindPTR, r.ptr.Number)]
		return t != nil && t.size == h.size
	}
	return r.shapes[h.kind] == 0 || r.shapes[h.kind] == r.shape(h.kind)
}

// shape is the number of fields of the record that was read, plus one.
func (r *Reader) shape(k Kind) int {
	switch k {
	case KindPIR:
		return 1
	case KindPRR:
	default:
		return r.c.fields + 1
	}
	switch m := &r.prr; {
	case m.Fix != nil:
		return 4
	case m.PartText != nil:
		return 3
	case m.PartID != nil:
		return 2
	}
	return 1
}

// odd handles a record whose length is right, but whose fields do not fit it: a
// maker's own fields at its end, a text that runs over, or a record of another
// type with a damaged type byte. Results and parts are delivered all the same,
// as what they are good for comes first in them; of the others, which change
// what later records mean, a misfit is believed only when it is this file's
// habit. It says whether it has delivered the record.
func (r *Reader) odd(h header) bool {
	whole := 4 + h.size
	f := r.read(h.kind, r.buf[r.pos+4:r.pos+whole])
	at := r.offset()
	if f == doubtful {
		r.deliver(h)
		return true
	}
	r.odds[h.kind]++
	habit := r.odds[h.kind] > r.counts[h.kind]-r.oddKept[h.kind]
	robust := h.kind == KindPTR || h.kind == KindMPR || h.kind == KindFTR || h.kind == KindPRR
	if h.size < forms[h.kind].min || !robust && !habit || h.kind == KindFAR {
		r.damages.add(at, DamageRecord, int64(whole), "a %s record of %s does not have the fields of one; it is left out", h.kind, plural(h.size, "byte"))
		r.pos += whole
		r.noteGap(0)
		return false
	}
	if f == extra {
		r.damages.add(at, DamageRecord, 0, "a %s record has bytes behind its last field, which are passed over", h.kind)
		r.wide[h.kind] = habit
	} else {
		r.damages.add(at, DamageRecord, 0, "a field of a %s record runs over its end; that field and those behind it are read as missing", h.kind)
	}
	r.oddKept[h.kind]++
	r.oddAt = at
	r.deliver(h)
	return true
}

// skip drops s bytes from a record on whose header cannot be right, and more if
// no chain of headers starts there, and says so.
func (r *Reader) skip(s int, h header) {
	at := r.offset()
	r.pos += s
	r.resume(at, func() string {
		if h.kind == Unknown {
			return fmt.Sprintf("%d, %d is no record type, and no chain of records leads on from there", h.code.typ(), h.code.sub())
		}
		return fmt.Sprintf("the length of a %s record, %s, does not lead to a next record", h.kind, plural(h.size, "byte"))
	})
}

// resume goes on to the next chain of headers and reports what was skipped
// since offset at.
func (r *Reader) resume(at int64, why func() string) {
	for !r.chain(0) {
		if r.need(4) < 4 || r.offset()-at > maxSkip {
			r.done = true
			break
		}
		s, _ := r.search(1)
		r.pos += s
	}
	gap := r.offset() - at
	if r.done && r.eof {
		gap += int64(r.end - r.pos)
		r.pos = r.end
	}
	r.noteGap(gap)
	if !r.damages.count(DamageSkipped, gap) {
		return
	}
	text, bytes := why(), plural(int(gap), "byte")
	switch {
	case !r.done:
		text += fmt.Sprintf("; %s skipped, taken up at byte %d", bytes, r.offset())
	case r.eof:
		text += fmt.Sprintf("; nothing more was found up to the end of the file, %s on", bytes)
	default:
		text += fmt.Sprintf("; gave up after %s without a record", bytes)
	}
	r.damages.list = append(r.damages.list, Damage{at, DamageSkipped, gap, text})
}

// maxSkip is how far a chain of records is looked for in one go: a bound on
// time, which only packed data can reach with a small file.
const maxSkip = 1 << 30

// noteGap counts a stretch of bytes that gave no record; 0 stands for a single
// record that was left out, where no others can be missing.
func (r *Reader) noteGap(bytes int64) {
	r.gaps++
	r.torn = r.torn || bytes > 0
}

// search finds the first place from pos+from on where a chain of headers
// starts. When there is none in the window it gives the first place that was
// not looked at.
func (r *Reader) search(from int) (s int, found bool) {
	for s = from; ; {
		n := r.need(s + 4)
		if n < s+4 {
			if r.eof {
				return n, false
			}
			return s, false
		}
		b := r.buf[r.pos:r.end]
		for ; s+4 <= len(b); s++ {
			if !parseHeader(b[s:], r.c.big).strict() && !r.otherOrder(b[s:]) {
				continue
			}
			if r.chain(s) {
				return s, true
			}
			b = r.buf[r.pos:r.end] // chain may have read on
		}
	}
}

// chain says whether headers chain from pos+s on: four that a V4 writer could
// have written, the first one among them, with no two others in a row; or fewer
// up to the end of the file.
func (r *Reader) chain(s int) bool {
	const enough, most = 4, 12
	strict, lone, big := 0, true, r.c.big
	for range most {
		n := r.need(s + 4)
		switch {
		case n == s && r.eof:
			return strict >= 1
		case n < s+4: // cut by the end of the file or of the window
			return strict >= 2
		}
		b := r.buf[r.pos+s : r.end]
		h := parseHeader(b, big)
		order, isFAR := far(b)
		switch {
		case isFAR && len(b) >= 6 && b[5] == 4:
			big = order
			h = parseHeader(b, big)
			strict, lone = strict+1, false
		case h.strict():
			strict, lone = strict+1, false
		case lone || h.code == 0:
			return false
		default:
			lone = !r.learned[h.code]
		}
		if strict >= enough {
			return true
		}
		s += 4 + h.size
	}
	return false
}

// leads says whether the lengths of headers lead from pos+s exactly to pos+to.
func (r *Reader) leads(s, to int) bool {
	for s < to {
		if r.need(s+4) < s+4 {
			return false
		}
		h := parseHeader(r.buf[r.pos+s:], r.c.big)
		if h.code == 0 {
			return false
		}
		s += 4 + h.size
	}
	return s == to
}
