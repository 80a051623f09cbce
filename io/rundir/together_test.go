package rundir_test

import (
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"holdfast/io/rundir"
	"holdfast/resample"
	"holdfast/selection"
)

const togetherDraws, togetherParts = 24, 3

// ownDirectories makes each part of a run in a directory of its own.
func ownDirectories(t *testing.T) []string {
	t.Helper()
	folder := t.TempDir()
	var dirs []string
	for part := range togetherParts {
		dir := filepath.Join(folder, fmt.Sprintf("p%d.run", part))
		j := job{fsys: rundir.Quick(), dir: dir, number: togetherDraws, parts: togetherParts, part: part, opt: resample.Options{Workers: 1, Block: 4}}
		if err := j.run(t); err != nil {
			t.Fatal(err)
		}
		dirs = append(dirs, dir)
	}
	return dirs
}

// impatient waits for nothing.
var impatient = rundir.Patience{}

func resultOf(t *testing.T, draws []selection.Draw) string {
	t.Helper()
	var b strings.Builder
	if err := result(&b, draws); err != nil {
		t.Fatal(err)
	}
	return b.String()
}

// Parts in directories of their own are the run of one machine, in any order
// of naming, with a directory in which parts overlap too.
func TestDirectoriesTogether(t *testing.T) {
	want := undisturbed(t, togetherDraws)
	dirs := ownDirectories(t)
	whole := filepath.Join(t.TempDir(), "whole.run")
	if err := (job{fsys: rundir.Quick(), dir: whole, number: togetherDraws, opt: resample.Options{Workers: 1}}).run(t); err != nil {
		t.Fatal(err)
	}
	for _, list := range [][]string{dirs, {dirs[2], dirs[0], dirs[1]}, {dirs[1], whole, dirs[0]}, {whole}} {
		set, err := impatient.OpenTogether(list)
		if err != nil {
			t.Fatal(err)
		}
		draws, err := set.Draws()
		if err != nil {
			t.Fatal(err)
		}
		if got := resultOf(t, draws); got != want {
			t.Errorf("%v: %q, not %q", list, got, want)
		}
		if len(set.Dirs()) != len(list) || set.Run().Meta.Number != togetherDraws {
			t.Errorf("%d directories, %d draws", len(set.Dirs()), set.Run().Meta.Number)
		}
	}
	set, err := rundir.OpenTogether(dirs)
	if err != nil {
		t.Fatal(err)
	}
	if parts, err := set.Parts(); err != nil || len(parts) != togetherParts || parts[2].Part != 2 {
		t.Errorf("parts %v, %v", parts, err)
	}
}

func TestTogetherNamesWhatIsMissing(t *testing.T) {
	dirs := ownDirectories(t)
	set, err := impatient.OpenTogether(dirs[:2])
	if err != nil {
		t.Fatal(err)
	}
	_, err = set.Draws()
	if !errors.Is(err, rundir.ErrIncomplete) || !strings.Contains(err.Error(), "8 (numbers 4-5, 10-11, 16-17, 22-23) of 24") ||
		!strings.Contains(err.Error(), "of 3 parts these are not whole: part 2 (8 draws)") {
		t.Errorf("a part missing: %v", err)
	}
	bad := blocksOf(t, dirs[0])[0]
	flip(t, bad, 90)
	if set, err = impatient.OpenTogether(dirs); err != nil {
		t.Fatal(err)
	}
	_, err = set.Draws()
	if !errors.Is(err, rundir.ErrIncomplete) || !strings.Contains(err.Error(), bad) || !strings.Contains(err.Error(), "part 0 (4 draws)") {
		t.Errorf("a block damaged: %v", err)
	}
}

