package ingest

import (
	"errors"
	"io"
)

// A log of a tester is read in two steps at once, each in a goroutine: bytes are
// read and hashed, and records are put together to parts and these into columns.
// The second takes the bytes in their order, so that the result is the same on any
// number of cores. (A third for the columns cost more than it gained: what one core
// has just written is dear to read on another. Turning finished rows into decimals
// is left to one all the same, as the first step waits much of the time.)

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
