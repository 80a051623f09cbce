package rundir

import (
	"errors"
	"fmt"
	"time"
)

// editLock is the lock of run.json, and editWait how long one waits for it. It
// is held for moments only, and not touched while it is held.
const (
	editLock = "run.lock"
	editWait = 2 * time.Minute
)

// edit changes run.json. change works on what stands in it now, for another
// process may have written to it, and reports whether it changed anything.
// Where nothing changes nothing is written, so that a directory that cannot be
// written can be judged. Of two processes that edit at once the second waits:
// without that, a judgement that is logged could undo an extension.
func (d *Dir) edit(change func(*Run) (bool, error)) (err error) {
	d.mu.Lock()
	defer d.mu.Unlock()
	next, changed, err := d.changed(change)
	if err != nil {
		return err
	}
	if !changed {
		d.run = *next
		return nil
	}
	lock, err := acquire(d.fs, d.env, d.join(editLock), NoPart, LockOptions{Wait: editWait})
	if err != nil {
		return err
	}
	defer func() { err = errors.Join(err, lock.Unlock()) }()
	if next, changed, err = d.changed(change); err != nil {
		return err
	}
	if changed {
		if err := writeFile(d.fs, d.join(runFile), next.encode); err != nil {
			return troubled(err)
		}
	}
	d.run = *next
	return nil
}

// changed reads run.json and changes the copy. The caller holds d.mu.
func (d *Dir) changed(change func(*Run) (bool, error)) (*Run, bool, error) {
	now, err := readRun(d.path)
	if err != nil {
		return nil, false, err
	}
	if now.Digest != d.run.Digest {
		return nil, false, fmt.Errorf("rundir: %s: run.json now belongs to another run (identity %.12s, not %.12s)", d.path, now.Digest, d.run.Digest)
	}
	changed, err := change(now)
	return now, changed, err
}

// Refresh reads run.json again: another process may have extended the run or
// set its decision.
func (d *Dir) Refresh() error {
	return d.edit(func(*Run) (bool, error) { return false, nil })
}
