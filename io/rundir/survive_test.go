package rundir_test

import (
	"context"
	"crypto/sha256"
	"errors"
	"fmt"
	"io"
	"math/rand/v2"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"sync/atomic"
	"syscall"
	"testing"
	"time"

	"holdfast/io/rundir"
	"holdfast/resample"
	"holdfast/selection"
	"holdfast/solver"
)

// hatchery fits draws in no time: a path that follows from the rows of the
// draw alone.
type hatchery struct{ fitted *atomic.Int64 }

func (h hatchery) FitBlock(ctx context.Context, samples []*solver.Sample, _ func(int)) ([]solver.Path, error) {
	paths := make([]solver.Path, len(samples))
	for i, s := range samples {
		if h.fitted != nil {
			h.fitted.Add(1)
		}
		paths[i] = pathOf(s)
	}
	return paths, ctx.Err()
}

func pathOf(s *solver.Sample) solver.Path {
	rows := sha256.Sum256(fmt.Append(nil, s.Rows))
	p := solver.Path{First: 2, Last: 4, Intercepts: []float64{1, 2, float64(rows[0])}, Always: make([]float64, 6)}
	for j := range int32(6) {
		if rows[j+1]%2 == 0 {
			p.Entries = append(p.Entries, solver.Entry{Step: 3, Candidate: j})
			p.Coefs = append(p.Coefs, solver.Coef{Step: 3, Candidate: j, Value: float64(rows[j+7]) / 7})
		}
	}
	return p
}

func planOf(t testing.TB, number int) resample.Plan {
	t.Helper()
	plan, err := resample.NewPlan(resample.Plan{Rows: 50, Number: number, Seed: 1})
	if err != nil {
		t.Fatal(err)
	}
	return plan
}

// job is the program as far as the directory goes: `run STUDY --draws number`,
// with a result that a judgement would write.
type job struct {
	fsys   rundir.Files
	dir    string
	number int
	parts  int
	part   int
	opt    resample.Options
	kept   func(draws int) // called after each block that is safe; nil: nobody
	fitted *atomic.Int64
}

const resultFile = "stability.csv"

func (j job) run(t testing.TB) error {
	d, err := j.open()
	if err != nil {
		return err
	}
	lock, err := d.Lock(j.part, rundir.LockOptions{})
	if err != nil {
		return err
	}
	return errors.Join(j.make(t, d), lock.Unlock())
}

// open makes the directory or goes on with it.
func (j job) open() (*rundir.Dir, error) {
	meta := rundir.HatcheryMeta(j.number)
	meta.Parts = j.parts
	d, err := rundir.CreateOn(j.fsys, j.dir, rundir.Hatchery(), []byte("[table]\n"), meta)
	if errors.Is(err, rundir.ErrExists) {
		d, err = rundir.OpenOn(j.fsys, j.dir)
	}
	if err != nil {
		return nil, err
	}
	if err := d.Compare(rundir.Hatchery(), meta); err != nil {
		return nil, err
	}
	if err := d.SetDecision(rundir.Decided()); err != nil {
		return nil, err
	}
	return d, d.Extend(j.number, time.Unix(2e9, 0))
}

// make makes what is missing, and judges.
func (j job) make(t testing.TB, d *rundir.Dir) error {
	log, err := d.Log(j.part)
	if err != nil {
		return err
	}
	_, err = io.WriteString(log, "begins\n")
	if err := errors.Join(err, log.Close(), d.WritePart(rundir.Part{Part: j.part, State: rundir.StateRunning})); err != nil {
		return err
	}
	found, err := d.Survey()
	if err != nil {
		return err
	}
	if err := d.SetAside(found.Damaged); err != nil {
		return err
	}
	missing := []int{}
	for _, draw := range found.Missing {
		if run := d.Run(); run.PartOf(draw) == j.part {
			missing = append(missing, draw)
		}
	}
	plan := planOf(t, j.number)
	opt := j.opt
	opt.Draws = missing
	if err := resample.Run(context.Background(), plan, hatchery{j.fitted}, j.sink(d), opt); err != nil {
		return err
	}
	if err := d.WritePart(rundir.Part{Part: j.part, State: rundir.StateDone}); err != nil {
		return err
	}
	if j.parts > 1 {
		return nil
	}
	return j.judge(d)
}

