package rundir_test

import (
	"context"
	"errors"
	"math/rand/v2"
	"path/filepath"
	"sync"
	"testing"

	"holdfast/io/rundir"
	"holdfast/resample"
	"holdfast/solver"
)

// Correctness never needs the lock (DESIGN 8): writers that know nothing of
// each other make all draws of one run at once, in blocks of other sizes and
// in another order, and the result is that of one writer. A reader beside them
// never sees a block that is not whole.
func TestWritersWithoutLock(t *testing.T) {
	const number = 48
	want := undisturbed(t, number)
	others := 0
	for round := range 6 {
		dir := filepath.Join(t.TempDir(), "x.run")
		var writers, reader sync.WaitGroup
		done := make(chan struct{})
		for _, block := range []int{2, 6, 16} {
			writers.Add(1)
			go func() {
				defer writers.Done()
				random := rand.New(rand.NewPCG(uint64(round), uint64(block)))
				if err := writeAll(t, dir, number, block, random); err != nil {
					t.Errorf("blocks of %d: %v", block, err)
				}
			}()
		}
		reader.Add(1)
		go func() { defer reader.Done(); watch(t, dir, done) }()
		writers.Wait()
		close(done)
		reader.Wait()
		others += len(blocksOf(t, dir)) - number/2
		j := job{fsys: rundir.Quick(), dir: dir, number: number}
		d, err := j.open()
		if err != nil {
			t.Fatal(err)
		}
		if err := j.judge(d); err != nil || contentOf(t, dir) != want {
			t.Fatalf("round %d: %v; result %q, not %q", round, err, contentOf(t, dir), want)
		}
	}
	if others == 0 {
		t.Error("no two blocks began with one draw: the check says little")
	}
	t.Logf("%d blocks beyond one per pair", others)
}

// writeAll makes every draw of a run without looking what is there.
func writeAll(t *testing.T, dir string, number, block int, random *rand.Rand) error {
	d, err := job{fsys: rundir.Quick(), dir: dir, number: number}.open()
	if err != nil {
		return err
	}
	starts := random.Perm((number + block - 1) / block)
	plan := planOf(t, number)
	for _, k := range starts {
		var draws []int
		for draw := k * block; draw < min((k+1)*block, number); draw++ {
			draws = append(draws, draw)
		}
		err := resample.Run(context.Background(), plan, hatchery{}, d, resample.Options{Workers: 1, Block: block, Draws: draws})
		if err != nil {
			return err
		}
	}
	return nil
}

// watch reads the directory again and again.
func watch(t *testing.T, dir string, done chan struct{}) {
	for {
		select {
		case <-done:
			return
		default:
		}
		d, err := rundir.Open(dir)
		if err != nil {
			continue // not made yet
		}
		f, err := d.Survey()
		if err != nil || len(f.Damaged) > 0 {
			t.Errorf("a reader sees %v, %v", f, err)
			return
		}
	}
}

// Tasks of a scheduler that start at one moment make one directory, and one
// decision.
func TestPartsThatStartTogether(t *testing.T) {
	const number, parts = 24, 4
	want := undisturbed(t, number)
	for range 10 {
		dir := filepath.Join(t.TempDir(), "x.run")
		var group sync.WaitGroup
		failures := make([]error, parts)
		for part := range parts {
			group.Add(1)
			go func() {
				defer group.Done()
				j := job{fsys: rundir.Quick(), dir: dir, number: number, parts: parts, part: part, opt: resample.Options{Workers: 1}}
				failures[part] = j.run(t)
			}()
		}
		group.Wait()
		if err := errors.Join(failures...); err != nil {
			t.Fatal(err)
		}
		d, err := rundir.Open(dir)
		if err != nil {
			t.Fatal(err)
		}
		if err := (job{}).judge(d); err != nil || contentOf(t, dir) != want {
			t.Fatalf("%v; result %q, not %q", err, contentOf(t, dir), want)
		}
		if list, err := d.Parts(); err != nil || len(list) != parts {
			t.Errorf("records of %d parts, %v", len(list), err)
		}
	}
}

