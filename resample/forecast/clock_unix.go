//go:build unix

package forecast

import (
	"syscall"
	"time"
)

// processorTime is what this process has used so far, all threads together.
func processorTime() (time.Duration, bool) {
	var u syscall.Rusage
	if err := syscall.Getrusage(syscall.RUSAGE_SELF, &u); err != nil {
		return 0, false
	}
	return time.Duration(u.Utime.Nano() + u.Stime.Nano()), true
}
