package main

import (
	"bufio"
	"bytes"
	"fmt"
	"os/exec"
	"strconv"
	"strings"
)

// kernelPrefix begins the name of every function of our inner loops.
const kernelPrefix = "holdfast/solver/kernel."

// kernelShare reads a CPU profile of the engine with go tool pprof and
// returns the share of the time spent in package kernel itself.
func (s settings) kernelShare(profile string) (float64, error) {
	text, err := exec.Command("go", "tool", "pprof", "-top", "-nodecount=1000000", "-nodefraction=0", s.engine(), profile).Output()
	if err != nil {
		return 0, fmt.Errorf("go tool pprof: %w", err)
	}
	return shareOf(text, kernelPrefix)
}

// shareOf adds the "flat%" column of pprof's top listing over the functions
// whose name begins with prefix.
func shareOf(listing []byte, prefix string) (float64, error) {
	share, rows := 0.0, 0
	lines := bufio.NewScanner(bytes.NewReader(listing))
	for lines.Scan() {
		f := strings.Fields(lines.Text()) // flat flat% sum% cum cum% name...
		if len(f) < 6 || !strings.HasSuffix(f[1], "%") {
			continue
		}
		percent, err := strconv.ParseFloat(strings.TrimSuffix(f[1], "%"), 64)
		if err != nil {
			continue
		}
		rows++
		if strings.HasPrefix(f[5], prefix) {
			share += percent / 100
		}
	}
	if rows == 0 {
		return 0, fmt.Errorf("go tool pprof: no functions in its listing")
	}
	return share, lines.Err()
}
