package rundir

import (
	"fmt"
	"io"
)

// Log opens logs/part-I.log to append to it.
func (d *Dir) Log(part int) (io.WriteCloser, error) {
	if err := d.checkPart(part); err != nil {
		return nil, err
	}
	if err := makeFolder(d.fs, d.join(logsFolder)); err != nil {
		return nil, fmt.Errorf("rundir: log of part %d: %w", part, troubled(err))
	}
	f, err := d.fs.Append(d.LogPath(part))
	if err != nil {
		return nil, fmt.Errorf("rundir: log of part %d: %w", part, troubled(err))
	}
	return f, nil
}

// LogPath is where the log of a part is.
func (d *Dir) LogPath(part int) string { return d.join(logsFolder, fmt.Sprintf("part-%d.log", part)) }
