package main

import (
	"os/exec"
	"slices"
	"strings"
	"testing"
)

// TestShellCommand: a real shell reads the words back.
func TestShellCommand(t *testing.T) {
	words := []string{"run", "my study.toml", "--set", `decision.threshold="0.9"`, "it's", "", "$HOME", "a\nb", "*", "`x`", "--", "{a,b}", "~", "#", "ä", `\`, "a=b"}
	out, err := exec.Command("sh", "-c", `printf '%s\0' `+shellCommand(words)).Output()
	if err != nil {
		t.Fatal(err)
	}
	if got := strings.Split(strings.TrimSuffix(string(out), "\x00"), "\x00"); !slices.Equal(got, words) {
		t.Errorf("the shell read %q", got)
	}
	if got := shellCommand([]string{"holdfast", "run", "demo/study.toml"}); got != "holdfast run demo/study.toml" {
		t.Errorf("%s: quoted without need", got)
	}
}
