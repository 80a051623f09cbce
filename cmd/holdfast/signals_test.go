package main

import (
	"context"
	"io"
	"os"
	"os/exec"
	"path/filepath"
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
// to read what it says, and keeps that in its log.
func TestHangup(t *testing.T) {
	dir := spectraStudy(t)
	want := func() map[string]string {
		finish(t, dir, "run", "study.toml", "--draws", "800", "--out", "whole.run")
		return resultTables(t, filepath.Join(dir, "whole.run"))
	}()
	cmd := exec.Command("holdfast", "run", "study.toml", "--draws", "800", "--out", "a.run")
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
	waitFor(t, "the first block", func() bool { return blocks(filepath.Join(dir, "a.run")) > 0 })
	out.Close()
	errs.Close()
	cmd.Process.Signal(syscall.SIGHUP)
	cmd.Wait()
	if code := cmd.ProcessState.ExitCode(); code != 0 {
		t.Errorf("exit code %d", code)
	}
	sameTables(t, want, filepath.Join(dir, "a.run"))
	log := text(t, filepath.Join(dir, "a.run", "logs", "part-0.log"))
	for _, word := range []string{"the terminal was closed; the run goes on", "results are in a.run", " end: exit 0, 800 draws whole"} {
		if !strings.Contains(log, word) {
			t.Errorf("the log lacks %q:\n%s", word, log)
		}
	}
}
