package rundir

import (
	"os"
	"time"
)

// Holder says who has the lock of a part, without taking anything: nil where
// nobody has. alive is false where that process is known to be dead, or did not
// touch the lock for as long as a lock is believed; here the clock of this
// machine must do, for the directory may be one that cannot be written.
func (d *Dir) Holder(part int) (held *Held, alive bool) {
	path := d.lockPath(part)
	text, err := readLimited(path, maxLock)
	if err != nil {
		return nil, false
	}
	h := decodeHolder(text)
	held = &Held{Host: h.Host, PID: h.PID, Since: h.Since, Part: part}
	info, err := os.Stat(path)
	alive = err == nil && time.Since(info.ModTime()) < d.env.stale && !d.env.dead(h)
	return held, alive
}
