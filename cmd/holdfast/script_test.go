package main

import (
	"os"
	"os/exec"
	"path/filepath"
	"strconv"
	"strings"
	"syscall"
	"testing"
	"time"

	"github.com/rogpeppe/go-internal/testscript"
)

// TestMain lets the scripts run the program as a user types it.
func TestMain(m *testing.M) {
	testscript.Main(m, map[string]func(){"holdfast": main, "stubborn": stubborn})
}

// TestScripts runs testdata/*.txtar: each types commands and checks the exit
// code, both streams and the files left behind. $DATA is the folder of the
// open data sets.
func TestScripts(t *testing.T) {
	data, err := filepath.Abs(filepath.Join("..", "..", "testdata", "data"))
	if err != nil {
		t.Fatal(err)
	}
	testscript.Run(t, testscript.Params{
		Dir:                 "testdata",
		RequireExplicitExec: true,
		RequireUniqueNames:  true,
		Setup: func(e *testscript.Env) error {
			e.Setenv("DATA", data)
			return nil
		},
		Cmds: map[string]func(ts *testscript.TestScript, neg bool, args []string){
			"exits":     exits,
			"disjoint":  disjoint,
			"interrupt": interrupt,
			"damage":    damage,
			"appendrow": appendRow,
			"killlog":   killLog,
			"unset":     unset,
		},
	})
}

// exits runs a command and holds it to an exit code: exits CODE COMMAND ...
func exits(ts *testscript.TestScript, neg bool, args []string) {
	if neg || len(args) < 2 {
		ts.Fatalf("usage: exits CODE COMMAND [ARGUMENT ...]")
	}
	err := ts.Exec(args[1], args[2:]...)
	code := "0"
	if err != nil {
		code = exitText(err)
	}
	if code != args[0] {
		ts.Fatalf("%v: exit code %s, want %s", args[1:], code, args[0])
	}
}

// exitText returns the exit code inside err as text.
func exitText(err error) string {
	if e, ok := err.(interface{ ExitCode() int }); ok {
		return strconv.Itoa(e.ExitCode())
	}
	return err.Error()
}

// disjoint holds two files to have no line in common but the first.
func disjoint(ts *testscript.TestScript, neg bool, args []string) {
	if neg || len(args) != 2 {
		ts.Fatalf("usage: disjoint FILE FILE")
	}
	seen := map[string]bool{}
	for _, line := range strings.Split(ts.ReadFile(args[0]), "\n")[1:] {
		seen[line] = line != ""
	}
	for _, line := range strings.Split(ts.ReadFile(args[1]), "\n")[1:] {
		if seen[line] {
			ts.Fatalf("%q is in both", line)
		}
	}
}

// interrupt starts a command, waits until a file that fits a glob is there,
// sends a signal, and holds the exit code: interrupt SIGNAL GLOB CODE COMMAND
// ... The command's stderr goes to the file talk, its stdout to the file data.
func interrupt(ts *testscript.TestScript, neg bool, args []string) {
	if neg || len(args) < 4 {
		ts.Fatalf("usage: interrupt SIGNAL GLOB CODE COMMAND [ARGUMENT ...]")
	}
	signal := map[string]os.Signal{"INT": os.Interrupt, "TERM": syscall.SIGTERM}[args[0]]
	path, err := exec.LookPath(filepath.Join(strings.Split(ts.Getenv("PATH"), string(os.PathListSeparator))[0], args[3]))
	ts.Check(err)
	cmd := exec.Command(path, args[4:]...)
	cmd.Dir = ts.MkAbs(".")
	cmd.Env = append(os.Environ(), "HOME="+ts.Getenv("HOME"))
	talk, err := os.Create(ts.MkAbs("talk"))
	ts.Check(err)
	defer talk.Close()
	data, err := os.Create(ts.MkAbs("data"))
	ts.Check(err)
	defer data.Close()
	cmd.Stdout, cmd.Stderr = data, talk
	ts.Check(cmd.Start())
	for start := time.Now(); ; time.Sleep(5 * time.Millisecond) {
		if found, _ := filepath.Glob(ts.MkAbs(args[1])); len(found) > 0 {
			break
		}
		if time.Since(start) > time.Minute {
			cmd.Process.Kill()
			ts.Fatalf("no file %s within a minute", args[1])
		}
	}
	ts.Check(cmd.Process.Signal(signal))
	code := "0"
	if err := cmd.Wait(); err != nil {
		code = exitText(err)
	}
	if code != args[2] {
		ts.Fatalf("exit code %s, want %s", code, args[2])
	}
}

// change rewrites a file.
func change(ts *testscript.TestScript, args []string, how func(text string) string) {
	if len(args) != 1 {
		ts.Fatalf("one file is needed")
	}
	path := ts.MkAbs(args[0])
	text, err := os.ReadFile(path)
	ts.Check(err)
	ts.Check(os.WriteFile(path, []byte(how(string(text))), 0o644))
}

// damage flips a bit in the middle of a file.
func damage(ts *testscript.TestScript, neg bool, args []string) {
	change(ts, args, func(text string) string {
		b := []byte(text)
		b[len(b)/2] ^= 4
		return string(b)
	})
}

// appendRow repeats the last line of a CSV file.
func appendRow(ts *testscript.TestScript, neg bool, args []string) {
	change(ts, args, func(text string) string {
		lines := strings.Split(strings.TrimRight(text, "\n"), "\n")
		return strings.Join(append(lines, lines[len(lines)-1]), "\n") + "\n"
	})
}

// killLog takes the last line off a log, as if the process had been killed
// before it wrote one.
func killLog(ts *testscript.TestScript, neg bool, args []string) {
	change(ts, args, func(text string) string {
		lines := strings.SplitAfter(text, "\n")
		return strings.Join(lines[:len(lines)-2], "")
	})
}

// unset takes a variable out of the environment.
func unset(ts *testscript.TestScript, neg bool, args []string) {
	ts.Setenv(args[0], "")
}
