//go:build !unix

package stdf

import "time"

func cpuTime() time.Duration { return 0 }