// Two processes that find the same damage set it aside once, and what the
// first made anew stays.
func TestDamageFoundTwice(t *testing.T) {
	dir := filepath.Join(t.TempDir(), "x.run")
	j := job{fsys: rundir.Quick(), dir: dir, number: 12, opt: resample.Options{Workers: 1, Block: 4}}
	if err := j.run(t); err != nil {
		t.Fatal(err)
	}
	bad := blocksOf(t, dir)[1]
	flip(t, bad, 100)
	second, err := rundir.Open(dir)
	if err != nil {
		t.Fatal(err)
	}
	found, err := second.Survey()
	if err != nil || len(found.Damaged) != 1 || found.Damaged[0].Path != bad || found.Damaged[0].First != 4 {
		t.Fatalf("%+v, %v", found, err)
	}
	if err := j.run(t); err != nil { // the first sets it aside and makes it again
		t.Fatal(err)
	}
	if err := second.SetAside(found.Damaged); err != nil {
		t.Fatal(err)
	}
	if draws, err := second.Draws(); err != nil || len(draws) != 12 {
		t.Errorf("%d draws, %v: a whole block was set aside", len(draws), err)
	}
	found.Damaged[0].Path += "-gone"
	if err := second.SetAside(found.Damaged); err != nil {
		t.Errorf("a block that is gone: %v", err)
	}
}

// A damaged block is no hole where another one has its draws.
func TestDamageBesideWholeDraws(t *testing.T) {
	dir := filepath.Join(t.TempDir(), "x.run")
	if err := (job{fsys: rundir.Quick(), dir: dir, number: 8, opt: resample.Options{Workers: 1, Block: 8}}).run(t); err != nil {
		t.Fatal(err)
	}
	d, err := rundir.Open(dir)
	if err != nil {
		t.Fatal(err)
	}
	if err := d.Put([]int{2, 3}, []solver.Path{pathOf(planOf(t, 8).Sample(2)), pathOf(planOf(t, 8).Sample(3))}); err != nil {
		t.Fatal(err)
	}
	flip(t, blocksOf(t, dir)[1], 50)
	f, err := d.Read()
	if err != nil || len(f.Damaged) != 1 || len(f.Missing) != 0 {
		t.Errorf("damaged %v, missing %v, %v", f.Damaged, f.Missing, err)
	}
	if draws, err := d.Draws(); err != nil || len(draws) != 8 {
		t.Errorf("%d draws, %v", len(draws), err)
	}
}

// A block whose first draw another block has, and a larger run's draws, are
// no damage.
func TestDrawsBeyondTheNumber(t *testing.T) {
	dir := filepath.Join(t.TempDir(), "x.run")
	small, err := job{fsys: rundir.Quick(), dir: dir, number: 4}.open()
	if err != nil {
		t.Fatal(err)
	}
	if err := (job{fsys: rundir.Quick(), dir: dir, number: 8, opt: resample.Options{Workers: 1, Block: 8}}).run(t); err != nil {
		t.Fatal(err)
	}
	f, err := small.Read() // opened before the extension
	if err != nil || len(f.Draws) != 4 || f.Beyond != 4 || len(f.Damaged) != 0 {
		t.Errorf("%d draws, %d beyond, damaged %v, %v", len(f.Draws), f.Beyond, f.Damaged, err)
	}
	if err := small.Put([]int{4}, make([]solver.Path, 1)); err == nil {
		t.Error("a draw beyond the number was put")
	}
	if err := small.Refresh(); err != nil || small.Run().Meta.Number != 8 {
		t.Errorf("after a refresh %d draws, %v", small.Run().Meta.Number, err)
	}
	if f, err = small.Read(); err != nil || len(f.Draws) != 8 {
		t.Errorf("%d draws, %v", len(f.Draws), err)
	}
}
