//go:build !linux

package resample

import "runtime"

// systemLimits knows the number of processors only: affinity and quotas are
// read on Linux.
func systemLimits() []CPULimit {
	return []CPULimit{{Source: "processors", CPUs: runtime.NumCPU()}}
}
