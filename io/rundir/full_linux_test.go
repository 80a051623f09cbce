package rundir_test

import (
	"errors"
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"syscall"
	"testing"

	"holdfast/io/rundir"
	"holdfast/resample"
)

// inside tells the test's process in a mount namespace of its own where it may
// mount.
const inside = "HOLDFAST_MOUNT"

// A real disk that is full, for every size from nothing to enough: a tmpfs,
// mounted where nobody else sees it. The run says that the disk is full,
// nothing is half-written, what was safe stays, and with more room the same
// command ends. Then the file system becomes read-only: the run is read and
// judged all the same, and only writing is refused.
//
// The test starts itself in a new mount namespace (as root, or with user
// namespaces). Where the system allows neither, it does the same on a
// simulated disk that is full, and says so.
func TestFullDisk(t *testing.T) {
	if where := os.Getenv(inside); where != "" {
		fullDisks(t, func(t *testing.T, size int) (string, rundir.Files) { return mounted(t, where, size), rundir.Disk() })
		readOnlyMount(t, where)
		return
	}
	child := exec.Command(os.Args[0], "-test.run=^TestFullDisk$", "-test.v")
	child.Env = append(os.Environ(), inside+"="+t.TempDir())
	child.SysProcAttr = &syscall.SysProcAttr{Cloneflags: syscall.CLONE_NEWNS}
	if os.Getuid() != 0 {
		child.SysProcAttr.Cloneflags |= syscall.CLONE_NEWUSER
		child.SysProcAttr.UidMappings = []syscall.SysProcIDMap{{HostID: os.Getuid(), Size: 1}}
		child.SysProcAttr.GidMappings = []syscall.SysProcIDMap{{HostID: os.Getgid(), Size: 1}}
	}
	out, err := child.CombinedOutput()
	if exit := (*exec.ExitError)(nil); err != nil && !errors.As(err, &exit) || strings.Contains(string(out), mountRefused) {
		t.Logf("no mount namespace here (%v): a simulated disk is filled instead", err)
		fullDisks(t, func(t *testing.T, size int) (string, rundir.Files) { return t.TempDir(), rundir.Cramped(size) })
		return
	}
	if err != nil || !strings.Contains(string(out), "disks were full") {
		t.Fatalf("%v\n%s", err, out)
	}
	t.Logf("on a tmpfs:\n%s", out)
}

const mountRefused = "mounting is refused"

// mounted mounts a tmpfs of so many pages of 4 KiB.
func mounted(t *testing.T, where string, size int) string {
	t.Helper()
	if err := syscall.Mount("none", "/", "", syscall.MS_REC|syscall.MS_PRIVATE, ""); err != nil {
		t.Fatalf("%s: %v", mountRefused, err)
	}
	dir, err := os.MkdirTemp(where, "disk")
	if err != nil {
		t.Fatal(err)
	}
	if err := syscall.Mount("holdfast", dir, "tmpfs", 0, sizeOption(size)); err != nil {
		t.Fatalf("%s: %v", mountRefused, err)
	}
	return dir
}

// fullDisks runs on disks of every size.
func fullDisks(t *testing.T, disk func(t *testing.T, size int) (dir string, fsys rundir.Files)) {
	want := undisturbed(t, 12)
	full, kept := 0, 0
	for size := 1; ; size++ {
		dir, fsys := disk(t, size)
		safe := 0
		j := job{fsys: fsys, dir: filepath.Join(dir, "x.run"), number: 12, opt: resample.Options{Workers: 1, Block: 2}, kept: func(draws int) { safe += draws }}
		err := j.run(t)
		if err == nil {
			break
		}
		full++
		if !errors.Is(err, rundir.ErrFull) || !errors.Is(err, syscall.ENOSPC) {
			t.Fatalf("%d pages: %v", size, err)
		}
		onlyWhole(t, j.dir, "a full disk", safe)
		if left, _ := filepath.Glob(filepath.Join(j.dir, "draws", ".unfinished-*")); len(left) > 0 {
			t.Errorf("%d pages: half-written files %v", size, left)
		}
		if safe > 0 {
			kept++
		}
		moreRoom(t, dir, &j.fsys)
		j.kept = nil
		if err := j.run(t); err != nil || contentOf(t, j.dir) != want {
			t.Fatalf("%d pages, then room: %v", size, err)
		}
	}
	t.Logf("%d disks were full, %d of them after draws were safe", full, kept)
	if full < 10 || kept < 3 {
		t.Errorf("%d full disks, %d with draws: the check says little", full, kept)
	}
}

// moreRoom makes room on a disk.
func moreRoom(t *testing.T, dir string, fsys *rundir.Files) {
	t.Helper()
	if os.Getenv(inside) == "" {
		*fsys = rundir.Quick()
		return
	}
	if err := syscall.Mount("holdfast", dir, "tmpfs", syscall.MS_REMOUNT, sizeOption(4096)); err != nil {
		t.Fatal(err)
	}
}

// readOnlyMount judges a run on a file system that cannot be written, not even
// by root.
func readOnlyMount(t *testing.T, where string) {
	dir := mounted(t, where, 4096)
	j := job{fsys: rundir.Disk(), dir: filepath.Join(dir, "x.run"), number: 12, opt: resample.Options{Workers: 1, Block: 4}}
	if err := j.run(t); err != nil {
		t.Fatal(err)
	}
	if err := syscall.Mount("holdfast", dir, "tmpfs", syscall.MS_REMOUNT|syscall.MS_RDONLY, sizeOption(4096)); err != nil {
		t.Fatal(err)
	}
	set, err := impatient.OpenTogether([]string{j.dir})
	if err != nil {
		t.Fatal(err)
	}
	draws, err := set.Draws()
	if err != nil || resultOf(t, draws) != undisturbed(t, 12) {
		t.Errorf("read from a read-only mount: %d draws, %v", len(draws), err)
	}
	if err := j.run(t); !errors.Is(err, rundir.ErrReadOnly) || !errors.Is(err, syscall.EROFS) {
		t.Errorf("a run on a read-only mount: %v", err)
	}
	d := set.Dirs()[0]
	other := rundir.Decided()
	other.Threshold = 0.9
	if err := d.LogJudgement(rundir.Judged{Draws: 12, Decision: other}); !errors.Is(err, rundir.ErrReadOnly) {
		t.Errorf("logging a judgement: %v", err)
	}
	if err := d.LogJudgement(rundir.Judged{Draws: 12, Decision: rundir.Decided()}); err != nil {
		t.Errorf("the judgement of record: %v", err)
	}
}

func sizeOption(pages int) string { return fmt.Sprintf("size=%dk", 4*pages) }
