package shape

import (
	"errors"
	"fmt"
	"os"
	"strings"
	"syscall"
)

// PeakMemory returns the largest resident size that this process has had, in
// bytes, from the kernel's own record. It knows Linux only. The record in
// getrusage will not do: it holds what the starting process had before.
func PeakMemory() (int64, error) {
	text, err := os.ReadFile("/proc/self/status")
	if err != nil {
		return 0, fmt.Errorf("shape: peak memory: %w", err)
	}
	for line := range strings.Lines(string(text)) {
		var kilobytes int64
		if _, err := fmt.Sscanf(line, "VmHWM: %d kB", &kilobytes); err == nil {
			return kilobytes * 1024, nil
		}
	}
	return 0, errors.New("shape: peak memory: the kernel does not record it")
}

// CPUTime returns the seconds of processor time that this process has used,
// which is what a run costs on a machine that others use too.
func CPUTime() float64 {
	var u syscall.Rusage
	if err := syscall.Getrusage(syscall.RUSAGE_SELF, &u); err != nil {
		panic(err) // the arguments are constants that the kernel knows
	}
	return float64(u.Utime.Nano()+u.Stime.Nano()) / 1e9
}
