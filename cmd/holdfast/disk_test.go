package main

import (
	"bytes"
	"io/fs"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"syscall"
	"testing"
)

// TestFullDisk: a run that fills its disk ends with exit code 1, says what is
// to be done, leaves nothing half-written and keeps what was finished; with room
// made it goes on to the same bytes. As root the disk is a real one of 400 KB in
// memory; without the right to mount one, the folder of the draws is closed
// under the run instead, which is another error on the same way.
func TestFullDisk(t *testing.T) {
	dir := spectraStudy(t)
	args := []string{"run", "study.toml", "--draws", "300", "--out", "disk/a.run"}
	finish(t, dir, "run", "study.toml", "--draws", "300", "--out", "other/whole.run")
	want := resultTables(t, filepath.Join(dir, "other", "whole.run"))
	disk := filepath.Join(dir, "disk")
	if err := os.Mkdir(disk, 0o755); err != nil {
		t.Fatal(err)
	}
	if err := syscall.Mount("tmpfs", disk, "tmpfs", 0, "size=400k"); err != nil {
		t.Logf("no disk of its own (%v): a closed folder instead", err)
		closedFolder(t, dir, args, want)
		return
	}
	t.Cleanup(func() { syscall.Unmount(disk, syscall.MNT_DETACH) })
	p := start(t, dir, args...)
	if code := p.wait(t); code != 1 {
		t.Fatalf("exit code %d: %s", code, &p.err)
	}
	for _, word := range []string{"the disk is full", "draws are whole and kept in disk/a.run", "hint: when that is mended, go on with: "} {
		if !strings.Contains(p.err.String(), word) {
			t.Errorf("it does not say %q: %s", word, &p.err)
		}
	}
	if p.out.Len() > 0 {
		t.Errorf("a judgement is printed: %s", &p.out)
	}
	run := filepath.Join(disk, "a.run")
	if blocks(run) == 0 {
		t.Error("nothing was kept")
	}
	status := finish(t, dir, "status", "disk/a.run")
	if strings.Contains(status.out.String(), "damaged") {
		t.Errorf("something is half-written:\n%s", &status.out)
	}
	noUnfinished(t, run)
	if err := syscall.Mount("tmpfs", disk, "tmpfs", syscall.MS_REMOUNT, "size=64m"); err != nil {
		t.Fatal(err)
	}
	finish(t, dir, args...)
	sameTables(t, want, run)
}

// closedFolder is TestFullDisk for users who may not mount.
func closedFolder(t *testing.T, dir string, args []string, want map[string]string) {
	draws := filepath.Join(dir, "disk", "a.run", "draws")
	p := start(t, dir, args...)
	waitFor(t, "the first block", func() bool { return blocks(filepath.Dir(draws)) > 0 })
	if err := os.Chmod(draws, 0o555); err != nil {
		t.Fatal(err)
	}
	defer os.Chmod(draws, 0o755)
	if code := p.wait(t); code != 1 || !strings.Contains(p.err.String(), "cannot be written") {
		t.Errorf("exit code %d: %s", code, &p.err)
	}
	if err := os.Chmod(draws, 0o755); err != nil {
		t.Fatal(err)
	}
	finish(t, dir, args...)
	sameTables(t, want, filepath.Dir(draws))
}

// noUnfinished finds temporary files that were left.
func noUnfinished(t *testing.T, run string) {
	t.Helper()
	err := filepath.WalkDir(run, func(path string, d fs.DirEntry, err error) error {
		if err == nil && strings.Contains(d.Name(), "unfinished") {
			t.Errorf("%s was left", path)
		}
		return err
	})
	if err != nil {
		t.Fatal(err)
	}
}

