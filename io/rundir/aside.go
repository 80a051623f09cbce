package rundir

import (
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"
	"time"
)

// damagedSuffix ends the names of blocks that were set aside.
const damagedSuffix = ".damaged"

// SetAside renames damaged blocks to NAME.damaged, so that their draws can be
// made again and somebody can look at what happened. A block that is whole by
// now, or not there any more, is left alone: another process was first.
func (d *Dir) SetAside(list []Damage) error {
	run := d.Run()
	moved := false
	for _, b := range list {
		if _, _, err := run.readBlock(b.Path); err == nil || errors.Is(err, fs.ErrNotExist) {
			continue
		}
		err := d.fs.Rename(b.Path, asideName(b.Path))
		if errors.Is(err, fs.ErrNotExist) {
			continue
		}
		if err != nil {
			return fmt.Errorf("rundir: set aside %s: %w", b.Path, troubled(err))
		}
		moved = true
	}
	if !moved {
		return nil
	}
	if err := d.fs.SyncFolder(d.join(drawsFolder)); err != nil {
		return fmt.Errorf("rundir: sync folder %s: %w", d.join(drawsFolder), troubled(err))
	}
	return nil
}

// asideName is a name that is not taken.
func asideName(path string) string {
	if _, err := os.Lstat(path + damagedSuffix); errors.Is(err, fs.ErrNotExist) {
		return path + damagedSuffix
	}
	return path + "-" + unique() + damagedSuffix
}

// abandoned is the age, by the clock of the file system, from which an
// unfinished file is nobody's: no write takes so long.
const abandoned = time.Hour

// Tidy removes unfinished files that killed processes left, and returns how
// many. Those that may still be written to stay.
func (d *Dir) Tidy() (removed int, err error) {
	for _, folder := range []string{d.path, d.join(drawsFolder), d.join(partsFolder)} {
		n, err := d.tidy(folder)
		removed += n
		if err != nil {
			return removed, fmt.Errorf("rundir: tidy %s: %w", folder, troubled(err))
		}
	}
	return removed, nil
}

func (d *Dir) tidy(folder string) (removed int, err error) {
	entries, err := os.ReadDir(folder)
	if err != nil {
		return 0, err
	}
	var now time.Time
	for _, e := range entries {
		if !isTemp(e.Name()) {
			continue
		}
		if now.IsZero() {
			if now, err = fileTime(d.fs, folder); err != nil {
				return removed, err
			}
		}
		info, err := e.Info()
		if err != nil || now.Sub(info.ModTime()) < abandoned {
			continue
		}
		if err := d.fs.Remove(filepath.Join(folder, e.Name())); err != nil && !errors.Is(err, fs.ErrNotExist) {
			return removed, err
		}
		removed++
	}
	return removed, nil
}
