package deal

import (
	"fmt"
	"io"
	"os"
	"path/filepath"

	"github.com/google/renameio/v2"
)

// CopyProgram copies a program, so that a new version put in place of the one
// that was submitted does not change tasks that still wait. Tasks that run keep
// the copy they began with.
func CopyProgram(from, to string) error {
	in, err := os.Open(from)
	if err != nil {
		return fmt.Errorf("deal: copying the program: %w", err)
	}
	defer in.Close()
	out, err := renameio.NewPendingFile(to, renameio.WithTempDir(filepath.Dir(to)), renameio.WithPermissions(0o755))
	if err != nil {
		return fmt.Errorf("deal: copying the program: %w", err)
	}
	defer out.Cleanup()
	if _, err := io.Copy(out, in); err != nil {
		return fmt.Errorf("deal: copying the program: %w", err)
	}
	if err := out.CloseAtomicallyReplace(); err != nil {
		return fmt.Errorf("deal: copying the program: %w", err)
	}
	return nil
}
