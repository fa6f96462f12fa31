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
	// The pages at both ends too: next to a column there is most often another.
	at := uintptr(unsafe.Pointer(&b[0]))
	from, to := at&^(large-1), (at+uintptr(len(b))+large-1)&^(large-1)
	syscall.Syscall(syscall.SYS_MADVISE, from, to-from, syscall.MADV_HUGEPAGE)
}