func (j job) judge(d *rundir.Dir) error {
	draws, err := d.Draws()
	if err != nil {
		return err
	}
	return d.Write(resultFile, func(w io.Writer) error { return result(w, draws) })
}

// result stands for a stability table: it tells all that a judgement is given.
func result(w io.Writer, draws []selection.Draw) error {
	_, err := fmt.Fprintf(w, "%d draws %x\n", len(draws), sha256.Sum256(fmt.Appendf(nil, "%+v", draws)))
	return err
}

type putter func(draws []int, paths []solver.Path) error

func (f putter) Put(draws []int, paths []solver.Path) error { return f(draws, paths) }

func (j job) sink(d *rundir.Dir) resample.Sink {
	return putter(func(draws []int, paths []solver.Path) error {
		err := d.Put(draws, paths)
		if err == nil && j.kept != nil {
			j.kept(len(draws))
		}
		return err
	})
}

// undisturbed is the result of a run of so many draws that nothing happened
// to, made in memory.
func undisturbed(t testing.TB, number int) string {
	t.Helper()
	dir := filepath.Join(t.TempDir(), "calm.run")
	if err := (job{fsys: rundir.Quick(), dir: dir, number: number, opt: resample.Options{Workers: 2, Block: 6}}).run(t); err != nil {
		t.Fatal(err)
	}
	return contentOf(t, dir)
}

func contentOf(t testing.TB, dir string) string {
	t.Helper()
	text, err := os.ReadFile(filepath.Join(dir, resultFile))
	if err != nil {
		t.Fatal(err)
	}
	return string(text)
}

// scene is what a run finds when it begins.
type scene struct {
	name   string
	number int
	set    func(t *testing.T, dir string)
}

// The scenes: nothing; a run of fewer draws, killed in the middle of its
// second block, with a block that was damaged since.
var scenes = []scene{
	{"new", 12, func(*testing.T, string) {}},
	{"resumed", 16, func(t *testing.T, dir string) {
		j := job{fsys: rundir.Quick(), dir: dir, number: 12, opt: resample.Options{Workers: 1, Block: 4}}
		if err := j.run(t); err != nil {
			t.Fatal(err)
		}
		blocks := blocksOf(t, dir)
		if err := os.Remove(blocks[2]); err != nil {
			t.Fatal(err)
		}
		flip(t, blocks[1], 300)
		for _, name := range []string{resultFile, filepath.Join("parts", "0.json")} {
			if err := os.Remove(filepath.Join(dir, name)); err != nil {
				t.Fatal(err)
			}
		}
		text := `{"host":"tank-3","pid":4700,"part":0,"since":"2031-05-01T08:00:00Z","token":"0a"}`
		if err := os.WriteFile(filepath.Join(dir, "parts", "0.lock"), []byte(text), 0o644); err != nil {
			t.Fatal(err)
		}
	}},
}

func blocksOf(t testing.TB, dir string) []string {
	t.Helper()
	list, err := filepath.Glob(filepath.Join(dir, "draws", "block-*.parquet"))
	if err != nil || len(list) == 0 {
		t.Fatalf("blocks of %s: %v, %v", dir, list, err)
	}
	slices.Sort(list)
	return list
}

func flip(t testing.TB, path string, at int) {
	t.Helper()
	text, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	text[at] ^= 16
	if err := os.WriteFile(path, text, 0o644); err != nil {
		t.Fatal(err)
	}
}

