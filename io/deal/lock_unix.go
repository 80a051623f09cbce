//go:build unix

package deal

import (
	"fmt"
	"os"
	"path/filepath"
	"syscall"
)

// lock keeps two submissions of one run from crossing. The system gives it
// back when the process ends.
func lock(folder string) (unlock func(), err error) {
	path := filepath.Join(folder, "lock")
	f, err := os.OpenFile(path, os.O_CREATE|os.O_RDWR, 0o644)
	if err != nil {
		return nil, fmt.Errorf("deal: %w", err)
	}
	if err := syscall.Flock(int(f.Fd()), syscall.LOCK_EX|syscall.LOCK_NB); err != nil {
		f.Close()
		return nil, fmt.Errorf("deal: %s: another deal of this run is under way (%w): wait until it ends", path, err)
	}
	return func() { f.Close() }, nil
}
