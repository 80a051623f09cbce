package rundir

import (
	"bytes"
	"fmt"
	"io/fs"
	"maps"
	"math/rand/v2"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"sync"
	"testing"
)

// inode is a file or folder of the simulated disk: what a process sees, and
// what is left when the power fails.
type inode struct {
	folder         bool
	text, safe     []byte               // a file's content, and as it was last synced
	names, durable map[string]*inode    // a folder's entries, and as they were last synced
	open           map[*recorded]*inode // of the root: what the open files are
}

func newFolder() *inode {
	return &inode{folder: true, names: map[string]*inode{}, durable: map[string]*inode{}, open: map[*recorded]*inode{}}
}

// step is one operation on the simulated disk.
type step struct {
	what string
	do   func(root *inode)
}

// recorder is a disk that also writes down every operation below root, so
// that the disk can be rebuilt as it was after each of them.
type recorder struct {
	disk  quick
	root  string
	mu    sync.Mutex
	steps []step
}

func (r *recorder) note(what, path string, do func(root *inode)) {
	r.mu.Lock()
	defer r.mu.Unlock()
	r.steps = append(r.steps, step{what + " " + filepath.Base(path), do})
}

// at finds the folder of a path below the root, and the path's last name.
func (r *recorder) at(root *inode, path string) (folder *inode, name string) {
	rel, err := filepath.Rel(r.root, filepath.Clean(path))
	if err != nil || strings.HasPrefix(rel, "..") {
		panic("outside the simulated disk: " + path)
	}
	words := strings.Split(rel, string(filepath.Separator))
	for _, word := range words[:len(words)-1] {
		root = root.names[word]
	}
	return root, words[len(words)-1]
}

func (r *recorder) Mkdir(path string) error {
	err := r.disk.Mkdir(path)
	if err == nil {
		r.note("mkdir", path, func(root *inode) { folder, name := r.at(root, path); folder.names[name] = newFolder() })
	}
	return err
}

func (r *recorder) Create(path string) (handle, error) {
	h, err := r.disk.Create(path)
	if err == nil {
		r.note("create", path, func(root *inode) { folder, name := r.at(root, path); folder.names[name] = &inode{} })
	}
	return &recorded{h, r, path}, err
}

func (r *recorder) Append(path string) (handle, error) {
	h, err := r.disk.Append(path)
	if err == nil {
		r.note("append", path, func(root *inode) {
			if folder, name := r.at(root, path); folder.names[name] == nil {
				folder.names[name] = &inode{}
			}
		})
	}
	return &recorded{h, r, path}, err
}

func (r *recorder) Rename(from, to string) error {
	err := r.disk.Rename(from, to)
	if err == nil {
		r.note("rename", to, func(root *inode) {
			a, old := r.at(root, from)
			b, name := r.at(root, to)
			b.names[name] = a.names[old]
			delete(a.names, old)
		})
	}
	return err
}

func (r *recorder) Link(from, to string) error {
	err := r.disk.Link(from, to)
	if err == nil {
		r.note("link", to, func(root *inode) {
			a, old := r.at(root, from)
			b, name := r.at(root, to)
			b.names[name] = a.names[old]
		})
	}
	return err
}

func (r *recorder) Remove(path string) error {
	err := r.disk.Remove(path)
	if err == nil {
		r.note("remove", path, func(root *inode) { folder, name := r.at(root, path); delete(folder.names, name) })
	}
	return err
}

func (r *recorder) SyncFolder(path string) error {
	err := r.disk.SyncFolder(path)
	if err == nil {
		r.note("sync folder", path, func(root *inode) {
			folder := root
			if filepath.Clean(path) != r.root {
				above, name := r.at(root, path)
				folder = above.names[name]
			}
			folder.durable = maps.Clone(folder.names)
		})
	}
	return err
}

// recorded is an open file; its inode is found at its first use, and keeps
// being that whatever its name becomes.
type recorded struct {
	handle
	r    *recorder
	path string
}

func (h *recorded) find(root *inode) *inode {
	if root.open[h] == nil {
		folder, name := h.r.at(root, h.path)
		root.open[h] = folder.names[name]
	}
	return root.open[h]
}

func (h *recorded) Write(b []byte) (int, error) {
	n, err := h.handle.Write(b)
	text := bytes.Clone(b[:n])
	h.r.note("write", h.path, func(root *inode) { f := h.find(root); f.text = append(f.text[:len(f.text):len(f.text)], text...) })
	return n, err
}

func (h *recorded) Sync() error {
	err := h.handle.Sync()
	if err == nil {
		h.r.note("sync", h.path, func(root *inode) { f := h.find(root); f.safe = f.text })
	}
	return err
}

// loss says what a crash leaves of what was not synced.
type loss struct {
	name string
	keep func() bool // one change to a folder, or one file's content
	cut  func(n int) int
}

