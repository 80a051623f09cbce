package rundir

import (
	"errors"
	"fmt"
	"io/fs"
	"syscall"
)

// What errors.Is finds where the disk does not take what is to be written.
// Nothing is then half-written, and what was finished before stays.
var (
	ErrReadOnly = errors.New("rundir: the directory cannot be written")
	ErrFull     = errors.New("rundir: the disk is full: make room, then type the same command")
	ErrQuota    = errors.New("rundir: the disk quota is used up: make room, then type the same command")
	ErrGone     = errors.New("rundir: the run directory is not there any more (removed, renamed or unmounted?)")
)

// troubled puts one of the errors above before what the system says.
func troubled(err error) error {
	for _, t := range []struct {
		is, mark error
	}{
		{fs.ErrPermission, ErrReadOnly},
		{syscall.EROFS, ErrReadOnly},
		{syscall.ENOSPC, ErrFull},
		{syscall.EDQUOT, ErrQuota},
		{fs.ErrNotExist, ErrGone},
		{syscall.ENOTDIR, ErrGone},
		{syscall.ESTALE, ErrGone},
	} {
		if errors.Is(err, t.is) && !errors.Is(err, t.mark) {
			return fmt.Errorf("%w: %w", t.mark, err)
		}
	}
	return err
}
