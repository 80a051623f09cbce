package main

import (
	"errors"
	"fmt"
	"math"
	"os"
	"runtime"
	"runtime/debug"
	"strconv"
	"strings"

	"holdfast/io/study"
	"holdfast/solver"
)

// memorySize is an amount of memory on the command line: 500M, 8G. Units are
// powers of 1024, as schedulers count.
type memorySize int64

const memoryUnits = "KMGT"

func (m *memorySize) Set(text string) error {
	digits := strings.TrimRight(strings.ToUpper(strings.TrimSpace(text)), "IB")
	unit := 1.0
	if n := len(digits); n > 0 {
		if k := strings.IndexByte(memoryUnits, digits[n-1]); k >= 0 {
			unit, digits = math.Pow(1024, float64(k+1)), digits[:n-1]
		}
	}
	x, err := strconv.ParseFloat(digits, 64)
	if err != nil || !(x > 0) || x*unit >= math.MaxInt64 {
		return fmt.Errorf("%q is no amount of memory: write 500M or 8G", text)
	}
	*m = memorySize(x * unit)
	return nil
}

func (m *memorySize) Type() string { return "size" }

func (m *memorySize) String() string {
	if *m == 0 {
		return ""
	}
	return sizeText(int64(*m))
}

// sizeText writes an amount of memory as Set reads it, rounded up to three
// digits.
func sizeText(n int64) string {
	x, unit := float64(n), ""
	for _, u := range memoryUnits {
		if x < 1024 {
			break
		}
		x, unit = x/1024, string(u)
	}
	if x < 100 && unit != "" {
		return strconv.FormatFloat(math.Ceil(x*10)/10, 'f', -1, 64) + unit
	}
	return strconv.FormatFloat(math.Ceil(x), 'f', -1, 64) + unit
}

const (
	// garbage is how much unused memory may pile up beside the table before
	// the collector runs.
	garbage = 128 << 20
	// programBytes is what the program takes beside what it works on: its
	// code, the libraries' tables, the runtime and the gaps in its heap.
	programBytes = 34 << 20
	// slack is the share that a limit must leave over what is needed, or the
	// collector runs all the time.
	slack = 1.0 / 16
)

// footprint is what a run holds in memory, in bytes.
type footprint struct {
	table int64        // values, outcome, missing cells
	shape solver.Shape // of a draw's fit
	draws int          // that are judged in the end
}

// tableBytes is what a table takes in memory: so many columns of predictors, and
// vectors of the outcome and what goes with it.
func tableBytes(rows, columns, vectors int) int64 {
	return 8 * int64(rows) * (int64(columns) + int64(vectors))
}

// vectors counts the columns beside the predictors that a study keeps in memory.
func vectors(s *study.Study) int {
	n := 1
	if s.Outcome.Kind == study.Survival {
		n = 4 // time, entry, event, stratum
	}
	for _, column := range []string{s.Outcome.Offset + s.Outcome.Exposure, s.Outcome.CaseWeight, strings.Join(s.Draws.Within, "")} {
		if column != "" {
			n++
		}
	}
	return n
}

// live is what is in use at once: the table and either what reading it takes,
// the workers' fits, or the draws that are judged.
func (f footprint) live(workers, block int) int64 {
	return programBytes + f.table + max(f.reading(), int64(workers)*f.shape.Workspace(block), f.judging())
}

// reading is what the reading of a column takes beside its values (its place in
// the file, its name in several lists): 3 KB, measured with 10,000 columns.
func (f footprint) reading() int64 {
	return (3 << 10) * int64(max(f.shape.Columns, f.shape.Candidates)+f.shape.Always)
}

// judging is what the draws take when they are judged: 24 bytes a coefficient,
// at each step a sixth of those that enter in all (measured; paths end early and
// fill up slowly, and of several classes few have one). A group has one for each
// of its columns.
func (f footprint) judging() int64 {
	entered := min(f.shape.Candidates, f.shape.DrawRows)
	if s := f.shape.StopAfter; s > 0 {
		entered = min(entered, s)
	}
	bytes := 24 * int64(f.draws) * int64(entered) * int64(f.shape.Steps) / 6
	if f.shape.Columns > f.shape.Candidates {
		bytes = bytes * int64(f.shape.Columns) / int64(f.shape.Candidates)
	}
	return bytes + 512*int64(f.shape.Candidates)
}

