package main

import (
	"encoding/csv"
	"math"
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
			"near":      near,
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

// near holds two CSV files to be equal but for rounding: numbers to 1e-7 of the
// larger, other cells to the byte. A column that is named is not looked at: near
// FILE FILE [COLUMN].
func near(ts *testscript.TestScript, neg bool, args []string) {
	if neg || len(args) < 2 || len(args) > 3 {
		ts.Fatalf("usage: near FILE FILE [COLUMN]")
	}
	a, b := records(ts, args[0]), records(ts, args[1])
	if len(a) != len(b) || len(a) < 2 {
		ts.Fatalf("%d and %d lines", len(a), len(b))
	}
	for i := range a {
		for j := range a[i] {
			if len(args) == 3 && a[0][j] == args[2] {
				continue
			}
			if !nearText(a[i][j], b[i][j]) {
				ts.Fatalf("line %d: %s in %s and %s in %s", i+1, a[i][j], args[0], b[i][j], args[1])
			}
		}
	}
}

// records reads a CSV file.
func records(ts *testscript.TestScript, path string) [][]string {
	list, err := csv.NewReader(strings.NewReader(ts.ReadFile(path))).ReadAll()
	ts.Check(err)
	return list
}

// nearText compares two cells.
func nearText(a, b string) bool {
	x, err := strconv.ParseFloat(a, 64)
	y, bad := strconv.ParseFloat(b, 64)
	if err != nil || bad != nil {
		return a == b
	}
	return math.Abs(x-y) <= 1e-7*max(math.Abs(x), math.Abs(y))
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
