package resample

import (
	"fmt"
	"os"

	"golang.org/x/sys/unix"
)

// systemLimits reads the affinity mask and the control group's quota.
func systemLimits() []CPULimit {
	limits := []CPULimit{affinity()}
	if quota, ok := cgroupQuota(os.DirFS("/")); ok {
		limits = append(limits, quota)
	}
	return limits
}

// affinity counts the processors this process may be scheduled on. The mask
// of the system call library has room for 1024; a machine with more answers
// with an error, which is passed on.
func affinity() CPULimit {
	var set unix.CPUSet
	if err := unix.SchedGetaffinity(0, &set); err != nil {
		return CPULimit{Source: "affinity", Why: fmt.Sprintf("could not be read: %v", err)}
	}
	return CPULimit{Source: "affinity", CPUs: set.Count()}
}
