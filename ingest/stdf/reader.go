package stdf

import (
	"cmp"
	"errors"
	"fmt"
	"io"
	"slices"
)

// Reader reads the records of an STDF V4 stream one after the other, as
// bufio.Scanner reads lines:
//
//	r := stdf.NewReader(f)
//	for r.Scan() {
//		switch rec := r.Record().(type) {
//		case *stdf.PTR:
//			...
//		}
//	}
//	if err := r.Err(); err != nil { ... }
//	for _, d := range r.Damages() { ... }
//
// Records belong to the Reader and are overwritten by the next Scan; see Clone.
// Gzip and zstd streams are told by their first bytes and unpacked; offsets are
// those of the unpacked stream. Both byte orders are read.
//
// Err is nil at the end of a damaged file: what was wrong is in Damages. It is
// not nil when the input could not be read, or is no STDF V4 at all (a
// *FormatError).
type Reader struct {
	src  *source
	in   io.Reader // src, unpacked
	buf  []byte    // buf[pos:end] is read and not used
	pos  int
	end  int
	base int64 // offset of buf[0] in the stream
	eof  bool

	c       coder // byte order and interned texts
	tests   registry
	run     int   // MIRs so far
	moved   int64 // changes of tests' defaults
	rec     Record
	kind    Kind
	at      int64 // offset of rec
	records [delivered + 1]Record
	pir     PIR
	prr     PRR
	ptr     PTR
	mpr     MPR
	mprOpt  MPROptional
	ftr     FTR
	scratch Limits
	counts  [kinds]int64

	skipped map[code]*SkippedType
	learned map[code]bool // unknown types that stood in good chains
	wide    [kinds]bool   // kinds that were seen with extra bytes in good chains
	odds    [kinds]int64  // odd records of each kind
	oddKept [kinds]int64  // of them, those delivered
	shapes  [kinds]int    // fields of the last record of each kind but PTR; see shape
	trusted int64         // headers chain up to this offset, whatever their types
	oddAt   int64         // offset of the last odd record delivered; 0 none
	gaps    int64         // stretches that gave no record
	torn    bool          // whether records may be missing at one of those that Parts has not yet seen
	damages damages

	begun, done bool
	err         error
}

const (
	smallWindow = 8 << 10 // for files that fit it
	usualWindow = 128 << 10
	// maxWindow bounds how far ahead headers are looked at. It is the most
	// that is ever held of a file.
	maxWindow = 1 << 20
)

// NewReader reads from src, from its first byte. Nothing is read before the
// first Scan.
func NewReader(src io.Reader) *Reader {
	r := &Reader{src: &source{in: src}, c: coder{strings: &interner{}}}
	r.records = [...]Record{
		KindFAR: &FAR{}, KindATR: &ATR{}, KindMIR: &MIR{}, KindMRR: &MRR{}, KindPCR: &PCR{}, KindHBR: &HBR{}, KindSBR: &SBR{},
		KindPMR: &PMR{}, KindPGR: &PGR{}, KindRDR: &RDR{}, KindSDR: &SDR{}, KindWIR: &WIR{}, KindWRR: &WRR{}, KindWCR: &WCR{},
		KindPIR: &r.pir, KindPRR: &r.prr, KindTSR: &TSR{}, KindPTR: &r.ptr, KindMPR: &r.mpr, KindFTR: &r.ftr,
		KindBPS: &BPS{}, KindEPS: &EPS{}, KindGDR: &GDR{}, KindDTR: &DTR{},
	}
	return r
}

// Record is the record that the last Scan found.
func (r *Reader) Record() Record { return r.rec }

// Offset is where its header starts, in bytes of the unpacked stream.
func (r *Reader) Offset() int64 { return r.at }

// Position is the offset behind the last record: how far the stream was read.
func (r *Reader) Position() int64 { return r.offset() }

// Err is why Scan stopped, nil at the end of the file.
func (r *Reader) Err() error { return r.err }

// BigEndian says in which byte order the records are written.
func (r *Reader) BigEndian() bool { return r.c.big }

// Damages are what is wrong with the file so far, in the order found; of each
// kind the first hundred. DamageCounts has them all.
func (r *Reader) Damages() []Damage { return r.damages.list }

// DamageCounts counts the damages of each kind, by name.
func (r *Reader) DamageCounts() []DamageCount { return r.damages.sortedCounts() }

// Tests are the tests met so far, in the order of their first records.
func (r *Reader) Tests() []*Test { return r.tests.list }

// Count is how many records of a kind were met, skipped ones too.
func (r *Reader) Count(k Kind) int64 { return r.counts[k] }

// Skipped counts the records that were passed over as their type is not
// delivered, by type.
func (r *Reader) Skipped() []SkippedType {
	list := make([]SkippedType, 0, len(r.skipped))
	for _, s := range r.skipped {
		list = append(list, *s)
	}
	slices.SortFunc(list, func(a, b SkippedType) int {
		return cmp.Or(cmp.Compare(a.Type, b.Type), cmp.Compare(a.Sub, b.Sub))
	})
	return list
}

