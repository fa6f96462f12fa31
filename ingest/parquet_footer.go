package ingest

import (
	"bytes"
	"encoding/base64"
	"encoding/binary"
	"errors"
	"io"
)

// checkParquet walks the footer of a Parquet file: a list must fit into the bytes
// it stands in, the tree of the schema must be there and no deeper than any real
// one, and the Arrow schema that a writer may have kept beside it must be sound.
// Numbers of fields are those of parquet.thrift, an open specification, from memory.
func checkParquet(from io.ReaderAt, size int64) error {
	var end [8]byte
	if size < 12 {
		return io.ErrUnexpectedEOF
	}
	if _, err := from.ReadAt(end[:], size-8); err != nil {
		return err
	}
	if m := string(end[4:]); m == "PARE" {
		return errors.New("its footer is encrypted")
	} else if m != "PAR1" {
		return errors.New("it does not end as such a file does")
	}
	n := int64(binary.LittleEndian.Uint32(end[:]))
	if n > size-12 {
		return errClaims
	}
	b := make([]byte, n)
	if _, err := from.ReadAt(b, size-8-n); err != nil {
		return err
	}
	return inBounds(func() error {
		t := thrift{b: b}
		t.fields(32, func(id int, kind byte) bool {
			switch {
			case id == 2 && kind == thriftList:
				t.schemaTree()
			case id == 5 && kind == thriftList:
				t.each(func() { t.keptSchema() })
			default:
				return false
			}
			return true
		})
		return nil
	})
}

// schemaTree walks the schema, which is a tree in depth-first order.
func (t *thrift) schemaTree() {
	const deepest = 64
	open := []int{1} // children that are still to come, by depth
	t.each(func() {
		children := 0
		t.fields(8, func(id int, kind byte) bool {
			if id != 5 || kind != thriftI32 {
				return false
			}
			children = t.zigzag()
			return true
		})
		t.count(children)
		for len(open) > 0 && open[len(open)-1] == 0 {
			open = open[:len(open)-1]
		}
		if len(open) == 0 || len(open) > deepest {
			panic(errClaims)
		}
		open[len(open)-1]--
		open = append(open, children)
	})
	for _, n := range open {
		if n > 0 {
			panic(errClaims)
		}
	}
}

// keptSchema walks a pair of key and value, and the Arrow schema when it is one.
func (t *thrift) keptSchema() {
	var key, value []byte
	t.fields(8, func(id int, kind byte) bool {
		switch {
		case id == 1 && kind == thriftBytes:
			key = t.bytes()
		case id == 2 && kind == thriftBytes:
			value = t.bytes()
		default:
			return false
		}
		return true
	})
	if string(key) != "ARROW:schema" {
		return
	}
	value = bytes.TrimRight(value, "=")
	plain := make([]byte, base64.RawStdEncoding.DecodedLen(len(value)))
	n, err := base64.RawStdEncoding.Decode(plain, value)
	if err != nil {
		return // nor will the library take it
	}
	var rows int64
	if _, err := messageAt(bytes.NewReader(plain[:n]), 0, int64(n), &rows); err != nil && err != io.EOF {
		panic(errClaims)
	}
}

// thrift walks data in Thrift's compact protocol.
type thrift struct {
	b  []byte
	at int
}

func (t *thrift) byte() byte {
	t.at++
	return t.b[t.at-1]
}

func (t *thrift) varint() int {
	v := uint64(0)
	for shift := 0; shift < 70; shift += 7 {
		c := t.byte()
		v |= uint64(c&0x7f) << shift
		if c < 0x80 {
			break
		}
	}
	return int(v)
}

// count is a number of things that take at least a byte each.
func (t *thrift) count(n int) int {
	if n < 0 || n > len(t.b)-t.at {
		panic(errClaims)
	}
	return n
}

// Types of Thrift's compact protocol that are looked into.
const (
	thriftTrue  = 1
	thriftI32   = 5
	thriftBytes = 8
	thriftList  = 9
	thriftPart  = 12 // a struct
)

// fields walks a struct; take reads a field, or says that it did not.
func (t *thrift) fields(depth int, take func(id int, kind byte) bool) {
	id := 0
	for {
		c := t.byte()
		if c == 0 {
			return
		}
		if c>>4 == 0 {
			id = t.zigzag()
		} else {
			id += int(c >> 4)
		}
		if take(id, c&0xf) {
			continue
		}
		if c&0xf > 2 { // a boolean field is its own type
			t.value(c&0xf, depth-1)
		}
	}
}

func (t *thrift) structure(depth int) {
	t.fields(depth, func(int, byte) bool { return false })
}

// each walks a list of structs.
func (t *thrift) each(do func()) {
	c := t.byte()
	n := int(c >> 4)
	if n == 15 {
		n = t.varint()
	}
	if t.count(n) > 0 && c&0xf != thriftPart {
		panic(errClaims)
	}
	for range n {
		do()
	}
}

func (t *thrift) zigzag() int {
	v := uint64(t.varint())
	return int(v>>1) ^ -int(v&1)
}

func (t *thrift) bytes() []byte {
	n := t.count(t.varint())
	t.at += n
	return t.b[t.at-n : t.at]
}

func (t *thrift) value(kind byte, depth int) {
	if depth < 0 {
		panic(errClaims)
	}
	switch kind {
	case 1, 2, 3:
		t.at++
	case 4, 5, 6:
		t.varint()
	case 7:
		t.at += 8
	case 8:
		t.at += t.count(t.varint())
	case 9, 10:
		c := t.byte()
		n := int(c >> 4)
		if n == 15 {
			n = t.varint()
		}
		for range t.count(n) {
			t.value(c&0xf, depth-1)
		}
	case 11:
		n := t.count(t.varint())
		if n > 0 {
			c := t.byte()
			for range n {
				t.value(c>>4, depth-1)
				t.value(c&0xf, depth-1)
			}
		}
	case 12:
		t.structure(depth - 1)
	default:
		panic(errClaims)
	}
}
