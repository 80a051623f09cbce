package rundir

import (
	"bufio"
	"crypto/rand"
	"encoding/hex"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"os"
	"path/filepath"
	"strings"
	"syscall"
)

// tempPrefix and tempSuffix mark files that are not finished. They are
// ignored by every reader.
const (
	tempPrefix = ".unfinished-"
	tempSuffix = ".tmp"
)

// handle is an open file that is being written.
type handle interface {
	io.Writer
	Sync() error
	Close() error
}

// files are the operations by which this package changes a disk. Tests put a
// version in its place that fails at a chosen operation.
type files interface {
	Mkdir(path string) error
	Create(path string) (handle, error) // must not exist yet
	Append(path string) (handle, error) // made where it is missing
	Rename(from, to string) error
	Link(from, to string) error // must not exist yet
	Remove(path string) error
	SyncFolder(path string) error
}

// disk is the real file system.
type disk struct{}

func (disk) Mkdir(path string) error { return os.Mkdir(path, 0o755) }

func (disk) Create(path string) (handle, error) {
	return os.OpenFile(path, os.O_WRONLY|os.O_CREATE|os.O_EXCL, 0o644)
}

func (disk) Append(path string) (handle, error) {
	return os.OpenFile(path, os.O_WRONLY|os.O_CREATE|os.O_APPEND, 0o644)
}

func (disk) Rename(from, to string) error { return os.Rename(from, to) }
func (disk) Link(from, to string) error   { return os.Link(from, to) }
func (disk) Remove(path string) error     { return os.Remove(path) }

// SyncFolder makes a rename in the folder durable. Some network file systems
// have no such operation and say EINVAL or ENOTSUP; there is nothing to sync
// then, so that is no failure.
func (disk) SyncFolder(path string) error {
	f, err := os.Open(path)
	if err != nil {
		return err
	}
	err = f.Sync()
	if errors.Is(err, syscall.EINVAL) || errors.Is(err, syscall.ENOTSUP) {
		err = nil
	}
	return errors.Join(err, f.Close())
}

// WriteFile writes a file that appears whole or not at all, replacing one of
// that name: write is called with the temporary file, which is then synced,
// closed and renamed, and the folder synced. On an error nothing of that name
// has changed, except where only the last sync failed: then the file is whole
// and may be lost in a power failure.
func WriteFile(path string, write func(io.Writer) error) error {
	return writeFile(disk{}, path, write)
}

func writeFile(fsys files, path string, write func(io.Writer) error) error {
	return appear(fsys, path, write, fsys.Rename)
}

// writeNew is writeFile for a name that must not be there yet; if it is, the
// error is fs.ErrExist and nothing has changed.
func writeNew(fsys files, path string, write func(io.Writer) error) error {
	return appear(fsys, path, write, func(from, to string) error { return claim(fsys, from, to) })
}

// appear writes a temporary file, puts it in its place and syncs the folder.
func appear(fsys files, path string, write func(io.Writer) error, place func(from, to string) error) error {
	folder, name := filepath.Split(path)
	if folder == "" {
		folder = "."
	}
	temp := filepath.Join(folder, tempName(name))
	err := fill(fsys, temp, write)
	if err == nil {
		err = place(temp, path)
	}
	if err != nil {
		fsys.Remove(temp) // the first error says more than this one could
		return fmt.Errorf("rundir: write %s: %w", path, err)
	}
	if err := fsys.SyncFolder(folder); err != nil {
		return fmt.Errorf("rundir: sync folder %s: %w", folder, err)
	}
	return nil
}

// claim gives a temporary file its name unless the name is taken. A link does
// that in one step; where the file system has none, the name is looked up
// first, and two processes that do so at the same moment write one file over
// the other.
func claim(fsys files, from, to string) error {
	err := fsys.Link(from, to)
	switch {
	case err == nil:
		fsys.Remove(from) // a second name of a finished file does no harm
		return nil
	case !noLinks(err):
		return err
	}
	if _, err := os.Lstat(to); err == nil {
		return &fs.PathError{Op: "link", Path: to, Err: fs.ErrExist}
	}
	return fsys.Rename(from, to)
}

// noLinks tells a file system without links from a failure.
func noLinks(err error) bool {
	for _, e := range []error{syscall.EPERM, syscall.ENOTSUP, syscall.ENOSYS, syscall.EMLINK} {
		if errors.Is(err, e) {
			return true
		}
	}
	return false
}

// fill creates the temporary file, writes, syncs and closes it.
func fill(fsys files, temp string, write func(io.Writer) error) error {
	f, err := fsys.Create(temp)
	if err != nil {
		return err
	}
	w := bufio.NewWriterSize(f, 1<<16)
	err = write(w)
	if err == nil {
		err = w.Flush()
	}
	if err == nil {
		err = f.Sync()
	}
	return errors.Join(err, f.Close())
}

// tempName returns a name that no other process picks, in the same folder.
func tempName(name string) string { return tempPrefix + name + "-" + unique() + tempSuffix }

// unique is a word that nobody else has.
func unique() string {
	var b [8]byte
	rand.Read(b[:])
	return hex.EncodeToString(b[:])
}

func isTemp(name string) bool {
	return strings.HasPrefix(name, tempPrefix) && strings.HasSuffix(name, tempSuffix)
}

// readLimited reads a file that must be regular and at most limit bytes long,
// so that a wrong or hostile file is refused before memory is taken.
func readLimited(path string, limit int64) ([]byte, error) {
	f, err := os.Open(path)
	if err != nil {
		return nil, err
	}
	defer f.Close()
	size, err := regularSize(f)
	if err != nil {
		return nil, err
	}
	if size > limit {
		return nil, fmt.Errorf("%s: %d bytes, more than the %d that such a file can have", path, size, limit)
	}
	return io.ReadAll(io.LimitReader(f, limit))
}

func regularSize(f fs.File) (int64, error) {
	info, err := f.Stat()
	if err != nil {
		return 0, err
	}
	if !info.Mode().IsRegular() {
		return 0, fmt.Errorf("%s: not a regular file", info.Name())
	}
	return info.Size(), nil
}