// HOUSE-STYLE 8: fail the n-th file operation for n = 1, 2, 3 ... until none
// fails any more. Each time the error surfaces, what is on disk is whole or
// absent, blocks that were reported safe are there, and the same command once
// more gives the bytes of an undisturbed run.
func TestEveryFailedOperation(t *testing.T) {
	t.Parallel()
	for _, s := range scenes {
		want, cleaned, n := undisturbed(t, s.number), 0, 1
		for ; ; n++ {
			dir := filepath.Join(t.TempDir(), "deep", "x.run")
			s.set(t, dir)
			safe := 0
			disk := rundir.FailAt(n, nil)
			j := job{fsys: disk, dir: dir, number: s.number, opt: resample.Options{Workers: 1, Block: 4}, kept: func(draws int) { safe += draws }}
			err := j.run(t)
			if !disk.Reached() {
				if err != nil || contentOf(t, dir) != want {
					t.Fatalf("%s: no operation failed, and yet: %v", s.name, err)
				}
				break
			}
			if disk.Cleaning() {
				cleaned++
			} else if !errors.Is(err, rundir.ErrInjected) {
				t.Fatalf("%s: operation %d (%s) failed, and the run said %v", s.name, n, disk.What(), err)
			}
			onlyWhole(t, dir, disk.What(), safe)
			j.fsys, j.kept = rundir.Quick(), nil
			if err := j.run(t); err != nil {
				t.Fatalf("%s: after operation %d (%s) failed, the next run says %v", s.name, n, disk.What(), err)
			}
			if got := contentOf(t, dir); got != want {
				t.Fatalf("%s: after operation %d (%s) failed, the next run gives %q, not %q", s.name, n, disk.What(), got, want)
			}
		}
		t.Logf("%s: %d operations failed one by one; %d of them only left an unfinished file", s.name, n-1, cleaned)
		if n < 60 {
			t.Errorf("%s: only %d operations: the check says little", s.name, n-1)
		}
	}
}

// onlyWhole checks that each file under its final name can be read, and that
// at least so many draws are there. In the second scene one block is damaged
// from the start.
func onlyWhole(t *testing.T, dir, what string, safe int) {
	t.Helper()
	d, err := rundir.Open(dir)
	if errors.Is(err, os.ErrNotExist) && safe == 0 {
		return
	}
	if err != nil {
		t.Fatalf("after %s: %v", what, err)
	}
	f, err := d.Survey()
	if err != nil || f.Count < safe {
		t.Fatalf("after %s: %v, %d draws where %d were safe", what, err, f.Count, safe)
	}
	for _, b := range f.Damaged {
		if b.First != 4 {
			t.Fatalf("after %s: damaged %v", what, f.Damaged)
		}
	}
	if _, err := d.Parts(); err != nil {
		t.Fatalf("after %s: %v", what, err)
	}
}

// What a disk can say, wherever it says it: the error is told in words, and
// nothing that was safe is lost.
func TestTroubleIsTold(t *testing.T) {
	t.Parallel()
	want, random := undisturbed(t, 12), rand.New(rand.NewPCG(7, 1))
	for _, c := range []struct {
		err  error
		mark error
	}{
		{syscall.ENOSPC, rundir.ErrFull}, {syscall.EDQUOT, rundir.ErrQuota}, {syscall.EROFS, rundir.ErrReadOnly},
		{syscall.EACCES, rundir.ErrReadOnly}, {syscall.ESTALE, rundir.ErrGone},
	} {
		told := 0
		for n := 1; ; n += 1 + random.IntN(12) {
			dir := filepath.Join(t.TempDir(), "x.run")
			disk := rundir.FailAt(n, c.err)
			safe := 0
			j := job{fsys: disk, dir: dir, number: 12, opt: resample.Options{Workers: 1, Block: 4}, kept: func(draws int) { safe += draws }}
			err := j.run(t)
			if !disk.Reached() {
				break
			}
			if !disk.Cleaning() {
				told++
				if !errors.Is(err, c.mark) || !errors.Is(err, c.err) {
					t.Fatalf("%v at operation %d (%s): %v", c.err, n, disk.What(), err)
				}
			}
			onlyWhole(t, dir, disk.What(), safe)
			j.fsys, j.kept = rundir.Quick(), nil
			if err := j.run(t); err != nil || contentOf(t, dir) != want {
				t.Fatalf("%v at operation %d (%s): the next run: %v", c.err, n, disk.What(), err)
			}
		}
		t.Logf("%v: told at %d operations, chosen at random", c.err, told)
	}
}

// A directory that vanishes under a run is told, and nothing is made anew in
// its place.
func TestVanishedDirectory(t *testing.T) {
	dir := filepath.Join(t.TempDir(), "x.run")
	j := job{fsys: rundir.Quick(), dir: dir, number: 12, opt: resample.Options{Workers: 1, Block: 4}}
	j.kept = func(int) {
		if err := os.RemoveAll(dir); err != nil {
			t.Error(err)
		}
	}
	err := j.run(t)
	if !errors.Is(err, rundir.ErrGone) || !strings.Contains(err.Error(), dir) {
		t.Errorf("error %v", err)
	}
	if _, err := os.Stat(dir); !errors.Is(err, os.ErrNotExist) {
		t.Errorf("the directory is back: %v", err)
	}
}

