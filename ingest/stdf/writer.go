package stdf

import (
	"bufio"
	"encoding/binary"
	"fmt"
	"io"
)

// Order is the byte order of a file.
type Order bool

const (
	LittleEndian Order = false // CPU_TYPE 2
	BigEndian    Order = true  // CPU_TYPE 1
)

// Writer writes records. It fills in lengths, and the file attributes record;
// the order of records is the caller's. Records are given as values of the same
// types that a Reader delivers: what is written is read back equal.
//
// Call Flush at the end. An error of the underlying writer is sticky.
type Writer struct {
	// LeaveOut lets PTRs after the first one of a test number leave out text
	// and optional part where they repeat those of the first, as the standard
	// wants it; readers take them from there.
	LeaveOut bool

	out   *bufio.Writer
	c     coder
	order Order
	first map[uint32]*PTR
	bytes int64
}

// NewWriter writes to w in the given byte order.
func NewWriter(w io.Writer, order Order) *Writer {
	return &Writer{
		out:   bufio.NewWriterSize(w, 64<<10),
		c:     coder{writing: true, big: bool(order)},
		order: order,
		first: make(map[uint32]*PTR),
	}
}

// Write writes one record. It fails, with nothing written, when the record
// cannot be put into the format: a text over 255 bytes, a body over 65,535,
// counts that differ from what they count.
func (w *Writer) Write(rec Record) error {
	switch m := rec.(type) {
	case *FAR:
		cpu := uint8(2)
		if w.order == BigEndian {
			cpu = 1
		}
		rec = &FAR{CPUType: cpu, Version: 4}
	case *MIR:
		clear(w.first)
	case *PTR:
		if w.LeaveOut {
			rec = w.leaveOut(m)
		}
	}
	w.c.write()
	rec.layout(&w.c)
	if w.c.err != nil {
		return fmt.Errorf("%s: %w", rec.Kind(), w.c.err)
	}
	if len(w.c.out) > 65535 {
		return fmt.Errorf("stdf: %s: a body of %d bytes: REC_LEN holds 65535", rec.Kind(), len(w.c.out))
	}
	var head [4]byte
	if w.order == BigEndian {
		binary.BigEndian.PutUint16(head[:], uint16(len(w.c.out)))
	} else {
		binary.LittleEndian.PutUint16(head[:], uint16(len(w.c.out)))
	}
	head[2], head[3] = rec.Kind().Code()
	w.bytes += int64(4 + len(w.c.out))
	w.out.Write(head[:])
	_, err := w.out.Write(w.c.out)
	return err
}

// leaveOut gives the record without what the first one of its test says too.
func (w *Writer) leaveOut(m *PTR) *PTR {
	first := w.first[m.Number]
	if first == nil {
		w.first[m.Number] = Clone(m).(*PTR)
		return m
	}
	if m.Text != first.Text || m.Alarm != "" {
		return m
	}
	if m.Optional != nil && (first.Optional == nil || *m.Optional != *first.Optional) {
		return m
	}
	short := *m
	short.Text, short.Optional = "", nil
	return &short
}

// Bytes is how much was written so far: the offset of the next record.
func (w *Writer) Bytes() int64 { return w.bytes }

// Flush writes out what is buffered.
func (w *Writer) Flush() error { return w.out.Flush() }
