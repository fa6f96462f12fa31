//go:build unix

package ingest

import (
	"syscall"
	"time"
)

// cpuTime is the processor time that the process has used: on a busy machine it
// says more of a rate than the clock does.
func cpuTime() time.Duration {
	var u syscall.Rusage
	if syscall.Getrusage(syscall.RUSAGE_SELF, &u) != nil {
		return 0
	}
	return time.Duration(u.Utime.Nano() + u.Stime.Nano())
}
