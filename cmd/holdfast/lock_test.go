package main

import (
	"encoding/json"
	"fmt"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"holdfast/io/rundir"
)

// TestTwoProcessesOnOnePart: the second leaves and names the first, or takes
// over if it is told to; both then finish with the same bytes, so that nothing
// hangs on the lock. A dead holder is taken over from at once.
func TestTwoProcessesOnOnePart(t *testing.T) {
	dir := spectraStudy(t)
	run := func(out string, more ...string) []string {
		return append([]string{"run", "study.toml", "--draws", "1600", "--workers", "1", "--out", out}, more...)
	}
	finish(t, dir, run("whole.run")...)
	want := resultTables(t, filepath.Join(dir, "whole.run"))
	out := filepath.Join(dir, "a.run")

	first := start(t, dir, run("a.run")...)
	waitFor(t, "the first block", func() bool { return blocks(out) > 0 })
	for _, more := range [][]string{nil, {"--wait", "50ms"}} {
		second := start(t, dir, run("a.run", more...)...)
		if code := second.wait(t); code != 1 {
			t.Errorf("%v: exit code %d", more, code)
		}
		host, err := os.Hostname()
		if err != nil {
			t.Fatal(err)
		}
		for _, word := range []string{fmt.Sprintf("process %d on %s", first.cmd.Process.Pid, host), "--wait", "--take-over"} {
			if !strings.Contains(second.err.String(), word) {
				t.Errorf("%v: it does not say %q: %s", more, word, &second.err)
			}
		}
	}
	runningStatus(t, dir, first.cmd.Process.Pid)
	third := start(t, dir, run("a.run", "--take-over")...)
	if code := third.wait(t); code != 0 {
		t.Errorf("--take-over: exit code %d: %s", code, &third.err)
	}
	if code := first.wait(t); code != 0 {
		t.Errorf("the one that was taken over from: exit code %d: %s", code, &first.err)
	}
	sameTables(t, want, out)

	dead := start(t, dir, run("b.run")...)
	waitFor(t, "the first block", func() bool { return blocks(filepath.Join(dir, "b.run")) > 0 })
	dead.cmd.Process.Kill()
	dead.wait(t)
	if _, err := os.Stat(filepath.Join(dir, "b.run", "parts", "0.lock")); err != nil {
		t.Fatalf("the killed process left no lock: %v", err)
	}
	finish(t, dir, run("b.run")...)
	sameTables(t, want, filepath.Join(dir, "b.run"))
}

// runningStatus holds the status of a run under way: who works on it, and how
// long it will take.
func runningStatus(t *testing.T, dir string, pid int) {
	t.Helper()
	var s status
	if err := json.Unmarshal(finish(t, dir, "status", "a.run", "--json").out.Bytes(), &s); err != nil {
		t.Fatal(err)
	}
	if len(s.Parts) != 1 || s.Draws != 1600 || s.Done <= 0 || s.Done >= 1600 {
		t.Fatalf("status %+v", s)
	}
	if p := s.Parts[0]; p.State != "running" || p.PID != pid || p.Done != s.Done || s.Left == nil || *s.Left > 3600 {
		t.Errorf("status %+v", s)
	}
}

// TestTimeLeft: 10 draws in 20 seconds, beside 6 that were there before, leave
// 48 seconds for the other 24.
func TestTimeLeft(t *testing.T) {
	start := time.Date(2031, 5, 1, 8, 0, 0, 0, time.UTC)
	left := timeLeft(rundir.Part{Started: start.Format(time.RFC3339), Before: 6}, 16, 40, start.Add(20*time.Second))
	if left == nil || *left != 48 {
		t.Errorf("left %v", left)
	}
	if left := timeLeft(rundir.Part{Started: start.Format(time.RFC3339), Before: 6}, 6, 40, start.Add(time.Minute)); left != nil {
		t.Errorf("nothing was made, and %v seconds are left", *left)
	}
}

// TestWaitForAPart: one who waits goes on when the first has ended, and finds
// nothing left to do.
func TestWaitForAPart(t *testing.T) {
	dir := spectraStudy(t)
	args := []string{"run", "study.toml", "--draws", "800", "--workers", "1", "--out", "a.run"}
	first := start(t, dir, args...)
	waitFor(t, "the first block", func() bool { return blocks(filepath.Join(dir, "a.run")) > 0 })
	second := finish(t, dir, append(args, "--wait", "1m")...)
	if code := first.wait(t); code != 0 {
		t.Fatalf("exit code %d: %s", code, &first.err)
	}
	if !strings.Contains(second.err.String(), "800 draws are there, 0 are to be made") {
		t.Errorf("it says: %s", &second.err)
	}
}
