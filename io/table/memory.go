package table

import (
	"math"
	"math/bits"
	"os"
	"path/filepath"
	"strconv"
	"strings"
)

// checkMemory refuses a table whose values cannot be held, before anything is
// allocated: rows and columns are claims of the file. limit is the memory that
// may be taken; 0: what the machine has free.
func checkMemory(path string, rows, cols int, limit int64) error {
	whose := "that may be taken"
	if limit <= 0 {
		limit, whose = freeMemory(), "this machine has free"
	}
	high, need := bits.Mul64(uint64(rows), uint64(cols))
	if high == 0 && need < math.MaxInt64/8 && int64(need*8) <= limit {
		return nil
	}
	size := "more memory than any machine has"
	if high == 0 && need < math.MaxInt64/8 {
		size = byteSize(int64(need * 8))
	}
	return faultf(path, "%d rows x %d columns need %s, and %s is all %s: take fewer columns, or a larger machine",
		rows, cols, size, byteSize(limit), whose)
}

// byteSize writes a number of bytes for people.
func byteSize(n int64) string {
	v, unit := float64(n), "bytes"
	for _, u := range []string{"KB", "MB", "GB", "TB", "PB"} {
		if v < 1000 {
			break
		}
		v, unit = v/1000, u
	}
	if unit == "bytes" {
		return strconv.FormatInt(n, 10) + " bytes"
	}
	return strconv.FormatFloat(v, 'f', 1, 64) + " " + unit
}

// freeMemory returns the bytes that this process may still take: what the
// kernel says is available, or the room left in the control group, whichever
// is less. Where the system does not say, there is no limit.
func freeMemory() int64 {
	free := int64(math.MaxInt64)
	if text, err := os.ReadFile("/proc/meminfo"); err == nil {
		for _, line := range strings.Split(string(text), "\n") {
			if rest, ok := strings.CutPrefix(line, "MemAvailable:"); ok {
				if kb, err := strconv.ParseInt(strings.TrimSpace(strings.TrimSuffix(strings.TrimSpace(rest), "kB")), 10, 64); err == nil {
					free = kb * 1024
				}
			}
		}
	}
	own, _ := os.ReadFile("/proc/self/cgroup")
	return min(free, groupMemory("/sys/fs/cgroup", string(own)))
}

// groupMemory returns the room left in the control groups above this process
// (version 2: every level may have a limit). own is what the kernel says of
// this process in /proc/self/cgroup.
func groupMemory(root, own string) int64 {
	free := int64(math.MaxInt64)
	for _, line := range strings.Split(own, "\n") {
		group, ok := strings.CutPrefix(line, "0::")
		if !ok {
			continue
		}
		for dir := filepath.Join(root, group); strings.HasPrefix(dir, root); dir = filepath.Dir(dir) {
			limit, ok1 := readInt(filepath.Join(dir, "memory.max"))
			taken, ok2 := readInt(filepath.Join(dir, "memory.current"))
			if ok1 && ok2 {
				free = min(free, max(0, limit-taken+cachedFiles(filepath.Join(dir, "memory.stat"))))
			}
		}
	}
	return free
}

// cachedFiles returns the bytes of file contents that a control group holds
// and would give back.
func cachedFiles(stat string) int64 {
	text, err := os.ReadFile(stat)
	if err != nil {
		return 0
	}
	var sum int64
	for _, line := range strings.Split(string(text), "\n") {
		name, value, _ := strings.Cut(line, " ")
		if name == "inactive_file" || name == "active_file" {
			v, _ := strconv.ParseInt(value, 10, 64)
			sum += v
		}
	}
	return sum
}

func readInt(file string) (int64, bool) {
	text, err := os.ReadFile(file)
	if err != nil {
		return 0, false
	}
	v, err := strconv.ParseInt(strings.TrimSpace(string(text)), 10, 64)
	return v, err == nil
}