// What is not of one run is refused, with both values.
func TestTogetherRefuses(t *testing.T) {
	folder := t.TempDir()
	made := func(name string, change func(*rundir.Identity, *rundir.Meta), threshold float64) string {
		t.Helper()
		id, meta := rundir.Hatchery(), rundir.HatcheryMeta(4)
		change(&id, &meta)
		d, err := rundir.CreateOn(rundir.Quick(), filepath.Join(folder, name), id, nil, meta)
		if err != nil {
			t.Fatal(err)
		}
		decision := rundir.Decided()
		decision.Threshold = threshold
		if err := d.SetDecision(decision); err != nil {
			t.Fatal(err)
		}
		return d.Path()
	}
	same := func(*rundir.Identity, *rundir.Meta) {}
	a := made("a.run", same, 0.8)
	for says, b := range map[string]string{
		"draws.seed: 1, now 2": made("seed.run", func(i *rundir.Identity, _ *rundir.Meta) { i.Draws.Seed = 2 }, 0.8),
		"fingerprint of the values that are fitted): 5e1f, now 77": made("table.run", func(i *rundir.Identity, _ *rundir.Meta) { i.Fingerprint = "77" }, 0.8),
		"architecture: ": made("arch.run", func(_ *rundir.Identity, m *rundir.Meta) { m.Architecture = "riscv64" }, 0.8),
		"version of the program: holdfast 0.1, now v2.0.0":                                             made("version.run", func(_ *rundir.Identity, m *rundir.Meta) { m.Tool = "v2.0.0" }, 0.8),
		"decision of record: threshold 0.8, selected 3, region cap, bound unimodal, now threshold 0.9": made("decision.run", same, 0.9),
		"are one directory": filepath.Join(folder, ".", "a.run") + string(filepath.Separator),
	} {
		_, err := impatient.OpenTogether([]string{a, b})
		if err == nil || !strings.Contains(err.Error(), says) || !strings.Contains(err.Error(), a) || !strings.Contains(err.Error(), b) {
			t.Errorf("%s: %v", says, err)
		}
	}
	for _, list := range [][]string{nil, {filepath.Join(folder, "none.run")}, {a, folder}} {
		if _, err := rundir.OpenTogether(list); err == nil {
			t.Errorf("%v was opened", list)
		}
	}
	b := made("parts.run", func(_ *rundir.Identity, m *rundir.Meta) { m.Parts = 2; m.Number = 8 }, 0.8)
	set, err := impatient.OpenTogether([]string{a, b})
	if err != nil || set.Run().Meta.Number != 8 {
		t.Errorf("other parts and another number: %v", err)
	}
}

// A file system that shows files late is waited for: as long as no part says
// that it is not done, and for a bounded time.
func TestFilesThatAppearLate(t *testing.T) {
	want := undisturbed(t, togetherDraws)
	dirs := ownDirectories(t)
	hidden := blocksOf(t, dirs[1])[0]
	hide := func(path string) {
		t.Helper()
		if err := os.Rename(path, path+".hidden"); err != nil {
			t.Fatal(err)
		}
	}
	looks := 0
	late := func(path string, after int) rundir.Patience {
		looks = 0
		return rundir.Patience{Most: 20 * time.Second, Every: time.Second, Sleep: func(d time.Duration) {
			if d != time.Second {
				t.Errorf("waited %v", d)
			}
			if looks++; looks == after {
				if err := os.Rename(path+".hidden", path); err != nil {
					t.Error(err)
				}
			}
		}}
	}

	hide(hidden)
	set, err := late(hidden, 4).OpenTogether(dirs)
	if err != nil {
		t.Fatal(err)
	}
	draws, err := set.Draws()
	if err != nil || looks != 4 || resultOf(t, draws) != want {
		t.Errorf("a block that came late: %v after %d looks", err, looks)
	}

	runFile := filepath.Join(dirs[2], "run.json")
	hide(runFile)
	if _, err = late(runFile, 3).OpenTogether(dirs); err != nil || looks != 3 {
		t.Errorf("a run.json that came late: %v after %d looks", err, looks)
	}

	hide(hidden)
	set, err = late(hidden, 1000).OpenTogether(dirs)
	if err != nil {
		t.Fatal(err)
	}
	if _, err = set.Draws(); !errors.Is(err, rundir.ErrIncomplete) || looks != 20 {
		t.Errorf("a block that never came: %v after %d looks", err, looks)
	}

	d, err := rundir.OpenOn(rundir.Quick(), dirs[1])
	if err != nil {
		t.Fatal(err)
	}
	if err := d.WritePart(rundir.Part{Part: 1, State: rundir.StateFailed}); err != nil {
		t.Fatal(err)
	}
	set, err = late(hidden, 1000).OpenTogether(dirs)
	if err != nil {
		t.Fatal(err)
	}
	if _, err = set.Draws(); !errors.Is(err, rundir.ErrIncomplete) || looks != 0 {
		t.Errorf("a part that failed is not waited for: %v after %d looks", err, looks)
	}
}
