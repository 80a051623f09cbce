package main

import (
	"fmt"
	"os"
	"strconv"
	"strings"

	"github.com/spf13/cobra"

	"holdfast/io/rundir"
	"holdfast/resample"
)

// taskVariables are set by schedulers to the number of a task in its job:
// Slurm's job arrays and Kubernetes' indexed jobs.
var taskVariables = []string{"SLURM_ARRAY_TASK_ID", "JOB_COMPLETION_INDEX"}

// share says which part of the draws this process makes. How many parts there
// are is never taken from a scheduler: a job that only makes up for parts 1 and
// 3 of 4 tells its tasks that there are 2.
type share struct {
	parts    int // 0: not said
	part     int
	only     bool // that part alone, and no judgement
	fromTask string
}

// readShare reads --parts and --part.
func readShare(c *cobra.Command, parts int, part string) (share, error) {
	s := share{parts: parts}
	if c.Flags().Changed("parts") && parts < 1 {
		return s, misuse(fmt.Sprintf("holdfast run: --parts %d: must be at least 1", parts), "")
	}
	if !c.Flags().Changed("part") {
		return s, nil
	}
	s.only = true
	text := part
	if part == "auto" {
		if s.fromTask, text = taskNumber(); s.fromTask == "" {
			return s, misuse("holdfast run: --part auto: neither "+strings.Join(taskVariables, " nor ")+" is set, so this is no task of a job array",
				"give the number: --part 0")
		}
	}
	n, err := strconv.Atoi(strings.TrimSpace(text))
	if err != nil || n < 0 {
		return s, misuse(fmt.Sprintf("holdfast run: --part %s: %q is no number of a part", part, text), "parts are numbered from 0; auto takes the number from the scheduler")
	}
	s.part = n
	return s, nil
}

// taskNumber returns the variable that tells the number of this task, and its
// value.
func taskNumber() (name, value string) {
	for _, name := range taskVariables {
		if value := os.Getenv(name); value != "" {
			return name, value
		}
	}
	return "", ""
}

// settle takes the number of parts from a run directory that exists, and checks
// that there is such a part.
func (s share) settle(out string, dir *rundir.Dir) (share, error) {
	switch {
	case dir != nil && s.parts != 0 && s.parts != dir.PartCount():
		return s, misuse(fmt.Sprintf("holdfast run: --parts %d: %s was made for %d, and its draws are dealt out by that number", s.parts, out, dir.PartCount()),
			"leave --parts out: the number is kept in the run directory")
	case dir != nil:
		s.parts = dir.PartCount()
	case s.parts == 0 && s.only:
		return s, misuse("holdfast run: --part: "+out+" does not exist yet, so the number of parts must be said", "add --parts N")
	case s.parts == 0:
		s.parts = 1
	}
	if s.only && s.part >= s.parts {
		where := ""
		if s.fromTask != "" {
			where = " (from " + s.fromTask + ")"
		}
		return s, misuse(fmt.Sprintf("holdfast run: part %d%s: there are %d parts, numbered 0 to %d", s.part, where, s.parts, s.parts-1), "")
	}
	return s, nil
}

// list names the parts that this process may work on.
func (s share) list() []int {
	if s.only {
		return []int{s.part}
	}
	all := make([]int, s.parts)
	for i := range all {
		all[i] = i
	}
	return all
}

// draws lists the draws of the share.
func (s share) draws(plan resample.Plan) []int {
	if s.only {
		return resample.Part(plan, s.part, s.parts)
	}
	return resample.Part(plan, 0, 1)
}

// String names the share in a line of talk.
func (s share) String() string {
	switch {
	case s.only:
		return fmt.Sprintf("part %d of %d", s.part, s.parts)
	case s.parts > 1:
		return fmt.Sprintf("all %d parts", s.parts)
	}
	return "the whole run"
}
