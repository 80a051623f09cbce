package rundir

import (
	"errors"
	"fmt"
	"os"
	"strconv"
	"strings"
	"syscall"
	"time"
)

// environment is what locks ask of the machine. Tests put others in its place.
type environment struct {
	self  func() holder
	alive func(holder) bool // of a process on this machine, since its start
	sleep func(d time.Duration, done <-chan struct{}) bool
	beat  time.Duration // between two touches of a lock
	stale time.Duration // a lock that was not touched for so long is nobody's
	poll  time.Duration // between two looks at a lock that is held
}

// machine is the real one. A holder may miss five touches before it counts as
// dead: a busy file server can keep one waiting for long.
var machine = &environment{
	self: self, alive: alive, sleep: sleep,
	beat: 20 * time.Second, stale: 2 * time.Minute, poll: time.Second,
}

// dead reports whether a holder is known to be dead: it is an earlier start of
// the task that we are, or a process of this machine that has ended. Of other
// machines nothing is known.
func (e *environment) dead(h holder) bool {
	me := e.self()
	if h.Task != "" && h.Task == me.Task && h.Restart < me.Restart {
		return true
	}
	here := h.Host == me.Host && h.Boot == me.Boot && h.Space == me.Space
	return h.PID > 0 && here && !e.alive(h)
}

// self describes this process.
func self() holder {
	host, err := os.Hostname()
	if err != nil {
		host = "unknown"
	}
	task, restart := schedulerTask(os.Getenv)
	return holder{
		Host: host, Boot: firstLine("/proc/sys/kernel/random/boot_id"), Space: processSpace(),
		PID: os.Getpid(), Start: processStart(os.Getpid()), Task: task, Restart: restart,
	}
}

// schedulerTask names the Slurm task that this process is, and how often it
// was started again. Slurm starts a task again only when the one before has
// ended. Other schedulers do not say so much.
func schedulerTask(env func(string) string) (task string, restart int) {
	job, index := env("SLURM_ARRAY_JOB_ID"), env("SLURM_ARRAY_TASK_ID")
	if job == "" || index == "" {
		job, index = env("SLURM_JOB_ID"), ""
	}
	if job == "" {
		return "", 0
	}
	restart, err := strconv.Atoi(env("SLURM_RESTART_COUNT"))
	if err != nil || restart < 0 {
		restart = 0 // not set before the first restart
	}
	return fmt.Sprintf("slurm %s %s %s", env("SLURM_CLUSTER_NAME"), job, index), restart
}

// alive reports whether a process of this machine still runs. A number that
// was given to another process since is found by the time of its start.
func alive(h holder) bool {
	if err := syscall.Kill(h.PID, 0); errors.Is(err, syscall.ESRCH) {
		return false
	}
	start := processStart(h.PID)
	return h.Start == "" || start == "" || start == h.Start
}

// processStart is when a process began, as Linux counts; "" where that cannot
// be told. It is the 22nd field of its stat, the 20th behind the name, which
// stands in brackets and may hold anything.
func processStart(pid int) string {
	text := firstLine(fmt.Sprintf("/proc/%d/stat", pid))
	fields := strings.Fields(text[strings.LastIndexByte(text, ')')+1:])
	if len(fields) < 20 {
		return ""
	}
	return fields[19]
}

// processSpace tells containers apart that share a machine; "" where the
// system has no such thing.
func processSpace() string {
	name, err := os.Readlink("/proc/self/ns/pid")
	if err != nil {
		return ""
	}
	return name
}

// firstLine is the first line of a small file of the system, or "".
func firstLine(path string) string {
	text, err := os.ReadFile(path)
	if err != nil {
		return ""
	}
	line, _, _ := strings.Cut(string(text), "\n")
	return line
}

// sleep returns false where done was closed first.
func sleep(d time.Duration, done <-chan struct{}) bool {
	timer := time.NewTimer(d)
	defer timer.Stop()
	select {
	case <-timer.C:
		return true
	case <-done:
		return false
	}
}
