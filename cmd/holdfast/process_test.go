package main

import (
	"bytes"
	"errors"
	"os"
	"os/exec"
	"path/filepath"
	"testing"
	"time"
)

// process is the program, started as a process of its own.
type process struct {
	cmd      *exec.Cmd
	out, err bytes.Buffer
}

// start starts the program in a folder. TestMain put it on the path.
func start(t *testing.T, dir string, args ...string) *process {
	t.Helper()
	p := prepare(t, dir, args...)
	p.start(t)
	return p
}

// prepare is start without starting.
func prepare(t *testing.T, dir string, args ...string) *process {
	t.Helper()
	p := &process{cmd: exec.Command("holdfast", args...)}
	p.cmd.Dir, p.cmd.Stdout, p.cmd.Stderr = dir, &p.out, &p.err
	return p
}

func (p *process) start(t *testing.T) {
	t.Helper()
	if err := p.cmd.Start(); err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { p.cmd.Process.Kill() })
}

// wait waits for the end and returns the exit code, -1 for a kill.
func (p *process) wait(t *testing.T) int {
	t.Helper()
	err := p.cmd.Wait()
	var exit *exec.ExitError
	if err != nil && !errors.As(err, &exit) {
		t.Fatal(err)
	}
	return p.cmd.ProcessState.ExitCode()
}

// finish runs the program to its end, which must be well.
func finish(t *testing.T, dir string, args ...string) *process {
	t.Helper()
	p := start(t, dir, args...)
	if code := p.wait(t); code != 0 {
		t.Fatalf("%v: exit code %d: %s", args, code, &p.err)
	}
	return p
}

// spectraStudy writes a study of near-infrared spectra (60 rows, 401 candidates) and
// returns its folder.
func spectraStudy(t *testing.T) string {
	t.Helper()
	dir := t.TempDir()
	table, err := filepath.Abs(filepath.Join("..", "..", "testdata", "data", "gasoline.csv"))
	if err != nil {
		t.Fatal(err)
	}
	finish(t, dir, "draft", table, "--outcome", "octane", "--out", "study.toml")
	return dir
}

// sameTables holds the tables of a run to those of another, byte for byte.
func sameTables(t *testing.T, want map[string]string, run string) {
	t.Helper()
	for name, text := range resultTables(t, run) {
		if text != want[name] {
			t.Errorf("%s: %s differs from that of an undisturbed run", run, name)
		}
	}
}

// blocks is how many finished blocks a run has.
func blocks(run string) int {
	found, err := filepath.Glob(filepath.Join(run, "draws", "block-*.parquet"))
	if err != nil {
		panic(err) // the pattern is a constant
	}
	return len(found)
}

// waitFor waits until something is so.
func waitFor(t *testing.T, what string, so func() bool) {
	t.Helper()
	for begin := time.Now(); !so(); time.Sleep(2 * time.Millisecond) {
		if time.Since(begin) > time.Minute {
			t.Fatalf("%s: not within a minute", what)
		}
	}
}

// text reads a file.
func text(t *testing.T, path string) string {
	t.Helper()
	b, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	return string(b)
}

// manyDraws asks for a number of draws that takes some seconds.
var manyDraws = []string{"--draws", "4000"}
