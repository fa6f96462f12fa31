package ingest

import (
	"encoding/binary"
	"errors"
	"fmt"
	"io"
)

// The libraries for Arrow IPC and Parquet make room for as many fields, children
// and column chunks as the metadata of a file claim, before they look whether so
// many are there. A damaged length then asks for more memory than there is, which
// ends a program and is no panic that could be caught. So the metadata are walked
// first, and a list that is longer than the bytes it stands in is an error.
// Layouts: Arrow's Message.fbs, Schema.fbs and File.fbs with FlatBuffers'
// internals, and Thrift's compact protocol, all open specifications; written down
// from memory and held by the files of the libraries themselves in tests.

var errClaims = errors.New("its metadata claim more than there is")

// flat is a FlatBuffers buffer. Reading outside of it panics; see guard.
type flat []byte

func (b flat) u16(at int) int { return int(binary.LittleEndian.Uint16(b[at:])) }
func (b flat) u32(at int) int { return int(binary.LittleEndian.Uint32(b[at:])) }
func (b flat) i64(at int) int64 {
	return int64(binary.LittleEndian.Uint64(b[at:]))
}

// follow goes where an offset points.
func (b flat) follow(at int) int { return at + b.u32(at) }

// slot is the place of a table's field, 0 when it is absent.
func (b flat) slot(table, field int) int {
	v := table - int(int32(b.u32(table)))
	if 4+2*field >= b.u16(v) {
		return 0
	}
	if o := b.u16(v + 4 + 2*field); o != 0 {
		return table + o
	}
	return 0
}

// list is a vector of a table: the place of its first element and their number,
// which must fit.
func (b flat) list(table, field, size int) (at, n int) {
	s := b.slot(table, field)
	if s == 0 {
		return 0, 0
	}
	at = b.follow(s)
	n = b.u32(at)
	if n > (len(b)-at-4)/size {
		panic(errClaims)
	}
	return at + 4, n
}

// schemaWalk counts what is visited, as offsets may lead to the same place again
// and again.
type schemaWalk struct {
	flat
	left int
}

func (w *schemaWalk) schema(table int) {
	w.list(table, 2, 4)
	at, n := w.list(table, 1, 4)
	w.fields(at, n, 64)
}

func (w *schemaWalk) fields(at, n, depth int) {
	if depth == 0 {
		panic(errClaims)
	}
	for i := range n {
		if w.left--; w.left < 0 {
			panic(errClaims)
		}
		f := w.follow(at + 4*i)
		w.list(f, 6, 4)
		if t := w.slot(f, 2); t != 0 && w.flat[t] == 14 { // a union has a list of its own
			if u := w.slot(f, 3); u != 0 {
				w.list(w.follow(u), 1, 4)
			}
		}
		a, k := w.list(f, 5, 4)
		w.fields(a, k, depth-1)
	}
}

// checkMessage walks a message and gives the length of its body and the rows that
// it says it has.
func checkMessage(b []byte) (body, rows int64, err error) {
	err = inBounds(func() error {
		w := &schemaWalk{b, len(b)}
		m := w.follow(0)
		w.list(m, 4, 4)
		kind := byte(0)
		if s := w.slot(m, 1); s != 0 {
			kind = b[s]
		}
		if s := w.slot(m, 3); s != 0 {
			body = w.i64(s)
		}
		s := w.slot(m, 2)
		if s == 0 {
			return nil
		}
		h := w.follow(s)
		switch kind {
		case 1:
			w.schema(h)
		case 2:
			if s := w.slot(h, 1); s != 0 {
				w.batch(w.follow(s))
			}
		case 3:
			w.batch(h)
			if s := w.slot(h, 0); s != 0 {
				rows = w.i64(s)
			}
		}
		return nil
	})
	return body, rows, err
}

func (w *schemaWalk) batch(table int) {
	w.list(table, 1, 16)
	w.list(table, 2, 16)
	w.list(table, 4, 8)
}

// inBounds makes an error of leaving the bytes that are there.
func inBounds(do func() error) (err error) {
	defer func() {
		if r := recover(); r != nil {
			err = errClaims
		}
	}()
	return do()
}

// messageAt reads and checks the message at a place, and adds its rows up; next is
// the place behind it and its body. io.EOF says that the stream ends here.
func messageAt(from io.ReaderAt, at, size int64, rows *int64) (next int64, err error) {
	var head [8]byte
	if _, err := from.ReadAt(head[:4], at); err != nil {
		if at >= size {
			return at, io.EOF
		}
		return at, io.ErrUnexpectedEOF
	}
	start := at + 4 // streams of old versions have no mark before the length
	if binary.LittleEndian.Uint32(head[:]) == 0xffffffff {
		if _, err := from.ReadAt(head[:4], at+4); err != nil {
			return at, io.ErrUnexpectedEOF
		}
		start = at + 8
	}
	n := int64(int32(binary.LittleEndian.Uint32(head[:])))
	if n == 0 {
		return start, io.EOF
	}
	if n < 0 || start+n > size {
		return at, io.ErrUnexpectedEOF
	}
	meta := make([]byte, n)
	if _, err := from.ReadAt(meta, start); err != nil {
		return at, io.ErrUnexpectedEOF
	}
	body, n, err := checkMessage(meta)
	if err != nil {
		return at, err
	}
	start += int64(len(meta))
	if body < 0 || body > size-start {
		return at, io.ErrUnexpectedEOF
	}
	*rows += min(max(n, 0), 1<<31)
	return start + body, nil
}

// checkStream walks the messages of an IPC stream and gives how far they are
// sound, and why no further: nil at the stream's end.
func checkStream(from io.ReaderAt, size int64) (sound, rows int64, err error) {
	for at := int64(0); ; {
		next, err := messageAt(from, at, size, &rows)
		if err == io.EOF {
			return next, rows, nil
		}
		if err != nil {
			return at, rows, fmt.Errorf("byte %d of %d: %w", at, size, err)
		}
		at = next
	}
}

// checkArrowFile walks the footer of an IPC file and the messages that it names.
func checkArrowFile(from io.ReaderAt, size int64) (rows int64, err error) {
	const tail = 10 // length of the footer, and the mark
	var end [tail]byte
	if size < 2*tail {
		return 0, io.ErrUnexpectedEOF
	}
	if _, err := from.ReadAt(end[:], size-tail); err != nil {
		return 0, err
	}
	if string(end[4:]) != "ARROW1" {
		return 0, errors.New("it does not end as such a file does")
	}
	n := int64(int32(binary.LittleEndian.Uint32(end[:])))
	if n <= 0 || n > size-tail {
		return 0, errClaims
	}
	b := make([]byte, n)
	if _, err := from.ReadAt(b, size-tail-n); err != nil {
		return 0, err
	}
	err = inBounds(func() error {
		w := &schemaWalk{b, len(b)}
		f := w.follow(0)
		if s := w.slot(f, 1); s != 0 {
			w.schema(w.follow(s))
		}
		w.list(f, 4, 4)
		for _, field := range []int{2, 3} {
			at, n := w.list(f, field, 24)
			for i := range n {
				offset, meta, body := w.i64(at+24*i), int64(int32(w.u32(at+24*i+8))), w.i64(at+24*i+16)
				if offset < 0 || offset > size || meta < 0 || body < 0 || meta > size-offset || body > size-offset-meta {
					return errClaims
				}
				if _, err := messageAt(from, offset, size, &rows); err != nil {
					return err
				}
			}
		}
		return nil
	})
	return rows, err
}
