package ingest

import (
	"errors"
	"io"

	"kneepoint/ingest/stdf"
)

// A log of a tester is read in three steps at once, each in a goroutine: bytes are
// read and hashed, records are put together to parts, and parts are put into
// columns. Each step takes what the one before gives in its order, so that the
// result is the same on any number of cores.

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
// until the next only.
type partBatch struct {
	parts              []stdf.Part
	results            []stdf.Result
	ids                []byte
	resultsEnd, idsEnd []int // by part
	tests              []*stdf.Test
	at                 int64
}

// partFeed puts parts together in a goroutine of its own.
type partFeed struct {
	full   chan *partBatch
	spare  chan *partBatch
	stop   chan struct{}
	failed any // what it panicked with
}

const (
	batchParts   = 256
	batchResults = 64 << 10 // a part may have very many
	batchCount   = 4
)

func (s *stdfReading) feed(from *readAhead) *partFeed {
	f := &partFeed{full: make(chan *partBatch, batchCount), spare: make(chan *partBatch, batchCount), stop: make(chan struct{})}
	for range batchCount {
		f.spare <- &partBatch{}
	}
	go func() {
		defer close(f.full)
		defer func() { f.failed = recover() }()
		for more := true; more; {
			var b *partBatch
			select {
			case b = <-f.spare:
			case <-f.stop:
				return
			}
			*b = partBatch{parts: b.parts[:0], results: b.results[:0], ids: b.ids[:0], resultsEnd: b.resultsEnd[:0], idsEnd: b.idsEnd[:0]}
			for more = true; len(b.parts) < batchParts && len(b.results) < batchResults; {
				if more = s.parts.Scan(); !more {
					break
				}
				b.add(s.parts.Part())
			}
			b.tests, b.at = s.parts.Tests(), s.parts.Reader().Position()
			if s.in.packed != "" {
				b.at = from.taken
			}
			f.full <- b
		}
	}()
	return f
}

func (b *partBatch) add(p *stdf.Part) {
	b.parts = append(b.parts, *p)
	b.results = append(b.results, p.Results...)
	b.ids = append(b.ids, p.RawID()...)
	b.resultsEnd, b.idsEnd = append(b.resultsEnd, len(b.results)), append(b.idsEnd, len(b.ids))
}

// close ends the feed where it is, and waits for it.
func (f *partFeed) close() {
	close(f.stop)
	for range f.full {
	}
}
