package main

import (
	"bufio"
	"fmt"
	"io"
	"os"
	"runtime"
	"strings"
	"syscall"
	"time"

	"holdfast/resample"
	"holdfast/solver"
)

// Words with which the log of a part begins and ends what one process says.
const (
	beginWord = "begin:"
	endWord   = "end:"
)

// history is what a log says about the processes before this one.
type history struct {
	starts   int
	open     bool   // the last one ended without a last word
	lastWord string // its last line
}

// readHistory reads a log; one that is not there is empty.
func readHistory(path string) (h history) {
	f, err := os.Open(path)
	if err != nil {
		return h
	}
	defer f.Close()
	lines := bufio.NewReader(f)
	for {
		line, err := lines.ReadString('\n')
		_, text, _ := strings.Cut(strings.TrimSpace(line), " ")
		switch {
		case strings.HasPrefix(text, beginWord):
			h.starts++
			h.open = true
		case strings.HasPrefix(text, endWord):
			h.open = false
		}
		if text != "" {
			h.lastWord = strings.TrimSpace(line)
		}
		if err != nil {
			return h
		}
	}
}

// firstLine says where this process runs.
func (h history) firstLine(s share, workers int) string {
	host, err := os.Hostname()
	if err != nil {
		host = "unknown"
	}
	return fmt.Sprintf("%s host %s, %d cores for this process, kernel %s, %s/%s, holdfast %s, restart %d, %s, %d workers, process %d\n",
		beginWord, host, resample.Workers(), solver.Kernel(), runtime.GOOS, runtime.GOARCH, version(), h.starts, s, workers, os.Getpid())
}

// killed says what a log without a last line means, and what to do.
func (h history) killed(w io.Writer) {
	if !h.open {
		return
	}
	fmt.Fprintf(w, "the last start ended without a last word, as a kill does (out of memory, a time limit) or a power cut; its last line: %s\n", oneLine(h.lastWord))
	fmt.Fprintln(w, "if memory ran out (the scheduler or dmesg tells), give --memory SIZE with what there is, or fewer --workers; finished draws are kept")
}

// usage is what a process has used from a moment on.
type usage struct {
	began time.Time
	cpu   time.Duration
}

func startUsage() usage { return usage{time.Now(), cpuTime()} }

// cpuTime is the processor time of this process.
func cpuTime() time.Duration {
	var u syscall.Rusage
	if syscall.Getrusage(syscall.RUSAGE_SELF, &u) != nil {
		return 0
	}
	return time.Duration(u.Utime.Nano() + u.Stime.Nano())
}

// lastLine says how it ended and what it used.
func (u usage) lastLine(how string, workers int) string {
	wall, cpu := time.Since(u.began), cpuTime()-u.cpu
	memory := "unknown"
	if _, peak := memoryNow(); peak > 0 {
		memory = sizeText(peak)
	}
	share := 100 * cpu.Seconds() / max(wall.Seconds()*float64(max(workers, 1)), 1e-9)
	return fmt.Sprintf("%s %s, peak memory %s, CPU efficiency %.0f %% (%.1f s of processor time in %.1f s with %d workers)\n",
		endWord, how, memory, share, cpu.Seconds(), wall.Seconds(), workers)
}