// losses are: a power failure that drops everything that was not synced; a
// killed process, after which everything is there; and power failures that
// keep some of it, files cut short at some byte.
func losses(r *rand.Rand) []loss {
	return []loss{
		{"all that is not synced is gone", func() bool { return false }, nil},
		{"the process is killed", func() bool { return true }, func(n int) int { return n }},
		{"some of it is gone", func() bool { return r.IntN(2) == 0 }, func(n int) int { return r.IntN(n + 1) }},
	}
}

// materialise writes what a crash leaves of a folder to the real disk.
func (n *inode) materialise(path string, l loss) error {
	entries := map[string]*inode{}
	for _, name := range slices.Sorted(maps.Keys(union2(n.names, n.durable))) {
		entry := n.durable[name]
		if n.names[name] != entry && l.keep() {
			entry = n.names[name]
		}
		if entry != nil {
			entries[name] = entry
		}
	}
	for _, name := range slices.Sorted(maps.Keys(entries)) {
		entry, to := entries[name], filepath.Join(path, name)
		if entry.folder {
			if err := os.Mkdir(to, 0o755); err != nil {
				return err
			}
			if err := entry.materialise(to, l); err != nil {
				return err
			}
			continue
		}
		text := entry.safe
		if !bytes.Equal(entry.text, entry.safe) && l.keep() {
			text = entry.text[:l.cut(len(entry.text))]
		}
		if err := os.WriteFile(to, text, 0o644); err != nil {
			return err
		}
	}
	return nil
}

func union2(a, b map[string]*inode) map[string]bool {
	all := map[string]bool{}
	for _, m := range []map[string]*inode{a, b} {
		for name := range m {
			all[name] = true
		}
	}
	return all
}

// load takes what is on the real disk as synced.
func load(path string) (*inode, error) {
	n := newFolder()
	entries, err := os.ReadDir(path)
	if err != nil {
		return nil, err
	}
	for _, e := range entries {
		child := &inode{}
		if e.IsDir() {
			child, err = load(filepath.Join(path, e.Name()))
		} else {
			child.text, err = os.ReadFile(filepath.Join(path, e.Name()))
			child.safe = child.text
		}
		if err != nil {
			return nil, err
		}
		n.names[e.Name()] = child
	}
	n.durable = maps.Clone(n.names)
	return n, nil
}

// Recording is a disk whose history can be gone back to.
type Recording struct {
	*recorder
	start func() (*inode, error)
}

// Record begins to write down what happens below root, which exists.
func Record(root string) (Recording, error) {
	copied, err := os.MkdirTemp(filepath.Dir(root), "start")
	if err != nil {
		return Recording{}, err
	}
	err = os.CopyFS(copied, os.DirFS(root))
	return Recording{&recorder{root: root}, func() (*inode, error) { return load(copied) }}, err
}

// Steps is how many operations there were, and Mark notes a moment between
// them.
func (r Recording) Steps() int { return len(r.steps) }

// Crash writes to an empty folder what is left after so many operations, in
// each way in which things can be lost, and calls each for it.
func (r Recording) Crash(t *testing.T, random *rand.Rand, after int, each func(dir, what string)) {
	t.Helper()
	for _, l := range losses(random) {
		root, err := r.start()
		if err != nil {
			t.Fatal(err)
		}
		what := "nothing"
		for _, s := range r.steps[:after] {
			s.do(root)
			what = s.what
		}
		dir := t.TempDir()
		if err := root.materialise(dir, l); err != nil {
			t.Fatal(err)
		}
		each(dir, fmt.Sprintf("crash after operation %d (%s), %s", after, what, l.name))
	}
}

// The simulated disk forgets what was not synced, and keeps what was: if it
// did not, the crash tests would say nothing.
func TestSimulatedDiskForgets(t *testing.T) {
	root := t.TempDir()
	r, err := Record(root)
	if err != nil {
		t.Fatal(err)
	}
	write := func(name string, sync, syncFolder bool) {
		t.Helper()
		h, err := r.Create(filepath.Join(root, name))
		if err != nil {
			t.Fatal(err)
		}
		h.Write([]byte("salinity"))
		if sync {
			h.Sync()
		}
		h.Close()
		if syncFolder {
			r.SyncFolder(root)
		}
	}
	write("whole", true, true)
	write("empty", false, true)
	write("absent", true, false)
	r.Rename(filepath.Join(root, "whole"), filepath.Join(root, "renamed"))
	got := map[string]string{}
	r.Crash(t, source(t), r.Steps(), func(dir, what string) {
		if !strings.Contains(what, "all that is not synced") {
			return
		}
		err := fs.WalkDir(os.DirFS(dir), ".", func(path string, d fs.DirEntry, err error) error {
			if err == nil && !d.IsDir() {
				text, _ := os.ReadFile(filepath.Join(dir, path))
				got[path] = string(text)
			}
			return err
		})
		if err != nil {
			t.Fatal(err)
		}
	})
	if want := map[string]string{"whole": "salinity", "empty": ""}; !maps.Equal(got, want) {
		t.Errorf("left: %v, want %v", got, want)
	}
}
