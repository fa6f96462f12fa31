package ingest

import (
	"errors"
	"io"

	"kneepoint/ingest/stdf"
)

// A log of a tester is read in two steps at once, each in a goroutine: bytes are
// read and hashed, and records are put together to parts and these into columns.
// The second takes the bytes in their order, so that the result is the same on any
// number of cores. (A third for the columns cost more than it gained: what one core
// has just written is dear to read on another.)

// readAhead reads a stream to its end whether or not it is all wanted, as the hash
// is of all of it.
type readAhead struct {
	full  chan []byte
	spare chan []byte
	stop  chan struct{}
	ended chan struct{}
	buf   []byte // at work
	rest  []byte // of buf
	err   error  // why the stream ended
	taken int64  // bytes given
}

const aheadSize, aheadCount = 256 << 10, 4

func newReadAhead(from io.Reader) *readAhead {
	r := &readAhead{full: make(chan []byte, aheadCount), spare: make(chan []byte, aheadCount), stop: make(chan struct{}), ended: make(chan struct{})}
	go r.run(from)
	return r
}

func (r *readAhead) run(from io.Reader) {
	defer close(r.ended)
	defer close(r.full)
	for made := 0; ; {
		var buf []byte
		select {
		case buf = <-r.spare:
		default:
			if made < aheadCount {
				made++
				buf = make([]byte, aheadSize)
				break
			}
			select {
			case buf = <-r.spare:
			case <-r.stop:
				r.err = errStopped
				return
			}
		}
		n, err := from.Read(buf[:cap(buf)])
		if r.err = err; n > 0 {
			r.full <- buf[:n] // there is room for all
		}
		if err != nil {
			return
		}
		if n == 0 {
			r.spare <- buf
		}
	}
}

var errStopped = errors.New("stopped")

// next makes the next bytes ready; false at the end.
func (r *readAhead) next() bool {
	if r.buf != nil {
		r.spare <- r.buf
	}
	var ok bool
	if r.buf, ok = <-r.full; !ok {
		r.buf, r.rest = nil, nil
		return false
	}
	r.rest = r.buf
	return true
}

func (r *readAhead) Read(p []byte) (int, error) {
	if len(p) == 0 {
		return 0, nil
	}
	if len(r.rest) == 0 && !r.next() {
		return 0, r.err
	}
	n := copy(p, r.rest)
	r.rest = r.rest[n:]
	r.taken += int64(n)
	return n, nil
}

// drain waits until all was read.
func (r *readAhead) drain() {
	for r.next() {
	}
	<-r.ended
}

// close ends the reading where it is.
func (r *readAhead) close() {
	select {
	case <-r.ended:
		return
	default:
	}
	close(r.stop)
	<-r.ended
}

// partBatch is some parts with what belongs to them, which in a stdf.Part holds
// until the next only. Columns are written a test at a time for all of them.
type partBatch struct {
	parts   []partRow
	plain   []stdf.Reading
	results []stdf.Result
	ids     []byte
}

// partRow is what becomes a row, and where what belongs to it ends in its batch.
type partRow struct {
	wafer, run         int32 // indexes of stdf.Parts
	x, y, hard, soft   int32
	opened, offset     int64
	program            []int32
	plain, results, id int
	head, site         uint8
	pass               int8
}

const (
	batchParts   = 256
	batchResults = 64 << 10 // a part may have very many
)

// fill takes the parts that come next from a reader; false when there are no more.
func (b *partBatch) fill(p *stdf.Parts) (more bool) {
	*b = partBatch{parts: b.parts[:0], plain: b.plain[:0], results: b.results[:0], ids: b.ids[:0]}
	for more = true; len(b.parts) < batchParts && len(b.plain)+len(b.results) < batchResults; {
		if more = p.Scan(); !more {
			break
		}
		b.add(p.Part())
	}
	return more
}

func (b *partBatch) add(p *stdf.Part) {
	b.plain = append(b.plain, p.Plain...)
	b.results = append(b.results, p.Results...)
	b.ids = append(b.ids, p.RawID()...)
	b.parts = append(b.parts, partRow{
		wafer: int32(p.Wafer), run: int32(p.Run), x: p.X, y: p.Y, hard: p.HardBin, soft: p.SoftBin, opened: p.Opened, offset: p.Offset,
		program: p.Program, plain: len(b.plain), results: len(b.results), id: len(b.ids), head: p.Head, site: p.Site, pass: p.Pass(),
	})
}
