package main

import (
	"errors"
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"holdfast/io/demo"
	"holdfast/solver"
)

func TestMemorySize(t *testing.T) {
	for text, want := range map[string]int64{
		"500M": 500 << 20, "8G": 8 << 30, "1.5g": 3 << 29, "2GiB": 2 << 30, "1024k": 1 << 20, "64MB": 64 << 20, "1T": 1 << 40, "100": 100,
	} {
		var m memorySize
		if err := m.Set(text); err != nil || int64(m) != want {
			t.Errorf("%s: %d, %v; want %d", text, m, err, want)
		}
	}
	for _, text := range []string{"", "G", "-1G", "0", "much", "1e30G", "NaN", "inf", "8X"} {
		var m memorySize
		if err := m.Set(text); err == nil {
			t.Errorf("%q was read as %d", text, m)
		}
	}
}

// TestSizeText: what is printed can be typed, and is never too little.
func TestSizeText(t *testing.T) {
	for n := int64(1); n < math.MaxInt64/3; n = n*3 + 1 {
		var m memorySize
		if err := m.Set(sizeText(n)); err != nil {
			t.Fatal(err)
		}
		if got := float64(m) / float64(n); got < 1 || got > 1.11 {
			t.Errorf("%d is written as %s, which is %d", n, sizeText(n), m)
		}
	}
}

// TestFit: less memory first means smaller blocks, then fewer workers, then a
// refusal whose number is enough.
func TestFit(t *testing.T) {
	f := footprint{
		table: tableBytes(2000, 5000, 1), draws: 20,
		shape: solver.Shape{Rows: 2000, DrawRows: 1000, Candidates: 5000, Steps: 104, StopAfter: 100},
	}
	const workers = 8
	w, block, err := f.fit(0, workers)
	if err != nil || w != workers || block != f.shape.BlockLimit() {
		t.Fatalf("without a limit: %d workers, blocks of %d, %v", w, block, err)
	}
	before := workers * block
	seenSmaller, seenFewer := false, false
	for limit := f.least(workers, block); ; limit -= 1 << 20 {
		nw, nb, err := f.fit(limit, workers)
		if err != nil {
			if !errors.Is(err, errMemory) || nw != 0 {
				t.Fatalf("%d: %v", limit, err)
			}
			break
		}
		if f.least(nw, nb) > limit {
			t.Fatalf("limit %d: %d workers with blocks of %d need %d", limit, nw, nb, f.least(nw, nb))
		}
		if nw < workers && f.least(nw+1, 2) <= limit {
			t.Fatalf("limit %d: %d workers where %d would do", limit, nw, nw+1)
		}
		if nw*nb > before {
			t.Fatalf("limit %d: more at a time with less memory", limit)
		}
		before = nw * nb
		seenSmaller = seenSmaller || nw == workers && nb < block
		seenFewer = seenFewer || nw < workers
	}
	if !seenSmaller || !seenFewer {
		t.Errorf("smaller blocks: %v, fewer workers: %v", seenSmaller, seenFewer)
	}
	_, _, err = f.fit(1<<20, workers)
	var named memorySize
	_, text, _ := strings.Cut(err.Error(), "a pair of draws needs ")
	text, _, _ = strings.Cut(text, " ")
	if setErr := named.Set(text); setErr != nil {
		t.Fatalf("%v: %v", err, setErr)
	}
	if _, _, err := f.fit(int64(named), workers); err != nil {
		t.Errorf("the %s that the refusal names do not do: %v", text, err)
	}
	if _, _, err := f.fit(int64(named)*99/100, workers); err == nil {
		t.Errorf("less than the %s that the refusal names does", text)
	}
}

// TestMemoryIsKept: the real program keeps its limit, however it is told, by
// its own record of the largest resident size, and the bytes are the same; with
// less than it needs it refuses, and what it then names is enough. A tenth is
// allowed for what the system maps of the program.
func TestMemoryIsKept(t *testing.T) {
	dir := t.TempDir()
	if err := demo.Make(demoSeed).Write(filepath.Join(dir, "hatchery.parquet")); err != nil {
		t.Fatal(err)
	}
	finish(t, dir, "draft", "hatchery.parquet", "--outcome", demo.Outcome, "--out", "study.toml")
	run := func(out string, more ...string) []string {
		return append([]string{"run", "study.toml", "--draws", "40", "--out", out}, more...)
	}
	finish(t, dir, run("whole.run")...)
	want := resultTables(t, filepath.Join(dir, "whole.run"))
	for _, c := range []struct{ env, flag string }{{"", "56M"}, {"GOMEMLIMIT=56MiB", ""}, {"GOMEMLIMIT=1GiB", "56M"}} {
		args := run("bounded.run")
		if c.flag != "" {
			args = append(args, "--memory", c.flag)
		}
		p := prepare(t, dir, args...)
		p.cmd.Env = append(os.Environ(), c.env)
		p.start(t)
		if code := p.wait(t); code != 0 || !strings.Contains(p.err.String(), "memory: at most 56M") {
			t.Fatalf("%v: exit code %d: %s", c, code, &p.err)
		}
		sameTables(t, want, filepath.Join(dir, "bounded.run"))
		if peak := loggedPeak(t, filepath.Join(dir, "bounded.run")); peak > 56<<20*11/10 {
			t.Errorf("%v: it took %s", c, sizeText(peak))
		}
		if err := os.RemoveAll(filepath.Join(dir, "bounded.run")); err != nil {
			t.Fatal(err)
		}
	}
	// The first refusal knows the table's shape alone, the second the fits.
	limit, code := "20M", 2
	for refusals := 0; refusals < 3 && code == 2; refusals++ {
		p := start(t, dir, run("small.run", "--memory", limit)...)
		if code = p.wait(t); code == 2 {
			_, limit, _ = strings.Cut(p.err.String(), "need")
			_, limit, _ = strings.Cut(limit, " ")
			limit, _, _ = strings.Cut(strings.TrimPrefix(limit, "at least "), "\n")
			limit, _, _ = strings.Cut(limit, " ")
		}
	}
	if code != 0 {
		t.Errorf("%q, which the refusal names: exit code %d", limit, code)
	}
}

// loggedPeak is the peak memory in the last line of a run's log.
func loggedPeak(t *testing.T, run string) int64 {
	t.Helper()
	log := text(t, filepath.Join(run, "logs", "part-0.log"))
	_, size, _ := strings.Cut(log, "peak memory ")
	size, _, _ = strings.Cut(size, ",")
	var m memorySize
	if err := m.Set(size); err != nil {
		t.Fatalf("%v in %s", err, log)
	}
	return int64(m)
}