// A run makes exactly the draws that are missing.
func TestResumeMakesWhatIsMissing(t *testing.T) {
	want := undisturbed(t, 40)
	dir := filepath.Join(t.TempDir(), "x.run")
	var fitted atomic.Int64
	j := job{fsys: rundir.Quick(), dir: dir, number: 40, opt: resample.Options{Workers: 2, Block: 4}, fitted: &fitted}
	again := func(made int64, why string) {
		t.Helper()
		fitted.Store(0)
		if err := j.run(t); err != nil {
			t.Fatalf("%s: %v", why, err)
		}
		if fitted.Load() != made || contentOf(t, dir) != want {
			t.Errorf("%s: %d draws were made, not %d; result %q, not %q", why, fitted.Load(), made, contentOf(t, dir), want)
		}
	}
	again(40, "a new run")
	again(0, "a whole run")
	blocks := blocksOf(t, dir)
	os.Remove(blocks[3])
	again(4, "a block removed")
	flip(t, blocks[5], 200)
	if err := os.Truncate(blocks[6], 1000); err != nil {
		t.Fatal(err)
	}
	again(8, "one block damaged and one cut short")
	for _, name := range []string{blocks[5], blocks[6]} {
		if _, err := os.Stat(name + ".damaged"); err != nil {
			t.Errorf("not set aside: %v", err)
		}
	}
	flip(t, blocks[5], 200)
	again(4, "the same block damaged again")
	if list, _ := filepath.Glob(blocks[5] + "*.damaged"); len(list) != 2 {
		t.Errorf("set aside twice: %v", list)
	}
	j.number, want = 60, undisturbed(t, 60)
	again(20, "extended")
	if d, err := rundir.Open(dir); err != nil || len(d.Run().Extensions) != 1 {
		t.Errorf("the log of extensions: %+v, %v", d.Run().Extensions, err)
	}
}

// A crash after every single operation of a run, in three ways (everything
// that was not synced is gone; the process is killed; some of what was not
// synced is gone, files cut short): what was reported safe is there, and the
// same command gives the bytes of an undisturbed run.
func TestCrashAfterEveryOperation(t *testing.T) {
	t.Parallel()
	random := rand.New(rand.NewPCG(3, 9))
	for _, s := range scenes {
		want := undisturbed(t, s.number)
		root := filepath.Join(t.TempDir(), "disk")
		if err := os.Mkdir(root, 0o755); err != nil {
			t.Fatal(err)
		}
		where := filepath.Join("deep", "x.run")
		s.set(t, filepath.Join(root, where))
		disk, err := rundir.Record(root)
		if err != nil {
			t.Fatal(err)
		}
		type moment struct{ steps, safe int }
		moments := []moment{{0, 0}}
		j := job{fsys: disk, dir: filepath.Join(root, where), number: s.number, opt: resample.Options{Workers: 1, Block: 4}}
		j.kept = func(draws int) {
			moments = append(moments, moment{disk.Steps(), moments[len(moments)-1].safe + draws})
		}
		if err := j.run(t); err != nil {
			t.Fatal(err)
		}
		crashes := 0
		for after := 0; after <= disk.Steps(); after++ {
			safe := 0
			for _, m := range moments {
				if m.steps <= after {
					safe = m.safe
				}
			}
			disk.Crash(t, random, after, func(dir, what string) {
				crashes++
				what = s.name + ": " + what
				dir = filepath.Join(dir, where)
				onlyWhole(t, dir, what, safe)
				again := job{fsys: rundir.Quick(), dir: dir, number: s.number, opt: resample.Options{Workers: 1, Block: 6}}
				if err := again.run(t); err != nil {
					t.Fatalf("%s: the next run: %v", what, err)
				}
				if got := contentOf(t, dir); got != want {
					t.Fatalf("%s: the next run gives %q, not %q", what, got, want)
				}
			})
		}
		t.Logf("%s: %d crashes", s.name, crashes)
		if crashes < 150 {
			t.Errorf("%s: only %d crashes: the check says little", s.name, crashes)
		}
	}
}
