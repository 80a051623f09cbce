package deal

import (
	"fmt"
	"path/filepath"
	"slices"
	"strconv"
	"strings"
	"time"
)

// Size is what a task asks of the scheduler.
type Size struct {
	CPUs   int
	Memory int64 // bytes
	Time   time.Duration
}

// Job is a run that is dealt out.
type Job struct {
	Name     string // of the jobs, in the scheduler's lists
	Run      string // run directory; absolute, as all paths here
	Program  string // the program that the tasks start
	Parts    int    // of the run
	Part     Size   // of a task
	Judge    Size   // of the judging job
	Throttle int    // most tasks at a time; 0: no limit
	Restarts int    // most restarts that a task asks for itself
	Staging  *Staging
}

// Staging copies the table to a disk of the node.
type Staging struct {
	Folder string   // on the node; may start with a variable, such as $TMPDIR
	Name   string   // of the copy's folder, the same for tasks that share a table
	Files  []string // of the table
	Path   string   // of the table within the copy's folder: a file, "." or a pattern
}

// Folder is where scripts, the program's copy and job numbers of a run are
// kept.
func Folder(run string) string { return filepath.Join(run, "jobs") }

// Check refuses what a script or the scheduler cannot take.
func (j *Job) Check() error {
	paths := []string{j.Run, j.Program}
	if j.Staging != nil {
		paths = append(append(paths, j.Staging.Folder), j.Staging.Files...)
	}
	for _, p := range paths {
		if strings.ContainsFunc(p, func(r rune) bool { return r < ' ' || r == 0x7f || r == '"' }) {
			return fmt.Errorf("deal: %q: a batch script cannot name a path with quotes or control characters in it", p)
		}
	}
	switch {
	case j.Parts < 1:
		return fmt.Errorf("deal: %d parts: at least 1 is needed", j.Parts)
	case j.Part.CPUs < 1:
		return fmt.Errorf("deal: %d processors for a task: at least 1 is needed", j.Part.CPUs)
	case j.Part.Memory < 1:
		return fmt.Errorf("deal: %d bytes of memory for a task: more is needed", j.Part.Memory)
	case j.Part.Time < 1:
		return fmt.Errorf("deal: %v for a task: more time is needed", j.Part.Time)
	case j.Throttle < 0:
		return fmt.Errorf("deal: throttle %d: at least 1 task must run at a time, or 0 for no limit", j.Throttle)
	}
	return nil
}

// Indexes writes a list of parts as the scheduler reads it: 0-3,7.
func Indexes(parts []int) string {
	parts = slices.Sorted(slices.Values(parts))
	var words []string
	for i := 0; i < len(parts); {
		last := i
		for last+1 < len(parts) && parts[last+1] == parts[last]+1 {
			last++
		}
		word := strconv.Itoa(parts[i])
		if last > i {
			word += "-" + strconv.Itoa(parts[last])
		}
		words = append(words, word)
		i = last + 1
	}
	return strings.Join(words, ",")
}

// megabytes rounds an amount of memory up, as the scheduler counts it.
func megabytes(bytes int64) string { return strconv.FormatInt((bytes+1<<20-1)>>20, 10) + "M" }

// limit writes a time limit, rounded up to a minute: [days-]hours:minutes:00.
func limit(d time.Duration) string {
	minutes := int64((d + time.Minute - 1) / time.Minute)
	days, hours := minutes/(24*60), minutes/60%24
	if days > 0 {
		return fmt.Sprintf("%d-%02d:%02d:00", days, hours, minutes%60)
	}
	return fmt.Sprintf("%02d:%02d:00", hours, minutes%60)
}
