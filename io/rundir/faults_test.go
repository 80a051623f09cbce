package rundir

import (
	"errors"
	"io/fs"
	"os"
	"strings"
	"sync"
	"syscall"
)

var errInjected = errors.New("injected")

// quick is the disk without waiting for the medium, for tests that write much
// and do not pull the plug for real.
type quick struct{ disk }

type quickHandle struct{ handle }

func (quickHandle) Sync() error { return nil }

func (q quick) Create(path string) (handle, error) {
	h, err := q.disk.Create(path)
	return quickHandle{h}, err
}

func (quick) SyncFolder(path string) error {
	_, err := os.Stat(path)
	return err
}

// failing is a disk whose left-th operation fails, and with it a write of
// which half arrived.
type failing struct {
	disk quick
	mu   sync.Mutex
	left int
	err  error  // what the operation says; nil: errInjected
	last string // the operation that failed
}

func (f *failing) fails(what string) error {
	f.mu.Lock()
	defer f.mu.Unlock()
	f.left--
	if f.left != 0 {
		return nil
	}
	f.last = what
	if f.err != nil {
		return &fs.PathError{Op: "injected", Path: what, Err: f.err}
	}
	return errInjected
}

// cleaning reports whether the failed operation removed a file that no reader
// looks at. Such a failure is no failure of the run.
func (f *failing) cleaning() bool {
	return strings.HasPrefix(f.last, "remove ") && strings.HasSuffix(f.last, tempSuffix)
}

func (f *failing) Mkdir(path string) error {
	if err := f.fails("mkdir " + path); err != nil {
		return err
	}
	return f.disk.Mkdir(path)
}

func (f *failing) Create(path string) (handle, error) {
	if err := f.fails("create " + path); err != nil {
		return nil, err
	}
	h, err := f.disk.Create(path)
	return &failingHandle{h, f, path}, err
}

func (f *failing) Append(path string) (handle, error) {
	if err := f.fails("append to " + path); err != nil {
		return nil, err
	}
	h, err := f.disk.Append(path)
	return &failingHandle{h, f, path}, err
}

func (f *failing) Rename(from, to string) error {
	if err := f.fails("rename to " + to); err != nil {
		return err
	}
	return f.disk.Rename(from, to)
}

func (f *failing) Link(from, to string) error {
	if err := f.fails("link to " + to); err != nil {
		return err
	}
	return f.disk.Link(from, to)
}

func (f *failing) Remove(path string) error {
	if err := f.fails("remove " + path); err != nil {
		return err
	}
	return f.disk.Remove(path)
}

func (f *failing) SyncFolder(path string) error {
	if err := f.fails("sync folder " + path); err != nil {
		return err
	}
	return f.disk.SyncFolder(path)
}

type failingHandle struct {
	handle
	f    *failing
	path string
}

func (h *failingHandle) Write(b []byte) (int, error) {
	if err := h.f.fails("write " + h.path); err != nil {
		n, _ := h.handle.Write(b[:len(b)/2])
		return n, err
	}
	return h.handle.Write(b)
}

func (h *failingHandle) Sync() error {
	if err := h.f.fails("sync " + h.path); err != nil {
		return err
	}
	return h.handle.Sync()
}

func (h *failingHandle) Close() error {
	err := h.handle.Close()
	if failed := h.f.fails("close " + h.path); failed != nil {
		return failed
	}
	return err
}

// sealed is a disk that refuses to change.
type sealed struct{ disk }

func (sealed) Mkdir(string) error { return syscall.EROFS }
func (sealed) Create(string) (handle, error) {
	return nil, &fs.PathError{Op: "open", Err: syscall.EROFS}
}
func (sealed) Append(string) (handle, error) { return nil, syscall.EROFS }
func (sealed) Rename(string, string) error   { return syscall.EROFS }
func (sealed) Link(string, string) error     { return syscall.EROFS }
func (sealed) Remove(string) error           { return syscall.EROFS }

// unlinked is a disk without links, as some network and FAT file systems are.
type unlinked struct{ disk }

func (unlinked) Link(string, string) error { return syscall.ENOTSUP }

// cramped is a disk with room for so many pages of 4 KiB, one of them for
// each file that is begun; what is removed gives no room back.
type cramped struct {
	quick
	left *int
}

const page = 4096

func (c cramped) take(n int) error {
	if n > *c.left {
		return syscall.ENOSPC
	}
	*c.left -= n
	return nil
}

func (c cramped) Create(path string) (handle, error) {
	if err := c.take(page); err != nil {
		return nil, &fs.PathError{Op: "create", Path: path, Err: err}
	}
	h, err := c.quick.Create(path)
	return crampedHandle{h, c}, err
}

func (c cramped) Append(path string) (handle, error) {
	h, err := c.quick.Append(path)
	return crampedHandle{h, c}, err
}

type crampedHandle struct {
	handle
	c cramped
}

func (h crampedHandle) Write(b []byte) (int, error) {
	if err := h.c.take(len(b)); err != nil {
		n, _ := h.handle.Write(b[:min(len(b), *h.c.left)])
		return n, err
	}
	return h.handle.Write(b)
}
