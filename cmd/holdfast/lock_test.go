package main

import (
	"fmt"
	"os"
	"path/filepath"
	"strings"
	"testing"
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
