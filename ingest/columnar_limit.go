package ingest

import (
	"fmt"
	"sync/atomic"

	"github.com/apache/arrow/go/v17/arrow/memory"
)

// columnsLeast is what a file of columns may always unpack to: less than an
// archive, as a small one is no packed folder of text.
const columnsLeast = 64 << 20

// limitAllocator bounds the memory that a file can make the libraries take, as a
// length in a damaged file may claim anything.
type limitAllocator struct {
	memory.Allocator
	file string
	most int64
	used atomic.Int64
	made atomic.Int64 // by arrays, whether still in use or not
	work atomic.Int64 // bytes of pages that were unpacked
}

func newLimit(in *input) *limitAllocator {
	return &limitAllocator{Allocator: memory.NewGoAllocator(), file: in.name, most: max(columnsLeast, unpackRatio*in.size)}
}

func (l *limitAllocator) take(n int) {
	l.made.Add(int64(n))
	if n < 0 || l.used.Add(int64(n)) > l.most {
		l.used.Add(-int64(n))
		l.refuse()
	}
}

// unpack counts bytes of pages, each of which may be unpacked three times: for the
// columns to be found, for the check and for the values.
func (l *limitAllocator) unpack(n int) {
	if n < 0 || int64(n) > l.most || l.work.Add(int64(n)) > 3*l.most {
		l.refuse()
	}
}

func (l *limitAllocator) refuse() {
	panic(&Error{File: l.file, What: fmt.Sprintf("unpacks to more than %d times its size, or is damaged; it is not read", unpackRatio), Remedy: "fetch or export the file again"})
}

func (l *limitAllocator) Allocate(n int) []byte {
	l.take(n)
	return l.Allocator.Allocate(n)
}

func (l *limitAllocator) Reallocate(n int, b []byte) []byte {
	if n > len(b) {
		l.take(n - len(b))
	} else {
		l.used.Add(int64(n - len(b)))
	}
	return l.Allocator.Reallocate(n, b)
}

func (l *limitAllocator) Free(b []byte) {
	l.used.Add(-int64(len(b)))
	l.Allocator.Free(b)
}