// TestReadOnlyCopy: a copy of a run that cannot be written is judged and
// reported on by a user who may only read; going on with it is refused.
func TestReadOnlyCopy(t *testing.T) {
	dir := spectraStudy(t)
	finish(t, dir, "run", "study.toml", "--draws", "40", "--out", "a.run")
	want := finish(t, dir, "judge", "a.run", "--json").out.String()
	open := publicFolder(t, dir)
	copied := filepath.Join(open, "a.run")
	if err := os.CopyFS(copied, os.DirFS(filepath.Join(dir, "a.run"))); err != nil {
		t.Fatal(err)
	}
	seal(t, copied)
	before := listing(t, copied)
	for _, c := range []struct {
		args []string
		code int
		out  string
		says string
	}{
		{[]string{"judge", "a.run", "--json"}, 0, want, ""},
		{[]string{"judge", "a.run", "--threshold", "0.9"}, 0, "", "the directory cannot be written, so this judgement is not in its log"},
		{[]string{"status", "a.run"}, 0, "", ""},
		{[]string{"judge", "a.run", "--save"}, 1, "", "cannot be written"},
		{[]string{"run", "study.toml", "--draws", "60", "--out", "a.run"}, 1, "", "cannot be written"},
	} {
		cmd := asReader(t, open, c.args)
		var out, errs bytes.Buffer
		cmd.Stdout, cmd.Stderr = &out, &errs
		if err := cmd.Run(); cmd.ProcessState == nil {
			t.Fatal(err)
		}
		if code := cmd.ProcessState.ExitCode(); code != c.code {
			t.Errorf("%v: exit code %d, want %d: %s", c.args, code, c.code, &errs)
		}
		if c.out != "" && out.String() != c.out {
			t.Errorf("%v: it prints something else than in the directory itself", c.args)
		}
		if !strings.Contains(errs.String(), c.says) {
			t.Errorf("%v: it does not say %q: %s", c.args, c.says, &errs)
		}
	}
	if after := listing(t, copied); after != before {
		t.Errorf("the copy has changed:\n%s\nwas\n%s", after, before)
	}
}

// publicFolder is a folder that every user may read, with the program, the
// study and its table.
func publicFolder(t *testing.T, dir string) string {
	t.Helper()
	open, err := os.MkdirTemp("", "holdfast-open-")
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() {
		unseal(open)
		os.RemoveAll(open)
	})
	self, err := os.Executable()
	if err != nil {
		t.Fatal(err)
	}
	study := strings.Replace(text(t, filepath.Join(dir, "study.toml")), "path", "# path", 1)
	study = strings.Replace(study, "[table]", "[table]\npath = \"gasoline.csv\"", 1)
	for name, content := range map[string]string{
		"holdfast":     text(t, self),
		"study.toml":   study,
		"gasoline.csv": text(t, filepath.Join("..", "..", "testdata", "data", "gasoline.csv")),
	} {
		if err := os.WriteFile(filepath.Join(open, name), []byte(content), 0o755); err != nil {
			t.Fatal(err)
		}
	}
	if err := os.Chmod(open, 0o755); err != nil {
		t.Fatal(err)
	}
	return open
}

// asReader is a command of a user who owns nothing there. Root could write
// whatever the modes say, so it becomes another user.
func asReader(t *testing.T, folder string, args []string) *exec.Cmd {
	t.Helper()
	cmd := exec.Command(filepath.Join(folder, "holdfast"), args...)
	cmd.Dir = folder
	if os.Getuid() == 0 {
		cmd.SysProcAttr = &syscall.SysProcAttr{Credential: &syscall.Credential{Uid: 65534, Gid: 65534}}
	}
	return cmd
}

// seal takes the right to write from everything in a folder.
func seal(t *testing.T, folder string) {
	t.Helper()
	err := filepath.WalkDir(folder, func(path string, d fs.DirEntry, err error) error {
		if err != nil {
			return err
		}
		mode := fs.FileMode(0o444)
		if d.IsDir() {
			mode = 0o555
		}
		return os.Chmod(path, mode)
	})
	if err != nil {
		t.Fatal(err)
	}
}

func unseal(folder string) {
	filepath.WalkDir(folder, func(path string, d fs.DirEntry, err error) error {
		if err == nil && d.IsDir() {
			os.Chmod(path, 0o755)
		}
		return nil
	})
}

// listing names every file with its size and time.
func listing(t *testing.T, folder string) string {
	t.Helper()
	var b strings.Builder
	err := filepath.WalkDir(folder, func(path string, d fs.DirEntry, err error) error {
		if err != nil {
			return err
		}
		info, err := d.Info()
		if err == nil {
			b.WriteString(path + " " + info.ModTime().String() + "\n")
		}
		return err
	})
	if err != nil {
		t.Fatal(err)
	}
	return b.String()
}
