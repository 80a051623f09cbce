package main

import (
	"flag"
	"math/rand/v2"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"
	"time"

	"holdfast/io/rundir"
	"holdfast/resample"
	"holdfast/selection"
)

var (
	crashes   = flag.Int("crashes", 12, "random moments at which the crash test kills the program (make crash: 200)")
	crashSeed = flag.Uint64("crash-seed", 0, "seed of the moments; 0: from the clock")
)

// TestCrash kills the real program at random moments of a run, some of them
// while it goes on after a kill, and holds the result to that of an undisturbed
// run, byte for byte. One seed, which is printed, makes all moments; what a
// moment meets also depends on the machine.
func TestCrash(t *testing.T) {
	seed := *crashSeed
	if seed == 0 {
		seed = uint64(time.Now().UnixNano())
	}
	t.Logf("moments made with -crash-seed=%d", seed)
	rng := rand.New(rand.NewPCG(seed, 0))
	dir := spectraStudy(t)
	run := func(out string) []string {
		return []string{"run", "study.toml", "--draws", "300", "--workers", "2", "--out", out}
	}
	begin := time.Now()
	finish(t, dir, run("whole.run")...)
	whole := time.Since(begin)
	want := resultTables(t, filepath.Join(dir, "whole.run"))

	met := map[string]int{}
	for kills := 0; kills < *crashes; {
		for kills < *crashes {
			p := start(t, dir, run("killed.run")...)
			time.Sleep(time.Duration(rng.Float64() * 1.1 * float64(whole)))
			p.cmd.Process.Kill()
			if code := p.wait(t); code == -1 {
				kills++
				met[moment(filepath.Join(dir, "killed.run"))]++
			} else if code != 0 {
				t.Fatalf("exit code %d: %s", code, &p.err)
			}
			if rng.IntN(3) > 0 {
				break // else the one that goes on is killed too
			}
		}
		finish(t, dir, run("killed.run")...)
		sameTables(t, want, filepath.Join(dir, "killed.run"))
		if t.Failed() {
			t.Fatalf("after %d kills", kills)
		}
		if err := os.RemoveAll(filepath.Join(dir, "killed.run")); err != nil {
			t.Fatal(err)
		}
	}
	t.Logf("%d kills: %v", *crashes, met)
	if *crashes >= 12 && met["among the draws"] == 0 {
		t.Errorf("no kill met a run among its draws, so nothing was shown")
	}
}

// moment says what a kill met.
func moment(run string) string {
	if _, err := os.Stat(filepath.Join(run, "run.json")); err != nil {
		return "before the directory was made"
	}
	if blocks(run) == 0 {
		return "before the first block"
	}
	if _, err := os.Stat(filepath.Join(run, "stability.csv")); err == nil {
		return "among the tables or later"
	}
	return "among the draws"
}

// TestKilledIsSaid: a start after a kill says that the last one ended without
// a word, and what to do if it was for memory.
func TestKilledIsSaid(t *testing.T) {
	dir := spectraStudy(t)
	args := append([]string{"run", "study.toml", "--out", "a.run"}, manyDraws...)
	p := start(t, dir, args...)
	waitFor(t, "the first block", func() bool { return blocks(filepath.Join(dir, "a.run")) > 0 })
	p.cmd.Process.Kill()
	p.wait(t)
	status := finish(t, dir, "status", "a.run")
	if !strings.Contains(status.out.String(), "part 0 was killed") {
		t.Errorf("status says:\n%s", &status.out)
	}
	q := start(t, dir, args...)
	waitFor(t, "the word about it", func() bool {
		return strings.Contains(text(t, filepath.Join(dir, "a.run", "logs", "part-0.log")), "ended without a last word")
	})
	q.cmd.Process.Kill()
	q.wait(t)
	if !strings.Contains(q.err.String(), "out of memory") || !strings.Contains(q.err.String(), "--memory SIZE") {
		t.Errorf("it says: %s", &q.err)
	}
}

// TestMissingHalf: where a half of a pair is lost, both are made.
func TestMissingHalf(t *testing.T) {
	r := &runner{settled: &settled{plan: resample.Plan{Design: resample.Halves}}}
	if got := r.missing([]int{0, 1, 4, 5, 8, 9}, &rundir.Finished{Missing: []int{3, 4, 9}}); !slices.Equal(got, []int{4, 5, 8, 9}) {
		t.Errorf("halves: %v are made", got)
	}
	r.settled.plan.Design = resample.Bootstrap
	if got := r.missing([]int{0, 1, 4, 5, 8, 9}, &rundir.Finished{Missing: []int{3, 4, 9}}); !slices.Equal(got, []int{4, 9}) {
		t.Errorf("bootstrap: %v are made", got)
	}
}

// TestWholePairs: a half without the other is not judged.
func TestWholePairs(t *testing.T) {
	e := &evidence{finished: &rundir.Finished{Draws: []selection.Draw{{Number: 0}, {Number: 1}, {Number: 3}, {Number: 6}, {Number: 7}}}}
	for design, want := range map[string]int{"halves": 4, "bootstrap": 5} {
		e.run.Identity.Draws.Design = design
		if got := e.wholePairs(); len(got) != want {
			t.Errorf("%s: %d draws count, want %d", design, len(got), want)
		}
	}
}
