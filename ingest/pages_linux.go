package ingest

import (
	"syscall"
	"unsafe"
)

// largePages asks the kernel to back a new column with large pages. A column is
// written once from end to end, and most of the time that takes in a fresh
// process is that of small pages being handed out one by one: a quarter of the
// whole reading time was seen. It is a hint; where it is refused nothing
// changes.
func largePages(b []byte) {
	const large = 2 << 20
	if len(b) < 2*large {
		return
	}
	from := -uintptr(unsafe.Pointer(&b[0])) & (large - 1)
	to := uintptr(len(b)) - (uintptr(unsafe.Pointer(&b[0]))+uintptr(len(b)))&(large-1)
	if from < to {
		syscall.Madvise(b[from:to], syscall.MADV_HUGEPAGE)
	}
}
