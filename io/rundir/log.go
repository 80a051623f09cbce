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
	return logFile{f}, nil
}

// logFile says of a disk that is full that it is full.
type logFile struct{ handle }

func (l logFile) Write(b []byte) (int, error) {
	n, err := l.handle.Write(b)
	return n, troubled(err)
}

func (l logFile) Close() error { return troubled(l.handle.Close()) }

// LogPath is where the log of a part is.
func (d *Dir) LogPath(part int) string { return d.join(logsFolder, fmt.Sprintf("part-%d.log", part)) }
