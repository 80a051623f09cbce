package main

import (
	"runtime"
	"runtime/debug"
)

// garbage is how much unused memory may pile up beside what is in use before
// the collector runs.
const garbage = 128 << 20

// boundGarbage stops the collector from letting the heap grow to twice the
// table, as it would by itself: a table of numbers costs nothing to mark, so
// that collecting often is cheap.
func boundGarbage() {
	runtime.GC()
	var m runtime.MemStats
	runtime.ReadMemStats(&m)
	percent := 100 * garbage / max(int64(m.HeapAlloc), 1)
	debug.SetGCPercent(int(min(100, max(percent, 2))))
}