// Scan goes to the next record; false at the end of the file or of what can be
// read of it.
func (r *Reader) Scan() bool {
	for !r.done {
		// The usual case: a record of a known type whose fields end with it,
		// and a header behind it that can be one.
		if b := r.buf[r.pos:r.end]; len(b) >= 4 {
			h := parseHeader(b, r.c.big)
			whole := 4 + h.size
			switch {
			case whole+4 > len(b) || !r.likely(parseHeader(b[whole:], r.c.big)):
			case h.kind == KindPTR: // most records are: spare them the detours
				if r.quickPTR(b[4:whole]) {
					return true
				}
			case h.kind != Unknown && h.kind <= delivered && r.read(h.kind, b[4:whole]) == exact:
				r.deliver(h)
				return true
			}
		}
		if r.step() {
			return true
		}
	}
	r.rec = nil
	return false
}

// likely says whether a header can stand at the start of a record: of a known
// type with a length that it may have, or of a type that was met before.
func (r *Reader) likely(h header) bool {
	f := &forms[h.kind]
	if h.kind != Unknown {
		return h.size >= f.min && (h.size <= f.max || r.wide[h.kind])
	}
	return r.learned != nil && r.learned[h.code]
}

// read reads the fields of a record. It changes nothing but the record: that it
// is one is not yet sure.
func (r *Reader) read(k Kind, body []byte) fit {
	var f fit
	switch k {
	case KindPTR:
		f = r.ptr.read(&r.c, body)
	case KindPIR:
		if len(body) == 2 {
			r.pir = PIR{body[0], body[1]}
			return exact
		}
		r.c.read(body)
		r.pir.layout(&r.c)
		f = r.c.fit()
	case KindPRR:
		f = r.prr.read(&r.c, body)
	case KindMPR:
		r.mpr.Optional = &r.mprOpt
		fallthrough
	default:
		r.c.read(body)
		r.records[k].layout(&r.c)
		f = r.c.fit()
	}
	if len(body) < forms[k].min {
		f = overrun
	}
	if f == extra && r.wide[k] {
		f = exact
	}
	return f
}

// deliver makes the record that was read the current one, and lets it have its
// effects.
func (r *Reader) deliver(h header) {
	r.advance(h.kind, h.size)
	r.shapes[h.kind] = r.shape(h.kind)
	switch h.kind {
	case KindPTR:
		r.settlePTR(h.size)
	case KindMPR:
		r.settleMPR()
	case KindFTR:
		m := &r.ftr
		m.Test = r.test(KindFTR, m.Number, m.textRaw)
		m.Text = recordText(m.Test, m.textRaw, &r.c)
	case KindMIR:
		r.run++
	case KindTSR:
		r.tests.summary(r.rec.(*TSR))
	case KindFAR:
		// Of a file that was appended to another; the first was looked at by begin.
		if r.rec.(*FAR).CPUType != 0 {
			r.c.vax = false
		}
	}
}

// advance makes the record at pos the current one.
func (r *Reader) advance(k Kind, size int) {
	r.at = r.offset()
	r.pos += 4 + size
	r.counts[k]++
	r.rec, r.kind = r.records[k], k
}

// offset is where buf[pos] stands in the stream.
func (r *Reader) offset() int64 { return r.base + int64(r.pos) }

// need makes n bytes ready from pos on, if the stream has them and the window
// allows, and says how many are.
func (r *Reader) need(n int) int {
	n = min(n, maxWindow)
	for empty := 0; r.end-r.pos < n && !r.eof; {
		size := len(r.buf)
		switch {
		case size == 0:
			size = smallWindow
		case r.end == size: // the stream is longer than the window so far
			size = max(size, usualWindow)
		}
		if r.pos > 0 {
			copy(r.buf, r.buf[r.pos:r.end])
			r.base += int64(r.pos)
			r.end -= r.pos
			r.pos = 0
		}
		if n > size || r.end == size {
			size = min(max(n, 2*size), maxWindow)
		}
		if size > len(r.buf) {
			grown := make([]byte, size)
			copy(grown, r.buf[:r.end])
			r.buf = grown
		}
		k, err := r.in.Read(r.buf[r.end:])
		r.end += k
		if k > 0 {
			empty = 0
		} else if empty++; empty == 100 && err == nil {
			err = io.ErrNoProgress
		}
		if err != nil {
			r.eof = true
			r.endOfInput(err)
		}
	}
	return r.end - r.pos
}

// endOfInput tells the end of the file from input that could not be read and
// from packed data that are damaged.
func (r *Reader) endOfInput(err error) {
	switch {
	case r.src.err != nil:
		r.err = fmt.Errorf("stdf: reading failed at byte %d: %w", r.base+int64(r.end), r.src.err)
	case err == io.EOF:
	case r.src.packed != "":
		r.src.unpackErr = err
		what := "damaged"
		if errors.Is(err, io.ErrUnexpectedEOF) {
			what = "cut short"
		}
		r.damages.add(r.base+int64(r.end), DamageUnpacking, 0,
			"the %s data are %s behind byte %d of the unpacked stream (%v); what came before it was read", r.src.packed, what, r.base+int64(r.end), err)
	default:
		r.err = fmt.Errorf("stdf: reading failed at byte %d: %w", r.base+int64(r.end), err)
	}
}
