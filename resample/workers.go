package resample

import (
	"fmt"
	"os"
	"strconv"
)

// schedulerVariable is set by Slurm to the processors of a task.
const schedulerVariable = "SLURM_CPUS_PER_TASK"

// CPULimit is one bound on the processors this process may use.
type CPULimit struct {
	Source string // "processors", "affinity", "cgroup quota" or the scheduler's variable
	CPUs   int    // at least 1; 0 where Why is set
	Why    string // why the bound could not be read; it then counts for nothing
}

// Workers returns how many workers this process should run: the smallest of
// its CPU affinity, its control group's quota (versions 1 and 2; a part of a
// processor counts as one, so that the quota is used up) and the scheduler's
// SLURM_CPUS_PER_TASK; at least 1.
func Workers() int {
	return smallest(CPULimits())
}

// CPULimits returns every bound that Workers looked at and found set.
func CPULimits() []CPULimit {
	limits := systemLimits()
	if text, ok := os.LookupEnv(schedulerVariable); ok {
		limits = append(limits, schedulerLimit(text))
	}
	return limits
}

// schedulerLimit reads the scheduler's variable.
func schedulerLimit(text string) CPULimit {
	n, err := strconv.Atoi(text)
	if err != nil || n < 1 {
		return CPULimit{Source: schedulerVariable, Why: fmt.Sprintf("%q is not a number of processors", text)}
	}
	return CPULimit{Source: schedulerVariable, CPUs: n}
}

// smallest is the least bound that could be read.
func smallest(limits []CPULimit) int {
	n := 0
	for _, l := range limits {
		if l.CPUs > 0 && (n == 0 || l.CPUs < n) {
			n = l.CPUs
		}
	}
	return max(n, 1)
}