// peak is what the process takes at most where no limit is set: what is in use,
// and what the collector lets pile up beside it.
func (f footprint) peak(workers, block int) int64 {
	live := f.live(workers, block)
	return live + (live-programBytes)*garbagePercent(f.table)/100
}

// least is the smallest limit at which so many workers with such blocks run
// well.
func (f footprint) least(workers, block int) int64 {
	live := f.live(workers, block)
	return live + int64(slack*float64(live))
}

// errMemory says that a limit is too small.
var errMemory = errors.New("too little memory")

// fit returns the largest block, and then the most workers, with which the run
// keeps the limit (0: none): first smaller blocks, then fewer workers, then an
// error that says what is needed.
func (f footprint) fit(limit int64, workers int) (int, int, error) {
	most := f.shape.BlockLimit()
	if limit <= 0 {
		return workers, most, nil
	}
	for w := workers; w >= 1; w-- {
		for block := most; block >= 2; block -= 2 {
			if f.least(w, block) <= limit {
				return w, block, nil
			}
		}
	}
	return 0, 0, fmt.Errorf("%w: the limit is %s, and one worker that fits a pair of draws needs %s (program %s, table %s, reading it and fits %s)",
		errMemory, sizeText(limit), sizeText(f.least(1, 2)), sizeText(programBytes), sizeText(f.table),
		sizeText(max(f.reading(), f.shape.Workspace(2), f.judging())))
}

// memoryLimit is the smaller of what was asked and what GOMEMLIMIT says; 0:
// none.
func memoryLimit(asked memorySize) int64 {
	limit := debug.SetMemoryLimit(-1)
	if limit == math.MaxInt64 {
		limit = 0
	}
	if asked > 0 && (limit == 0 || int64(asked) < limit) {
		limit = int64(asked)
	}
	return limit
}

// outside is the part of the program's memory that the runtime's limit does
// not count: its code, as far as it is touched.
const outside = 22 << 20

// boundMemory holds the runtime to a limit (0: none), and stops the collector
// from letting the heap grow to twice the table, as it would by itself: a table
// of numbers costs nothing to mark, so that collecting often is cheap.
func boundMemory(limit, table int64) {
	limitMemory(limit)
	runtime.GC()
	debug.SetGCPercent(int(garbagePercent(table)))
}

// limitMemory holds the runtime to a limit, from before anything is read on;
// 0: none.
func limitMemory(limit int64) {
	if limit > 0 {
		debug.SetMemoryLimit(max(limit-outside, 1))
	}
}

// leastForTable is the smallest limit at which a table of so many rows and columns can
// be fitted at all, before anything but its shape is known.
func leastForTable(rows, columns int) int64 {
	return footprint{
		table: tableBytes(rows, columns, 1),
		shape: solver.Shape{Rows: rows, DrawRows: rows / 2, Candidates: columns, Steps: 1, StopAfter: 1},
	}.least(1, 2)
}

// garbagePercent is the collector's setting beside a table of so many bytes.
func garbagePercent(table int64) int64 {
	return min(100, max(100*garbage/max(table, 1), 2))
}

// memoryNow returns the resident size of this process and its largest so far,
// in bytes; 0 where the system does not say. The kernel's record for children
// (getrusage) will not do: it holds what the starting process had before.
func memoryNow() (now, peak int64) {
	text, err := os.ReadFile("/proc/self/status")
	if err != nil {
		return 0, 0
	}
	for line := range strings.Lines(string(text)) {
		var kilobytes int64
		if _, err := fmt.Sscanf(line, "VmRSS: %d kB", &kilobytes); err == nil {
			now = kilobytes * 1024
		}
		if _, err := fmt.Sscanf(line, "VmHWM: %d kB", &kilobytes); err == nil {
			peak = kilobytes * 1024
		}
	}
	return now, peak
}
