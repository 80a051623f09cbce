package main

import (
	"context"
	"io"
	"os"
	"os/exec"
	"path/filepath"
	"slices"
	"strings"
	"syscall"
	"testing"
	"time"
)

// TestSignalsInOrder: while a command works in an orderly way the first signal
// only asks it to begin nothing new; the second ends its context. Otherwise the
// first one does.
func TestSignalsInOrder(t *testing.T) {
	for _, orderly := range []bool{true, false} {
		ctx, cancel := context.WithCancelCause(t.Context())
		w := &watch{talk: io.Discard, cancel: cancel, stop: make(chan struct{})}
		if orderly {
			if err := w.begin(); err != nil {
				t.Fatal(err)
			}
		}
		if !w.receive(os.Interrupt) {
			t.Error("the first signal is taken for the second")
		}
		select {
		case <-w.stop:
		default:
			t.Error("the first signal does not close stop")
		}
		if ended := ctx.Err() != nil; ended == orderly {
			t.Errorf("orderly %v: after the first signal the context has ended: %v", orderly, ended)
		}
		if w.begin() == nil {
			t.Error("something begins after the first signal")
		}
		if w.receive(syscall.SIGTERM) {
			t.Error("the second signal is taken for the first")
		}
		if ctx.Err() == nil {
			t.Error("the second signal does not end the context")
		}
		if got := w.cause().code(); got != 130 {
			t.Errorf("exit code %d", got)
		}
	}
}

// TestSecondSignal: a program that does not listen is ended by the second
// signal, with the signal's exit code.
func TestSecondSignal(t *testing.T) {
	cmd := exec.Command("stubborn")
	out, err := cmd.StdoutPipe()
	if err != nil {
		t.Fatal(err)
	}
	if err := cmd.Start(); err != nil {
		t.Fatal(err)
	}
	defer cmd.Process.Kill()
	if _, err := io.ReadFull(out, make([]byte, 6)); err != nil {
		t.Fatal(err)
	}
	cmd.Process.Signal(syscall.SIGTERM)
	time.Sleep(50 * time.Millisecond)
	begin := time.Now()
	cmd.Process.Signal(syscall.SIGTERM)
	cmd.Wait()
	if code := cmd.ProcessState.ExitCode(); code != 143 {
		t.Errorf("exit code %d", code)
	}
	if took := time.Since(begin); took > grace+5*time.Second {
		t.Errorf("it took %v", took)
	}
}

// stubborn is a program that works for ever and listens to nothing.
func stubborn() {
	w, _, _ := watchSignals(io.Discard)
	if w.begin() == nil {
		os.Stdout.WriteString("ready\n")
	}
	select {}
}

// TestHangup: a run whose terminal closes goes on to its end, without anybody
// to read what it says, and keeps that in its log. A signal after that ends it
// in order.
func TestHangup(t *testing.T) {
	dir := spectraStudy(t)
	finish(t, dir, "run", "study.toml", "--draws", "800", "--out", "whole.run")
	want := resultTables(t, filepath.Join(dir, "whole.run"))
	code, log := hangUp(t, dir, nil, "run", "study.toml", "--draws", "800", "--out", "a.run")
	if code != 0 {
		t.Errorf("exit code %d", code)
	}
	sameTables(t, want, filepath.Join(dir, "a.run"))
	for _, word := range []string{"the terminal was closed; the run goes on", "results are in a.run", " end: exit 0, 800 draws whole"} {
		if !strings.Contains(log, word) {
			t.Errorf("the log lacks %q:\n%s", word, log)
		}
	}
	code, log = hangUp(t, dir, syscall.SIGTERM, append([]string{"run", "study.toml", "--out", "b.run"}, manyDraws...)...)
	if code != 143 || !strings.Contains(log, " end: exit 143, ") {
		t.Errorf("SIGTERM after it: exit code %d, log\n%s", code, log)
	}
}

// hangUp starts a run, closes its streams and its terminal once there are
// draws, and sends another signal if one is given. It returns the exit code and
// the log.
func hangUp(t *testing.T, dir string, then os.Signal, args ...string) (code int, log string) {
	t.Helper()
	run := filepath.Join(dir, args[slices.Index(args, "--out")+1])
	cmd := exec.Command("holdfast", args...)
	cmd.Dir = dir
	out, err := cmd.StdoutPipe()
	if err != nil {
		t.Fatal(err)
	}
	errs, err := cmd.StderrPipe()
	if err != nil {
		t.Fatal(err)
	}
	if err := cmd.Start(); err != nil {
		t.Fatal(err)
	}
	defer cmd.Process.Kill()
	waitFor(t, "the first block", func() bool { return blocks(run) > 0 })
	out.Close()
	errs.Close()
	cmd.Process.Signal(syscall.SIGHUP)
	path := filepath.Join(run, "logs", "part-0.log")
	waitFor(t, "the word about the terminal", func() bool { return strings.Contains(text(t, path), "the terminal was closed") })
	if then != nil {
		cmd.Process.Signal(then)
	}
	cmd.Wait()
	return cmd.ProcessState.ExitCode(), text(t, path)
}
